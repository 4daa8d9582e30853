/* An entry whose contents go on in another one is taken out, not deleted. */
#include "storage/kv.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

enum {
    ENTRIES = 100,
    ALL_PAGES = 1000
};

struct taking {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    struct kv_txn *txn;
    struct store_error error;
};

static const char *const names[] = {"lamps"};

/* --- fixture: a hundred lamps of 1,000 bytes each, and nothing to be overwritten --- */

static void begin(struct taking *taking)
{
    assert_int_equal(kv_begin(taking->kv, true, &taking->txn, &taking->error), STORE_OK);
}

static void commit(struct taking *taking)
{
    assert_int_equal(kv_commit(taking->txn, &taking->error), STORE_OK);
}

static struct kv_bytes key_of(const unsigned char *number)
{
    return kv_bytes_of(number, 1);
}

/* Pages left to be looked at once as many as there are have been. */
static size_t scrub(struct taking *taking)
{
    size_t left = 0;
    assert_int_equal(kv_scrub(taking->kv, ALL_PAGES, &left, &taking->error), STORE_OK);
    return left;
}

/* Whether anything is to be overwritten: a page at a time, so that it is not done at once. */
static bool is_due(struct taking *taking)
{
    size_t left = 0;
    assert_int_equal(kv_scrub(taking->kv, 1, &left, &taking->error), STORE_OK);
    return left > 0;
}

static int set_up(void **state)
{
    static const char lamp[1000] = "white";
    struct taking *taking = calloc(1, sizeof *taking);
    assert_non_null(taking);
    home_make(taking->home);
    (void)snprintf(taking->directory, sizeof taking->directory, "%s/kv", taking->home);
    const struct kv_settings settings = {
        .directory = taking->directory, .map_bytes = 4 << 20, .tables = names, .table_count = 1};
    assert_int_equal(kv_open(&settings, &taking->kv, &taking->error), STORE_OK);
    begin(taking);
    for (unsigned i = 0; i < ENTRIES; i++) {
        const unsigned char number = (unsigned char)i;
        assert_int_equal(
            kv_put(taking->txn, 0, key_of(&number), kv_bytes_of(lamp, sizeof lamp), &taking->error),
            STORE_OK);
    }
    commit(taking);
    assert_int_equal(scrub(taking), 0);
    *state = taking;
    return 0;
}

static int tear_down(void **state)
{
    struct taking *taking = *state;
    kv_close(taking->kv);
    home_remove(taking->home);
    free(taking);
    return 0;
}

/* --- tests --- */

static void what_is_taken_out_is_gone(void **state)
{
    struct taking *taking = *state;
    static const unsigned char number = 7;
    struct kv_bytes value = {0};
    begin(taking);
    assert_int_equal(kv_take_out(taking->txn, 0, key_of(&number), &taking->error), STORE_OK);
    assert_int_equal(kv_take_out(taking->txn, 0, key_of(&number), &taking->error), STORE_NOT_FOUND);
    assert_int_equal(kv_get(taking->txn, 0, key_of(&number), &value, &taking->error),
                     STORE_NOT_FOUND);
    commit(taking);
}

static void nothing_is_overwritten_for_what_is_taken_out(void **state)
{
    struct taking *taking = *state;
    static const unsigned char numbers[] = {7, 8};
    begin(taking);
    assert_int_equal(kv_take_out(taking->txn, 0, key_of(&numbers[0]), &taking->error), STORE_OK);
    commit(taking);
    assert_false(is_due(taking));
    begin(taking);
    assert_int_equal(kv_delete(taking->txn, 0, key_of(&numbers[1]), &taking->error), STORE_OK);
    commit(taking);
    assert_true(is_due(taking));
}

/* Four of 1,000 bytes have room in a page of 4,096 that also says where they are, five have not: so
 * there are 25 pages at least, and twice as many at most, since a page is split into halves. */
static void the_pages_of_a_table_are_counted(void **state)
{
    struct taking *taking = *state;
    uint64_t before = 0;
    uint64_t after = 0;
    begin(taking);
    assert_int_equal(kv_count_pages(taking->txn, 0, &before, &taking->error), STORE_OK);
    for (unsigned i = 0; i < ENTRIES / 2; i++) {
        const unsigned char number = (unsigned char)i;
        assert_int_equal(kv_take_out(taking->txn, 0, key_of(&number), &taking->error), STORE_OK);
    }
    assert_int_equal(kv_count_pages(taking->txn, 0, &after, &taking->error), STORE_OK);
    assert_in_range(before, 25, 50);
    assert_in_range(after, 13, 26);
    commit(taking);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_taken_out_is_gone),
        TEST(nothing_is_overwritten_for_what_is_taken_out),
        TEST(the_pages_of_a_table_are_counted),
    };
    return cmocka_run_group_tests_name("kv, taking out", tests, NULL, NULL);
}
