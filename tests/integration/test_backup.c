/*
 * A backup that is written while a feed goes on, and a home made of it: the daemon on that answers
 * as the first one did at the backup's last change, and learns the same. What is stopped, killed or
 * damaged in between is no backup and no home.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/answers.h"
#include "tests/integration/logbook.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"
#include "tests/integration/weights_checksum.h"

enum {
    BEFORE = 1200, /* changes before the backup is asked for */
    WINDOW = 32,   /* of them under way */
    WORDS = 60,
    TEXT_BYTES = 12 * WORDS + 1,
    PATH_BYTES = 256,
    SLOW = 1 << 20, /* bytes a second: it takes seconds */
    PARAMS = -32602,
    STORE = -32005,
    STOPPING = -32006
};

static struct program_run run;

/* --- fixture: a daemon, and one that may be made of its backup -------------------------------- */

struct desk {
    struct service *service;
    struct peer operator;
    struct undertagd restored;
    struct peer reader; /* of the restored one */
    bool is_reading;
};

static int set_up(void **state)
{
    struct desk *desk = calloc(1, sizeof *desk);
    assert_non_null(desk);
    desk->service = service_new("rehearsal_share=0", "flush_every_ms=30", NULL);
    peer_open(&desk->operator, desk->service->daemon.socket);
    undertagd_make(&desk->restored);
    desk->restored.settings[0] = "rehearsal_share=0";
    *state = desk;
    return 0;
}

static int tear_down(void **state)
{
    struct desk *desk = *state;
    if (desk->is_reading) {
        peer_close(&desk->reader);
    }
    peer_close(&desk->operator);
    int result = undertagd_remove(&desk->restored);
    void *service = desk->service;
    result |= service_tear_down(&service);
    free(desk);
    return result;
}

static const char *at(const struct desk *desk, const char *name)
{
    static char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/exports/%s", desk->service->daemon.home, name);
    return path;
}

static bool is_there(const struct desk *desk, const char *name)
{
    struct stat status;
    return lstat(at(desk, name), &status) == 0;
}

/* --- changes -----------------------------------------------------------------------------------
 */

/* Change k gets seq k. Of eight, one withdraws the entry filed before it, one revises an older one.
 */
static void send_change(struct peer *peer, unsigned k)
{
    char text[TEXT_BYTES];
    char tags[LOGBOOK_TAGS_BYTES];
    if (k % 8 == 4) {
        (void)peer_request(peer, "item.withdraw", "{'id': 'entry %u'}", k - 1);
        return;
    }
    logbook_text(k, WORDS, text, sizeof text);
    logbook_tags(k, tags);
    (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}",
                       k % 8 == 0 ? k / 2 : k, text, tags);
}

static void change(struct peer *peer, unsigned k)
{
    send_change(peer, k);
    assert_int_equal(whole(peer_result(peer, peer->last_id), "seq"), k);
}

static void feed(struct peer *peer, unsigned count)
{
    unsigned first_id = peer->last_id + 1;
    unsigned sent = 0;
    for (unsigned k = 1; k <= count; k++) {
        while (sent < count && sent < k + WINDOW) {
            send_change(peer, ++sent);
        }
        assert_int_equal(whole(peer_result(peer, first_id + k - 1), "seq"), k);
    }
}

/* --- steps -------------------------------------------------------------------------------------
 */

static void restore(const struct desk *desk, const char *backup, int expected)
{
    program_run(
        "undertagd",
        (const char *const[]){"--home", desk->restored.home, "--restore", at(desk, backup), NULL},
        "", &run);
    if (run.exit_code != expected) {
        fail_msg("%d instead of %d: %s", run.exit_code, expected, run.error);
    }
}

static void start_restored(struct desk *desk)
{
    undertagd_start(&desk->restored);
    peer_open(&desk->reader, desk->restored.socket);
    desk->is_reading = true;
}

/* Asks for a slow one, and waits until some of it is written. */
static unsigned begin_slowly(struct desk *desk, const char *name)
{
    unsigned id =
        peer_request(&desk->operator, "backup.write", "{'name': '%s', 'rate': %d}", name, SLOW);
    for (;;) {
        const json_t *state = ask(&desk->service->peer, "daemon.state", "{}");
        const json_t *backup = json_object_get(state, "backup");
        if (json_is_object(backup) && whole(backup, "bytes") > 0) {
            return id;
        }
        assert_false(peer_has_something(&desk->operator)); /* that would be its end */
    }
}

