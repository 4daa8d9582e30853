/*
 * The daemon under a manager of services, which the test is: what it tells the manager
 * (sd_notify(3)), and the socket that the manager may pass in (sd_listen_fds(3)).
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
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/stat.h>
#include <sys/un.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/peer.h"
#include "tests/integration/undertagd.h"

enum {
    PASSED_FD = 3, /* the first that is passed in: SD_LISTEN_FDS_START */
    MESSAGE_BYTES = 256
};

struct managed {
    struct undertagd daemon;
    int notify; /* where the daemon's messages come */
    char message[MESSAGE_BYTES];
};

/* --- the manager ----------------------------------------------------------------------------- */

static int bound(int type, const char *path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, type | SOCK_CLOEXEC, 0);
    assert_true(fd >= 0 && strlen(path) < sizeof address.sun_path);
    memcpy(address.sun_path, path, strlen(path) + 1);
    assert_int_equal(bind(fd, (const struct sockaddr *)&address, sizeof address), 0);
    return fd;
}

static int set_up(void **state)
{
    struct managed *managed = calloc(1, sizeof *managed);
    char path[UNDERTAGD_PATH_BYTES];
    assert_non_null(managed);
    undertagd_make(&managed->daemon);
    undertagd_path(&managed->daemon, "notify", path);
    managed->notify = bound(SOCK_DGRAM, path);
    *state = managed;
    return 0;
}

static int tear_down(void **state)
{
    struct managed *managed = *state;
    int result = undertagd_remove(&managed->daemon);
    assert_int_equal(close(managed->notify), 0);
    free(managed);
    return result;
}

/* The next message of the daemon. */
static const char *told(struct managed *managed)
{
    struct pollfd events = {.fd = managed->notify, .events = POLLIN};
    memset(managed->message, 0, sizeof managed->message);
    if (poll(&events, 1, PATIENCE_MS) != 1 ||
        recv(managed->notify, managed->message, sizeof managed->message - 1, 0) < 0) {
        fail_msg("the daemon tells nothing");
    }
    return managed->message;
}

/* Takes what has come. A manager that does not listen keeps the daemon waiting: the system holds
 * only a few messages (unix(7), max_dgram_qlen). */
static void hear_all(struct managed *managed)
{
    while (recv(managed->notify, managed->message, sizeof managed->message, MSG_DONTWAIT) > 0) {
        assert_memory_equal(managed->message, "WATCHDOG=1", strlen("WATCHDOG=1"));
    }
}

/* Starts it with `passed` sockets passed in, all of which are descriptors from PASSED_FD on, and
 * with a watchdog of so many microseconds. */
static void start(struct managed *managed, unsigned passed, unsigned watchdog_us)
{
    static const char SHELL[] = "[ \"$0\" = 0 ] || export LISTEN_FDS=$0 LISTEN_PID=$$; exec \"$@\"";
    char program[CHILD_PATH_BYTES];
    char count[16];
    char notify[UNDERTAGD_PATH_BYTES + 32];
    char watchdog[64];
    const struct undertagd *daemon = &managed->daemon;
    child_program("undertagd", program);
    (void)snprintf(count, sizeof count, "%u", passed);
    (void)snprintf(notify, sizeof notify, "NOTIFY_SOCKET=%s/notify", daemon->folder);
    (void)snprintf(watchdog, sizeof watchdog, "WATCHDOG_USEC=%u", watchdog_us);
    int nothing = open("/dev/null", O_RDONLY | O_CLOEXEC);
    int log = open(daemon->log, O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0600);
    assert_true(nothing >= 0 && log >= 0);
    child_start(
        &managed->daemon.child,
        (const char *const[]){"/bin/sh", "-c", SHELL, count, program, "--home", daemon->home,
                              "--socket", daemon->socket, "--set", "rehearsal_share=0", NULL},
        (const char *const[]){notify, watchdog_us > 0 ? watchdog : NULL, NULL}, nothing, log, log);
    assert_int_equal(close(nothing) | close(log), 0);
}

/* --- what it is told ------------------------------------------------------------------------- */

static void the_manager_is_told_when_the_socket_accepts(void **state)
{
    struct managed *managed = *state;
    struct peer peer;
    start(managed, 0, 0);
    assert_string_equal(told(managed), "READY=1");
    peer_open(&peer, managed->daemon.socket);
    assert_int_equal(ask_seq(&peer), 0);
    peer_close(&peer);
}

static void the_manager_is_told_of_a_reload_and_its_end(void **state)
{
    struct managed *managed = *state;
    start(managed, 0, 0);
    assert_string_equal(told(managed), "READY=1");
    child_signal(&managed->daemon.child, SIGHUP);
    static const char RELOADING[] = "RELOADING=1\nMONOTONIC_USEC=";
    assert_memory_equal(told(managed), RELOADING, strlen(RELOADING));
    assert_true(strtoull(managed->message + strlen(RELOADING), NULL, 10) > 0);
    assert_string_equal(told(managed), "READY=1");
}

static void the_manager_is_told_of_the_end_and_nothing_after_it(void **state)
{
    struct managed *managed = *state;
    start(managed, 0, 0);
    assert_string_equal(told(managed), "READY=1");
    assert_int_equal(undertagd_stop(&managed->daemon), 0);
    assert_string_equal(told(managed), "STOPPING=1"); /* without a watchdog before it */
    assert_int_equal(recv(managed->notify, managed->message, 1, MSG_DONTWAIT), -1);
}

