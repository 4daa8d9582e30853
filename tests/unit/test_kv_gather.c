/*
 * Free pages that are gathered before a transaction changes many. Where a page lies is seen by the
 * addresses of what is read, all in one map.
 */
#include "storage/kv.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

enum {
    LOW,    /* its entries' pages come first in the file, */
    MIDDLE, /* then this one's first page, */
    HIGH,   /* then this one's */
    LATER,
    RUNS,
    TABLES
};

static const char *const names[TABLES] = {"low", "middle", "high", "later", "runs"};

enum {
    ENTRIES = 300,
    VALUE_BYTES = 1900 /* two to a page */
};

struct gathered {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    struct store_error error;
};

static struct kv_txn *begin(struct gathered *gathered, bool write)
{
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(gathered->kv, write, &txn, &gathered->error), STORE_OK);
    return txn;
}

static void put_entry(struct gathered *gathered, struct kv_txn *txn, unsigned table, int number)
{
    static const unsigned char value[VALUE_BYTES];
    char key[8];
    int length = snprintf(key, sizeof key, "%05d", number);
    assert_int_equal(kv_append(txn, table, kv_bytes_of(key, (size_t)length),
                               kv_bytes_of(value, sizeof value), &gathered->error),
                     STORE_OK);
}

static void put_entries(struct gathered *gathered, struct kv_txn *txn, unsigned table, int count)
{
    for (int i = 0; i < count; i++) {
        put_entry(gathered, txn, table, i);
    }
}

static void fill(struct gathered *gathered, unsigned table, int count)
{
    struct kv_txn *txn = begin(gathered, true);
    put_entries(gathered, txn, table, count);
    assert_int_equal(kv_commit(txn, &gathered->error), STORE_OK);
}

/* By turns with entries that stay, so that no two pages that become free lie together. */
static void fill_high(struct gathered *gathered)
{
    struct kv_txn *txn = begin(gathered, true);
    for (int i = 0; i < ENTRIES; i++) {
        put_entry(gathered, txn, MIDDLE, i);
        put_entry(gathered, txn, HIGH, i);
    }
    assert_int_equal(kv_commit(txn, &gathered->error), STORE_OK);
}

static void clear(struct gathered *gathered, unsigned table)
{
    struct kv_txn *txn = begin(gathered, true);
    assert_int_equal(kv_clear(txn, table, &gathered->error), STORE_OK);
    assert_int_equal(kv_commit(txn, &gathered->error), STORE_OK);
}

static int gather(struct gathered *gathered, struct kv_txn *txn)
{
    return kv_gather_free_pages(txn, RUNS, kv_bytes_of("run", 3), &gathered->error);
}

static void gather_alone(struct gathered *gathered)
{
    struct kv_txn *txn = begin(gathered, true);
    assert_int_equal(gather(gathered, txn), STORE_OK);
    assert_int_equal(kv_commit(txn, &gathered->error), STORE_OK);
}

/* Two lists of free pages: the first, of the high ones, was made before that of the low ones. */
static int set_up(void **state)
{
    struct gathered *gathered = calloc(1, sizeof *gathered);
    assert_non_null(gathered);
    home_make(gathered->home);
    (void)snprintf(gathered->directory, sizeof gathered->directory, "%s/kv", gathered->home);
    const struct kv_settings settings = {.directory = gathered->directory,
                                         .map_bytes = 16 << 20,
                                         .tables = names,
                                         .table_count = TABLES};
    assert_int_equal(kv_open(&settings, &gathered->kv, &gathered->error), STORE_OK);
    fill(gathered, LOW, ENTRIES);
    fill_high(gathered);
    clear(gathered, HIGH);
    clear(gathered, LOW);
    clear(gathered, RUNS); /* what two transactions before have freed can be taken */
    clear(gathered, RUNS);
    *state = gathered;
    return 0;
}

static int tear_down(void **state)
{
    struct gathered *gathered = *state;
    kv_close(gathered->kv);
    home_remove(gathered->home);
    free(gathered);
    return 0;
}

