/*
 * Tables of bytes in one environment. The program's own fdatasync, pwrite and writev stand before
 * those of the system, so that a disk can fail.
 */
#include "storage/kv.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <sys/syscall.h>
#include <sys/uio.h>
#include <unistd.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

/* --- a disk that can fail: errnos, or 0 --- */

static int sync_fault;
static int page_fault; /* of writing whole pages */
static int root_fault; /* of writing the few bytes that name the new state */

int fdatasync(int fildes)
{
    if (sync_fault) {
        errno = sync_fault;
        return -1;
    }
    return (int)syscall(SYS_fdatasync, fildes);
}

ssize_t pwrite(int fd, const void *buf, size_t n, off_t offset)
{
    int fault = n < 4096 ? root_fault : page_fault;
    if (fault) {
        errno = fault;
        return -1;
    }
    return syscall(SYS_pwrite64, fd, buf, n, offset);
}

ssize_t writev(int fd, const struct iovec *iovec, int count)
{
    if (page_fault) {
        errno = page_fault;
        return -1;
    }
    return syscall(SYS_writev, fd, iovec, count);
}

/* --- fixture --- */

enum {
    LAMPS,
    SHIPS
};

static const char *const names[] = {"lamps", "ships"};

struct tables {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    struct kv_settings settings;
    struct kv *kv;
    struct store_error error;
};

static void open_tables(struct tables *tables)
{
    assert_int_equal(kv_open(&tables->settings, &tables->kv, &tables->error), STORE_OK);
}

static int setup(void **state)
{
    struct tables *tables = calloc(1, sizeof *tables);
    assert_non_null(tables);
    sync_fault = 0;
    page_fault = 0;
    root_fault = 0;
    home_make(tables->home);
    (void)snprintf(tables->directory, sizeof tables->directory, "%s/kv", tables->home);
    tables->settings = (struct kv_settings){
        .directory = tables->directory, .map_bytes = 16 << 20, .tables = names, .table_count = 2};
    open_tables(tables);
    *state = tables;
    return 0;
}

static int teardown(void **state)
{
    struct tables *tables = *state;
    kv_close(tables->kv);
    home_remove(tables->home);
    free(tables);
    return 0;
}

static void reopen(struct tables *tables)
{
    kv_close(tables->kv);
    tables->kv = NULL;
    open_tables(tables);
}

static struct kv_bytes bytes_of(const char *text)
{
    return kv_bytes_of(text, strlen(text));
}

static struct kv_txn *begin(struct tables *tables, bool write)
{
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(tables->kv, write, &txn, &tables->error), STORE_OK);
    return txn;
}

static void put(struct tables *tables, struct kv_txn *txn, unsigned table, const char *key,
                const char *value)
{
    assert_int_equal(kv_put(txn, table, bytes_of(key), bytes_of(value), &tables->error), STORE_OK);
}

static void commit(struct tables *tables, struct kv_txn *txn)
{
    assert_int_equal(kv_commit(txn, &tables->error), STORE_OK);
}

static void put_one(struct tables *tables, unsigned table, const char *key, const char *value)
{
    struct kv_txn *txn = begin(tables, true);
    put(tables, txn, table, key, value);
    commit(tables, txn);
}

static bool has(struct tables *tables, struct kv_txn *txn, unsigned table, const char *key,
                const char *value)
{
    struct kv_bytes found = {0};
    int result = kv_get(txn, table, bytes_of(key), &found, &tables->error);
    return result == STORE_OK && found.size == strlen(value) &&
           memcmp(found.data, value, found.size) == 0;
}

static bool has_now(struct tables *tables, unsigned table, const char *key, const char *value)
{
    struct kv_txn *txn = begin(tables, false);
    bool found = has(tables, txn, table, key, value);
    kv_abort(txn);
    return found;
}

/* --- entries --- */

static void what_is_committed_is_read_again(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "north pier", "red");
    assert_true(has_now(tables, LAMPS, "north pier", "red"));
    reopen(tables);
    assert_true(has_now(tables, LAMPS, "north pier", "red"));
}

static void tables_keep_their_entries_apart(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "maid", "white");
    put_one(tables, SHIPS, "maid", "ketch");
    assert_true(has_now(tables, LAMPS, "maid", "white"));
    assert_true(has_now(tables, SHIPS, "maid", "ketch"));
}

