/*
 * Each environment is looked through by a process of its own: a file whose structure is damaged may
 * end whoever reads it, and that is a finding, too.
 */
#include "daemon/verify_home.h"

#include <errno.h>
#include <inttypes.h>
#include <signal.h>
#include <stdlib.h>
#include <string.h>
#include <sys/wait.h>
#include <sysexits.h>
#include <unistd.h>
#include <utf8proc.h>

#include "storage/verify.h"

struct verifying {
    struct store_settings settings;
    FILE *out;
    const char *what; /* the environment at hand */
};

/* Failing to write shows in the end, when the lines are flushed. */
#define SAY(verifying, format, ...)                                                                \
    (void)fprintf((verifying)->out, "%s: " format "\n", (verifying)->what, __VA_ARGS__)

/* A damaged name may hold anything: what a terminal would not show becomes a question mark. */
static void say_fault(void *user, const char *sentence)
{
    const struct verifying *verifying = user;
    char shown[STORE_ERROR_BYTES];
    size_t used = 0;
    for (const utf8proc_uint8_t *at = (const utf8proc_uint8_t *)sentence; *at;) {
        utf8proc_int32_t character = 0;
        utf8proc_ssize_t bytes = utf8proc_iterate(at, -1, &character);
        bool is_shown = bytes > 0 && utf8proc_category(character) != UTF8PROC_CATEGORY_CC;
        bytes = bytes > 0 ? bytes : 1;
        if (is_shown) {
            memcpy(shown + used, at, (size_t)bytes);
        } else {
            shown[used] = '?';
        }
        used += is_shown ? (size_t)bytes : 1;
        at += bytes;
    }
    shown[used] = '\0';
    SAY(verifying, "%s", shown);
}

static int say_faults(const struct verifying *verifying, uint64_t faults)
{
    SAY(verifying, "%" PRIu64 " %s", faults, faults == 1 ? "fault" : "faults");
    return EX_DATAERR;
}

/* LMDB goes on with nothing once a page could not be read: what it says then follows from a fault
 * that was told. */
static int fail(const struct verifying *verifying, const struct store_error *error, uint64_t faults)
{
    SAY(verifying, "%s", error->text[0] ? error->text : store_code_sentence(error->code));
    if (faults > 0) {
        return say_faults(verifying, faults);
    }
    return error->code == STORE_CORRUPT ? EX_DATAERR : EX_IOERR;
}

/* --- the store ----------------------------------------------------------------------------------
 */

static int look_through_store(const struct verifying *verifying)
{
    struct store *store = NULL;
    struct store_error error = {0};
    struct verify_store_sums sums = {0};
    const struct verify_sink sink = {.user = (void *)verifying, .fault = say_fault};
    int code = store_open(&verifying->settings, &store, &error);
    if (code == STORE_OK) {
        code = verify_store(store, &sink, &sums, &error);
    }
    store_close(store);
    if (code != STORE_OK) {
        return fail(verifying, &error, sums.faults);
    }
    if (sums.faults > 0) {
        return say_faults(verifying, sums.faults);
    }
    SAY(verifying,
        "whole: %" PRIu64 " items, %" PRIu64 " tags, %" PRIu64 " records, %" PRIu64 " changes",
        sums.totals.items, sums.totals.tags, sums.records, sums.totals.seq);
    return 0;
}

/* --- the model ----------------------------------------------------------------------------------
 */

static int say_no_model(const struct verifying *verifying)
{
    SAY(verifying, "%s", "none is stored: a start learns it from the items");
    return 0;
}

/* The store as of a moment behind that of the model. */
static int read_origin(const struct verifying *verifying, struct store **ret_store,
                       struct verify_origin *ret_origin, struct store_error *error)
{
    struct store_view *view = NULL;
    int code = store_open(&verifying->settings, ret_store, error);
    if (code == STORE_OK) {
        code = store_read(*ret_store, &view, error);
    }
    if (code == STORE_OK) {
        struct store_totals totals = store_view_totals(view);
        *ret_origin = (struct verify_origin){
            .store_uuid = store_uuid(*ret_store), .last_seq = totals.seq, .tags = totals.tags};
        store_end(view);
    }
    return code;
}

