/*
 * A file system that is really full: a small one in memory, which only root can mount, in a name
 * space of its own. Nothing that was acknowledged is lost, what is refused is not there, reads go
 * on; and once there is room, all goes on.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <sched.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mount.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/integration/filling.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"

static const char SMALL[] = "size=12m";
static const char LARGER[] = "size=64m";

static struct program_run run;

/* Mounts are ours alone from now on. */
static bool may_mount(void)
{
    return unshare(CLONE_NEWNS) == 0 && mount(NULL, "/", NULL, MS_REC | MS_PRIVATE, NULL) == 0;
}

static int set_up(void **state)
{
    struct service *service = calloc(1, sizeof *service);
    assert_non_null(service);
    undertagd_make(&service->daemon);
    assert_int_equal(mkdir(service->daemon.home, 0700), 0);
    assert_int_equal(mount("small", service->daemon.home, "tmpfs", 0, SMALL), 0);
    service->daemon.settings[0] = "disk_reserve=0";
    service->daemon.settings[1] = "flush_every_ms=10";
    undertagd_start(&service->daemon);
    peer_open(&service->peer, service->daemon.socket);
    *state = service;
    return 0;
}

static int tear_down(void **state)
{
    struct service *service = *state;
    peer_close(&service->peer);
    (void)undertagd_stop(&service->daemon);
    assert_int_equal(umount2(service->daemon.home, MNT_DETACH), 0);
    return service_tear_down(state);
}

static void make_room(const struct service *service)
{
    assert_int_equal(mount("small", service->daemon.home, "tmpfs", MS_REMOUNT, LARGER), 0);
}

static void assert_whole(const struct service *service)
{
    program_run("undertagd",
                (const char *const[]){"--verify", "--home", service->daemon.home, NULL}, "", &run);
    assert_int_equal(run.exit_code, 0);
}

static void what_does_not_fit_on_the_disk_is_refused_and_the_rest_is_there(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    unsigned refused = filling_fill(peer);
    assert_true(refused > 10);
    assert_int_equal(ask_seq(peer), refused);
    assert_error(ask_refused(peer, "item.show", "{'id': 'entry %u'}", refused), -32001, "/id");
    assert_int_equal(whole(ask(peer, "item.show", "{'id': 'entry %u'}", refused - 1), "seq"),
                     refused);
    assert_whole(service);
}

static void all_goes_on_once_there_is_room(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    unsigned refused = filling_fill(peer);
    make_room(service);
    assert_int_equal(
        whole(ask(peer, "item.file", "{'id': 'late', 'text': 'fog', 'tags': ['fog']}"), "seq"),
        refused + 1);
    wait_until_learned(peer);
    assert_json(json_object_get(ask(peer, "daemon.state", "{}"), "faults"), "[]");
    service_stop_and_start(service);
    assert_int_equal(ask_seq(peer), refused + 1);
    assert_whole(service);
}

static void a_restart_on_a_full_disk_reads_what_is_there(void **state)
{
    struct service *service = *state;
    unsigned refused = filling_fill(&service->peer);
    undertagd_kill(&service->daemon);
    service_restart(service);
    assert_int_equal(ask_seq(&service->peer), refused);
    assert_int_equal(
        whole(ask(&service->peer, "item.show", "{'id': 'entry %u'}", refused - 1), "seq"), refused);
    make_room(service);
    wait_until_learned(&service->peer);
    assert_whole(service);
}

/* An emptied part would show, too: nothing at all is in the folder. */
static void a_backup_that_does_not_fit_leaves_nothing(void **state)
{
    struct service *service = *state;
    char exports[2 * UNDERTAGD_PATH_BYTES];
    (void)filling_fill(&service->peer);
    assert_error(ask_refused(&service->peer, "backup.write", "{'name': 'monday'}"), -32005, "");
    (void)snprintf(exports, sizeof exports, "%s/exports", service->daemon.home);
    assert_true(rmdir(exports) == 0 || errno == ENOENT);
    make_room(service);
    (void)ask(&service->peer, "backup.write", "{'name': 'monday'}");
}

/* The home is on a disk that has room for a part of the backup. */
static void a_restore_that_does_not_fit_leaves_no_home(void **state)
{
    struct service *service = *state;
    char small[UNDERTAGD_PATH_BYTES];
    char backup[2 * UNDERTAGD_PATH_BYTES];
    (void)filling_fill(&service->peer); /* more than half of 12 MiB */
    make_room(service);
    (void)ask(&service->peer, "backup.write", "{'name': 'monday'}");
    (void)snprintf(backup, sizeof backup, "%s/exports/monday", service->daemon.home);
    undertagd_path(&service->daemon, "small", small);
    assert_int_equal(mkdir(small, 0700), 0);
    assert_int_equal(mount("small", small, "tmpfs", 0, "size=5m"), 0);
    program_run("undertagd",
                (const char *const[]){"--home", small, "--restore", backup, "--set",
                                      "disk_reserve=0", NULL},
                "", &run);
    assert_int_equal(run.exit_code, 75);
    assert_non_null(strstr(run.error, "nothing was restored"));
    assert_int_equal(umount2(small, MNT_DETACH), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(
            what_does_not_fit_on_the_disk_is_refused_and_the_rest_is_there, set_up, tear_down),
        cmocka_unit_test_setup_teardown(all_goes_on_once_there_is_room, set_up, tear_down),
        cmocka_unit_test_setup_teardown(a_backup_that_does_not_fit_leaves_nothing, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_restore_that_does_not_fit_leaves_no_home, set_up,
                                        tear_down),
        cmocka_unit_test_setup_teardown(a_restart_on_a_full_disk_reads_what_is_there, set_up,
                                        tear_down),
    };
    if (!may_mount()) {
        (void)puts("skipped: only root can mount a small file system");
        return 0;
    }
    return cmocka_run_group_tests_name("a small disk", tests, NULL, NULL);
}