static void what_is_not_there_is_an_answer_without_a_sentence(void **state)
{
    struct tables *tables = *state;
    struct kv_txn *txn = begin(tables, true);
    struct kv_bytes value = {0};
    struct kv_bytes key = {0};
    assert_int_equal(kv_get(txn, LAMPS, bytes_of("x"), &value, &tables->error), STORE_NOT_FOUND);
    assert_int_equal(kv_delete(txn, LAMPS, bytes_of("x"), &tables->error), STORE_NOT_FOUND);
    assert_int_equal(kv_last(txn, LAMPS, &key, &value, &tables->error), STORE_NOT_FOUND);
    assert_int_equal(tables->error.code, STORE_OK);
    assert_null(value.data);
    kv_abort(txn);
}

static void a_second_value_takes_the_place_of_the_first(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "pier", "red");
    put_one(tables, LAMPS, "pier", "green, flashing");
    assert_true(has_now(tables, LAMPS, "pier", "green, flashing"));
}

static void an_aborted_transaction_leaves_nothing(void **state)
{
    struct tables *tables = *state;
    struct kv_txn *txn = begin(tables, true);
    put(tables, txn, LAMPS, "pier", "red");
    assert_true(has(tables, txn, LAMPS, "pier", "red"));
    kv_abort(txn);
    assert_false(has_now(tables, LAMPS, "pier", "red"));
    kv_abort(NULL);
}

static void a_reader_sees_what_was_there_when_it_began(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "pier", "red");
    struct kv_txn *reading = begin(tables, false);
    put_one(tables, LAMPS, "pier", "green");
    assert_true(has(tables, reading, LAMPS, "pier", "red"));
    kv_abort(reading);
    assert_true(has_now(tables, LAMPS, "pier", "green"));
}

static void an_appended_key_must_be_behind_all_others(void **state)
{
    struct tables *tables = *state;
    struct kv_txn *txn = begin(tables, true);
    assert_int_equal(kv_append(txn, LAMPS, bytes_of("b"), bytes_of("1"), &tables->error), STORE_OK);
    assert_int_not_equal(kv_append(txn, LAMPS, bytes_of("a"), bytes_of("2"), &tables->error),
                         STORE_OK);
    kv_abort(txn);
}

static void an_entry_that_would_leave_its_page_is_refused(void **state)
{
    struct tables *tables = *state;
    static const unsigned char zeros[KV_ENTRY_BYTES];
    struct kv_txn *txn = begin(tables, true);
    assert_int_equal(
        kv_put(txn, LAMPS, bytes_of("key"), kv_bytes_of(zeros, KV_ENTRY_BYTES - 3), &tables->error),
        STORE_OK);
    assert_int_equal(
        kv_put(txn, LAMPS, bytes_of("key"), kv_bytes_of(zeros, KV_ENTRY_BYTES - 2), &tables->error),
        STORE_BROKEN);
    assert_string_equal(tables->error.text, "an entry of 2023 bytes is too large");
    kv_abort(txn);
}

static void a_cleared_table_is_empty_and_the_others_are_not(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "pier", "red");
    put_one(tables, SHIPS, "maid", "ketch");
    struct kv_txn *txn = begin(tables, true);
    uint64_t count = 9;
    assert_int_equal(kv_clear(txn, LAMPS, &tables->error), STORE_OK);
    assert_int_equal(kv_count(txn, LAMPS, &count, &tables->error), STORE_OK);
    assert_int_equal(count, 0);
    commit(tables, txn);
    assert_false(has_now(tables, LAMPS, "pier", "red"));
    assert_true(has_now(tables, SHIPS, "maid", "ketch"));
}

static void the_last_entry_is_that_of_the_greatest_key(void **state)
{
    struct tables *tables = *state;
    put_one(tables, LAMPS, "b", "2");
    put_one(tables, LAMPS, "c", "3");
    put_one(tables, LAMPS, "a", "1");
    struct kv_txn *txn = begin(tables, false);
    struct kv_bytes key = {0};
    struct kv_bytes value = {0};
    assert_int_equal(kv_last(txn, LAMPS, &key, &value, &tables->error), STORE_OK);
    assert_int_equal(key.size, 1);
    assert_memory_equal(key.data, "c", 1);
    assert_memory_equal(value.data, "3", 1);
    kv_abort(txn);
}

/* --- walks --- */

