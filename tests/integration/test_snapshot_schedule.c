/*
 * Snapshots that nobody asks for in detail: by a number of changes, at SIGUSR1; and which of them
 * stay.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/file.h>
#include <unistd.h>

#include "tests/integration/logbook.h"
#include "tests/integration/snapshots.h"

enum {
    WORDS = 6,
    ASK_EVERY_MS = 20
};

static unsigned filed; /* entries, of the test at hand */

static void file(struct service *service, unsigned count)
{
    logbook_file(&service->peer, filed, count, WORDS);
    filed += count;
}

static int set_up_with(void **state, const char *first, const char *second)
{
    filed = 0;
    *state = service_new(first, second, NULL);
    return 0;
}

static int set_up(void **state)
{
    return set_up_with(state, NULL, NULL);
}

static int set_up_keeping_two(void **state)
{
    return set_up_with(state, "snapshot_keep=2", NULL);
}

static const json_t *listed(struct service *service)
{
    return json_object_get(ask(&service->peer, "snapshot.list", "{}"), "snapshots");
}

/* Waits until there are so many; returns the list. */
static const json_t *wait_until_listed(struct service *service, size_t count)
{
    const json_t *list = listed(service);
    for (int waited_ms = 0; json_array_size(list) < count; waited_ms += ASK_EVERY_MS) {
        assert_true(waited_ms < PATIENCE_MS);
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions */
        list = listed(service);
    }
    return list;
}

/* One without a name, of a change of its own. Returns what it is called. */
static const char *write_unnamed(struct service *service)
{
    file(service, 1);
    return string(ask(&service->peer, "snapshot.write", "{}"), "name");
}

/* --- by the number of changes ------------------------------------------------------------------
 */

static int set_up_every_50(void **state)
{
    return set_up_with(state, "snapshot_changes=50", NULL);
}

static void one_is_written_after_so_many_changes(void **state)
{
    struct service *service = *state;
    file(service, 50);
    (void)wait_until_listed(service, 1);
    snapshots_wait(&service->peer); /* the link comes when the folder is there */
    const json_t *first = json_array_get(listed(service), 0);
    assert_int_equal(whole(first, "seq"), 50);
    assert_members(first, "{'named': false, 'latest': true}");
}

static void the_next_comes_as_many_changes_later(void **state)
{
    struct service *service = *state;
    file(service, 60);
    (void)wait_until_listed(service, 1);
    file(service, 50);
    const json_t *list = wait_until_listed(service, 2);
    json_int_t first = whole(json_array_get(list, 0), "seq");
    json_int_t second = whole(json_array_get(list, 1), "seq");
    assert_true(first >= 50);
    assert_true(second >= first + 50);
}

static void after_a_restart_it_is_counted_from_the_last_one(void **state)
{
    struct service *service = *state;
    file(service, 60);
    json_int_t first = whole(json_array_get(wait_until_listed(service, 1), 0), "seq");
    service_stop_and_start(service);
    file(service, 30);
    assert_int_equal(json_array_size(listed(service)), 1);
    file(service, 20); /* 110 by now, and the first was of 60 at most */
    const json_t *list = wait_until_listed(service, 2);
    assert_true(whole(json_array_get(list, 1), "seq") >= first + 50);
}

/* --- by time ------------------------------------------------------------------------------------
 */

/* Has its manifest say that it was made some years ago. */
static void make_old(struct service *service, const char *manifest)
{
    json_t *object = snapshots_read(service, manifest);
    assert_int_equal(json_object_set_new(object, "at", json_string("2020-01-02T03:04:05Z")), 0);
    assert_int_equal(json_dump_file(object, snapshots_path(service, manifest), 0), 0);
}

static void one_is_written_once_the_last_is_old_enough(void **state)
{
    struct service *service = *state;
    file(service, 10);
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring'}");
    make_old(service, "spring/manifest.json");
    service->daemon.settings[0] = "snapshot_every=1440"; /* minutes: a day */
    service_stop_and_start(service);
    file(service, 1);
    const json_t *list = wait_until_listed(service, 2);
    assert_string_equal(string(json_array_get(list, 0), "name"), "spring");
    assert_int_equal(whole(json_array_get(list, 1), "seq"), 11);
}

/* --- at SIGUSR1 --------------------------------------------------------------------------------
 */

static void a_signal_has_one_written(void **state)
{
    struct service *service = *state;
    file(service, 10);
    child_signal(&service->daemon.child, SIGUSR1);
    undertagd_wait_for(&service->daemon, "is whole");
    assert_int_equal(json_array_size(listed(service)), 1);
    assert_members(snapshots_state(&service->peer), "{'running': false, 'seq': 10}");
}

