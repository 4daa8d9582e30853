/* Changes that are collected first and made later, all at once. */
#include "storage/kv_batch.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* --- fixture: the lamp "b" is white --- */

enum {
    LAMPS,
    SHIPS
};

static const char *const names[] = {"lamps", "ships"};

struct batching {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    struct kv_batch *batch;
    struct store_error error;
};

static struct kv_bytes bytes_of(const char *text)
{
    return kv_bytes_of(text, strlen(text));
}

static void put(struct batching *batching, unsigned table, const char *key, const char *value)
{
    assert_int_equal(
        kv_batch_put(batching->batch, table, bytes_of(key), bytes_of(value), &batching->error),
        STORE_OK);
}

static int commit(struct batching *batching)
{
    return kv_batch_commit(batching->batch, batching->kv, NULL, &batching->error);
}

static int set_up(void **state)
{
    struct batching *batching = calloc(1, sizeof *batching);
    assert_non_null(batching);
    home_make(batching->home);
    (void)snprintf(batching->directory, sizeof batching->directory, "%s/kv", batching->home);
    const struct kv_settings settings = {
        .directory = batching->directory, .map_bytes = 1 << 20, .tables = names, .table_count = 2};
    assert_int_equal(kv_open(&settings, &batching->kv, &batching->error), STORE_OK);
    assert_int_equal(kv_batch_new(&batching->batch, &batching->error), STORE_OK);
    put(batching, LAMPS, "b", "white");
    assert_int_equal(commit(batching), STORE_OK);
    *state = batching;
    return 0;
}

static int tear_down(void **state)
{
    struct batching *batching = *state;
    kv_batch_free(batching->batch);
    kv_close(batching->kv);
    home_remove(batching->home);
    free(batching);
    return 0;
}

static int print_entry(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    char *said = user;
    (void)at;
    (void)sprintf(said + strlen(said), "%.*s %.*s; ", (int)key.size, (const char *)key.data,
                  (int)value.size, (const char *)value.data);
    return STORE_OK;
}

static void assert_holds(struct batching *batching, unsigned table, const char *expected)
{
    char said[4096] = "";
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(batching->kv, false, &txn, &batching->error), STORE_OK);
    assert_int_equal(kv_walk(txn, table, (struct kv_bytes){0}, print_entry, said, &batching->error),
                     STORE_OK);
    kv_abort(txn);
    assert_string_equal(said, expected);
}

/* --- tests --- */

static void nothing_is_there_before_it_is_committed(void **state)
{
    struct batching *batching = *state;
    put(batching, LAMPS, "c", "red");
    assert_holds(batching, LAMPS, "b white; ");
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; c red; ");
}

static void what_is_given_is_copied(void **state)
{
    struct batching *batching = *state;
    char key[] = "c";
    char value[] = "red";
    put(batching, LAMPS, key, value);
    key[0] = 'x';
    value[0] = 'x';
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; c red; ");
}

static void changes_are_made_in_their_order(void **state)
{
    struct batching *batching = *state;
    put(batching, LAMPS, "c", "red");
    assert_int_equal(kv_batch_delete(batching->batch, LAMPS, bytes_of("c"), &batching->error),
                     STORE_OK);
    put(batching, LAMPS, "c", "green");
    assert_int_equal(kv_batch_delete(batching->batch, LAMPS, bytes_of("b"), &batching->error),
                     STORE_OK);
    put(batching, SHIPS, "b", "ketch");
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "c green; ");
    assert_holds(batching, SHIPS, "b ketch; ");
}

static void what_is_not_there_is_deleted_without_a_fuss(void **state)
{
    struct batching *batching = *state;
    assert_int_equal(kv_batch_delete(batching->batch, LAMPS, bytes_of("z"), &batching->error),
                     STORE_OK);
    assert_int_equal(kv_batch_delete_all(batching->batch, LAMPS, bytes_of("z"), &batching->error),
                     STORE_OK);
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; ");
}

static void all_that_begins_so_is_deleted_and_nothing_else(void **state)
{
    struct batching *batching = *state;
    put(batching, LAMPS, "ba", "1");
    put(batching, LAMPS, "bb", "2");
    put(batching, LAMPS, "bbb", "3");
    put(batching, LAMPS, "bc", "4");
    assert_int_equal(commit(batching), STORE_OK);
    assert_int_equal(kv_batch_delete_all(batching->batch, LAMPS, bytes_of("bb"), &batching->error),
                     STORE_OK);
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; ba 1; bc 4; ");
}

static void a_beginning_may_be_that_of_the_last_entries(void **state)
{
    struct batching *batching = *state;
    put(batching, LAMPS, "c1", "1");
    put(batching, LAMPS, "c2", "2");
    assert_int_equal(kv_batch_delete_all(batching->batch, LAMPS, bytes_of("c"), &batching->error),
                     STORE_OK);
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; ");
}

static void an_empty_beginning_is_the_whole_table(void **state)
{
    struct batching *batching = *state;
    put(batching, SHIPS, "b", "ketch");
    assert_int_equal(
        kv_batch_delete_all(batching->batch, LAMPS, (struct kv_bytes){0}, &batching->error),
        STORE_OK);
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "");
    assert_holds(batching, SHIPS, "b ketch; ");
}