struct walked {
    char keys[64];
    const char *stop_at;
    const char *delete_at;
    struct store_error *error;
};

static int note_key(void *user, struct kv_cursor *at, struct kv_bytes key, struct kv_bytes value)
{
    struct walked *walked = user;
    assert_int_equal(value.size, 1);
    size_t used = strlen(walked->keys);
    memcpy(walked->keys + used, key.data, key.size);
    if (walked->delete_at && memcmp(key.data, walked->delete_at, 1) == 0) {
        return kv_walk_delete(at, walked->error);
    }
    return walked->stop_at && memcmp(key.data, walked->stop_at, 1) == 0 ? STORE_STOPPED : STORE_OK;
}

static void put_four(struct tables *tables)
{
    put_one(tables, LAMPS, "d", "4");
    put_one(tables, LAMPS, "a", "1");
    put_one(tables, LAMPS, "c", "3");
    put_one(tables, LAMPS, "b", "2");
}

static int walk(struct tables *tables, const char *from, struct walked *walked, bool write)
{
    walked->error = &tables->error;
    struct kv_txn *txn = begin(tables, write);
    int result = kv_walk(txn, LAMPS, bytes_of(from), note_key, walked, &tables->error);
    if (write) {
        commit(tables, txn);
    } else {
        kv_abort(txn);
    }
    return result;
}

static void a_walk_goes_in_the_order_of_keys(void **state)
{
    struct tables *tables = *state;
    struct walked walked = {0};
    put_four(tables);
    assert_int_equal(walk(tables, "", &walked, false), STORE_OK);
    assert_string_equal(walked.keys, "abcd");
}

static void a_walk_begins_at_or_behind_its_first_key(void **state)
{
    struct tables *tables = *state;
    struct walked at = {0};
    struct walked behind = {0};
    struct walked beyond = {0};
    put_four(tables);
    assert_int_equal(walk(tables, "b", &at, false), STORE_OK);
    assert_int_equal(walk(tables, "bb", &behind, false), STORE_OK);
    assert_int_equal(walk(tables, "e", &beyond, false), STORE_OK);
    assert_string_equal(at.keys, "bcd");
    assert_string_equal(behind.keys, "cd");
    assert_string_equal(beyond.keys, "");
}

static void a_walk_stops_when_it_is_told_to(void **state)
{
    struct tables *tables = *state;
    struct walked walked = {.stop_at = "b"};
    put_four(tables);
    assert_int_equal(walk(tables, "", &walked, false), STORE_STOPPED);
    assert_string_equal(walked.keys, "ab");
}

static void a_walk_goes_on_behind_an_entry_that_it_deletes(void **state)
{
    struct tables *tables = *state;
    struct walked deleting = {.delete_at = "b"};
    struct walked after = {0};
    put_four(tables);
    assert_int_equal(walk(tables, "", &deleting, true), STORE_OK);
    assert_string_equal(deleting.keys, "abcd");
    assert_int_equal(walk(tables, "", &after, false), STORE_OK);
    assert_string_equal(after.keys, "acd");
}

/* --- opening --- */

static void more_tables_than_there_is_room_for_are_refused(void **state)
{
    struct tables *tables = *state;
    struct kv *kv = NULL;
    struct kv_settings settings = tables->settings;
    settings.table_count = KV_TABLES + 1;
    assert_int_equal(kv_open(&settings, &kv, &tables->error), STORE_DENIED);
    assert_null(kv);
}

static void the_size_of_the_file_is_told(void **state)
{
    struct tables *tables = *state;
    uint64_t before = kv_file_bytes(tables->kv);
    assert_true(before > 0);
    static const unsigned char zeros[KV_VALUE_BYTES];
    struct kv_txn *txn = begin(tables, true);
    for (uint8_t key = 0; key < 26; key++) {
        assert_int_equal(kv_put(txn, LAMPS, kv_bytes_of(&key, 1), kv_bytes_of(zeros, sizeof zeros),
                                &tables->error),
                         STORE_OK);
    }
    commit(tables, txn);
    /* 26 values of 2,000 bytes, two to a page of 4,096: 13 pages at least. */
    assert_true(kv_file_bytes(tables->kv) >= before + 13 * UINT64_C(4096));
}

/* --- a disk that fails --- */

