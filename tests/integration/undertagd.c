#include "tests/integration/undertagd.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <ftw.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include "tests/integration/peer.h"

/* How valgrind begins to say where an error is. */
#define VALGRIND_PLACE "==    at 0x"

/* --- the folder ------------------------------------------------------------------------------ */

void undertagd_path(const struct undertagd *daemon, const char *name,
                    char path[UNDERTAGD_PATH_BYTES])
{
    int length = snprintf(path, UNDERTAGD_PATH_BYTES, "%s/%s", daemon->folder, name);
    assert_in_range(length, 1, UNDERTAGD_PATH_BYTES - 1);
}

void undertagd_write(const struct undertagd *daemon, const char *name, const char *text)
{
    char path[UNDERTAGD_PATH_BYTES];
    undertagd_path(daemon, name, path);
    FILE *file = fopen(path, "we");
    assert_non_null(file);
    assert_true(fputs(text, file) >= 0);
    assert_int_equal(fclose(file), 0);
}

bool undertagd_is_sanitized(void)
{
#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
    return true;
#elif defined(__has_feature)
    return __has_feature(address_sanitizer) || __has_feature(thread_sanitizer);
#else
    return false;
#endif
}

bool undertagd_is_slowed(void)
{
    return getenv("UNDERTAG_VALGRIND") != NULL;
}

void undertagd_make(struct undertagd *daemon)
{
    static const char NAME[] = "/undertag-XXXXXX";
    const char *temporary = getenv("TMPDIR");
    if (!temporary || !*temporary || strlen(temporary) + sizeof NAME > UNDERTAGD_FOLDER_BYTES) {
        temporary = "/tmp";
    }
    *daemon = (struct undertagd){0};
    (void)snprintf(daemon->folder, sizeof daemon->folder, "%s%s", temporary, NAME);
    assert_non_null(mkdtemp(daemon->folder));
    undertagd_path(daemon, "home", daemon->home);
    undertagd_path(daemon, "socket", daemon->socket);
    undertagd_path(daemon, "log", daemon->log);
}

static int remove_entry(const char *path, const struct stat *status, int kind, struct FTW *place)
{
    (void)status;
    (void)kind;
    (void)place;
    return remove(path);
}

/* --- what it says ---------------------------------------------------------------------------- */

/* The log as text, on the heap. */
static char *read_log(const struct undertagd *daemon)
{
    char *text = NULL;
    size_t size = 0;
    FILE *file = fopen(daemon->log, "re");
    if (!file || getdelim(&text, &size, '\0', file) < 0) {
        free(text);
        text = strdup("");
    }
    if (file) {
        (void)fclose(file); /* it was only read */
    }
    assert_non_null(text);
    return text;
}

bool undertagd_said(const struct undertagd *daemon, const char *part)
{
    char *text = read_log(daemon);
    bool found = strstr(text, part) != NULL;
    free(text);
    return found;
}

void undertagd_wait_for(const struct undertagd *daemon, const char *part)
{
    enum {
        LOOK_EVERY_MS = 5
    };
    for (int waited_ms = 0; !undertagd_said(daemon, part); waited_ms += LOOK_EVERY_MS) {
        if (waited_ms > PATIENCE_MS || child_has_ended(&daemon->child)) {
            fail_msg("the daemon never said '%s'", part);
        }
        (void)poll(NULL, 0, LOOK_EVERY_MS); /* between two looks at a file */
    }
}

/* --- its life -------------------------------------------------------------------------------- */

/* A socket that the daemon tells its readiness to, as it would tell the system's manager. */
static int open_notify_socket(const char *path)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    int fd = socket(AF_UNIX, SOCK_DGRAM | SOCK_CLOEXEC, 0);
    assert_true(fd >= 0 && strlen(path) < sizeof address.sun_path);
    memcpy(address.sun_path, path, strlen(path) + 1);
    (void)unlink(path); /* of a run before, if any */
    assert_int_equal(bind(fd, (const struct sockaddr *)&address, sizeof address), 0);
    return fd;
}

