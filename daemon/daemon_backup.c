/*
 * backup.write: a copy of all that is stored, of which a home can be made. It is answered when the
 * copy is whole, which may take long: the call waits in the methods meanwhile, and its peer may be
 * gone by then.
 */
#include <ctype.h>
#include <errno.h>
#include <stdio.h>

#include "daemon/log.h"
#include "daemon/methods_private.h"
#include "daemon/params.h"

static const uint64_t RATE_MOST = (uint64_t)1 << 40;

static int read_wanted(const json_t *params, struct backup_wanted *wanted, struct fault *fault)
{
    static const char *const MEMBERS[] = {"name", "rate", NULL};
    struct store_text name = {0};
    wanted->rate = BACKUP_RATE;
    int code = params_known(params, MEMBERS, fault);
    if (code == 0) {
        code = params_optional_name(params, "name", &name, fault);
    }
    if (code == 0) {
        code = params_whole(params, "rate", BACKUP_RATE_LEAST, RATE_MOST, &wanted->rate, fault);
    }
    if (code == 0) { /* a name of the wire is not longer */
        (void)snprintf(wanted->name, sizeof wanted->name, "%.*s", (int)name.size,
                       name.data ? name.data : "");
    }
    return code;
}

/* The sentence as one that stands alone. */
static int fail(struct fault *fault, enum fault_code code, const char *field, const char *sentence)
{
    return fault_set(fault, code, field, "%c%s.", toupper((unsigned char)sentence[0]),
                     sentence[0] ? sentence + 1 : "");
}

static int fail_to_begin(struct fault *fault, int code)
{
    if (code == -EBUSY) {
        return fault_set(fault, FAULT_STORE, NULL,
                         "A backup is being written already (see daemon.state): try again once it "
                         "has ended.");
    }
    if (code == -ECANCELED) {
        return fault_set(fault, FAULT_STOPPING, NULL, "The daemon is stopping.");
    }
    return fault_set(fault, FAULT_INTERNAL, NULL, "No thread can be started.");
}

void daemon_backup(struct call *call, const json_t *params)
{
    struct methods *methods = call_context(call);
    struct backup_wanted wanted = {0};
    struct fault fault = {0};
    if (read_wanted(params, &wanted, &fault) == 0) {
        int code = backup_begin(engine_backup(methods->engine), &wanted);
        if (code < 0) {
            (void)fail_to_begin(&fault, code);
        }
    }
    if (fault.code != 0) {
        call_fail(call, &fault);
        return;
    }
    log_line(LOG_NOTE, "backup: user %lu asked for one", (unsigned long)call_uid(call));
    methods->backup_call = call;
}

/* Whose fault it is that there is none. */
static int fail_outcome(struct fault *fault, const struct backup_outcome *outcome)
{
    if (outcome->is_name_wrong) {
        return fail(fault, FAULT_PARAMS, "/name", outcome->error);
    }
    if (outcome->code == -ECANCELED) {
        return fault_set(fault, FAULT_STOPPING, NULL,
                         "The daemon is stopping: ask for the backup again once it is back.");
    }
    /* What is damaged, trying again does not mend. */
    bool is_internal = outcome->code == -ENOMEM || outcome->code == -EBADMSG;
    return fail(fault, is_internal ? FAULT_INTERNAL : FAULT_STORE, NULL, outcome->error);
}

void daemon_backup_done(struct methods *methods)
{
    struct backup_outcome outcome;
    struct fault fault = {0};
    if (!backup_take_done(engine_backup(methods->engine), &outcome)) {
        return;
    }
    struct call *call = methods->backup_call;
    methods->backup_call = NULL;
    if (outcome.code < 0) {
        (void)fail_outcome(&fault, &outcome);
        call_fail(call, &fault);
        return;
    }
    call_answer_take(call, json_pack("{s:s, s:s, s:I, s:I, s:I, s:f}", "name", outcome.name, "path",
                                     outcome.path, "seq", (json_int_t)outcome.seq, "learned",
                                     (json_int_t)outcome.learned, "bytes",
                                     (json_int_t)outcome.bytes, "seconds", outcome.seconds));
}
