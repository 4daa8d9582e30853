/*
 * Starting: what is refused ends with one sentence on standard error and the exit code that
 * sysexits.h has for it.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "storage/kv.h"
#include "storage/store.h"
#include "tests/integration/program.h"
#include "tests/integration/service.h"

static struct program_run run;

/* A folder, and no daemon. */
static int set_up_folder(void **state)
{
    struct undertagd *daemon = calloc(1, sizeof *daemon);
    assert_non_null(daemon);
    undertagd_make(daemon);
    *state = daemon;
    return 0;
}

static int tear_down_folder(void **state)
{
    int result = undertagd_remove(*state);
    free(*state);
    return result;
}

/* The daemon does not start: it says one sentence, which holds `part`, and ends with the code. */
static void assert_refused(const char *const *arguments, int exit_code, const char *part)
{
    program_run("undertagd", arguments, "", &run);
    if (run.exit_code != exit_code || !strstr(run.error, part)) {
        fail_msg("ended with %d and said: %s", run.exit_code, run.error);
    }
    assert_memory_equal(run.error, "undertagd: ", strlen("undertagd: "));
    assert_ptr_equal(strchr(run.error, '\n'), run.error + strlen(run.error) - 1); /* one line */
    assert_string_equal(run.output, "");
}

#define REFUSED(exit_code, part, ...)                                                              \
    assert_refused((const char *const[]){__VA_ARGS__, NULL}, exit_code, part)

/* --- one daemon a home and a socket ---------------------------------------------------------- */

static void a_second_daemon_on_the_same_home_is_refused(void **state)
{
    struct service *service = *state;
    char other[UNDERTAGD_PATH_BYTES];
    undertagd_path(&service->daemon, "other", other);
    REFUSED(EX_TEMPFAIL, "is in use", "--home", service->daemon.home, "--socket", other);
    assert_int_equal(access(other, F_OK), -1);
    assert_int_equal(ask_seq(&service->peer), 0); /* the first is not disturbed */
}

static void a_second_daemon_on_the_same_socket_is_refused(void **state)
{
    struct service *service = *state;
    char other[UNDERTAGD_PATH_BYTES];
    undertagd_path(&service->daemon, "other", other);
    REFUSED(EX_TEMPFAIL, "socket", "--home", other, "--socket", service->daemon.socket);
    struct peer peer;
    peer_open(&peer, service->daemon.socket); /* the first still listens there */
    assert_int_equal(ask_seq(&peer), 0);
    peer_close(&peer);
}

static void two_daemons_with_a_home_and_a_socket_each_run_side_by_side(void **state)
{
    struct service *first = *state;
    struct service *second = service_new(NULL, NULL, NULL);
    (void)ask(&first->peer, "item.file", "{'id': 'a', 'tags': []}");
    assert_int_equal(ask_seq(&first->peer), 1);
    assert_int_equal(ask_seq(&second->peer), 0);
    void *other = second;
    assert_int_equal(service_tear_down(&other), 0);
}

/* --- the socket ------------------------------------------------------------------------------ */

static void the_socket_of_a_daemon_that_died_is_taken_over(void **state)
{
    struct service *service = *state;
    struct stat status;
    undertagd_kill(&service->daemon);
    assert_int_equal(lstat(service->daemon.socket, &status), 0);
    assert_true(S_ISSOCK(status.st_mode)); /* left behind */
    service_restart(service);
    assert_int_equal(ask_seq(&service->peer), 0);
}

static void what_is_no_socket_is_not_taken_over(void **state)
{
    struct undertagd *daemon = *state;
    undertagd_write(daemon, "socket", "a letter");
    REFUSED(EX_IOERR, "no socket", "--home", daemon->home, "--socket", daemon->socket);
    struct stat status;
    assert_int_equal(lstat(daemon->socket, &status), 0);
    assert_int_equal(status.st_size, strlen("a letter"));
}

static void a_link_is_not_taken_over(void **state)
{
    struct undertagd *daemon = *state;
    assert_int_equal(symlink("elsewhere", daemon->socket), 0);
    REFUSED(EX_IOERR, "no socket", "--home", daemon->home, "--socket", daemon->socket);
    char target[32] = "";
    assert_int_equal(readlink(daemon->socket, target, sizeof target - 1), strlen("elsewhere"));
}

