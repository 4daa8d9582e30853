/*
 * Exports on a file system that is really full: a small one in memory, which only root can mount,
 * in a name space of its own. The home is elsewhere, and has room.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sched.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mount.h>
#include <sys/stat.h>

#include "tests/integration/logbook.h"
#include "tests/integration/snapshots.h"

enum {
    SMALL_KIB = 1024,
    STEP_KIB = 256,
    LARGE_KIB = 64 * 1024
};

/* Mounts are ours alone from now on. */
static bool may_mount(void)
{
    return unshare(CLONE_NEWNS) == 0 && mount(NULL, "/", NULL, MS_REC | MS_PRIVATE, NULL) == 0;
}

static void mount_exports(const struct service *service, unsigned kib, unsigned long flags)
{
    char options[64];
    (void)snprintf(options, sizeof options, "size=%uk,mode=0750", kib);
    assert_int_equal(mount("small", snapshots_path(service, ""), "tmpfs", flags, options), 0);
}

/* Room for the snapshot that is there, of a few entries, and not for another of what there is
 * now. */
static int set_up(void **state)
{
    struct service *service = service_new(NULL, NULL, NULL);
    assert_int_equal(mkdir(snapshots_path(service, ""), 0750), 0);
    mount_exports(service, SMALL_KIB, 0);
    logbook_file(&service->peer, 100000, 10, 6);
    (void)ask(&service->peer, "snapshot.write", "{'name': 'spring'}");
    snapshots_fill(service);
    *state = service;
    return 0;
}

static int tear_down(void **state)
{
    struct service *service = *state;
    assert_int_equal(umount2(snapshots_path(service, ""), MNT_DETACH), 0);
    return service_tear_down(state);
}

static void assert_told(const json_t *error, const json_t *state)
{
    const char *message = string(error, "message");
    const json_t *faults = json_object_get(state, "faults");
    assert_error(error, -32005, "");
    assert_non_null(strstr(message, "The snapshot cannot be written: "));
    assert_non_null(strstr(message, ". The one before stays."));
    assert_int_equal(json_array_size(faults), 1);
    assert_non_null(strstr(json_string_value(json_array_get(faults, 0)),
                           "the last snapshot could not be written"));
}

static void a_full_disk_is_told_and_the_one_before_stays(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    const json_t *error = ask_refused(peer, "snapshot.write", "{'name': 'summer'}");
    assert_told(error, ask(peer, "daemon.state", "{}"));
    assert_non_null(strstr(string(error, "message"), "No space left on device"));
    assert_string_equal(snapshots_names(service, ""), "latest spring");
    assert_string_equal(snapshots_latest(service), "spring");
    (void)ask(peer, "item.file", "{'id': 'late', 'tags': ['fog']}"); /* the home has room */
}

/* There is a little more each time, until there is enough: so it fails at one file after another.
 */
static void wherever_it_fails_nothing_is_left(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    unsigned failed = 0;
    for (unsigned kib = SMALL_KIB; kib < LARGE_KIB; kib += STEP_KIB) {
        mount_exports(service, kib, MS_REMOUNT);
        unsigned id = peer_request(peer, "snapshot.write", "{'name': 'summer', 'items': true}");
        const json_t *answer = peer_answer(peer);
        assert_int_equal(whole(answer, "id"), id);
        if (json_object_get(answer, "result")) {
            break;
        }
        failed++;
        assert_told(json_object_get(answer, "error"), ask(peer, "daemon.state", "{}"));
        assert_string_equal(snapshots_names(service, ""), "latest spring");
    }
    assert_true(failed >= 3);
    assert_string_equal(snapshots_names(service, ""), "latest spring summer");
    assert_string_equal(snapshots_latest(service), "summer");
    assert_json(json_object_get(ask(peer, "daemon.state", "{}"), "faults"), "[]");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(a_full_disk_is_told_and_the_one_before_stays, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(wherever_it_fails_nothing_is_left, set_up, tear_down),
    };
    if (!may_mount()) {
        (void)puts("skipped: only root can mount a small file system");
        return 0;
    }
    return cmocka_run_group_tests_name("snapshots on a small disk", tests, NULL, NULL);
}
