/* The listening socket: how it begins, who may take it, how it ends. Every test ends with a loop
 * that closes (server_fixture.h). */
#include "daemon/server.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sys/stat.h>

#include "tests/unit/server_fixture.h"

/* --- the beginning --- */

static void the_socket_is_open_to_owner_and_group(void **state)
{
    struct serving *serving = *state;
    struct stat status;
    assert_int_equal(stat(serving->path, &status), 0);
    assert_true(S_ISSOCK(status.st_mode));
    assert_int_equal(status.st_mode & 0777, 0660);
}

static void the_mask_of_the_process_is_as_it_was(void **state)
{
    struct serving *serving = *state;
    mode_t before = umask(0027);
    serve(serving);
    assert_int_equal(umask(before), 0027);
}

static void a_stale_socket_is_removed(void **state)
{
    struct serving *serving = *state;
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    memcpy(address.sun_path, serving->path, strlen(serving->path) + 1);
    assert_int_equal(bind(fd, (struct sockaddr *)&address, sizeof address), 0);
    assert_int_equal(close(fd), 0); /* a daemon that was killed leaves its file */
    serve(serving);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_heard(serving, 0, "{'jsonrpc': '2.0', 'id': 1, 'result': {'bytes': 100000}}");
}

/* A socket that listens at the path, of somebody else's making. */
static int passed_socket(const struct serving *serving)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    assert_true(fd > 0);
    memcpy(address.sun_path, serving->path, strlen(serving->path) + 1);
    assert_int_equal(bind(fd, (struct sockaddr *)&address, sizeof address), 0);
    assert_int_equal(listen(fd, 8), 0);
    return fd;
}

static void a_socket_that_was_passed_in_is_served(void **state)
{
    struct serving *serving = *state;
    serving->settings.passed_fd = passed_socket(serving);
    serving->settings.socket_path = "elsewhere";
    serve(serving);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_heard(serving, 0, "{'jsonrpc': '2.0', 'id': 1, 'result': {'bytes': 100000}}");
    assert_string_equal(server_socket_path(serving->server), serving->path);
}

static void the_file_of_a_socket_that_was_passed_in_stays(void **state)
{
    struct serving *serving = *state;
    struct stat status;
    serving->settings.passed_fd = passed_socket(serving);
    serve(serving);
    drain(serving);
    wait_until_drained(serving);
    assert_int_equal(stat(serving->path, &status), 0);
    assert_int_equal(unlink(serving->path), 0);
}

static void the_group_of_the_sockets_file_is_known(void **state)
{
    struct serving *serving = *state;
    struct stat status;
    assert_int_equal(stat(serving->path, &status), 0);
    assert_int_equal(server_socket_group(serving->server), status.st_gid);
}

/* unix(7): an abstract socket has no file, and so no group. */
static void an_abstract_socket_has_no_group(void **state)
{
    struct serving *serving = *state;
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    /* With no name at all the system chooses one. */
    assert_int_equal(bind(fd, (struct sockaddr *)&address, sizeof address.sun_family), 0);
    assert_int_equal(listen(fd, 8), 0);
    serving->settings.passed_fd = fd;
    serve(serving);
    assert_int_equal(server_socket_group(serving->server), RIGHTS_NO_ID);
}

/* The sentence holds `part`, and no server is handed out. */
static void assert_refused(struct serving *serving, int code, const char *part)
{
    struct server *server = (struct server *)&serving->server; /* not to be touched */
    assert_int_equal(
        server_new(&serving->loop, &serving->settings, &serving->table, &server, serving->error),
        code);
    assert_ptr_equal(server, &serving->server);
    if (!strstr(serving->error, part)) {
        fail_msg("'%s' is not in: %s", part, serving->error);
    }
}

static void what_is_no_socket_stays(void **state)
{
    struct serving *serving = *state;
    struct stat status;
    FILE *file = fopen(serving->path, "w");
    assert_non_null(file);
    assert_true(fputs("my diary\n", file) >= 0);
    assert_int_equal(fclose(file), 0);
    assert_refused(serving, UV_EEXIST, "there is something that is no socket at ");
    assert_int_equal(stat(serving->path, &status), 0);
    assert_int_equal(status.st_size, 9);
}

static void a_second_server_is_refused_and_the_first_goes_on(void **state)
{
    struct serving *serving = *state;
    char holder[64];
    (void)snprintf(holder, sizeof holder, "process %ld holds ", (long)getpid());
    assert_refused(serving, UV_EADDRINUSE, holder);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_heard(serving, 0, "{'jsonrpc': '2.0', 'id': 1, 'result': {'bytes': 100000}}");
}

/* A Unix socket's address has 108 bytes on Linux, one for the end. */
static void a_path_of_107_bytes_is_taken_and_one_byte_more_is_not(void **state)
{
    struct serving *serving = *state;
    char path[109];
    size_t used = strlen(serving->home);
    assert_true(used < 100);
    memset(path, 'a', sizeof path);
    memcpy(path, serving->home, used);
    path[used] = '/';
    path[108] = '\0';
    serving->settings.socket_path = path;
    assert_refused(serving, UV_ENAMETOOLONG,
                   "the socket's path is 1 to 107 bytes long, not 108: choose a shorter one");
    path[107] = '\0';
    serve(serving);
    memcpy(serving->path, path, sizeof path);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_non_null(hear(serving, 0));
}