static void a_batch_is_empty_once_it_was_committed(void **state)
{
    struct batching *batching = *state;
    uint64_t empty = kv_batch_bytes(batching->batch);
    put(batching, LAMPS, "c", "red");
    assert_true(kv_batch_bytes(batching->batch) > empty);
    assert_int_equal(commit(batching), STORE_OK);
    assert_int_equal(kv_batch_bytes(batching->batch), empty);
    put(batching, LAMPS, "d", "blue");
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; c red; d blue; ");
}

/* The map has 1 MiB. */
static void where_there_is_no_room_nothing_is_changed(void **state)
{
    struct batching *batching = *state;
    static const char filling[1000];
    uint64_t empty = kv_batch_bytes(batching->batch);
    put(batching, LAMPS, "c", "red");
    for (int i = 0; i < 2000; i++) {
        char key[16];
        (void)snprintf(key, sizeof key, "k%d", i);
        assert_int_equal(kv_batch_put(batching->batch, SHIPS, bytes_of(key),
                                      kv_bytes_of(filling, sizeof filling), &batching->error),
                         STORE_OK);
    }
    assert_int_equal(commit(batching), STORE_FULL);
    assert_holds(batching, LAMPS, "b white; ");
    assert_holds(batching, SHIPS, "");
    assert_int_equal(kv_batch_bytes(batching->batch), empty);
    put(batching, LAMPS, "c", "red");
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; c red; ");
}

static void nothing_collected_is_nothing_to_change(void **state)
{
    struct batching *batching = *state;
    assert_int_equal(commit(batching), STORE_OK);
    assert_holds(batching, LAMPS, "b white; ");
    kv_batch_free(NULL);
}

/* --- what else is done on the way --- */

static int put_twice(void *user, struct kv_txn *txn, struct kv_bytes key, struct kv_bytes value,
                     struct store_error *error)
{
    (void)user;
    int code = kv_put(txn, LAMPS, key, value, error);
    return code == STORE_OK ? kv_put(txn, SHIPS, key, value, error) : code;
}

static void puts_of_one_table_may_be_made_otherwise(void **state)
{
    struct batching *batching = *state;
    const struct kv_batch_steps steps = {.put_in = LAMPS, .put = put_twice};
    put(batching, LAMPS, "c", "red");
    put(batching, SHIPS, "d", "ketch");
    assert_int_equal(kv_batch_commit(batching->batch, batching->kv, &steps, &batching->error),
                     STORE_OK);
    assert_holds(batching, LAMPS, "b white; c red; ");
    assert_holds(batching, SHIPS, "c red; d ketch; ");
}

/* Sees what was put, and fails if it is told to. */
static int look_last(void *user, struct kv_txn *txn, struct store_error *error)
{
    const bool *fails = user;
    struct kv_bytes value = {0};
    assert_int_equal(kv_get(txn, LAMPS, bytes_of("c"), &value, error), STORE_OK);
    return *fails ? store_fail(error, STORE_CORRUPT, "the last step fails")
                  : kv_put(txn, SHIPS, bytes_of("last"), value, error);
}

static void the_last_step_sees_all_changes(void **state)
{
    struct batching *batching = *state;
    bool fails = false;
    const struct kv_batch_steps steps = {.user = &fails, .last = look_last};
    put(batching, LAMPS, "c", "red");
    assert_int_equal(kv_batch_commit(batching->batch, batching->kv, &steps, &batching->error),
                     STORE_OK);
    assert_holds(batching, SHIPS, "last red; ");
}

static void nothing_is_changed_where_the_last_step_fails(void **state)
{
    struct batching *batching = *state;
    bool fails = true;
    const struct kv_batch_steps steps = {.user = &fails, .last = look_last};
    put(batching, LAMPS, "c", "red");
    assert_int_equal(kv_batch_commit(batching->batch, batching->kv, &steps, &batching->error),
                     STORE_CORRUPT);
    assert_holds(batching, LAMPS, "b white; ");
}

static void count_moves(void *user)
{
    ++*(unsigned *)user;
}

static void whoever_watches_is_told_on_the_way(void **state)
{
    struct batching *batching = *state;
    unsigned moves = 0;
    const struct kv_batch_steps steps = {.user = &moves, .moved = count_moves};
    char key[16];
    char value[1024] = "";
    memset(value, 'w', sizeof value - 1);
    for (int i = 0; i < 300; i++) {
        (void)snprintf(key, sizeof key, "lamp %03d", i);
        put(batching, LAMPS, key, value);
    }
    assert_int_equal(kv_batch_commit(batching->batch, batching->kv, &steps, &batching->error),
                     STORE_OK);
    assert_in_range(moves, 2, 299); /* more than at its end, less than at every entry */
}

int main(void)
{
#define batch_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        batch_test(nothing_is_there_before_it_is_committed),
        batch_test(what_is_given_is_copied),
        batch_test(changes_are_made_in_their_order),
        batch_test(what_is_not_there_is_deleted_without_a_fuss),
        batch_test(all_that_begins_so_is_deleted_and_nothing_else),
        batch_test(a_beginning_may_be_that_of_the_last_entries),
        batch_test(an_empty_beginning_is_the_whole_table),
        batch_test(a_batch_is_empty_once_it_was_committed),
        batch_test(where_there_is_no_room_nothing_is_changed),
        batch_test(nothing_collected_is_nothing_to_change),
        batch_test(puts_of_one_table_may_be_made_otherwise),
        batch_test(the_last_step_sees_all_changes),
        batch_test(whoever_watches_is_told_on_the_way),
        batch_test(nothing_is_changed_where_the_last_step_fails),
    };
    return cmocka_run_group_tests_name("collected changes", tests, NULL, NULL);
}