static int set_up_with_options(void **state)
{
    return set_up_with(state, "snapshot_items=on", "snapshot_proposals=off");
}

static void it_is_written_as_the_options_say(void **state)
{
    struct service *service = *state;
    file(service, 10);
    child_signal(&service->daemon.child, SIGUSR1);
    undertagd_wait_for(&service->daemon, "is whole");
    assert_true(snapshots_have(service, "latest/items.jsonl"));
    assert_false(snapshots_have(service, "latest/proposals.jsonl"));
}

static void a_signal_with_nothing_filed_is_told_and_does_no_harm(void **state)
{
    struct service *service = *state;
    child_signal(&service->daemon.child, SIGUSR1);
    undertagd_wait_for(&service->daemon, "there is nothing to write yet");
    assert_string_equal(snapshots_listed(service), "");
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

static void a_signal_while_one_is_written_is_told(void **state)
{
    struct service *service = *state;
    struct peer writer;
    snapshots_fill(service);
    unsigned id = snapshots_begin_slow(service, &writer, "spring");
    child_signal(&service->daemon.child, SIGUSR1);
    undertagd_wait_for(&service->daemon, "a snapshot is being written already");
    (void)peer_result(&writer, id);
    peer_close(&writer);
    assert_string_equal(snapshots_names(service, ""), "latest spring");
}

/* --- which stay --------------------------------------------------------------------------------
 */

static void as_many_stay_as_are_kept_and_those_with_a_name_besides(void **state)
{
    struct service *service = *state;
    file(service, 10);
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring'}");
    (void)write_unnamed(service);
    (void)write_unnamed(service);
    const char *third = write_unnamed(service);
    const char *fourth = write_unnamed(service);
    char expected[256];
    (void)snprintf(expected, sizeof expected, "spring %s %s", third, fourth);
    assert_string_equal(snapshots_listed(service), expected);
    assert_string_equal(snapshots_latest(service), fourth);
    assert_true(undertagd_said(&service->daemon, "1 older than the 2 to keep removed"));
}

/* flock(2), shared: whoever reads a snapshot for long holds its manifest so. */
static void what_somebody_holds_is_not_pulled_from_under_him(void **state)
{
    struct service *service = *state;
    char manifest[64];
    const char *held = write_unnamed(service);
    (void)snprintf(manifest, sizeof manifest, "%s/manifest.json", held);
    int reader = open(snapshots_path(service, manifest), O_RDONLY | O_CLOEXEC);
    assert_true(reader >= 0);
    assert_int_equal(flock(reader, LOCK_SH), 0);
    (void)write_unnamed(service);
    (void)write_unnamed(service);
    (void)write_unnamed(service);
    assert_true(snapshots_have(service, manifest));
    assert_int_equal(json_array_size(listed(service)), 3);
    assert_int_equal(close(reader), 0);
    (void)write_unnamed(service);
    assert_false(snapshots_have(service, held));
    assert_int_equal(json_array_size(listed(service)), 2);
}

/* What others keep in the folder is none of ours. */
static void what_is_no_snapshot_stays(void **state)
{
    struct service *service = *state;
    (void)write_unnamed(service);
    char path[SNAPSHOTS_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s", snapshots_path(service, "notes"));
    int fd = open(path, O_WRONLY | O_CREAT | O_CLOEXEC, 0600);
    assert_true(fd >= 0);
    assert_int_equal(close(fd), 0);
    (void)write_unnamed(service);
    (void)write_unnamed(service);
    assert_true(snapshots_have(service, "notes"));
    assert_int_equal(json_array_size(listed(service)), 2);
}

#define TEST(function, start) cmocka_unit_test_setup_teardown(function, start, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(one_is_written_after_so_many_changes, set_up_every_50),
        TEST(the_next_comes_as_many_changes_later, set_up_every_50),
        TEST(after_a_restart_it_is_counted_from_the_last_one, set_up_every_50),
        TEST(one_is_written_once_the_last_is_old_enough, set_up),
        TEST(a_signal_has_one_written, set_up),
        TEST(it_is_written_as_the_options_say, set_up_with_options),
        TEST(a_signal_with_nothing_filed_is_told_and_does_no_harm, set_up),
        TEST(a_signal_while_one_is_written_is_told, set_up),
        TEST(as_many_stay_as_are_kept_and_those_with_a_name_besides, set_up_keeping_two),
        TEST(what_somebody_holds_is_not_pulled_from_under_him, set_up_keeping_two),
        TEST(what_is_no_snapshot_stays, set_up_keeping_two),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
