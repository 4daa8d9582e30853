/*
 * Snapshots that come to nothing, or come while something else goes on: nothing is left of them,
 * the one before stays, and one sentence says why.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <signal.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/integration/logbook.h"
#include "tests/integration/snapshots.h"

/* A daemon with a snapshot, and enough to write for another that takes some seconds. */
static int set_up(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 100000, 10, 6);
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring'}");
    snapshots_fill(service);
    *state = service;
    return 0;
}

static void assert_only_the_first_is_there(struct service *service)
{
    assert_string_equal(snapshots_names(service, ""), "latest spring");
    assert_string_equal(snapshots_latest(service), "spring");
    assert_true(snapshots_have(service, "latest/manifest.json"));
}

/* --- while one is written -----------------------------------------------------------------------
 */

static void another_is_refused_while_one_is_written(void **state)
{
    struct service *service = *state;
    struct peer writer;
    unsigned id = snapshots_begin_slow(service, &writer, "summer");
    const json_t *error = ask_refused(&service->peer, "snapshot.write", "{'name': 'autumn'}");
    assert_error(error, -32005, "");
    assert_non_null(strstr(string(error, "message"), "A snapshot is being written already"));
    assert_string_equal(string(peer_result(&writer, id), "name"), "summer");
    peer_close(&writer);
    assert_string_equal(snapshots_names(service, ""), "latest spring summer");
}

static void the_one_before_is_the_latest_until_it_is_whole(void **state)
{
    struct service *service = *state;
    struct peer writer;
    unsigned id = snapshots_begin_slow(service, &writer, "summer");
    assert_string_equal(snapshots_names(service, ""), ".summer.part latest spring");
    assert_string_equal(snapshots_latest(service), "spring");
    assert_string_equal(snapshots_listed(service), "spring");
    (void)peer_result(&writer, id);
    peer_close(&writer);
    assert_string_equal(snapshots_latest(service), "summer");
}

static void filing_and_asking_go_on_meanwhile(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    struct peer writer;
    json_int_t before = ask_seq(peer);
    unsigned id = snapshots_begin_slow(service, &writer, "summer");
    logbook_file(peer, 200000, 200, 12);
    wait_until_learned(peer);
    (void)ask(peer, "item.gaps", "{'id': 'entry 200000'}");
    (void)ask(peer, "desk.worklist", "{}");
    assert_members(snapshots_state(peer), "{'running': true}");
    assert_int_equal(whole(peer_result(&writer, id), "seq"), before);
    peer_close(&writer);
    assert_int_equal(ask_seq(peer), before + 200);
}

static void the_state_tells_how_far_it_is_and_then_what_came_of_it(void **state)
{
    struct service *service = *state;
    struct peer writer;
    unsigned id = snapshots_begin_slow(service, &writer, "summer");
    const json_t *running = snapshots_state(&service->peer);
    assert_members(running, "{'running': true, 'name': null, 'seq': null, 'failure': null}");
    assert_true(whole(running, "of") >= whole(running, "bytes"));
    const json_t *written = peer_result(&writer, id);
    const json_t *ended = snapshots_state(&service->peer);
    assert_members(ended, "{'running': false, 'name': 'summer', 'failure': null}");
    assert_int_equal(whole(ended, "bytes"), whole(written, "bytes"));
    assert_int_equal(whole(ended, "seq"), whole(written, "seq"));
    peer_close(&writer);
}

/* --- broken off ---------------------------------------------------------------------------------
 */

static void what_a_killed_daemon_leaves_is_removed_at_the_next_start(void **state)
{
    struct service *service = *state;
    struct peer writer;
    (void)snapshots_begin_slow(service, &writer, "summer");
    undertagd_kill(&service->daemon);
    peer_close(&writer);
    assert_string_equal(snapshots_names(service, ""), ".summer.part latest spring");
    service_restart(service);
    assert_only_the_first_is_there(service);
    assert_true(undertagd_said(&service->daemon, "1 that had not become whole removed from"));
    (void)ask(&service->peer, "snapshot.write", "{'name': 'summer'}"); /* the name is free */
    assert_string_equal(snapshots_latest(service), "summer");
}

