/*
 * report: asks the daemon for all that the page shows, then writes the page.
 *
 * Nothing is written before all answers are there and have their shapes.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "client/command.h"
#include "client/format.h"
#include "client/report.h"
#include "client/request.h"
#include "client/save.h"
#include "client/text.h"

enum {
    TAGS_AT_ONCE = 5000,
    ROWS = 20
};

/* The answers behind the page. */
struct gathered {
    struct wire_answer state;
    struct wire_answer completeness;
    struct wire_answer standing;
    struct wire_answer worklist;
};

static void gathered_deinit(struct gathered *gathered)
{
    wire_answer_deinit(&gathered->worklist);
    wire_answer_deinit(&gathered->standing);
    wire_answer_deinit(&gathered->completeness);
    wire_answer_deinit(&gathered->state);
}

/* Takes the reference to `params`. */
static int ask_take(const struct client *client, struct wire *wire, const char *method,
                    json_t *params, const struct reply_member *shape,
                    struct wire_answer *ret_answer, struct failure *failure)
{
    int code = wire_call_take(wire, method, params, ret_answer, failure);
    if (!code) {
        code = reply_check(ret_answer->result, shape, failure);
    }
    if (!code && client->json) {
        command_print_json(client, ret_answer);
    }
    return code;
}

static int gather(const struct client *client, struct wire *wire, struct gathered *gathered,
                  struct failure *failure)
{
    const struct {
        const char *method;
        const struct reply_member *shape;
        struct wire_answer *answer;
        const char *most; /* the member that limits it; NULL: none */
    } questions[] = {
        {"daemon.state", REPLY_STATE, &gathered->state, NULL},
        {"desk.completeness", REPLY_COMPLETENESS, &gathered->completeness, "most"},
        {"desk.standing", REPLY_STANDING, &gathered->standing, NULL},
        {"desk.worklist", REPLY_WORKLIST, &gathered->worklist, "most"},
    };
    int code = 0;
    for (size_t i = 0; i < sizeof questions / sizeof questions[0] && !code; i++) {
        json_t *params =
            questions[i].most ? json_pack("{s:i}", questions[i].most, ROWS) : json_object();
        code = ask_take(client, wire, questions[i].method, params, questions[i].shape,
                        questions[i].answer, failure);
    }
    return code;
}

/* --- all tags ------------------------------------------------------------------------------- */

static void add_tags(struct tag_curve *curve, const json_t *tags)
{
    size_t i;
    json_t *tag;
    json_array_foreach(tags, i, tag)
    {
        const char *state = command_text(tag, "state");
        if (strcmp(state, "retired") != 0) {
            tag_curve_add(curve, command_number(tag, "count"), command_number(tag, "p"));
        }
    }
}

/* Reads one page; *inout_after (a reference) is what the next goes on after, NULL at the end. */
static int read_tags(const struct client *client, struct wire *wire, struct tag_curve *curve,
                     json_t **inout_after, struct failure *failure)
{
    struct wire_answer answer = {0};
    /* "*" leaves out a member whose value is NULL */
    json_t *params =
        json_pack("{s:i,s:s,s:O*}", "most", TAGS_AT_ONCE, "order", "count", "after", *inout_after);
    int code = ask_take(client, wire, "tag.list", params, REPLY_TAGS, &answer, failure);
    const json_t *tags = json_object_get(answer.result, "tags");
    json_t *next = json_object_get(answer.result, "next");
    bool more = !code && next && !json_is_null(next) && json_array_size(tags) > 0;
    if (!code) {
        add_tags(curve, tags);
    }
    json_decref(*inout_after);
    *inout_after = more ? json_incref(next) : NULL;
    wire_answer_deinit(&answer);
    return code;
}

static int read_all_tags(const struct client *client, struct wire *wire, struct tag_curve *curve,
                         struct failure *failure)
{
    json_t *after = NULL;
    int code;
    do {
        code = read_tags(client, wire, curve, &after, failure);
    } while (!code && after);
    json_decref(after);
    tag_curve_end(curve);
    return code;
}

/* --- the page ------------------------------------------------------------------------------- */

static int write_page(const struct client *client, const struct report *report, const char *path,
                      struct failure *failure)
{
    char *page = NULL;
    size_t length = 0;
    char size[FORMAT_BYTES];
    char *name = text_clean(path, TEXT_ONE_LINE); /* while nothing is written yet */
    if (!name || report_write(report, &page, &length)) {
        free(name);
        return failure_memory(failure);
    }
    int code = save_file(path, page, length, failure);
    free(page);
    if (!code && !client->json) {
        (void)fprintf(client->out.stream, "%s: written, %s\n", name,
                      format_size((double)length, size)); /* errors are seen at the end */
    }
    free(name);
    return code;
}

static int ask_and_write(const struct client *client, struct wire *wire, struct report *report,
                         const char *path, struct failure *failure)
{
    struct gathered gathered = {0};
    int code = gather(client, wire, &gathered, failure);
    if (!code) {
        code = read_all_tags(client, wire, &report->curve, failure);
    }
    if (!code) {
        report->state = gathered.state.result;
        report->completeness = gathered.completeness.result;
        report->standing = gathered.standing.result;
        report->worklist = gathered.worklist.result;
        report->made_at = time(NULL);
        code = write_page(client, report, path, failure);
    }
    gathered_deinit(&gathered);
    return code;
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    const char *path = args->words[0];
    struct wire *wire = NULL;
    struct report *report = NULL;
    int code = save_check(path, failure);
    if (!code) {
        code = wire_open(client->socket_path, &wire, failure);
    }
    if (!code) {
        report = calloc(1, sizeof *report); /* its curve is large */
        code =
            report ? ask_and_write(client, wire, report, path, failure) : failure_memory(failure);
    }
    wire_free(wire);
    free(report);
    return code;
}

const struct command command_report = {
    .name = "report",
    .synopsis = "FILE",
    .summary = "how complete the tagging is, as a page for a browser or print",
    .about = "Writes one HTML page that needs nothing else: completeness by how often tags are "
             "given, the tags that lose most, common tags and rare ones, how good the proposals "
             "are, whether their chances are right, and the head of the worklist. A FILE of that "
             "name is replaced, once the page is whole.\n"
             "\n"
             "With --json, prints the daemon's answers that the page was made from.",
    .least_words = 1,
    .most_words = 1,
    .run = run,
};