static int look_through_model(const struct verifying *verifying)
{
    struct store *store = NULL;
    struct model_store *model = NULL;
    struct store_error error = {0};
    struct verify_origin origin;
    struct verify_model_sums sums = {0};
    char path[4096 + 16];
    const struct verify_sink sink = {.user = (void *)verifying, .fault = say_fault};
    (void)snprintf(path, sizeof path, "%s/model/data.mdb", verifying->settings.home); /* it fits */
    if (access(path, F_OK) < 0 && errno == ENOENT) {
        return say_no_model(verifying);
    }
    int code = model_store_open(&verifying->settings, &model, &error);
    if (code == STORE_OK) {
        code = read_origin(verifying, &store, &origin, &error);
    }
    if (code == STORE_OK) {
        code = verify_model(model, &origin, &sink, &sums, &error);
    }
    model_store_close(model);
    store_close(store);
    if (code == STORE_NOT_FOUND) {
        return say_no_model(verifying);
    }
    if (code != STORE_OK) {
        return fail(verifying, &error, sums.faults);
    }
    if (sums.faults > 0) {
        return say_faults(verifying, sums.faults);
    }
    SAY(verifying,
        "whole: %" PRIu64 " weights in %" PRIu64 " chunks, %" PRIu64 " words, %" PRIu64
        " entries, learned up to change %" PRIu64,
        sums.head.postings, sums.chunks, sums.words, sums.entries, sums.head.learned);
    return 0;
}

/* --- both ---------------------------------------------------------------------------------------
 */

static int wait_for(const struct verifying *verifying, pid_t child)
{
    int status = 0;
    if (waitpid(child, &status, 0) < 0) {
        SAY(verifying, "the look through it was lost: %s", strerror(errno));
        return EX_OSERR;
    }
    if (WIFSIGNALED(status)) {
        SAY(verifying, "the file is damaged so that it cannot be read (signal %d)",
            WTERMSIG(status));
        return EX_DATAERR;
    }
    return WEXITSTATUS(status);
}

/*
 * A damaged file may end the child, in LMDB or in ours: how it ended says it, in the parent's
 * words. A sanitizer's own handlers would say it at length.
 */
static void end_quietly(void)
{
    static const int SIGNALS[] = {SIGSEGV, SIGBUS, SIGABRT, SIGFPE};
    (void)freopen("/dev/null", "w", stderr); /* LMDB's assertions; without it they are only shown */
    for (size_t i = 0; i < sizeof SIGNALS / sizeof SIGNALS[0]; i++) {
        (void)signal(SIGNALS[i], SIG_DFL); /* fails only for numbers that are no signal */
    }
}

static int look_through(struct verifying *verifying, const char *what,
                        int (*look)(const struct verifying *verifying))
{
    verifying->what = what;
    (void)fflush(verifying->out); /* the child would write it once more */
    pid_t child = fork();
    if (child < 0) {
        SAY(verifying, "no process can be started: %s", strerror(errno));
        return EX_OSERR;
    }
    if (child == 0) {
        end_quietly();
        int code = look(verifying);
        _exit(fflush(verifying->out) == 0 ? code : EX_IOERR);
    }
    return wait_for(verifying, child);
}

int verify_home(const char *home, const struct options *options, FILE *out)
{
    struct verifying verifying = {
        .settings = {.home = home, .map_bytes = options->map_size_bytes, .read_only = true},
        .out = out,
        .what = home};
    char path[4096 + 16];
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", home); /* it fits */
    if (access(path, R_OK) < 0) {
        SAY(&verifying, "nothing is stored here, or it cannot be read: %s", strerror(errno));
        return EX_NOINPUT;
    }
    int of_store = look_through(&verifying, "store", look_through_store);
    int of_model = look_through(&verifying, "model", look_through_model);
    return of_store != 0 ? of_store : of_model;
}
