/*
 * gaps: the tags that a filed item or a draft most probably lacks.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/bar.h"
#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/json_memory.h"
#include "client/table.h"

enum {
    MOST,
    FLOOR,
    WHY
};

enum {
    DRAFT_BYTES = 8 * 1024 * 1024, /* the daemon's own limit is lower; this one bounds memory */
    BAR_COLUMNS = 20,
    CELL_BYTES = 1024,
    SENTENCE_BYTES = 512
};

static const struct args_option OPTIONS[] = {
    [MOST] = {"most", ARGS_WHOLE, "N", 0, 1000, "show at most N tags (default 10)"},
    [FLOOR] = {"floor", ARGS_NUMBER, "X", 0, 1,
               "the least chance that is shown (default 0.05; 0 shows the N best whatever their "
               "chance)"},
    [WHY] = {"why", ARGS_FLAG, NULL, 0, 0,
             "show the words that speak for each tag, and their share"},
};

/* --- the draft ------------------------------------------------------------------------------ */

/* Leaves what only a filing has; false where nothing of a draft is left. */
static bool keep_draft_members(json_t *object)
{
    static const char *const FILING[] = {"id",       "tagger",   "filed_at",
                                         "prompted", "declined", "independent"};
    static const char *const DRAFT[] = {"title", "text", "fields", "tags"};
    for (size_t i = 0; i < sizeof FILING / sizeof FILING[0]; i++) {
        (void)json_object_del(object, FILING[i]); /* -1 where it is not there */
    }
    for (size_t i = 0; i < sizeof DRAFT / sizeof DRAFT[0]; i++) {
        if (json_object_get(object, DRAFT[i])) {
            return true;
        }
    }
    return false;
}

static int draft_from_json(const char *text, size_t length, json_t **ret_params,
                           struct failure *failure)
{
    json_error_t error;
    json_t *params = json_memory_read(text, length, JSON_REJECT_DUPLICATES, &error);
    if (!params && json_memory_is_short()) {
        return failure_memory(failure);
    }
    if (!params) {
        return failure_set(failure, FAILURE_DATA,
                           "the draft begins as JSON and is not: %s (line %d, column %d)",
                           error.text, error.line, error.column);
    }
    if (!keep_draft_members(params)) {
        json_decref(params);
        return failure_set(failure, FAILURE_DATA,
                           "the draft has neither title, text, fields nor tags; for a filed item "
                           "give its ID: undertag gaps ID");
    }
    *ret_params = params;
    return 0;
}

static int draft_from_text(const char *text, size_t length, json_t **ret_params,
                           struct failure *failure)
{
    if (strspn(text, " \t\r\n") == length) {
        return failure_set(failure, FAILURE_DATA,
                           "the draft is empty; give text or JSON on standard input, or the ID of "
                           "a filed item");
    }
    *ret_params = json_pack("{s:s%}", "text", text, length);
    return *ret_params ? 0 : failure_memory(failure);
}

static int read_draft(const struct client *client, json_t **ret_params, struct failure *failure)
{
    char *text = NULL;
    size_t length = 0;
    int code = command_read_input(client, "the draft", DRAFT_BYTES, &text, &length, failure);
    if (code) {
        return code;
    }
    bool json = text[strspn(text, " \t\r\n")] == '{';
    code = json ? draft_from_json(text, length, ret_params, failure)
                : draft_from_text(text, length, ret_params, failure);
    free(text);
    return code;
}

static int make_params(const struct client *client, const struct args *args, json_t **ret_params,
                       struct failure *failure)
{
    json_t *params = NULL;
    int code = 0;
    if (args->word_count > 0) {
        json_t *id = NULL;
        code = command_string(args->words[0], "the ID", &id, failure);
        if (code) {
            return code;
        }
        params = json_pack("{s:o}", "id", id);
    } else {
        code = read_draft(client, &params, failure);
        if (code) {
            return code;
        }
    }
    const struct args_value *values = args->values;
    if (!params ||
        (values[MOST].given &&
         json_object_set_new(params, "most", json_integer(values[MOST].whole))) ||
        (values[FLOOR].given &&
         json_object_set_new(params, "floor", json_real(values[FLOOR].number))) ||
        (values[WHY].given && json_object_set_new(params, "why", json_true()))) {
        json_decref(params);
        return failure_memory(failure);
    }
    *ret_params = params;
    return 0;
}