/* It would take seconds to become whole: it is given up. Whoever waits is told. */
static void a_daemon_that_is_stopped_gives_it_up_and_leaves_nothing(void **state)
{
    struct service *service = *state;
    struct peer writer;
    unsigned id = snapshots_begin_slow(service, &writer, "summer");
    child_signal(&service->daemon.child, SIGTERM);
    assert_error(peer_error(&writer, id), -32006, "");
    assert_int_equal(child_wait(&service->daemon.child), 0);
    peer_close(&writer);
    assert_only_the_first_is_there(service);
    service_restart(service);
    assert_false(undertagd_said(&service->daemon, "had not become whole"));
}

/* --- a folder that is not ours ------------------------------------------------------------------
 */

static const char *exports_of(const struct service *service)
{
    static char path[SNAPSHOTS_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/exports", service->daemon.home);
    return path;
}

static int set_up_without_folder(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    logbook_file(&service->peer, 0, 10, 6);
    *state = service;
    return 0;
}

/* In one sentence that names it, and as a fault until one can be written. */
static void assert_refused_for(struct service *service, const char *reason)
{
    struct peer *peer = &service->peer;
    const json_t *error = ask_refused(peer, "snapshot.write", "{}");
    const char *message = string(error, "message");
    assert_error(error, -32005, "");
    if (!strstr(message, reason) || !strstr(message, exports_of(service))) {
        fail_msg("%s", message);
    }
    const json_t *faults = json_object_get(ask(peer, "daemon.state", "{}"), "faults");
    assert_int_equal(json_array_size(faults), 1);
    assert_non_null(strstr(json_string_value(json_array_get(faults, 0)), reason));
}

static void assert_written_once_it_is_gone(struct service *service)
{
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring'}");
    assert_string_equal(snapshots_names(service, ""), "latest spring");
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

static void a_link_is_not_followed(void **state)
{
    struct service *service = *state;
    char elsewhere[UNDERTAGD_PATH_BYTES];
    undertagd_path(&service->daemon, "elsewhere", elsewhere);
    assert_int_equal(mkdir(elsewhere, 0750), 0);
    assert_int_equal(symlink(elsewhere, exports_of(service)), 0);
    assert_refused_for(service, "is no folder");
    assert_int_equal(rmdir(elsewhere), 0); /* nothing is in it */
    assert_int_equal(unlink(exports_of(service)), 0);
    assert_written_once_it_is_gone(service);
}

static void a_file_in_its_place_is_left_alone(void **state)
{
    struct service *service = *state;
    int fd = open(exports_of(service), O_WRONLY | O_CREAT | O_CLOEXEC, 0640);
    assert_true(fd >= 0);
    assert_int_equal(close(fd), 0);
    assert_refused_for(service, "is no folder");
    assert_int_equal(unlink(exports_of(service)), 0);
    assert_written_once_it_is_gone(service);
}

static void a_folder_that_others_may_write_to_is_not_used(void **state)
{
    struct service *service = *state;
    assert_int_equal(mkdir(exports_of(service), 0750), 0);
    assert_int_equal(chmod(exports_of(service), 0777), 0);
    assert_refused_for(service, "can be written to by others");
    assert_string_equal(snapshots_names(service, ""), "");
    assert_int_equal(chmod(exports_of(service), 0750), 0);
    assert_written_once_it_is_gone(service);
}

static void a_folder_of_somebody_else_is_not_used(void **state)
{
    struct service *service = *state;
    if (geteuid() != 0) {
        print_message("skipped: only root can give a folder away\n");
        skip();
    }
    assert_int_equal(mkdir(exports_of(service), 0750), 0);
    assert_int_equal(chown(exports_of(service), 61911, (gid_t)-1), 0);
    assert_refused_for(service, "belongs to");
    assert_int_equal(chown(exports_of(service), geteuid(), (gid_t)-1), 0);
    assert_written_once_it_is_gone(service);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, service_tear_down)
#define TEST_FOLDER(function)                                                                      \
    cmocka_unit_test_setup_teardown(function, set_up_without_folder, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(another_is_refused_while_one_is_written),
        TEST(the_one_before_is_the_latest_until_it_is_whole),
        TEST(filing_and_asking_go_on_meanwhile),
        TEST(the_state_tells_how_far_it_is_and_then_what_came_of_it),
        TEST(what_a_killed_daemon_leaves_is_removed_at_the_next_start),
        TEST(a_daemon_that_is_stopped_gives_it_up_and_leaves_nothing),
        TEST_FOLDER(a_link_is_not_followed),
        TEST_FOLDER(a_file_in_its_place_is_left_alone),
        TEST_FOLDER(a_folder_that_others_may_write_to_is_not_used),
        TEST_FOLDER(a_folder_of_somebody_else_is_not_used),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
