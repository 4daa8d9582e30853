/*
 * A backup that is written while all goes on. What is stopped, killed or refused in between leaves
 * nothing.
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
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/answers.h"
#include "tests/integration/backup_desk.h"

/* --- written -----------------------------------------------------------------------------------
 */

static void what_is_written_says_what_it_is(void **state)
{
    struct desk *desk = *state;
    desk_feed(&desk->service->peer, 20);
    wait_until_learned(&desk->service->peer);
    const json_t *written = ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    assert_string_equal(string(written, "name"), "monday");
    assert_string_equal(string(written, "path"), desk_path(desk, "monday"));
    assert_int_equal(whole(written, "seq"), 20);
    assert_true(number(written, "seconds") > 0.0);
    json_t *note = json_load_file(desk_path(desk, "monday/backup.json"), 0, NULL);
    assert_members(note, "{'format': 1, 'seq': 20}");
    json_int_t bytes = 0;
    for (size_t i = 0; i < 2; i++) {
        bytes += whole(json_array_get(json_object_get(note, "files"), i), "bytes");
    }
    assert_in_range(whole(written, "bytes") - bytes, 100, 2000); /* the note itself */
    json_decref(note);
    program_run("undertagd",
                (const char *const[]){"--verify", "--home", desk_path(desk, "monday"), NULL}, "",
                &desk_run);
    assert_int_equal(desk_run.exit_code, 0);
}

/* --- refused -----------------------------------------------------------------------------------
 */

static void only_one_is_written_at_a_time_and_the_state_tells_of_it(void **state)
{
    struct desk *desk = *state;
    struct peer *peer = &desk->service->peer;
    desk_feed(peer, DESK_CHANGES);
    unsigned id = desk_begin_slowly(desk, "monday");
    const json_t *backup = json_object_get(ask(peer, "daemon.state", "{}"), "backup");
    assert_string_equal(string(backup, "name"), "monday");
    assert_in_range(whole(backup, "bytes"), 1, whole(backup, "of"));
    assert_int_equal(string(backup, "since")[10], 'T');
    assert_error(ask_refused(peer, "backup.write", "{'name': 'tuesday'}"), STORE, "");
    assert_error(ask_refused(peer, "daemon.rebuild", "{}"), STORE, "");
    assert_int_equal(whole(peer_result(&desk->operator, id), "seq"), DESK_CHANGES);
    assert_true(json_is_null(json_object_get(ask(peer, "daemon.state", "{}"), "backup")));
    (void)ask(peer, "daemon.rebuild", "{}"); /* it may again */
    wait_until_rebuilt(peer);
}

/* So many changes take longer to learn than a request takes to come. */
static void while_a_rebuild_is_under_way_none_is_written(void **state)
{
    struct desk *desk = *state;
    struct peer *peer = &desk->service->peer;
    desk_feed(peer, DESK_CHANGES);
    (void)ask(peer, "daemon.rebuild", "{'settings': {'loss': 'hinge'}}");
    assert_error(ask_refused(peer, "backup.write", "{'name': 'monday'}"), STORE, "");
    assert_false(desk_has(desk, "monday"));
    wait_until_rebuilt(peer);
    (void)ask(peer, "backup.write", "{'name': 'monday'}");
}

static void a_name_that_is_none_or_is_taken_is_refused(void **state)
{
    struct desk *desk = *state;
    static const char *const names[] = {"../out", "latest", ".part", "a b", "/tmp/monday"};
    struct peer *peer = &desk->operator;
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        assert_error(ask_refused(peer, "backup.write", "{'name': '%s'}", names[i]), PARAMS,
                     "/name");
    }
    assert_error(ask_refused(peer, "backup.write", "{'rate': 1000}"), PARAMS, "/rate");
    assert_error(ask_refused(peer, "backup.write", "{'wait': true}"), PARAMS, "/wait");
    (void)ask(peer, "backup.write", "{'name': '%s'}",
              desk_path(desk, "monday")); /* a path is one, too */
    assert_error(ask_refused(peer, "backup.write", "{'name': 'monday'}"), PARAMS, "/name");
}

/* Overwrites the number of the page of the store's file that has this text: reading passes over it.
 */
