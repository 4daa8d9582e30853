/*
 * A home made of a backup: the daemon on it answers as the first one did at the backup's last
 * change, and learns the same. What is damaged or half restored is no home.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/answers.h"
#include "tests/integration/backup_desk.h"
#include "tests/integration/weights_checksum.h"

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
    desk_feed(peer, DESK_CHANGES);
    unsigned id = desk_begin_slowly(desk, "monday");
    unsigned k = DESK_CHANGES;
    while (!peer_has_something(&desk->operator)) {
        desk_change(peer, ++k);
    }
    const json_t *written = peer_result(&desk->operator, id);
    unsigned seq = (unsigned)whole(written, "seq");
    assert_in_range(seq, DESK_CHANGES + 1, k);              /* the feed went on */
    assert_in_range(whole(written, "learned"), 1, seq - 1); /* some is to be learned again */
    desk_restore(desk, "monday", 0);
    desk_start_restored(desk);
    assert_int_equal(ask_seq(&desk->reader), seq);
    wait_until_learned(&desk->reader);

    struct service *other = service_new("rehearsal_share=0", NULL, NULL);
    desk_feed(&other->peer, seq);
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
    desk_restore(desk, string(written, "name"), 0);
    desk_start_restored(desk);
    desk_change(&desk->reader, 1);
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
    desk_feed(&desk->service->peer, 50);
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    for (size_t i = 0; i < sizeof files / sizeof files[0]; i++) {
        flip_a_byte(desk_path(desk, files[i]));
        desk_restore(desk, "monday", EX_DATAERR);
        assert_non_null(strstr(desk_run.error, "damaged"));
        assert_int_not_equal(stat(desk->restored.home, &status), 0); /* nothing was made */
        flip_a_byte(desk_path(desk, files[i]));
    }
    desk_restore(desk, "monday", 0);
}

static void a_file_that_is_missing_or_a_link_is_refused(void **state)
{
    struct desk *desk = *state;
    char moved[DESK_PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    (void)snprintf(moved, sizeof moved, "%s", desk_path(desk, "elsewhere"));
    assert_int_equal(rename(desk_path(desk, "monday/model/data.mdb"), moved), 0);
    desk_restore(desk, "monday", EX_DATAERR);
    assert_int_equal(symlink(moved, desk_path(desk, "monday/model/data.mdb")), 0);
    desk_restore(desk, "monday", EX_DATAERR);
    desk_restore(desk, "tuesday", EX_NOINPUT);
}

static void a_home_that_is_not_empty_is_left_alone(void **state)
{
    struct desk *desk = *state;
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    desk_restore(desk, "monday", 0);
    desk_start_restored(desk);
    desk_change(&desk->reader, 1);
    desk_restore(desk, "monday", EX_CANTCREAT); /* also while a daemon is in it */
    assert_non_null(strstr(desk_run.error, "is not empty"));
    assert_int_equal(ask_seq(&desk->reader), 1);
}

/* The default puts the exports into the home that is to be restored. */
static void a_home_that_has_only_its_exports_is_empty(void **state)
{
    struct desk *desk = *state;
    char path[DESK_PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    assert_int_equal(mkdir(desk->restored.home, 0700), 0);
    (void)snprintf(path, sizeof path, "%s/exports", desk->restored.home);
    assert_int_equal(mkdir(path, 0700), 0);
    desk_restore(desk, "monday", 0);
}

/* As a kill leaves it between its last two steps. */
static void what_a_killed_restore_has_left_is_no_home_and_is_begun_anew(void **state)
{
    struct desk *desk = *state;
    static const char *const made[] = {"", "/.restore.part", "/.restore.part/store", "/model"};
    char path[DESK_PATH_BYTES];
    (void)ask(&desk->operator, "backup.write", "{'name': 'monday'}");
    for (size_t i = 0; i < sizeof made / sizeof made[0]; i++) {
        (void)snprintf(path, sizeof path, "%s%s", desk->restored.home, made[i]);
        assert_int_equal(mkdir(path, 0700), 0);
    }
    program_run("undertagd",
                (const char *const[]){"--home", desk->restored.home, "--socket",
                                      desk->restored.socket, NULL},
                "", &desk_run);
    assert_int_equal(desk_run.exit_code, EX_CONFIG);
    assert_non_null(strstr(desk_run.error, "run undertagd --restore again"));
    desk_restore(desk, "monday", 0);
    desk_start_restored(desk);
    desk_change(&desk->reader, 1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, desk_set_up, desk_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_restored_daemon_is_as_the_first_was_at_that_change),
        TEST(an_empty_daemon_can_be_restored_too),
        TEST(a_byte_that_is_another_is_refused_in_each_file),
        TEST(a_file_that_is_missing_or_a_link_is_refused),
        TEST(a_home_that_is_not_empty_is_left_alone),
        TEST(a_home_that_has_only_its_exports_is_empty),
        TEST(what_a_killed_restore_has_left_is_no_home_and_is_begun_anew),
    };
    return cmocka_run_group_tests_name("restore", tests, NULL, NULL);
}
