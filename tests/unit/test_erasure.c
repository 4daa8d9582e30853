/*
 * What was withdrawn or revised is gone from the bytes of the store's file, not only from answers.
 * LMDB leaves deleted bytes in free pages, in gaps of pages and in buffers that it uses again; each
 * of these has its test.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static const char secret[] = "the keeper's wife asked that this be left out";

static size_t left_in_file(struct fixture *fixture)
{
    return home_occurrences(fixture->home, "store/data.mdb", "asked that this");
}

/* One call of a round, of at most 16 pages; returns how many are left. */
static size_t scrub_some(struct fixture *fixture)
{
    struct store_error error = {0};
    size_t left = SIZE_MAX;
    if (store_scrub(fixture->store, 16, &left, &error) != STORE_OK) {
        fail_msg("%s", error.text);
    }
    return left;
}

static void scrub(struct fixture *fixture)
{
    for (int calls = 0; scrub_some(fixture) > 0; calls++) {
        assert_true(calls < 10000);
    }
}

/* Files entries, ten to a commit. */
static void file_many(struct fixture *fixture, const char *prefix, int count)
{
    struct store_error error = {0};
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    struct store_view *view = fixture_write(fixture);
    for (int i = 0; i < count; i++) {
        char id[64];
        (void)snprintf(id, sizeof id, "%s/%d", prefix, i);
        struct item_filing filing = {
            .id = text_of(id), .text = text_of("lamp lit at dusk, wind south west, two ketches")};
        assert_int_equal(items_file(view, &filing, &fixture->buffer, &filed, &refusal, &error),
                         STORE_OK);
        if (i % 10 == 9) {
            fixture_commit(view);
            view = fixture_write(fixture);
        }
    }
    fixture_commit(view);
}

/* Withdraws the entry and erases it; that it stood in the file before is looked at, too. */
static void withdraw_and_erase(struct fixture *fixture, const char *id)
{
    assert_true(left_in_file(fixture) > 0);
    uint64_t seq = fixture_withdraw(fixture, id);
    assert_int_equal(fixture_erase(fixture, seq), 1);
}

static void the_only_entry_leaves_nothing(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void the_last_of_a_few_leaves_nothing_in_its_page(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 3);
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void one_amid_many_leaves_nothing(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 100);
    (void)fixture_file_text(fixture, "log/1", secret);
    file_many(fixture, "after", 10);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void a_text_of_many_pieces_leaves_nothing(void **state)
{
    struct fixture *fixture = *state;
    enum {
        REPEATS = 28000 /* some 340 pages, whose list as free pages fills part of another page */
    };
    char *text = calloc(REPEATS, sizeof secret);
    assert_non_null(text);
    for (size_t i = 0; i < REPEATS; i++) {
        memcpy(text + i * (sizeof secret - 1), secret, sizeof secret - 1);
    }
    (void)fixture_file_text(fixture, "log/1", text);
    free(text);
    file_many(fixture, "after", 3);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void what_a_revision_replaced_leaves_nothing(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 5);
    (void)fixture_file_text(fixture, "log/1", secret);
    uint64_t seq = fixture_file_text(fixture, "log/1", "a quiet night").seq;
    assert_int_equal(fixture_erase(fixture, seq), 1);
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
    assert_true(is_text(fixture_record(fixture, seq).text, "a quiet night"));
}

static void what_the_learner_has_not_passed_is_kept(void **state)
{
    struct fixture *fixture = *state;
    uint64_t filed = fixture_file_text(fixture, "log/1", secret).seq;
    uint64_t withdrawn = fixture_withdraw(fixture, "log/1");
    assert_int_equal(fixture_erase(fixture, withdrawn - 1), 0);
    scrub(fixture);
    assert_true(is_text(fixture_record(fixture, filed).text, secret));
}

static void nothing_comes_back_with_later_writes(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 30);
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    file_many(fixture, "after", 300);
    assert_int_equal(left_in_file(fixture), 0);
}

static void writes_during_a_round_bring_nothing_back(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 300);
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    int calls = 0;
    while (scrub_some(fixture) > 0) {
        file_many(fixture, "during", 5);
        calls++;
    }
    assert_true(calls > 1);
    assert_int_equal(left_in_file(fixture), 0);
}

static void what_was_erased_before_a_crash_is_scrubbed_after_it(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 3);
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    fixture_close(fixture);
    fixture_open(fixture);
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void erasing_during_a_round_makes_another_follow(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", secret);
    file_many(fixture, "after", 300);
    assert_true(scrub_some(fixture) > 0);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void once_all_is_scrubbed_there_is_nothing_left_to_do(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 300);
    scrub(fixture);
    assert_int_equal(scrub_some(fixture), 0);
    file_many(fixture, "after", 3);
    assert_int_equal(scrub_some(fixture), 0);
}

