/*
 * undertagd. Happy path: read the command line and the options; open the home; listen; serve until
 * SIGTERM or SIGINT; drain the connections, store what was learned, close everything.
 *
 * Failure paths: whatever cannot be opened ends the program with one sentence and the exit code
 * that sysexits.h has for it; what had been opened before is closed as at any other end.
 */
#include <assert.h>
#include <errno.h>
#include <jansson.h>
#include <limits.h>
#include <malloc.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <uv.h>

#include "daemon/command_line.h"
#include "daemon/engine.h"
#include "daemon/export_folder.h"
#include "daemon/grow.h"
#include "daemon/json_memory.h"
#include "daemon/log.h"
#include "daemon/manager.h"
#include "daemon/methods.h"
#include "daemon/restore.h"
#include "daemon/server.h"
#include "daemon/verify_home.h"
#include "daemon/watchdog.h"

enum {
    SIGNALS = 4,
    SPARE_DESCRIPTORS = 64,
    KEPT_FREE_PART = 16 /* of the memory budget */
};

struct program {
    struct command_line line;
    struct options options;
    uv_loop_t loop;
    uv_signal_t signals[SIGNALS];
    size_t signal_count; /* that are open */
    struct methods *methods;
    struct engine *engine;
    char exports[PATH_MAX]; /* the folder of snapshots and backups */
    struct snapshots *snapshots;
    struct server *server;
    int passed_fd; /* a socket that was passed in; 0: none, or given to the server */
    struct watchdog watchdog;
    bool is_watched;      /* the watchdog is open */
    uv_work_t first_work; /* see start_pool */
    int exit_code;        /* of what closing found */
};

/* --- stopping -----------------------------------------------------------------------------------
 */

/* No call is running any more. The writer's thread wakes the methods, so it must end before them.
 */
static void close_all(struct program *program)
{
    if (program->is_watched) {
        watchdog_close(&program->watchdog);
        program->is_watched = false;
    }
    if (program->snapshots) {
        snapshots_stop(program->snapshots);
        methods_use(program->methods, NULL, NULL);
        snapshots_free(program->snapshots);
        program->snapshots = NULL;
    }
    if (program->engine) {
        program->exit_code = engine_close(program->engine);
        program->engine = NULL;
    }
    if (program->methods) {
        methods_close(program->methods, NULL, NULL);
        program->methods = NULL;
    }
    for (size_t i = 0; i < program->signal_count; i++) {
        uv_close((uv_handle_t *)&program->signals[i], NULL);
    }
    program->signal_count = 0;
}

static void on_drained(void *user)
{
    close_all(user);
}

static void stop(struct program *program)
{
    struct server *server = program->server;
    if (!server) {
        return; /* it is stopping already */
    }
    program->server = NULL;
    log_line(LOG_NOTE, "stopping: answering what is under way");
    manager_stopping();
    methods_watch(program->methods, NULL);
    snapshots_stop(program->snapshots);          /* nobody waits for one any more */
    backup_stop(engine_backup(program->engine)); /* its caller gets an answer, too */
    server_drain(server, on_drained, program);
}

/* --- reading the options again ------------------------------------------------------------------
 */

static void reload(struct program *program)
{
    char error[COMMAND_LINE_ERROR_BYTES];
    struct options wanted;
    const char *held_back = NULL;
    if (command_line_options(&program->line, &wanted, error) != 0) {
        log_line(LOG_CAUTION, "the options stay as they are: %s", error);
        return;
    }
    size_t count = options_reload(&program->options, &wanted, &held_back);
    if (count > 0) {
        log_line(LOG_CAUTION, "options were read again; %s%s", held_back,
                 count > 1 ? " and others take a restart" : " takes a restart");
    } else {
        log_line(LOG_NOTE, "options were read again");
    }
}

/* SIGUSR1: one as the options have it; nobody waits for it. */
static void write_snapshot(struct program *program)
{
    struct store_error error = {0};
    bool is_busy = false;
    const struct snapshot_wanted wanted = snapshots_wanted(&program->options);
    if (snapshots_write(program->snapshots, &wanted, (size_t)program->options.snapshot_keep, false,
                        NULL, &is_busy, &error) != STORE_OK) {
        log_line(LOG_CAUTION, "snapshot: %s", error.text);
    }
}

static void on_signal(uv_signal_t *handle, int number)
{
    struct program *program = handle->data;
    if (number == SIGHUP && program->server) {
        manager_reloading();
        reload(program);
        manager_ready();
    } else if (number == SIGUSR1 && program->server) {
        write_snapshot(program);
    } else if (number == SIGTERM || number == SIGINT) {
        stop(program);
    }
}

/* --- starting -----------------------------------------------------------------------------------
 */

static int fail(int exit_code, const char *error)
{
    log_line(LOG_TROUBLE, "%s", error);
    return exit_code;
}

static int watch_signals(struct program *program)
{
    static const int NUMBERS[SIGNALS] = {SIGTERM, SIGINT, SIGHUP, SIGUSR1};
    for (size_t i = 0; i < SIGNALS; i++) {
        int code = uv_signal_init(&program->loop, &program->signals[i]);
        if (code < 0) {
            return code;
        }
        program->signal_count = i + 1;
        program->signals[i].data = program;
        code = uv_signal_start(&program->signals[i], on_signal, NUMBERS[i]);
        if (code < 0) {
            return code;
        }
    }
    return 0;
}