static void wait_until_ready(const struct undertagd *daemon, int notify)
{
    struct pollfd events[2] = {{.fd = notify, .events = POLLIN},
                               {.fd = daemon->child.lifeline, .events = POLLIN}};
    char message[64] = "";
    if (poll(events, 2, PATIENCE_MS) < 1 || !(events[0].revents & POLLIN) ||
        recv(notify, message, sizeof message - 1, 0) < 0 || strcmp(message, "READY=1") != 0) {
        char *text = read_log(daemon);
        print_error("%s", text);
        free(text);
        fail_msg("the daemon did not become ready");
    }
}

/*
 * The loop has been round once a connection has come and gone. Before that ThreadSanitizer (of
 * clang 14) may lose a signal: one that comes while a thread enters its first blocking call.
 */
static void wait_until_it_turns(const struct undertagd *daemon)
{
    struct peer peer;
    peer_open(&peer, daemon->socket);
    peer_end_saying(&peer);
    assert_null(peer_line(&peer));
    peer_close(&peer);
}

void undertagd_start(struct undertagd *daemon)
{
    char program[CHILD_PATH_BYTES];
    char notify_path[UNDERTAGD_PATH_BYTES];
    char notify_entry[UNDERTAGD_PATH_BYTES + 32];
    child_program("undertagd", program);
    undertagd_path(daemon, "notify", notify_path);
    (void)snprintf(notify_entry, sizeof notify_entry, "NOTIFY_SOCKET=%s", notify_path);
    const char *argv[5 + 2 * (1 + UNDERTAGD_SETTINGS) + 3] = {program, "--home", daemon->home,
                                                              "--socket", daemon->socket};
    size_t count = 5;
    bool says_rehearsal = false;
    for (size_t i = 0; i < UNDERTAGD_SETTINGS && daemon->settings[i]; i++) {
        says_rehearsal =
            says_rehearsal || strncmp(daemon->settings[i], "rehearsal_share=", 16) == 0;
    }
    if (!says_rehearsal && !daemon->config) { /* what it has had time for would make a difference */
        argv[count++] = "--set";
        argv[count++] = "rehearsal_share=0";
    }
    for (size_t i = 0; i < UNDERTAGD_SETTINGS && daemon->settings[i]; i++) {
        argv[count++] = "--set";
        argv[count++] = daemon->settings[i];
    }
    if (daemon->config) {
        argv[count++] = "--config";
        argv[count++] = daemon->config;
    }
    int notify = open_notify_socket(notify_path);
    int nothing = open("/dev/null", O_RDONLY | O_CLOEXEC);
    int log = open(daemon->log, O_WRONLY | O_CREAT | O_APPEND | O_CLOEXEC, 0600);
    assert_true(nothing >= 0 && log >= 0);
    child_start(&daemon->child, argv, (const char *const[]){notify_entry, NULL}, nothing, log, log);
    assert_int_equal(close(nothing) | close(log), 0);
    wait_until_ready(daemon, notify);
    wait_until_it_turns(daemon);
    assert_int_equal(close(notify), 0);
}

void undertagd_kill(struct undertagd *daemon)
{
    child_signal(&daemon->child, SIGKILL);
    assert_int_equal(child_wait(&daemon->child), 128 + SIGKILL);
}

int undertagd_stop(struct undertagd *daemon)
{
    child_signal(&daemon->child, SIGTERM);
    return child_wait(&daemon->child);
}

int undertagd_remove(struct undertagd *daemon)
{
    int result = 0;
    if (daemon->child.pid > 0) {
        bool has_ended = child_has_ended(&daemon->child);
        int exit_code = has_ended ? child_wait(&daemon->child) : undertagd_stop(daemon);
        if (has_ended || exit_code != 0) {
            print_error("the daemon ended %swith %d\n", has_ended ? "by itself " : "", exit_code);
            result = -1;
        }
    }
    if (result < 0 || undertagd_said(daemon, "Sanitizer") ||
        undertagd_said(daemon, "runtime error") || undertagd_said(daemon, VALGRIND_PLACE)) {
        char *text = read_log(daemon);
        print_error("%s", text);
        free(text);
        result = -1;
    }
    if (nftw(daemon->folder, remove_entry, 16, FTW_DEPTH | FTW_PHYS) != 0) {
        print_error("%s could not be removed\n", daemon->folder);
        result = -1;
    }
    return result;
}
