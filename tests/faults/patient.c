#include "tests/faults/patient.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/mman.h>
#include <sys/socket.h>
#include <sys/un.h>
#include <unistd.h>

#include "daemon/clock.h"

static const int ERRORS[] = {
#define FAIL_ERROR(name, error, title) error,
    FAIL_KINDS_OF(FAIL_ERROR)
#undef FAIL_ERROR
};

/* --- the shim -------------------------------------------------------------------------------- */

bool patient_is_possible(void)
{
    if (undertagd_is_sanitized()) {
        (void)puts("skipped: a sanitizer's program takes nothing preloaded");
    }
    return !undertagd_is_sanitized();
}

void patient_make(struct patient *patient)
{
    undertagd_make(&patient->daemon);
    undertagd_path(&patient->daemon, "control", patient->control_path);
    int fd = open(patient->control_path, O_RDWR | O_CREAT | O_EXCL | O_CLOEXEC, 0600);
    assert_true(fd >= 0);
    assert_int_equal(ftruncate(fd, sizeof *patient->control), 0);
    patient->control =
        mmap(NULL, sizeof *patient->control, PROT_READ | PROT_WRITE, MAP_SHARED, fd, 0);
    assert_true(patient->control != MAP_FAILED);
    assert_int_equal(close(fd), 0);
}

void patient_remove(struct patient *patient)
{
    if (patient->daemon.child.pid > 0) {
        patient_kill(patient);
    }
    assert_int_equal(munmap(patient->control, sizeof *patient->control), 0);
    assert_int_equal(undertagd_remove(&patient->daemon), 0);
}

void patient_new_home(struct patient *patient)
{
    static unsigned number;
    char name[32];
    (void)snprintf(name, sizeof name, "home%u", ++number);
    undertagd_path(&patient->daemon, name, patient->daemon.home);
}

static void arm(struct patient *patient, enum fail_kind kind, unsigned n, const char *only_on)
{
    struct fail_control *control = patient->control;
    atomic_store(&control->is_injected, false);
    atomic_store(&control->kind, kind);
    atomic_store(&control->error, ERRORS[kind]);
    atomic_store(&control->left, (long)n);
    (void)snprintf(control->only_on, sizeof control->only_on, "%s", only_on); /* it fits */
    atomic_store(&control->is_armed, true);
}

void patient_arm(struct patient *patient, enum fail_kind kind, unsigned n)
{
    arm(patient, kind, n, "");
}

void patient_arm_sync_of(struct patient *patient, const char *path_end)
{
    arm(patient, FAIL_SYNC, 0, path_end);
}

bool patient_disarm(struct patient *patient)
{
    atomic_store(&patient->control->is_armed, false);
    return atomic_load(&patient->control->left) < 0;
}

/* --- its life -------------------------------------------------------------------------------- */

static int connect_to(const struct patient *patient)
{
    struct sockaddr_un address = {.sun_family = AF_UNIX};
    memcpy(address.sun_path, patient->daemon.socket, strlen(patient->daemon.socket) + 1);
    int fd = socket(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0);
    assert_true(fd >= 0);
    if (connect(fd, (const struct sockaddr *)&address, sizeof address) < 0) {
        (void)close(fd); /* nothing came of it */
        return -1;
    }
    return fd;
}

static void run(struct child *child, const struct patient *patient, const char *const *argv,
                bool with_shim)
{
    char preload[CHILD_PATH_BYTES + 16] = "LD_PRELOAD=";
    char control[CHILD_PATH_BYTES];
    child_program("tests/fail_nth.so", preload + strlen(preload));
    (void)snprintf(control, sizeof control, "%s=%s", FAIL_CONTROL_VARIABLE, patient->control_path);
    const char *const environment[] = {with_shim ? preload : NULL, control, NULL};
    int nothing = open("/dev/null", O_RDONLY | O_CLOEXEC);
    int log = open(patient->daemon.log, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0600);
    assert_true(nothing >= 0 && log >= 0);
    child_start(child, argv, environment, nothing, log, log);
    assert_int_equal(close(nothing) | close(log), 0);
}

