/* Cursors over a table: to a key, and on from there. */
#include "storage/kv.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* --- fixture: the lamps "b", "d" and "f", and a ship --- */

enum {
    LAMPS,
    SHIPS,
    WRECKS
};

static const char *const names[] = {"lamps", "ships", "wrecks"};

struct lamps {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    struct kv_txn *txn; /* that the test reads in */
    struct kv_cursor *cursor;
    struct kv_bytes key; /* what was found last */
    struct kv_bytes value;
    struct store_error error;
};

static struct kv_bytes bytes_of(const char *text)
{
    return kv_bytes_of(text, strlen(text));
}

static void put(struct lamps *lamps, unsigned table, const char *key, const char *value)
{
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(lamps->kv, true, &txn, &lamps->error), STORE_OK);
    assert_int_equal(kv_put(txn, table, bytes_of(key), bytes_of(value), &lamps->error), STORE_OK);
    assert_int_equal(kv_commit(txn, &lamps->error), STORE_OK);
}

static void open_cursor(struct lamps *lamps, unsigned table)
{
    kv_cursor_close(lamps->cursor);
    lamps->cursor = NULL;
    assert_int_equal(kv_cursor_open(lamps->txn, table, &lamps->cursor, &lamps->error), STORE_OK);
}

static int set_up(void **state)
{
    struct lamps *lamps = calloc(1, sizeof *lamps);
    assert_non_null(lamps);
    home_make(lamps->home);
    (void)snprintf(lamps->directory, sizeof lamps->directory, "%s/kv", lamps->home);
    const struct kv_settings settings = {
        .directory = lamps->directory, .map_bytes = 16 << 20, .tables = names, .table_count = 3};
    assert_int_equal(kv_open(&settings, &lamps->kv, &lamps->error), STORE_OK);
    put(lamps, LAMPS, "d", "red");
    put(lamps, LAMPS, "b", "white");
    put(lamps, LAMPS, "f", "green");
    put(lamps, SHIPS, "e", "ketch");
    assert_int_equal(kv_begin(lamps->kv, false, &lamps->txn, &lamps->error), STORE_OK);
    open_cursor(lamps, LAMPS);
    *state = lamps;
    return 0;
}

static int tear_down(void **state)
{
    struct lamps *lamps = *state;
    kv_cursor_close(lamps->cursor);
    kv_abort(lamps->txn);
    kv_close(lamps->kv);
    home_remove(lamps->home);
    free(lamps);
    return 0;
}

static int seek(struct lamps *lamps, const char *from)
{
    return kv_seek(lamps->cursor, bytes_of(from), &lamps->key, &lamps->value, &lamps->error);
}

static int next(struct lamps *lamps)
{
    return kv_next(lamps->cursor, &lamps->key, &lamps->value, &lamps->error);
}

static void assert_at(const struct lamps *lamps, const char *key, const char *value)
{
    assert_int_equal(lamps->key.size, strlen(key));
    assert_memory_equal(lamps->key.data, key, lamps->key.size);
    assert_int_equal(lamps->value.size, strlen(value));
    assert_memory_equal(lamps->value.data, value, lamps->value.size);
}

/* --- tests --- */

static void seeking_finds_the_entry_of_a_key(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "d"), STORE_OK);
    assert_at(lamps, "d", "red");
}

static void seeking_goes_to_the_entry_behind_a_key_that_is_not_there(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "a"), STORE_OK);
    assert_at(lamps, "b", "white");
    assert_int_equal(seek(lamps, "dd"), STORE_OK);
    assert_at(lamps, "f", "green");
}

static void what_is_behind_the_last_is_not_found_and_has_no_sentence(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "f"), STORE_OK);
    assert_int_equal(next(lamps), STORE_NOT_FOUND);
    assert_at(lamps, "f", "green"); /* as it was */
    assert_int_equal(seek(lamps, "g"), STORE_NOT_FOUND);
    assert_at(lamps, "f", "green");
    assert_int_equal(lamps->error.code, STORE_OK);
}

static void the_next_entries_come_in_the_order_of_their_keys(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "b"), STORE_OK);
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "d", "red");
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "f", "green");
    assert_int_equal(next(lamps), STORE_NOT_FOUND);
}

static void a_cursor_may_go_back_also_from_the_end(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "g"), STORE_NOT_FOUND);
    assert_int_equal(seek(lamps, "b"), STORE_OK);
    assert_at(lamps, "b", "white");
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "d", "red");
}

static void a_cursor_stays_in_its_table(void **state)
{
    struct lamps *lamps = *state;
    open_cursor(lamps, SHIPS);
    assert_int_equal(seek(lamps, "a"), STORE_OK);
    assert_at(lamps, "e", "ketch");
    assert_int_equal(next(lamps), STORE_NOT_FOUND);
    open_cursor(lamps, WRECKS);
    assert_int_equal(seek(lamps, "a"), STORE_NOT_FOUND);
}

static void two_cursors_of_a_transaction_go_their_own_ways(void **state)
{
    struct lamps *lamps = *state;
    struct kv_cursor *first = lamps->cursor;
    struct kv_cursor *second = NULL;
    assert_int_equal(kv_cursor_open(lamps->txn, LAMPS, &second, &lamps->error), STORE_OK);
    assert_int_equal(seek(lamps, "b"), STORE_OK);
    lamps->cursor = second;
    assert_int_equal(seek(lamps, "f"), STORE_OK);
    lamps->cursor = first;
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "d", "red");
    kv_cursor_close(second);
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "f", "green");
}

static void a_cursor_sees_what_was_there_when_its_transaction_began(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "b"), STORE_OK);
    put(lamps, LAMPS, "c", "blue");
    put(lamps, LAMPS, "d", "dark");
    assert_int_equal(next(lamps), STORE_OK);
    assert_at(lamps, "d", "red");
    assert_int_equal(seek(lamps, "c"), STORE_OK);
    assert_at(lamps, "d", "red");
}

static void bytes_stay_valid_when_the_cursor_moves_and_is_closed(void **state)
{
    struct lamps *lamps = *state;
    assert_int_equal(seek(lamps, "b"), STORE_OK);
    struct kv_bytes value = lamps->value;
    assert_int_equal(next(lamps), STORE_OK);
    open_cursor(lamps, SHIPS);
    assert_memory_equal(value.data, "white", value.size);
}

static void closing_no_cursor_does_nothing(void **state)
{
    (void)state;
    kv_cursor_close(NULL);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(seeking_finds_the_entry_of_a_key),
        TEST(seeking_goes_to_the_entry_behind_a_key_that_is_not_there),
        TEST(what_is_behind_the_last_is_not_found_and_has_no_sentence),
        TEST(the_next_entries_come_in_the_order_of_their_keys),
        TEST(a_cursor_may_go_back_also_from_the_end),
        TEST(a_cursor_stays_in_its_table),
        TEST(two_cursors_of_a_transaction_go_their_own_ways),
        TEST(a_cursor_sees_what_was_there_when_its_transaction_began),
        TEST(bytes_stay_valid_when_the_cursor_moves_and_is_closed),
        TEST(closing_no_cursor_does_nothing),
    };
    return cmocka_run_group_tests_name("kv cursors", tests, NULL, NULL);
}