static const unsigned char *place_of(struct gathered *gathered, struct kv_txn *txn, unsigned table,
                                     const char *key)
{
    struct kv_bytes found = {0};
    assert_int_equal(kv_get(txn, table, kv_bytes_of(key, 5), &found, &gathered->error), STORE_OK);
    return found.data;
}

/* Whether the new entries, fewer than either list has pages for, lie below the middle. */
static bool are_low(struct gathered *gathered)
{
    struct kv_txn *txn = begin(gathered, false);
    const unsigned char *middle = place_of(gathered, txn, MIDDLE, "00000");
    bool first = place_of(gathered, txn, LATER, "00000") < middle;
    bool last = place_of(gathered, txn, LATER, "00019") < middle;
    kv_abort(txn);
    assert_true(first == last);
    return first;
}

/* --- what is taken ------------------------------------------------------------------------------
 */

static void a_transaction_takes_the_pages_of_the_first_list_first(void **state)
{
    fill(*state, LATER, 20);
    assert_false(are_low(*state));
}

static void one_that_has_gathered_them_takes_the_lowest_first(void **state)
{
    struct gathered *gathered = *state;
    struct kv_txn *txn = begin(gathered, true);
    assert_int_equal(gather(gathered, txn), STORE_OK);
    put_entries(gathered, txn, LATER, 20);
    assert_int_equal(kv_commit(txn, &gathered->error), STORE_OK);
    assert_true(are_low(gathered));
}

/* --- what it leaves -----------------------------------------------------------------------------
 */

static void gathering_again_and_again_enlarges_the_file_a_few_times_only(void **state)
{
    struct gathered *gathered = *state;
    uint64_t before = 0;
    uint64_t after = 0;
    for (int i = 0; i < 8; i++) {
        gather_alone(gathered);
    }
    before = kv_file_bytes(gathered->kv);
    for (int i = 0; i < 100; i++) {
        gather_alone(gathered);
    }
    after = kv_file_bytes(gathered->kv);
    assert_true(before > 0);
    assert_int_equal(after, before);
}

static void count_fault(void *user, const char *sentence)
{
    int *faults = user;
    print_error("%s\n", sentence);
    ++*faults;
}

static int faults_of(struct gathered *gathered)
{
    int faults = 0;
    assert_int_equal(kv_check_pages(gathered->kv, count_fault, &faults, &gathered->error),
                     STORE_OK);
    return faults;
}

static void the_pages_are_in_order_afterwards(void **state)
{
    struct gathered *gathered = *state;
    for (int i = 0; i < 5; i++) {
        gather_alone(gathered);
    }
    assert_int_equal(faults_of(gathered), 0);
}

static void a_map_without_room_for_it_is_told_as_full_and_stays_as_it_was(void **state)
{
    struct gathered *gathered = *state;
    struct kv_txn *txn = NULL;
    int code = STORE_OK;
    for (int table = LOW; table <= HIGH; table += HIGH - LOW) {
        fill(gathered, (unsigned)table, 3000); /* 6 MB each, of 16 */
    }
    for (int i = 0; i < 40 && code == STORE_OK; i++) {
        txn = begin(gathered, true);
        char key[8];
        (void)snprintf(key, sizeof key, "run%02d", i);
        code = kv_gather_free_pages(txn, RUNS, kv_bytes_of(key, 5), &gathered->error);
        if (code == STORE_OK) {
            code = kv_commit(txn, &gathered->error);
        } else {
            kv_abort(txn);
        }
    }
    assert_int_equal(code, STORE_FULL);
    assert_non_null(strstr(gathered->error.text, "raise map_size"));
    assert_int_equal(faults_of(gathered), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_transaction_takes_the_pages_of_the_first_list_first),
        TEST(one_that_has_gathered_them_takes_the_lowest_first),
        TEST(gathering_again_and_again_enlarges_the_file_a_few_times_only),
        TEST(the_pages_are_in_order_afterwards),
        TEST(a_map_without_room_for_it_is_told_as_full_and_stays_as_it_was),
    };
    return cmocka_run_group_tests_name("gathering free pages", tests, NULL, NULL);
}