static void the_socket_is_open_to_owner_and_group_only(void **state)
{
    struct undertagd *daemon = *state;
    struct stat status;
    mode_t mask = umask(0);
    undertagd_start(daemon);
    (void)umask(mask);
    assert_int_equal(lstat(daemon->socket, &status), 0);
    assert_int_equal(status.st_mode & 07777, 0660);
    assert_int_equal(stat(daemon->home, &status), 0);
    assert_int_equal(status.st_mode & 07777, 0700);
}

/* sun_path has 108 bytes with its end (unix(7)). */
static void a_path_that_no_socket_can_have_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    char path[UNDERTAGD_PATH_BYTES + 108];
    (void)snprintf(path, sizeof path, "%s/%0100d", daemon->folder, 0);
    REFUSED(EX_USAGE, "107", "--home", daemon->home, "--socket", path);
}

static void a_socket_in_a_folder_that_is_not_there_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_path(daemon, "no/socket", path);
    REFUSED(EX_IOERR, path, "--home", daemon->home, "--socket", path);
}

/* --- the home -------------------------------------------------------------------------------- */

static void the_folders_of_a_home_are_made(void **state)
{
    struct undertagd *daemon = *state;
    undertagd_path(daemon, "a/b/c", daemon->home);
    undertagd_start(daemon);
    assert_int_equal(access(daemon->home, W_OK), 0);
}

static void a_home_below_a_file_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    char home[UNDERTAGD_PATH_BYTES];
    undertagd_write(daemon, "file", "");
    undertagd_path(daemon, "file/home", home);
    REFUSED(EX_IOERR, home, "--home", home, "--socket", daemon->socket);
}

static void a_home_that_may_not_be_used_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    if (geteuid() == 0) {
        skip(); /* to root nothing is forbidden */
    }
    assert_int_equal(mkdir(daemon->home, 0000), 0);
    REFUSED(EX_NOPERM, daemon->home, "--home", daemon->home, "--socket", daemon->socket);
}

/* Puts a format into the first record of an environment, as a later version would. */
static void write_newer_format(const struct undertagd *daemon, const char *environment,
                               const char *key)
{
    static const char *const TABLES[] = {"meta"};
    const unsigned char format[] = {STORE_FORMAT + 1, 0, 0, 0};
    char directory[UNDERTAGD_PATH_BYTES + 8];
    (void)snprintf(directory, sizeof directory, "%s/%s", daemon->home, environment);
    const struct kv_settings settings = {
        .directory = directory, .map_bytes = 1 << 24, .tables = TABLES, .table_count = 1};
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, true, &txn, &error), STORE_OK);
    assert_int_equal(kv_put(txn, 0, (struct kv_bytes){.data = key, .size = strlen(key)},
                            (struct kv_bytes){.data = format, .size = sizeof format}, &error),
                     STORE_OK);
    assert_int_equal(kv_commit(txn, &error), STORE_OK);
    kv_close(kv);
}

static void a_home_of_a_newer_version_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    undertagd_start(daemon);
    assert_int_equal(undertagd_stop(daemon), 0);
    write_newer_format(daemon, "store", "store");
    REFUSED(EX_CONFIG, "newer version", "--home", daemon->home, "--socket", daemon->socket);
}

/* --- the command line ------------------------------------------------------------------------ */

static void a_command_line_that_is_wrong_is_refused(void **state)
{
    (void)state;
    REFUSED(EX_USAGE, "--lamp", "--lamp");
    REFUSED(EX_USAGE, "--home", "--home");
    REFUSED(EX_USAGE, "fog", "fog");
    REFUSED(EX_USAGE, "--socket", "--socket", "");
}

static void help_and_version_are_told_on_standard_output(void **state)
{
    (void)state;
    program_run("undertagd", (const char *const[]){"--help", NULL}, "", &run);
    assert_int_equal(run.exit_code, 0);
    assert_non_null(strstr(run.output, "usage: undertagd"));
    assert_string_equal(run.error, "");
    program_run("undertagd", (const char *const[]){"--version", NULL}, "", &run);
    assert_int_equal(run.exit_code, 0);
    assert_memory_equal(run.output, "undertagd ", strlen("undertagd "));
}

/* --- options --------------------------------------------------------------------------------- */

static void an_option_that_is_wrong_is_refused_by_name(void **state)
{
    struct undertagd *daemon = *state;
    static const char *const CASES[][2] = {
        {"lamps=3", "lamps"},
        {"text_limit=huge", "text_limit"},
        {"text_limit", "name=value"},
        {"map_size=1MiB", "map_size"},
        {"tags_limit=0", "tags_limit"},
        {"unknown_tags=perhaps", "unknown_tags"},
        {"loss=", "loss"},
    };
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        REFUSED(EX_CONFIG, CASES[i][1], "--check-config", "--set", CASES[i][0]);
        REFUSED(EX_CONFIG, CASES[i][1], "--home", daemon->home, "--socket", daemon->socket, "--set",
                CASES[i][0]);
    }
    assert_int_equal(access(daemon->home, F_OK), -1); /* nothing was begun */
}

