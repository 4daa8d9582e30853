/* A table of cells, many to a record, known by their numbers. */
#include "storage/model_cells.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* --- fixture: a table of cells of two bytes, five to a record, and one of 64 to a record --- */

static const char *const names[] = {"heights", "depths"};
static const struct model_cells HEIGHTS = {
    .table = 0, .cell_bytes = 2, .to_a_record = 5, .what = "list of heights"};
static const struct model_cells DEPTHS = {
    .table = 1, .cell_bytes = 2, .to_a_record = MODEL_CELLS_MOST, .what = "list of depths"};

struct celled {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    struct model_cells_changes changes;
    struct store_error error;
    char seen[256];
};

static int set_up(void **state)
{
    struct celled *celled = calloc(1, sizeof *celled);
    assert_non_null(celled);
    home_make(celled->home);
    (void)snprintf(celled->directory, sizeof celled->directory, "%s/kv", celled->home);
    const struct kv_settings settings = {
        .directory = celled->directory, .map_bytes = 1 << 20, .tables = names, .table_count = 2};
    assert_int_equal(kv_open(&settings, &celled->kv, &celled->error), STORE_OK);
    celled->changes.cells = &HEIGHTS;
    *state = celled;
    return 0;
}

static int tear_down(void **state)
{
    struct celled *celled = *state;
    model_cells_deinit(&celled->changes);
    kv_close(celled->kv);
    home_remove(celled->home);
    free(celled);
    return 0;
}

/* --- helpers --- */

/* NULL: the cell is not there from now on. */
static void note(struct celled *celled, uint32_t number, const char *cell)
{
    assert_int_equal(model_cells_note(&celled->changes, number, cell, &celled->error), STORE_OK);
}

static int make(struct celled *celled)
{
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(celled->kv, true, &txn, &celled->error), STORE_OK);
    int code = model_cells_make(&celled->changes, txn, &celled->error);
    if (code == STORE_OK) {
        assert_int_equal(kv_commit(txn, &celled->error), STORE_OK);
    } else {
        kv_abort(txn);
    }
    const struct model_cells *cells = celled->changes.cells;
    model_cells_deinit(&celled->changes);
    assert_ptr_equal(celled->changes.cells, cells);
    return code;
}

static void assert_makes(struct celled *celled)
{
    assert_int_equal(make(celled), STORE_OK);
}

/* Returns what getting the cell returned. */
static int get(struct celled *celled, uint32_t number, char ret_cell[3])
{
    struct kv_txn *txn = NULL;
    const unsigned char *cell = NULL;
    assert_int_equal(kv_begin(celled->kv, false, &txn, &celled->error), STORE_OK);
    int code = model_cells_get(celled->changes.cells, txn, number, &cell, &celled->error);
    if (code == STORE_OK) {
        memcpy(ret_cell, cell, 2);
        ret_cell[2] = '\0';
    }
    kv_abort(txn);
    return code;
}

static void assert_cell(struct celled *celled, uint32_t number, const char *expected)
{
    char cell[3] = "";
    assert_int_equal(get(celled, number, cell), expected ? STORE_OK : STORE_NOT_FOUND);
    assert_string_equal(cell, expected ? expected : "");
}

static int see_cell(void *user, uint32_t number, const unsigned char *cell)
{
    struct celled *celled = user;
    size_t used = strlen(celled->seen);
    (void)snprintf(celled->seen + used, sizeof celled->seen - used, "%u %.2s; ", number,
                   (const char *)cell);
    return strcmp(celled->seen, "1 aa; 2 bb; ") == 0 ? STORE_STOPPED : STORE_OK;
}

static int see_record(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct celled *celled = user;
    (void)at;
    return model_cells_of_record(celled->changes.cells, key, value, see_cell, user, &celled->error);
}

static int walk(struct celled *celled)
{
    struct kv_txn *txn = NULL;
    celled->seen[0] = '\0';
    assert_int_equal(kv_begin(celled->kv, false, &txn, &celled->error), STORE_OK);
    int code = kv_walk(txn, celled->changes.cells->table, (struct kv_bytes){0}, see_record, celled,
                       &celled->error);
    kv_abort(txn);
    return code;
}

static uint64_t records(struct celled *celled)
{
    struct kv_txn *txn = NULL;
    uint64_t count = 0;
    assert_int_equal(kv_begin(celled->kv, false, &txn, &celled->error), STORE_OK);
    assert_int_equal(kv_count(txn, celled->changes.cells->table, &count, &celled->error), STORE_OK);
    kv_abort(txn);
    return count;
}

/* --- tests --- */

static void a_cell_is_there_once_its_change_is_made(void **state)
{
    struct celled *celled = *state;
    note(celled, 7, "fm");
    assert_cell(celled, 7, NULL);
    assert_makes(celled);
    assert_cell(celled, 7, "fm");
    assert_cell(celled, 6, NULL);
    assert_cell(celled, 77, NULL);
}

/* Of records with five each: 3 and 4 share the first, 5 has the second alone. */
static void cells_share_records(void **state)
{
    struct celled *celled = *state;
    note(celled, 5, "cc");
    note(celled, 3, "aa");
    note(celled, 4, "bb");
    assert_makes(celled);
    assert_int_equal(records(celled), 2);
    assert_int_equal(walk(celled), STORE_OK);
    assert_string_equal(celled->seen, "3 aa; 4 bb; 5 cc; ");
}

