/*
 * worklist: the filed items most worth an editor's minute.
 */
#include <stdio.h>
#include <string.h>

#include "client/bar.h"
#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/request.h"
#include "client/table.h"

enum {
    TAG,
    MOST,
    FLOOR,
    AFTER
};

enum {
    MOST_BY_DEFAULT = 50,
    MOST_AT_ONCE = 1000, /* what is asked of the daemon in one request */
    BAR_COLUMNS = 8,
    CELL_BYTES = 1024,
    SENTENCE_BYTES = 1024
};

static const struct args_option OPTIONS[] = {
    [TAG] = {"tag", ARGS_TEXT, "TAG", 0, 0, "only items that may lack this tag"},
    [MOST] = {"most", ARGS_WHOLE, "N", 1, 9e15, "show at most N items (default 50)"},
    [FLOOR] = {"floor", ARGS_NUMBER, "X", 0, 1,
               "the least chance that is shown and counted (default 0.2)"},
    [AFTER] = {"after", ARGS_TEXT, "ID", 0, 0, "go on after the item an earlier list ended with"},
};

static const struct table_column COLUMNS[] = {
    {.heading = "item, and its title", .shortens = true},
    {.heading = "likely missing", .shortens = true},
    {.heading = "chance", .right = true},
    {.heading = "", .gives_way = true, .style = SCREEN_BAR},
    {.heading = "expected", .right = true},
    {.heading = "in all", .right = true},
};

/* Where the list stands between two pages. */
struct place {
    json_t *after; /* what the next page goes on after; NULL at the beginning and the end */
    int64_t left;  /* items still wanted */
    int64_t shown;
    double running; /* tags expected up to here */
    int64_t learned;
    int64_t scored; /* the oldest scores among those shown, as a seq; 0: not told */
    bool more;
};

/* --- the table ------------------------------------------------------------------------------ */

/* One line: `item` and the gap (NULL: none), the sums only where they are given. */
static int add_line(struct table *table, const struct client *client, const char *item,
                    const json_t *gap, const char *expected, const char *running)
{
    char figure[FORMAT_BYTES] = "";
    char bar[BAR_BYTES] = "";
    if (gap) {
        double chance = command_number(gap, "chance");
        bar_draw(chance, BAR_COLUMNS, client->out.unicode, bar);
        (void)format_share(chance, figure);
    }
    return table_add(
        table, (const char *[]){item, command_text(gap, "tag"), figure, bar, expected, running});
}

/* The first line has the id, the second the title; each has its gap. */
static int add_item(struct table *table, const struct client *client, const json_t *item)
{
    const json_t *gaps = json_object_get(item, "gaps");
    const char *title = command_text(item, "title");
    char expected[FORMAT_BYTES];
    char running[FORMAT_BYTES];
    char below[CELL_BYTES];
    (void)snprintf(expected, sizeof expected, "%.2f", command_number(item, "expected"));
    (void)snprintf(running, sizeof running, "%.1f", command_number(item, "running"));
    (void)snprintf(below, sizeof below, "  %s", title); /* a long one is cut anyway */
    size_t lines = *title ? 2 : 1;
    lines = json_array_size(gaps) > lines ? json_array_size(gaps) : lines;
    for (size_t i = 0; i < lines; i++) {
        const char *name = i == 0 ? command_text(item, "id") : i == 1 && *title ? below : "";
        if (add_line(table, client, name, json_array_get(gaps, i), i == 0 ? expected : "",
                     i == 0 ? running : "")) {
            return -1;
        }
    }
    return 0;
}

static int add_items(struct table *table, const struct client *client, const json_t *items,
                     struct place *place)
{
    size_t i;
    json_t *item;
    json_array_foreach(items, i, item)
    {
        int64_t scored = command_whole(item, "scored_seq");
        place->running = command_number(item, "running");
        if (scored > 0 && (place->scored == 0 || scored < place->scored)) {
            place->scored = scored;
        }
        if (add_item(table, client, item)) {
            return -1;
        }
    }
    place->shown += (int64_t)json_array_size(items);
    return 0;
}

/* --- pages ---------------------------------------------------------------------------------- */