/* The folder of a socket that the command line does not name is ours to make. */
static int make_socket_folder(const struct command_line *line, char *error)
{
    char folder[COMMAND_LINE_PATH_BYTES];
    memcpy(folder, line->socket, sizeof folder);
    *strrchr(folder, '/') = '\0';
    if (mkdir(folder, 0755) < 0 && errno != EEXIST) {
        int code = errno;
        (void)snprintf(error, COMMAND_LINE_ERROR_BYTES,
                       "the socket's folder %.300s cannot be made: %s; see --socket", folder,
                       strerror(code));
        return code == EACCES || code == EPERM ? EX_NOPERM : EX_IOERR;
    }
    return 0;
}

static int exit_code_of(int uv_code)
{
    switch (uv_code) {
    case UV_EADDRINUSE:
        return EX_TEMPFAIL;
    case UV_EACCES:
    case UV_EPERM:
        return EX_NOPERM;
    case UV_ENAMETOOLONG:
        return EX_USAGE;
    default:
        return EX_IOERR;
    }
}

static int listen_at(struct program *program)
{
    char error[SERVER_ERROR_BYTES];
    const struct options *options = &program->options;
    const struct server_settings settings = {.socket_path = program->line.socket,
                                             .passed_fd = program->passed_fd,
                                             .line_limit_bytes = options->line_limit_bytes,
                                             .unread_limit_bytes = options->unread_limit_bytes,
                                             .wire_limit_bytes = options->wire_limit_bytes,
                                             .stalled_ms = (unsigned)options->stalled_ms,
                                             .quiet_ms = options->quiet_ms,
                                             .connections_limit =
                                                 (unsigned)options->connections_limit,
                                             .drain_ms = (unsigned)options->drain_ms};
    if (program->line.socket_is_default && program->passed_fd == 0) {
        int exit_code = make_socket_folder(&program->line, error);
        if (exit_code != 0) {
            return fail(exit_code, error);
        }
    }
    int code = server_new(&program->loop, &settings, methods_table(program->methods),
                          &program->server, error);
    program->passed_fd = 0;
    if (code < 0) {
        return fail(exit_code_of(code), error);
    }
    methods_watch(program->methods, program->server);
    return 0;
}

/* Nobody else writes there: the home's lock is held. What is wrong with the folder is an error only
 * for who writes into it. */
static void sweep_exports(const struct program *program)
{
    char error[EXPORT_ERROR_BYTES];
    struct export_folder *folder = NULL;
    size_t count = 0;
    int code = export_folder_open_there(program->exports, &folder, error);
    if (code == 0) {
        code = export_folder_sweep(folder, &count, error);
        export_folder_close(folder);
    }
    if (code < 0 && code != -ENOENT) {
        log_line(LOG_CAUTION, "exports: %s", error);
    }
    if (count > 0) {
        log_line(LOG_NOTE, "exports: %zu that had not become whole removed from %s", count,
                 program->exports);
    }
}

static int open_exports(struct program *program)
{
    char error[EXPORT_ERROR_BYTES];
    if (export_folder_place(program->line.home, program->options.export_dir, program->exports,
                            sizeof program->exports, error) < 0) {
        return fail(EX_CONFIG, error);
    }
    sweep_exports(program);
    const struct snapshots_settings settings = {.engine = program->engine,
                                                .folder = program->exports};
    int code = snapshots_new(&settings, &program->snapshots);
    return code == 0 ? 0 : fail(EX_OSERR, strerror(-code));
}

static int start(struct program *program)
{
    char error[RESTORE_ERROR_BYTES];
    _Static_assert((int)RESTORE_ERROR_BYTES >= (int)ENGINE_ERROR_BYTES, "it has room for both");
    int code = methods_new(&program->loop, &program->options, &program->methods);
    if (code == 0) {
        code = watch_signals(program);
    }
    if (code < 0) {
        return fail(EX_OSERR, uv_strerror(code));
    }
    const struct engine_settings settings = {.home = program->line.home,
                                             .options = &program->options,
                                             .user = program->methods,
                                             .changes_done = methods_wake};
    int exit_code = restore_check(program->line.home, error);
    if (exit_code == 0) {
        exit_code = engine_open(&settings, &program->engine, error);
    }
    if (exit_code != 0) {
        return fail(exit_code, error);
    }
    exit_code = open_exports(program);
    if (exit_code != 0) {
        return exit_code;
    }
    methods_use(program->methods, program->engine, program->snapshots);
    watchdog_start(&program->watchdog, &program->loop, engine_heartbeat(program->engine));
    program->is_watched = true;
    return listen_at(program);
}

static void do_nothing(uv_work_t *work)
{
    (void)work;
}

static void note_nothing(uv_work_t *work, int status)
{
    (void)work;
    (void)status;
}

/* libuv makes its threads when the first work is queued, and aborts where it cannot: rather now
 * than when the first question comes. */
