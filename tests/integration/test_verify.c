/*
 * `undertagd --verify`: a home is looked through and left as it is. Whatever single bit of what is
 * stored is turned over, it is told, or nothing that can be read has changed.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "daemon/text/siphash.h"
#include "storage/kv.h"
#include "tests/integration/logbook.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"
#include "tests/unit/repeatable.h"

enum {
    ENTRIES = 160,
    ENTRY_WORDS = 12,
    FLIPS = 80, /* of each environment */
    MAP_BYTES = 1 << 30,
    PAGE_BYTES = 4096
};

static struct program_run run;

static const char *const STORE_TABLES_BY_NAME[] = {"meta",       "ids",  "records",
                                                   "superseded", "tags", "tag_names"};
static const char *const MODEL_TABLES_BY_NAME[] = {"meta",    "words",    "chunks", "tags",
                                                   "figures", "worklist", "counts", "news"};
enum {
    STORE_TABLES_COUNT = sizeof STORE_TABLES_BY_NAME / sizeof STORE_TABLES_BY_NAME[0],
    MODEL_TABLES_COUNT = sizeof MODEL_TABLES_BY_NAME / sizeof MODEL_TABLES_BY_NAME[0]
};

/* --- fixture: a home that nobody is at work in --- */

static int set_up(void **state)
{
    struct service *service = service_new("map_size=1GiB", NULL, NULL);
    logbook_file(&service->peer, 0, ENTRIES, ENTRY_WORDS);
    logbook_file(&service->peer, 3, 5, ENTRY_WORDS + 1); /* revised */
    (void)ask(&service->peer, "item.withdraw", "{'id': 'entry 1'}");
    *state = service;
    return 0;
}

static void verify(const char *home, const char *expected)
{
    program_run("undertagd", (const char *const[]){"--verify", "--home", home, NULL}, "", &run);
    assert_string_equal(run.error, "");
    if (expected) {
        assert_non_null(strstr(run.output, expected));
    }
}

/* --- tests --- */

static void a_home_is_whole_while_a_daemon_is_at_work_in_it(void **state)
{
    struct service *service = *state;
    verify(service->daemon.home, "store: whole: 159 items, ");
    assert_int_equal(run.exit_code, 0);
    assert_non_null(strstr(run.output, "model: "));
}

static void a_home_is_whole_after_a_stop(void **state)
{
    struct service *service = *state;
    service_stop_and_start(service);
    verify(service->daemon.home, "store: whole: 159 items, ");
    assert_int_equal(run.exit_code, 0);
    assert_non_null(strstr(run.output, "model: whole: "));
}

static void a_home_is_whole_after_a_crash(void **state)
{
    struct service *service = *state;
    undertagd_kill(&service->daemon);
    verify(service->daemon.home, "store: whole: 159 items, ");
    assert_int_equal(run.exit_code, 0);
    service_restart(service);
}

static void where_nothing_is_stored_it_says_so(void **state)
{
    struct service *service = *state;
    verify(service->daemon.folder, "nothing is stored here");
    assert_int_equal(run.exit_code, EX_NOINPUT);
}

/* --- bits turned over --- */

static unsigned char *read_file(const char *path, size_t *ret_size)
{
    FILE *file = fopen(path, "rb");
    assert_non_null(file);
    assert_int_equal(fseek(file, 0, SEEK_END), 0);
    size_t size = (size_t)ftell(file);
    unsigned char *bytes = malloc(size);
    assert_non_null(bytes);
    rewind(file);
    assert_int_equal(fread(bytes, 1, size, file), size);
    assert_int_equal(fclose(file), 0);
    *ret_size = size;
    return bytes;
}

static void turn_bit(const char *path, size_t at, int bit)
{
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    assert_int_equal(fseek(file, (long)at, SEEK_SET), 0);
    int byte = fgetc(file);
    assert_int_equal(fseek(file, (long)at, SEEK_SET), 0);
    assert_int_not_equal(fputc(byte ^ 1 << bit, file), EOF);
    assert_int_equal(fclose(file), 0);
}