static void options_that_are_right_are_said_to_be(void **state)
{
    struct undertagd *daemon = *state;
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_write(daemon, "options",
                    "# of the harbour desk\ntext_limit = 2MiB\n\nstemming = on\n");
    undertagd_path(daemon, "options", path);
    program_run(
        "undertagd",
        (const char *const[]){"--check-config", "--config", path, "--set", "language=en", NULL}, "",
        &run);
    assert_int_equal(run.exit_code, 0);
    assert_string_equal(run.output, "the options are right\n");
    assert_string_equal(run.error, "");
}

static void a_wrong_line_of_a_file_is_named_by_file_and_line(void **state)
{
    struct undertagd *daemon = *state;
    static const char *const CASES[][3] = {
        {"# first\n\nlamps = 3\n", "line 3", "lamps"},
        {"text_limit = 2MiB\ntext_limit = 3MiB\n", "line 2", "twice"},
        {"text_limit = huge\n", "line 1", "text_limit"},
        {"text_limit = 2MiB\n[desk]\n", "line 2", "section"},
        {"text_limit = 2MiB\nfog\n", "line 2", "name = value"},
    };
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_path(daemon, "options", path);
    for (size_t i = 0; i < sizeof CASES / sizeof CASES[0]; i++) {
        undertagd_write(daemon, "options", CASES[i][0]);
        REFUSED(EX_CONFIG, path, "--check-config", "--config", path);
        assert_non_null(strstr(run.error, CASES[i][1]));
        assert_non_null(strstr(run.error, CASES[i][2]));
        REFUSED(EX_CONFIG, path, "--home", daemon->home, "--socket", daemon->socket, "--config",
                path);
    }
    assert_int_equal(access(daemon->home, F_OK), -1);
}

static void a_file_of_options_that_is_not_there_is_refused(void **state)
{
    struct undertagd *daemon = *state;
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_path(daemon, "none", path);
    REFUSED(EX_CONFIG, path, "--check-config", "--config", path);
}

static void what_is_set_counts_over_the_file(void **state)
{
    struct undertagd *daemon = *state;
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_write(daemon, "options", "text_limit = 2MiB\ntags_limit = 7\n");
    undertagd_path(daemon, "options", path);
    daemon->config = path;
    daemon->settings[0] = "tags_limit=9";
    undertagd_start(daemon);
    struct peer peer;
    peer_open(&peer, daemon->socket);
    const json_t *limits = json_object_get(ask(&peer, "daemon.state", "{}"), "limits");
    assert_members(limits, "{'text_limit': 2097152, 'tags_limit': 9, 'words_limit': 20000}");
    peer_close(&peer);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up_folder, tear_down_folder)
#define TEST_BESIDE(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST_BESIDE(a_second_daemon_on_the_same_home_is_refused),
        TEST_BESIDE(a_second_daemon_on_the_same_socket_is_refused),
        TEST_BESIDE(two_daemons_with_a_home_and_a_socket_each_run_side_by_side),
        TEST_BESIDE(the_socket_of_a_daemon_that_died_is_taken_over),
        TEST(what_is_no_socket_is_not_taken_over),
        TEST(a_link_is_not_taken_over),
        TEST(the_socket_is_open_to_owner_and_group_only),
        TEST(a_path_that_no_socket_can_have_is_refused),
        TEST(a_socket_in_a_folder_that_is_not_there_is_refused),
        TEST(the_folders_of_a_home_are_made),
        TEST(a_home_below_a_file_is_refused),
        TEST(a_home_that_may_not_be_used_is_refused),
        TEST(a_home_of_a_newer_version_is_refused),
        cmocka_unit_test(a_command_line_that_is_wrong_is_refused),
        cmocka_unit_test(help_and_version_are_told_on_standard_output),
        TEST(an_option_that_is_wrong_is_refused_by_name),
        TEST(options_that_are_right_are_said_to_be),
        TEST(a_wrong_line_of_a_file_is_named_by_file_and_line),
        TEST(a_file_of_options_that_is_not_there_is_refused),
        TEST(what_is_set_counts_over_the_file),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