static void start_pool(struct program *program)
{
    int code = uv_queue_work(&program->loop, &program->first_work, do_nothing, note_nothing);
    assert(code == 0); /* fails only without a callback */
}

static void tell_ready(struct program *program)
{
    struct backlog_numbers numbers = engine_count(program->engine).progress;
    log_line(LOG_NOTE, "ready: home %s, socket %s, %llu changes, %llu to learn", program->line.home,
             server_socket_path(program->server), (unsigned long long)numbers.committed,
             (unsigned long long)(numbers.committed - numbers.learned));
    manager_ready();
}

/* As many descriptors as connections, and some for the store. */
static void allow_descriptors(const struct options *options)
{
    struct rlimit limit;
    rlim_t wanted = (rlim_t)options->connections_limit + SPARE_DESCRIPTORS;
    if (getrlimit(RLIMIT_NOFILE, &limit) < 0 || limit.rlim_cur >= wanted) {
        return;
    }
    limit.rlim_cur = wanted < limit.rlim_max ? wanted : limit.rlim_max;
    if (setrlimit(RLIMIT_NOFILE, &limit) < 0 || limit.rlim_cur < wanted) {
        log_line(LOG_CAUTION, "the system allows %llu open files, too few for %llu connections",
                 (unsigned long long)limit.rlim_cur,
                 (unsigned long long)options->connections_limit);
    }
}

/* What storing takes stays for the next time: to get it anew, page by page, was a tenth of the
 * trainer's time with half a million tags. So a heap gives back only what is more than a part of
 * the budget. */
static void keep_what_is_freed(uint64_t memory_budget)
{
    uint64_t kept = memory_budget / KEPT_FREE_PART;
    (void)mallopt(M_TRIM_THRESHOLD, kept < INT_MAX ? (int)kept : INT_MAX);
}

static int serve(struct program *program)
{
    allow_descriptors(&program->options);
    keep_what_is_freed(program->options.memory_budget_bytes);
    /* SIGUSR1 is heard once there is a loop, and ends nothing before. */
    if (signal(SIGPIPE, SIG_IGN) == SIG_ERR || signal(SIGUSR1, SIG_IGN) == SIG_ERR) {
        return fail(EX_OSERR, strerror(errno));
    }
    char error[MANAGER_ERROR_BYTES];
    if (manager_take_socket(&program->passed_fd, error) < 0) {
        return fail(EX_CONFIG, error);
    }
    int code = uv_loop_init(&program->loop);
    if (code < 0) {
        return fail(EX_OSERR, uv_strerror(code));
    }
    int exit_code = start(program);
    if (exit_code == 0) {
        start_pool(program);
        tell_ready(program);
    } else {
        close_all(program);
    }
    (void)uv_run(&program->loop, UV_RUN_DEFAULT); /* returns when every handle is closed */
    code = uv_loop_close(&program->loop);
    assert(code == 0);
    if (exit_code != 0) {
        return exit_code;
    }
    if (program->exit_code != 0) {
        return fail(program->exit_code, "stopped; a write had failed: look after the disk, then "
                                        "start it again, and it goes on from the last change that "
                                        "was acknowledged");
    }
    log_line(LOG_NOTE, "stopped");
    return 0;
}

static int restore(const struct program *program)
{
    char error[RESTORE_ERROR_BYTES];
    int exit_code =
        restore_home(program->line.home, program->line.restore, &program->options, stdout, error);
    return exit_code == 0 ? 0 : fail(exit_code, error);
}

int main(int argc, char **argv)
{
    struct program program = {0};
    char error[COMMAND_LINE_ERROR_BYTES];
    /* The threads share two heaps: one each would hold holes that nobody else can use. It may only
     * fail for an argument that is none. */
    (void)mallopt(M_ARENA_MAX, 2);
    /* Large arrays stay out of the heaps, whatever was freed before: they grow without being
     * copied, and what is freed is gone. */
    (void)mallopt(M_MMAP_THRESHOLD, GROW_LARGE_BYTES);
    json_memory_watch();
    /* At random, and before there are threads: nobody can choose names that collide. */
    json_object_seed(0);
    int exit_code = command_line_read(argc, argv, &program.line, error);
    if (exit_code != 0) {
        return fail(exit_code, error);
    }
    if (program.line.help) {
        exit_code = fputs(COMMAND_LINE_HELP, stdout) < 0 ? EX_IOERR : 0;
    } else if (program.line.version) {
        exit_code = printf("undertagd %s\n", UNDERTAG_VERSION) < 0 ? EX_IOERR : 0;
    } else {
        exit_code = command_line_options(&program.line, &program.options, error);
        if (exit_code != 0) {
            (void)fail(exit_code, error); /* it is the same code */
        } else if (program.line.check_config) {
            exit_code = puts("the options are right") < 0 ? EX_IOERR : 0;
        } else if (program.line.verify) {
            exit_code = verify_home(program.line.home, &program.options, stdout);
        } else if (program.line.restore) {
            exit_code = restore(&program);
        } else {
            exit_code = serve(&program);
        }
    }
    command_line_deinit(&program.line);
    return exit_code;
}