static void no_path_at_all_is_refused(void **state)
{
    struct serving *serving = *state;
    serving->settings.socket_path = "";
    assert_refused(serving, UV_ENAMETOOLONG, "is 1 to 107 bytes long, not 0");
}

static void a_folder_that_is_not_there_is_told(void **state)
{
    struct serving *serving = *state;
    (void)snprintf(serving->path, sizeof serving->path, "%s/none/socket", serving->home);
    assert_refused(serving, UV_ENOENT, "/none/socket.lock cannot be opened: No such file");
}

static void who_is_refused_gives_the_lock_back(void **state)
{
    struct serving *serving = *state;
    assert_int_equal(mkdir(serving->path, 0700), 0);
    assert_refused(serving, UV_EEXIST, "no socket at");
    assert_int_equal(rmdir(serving->path), 0);
    serve(serving);
}

/* --- the end --- */

static void a_drained_server_is_gone_with_its_socket_and_its_lock(void **state)
{
    struct serving *serving = *state;
    drain(serving);
    wait_until_drained(serving);
    assert_int_equal(access(serving->path, F_OK), -1);
    serve(serving);
    join(serving, 0);
    ask(serving, 0, 1, "echo");
    assert_non_null(hear(serving, 0));
}

static void draining_answers_what_runs_and_refuses_what_waits(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    ask(serving, 0, 2, "change");
    ask(serving, 0, 3, "hold");
    wait_until_held(serving, 1);
    drain(serving);
    end_held(serving, 0);
    assert_heard(serving, 0, "{'jsonrpc': '2.0', 'id': 1, 'result': 0}");
    assert_heard_error(serving, 0, 2, -32006);
    assert_heard_error(serving, 0, 3, -32006);
    assert_null(hear(serving, 0));
    wait_until_drained(serving);
    assert_int_equal(serving->started, 1);
}

static void draining_closes_who_asks_for_nothing(void **state)
{
    struct serving *serving = *state;
    join(serving, 0);
    join(serving, 1);
    wait_until_connections(serving, 2);
    drain(serving);
    assert_null(hear(serving, 0));
    assert_null(hear(serving, 1));
    wait_until_drained(serving);
}

static void a_draining_server_takes_no_new_connection(void **state)
{
    struct serving *serving = *state;
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    join(serving, 0);
    ask(serving, 0, 1, "hold");
    wait_until_held(serving, 1);
    drain(serving);
    serving->clients[1] = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC | SOCK_NONBLOCK, 0);
    memcpy(address.sun_path, serving->path, strlen(serving->path) + 1);
    assert_int_equal(connect(serving->clients[1], (struct sockaddr *)&address, sizeof address), -1);
    assert_int_equal(errno, ENOENT);
}

/* A peer that never reads: 40 answers of 100,000 bytes are more than a socket holds. */
static void draining_waits_for_slow_readers_only_so_long(void **state)
{
    struct serving *serving = *state;
    drain(serving);
    wait_until_drained(serving);
    serving->drained = 0;
    serving->settings.drain_ms = 1;
    serving->settings.unread_limit_bytes = 100 * 1024 * 1024;
    serve(serving);
    join(serving, 0);
    for (int i = 0; i < 40; i++) {
        ask(serving, 0, i + 1, "big");
    }
    while (serving->started < 40) {
        turn(serving);
    }
    drain(serving);
    wait_until_drained(serving);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        SERVING_TEST(the_socket_is_open_to_owner_and_group),
        QUIET_TEST(the_mask_of_the_process_is_as_it_was),
        QUIET_TEST(a_stale_socket_is_removed),
        QUIET_TEST(a_socket_that_was_passed_in_is_served),
        QUIET_TEST(the_file_of_a_socket_that_was_passed_in_stays),
        SERVING_TEST(the_group_of_the_sockets_file_is_known),
        QUIET_TEST(an_abstract_socket_has_no_group),
        QUIET_TEST(what_is_no_socket_stays),
        SERVING_TEST(a_second_server_is_refused_and_the_first_goes_on),
        QUIET_TEST(a_path_of_107_bytes_is_taken_and_one_byte_more_is_not),
        QUIET_TEST(no_path_at_all_is_refused),
        QUIET_TEST(a_folder_that_is_not_there_is_told),
        QUIET_TEST(who_is_refused_gives_the_lock_back),
        SERVING_TEST(a_drained_server_is_gone_with_its_socket_and_its_lock),
        SERVING_TEST(draining_answers_what_runs_and_refuses_what_waits),
        SERVING_TEST(draining_closes_who_asks_for_nothing),
        SERVING_TEST(a_draining_server_takes_no_new_connection),
        SERVING_TEST(draining_waits_for_slow_readers_only_so_long),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