/* What is stored and what is learned of it, as far as it does not depend on the clock. */
static const char *figures_of(struct peer *peer)
{
    static const char *const MEMBERS[] = {"items", "tags", "words", "weights", "seq", "learned"};
    const json_t *state = ask(peer, "daemon.state", "{}");
    json_t *figures = json_object();
    for (size_t i = 0; i < sizeof MEMBERS / sizeof MEMBERS[0]; i++) {
        assert_int_equal(json_object_set(figures, MEMBERS[i], json_object_get(state, MEMBERS[i])),
                         0);
    }
    assert_int_equal(json_object_set(figures, "list", ask(peer, "item.list", "{'most': 10000}")),
                     0);
    assert_int_equal(json_object_set(figures, "names", ask(peer, "tag.list", "{}")), 0);
    assert_int_equal(json_object_set(figures, "bands",
                                     json_object_get(ask(peer, "desk.standing", "{}"), "bands")),
                     0);
    const char *text = text_of(peer, figures);
    json_decref(figures);
    return text;
}

/* Every item as people read it, without the time at which it came. */
static const char *items_of(struct peer *peer, unsigned changes)
{
    json_t *items = json_array();
    for (unsigned k = 1; k <= changes; k++) {
        unsigned id = peer_request(peer, "item.show", "{'id': 'entry %u'}", k);
        json_t *answer = peer_answer(peer);
        assert_int_equal(whole(answer, "id"), id);
        json_t *item = json_object_get(answer, "result");
        if (item) {
            assert_int_equal(json_object_del(item, "stored_at"), 0);
            assert_int_equal(json_array_append(items, item), 0);
        }
    }
    assert_true(json_array_size(items) > changes / 2);
    const char *text = text_of(peer, items);
    json_decref(items);
    return text;
}

/* --- restored ----------------------------------------------------------------------------------
 */

static void a_restored_daemon_is_as_the_first_was_at_that_change(void **state)
{
    struct desk *desk = *state;
    struct peer *peer = &desk->service->peer;
    feed(peer, BEFORE);
    unsigned id = begin_slowly(desk, "monday");
    unsigned k = BEFORE;
    while (!peer_has_something(&desk->operator)) {
        change(peer, ++k);
    }
    const json_t *written = peer_result(&desk->operator, id);
    unsigned seq = (unsigned)whole(written, "seq");
    assert_in_range(seq, BEFORE + 1, k);                    /* the feed went on */
    assert_in_range(whole(written, "learned"), 1, seq - 1); /* some is to be learned again */
    restore(desk, "monday", 0);
    start_restored(desk);
    assert_int_equal(ask_seq(&desk->reader), seq);
    wait_until_learned(&desk->reader);

    struct service *other = service_new("rehearsal_share=0", NULL, NULL);
    feed(&other->peer, seq);
    wait_until_learned(&other->peer);
    assert_string_equal(figures_of(&desk->reader), figures_of(&other->peer));
    assert_string_equal(items_of(&desk->reader, seq), items_of(&other->peer, seq));
    assert_string_equal(answers_of(&desk->reader, seq), answers_of(&other->peer, seq));
    assert_int_equal(undertagd_stop(&desk->restored), 0);
    assert_int_equal(undertagd_stop(&other->daemon), 0);
    assert_true(weights_checksum(desk->restored.home) == weights_checksum(other->daemon.home));
    void *gone = other;
    assert_int_equal(service_tear_down(&gone), 0);
}

static void an_empty_daemon_can_be_restored_too(void **state)
{
    struct desk *desk = *state;
    const json_t *written = ask(&desk->operator, "backup.write", "{}");
    assert_members(written, "{'seq': 0, 'learned': 0}");
    restore(desk, string(written, "name"), 0);
    start_restored(desk);
    change(&desk->reader, 1);
}

static void what_is_written_says_what_it_is(void **state)
{
    struct desk *desk = *state;
    feed(&desk->service->peer, 20);
    wait_until_learned(&desk->service->peer);
    const json_t *written = ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    assert_string_equal(string(written, "name"), "monday");
    assert_string_equal(string(written, "path"), at(desk, "monday"));
    assert_int_equal(whole(written, "seq"), 20);
    assert_true(number(written, "seconds") > 0.0);
    json_t *note = json_load_file(at(desk, "monday/backup.json"), 0, NULL);
    assert_members(note, "{'format': 1, 'seq': 20}");
    json_int_t bytes = 0;
    for (size_t i = 0; i < 2; i++) {
        bytes += whole(json_array_get(json_object_get(note, "files"), i), "bytes");
    }
    assert_in_range(whole(written, "bytes") - bytes, 100, 2000); /* the note itself */
    json_decref(note);
    program_run("undertagd", (const char *const[]){"--verify", "--home", at(desk, "monday"), NULL},
                "", &run);
    assert_int_equal(run.exit_code, 0);
}