static void a_round_waits_for_a_reader_and_leaves_its_state_whole(void **state)
{
    struct fixture *fixture = *state;
    uint64_t filed = fixture_file_text(fixture, "log/1", secret).seq;
    struct store_view *view = fixture_read(fixture);
    withdraw_and_erase(fixture, "log/1");
    assert_true(scrub_some(fixture) > 0);
    assert_true(scrub_some(fixture) > 0);
    struct store_error error = {0};
    struct item_record record = {0};
    assert_int_equal(items_read(view, filed, &fixture->reading, &record, &error), STORE_OK);
    assert_true(is_text(record.text, secret));
    store_end(view);
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void a_reader_that_comes_during_a_round_keeps_its_state_whole(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 300);
    uint64_t filed = fixture_file_text(fixture, "log/1", secret).seq;
    assert_true(scrub_some(fixture) > 0);
    struct store_view *view = fixture_read(fixture);
    withdraw_and_erase(fixture, "log/1");
    size_t left = scrub_some(fixture);
    assert_true(left > 0);
    assert_int_equal(scrub_some(fixture), left);
    struct store_error error = {0};
    struct item_record record = {0};
    assert_int_equal(items_read(view, filed, &fixture->reading, &record, &error), STORE_OK);
    assert_true(is_text(record.text, secret));
    store_end(view);
    scrub(fixture);
    assert_int_equal(left_in_file(fixture), 0);
}

static void what_was_not_erased_reads_as_before(void **state)
{
    struct fixture *fixture = *state;
    file_many(fixture, "before", 200);
    (void)fixture_file_text(fixture, "log/1", secret);
    withdraw_and_erase(fixture, "log/1");
    scrub(fixture);
    fixture_close(fixture);
    fixture_open(fixture);
    for (uint64_t seq = 1; seq <= 200; seq++) {
        struct item_record record = fixture_record(fixture, seq);
        assert_true(is_text(record.text, "lamp lit at dusk, wind south west, two ketches"));
    }
    assert_int_equal(fixture_record(fixture, 202).change, ITEM_WITHDRAWN);
}

/* One erased change frees hundreds of pages, whose list then needs pages of its own. */
static void a_long_list_of_free_pages_survives_scrubbing(void **state)
{
    struct fixture *fixture = *state;
    enum {
        BYTES = 3000000
    };
    char *letters = malloc(BYTES);
    assert_non_null(letters);
    memset(letters, 'x', BYTES);
    struct store_text text = {.data = letters, .size = BYTES};
    (void)fixture_file(fixture, (struct item_filing){.id = text_of("long"), .text = text});
    (void)fixture_erase(fixture, fixture_withdraw(fixture, "long"));
    scrub(fixture);
    fixture_close(fixture);
    fixture_open(fixture);
    file_many(fixture, "between", 2); /* LMDB uses a page again two commits after it was freed */
    uint64_t before = store_file_bytes(fixture->store);
    uint64_t seq =
        fixture_file(fixture, (struct item_filing){.id = text_of("again"), .text = text}).seq;
    struct item_record record = fixture_record(fixture, seq);
    bool is_same = record.text.size == BYTES && memcmp(record.text.data, letters, BYTES) == 0;
    free(letters);
    assert_true(is_same);
    assert_true(store_file_bytes(fixture->store) < before + BYTES / 2);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_only_entry_leaves_nothing),
        TEST(the_last_of_a_few_leaves_nothing_in_its_page),
        TEST(one_amid_many_leaves_nothing),
        TEST(a_text_of_many_pieces_leaves_nothing),
        TEST(what_a_revision_replaced_leaves_nothing),
        TEST(what_the_learner_has_not_passed_is_kept),
        TEST(nothing_comes_back_with_later_writes),
        TEST(writes_during_a_round_bring_nothing_back),
        TEST(what_was_erased_before_a_crash_is_scrubbed_after_it),
        TEST(erasing_during_a_round_makes_another_follow),
        TEST(once_all_is_scrubbed_there_is_nothing_left_to_do),
        TEST(a_round_waits_for_a_reader_and_leaves_its_state_whole),
        TEST(a_reader_that_comes_during_a_round_keeps_its_state_whole),
        TEST(what_was_not_erased_reads_as_before),
        TEST(a_long_list_of_free_pages_survives_scrubbing),
    };
    return cmocka_run_group_tests_name("erasure", tests, NULL, NULL);
}