static void damage_page_of(const struct desk *desk, const char *text)
{
    enum {
        PAGE_BYTES = 4096,
        MOST_PAGES = 1024
    };
    static char bytes[MOST_PAGES * PAGE_BYTES];
    char path[DESK_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", desk->service->daemon.home);
    int fd = open(path, O_RDWR);
    assert_true(fd >= 0);
    ssize_t size = read(fd, bytes, sizeof bytes);
    assert_true(size > 0);
    const char *found = memmem(bytes, (size_t)size, text, strlen(text));
    assert_non_null(found);
    off_t page = (found - bytes) / PAGE_BYTES;
    assert_int_equal(pwrite(fd, "damaged", 7, page * PAGE_BYTES), 7);
    assert_int_equal(close(fd), 0);
}

/* LMDB would copy it, or end the daemon. */
static void a_damaged_page_is_told_and_nothing_is_written(void **state)
{
    struct desk *desk = *state;
    (void)ask(&desk->service->peer, "item.file", "{'id': 'a', 'text': 'fog', 'tags': ['fog']}");
    wait_until_learned(&desk->service->peer);
    assert_int_equal(undertagd_stop(&desk->service->daemon), 0);
    damage_page_of(desk, "fog");
    peer_close(&desk->operator);
    service_restart(desk->service);
    peer_open(&desk->operator, desk->service->daemon.socket);
    const json_t *error = ask_refused(&desk->operator, "backup.write", "{'name': 'monday'}");
    assert_error(error, INTERNAL, "");
    assert_non_null(strstr(string(error, "message"), "The store is damaged"));
    assert_false(desk_has(desk, "monday"));
    assert_false(desk_has(desk, ".monday.part"));
}

/* --- ended before its end ----------------------------------------------------------------------
 */

static void stopping_the_daemon_ends_it_and_leaves_nothing(void **state)
{
    struct desk *desk = *state;
    desk_feed(&desk->service->peer, DESK_CHANGES);
    unsigned id = desk_begin_slowly(desk, "monday");
    child_signal(&desk->service->daemon.child, SIGTERM);
    assert_error(peer_error(&desk->operator, id), STOPPING, "");
    assert_int_equal(undertagd_stop(&desk->service->daemon), 0);
    assert_false(desk_has(desk, "monday"));
    assert_false(desk_has(desk, ".monday.part"));
    service_restart(desk->service);
}

static void one_that_a_kill_has_ended_is_swept_by_the_next_start(void **state)
{
    struct desk *desk = *state;
    desk_feed(&desk->service->peer, DESK_CHANGES);
    (void)desk_begin_slowly(desk, "monday");
    undertagd_kill(&desk->service->daemon);
    assert_true(desk_has(desk, ".monday.part"));
    desk_restore(desk, ".monday.part", EX_DATAERR);
    service_restart(desk->service);
    assert_false(desk_has(desk, "monday"));
    assert_false(desk_has(desk, ".monday.part"));
    assert_true(undertagd_said(&desk->service->daemon, "1 that had not become whole removed"));
    assert_int_equal(ask_seq(&desk->service->peer), DESK_CHANGES);
}

static void one_whose_peer_has_gone_is_written_all_the_same(void **state)
{
    struct desk *desk = *state;
    desk_feed(&desk->service->peer, DESK_CHANGES);
    (void)desk_begin_slowly(desk, "monday");
    peer_close(&desk->operator);
    undertagd_wait_for(&desk->service->daemon, "monday is written");
    desk_restore(desk, "monday", 0);
    peer_open(&desk->operator, desk->service->daemon.socket);
    (void)ask(&desk->operator, "backup.write", "{'name': 'tuesday'}");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, desk_set_up, desk_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_written_says_what_it_is),
        TEST(only_one_is_written_at_a_time_and_the_state_tells_of_it),
        TEST(while_a_rebuild_is_under_way_none_is_written),
        TEST(a_name_that_is_none_or_is_taken_is_refused),
        TEST(a_damaged_page_is_told_and_nothing_is_written),
        TEST(stopping_the_daemon_ends_it_and_leaves_nothing),
        TEST(one_that_a_kill_has_ended_is_swept_by_the_next_start),
        TEST(one_whose_peer_has_gone_is_written_all_the_same),
    };
    return cmocka_run_group_tests_name("backup", tests, NULL, NULL);
}
