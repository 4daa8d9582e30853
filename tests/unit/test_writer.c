/*
 * The one thread that changes the store. To have several changes in one group, a test fills the
 * backlog: the writer then waits for room until the test says that all is learned.
 */
#include "daemon/writer.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <pthread.h>
#include <sched.h>
#include <unistd.h>

#include "tests/unit/damage.h"

enum {
    CHANGES = 16,
    GUARD_S = 120 /* a test that waits for what never comes ends */
};

struct writing {
    struct fixture *store;
    struct backlog *backlog;
    struct troubles troubles;
    struct features_settings features;
    struct writer *writer;
    struct change changes[CHANGES];
    struct store_text tags[CHANGES];
    size_t change_count;
    struct change *done[CHANGES]; /* in the order in which they came back */
    size_t done_count;
    pthread_mutex_t mutex;
    pthread_cond_t handed_back;
    size_t groups; /* under the mutex: how often something was handed back */
};

/* --- the fixture --- */

static void on_done(void *user)
{
    struct writing *writing = user;
    (void)pthread_mutex_lock(&writing->mutex);
    writing->groups++;
    (void)pthread_cond_signal(&writing->handed_back);
    (void)pthread_mutex_unlock(&writing->mutex);
}

static void start_writer(struct writing *writing)
{
    const struct writer_settings settings = {.store = writing->store->store,
                                             .backlog = writing->backlog,
                                             .troubles = &writing->troubles,
                                             .features = &writing->features,
                                             .user = writing,
                                             .done = on_done};
    assert_int_equal(writer_new(&settings, &writing->writer), 0);
}

static int set_up(void **state)
{
    struct writing *writing = calloc(1, sizeof *writing);
    assert_non_null(writing);
    (void)alarm(GUARD_S);
    assert_int_equal(fixture_setup((void **)&writing->store), 0);
    const struct backlog_start start = {.visible_within_ms = 0};
    assert_int_equal(backlog_new(&start, &writing->backlog), 0);
    assert_int_equal(troubles_init(&writing->troubles), 0);
    assert_int_equal(pthread_mutex_init(&writing->mutex, NULL), 0);
    assert_int_equal(pthread_cond_init(&writing->handed_back, NULL), 0);
    writing->features = (struct features_settings){.title_weight = 1.5};
    start_writer(writing);
    *state = writing;
    return 0;
}

static void stop_writer(struct writing *writing)
{
    backlog_stop(writing->backlog);
    writer_free(writing->writer);
    writing->writer = NULL;
}

static int tear_down(void **state)
{
    struct writing *writing = *state;
    stop_writer(writing);
    backlog_free(writing->backlog);
    troubles_deinit(&writing->troubles);
    (void)pthread_cond_destroy(&writing->handed_back);
    (void)pthread_mutex_destroy(&writing->mutex);
    (void)fixture_teardown((void **)&writing->store);
    free(writing);
    return 0;
}

/* --- changes --- */

/* The next change; `tag` NULL: without one. */
static struct change *change_of(struct writing *writing, const char *id, const char *text,
                                const char *tag)
{
    assert_true(writing->change_count < CHANGES);
    struct store_text *tags = &writing->tags[writing->change_count];
    struct change *change = &writing->changes[writing->change_count++];
    *tags = text_of(tag ? tag : "");
    change->kind = CHANGE_FILE;
    change->filing = (struct item_filing){.id = text_of(id),
                                          .text = text_of(text),
                                          .tags = tags,
                                          .tag_count = tag ? 1 : 0,
                                          .open_unknown = true};
    return change;
}

static struct change *push(struct writing *writing, struct change *change)
{
    writer_push(writing->writer, change);
    return change;
}

static struct change *push_withdrawal(struct writing *writing, const char *id)
{
    struct change *change = change_of(writing, id, "", NULL);
    change->kind = CHANGE_WITHDRAW;
    return push(writing, change);
}

static void take_done(struct writing *writing)
{
    struct change *change = writer_take_done(writing->writer);
    for (; change; change = change->next) {
        writing->done[writing->done_count++] = change;
    }
}

/* Until so many have come back in all; returns in how many groups. */
static size_t wait_for(struct writing *writing, size_t count)
{
    (void)pthread_mutex_lock(&writing->mutex);
    size_t seen = 0;
    for (;;) {
        take_done(writing);
        if (writing->done_count >= count) {
            break;
        }
        seen = writing->groups;
        while (writing->groups == seen && writing->done_count < count) {
            (void)pthread_cond_wait(&writing->handed_back, &writing->mutex);
            take_done(writing);
        }
    }
    size_t groups = writing->groups;
    (void)pthread_mutex_unlock(&writing->mutex);
    assert_int_equal(writing->done_count, count);
    return groups;
}

/* Lets no change through until `release`. */
static void hold(struct writing *writing)
{
    backlog_committed(writing->backlog, UINT64_MAX, UINT32_MAX, 0);
}

static void release(struct writing *writing)
{
    backlog_learned(writing->backlog, UINT64_MAX, 0, 0);
}