/* --- refused -----------------------------------------------------------------------------------
 */

static void only_one_is_written_at_a_time_and_the_state_tells_of_it(void **state)
{
    struct desk *desk = *state;
    struct peer *peer = &desk->service->peer;
    feed(peer, BEFORE);
    unsigned id = begin_slowly(desk, "monday");
    const json_t *backup = json_object_get(ask(peer, "daemon.state", "{}"), "backup");
    assert_string_equal(string(backup, "name"), "monday");
    assert_in_range(whole(backup, "bytes"), 1, whole(backup, "of"));
    assert_int_equal(string(backup, "since")[10], 'T');
    assert_error(ask_refused(peer, "backup.write", "{'name': 'tuesday'}"), STORE, "");
    assert_error(ask_refused(peer, "daemon.rebuild", "{}"), STORE, "");
    assert_int_equal(whole(peer_result(&desk->operator, id), "seq"), BEFORE);
    assert_true(json_is_null(json_object_get(ask(peer, "daemon.state", "{}"), "backup")));
    (void)ask(peer, "daemon.rebuild", "{}"); /* it may again */
    wait_until_rebuilt(peer);
}

/* So many changes take longer to learn than a request takes to come. */
static void while_a_rebuild_is_under_way_none_is_written(void **state)
{
    struct desk *desk = *state;
    struct peer *peer = &desk->service->peer;
    feed(peer, BEFORE);
    (void)ask(peer, "daemon.rebuild", "{'settings': {'loss': 'hinge'}}");
    assert_error(ask_refused(peer, "backup.write", "{'name': 'monday'}"), STORE, "");
    assert_false(is_there(desk, "monday"));
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
    (void)ask(peer, "backup.write", "{'name': '%s'}", at(desk, "monday")); /* a path is one, too */
    assert_error(ask_refused(peer, "backup.write", "{'name': 'monday'}"), PARAMS, "/name");
}

/* --- ended before its end ----------------------------------------------------------------------
 */

static void stopping_the_daemon_ends_it_and_leaves_nothing(void **state)
{
    struct desk *desk = *state;
    feed(&desk->service->peer, BEFORE);
    unsigned id = begin_slowly(desk, "monday");
    child_signal(&desk->service->daemon.child, SIGTERM);
    assert_error(peer_error(&desk->operator, id), STOPPING, "");
    assert_int_equal(undertagd_stop(&desk->service->daemon), 0);
    assert_false(is_there(desk, "monday"));
    assert_false(is_there(desk, ".monday.part"));
    service_restart(desk->service);
}

static void one_that_a_kill_has_ended_is_swept_by_the_next_start(void **state)
{
    struct desk *desk = *state;
    feed(&desk->service->peer, BEFORE);
    (void)begin_slowly(desk, "monday");
    undertagd_kill(&desk->service->daemon);
    assert_true(is_there(desk, ".monday.part"));
    restore(desk, ".monday.part", EX_DATAERR);
    service_restart(desk->service);
    assert_false(is_there(desk, "monday"));
    assert_false(is_there(desk, ".monday.part"));
    assert_true(undertagd_said(&desk->service->daemon, "1 that had not become whole removed"));
    assert_int_equal(ask_seq(&desk->service->peer), BEFORE);
}

static void one_whose_peer_has_gone_is_written_all_the_same(void **state)
{
    struct desk *desk = *state;
    feed(&desk->service->peer, BEFORE);
    (void)begin_slowly(desk, "monday");
    peer_close(&desk->operator);
    undertagd_wait_for(&desk->service->daemon, "monday is written");
    restore(desk, "monday", 0);
    peer_open(&desk->operator, desk->service->daemon.socket);
    (void)ask(&desk->operator, "backup.write", "{'name': 'tuesday'}");
}

/* --- damaged, or not to be restored ------------------------------------------------------------
 */