bool patient_start(struct patient *patient, bool with_shim)
{
    struct undertagd *daemon = &patient->daemon;
    char program[CHILD_PATH_BYTES];
    child_program("undertagd", program);
    const char *argv[8 + 2 * UNDERTAGD_SETTINGS] = {
        program, "--home", daemon->home, "--socket", daemon->socket, "--set", "rehearsal_share=0"};
    for (size_t i = 0, count = 7; i < UNDERTAGD_SETTINGS && daemon->settings[i]; i++) {
        argv[count++] = "--set";
        argv[count++] = daemon->settings[i];
    }
    atomic_store(&patient->control->blocks_left, -1);
    run(&daemon->child, patient, argv, with_shim);
    uint64_t last_ms = clock_steady_ms() + DEADLINE_MS;
    while (clock_steady_ms() < last_ms && !patient_has_ended(patient)) {
        int fd = connect_to(patient);
        if (fd >= 0) {
            (void)close(fd); /* nothing was sent */
            return true;
        }
        (void)poll(&(struct pollfd){.fd = daemon->child.lifeline, .events = POLLIN}, 1, 1);
    }
    return false;
}

bool patient_has_ended(const struct patient *patient)
{
    return child_has_ended(&patient->daemon.child);
}

int patient_end(struct patient *patient)
{
    struct child *child = &patient->daemon.child;
    struct pollfd line = {.fd = child->lifeline, .events = POLLIN};
    if (poll(&line, 1, 0) == 0) {
        child_signal(child, SIGTERM);
        if (poll(&line, 1, DEADLINE_MS) == 0) {
            patient_kill(patient);
            return PATIENT_HANGS;
        }
    }
    return child_wait(child);
}

void patient_kill(struct patient *patient)
{
    child_signal(&patient->daemon.child, SIGKILL);
    (void)child_wait(&patient->daemon.child); /* how it ended, we know */
}

char *patient_log(const struct patient *patient)
{
    char *text = calloc(1, 4096);
    assert_non_null(text);
    int fd = open(patient->daemon.log, O_RDONLY | O_CLOEXEC);
    assert_true(fd >= 0 && read(fd, text, 4095) >= 0);
    assert_int_equal(close(fd), 0);
    return text;
}

bool patient_said_something(const struct patient *patient)
{
    return undertagd_said(&patient->daemon, "undertagd");
}

int patient_verify(const struct patient *patient)
{
    char program[CHILD_PATH_BYTES];
    struct child child;
    child_program("undertagd", program);
    run(&child, patient,
        (const char *const[]){program, "--home", patient->daemon.home, "--verify", NULL}, false);
    return child_wait(&child);
}

/* --- asking ---------------------------------------------------------------------------------- */

/* The answer's line on the heap; NULL where there was none. */
static char *exchange(int fd, const char *line, bool *ret_hangs)
{
    size_t size = 0;
    char *answer = NULL;
    if (send(fd, line, strlen(line), MSG_NOSIGNAL) != (ssize_t)strlen(line)) {
        return NULL;
    }
    for (;;) {
        char part[4096];
        struct pollfd event = {.fd = fd, .events = POLLIN};
        if (poll(&event, 1, DEADLINE_MS) != 1) {
            *ret_hangs = true;
            break;
        }
        ssize_t count = recv(fd, part, sizeof part, 0);
        if (count <= 0) {
            break;
        }
        answer = realloc(answer, size + (size_t)count + 1);
        assert_non_null(answer);
        memcpy(answer + size, part, (size_t)count);
        size += (size_t)count;
        answer[size] = '\0';
        if (answer[size - 1] == '\n') {
            return answer;
        }
    }
    free(answer);
    return NULL;
}

json_t *patient_ask(const struct patient *patient, bool *ret_hangs, const char *method,
                    const char *params, ...)
{
    char text[4096];
    char line[5120];
    va_list list;
    va_start(list, params);
    assert_in_range(vsnprintf(text, sizeof text, params, list), 0, sizeof text - 1);
    va_end(list);
    for (char *at = text; (at = strchr(at, '\'')); at++) {
        *at = '"';
    }
    (void)snprintf(line, sizeof line,
                   "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"%s\",\"params\":%s}\n", method,
                   text);
    int fd = connect_to(patient);
    if (fd < 0) {
        return NULL;
    }
    char *answer = exchange(fd, line, ret_hangs);
    (void)close(fd); /* all was read that we wanted */
    json_t *json = answer ? json_loads(answer, 0, NULL) : NULL;
    if (answer && !json) {
        fail_msg("this is not JSON: %.200s", answer);
    }
    free(answer);
    return json;
}