static void assert_done(const struct change *change, enum item_was was, uint64_t seq)
{
    if (change->code != STORE_OK) {
        fail_msg("%d: %s", change->code, change->error.text);
    }
    assert_int_equal(change->filed.was, was);
    assert_int_equal(change->filed.seq, seq);
}

/* --- what becomes of a change --- */

static void a_change_that_is_done_is_in_the_store(void **state)
{
    struct writing *writing = *state;
    struct change *change = push(writing, change_of(writing, "log/1", "fog", "weather"));
    assert_int_equal(wait_for(writing, 1), 1);
    assert_done(change, ITEM_NEW, 1);
    assert_true(is_text(fixture_record(writing->store, 1).text, "fog"));
    assert_int_equal(fixture_tag(writing->store, "weather").counts.count, 1);
    assert_int_equal(backlog_read(writing->backlog).committed, 1);
}

static void changes_come_back_in_their_order(void **state)
{
    struct writing *writing = *state;
    static const char *const IDS[] = {"a", "b", "c", "d", "e", "f", "g", "h"};
    for (size_t i = 0; i < 8; i++) {
        (void)push(writing, change_of(writing, IDS[i], "fog", NULL));
    }
    (void)wait_for(writing, 8);
    for (size_t i = 0; i < 8; i++) {
        assert_ptr_equal(writing->done[i], &writing->changes[i]);
        assert_done(writing->done[i], ITEM_NEW, i + 1);
    }
}

static void what_waits_together_is_one_group(void **state)
{
    struct writing *writing = *state;
    hold(writing);
    struct change *first = push(writing, change_of(writing, "log/1", "fog", NULL));
    struct change *second = push(writing, change_of(writing, "log/1", "thick fog", NULL));
    struct change *third = push(writing, change_of(writing, "log/1", "thick fog", NULL));
    struct change *fourth = push_withdrawal(writing, "log/1");
    release(writing);
    assert_int_equal(wait_for(writing, 4), 1);
    assert_done(first, ITEM_NEW, 1);
    assert_done(second, ITEM_REVISED, 2);
    assert_done(third, ITEM_SAME, 2);
    assert_done(fourth, ITEM_NEW, 3);
    assert_int_equal(fixture_totals(writing->store).items, 0);
}

/* Room is 100,000; each costs 60,000 and something. */
static void a_group_is_no_larger_than_the_room(void **state)
{
    struct writing *writing = *state;
    char *text = calloc(60001, 1);
    assert_non_null(text);
    memset(text, 'x', 60000);
    hold(writing);
    (void)push(writing, change_of(writing, "a", text, NULL));
    (void)push(writing, change_of(writing, "b", text, NULL));
    release(writing);
    assert_int_equal(wait_for(writing, 2), 2);
    struct change *third = push(writing, change_of(writing, "c", text, NULL));
    backlog_learned(writing->backlog, 2, 0, 0);
    assert_int_equal(wait_for(writing, 3), 3);
    assert_done(third, ITEM_NEW, 3);
    free(text);
}

/* --- refusals --- */

static void a_refused_change_leaves_its_group_alone(void **state)
{
    struct writing *writing = *state;
    hold(writing);
    struct change *first = push(writing, change_of(writing, "log/1", "fog", "weather"));
    struct change *refused = change_of(writing, "log/2", "wreck", "wrekc");
    refused->filing.open_unknown = false;
    (void)push(writing, refused);
    struct change *missed = push_withdrawal(writing, "log/77");
    struct change *last = push(writing, change_of(writing, "log/3", "calm", "weather"));
    release(writing);
    assert_int_equal(wait_for(writing, 4), 1);
    assert_done(first, ITEM_NEW, 1);
    assert_int_equal(refused->code, STORE_REFUSED);
    assert_int_equal(refused->refusal.list, REFUSED_TAG);
    assert_int_equal(refused->refusal.at, 0);
    assert_false(refused->has_too_many_words);
    assert_int_equal(missed->code, STORE_NOT_FOUND);
    assert_done(last, ITEM_NEW, 2);
    assert_int_equal(fixture_totals(writing->store).items, 2);
}

static void a_group_of_refusals_changes_nothing(void **state)
{
    struct writing *writing = *state;
    struct change *missed = push_withdrawal(writing, "log/77");
    (void)wait_for(writing, 1);
    assert_int_equal(missed->code, STORE_NOT_FOUND);
    assert_int_equal(fixture_totals(writing->store).seq, 0);
    assert_int_equal(backlog_read(writing->backlog).committed, 0);
}

static void too_many_different_words_are_refused(void **state)
{
    struct writing *writing = *state;
    static const char TEXT[] = "fog bell lamp quay";
    const struct features_source source = {.text = TEXT, .text_bytes = sizeof TEXT - 1};
    for (size_t limit = 3; limit <= 4; limit++) {
        struct change *change = change_of(writing, "log/1", TEXT, NULL);
        change->counted = &source;
        change->words_limit = limit;
        (void)push(writing, change);
    }
    (void)wait_for(writing, 2);
    assert_int_equal(writing->changes[0].code, STORE_REFUSED);
    assert_true(writing->changes[0].has_too_many_words);
    assert_done(&writing->changes[1], ITEM_NEW, 1);
    assert_false(writing->changes[1].has_too_many_words);
}