static int page_params(const struct args_value *values, const struct place *place,
                       json_t **ret_params, struct failure *failure)
{
    int64_t asked = place->left < MOST_AT_ONCE ? place->left : MOST_AT_ONCE;
    /* "*" leaves out a member whose value is NULL */
    json_t *params = json_pack("{s:I,s:O*}", "most", (json_int_t)asked, "after", place->after);
    int code = params ? 0 : failure_memory(failure);
    if (!code) {
        code = request_text(params, "tag", &values[TAG], failure);
    }
    if (!code) {
        code = request_number(params, "floor", &values[FLOOR], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    *ret_params = params;
    return 0;
}

static int show_page(const struct client *client, const struct wire_answer *answer,
                     struct table *table, struct place *place, struct failure *failure)
{
    if (client->json) {
        command_print_json(client, answer);
        return command_flush(failure);
    }
    int code = reply_check(answer->result, REPLY_WORKLIST, failure);
    if (!code && add_items(table, client, json_object_get(answer->result, "items"), place)) {
        code = failure_memory(failure);
    }
    return code;
}

static int list_page(const struct client *client, struct wire *wire, struct table *table,
                     const struct args_value *values, struct place *place, struct failure *failure)
{
    json_t *params = NULL;
    struct wire_answer answer = {0};
    int code = page_params(values, place, &params, failure);
    if (!code) {
        code = wire_call_take(wire, "desk.worklist", params, &answer, failure);
    }
    if (code) {
        return code;
    }
    code = show_page(client, &answer, table, place, failure);
    size_t count = json_array_size(json_object_get(answer.result, "items"));
    json_t *next = json_object_get(answer.result, "next");
    place->learned = command_whole(answer.result, "learned");
    place->left -= (int64_t)count;
    place->more = !code && json_is_string(next) && count > 0;
    json_decref(place->after);
    place->after = place->more ? json_incref(next) : NULL;
    wire_answer_deinit(&answer);
    return code;
}

/* --- the sentences -------------------------------------------------------------------------- */

static int print_sum(const struct client *client, const struct args_value *values,
                     const struct place *place)
{
    char sentence[SENTENCE_BYTES];
    char shown[FORMAT_BYTES];
    char sum[FORMAT_BYTES];
    const char *tag = values[TAG].given ? values[TAG].text : "";
    (void)format_amount(place->running, sum);
    if (values[AFTER].given) {
        (void)snprintf(sentence, sizeof sentence,
                       "\nAll items up to here should give about %s missing ", sum);
    } else if (place->shown == 1) {
        (void)snprintf(sentence, sizeof sentence, "\nThis item should give about %s missing ", sum);
    } else {
        (void)snprintf(sentence, sizeof sentence,
                       "\nThe first %s items should give about %s missing ",
                       format_count(place->shown, shown), sum);
    }
    size_t used = strlen(sentence);
    (void)snprintf(sentence + used, sizeof sentence - used, *tag ? "uses of '%s'." : "tags%s.",
                   tag); /* a long name is cut */
    return facts_text(&client->out, sentence, 0);
}

static int print_ends(const struct client *client, const struct place *place)
{
    char sentence[SENTENCE_BYTES];
    if (place->scored > 0 && place->learned > place->scored) {
        char scored[FORMAT_BYTES];
        char learned[FORMAT_BYTES];
        (void)snprintf(sentence, sizeof sentence,
                       "Learned up to change %s; the oldest of these chances is of change %s.",
                       format_count(place->learned, learned), format_count(place->scored, scored));
        if (facts_text(&client->out, sentence, 0)) {
            return -1;
        }
    }
    if (place->more && json_is_string(place->after)) {
        (void)snprintf(sentence, sizeof sentence, "\nThere are more: --after '%s'",
                       json_string_value(place->after));
        return facts_text(&client->out, sentence, 0);
    }
    return 0;
}

static int print_list(const struct client *client, const struct table *table,
                      const struct args_value *values, const struct place *place)
{
    if (table_rows(table) == 0) {
        (void)fprintf(client->out.stream, "No item lacks a tag with a chance of %g or more%s.\n",
                      values[FLOOR].given ? values[FLOOR].number : 0.2,
                      values[AFTER].given ? " after that one" : "");
        return 0;
    }
    return table_print(table, &client->out) || print_sum(client, values, place) ||
                   print_ends(client, place)
               ? -1
               : 0;
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    const struct args_value *values = args->values;
    struct place place = {.left = values[MOST].given ? values[MOST].whole : MOST_BY_DEFAULT,
                          .more = true};
    struct wire *wire = NULL;
    struct table *table = table_new(COLUMNS, sizeof COLUMNS / sizeof COLUMNS[0]);
    int code = table ? 0 : failure_memory(failure);
    if (!code && values[AFTER].given) {
        code = command_string(values[AFTER].text, "the value of --after", &place.after, failure);
    }
    if (!code) {
        code = wire_open(client->socket_path, &wire, failure);
    }
    while (!code && place.more && place.left > 0) {
        code = list_page(client, wire, table, values, &place, failure);
    }
    if (!code && !client->json && print_list(client, table, values, &place)) {
        code = failure_memory(failure);
    }
    json_decref(place.after);
    table_free(table);
    wire_free(wire);
    return code;
}

const struct command command_worklist = {
    .name = "worklist",
    .synopsis = "",
    .summary = "the filed items most worth an editor's minute",
    .about = "Filed items by the number of missing tags that an editor should find on them, each "
             "with the tags it may lack and their chances. 'expected' is the sum of an item's "
             "chances, 'in all' the sum from the top of the list.\n"
             "\n"
             "Rule on what you find with 'undertag rule ID --belongs TAG --not TAG'.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .run = run,
};
