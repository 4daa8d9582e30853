/*
 * The list of an environment's tables: a damaged name is told, and nothing is made in its place.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <lmdb.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "storage/kv.h"
#include "tests/unit/store_fixture.h"

static const char *const NAMES[] = {"lamps", "ships", "tides"};
static const char *const OTHER_NAMES[] = {"lamps", "buoys"};

struct tables {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    char path[FIXTURE_PATH_BYTES + 24];
    struct kv_settings settings;
    struct store_error error;
};

/* --- fixture: lamps and ships --- */

static enum store_code open_and_close(struct tables *tables)
{
    struct kv *kv = NULL;
    tables->error = (struct store_error){0};
    int code = kv_open(&tables->settings, &kv, &tables->error);
    kv_close(kv);
    return code;
}

static int set_up(void **state)
{
    struct tables *tables = calloc(1, sizeof *tables);
    assert_non_null(tables);
    home_make(tables->home);
    (void)snprintf(tables->directory, sizeof tables->directory, "%s/kv", tables->home);
    (void)snprintf(tables->path, sizeof tables->path, "%s/data.mdb", tables->directory);
    tables->settings = (struct kv_settings){
        .directory = tables->directory, .map_bytes = 16 << 20, .tables = NAMES, .table_count = 2};
    assert_int_equal(open_and_close(tables), STORE_OK);
    *state = tables;
    return 0;
}

static int tear_down(void **state)
{
    struct tables *tables = *state;
    home_remove(tables->home);
    free(tables);
    return 0;
}

/* Wherever it stands in the file, as in a page that a bit was turned in. */
static void write_over(const struct tables *tables, const char *name, const char *damaged)
{
    static char bytes[1 << 20];
    size_t length = strlen(name);
    int times = 0;
    FILE *file = fopen(tables->path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    for (size_t at = 0; at + length <= size; at++) {
        if (memcmp(bytes + at, name, length) == 0) {
            memcpy(bytes + at, damaged, length);
            times++;
        }
    }
    assert_true(times > 0);
    rewind(file);
    assert_int_equal(fwrite(bytes, 1, size, file), size);
    assert_int_equal(fclose(file), 0);
}

/* An entry among the tables, past our own functions. */
static void put_plain_entry(const struct tables *tables, const char *name)
{
    MDB_env *env = NULL;
    MDB_txn *txn = NULL;
    MDB_dbi list = 0;
    char value[] = "no table";
    char key[16];
    (void)snprintf(key, sizeof key, "%s", name);
    assert_int_equal(mdb_env_create(&env), 0);
    assert_int_equal(mdb_env_open(env, tables->directory, 0, 0600), 0);
    assert_int_equal(mdb_txn_begin(env, NULL, 0, &txn), 0);
    assert_int_equal(mdb_dbi_open(txn, NULL, 0, &list), 0);
    assert_int_equal(
        mdb_put(txn, list, &(MDB_val){strlen(key), key}, &(MDB_val){sizeof value, value}, 0), 0);
    assert_int_equal(mdb_txn_commit(txn), 0);
    mdb_env_close(env);
}

/* --- tests --- */

static void a_table_whose_name_is_damaged_is_told_and_not_made_anew(void **state)
{
    struct tables *tables = *state;
    write_over(tables, "ships", "shipq");
    for (int i = 0; i < 2; i++) {
        assert_int_equal(open_and_close(tables), STORE_CORRUPT);
        assert_non_null(strstr(tables->error.text, "is damaged"));
        assert_non_null(strstr(tables->error.text, "while opening its tables"));
        tables->settings.read_only = true;
    }
    write_over(tables, "shipq", "ships");
    assert_int_equal(open_and_close(tables), STORE_OK);
}

static void an_entry_of_a_tables_name_that_is_none_is_told(void **state)
{
    struct tables *tables = *state;
    put_plain_entry(tables, "tides");
    tables->settings.table_count = 3;
    assert_int_equal(open_and_close(tables), STORE_CORRUPT);
    tables->settings.read_only = true;
    assert_int_equal(open_and_close(tables), STORE_CORRUPT);
}

static void a_table_that_an_earlier_version_did_not_have_is_made(void **state)
{
    struct tables *tables = *state;
    tables->settings.table_count = 3;
    tables->settings.read_only = true;
    assert_int_equal(open_and_close(tables), STORE_NOT_FOUND);
    tables->settings.read_only = false;
    assert_int_equal(open_and_close(tables), STORE_OK);
    tables->settings.read_only = true;
    assert_int_equal(open_and_close(tables), STORE_OK);
}

static void the_tables_of_earlier_versions_are_no_damage(void **state)
{
    struct tables *tables = *state;
    tables->settings.tables = OTHER_NAMES;
    assert_int_equal(open_and_close(tables), STORE_CORRUPT);
    tables->settings.earlier_tables = NAMES;
    tables->settings.earlier_count = 2;
    assert_int_equal(open_and_close(tables), STORE_OK);
}

/* Which version wrote it is for its first record to say. */
static void one_more_table_of_a_newer_version_is_no_damage(void **state)
{
    struct tables *tables = *state;
    tables->settings.table_count = 1;
    assert_int_equal(open_and_close(tables), STORE_OK);
}

int main(void)
{
#define tables_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        tables_test(a_table_whose_name_is_damaged_is_told_and_not_made_anew),
        tables_test(an_entry_of_a_tables_name_that_is_none_is_told),
        tables_test(a_table_that_an_earlier_version_did_not_have_is_made),
        tables_test(the_tables_of_earlier_versions_are_no_damage),
        tables_test(one_more_table_of_a_newer_version_is_no_damage),
    };
    return cmocka_run_group_tests_name("tables", tests, NULL, NULL);
}