static int try_to_put(struct tables *tables, const char *key, struct store_error *error)
{
    struct kv_txn *txn = NULL;
    int result = kv_begin(tables->kv, true, &txn, error);
    if (result != STORE_OK) {
        return result;
    }
    put(tables, txn, LAMPS, key, "1");
    return kv_commit(txn, error);
}

static void a_full_disk_changes_nothing_and_later_writes_work(void **state)
{
    struct tables *tables = *state;
    struct store_error error = {0};
    page_fault = ENOSPC;
    assert_int_equal(try_to_put(tables, "first", &error), STORE_FULL);
    assert_non_null(strstr(error.text, "is full"));
    assert_false(has_now(tables, LAMPS, "first", "1"));
    page_fault = 0;
    put_one(tables, LAMPS, "second", "1");
    assert_true(has_now(tables, LAMPS, "second", "1"));
}

static void a_failed_sync_stops_writing_until_it_is_opened_anew(void **state)
{
    struct tables *tables = *state;
    struct store_error failed = {0};
    struct store_error later = {0};
    put_one(tables, LAMPS, "before", "1");
    sync_fault = EIO;
    assert_int_equal(try_to_put(tables, "first", &failed), STORE_BROKEN);
    sync_fault = 0;
    assert_int_equal(try_to_put(tables, "second", &later), STORE_BROKEN);
    assert_non_null(strstr(later.text, "nothing is written until a restart"));
    assert_true(has_now(tables, LAMPS, "before", "1"));
    reopen(tables);
    assert_true(has_now(tables, LAMPS, "before", "1"));
    assert_false(has_now(tables, LAMPS, "second", "1"));
    put_one(tables, LAMPS, "third", "1");
}

static void a_root_that_cannot_be_written_stops_writing_too(void **state)
{
    struct tables *tables = *state;
    struct store_error failed = {0};
    struct store_error later = {0};
    put_one(tables, LAMPS, "before", "1");
    root_fault = EIO;
    assert_int_equal(try_to_put(tables, "first", &failed), STORE_BROKEN);
    root_fault = 0;
    assert_int_equal(try_to_put(tables, "second", &later), STORE_BROKEN);
    reopen(tables);
    assert_true(has_now(tables, LAMPS, "before", "1"));
    put_one(tables, LAMPS, "third", "1");
}

static void a_scrub_whose_sync_fails_stops_nothing_and_is_tried_again(void **state)
{
    struct tables *tables = *state;
    struct store_error failed = {0};
    struct store_error later = {0};
    size_t left = 9;
    put_one(tables, LAMPS, "a", "1");
    put_one(tables, LAMPS, "a", "2");
    sync_fault = EIO;
    assert_int_equal(kv_scrub(tables->kv, 100, &left, &failed), STORE_BROKEN);
    assert_int_equal(left, 9);
    sync_fault = 0;
    assert_int_equal(try_to_put(tables, "b", &later), STORE_OK);
    while (left > 0) {
        assert_int_equal(kv_scrub(tables->kv, 100, &left, &later), STORE_OK);
    }
    assert_true(has_now(tables, LAMPS, "a", "2"));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_committed_is_read_again),
        TEST(tables_keep_their_entries_apart),
        TEST(what_is_not_there_is_an_answer_without_a_sentence),
        TEST(a_second_value_takes_the_place_of_the_first),
        TEST(an_aborted_transaction_leaves_nothing),
        TEST(a_reader_sees_what_was_there_when_it_began),
        TEST(an_appended_key_must_be_behind_all_others),
        TEST(an_entry_that_would_leave_its_page_is_refused),
        TEST(a_cleared_table_is_empty_and_the_others_are_not),
        TEST(the_last_entry_is_that_of_the_greatest_key),
        TEST(a_walk_goes_in_the_order_of_keys),
        TEST(a_walk_begins_at_or_behind_its_first_key),
        TEST(a_walk_stops_when_it_is_told_to),
        TEST(a_walk_goes_on_behind_an_entry_that_it_deletes),
        TEST(more_tables_than_there_is_room_for_are_refused),
        TEST(the_size_of_the_file_is_told),
        TEST(a_full_disk_changes_nothing_and_later_writes_work),
        TEST(a_failed_sync_stops_writing_until_it_is_opened_anew),
        TEST(a_root_that_cannot_be_written_stops_writing_too),
        TEST(a_scrub_whose_sync_fails_stops_nothing_and_is_tried_again),
    };
    return cmocka_run_group_tests_name("kv", tests, NULL, NULL);
}