static void flip_a_byte(const char *path)
{
    struct stat status;
    unsigned char byte = 0;
    int fd = open(path, O_RDWR);
    assert_true(fd >= 0);
    assert_int_equal(fstat(fd, &status), 0);
    assert_int_equal(pread(fd, &byte, 1, status.st_size / 2), 1);
    byte ^= 1;
    assert_int_equal(pwrite(fd, &byte, 1, status.st_size / 2), 1);
    assert_int_equal(close(fd), 0);
}

static void a_byte_that_is_another_is_refused_in_each_file(void **state)
{
    struct desk *desk = *state;
    static const char *const files[] = {"monday/model/data.mdb", "monday/store/data.mdb",
                                        "monday/backup.json"};
    struct stat status;
    feed(&desk->service->peer, 50);
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    for (size_t i = 0; i < sizeof files / sizeof files[0]; i++) {
        flip_a_byte(at(desk, files[i]));
        restore(desk, "monday", EX_DATAERR);
        assert_non_null(strstr(run.error, "damaged"));
        assert_int_not_equal(stat(desk->restored.home, &status), 0); /* nothing was made */
        flip_a_byte(at(desk, files[i]));
    }
    restore(desk, "monday", 0);
}

static void a_file_that_is_missing_or_a_link_is_refused(void **state)
{
    struct desk *desk = *state;
    char moved[PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    (void)snprintf(moved, sizeof moved, "%s", at(desk, "elsewhere"));
    assert_int_equal(rename(at(desk, "monday/model/data.mdb"), moved), 0);
    restore(desk, "monday", EX_DATAERR);
    assert_int_equal(symlink(moved, at(desk, "monday/model/data.mdb")), 0);
    restore(desk, "monday", EX_DATAERR);
    restore(desk, "tuesday", EX_NOINPUT);
}

static void a_home_that_is_not_empty_is_left_alone(void **state)
{
    struct desk *desk = *state;
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    restore(desk, "monday", 0);
    start_restored(desk);
    change(&desk->reader, 1);
    restore(desk, "monday", EX_CANTCREAT); /* also while a daemon is in it */
    assert_non_null(strstr(run.error, "is not empty"));
    assert_int_equal(ask_seq(&desk->reader), 1);
}

/* The default puts the exports into the home that is to be restored. */
static void a_home_that_has_only_its_exports_is_empty(void **state)
{
    struct desk *desk = *state;
    char path[PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    assert_int_equal(mkdir(desk->restored.home, 0700), 0);
    (void)snprintf(path, sizeof path, "%s/exports", desk->restored.home);
    assert_int_equal(mkdir(path, 0700), 0);
    restore(desk, "monday", 0);
}

/* As a kill leaves it between its last two steps. */
static void what_a_killed_restore_has_left_is_no_home_and_is_begun_anew(void **state)
{
    struct desk *desk = *state;
    static const char *const made[] = {"", "/.restore.part", "/.restore.part/store", "/model"};
    char path[PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    for (size_t i = 0; i < sizeof made / sizeof made[0]; i++) {
        (void)snprintf(path, sizeof path, "%s%s", desk->restored.home, made[i]);
        assert_int_equal(mkdir(path, 0700), 0);
    }
    program_run("undertagd",
                (const char *const[]){"--home", desk->restored.home, "--socket",
                                      desk->restored.socket, NULL},
                "", &run);
    assert_int_equal(run.exit_code, EX_CONFIG);
    assert_non_null(strstr(run.error, "run undertagd --restore again"));
    restore(desk, "monday", 0);
    start_restored(desk);
    change(&desk->reader, 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_restored_daemon_is_as_the_first_was_at_that_change),
        TEST(an_empty_daemon_can_be_restored_too),
        TEST(what_is_written_says_what_it_is),
        TEST(only_one_is_written_at_a_time_and_the_state_tells_of_it),
        TEST(while_a_rebuild_is_under_way_none_is_written),
        TEST(a_name_that_is_none_or_is_taken_is_refused),
        TEST(stopping_the_daemon_ends_it_and_leaves_nothing),
        TEST(one_that_a_kill_has_ended_is_swept_by_the_next_start),
        TEST(one_whose_peer_has_gone_is_written_all_the_same),
        TEST(a_byte_that_is_another_is_refused_in_each_file),
        TEST(a_file_that_is_missing_or_a_link_is_refused),
        TEST(a_home_that_is_not_empty_is_left_alone),
        TEST(a_home_that_has_only_its_exports_is_empty),
        TEST(what_a_killed_restore_has_left_is_no_home_and_is_begun_anew),
    };
    return cmocka_run_group_tests_name("backup", tests, NULL, NULL);
}