/* The map holds a megabyte: the large change has no room in it, alone or in a group. */
static void a_change_without_room_does_not_take_its_group_with_it(void **state)
{
    struct writing *writing = *state;
    char sentence[TROUBLE_BYTES];
    char *text = calloc(2000001, 1);
    assert_non_null(text);
    memset(text, 'x', 2000000);
    writer_free(writing->writer);
    fixture_close(writing->store);
    writing->store->settings.map_bytes = 1 << 20;
    fixture_open(writing->store);
    start_writer(writing);
    hold(writing);
    struct change *first = push(writing, change_of(writing, "log/1", "fog", NULL));
    struct change *large = push(writing, change_of(writing, "log/2", text, NULL));
    backlog_trainer_failed(writing->backlog); /* room for both at once */
    assert_int_equal(wait_for(writing, 2), 1);
    assert_done(first, ITEM_NEW, 1);
    assert_int_equal(large->code, STORE_FULL);
    troubles_read(&writing->troubles, TROUBLE_STORING, sentence);
    assert_non_null(strstr(sentence, "changes cannot be stored ("));
    struct change *last = push(writing, change_of(writing, "log/3", "calm", NULL));
    (void)wait_for(writing, 3);
    assert_done(last, ITEM_NEW, 2);
    troubles_read(&writing->troubles, TROUBLE_STORING, sentence);
    assert_string_equal(sentence, "");
    free(text);
}

/* --- the end --- */

static void what_is_queued_when_the_writer_ends_is_stored(void **state)
{
    struct writing *writing = *state;
    hold(writing);
    for (size_t i = 0; i < 3; i++) {
        static const char *const IDS[] = {"a", "b", "c"};
        (void)push(writing, change_of(writing, IDS[i], "fog", NULL));
    }
    stop_writer(writing);
    assert_int_equal(writing->changes[2].code, STORE_OK);
    assert_int_equal(fixture_totals(writing->store).items, 3);
    start_writer(writing); /* for the teardown */
}

/* --- erasing --- */

static void wait_until_gone(const struct writing *writing, const char *text)
{
    while (home_occurrences(writing->store->home, "store/data.mdb", text) > 0) {
        (void)sched_yield();
    }
}

static void what_the_stored_model_has_passed_is_erased_from_the_file(void **state)
{
    struct writing *writing = *state;
    (void)push(writing, change_of(writing, "log/1", "schoonerwreckage", NULL));
    (void)push(writing, change_of(writing, "log/2", "smugglerslantern", NULL));
    (void)push(writing, change_of(writing, "log/1", "a quiet night", NULL));
    (void)push_withdrawal(writing, "log/2");
    (void)wait_for(writing, 4);
    assert_true(home_occurrences(writing->store->home, "store/data.mdb", "schoonerwreckage") > 0);
    backlog_kept(writing->backlog, 3); /* past the revision, but not the withdrawal */
    writer_wake(writing->writer);
    wait_until_gone(writing, "schoonerwreckage");
    assert_true(is_text(fixture_record(writing->store, 2).text, "smugglerslantern"));
    backlog_kept(writing->backlog, 4);
    writer_wake(writing->writer);
    wait_until_gone(writing, "smugglerslantern");
    assert_true(is_text(fixture_record(writing->store, 3).text, "a quiet night"));
}

static void damage_in_what_is_to_be_erased_is_told_and_keeps_no_change_back(void **state)
{
    struct writing *writing = *state;
    char told[TROUBLE_BYTES];
    unsigned char key[8];
    (void)push(writing, change_of(writing, "log/1", "fog", NULL));
    (void)push(writing, change_of(writing, "log/1", "no fog", NULL));
    (void)wait_for(writing, 2);
    codec_key_u64(key, 2);
    damage_value(writing->store, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key), 0);
    backlog_kept(writing->backlog, 2);
    (void)push(writing, change_of(writing, "log/2", "a quiet night", NULL));
    (void)wait_for(writing, 3);
    assert_done(writing->done[2], ITEM_NEW, 3);
    troubles_read(&writing->troubles, TROUBLE_ERASING, told);
    assert_non_null(strstr(told, "what change 2 replaced is damaged"));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_change_that_is_done_is_in_the_store),
        TEST(changes_come_back_in_their_order),
        TEST(what_waits_together_is_one_group),
        TEST(a_group_is_no_larger_than_the_room),
        TEST(a_refused_change_leaves_its_group_alone),
        TEST(a_group_of_refusals_changes_nothing),
        TEST(too_many_different_words_are_refused),
        TEST(a_change_without_room_does_not_take_its_group_with_it),
        TEST(what_is_queued_when_the_writer_ends_is_stored),
        TEST(what_the_stored_model_has_passed_is_erased_from_the_file),
        TEST(damage_in_what_is_to_be_erased_is_told_and_keeps_no_change_back),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