static void the_watchdog_is_fed_while_there_is_nothing_to_do_and_while_there_is(void **state)
{
    struct managed *managed = *state;
    struct peer peer;
    start(managed, 0, 200000);
    while (strcmp(told(managed), "READY=1") != 0) {
        assert_string_equal(managed->message, "WATCHDOG=1");
    }
    for (int i = 0; i < 3; i++) {
        assert_string_equal(told(managed), "WATCHDOG=1");
    }
    peer_open(&peer, managed->daemon.socket);
    for (unsigned i = 0; i < 200; i++) {
        (void)ask(&peer, "item.file", "{'id': '%u', 'text': 'fog and rain', 'tags': ['fog']}", i);
        hear_all(managed);
    }
    for (int i = 0; i < 3; i++) {
        assert_string_equal(told(managed), "WATCHDOG=1");
    }
    peer_close(&peer);
}

/* --- a socket that is passed in -------------------------------------------------------------- */

/* Moves a descriptor to where the daemon expects it; it is then closed here once it is passed. */
static void put_at(int fd, int wanted)
{
    if (fd != wanted) {
        assert_int_equal(fcntl(wanted, F_GETFD), -1); /* it is free */
        assert_int_equal(dup3(fd, wanted, O_CLOEXEC), wanted);
        assert_int_equal(close(fd), 0);
    }
    assert_int_equal(fcntl(wanted, F_SETFD, 0), 0); /* it survives exec */
}

/* Frees PASSED_FD and the next: what has those numbers gets others. */
static void make_room(struct managed *managed)
{
    while (managed->notify <= PASSED_FD + 1) {
        int moved = fcntl(managed->notify, F_DUPFD_CLOEXEC, PASSED_FD + 2);
        assert_true(moved > PASSED_FD + 1);
        assert_int_equal(close(managed->notify), 0);
        managed->notify = moved;
    }
}

static int listening(const char *path)
{
    int fd = bound(SOCK_STREAM, path);
    assert_int_equal(listen(fd, 8), 0);
    return fd;
}

/* Who connects before the daemon is there waits for it, and is not turned away. */
static void a_socket_that_is_passed_in_is_served_from_before_the_start(void **state)
{
    struct managed *managed = *state;
    struct peer peer;
    make_room(managed);
    put_at(listening(managed->daemon.socket), PASSED_FD);
    peer_open(&peer, managed->daemon.socket);
    unsigned early = peer_request(&peer, "daemon.state", "{}");
    start(managed, 1, 0);
    assert_int_equal(close(PASSED_FD), 0);
    assert_string_equal(told(managed), "READY=1");
    assert_int_equal(whole(peer_result(&peer, early), "seq"), 0);
    peer_close(&peer);
}

/* It belongs to the manager: the next start is served by the same. */
static void a_socket_that_is_passed_in_stays_behind(void **state)
{
    struct managed *managed = *state;
    struct stat before;
    struct stat after;
    char lock[UNDERTAGD_PATH_BYTES];
    make_room(managed);
    put_at(listening(managed->daemon.socket), PASSED_FD);
    assert_int_equal(lstat(managed->daemon.socket, &before), 0);
    start(managed, 1, 0);
    assert_string_equal(told(managed), "READY=1");
    assert_int_equal(undertagd_stop(&managed->daemon), 0);
    assert_int_equal(lstat(managed->daemon.socket, &after), 0);
    assert_true(before.st_ino == after.st_ino && before.st_mode == after.st_mode);
    undertagd_path(&managed->daemon, "socket.lock", lock);
    assert_int_equal(access(lock, F_OK), -1); /* nothing was put beside it */
    assert_int_equal(close(PASSED_FD), 0);
}

/* The daemon does not start, and says why. */
static void assert_refused(struct managed *managed, unsigned passed, const char *part)
{
    start(managed, passed, 0);
    assert_int_equal(child_wait(&managed->daemon.child), EX_CONFIG);
    assert_true(undertagd_said(&managed->daemon, part));
}

static void a_socket_of_another_kind_is_refused(void **state)
{
    struct managed *managed = *state;
    make_room(managed);
    put_at(bound(SOCK_DGRAM, managed->daemon.socket), PASSED_FD);
    assert_refused(managed, 1, "is not a Unix stream socket that listens");
    assert_int_equal(close(PASSED_FD), 0);
}

static void what_is_no_socket_is_refused(void **state)
{
    struct managed *managed = *state;
    make_room(managed);
    put_at(open("/dev/null", O_RDWR | O_CLOEXEC), PASSED_FD);
    assert_refused(managed, 1, "is not a Unix stream socket that listens");
    assert_int_equal(close(PASSED_FD), 0);
}

static void more_than_one_socket_is_refused(void **state)
{
    struct managed *managed = *state;
    char other[UNDERTAGD_PATH_BYTES];
    undertagd_path(&managed->daemon, "other", other);
    make_room(managed);
    put_at(listening(managed->daemon.socket), PASSED_FD);
    put_at(listening(other), PASSED_FD + 1);
    assert_refused(managed, 2, "2 sockets were passed in, and one is wanted");
    assert_int_equal(close(PASSED_FD) | close(PASSED_FD + 1), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_manager_is_told_when_the_socket_accepts),
        TEST(the_manager_is_told_of_a_reload_and_its_end),
        TEST(the_manager_is_told_of_the_end_and_nothing_after_it),
        TEST(the_watchdog_is_fed_while_there_is_nothing_to_do_and_while_there_is),
        TEST(a_socket_that_is_passed_in_is_served_from_before_the_start),
        TEST(a_socket_that_is_passed_in_stays_behind),
        TEST(a_socket_of_another_kind_is_refused),
        TEST(what_is_no_socket_is_refused),
        TEST(more_than_one_socket_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