static void a_change_leaves_the_other_cells_of_its_record(void **state)
{
    struct celled *celled = *state;
    note(celled, 3, "aa");
    note(celled, 4, "bb");
    assert_makes(celled);
    note(celled, 4, "xx");
    assert_makes(celled);
    assert_cell(celled, 3, "aa");
    assert_cell(celled, 4, "xx");
}

static void the_change_that_was_noted_last_counts(void **state)
{
    struct celled *celled = *state;
    note(celled, 4, "xx");
    note(celled, 3, NULL);
    note(celled, 4, NULL);
    note(celled, 3, "aa");
    note(celled, 4, "bb");
    note(celled, 3, NULL);
    assert_makes(celled);
    assert_cell(celled, 3, NULL);
    assert_cell(celled, 4, "bb");
}

static void a_cell_of_zeros_is_there(void **state)
{
    struct celled *celled = *state;
    char cell[3] = "xx";
    note(celled, 3, "\0\0");
    assert_makes(celled);
    assert_int_equal(get(celled, 3, cell), STORE_OK);
    assert_memory_equal(cell, "\0\0", 2);
}

static void a_record_without_cells_is_gone(void **state)
{
    struct celled *celled = *state;
    note(celled, 3, "aa");
    note(celled, 4, "bb");
    assert_makes(celled);
    note(celled, 3, NULL);
    assert_makes(celled);
    assert_int_equal(records(celled), 1);
    note(celled, 4, NULL);
    note(celled, 77, NULL); /* was not there before */
    assert_makes(celled);
    assert_int_equal(records(celled), 0);
}

/* A cell for each bit of the marks, and numbers up to the greatest. */
static void a_record_holds_as_many_as_it_can(void **state)
{
    struct celled *celled = *state;
    celled->changes.cells = &DEPTHS;
    for (uint32_t number = 0; number < MODEL_CELLS_MOST; number++) {
        note(celled, number, number % 2 == 0 ? "aa" : "bb");
    }
    note(celled, UINT32_MAX, "zz");
    assert_makes(celled);
    assert_int_equal(records(celled), 2);
    assert_cell(celled, 0, "aa");
    assert_cell(celled, MODEL_CELLS_MOST - 1, "bb");
    assert_cell(celled, UINT32_MAX, "zz");
}

static void what_a_cell_is_told_to_may_end_the_walk(void **state)
{
    struct celled *celled = *state;
    note(celled, 1, "aa");
    note(celled, 2, "bb");
    note(celled, 3, "cc");
    assert_makes(celled);
    assert_int_equal(walk(celled), STORE_STOPPED);
    assert_string_equal(celled->seen, "1 aa; 2 bb; ");
}

/* --- damage: a bit of the record of 5 to 9 --- */

static void damage(struct celled *celled)
{
    static const unsigned char key[] = {0, 0, 0, 1};
    unsigned char changed[KV_VALUE_BYTES];
    struct kv_txn *txn = NULL;
    struct kv_bytes value = {0};
    note(celled, 3, "aa");
    note(celled, 7, "bb");
    assert_makes(celled);
    assert_int_equal(kv_begin(celled->kv, true, &txn, &celled->error), STORE_OK);
    assert_int_equal(kv_get(txn, 0, kv_bytes_of(key, sizeof key), &value, &celled->error),
                     STORE_OK);
    memcpy(changed, value.data, value.size);
    changed[value.size - 1] ^= 1U;
    assert_int_equal(kv_put(txn, 0, kv_bytes_of(key, sizeof key), kv_bytes_of(changed, value.size),
                            &celled->error),
                     STORE_OK);
    assert_int_equal(kv_commit(txn, &celled->error), STORE_OK);
}

static void a_damaged_record_is_told_and_the_others_are_read(void **state)
{
    struct celled *celled = *state;
    char cell[3] = "";
    damage(celled);
    assert_cell(celled, 3, "aa");
    assert_int_equal(get(celled, 7, cell), STORE_CORRUPT);
    assert_string_equal(celled->error.text, "a stored list of heights of the model is damaged");
    celled->error = (struct store_error){0};
    assert_int_equal(walk(celled), STORE_CORRUPT);
    assert_string_equal(celled->seen, "3 aa; ");
}

static void a_damaged_record_is_not_changed(void **state)
{
    struct celled *celled = *state;
    damage(celled);
    note(celled, 3, "xx");
    note(celled, 8, "yy");
    assert_int_equal(make(celled), STORE_CORRUPT);
    assert_cell(celled, 3, "aa");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_cell_is_there_once_its_change_is_made),
        TEST(cells_share_records),
        TEST(a_change_leaves_the_other_cells_of_its_record),
        TEST(the_change_that_was_noted_last_counts),
        TEST(a_cell_of_zeros_is_there),
        TEST(a_record_without_cells_is_gone),
        TEST(a_record_holds_as_many_as_it_can),
        TEST(what_a_cell_is_told_to_may_end_the_walk),
        TEST(a_damaged_record_is_told_and_the_others_are_read),
        TEST(a_damaged_record_is_not_changed),
    };
    return cmocka_run_group_tests_name("model_cells", tests, NULL, NULL);
}
