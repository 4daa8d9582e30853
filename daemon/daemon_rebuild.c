/*
 * daemon.rebuild: has a model learned anew from the stored items, with other settings.
 */
#include <ctype.h>
#include <errno.h>
#include <stdio.h>
#include <string.h>

#include "daemon/log.h"
#include "daemon/params.h"
#include "daemon/pointer.h"
#include "daemon/read_job.h"

enum {
    VALUE_BYTES = 64
};

struct rebuild_job {
    struct read_job job; /* first */
    struct options configured;
    uint32_t uid; /* who asked */
};

static int fail_setting(struct fault *fault, const char *name, const char *sentence)
{
    char pointer[FAULT_FIELD_BYTES];
    pointer_to_member(pointer, sizeof pointer, "/settings", name);
    return fault_set(fault, FAULT_PARAMS, pointer, "%s", sentence);
}

/* A setting as the text that options_set takes; false where it is no text and no number. */
static bool read_value(const json_t *value, char text[VALUE_BYTES])
{
    int written = -1;
    if (json_is_string(value) && strlen(json_string_value(value)) == json_string_length(value)) {
        written = snprintf(text, VALUE_BYTES, "%s", json_string_value(value));
    } else if (json_is_integer(value)) {
        written = snprintf(text, VALUE_BYTES, "%" JSON_INTEGER_FORMAT, json_integer_value(value));
    } else if (json_is_real(value)) {
        written = snprintf(text, VALUE_BYTES, "%.17g", json_real_value(value));
    }
    return written >= 0 && written < VALUE_BYTES;
}

static int take_setting(struct options *options, const char *name, const json_t *value,
                        struct fault *fault)
{
    char text[VALUE_BYTES];
    char error[OPTIONS_ERROR_BYTES];
    struct options_row row;
    size_t at = options_find(name);
    if (at == options_count()) {
        (void)snprintf(error, sizeof error, "There is no option '%.255s'.", name);
        return fail_setting(fault, name, error);
    }
    options_describe(options, at, &row);
    if (row.group != OPTIONS_LEARNING) {
        (void)snprintf(error, sizeof error,
                       "Learning does not depend on the option %s: change it in the configuration.",
                       name);
        return fail_setting(fault, name, error);
    }
    if (!read_value(value, text)) {
        return fail_setting(fault, name, "A setting is a short text or a number.");
    }
    if (options_set(options, name, text, error) == 0) {
        return 0;
    }
    char sentence[OPTIONS_ERROR_BYTES + 1];
    (void)snprintf(sentence, sizeof sentence, "%c%s.", toupper((unsigned char)error[0]), error + 1);
    return fail_setting(fault, name, sentence);
}

static int take_settings(struct options *options, const json_t *params, struct fault *fault)
{
    const json_t *settings = json_object_get(params, "settings");
    const char *name;
    json_t *value;
    if (settings && !json_is_object(settings)) {
        return fault_set(fault, FAULT_PARAMS, "/settings",
                         "settings is an object of options by name.");
    }
    json_object_foreach((json_t *)settings, name, value) /* it is only read */
    {
        if (take_setting(options, name, value, fault) < 0) {
            return fault->code;
        }
    }
    return 0;
}

static void run(struct read_job *base)
{
    struct rebuild_job *job = (struct rebuild_job *)base;
    struct engine *engine = base->methods->engine;
    struct store_error error = {0};
    uint64_t seq = 0;
    engine_lay_over(engine, &job->configured);
    if (take_settings(&job->configured, base->params, &base->fault) < 0) {
        return;
    }
    int code = engine_rebuild(engine, &job->configured, &seq, &error);
    if (code == -EBUSY) {
        (void)fault_set(&base->fault, FAULT_STORE, NULL,
                        "A rebuild is under way already (see daemon.state): try again once it has "
                        "ended.");
    } else if (code == -EAGAIN) {
        (void)fault_set(&base->fault, FAULT_STORE, NULL,
                        "A backup is being written (see daemon.state): try again once it has "
                        "ended.");
    } else if (code < 0) {
        (void)read_job_fail(base, &error);
    } else {
        log_line(LOG_NOTE, "rebuild: user %lu asked for it", (unsigned long)job->uid);
        base->result = json_pack("{s:I}", "seq", (json_int_t)seq);
    }
}

void daemon_rebuild(struct call *call, const json_t *params)
{
    static const char *const MEMBERS[] = {"settings", NULL};
    struct rebuild_job *job = read_job_new(call, params, sizeof *job);
    if (!job) {
        return;
    }
    job->job.run = run;
    job->uid = call_uid(call);
    job->configured = *job->job.methods->options;
    read_job_start(&job->job, params_known(params, MEMBERS, &job->job.fault));
}