static int add(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    uint64_t *sum = user;
    const struct siphash_key chained = {*sum, 2};
    (void)at;
    *sum = siphash(&chained, key.data, key.size);
    const struct siphash_key again = {*sum, 3};
    *sum = siphash(&again, value.data, value.size);
    return 0;
}

/* Of all that can be read. */
static uint64_t sum_of(const char *directory, const char *const *tables, unsigned count)
{
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    uint64_t sum = 0;
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = MAP_BYTES,
                                         .tables = tables,
                                         .table_count = count,
                                         .read_only = true};
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, false, &txn, &error), STORE_OK);
    for (unsigned table = 0; table < count; table++) {
        assert_int_equal(kv_walk(txn, table, (struct kv_bytes){0}, add, &sum, &error), STORE_OK);
    }
    kv_abort(txn);
    kv_close(kv);
    return sum;
}

/* One of the bits is in the number of the format. */
static bool is_another_version(const char *output)
{
    return strstr(output, "written by a newer version") || strstr(output, "of an early version");
}

/* Not in the two first pages, of which LMDB uses the one that was written last. */
static void turn_bits(struct service *service, const char *folder, const char *const *tables,
                      unsigned count)
{
    char directory[UNDERTAGD_PATH_BYTES + 16];
    char path[UNDERTAGD_PATH_BYTES + 32];
    struct repeatable random = {7};
    size_t size = 0;
    size_t told = 0;
    (void)snprintf(directory, sizeof directory, "%s/%s", service->daemon.home, folder);
    (void)snprintf(path, sizeof path, "%s/data.mdb", directory);
    free(read_file(path, &size));
    uint64_t sound = sum_of(directory, tables, count);
    for (int i = 0; i < FLIPS; i++) {
        size_t at = 2 * PAGE_BYTES + repeatable_below(&random, (uint32_t)size - 2 * PAGE_BYTES);
        int bit = (int)repeatable_below(&random, 8);
        turn_bit(path, at, bit);
        verify(service->daemon.home, NULL);
        told += run.exit_code != 0;
        assert_true(run.exit_code == 0 || run.exit_code == EX_DATAERR ||
                    is_another_version(run.output));
        if (run.exit_code == 0) {
            assert_true(sum_of(directory, tables, count) == sound);
        }
        turn_bit(path, at, bit);
    }
    assert_true(told > FLIPS / 20);
    verify(service->daemon.home, NULL);
    assert_int_equal(run.exit_code, 0);
}

static void no_bit_of_the_store_is_turned_over_unnoticed(void **state)
{
    struct service *service = *state;
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    turn_bits(service, "store", STORE_TABLES_BY_NAME, STORE_TABLES_COUNT);
    service_restart(service);
}

static void no_bit_of_the_model_is_turned_over_unnoticed(void **state)
{
    struct service *service = *state;
    assert_int_equal(undertagd_stop(&service->daemon), 0);
    turn_bits(service, "model", MODEL_TABLES_BY_NAME, MODEL_TABLES_COUNT);
    service_restart(service);
}

int main(void)
{
#define verify_test(name) cmocka_unit_test_setup_teardown(name, set_up, service_tear_down)
    const struct CMUnitTest tests[] = {
        verify_test(a_home_is_whole_while_a_daemon_is_at_work_in_it),
        verify_test(a_home_is_whole_after_a_stop),
        verify_test(a_home_is_whole_after_a_crash),
        verify_test(where_nothing_is_stored_it_says_so),
        verify_test(no_bit_of_the_store_is_turned_over_unnoticed),
        verify_test(no_bit_of_the_model_is_turned_over_unnoticed),
    };
    return cmocka_run_group_tests_name("verifying a home", tests, NULL, NULL);
}