/* --- the answer ----------------------------------------------------------------------------- */

static int add_share(struct table *table, const struct client *client, const char *name,
                     double share)
{
    char figure[FORMAT_BYTES];
    char bar[BAR_BYTES];
    bar_draw(share, BAR_COLUMNS, client->out.unicode, bar);
    return table_add(table, (const char *[]){name, format_share(share, figure), bar});
}

static int add_gap(struct table *table, const struct client *client, const json_t *gap)
{
    if (add_share(table, client, command_text(gap, "tag"), command_number(gap, "chance"))) {
        return -1;
    }
    size_t i;
    json_t *word;
    json_array_foreach(json_object_get(gap, "words"), i, word)
    {
        char name[CELL_BYTES];
        const char *text = json_string_value(json_array_get(word, 0));
        (void)snprintf(name, sizeof name, "  %s", text ? text : ""); /* a cell is cut anyway */
        if (add_share(table, client, name, json_number_value(json_array_get(word, 1)))) {
            return -1;
        }
    }
    return 0;
}

static int print_gaps(const struct client *client, const json_t *gaps, bool why)
{
    const struct table_column columns[] = {
        {.heading = why ? "tag, and its words" : "tag", .shortens = true},
        {.heading = why ? "chance, share" : "chance", .right = true},
        {.heading = "", .gives_way = true, .style = SCREEN_BAR},
    };
    struct table *table = table_new(columns, sizeof columns / sizeof columns[0]);
    int result = table ? 0 : -1;
    size_t i;
    json_t *gap;
    json_array_foreach(gaps, i, gap)
    {
        if (result) {
            break;
        }
        result = add_gap(table, client, gap);
    }
    if (!result) {
        result = table_print(table, &client->out);
    }
    table_free(table);
    return result;
}

static int print_answer(const struct client *client, const json_t *result, const struct args *args,
                        bool has_tags)
{
    FILE *stream = client->out.stream;
    const json_t *gaps = json_object_get(result, "gaps");
    const char *verb = has_tags ? "missing" : "fitting";
    if (json_array_size(gaps) > 0) {
        if (print_gaps(client, gaps, args->values[WHY].given)) {
            return -1;
        }
    } else if (args->values[FLOOR].given) {
        (void)fprintf(stream, "No tag is %s with a chance of %g or more.\n", verb,
                      args->values[FLOOR].number);
    } else {
        (void)fprintf(stream, "No tag is %s with a chance of 0.05 or more.\n", verb);
    }
    if (json_is_true(json_object_get(result, "early")) &&
        facts_text(&client->out,
                   "\nEarly days: little has been filed yet, and the chances still rest on what is "
                   "assumed at the start.",
                   0)) {
        return -1;
    }
    char learned[FORMAT_BYTES];
    char sentence[SENTENCE_BYTES];
    (void)snprintf(sentence, sizeof sentence,
                   "\nExpected number of tags %s: %.1f, as learned up to change %s.",
                   has_tags ? "missing" : "in all", command_number(result, "expected"),
                   format_count(command_whole(result, "learned"), learned));
    return facts_text(&client->out, sentence, 0);
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    json_t *params = NULL;
    struct wire_answer answer = {0};
    int code = make_params(client, args, &params, failure);
    if (code) {
        return code;
    }
    bool has_tags =
        json_object_get(params, "id") || json_array_size(json_object_get(params, "tags")) > 0;
    code = command_ask_take(client, "item.gaps", params, &answer, failure);
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else if (print_answer(client, answer.result, args, has_tags)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

const struct command command_gaps = {
    .name = "gaps",
    .synopsis = "[ID]",
    .summary = "the tags that an item or a draft most probably lacks",
    .about =
        "With an ID, of that filed item. Without, of the draft on standard input: plain text, "
        "or a JSON object with any of title, text, fields, tags and language. What else an "
        "item's filing holds (id, tagger, filed_at, prompted, declined) is passed over there.\n"
        "\n"
        "For an item or a draft with tags, the chance is that the tag is missing; for a draft "
        "without, that it belongs to it.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .most_words = 1,
    .run = run,
};
