/*
 * tags list, tags show: the vocabulary.
 */
#include <stdio.h>
#include <string.h>

#include "client/bar.h"
#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/table.h"

enum {
    BAR_COLUMNS = 16
};

/* --- list ----------------------------------------------------------------------------------- */

enum {
    ORDER,
    AFTER,
    MOST
};

enum {
    MOST_BY_DEFAULT = 1000,
    MOST_AT_ONCE = 1000 /* what is asked of the daemon in one request */
};

static const struct args_option LIST_OPTIONS[] = {
    [ORDER] = {"order", ARGS_CHOICE, "name|count|missing", 0, 0,
               "by name (the default), by how often given, or by how many are expected missing"},
    [AFTER] = {"after", ARGS_TEXT, "X", 0, 0, "go on after what an earlier list ended with"},
    [MOST] = {"most", ARGS_WHOLE, "N", 1, 9e15, "show at most N tags (default 1,000)"},
};

static const struct table_column LIST_COLUMNS[] = {
    {.heading = "tag", .shortens = true},
    {.heading = "given", .right = true},
    {.heading = "missing", .right = true},
    {.heading = "on record", .right = true},
    {.heading = "", .gives_way = true, .style = SCREEN_BAR},
    {.heading = ""}, /* "retired" */
};

static int add_tags(struct table *table, const struct client *client, const json_t *tags)
{
    size_t i;
    json_t *tag;
    json_array_foreach(tags, i, tag)
    {
        char given[FORMAT_BYTES];
        char missing[FORMAT_BYTES];
        char share[FORMAT_BYTES];
        char bar[BAR_BYTES];
        const char *state = command_text(tag, "state");
        double p = command_number(tag, "p");
        bar_draw(p, BAR_COLUMNS, client->out.unicode, bar);
        (void)snprintf(missing, sizeof missing, "%.1f", command_number(tag, "missing"));
        const char *cells[] = {command_text(tag, "tag"),
                               format_count(command_whole(tag, "count"), given),
                               missing,
                               format_share(p, share),
                               bar,
                               strcmp(state, "open") == 0 ? "" : state};
        if (table_add(table, cells)) {
            return -1;
        }
    }
    return 0;
}

struct place {
    json_t *after;     /* what the next page goes on after; NULL at the beginning and the end */
    const char *order; /* NULL: the daemon's default */
    int64_t left;      /* tags still wanted */
    bool more;
};

static int list_page(struct client *client, struct wire *wire, struct table *table,
                     struct place *place, struct failure *failure)
{
    struct wire_answer answer = {0};
    int64_t asked = place->left < MOST_AT_ONCE ? place->left : MOST_AT_ONCE;
    /* "*" leaves out a member whose value is NULL */
    json_t *params = json_pack("{s:I,s:s*,s:O*}", "most", (json_int_t)asked, "order", place->order,
                               "after", place->after);
    int code = wire_call_take(wire, "tag.list", params, &answer, failure);
    if (code) {
        return code;
    }
    const json_t *tags = json_object_get(answer.result, "tags");
    if (client->json) {
        command_print_json(client, &answer);
        code = command_flush(failure);
    } else if (add_tags(table, client, tags)) {
        code = failure_memory(failure);
    }
    json_t *next = json_object_get(answer.result, "next");
    place->left -= (int64_t)json_array_size(tags);
    place->more = !code && next && !json_is_null(next) && json_array_size(tags) > 0;
    json_decref(place->after);
    place->after = place->more ? json_incref(next) : NULL;
    wire_answer_deinit(&answer);
    return code;
}

static int print_list(const struct client *client, const struct table *table,
                      const struct place *place)
{
    FILE *stream = client->out.stream;
    if (table_rows(table) == 0) {
        (void)fprintf(stream, "There are no tags%s.\n", place->order ? " left" : "");
        return 0;
    }
    if (table_print(table, &client->out)) {
        return -1;
    }
    if (place->more && json_is_string(place->after)) {
        char sentence[1024];
        (void)snprintf(sentence, sizeof sentence, "\nThere are more: --after '%s'",
                       json_string_value(place->after));
        return facts_text(&client->out, sentence, 0);
    }
    return 0;
}

static int run_list(struct client *client, const struct args *args, struct failure *failure)
{
    const struct args_value *values = args->values;
    struct place place = {.order = values[ORDER].text,
                          .left = values[MOST].given ? values[MOST].whole : MOST_BY_DEFAULT,
                          .more = true};
    struct wire *wire = NULL;
    struct table *table = table_new(LIST_COLUMNS, sizeof LIST_COLUMNS / sizeof LIST_COLUMNS[0]);
    int code = table ? 0 : failure_memory(failure);
    if (!code && values[AFTER].given) {
        code = command_string(values[AFTER].text, "the value of --after", &place.after, failure);
    }
    if (!code) {
        code = wire_open(client->socket_path, &wire, failure);
    }
    while (!code && place.more && place.left > 0) {
        code = list_page(client, wire, table, &place, failure);
    }
    if (!code && !client->json && print_list(client, table, &place)) {
        code = failure_memory(failure);
    }
    json_decref(place.after);
    table_free(table);
    wire_free(wire);
    return code;
}

const struct command command_tags_list = {
    .name = "tags list",
    .synopsis = "",
    .summary = "the vocabulary: how often each tag is given, how often missing",
    .about = "For each tag: the items it is given to, the number of items where it is expected to "
             "be missing, and the share of its true uses that are on record (its propensity).",
    .options = LIST_OPTIONS,
    .option_count = sizeof LIST_OPTIONS / sizeof LIST_OPTIONS[0],
    .run = run_list,
};

/* --- show ----------------------------------------------------------------------------------- */

static int print_propensity(const struct client *client, const json_t *propensity)
{
    static const char *const SOURCES[][2] = {{"curve", "from the curve of all tags"},
                                             {"checks", "from spot checks"},
                                             {"both", "from the curve and spot checks"}};
    const char *from = command_text(propensity, "from");
    char share[FORMAT_BYTES];
    char low[FORMAT_BYTES];
    char high[FORMAT_BYTES];
    char bar[BAR_BYTES];
    for (size_t i = 0; i < sizeof SOURCES / sizeof SOURCES[0]; i++) {
        if (strcmp(from, SOURCES[i][0]) == 0) {
            from = SOURCES[i][1];
            break;
        }
    }
    double p = command_number(propensity, "p");
    bar_draw(p, BAR_COLUMNS, client->out.unicode, bar);
    (void)fprintf(client->out.stream, "%s%-*s%s%s  %s%s%s\n",
                  screen_begin(&client->out, SCREEN_HEADING), FACTS_NAME_COLUMNS, "on record",
                  screen_end(&client->out, SCREEN_HEADING), format_share(p, share),
                  screen_begin(&client->out, SCREEN_BAR), bar,
                  screen_end(&client->out, SCREEN_BAR)); /* errors stay on the stream */
    return facts_printf(&client->out, FACTS_NAME_COLUMNS, "",
                        "of its true uses, between %s and %s, %s",
                        format_share(command_number(propensity, "low"), low),
                        format_share(command_number(propensity, "high"), high), from);
}

/* A label, a broader tag or an alias: a text, a list of texts, or nothing. */
static int print_names(const struct client *client, const char *label, const json_t *names)
{
    const char *text = json_string_value(names);
    if (text && *text) {
        return facts_print(&client->out, FACTS_NAME_COLUMNS, label, text);
    }
    size_t i;
    json_t *name;
    json_array_foreach(names, i, name)
    {
        text = json_string_value(name);
        if (text && facts_print(&client->out, FACTS_NAME_COLUMNS, i == 0 ? label : "", text)) {
            return -1;
        }
    }
    return 0;
}

static int print_tag(const struct client *client, const json_t *tag)
{
    const struct screen *out = &client->out;
    const json_t *rulings = json_object_get(tag, "rulings");
    int64_t belongs = command_whole(rulings, "belongs");
    int64_t not_its = command_whole(rulings, "not");
    char count[FORMAT_BYTES];
    char unprompted[FORMAT_BYTES];
    char opened[FORMAT_BYTES];
    if (facts_print(out, FACTS_NAME_COLUMNS, "tag", command_text(tag, "tag")) ||
        print_names(client, "label", json_object_get(tag, "label")) ||
        print_names(client, "broader", json_object_get(tag, "broader")) ||
        print_names(client, "also known as", json_object_get(tag, "aliases")) ||
        facts_printf(out, FACTS_NAME_COLUMNS, "state", "%s, since change %s",
                     command_text(tag, "state"),
                     format_count(command_whole(tag, "opened_seq"), opened)) ||
        facts_printf(out, FACTS_NAME_COLUMNS, "given", "%s, unprompted %s",
                     format_count(command_whole(tag, "count"), count),
                     format_count(command_whole(tag, "unprompted"), unprompted)) ||
        print_propensity(client, json_object_get(tag, "propensity")) ||
        facts_printf(out, FACTS_NAME_COLUMNS, "expected", "%.1f true uses, %.1f of them missing",
                     command_number(tag, "expected_true"), command_number(tag, "missing"))) {
        return -1;
    }
    if (belongs > 0 || not_its > 0) {
        char in[FORMAT_BYTES];
        char ruled_out[FORMAT_BYTES];
        return facts_printf(out, FACTS_NAME_COLUMNS, "rulings", "it belongs %s, it does not %s",
                            format_count(belongs, in), format_count(not_its, ruled_out));
    }
    return 0;
}

static int run_show(struct client *client, const struct args *args, struct failure *failure)
{
    json_t *tag = NULL;
    struct wire_answer answer = {0};
    int code = command_string(args->words[0], "the tag", &tag, failure);
    if (!code) {
        code =
            command_ask_take(client, "tag.show", json_pack("{s:o}", "tag", tag), &answer, failure);
    }
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else if (print_tag(client, answer.result)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

const struct command command_tags_show = {
    .name = "tags show",
    .synopsis = "TAG",
    .summary = "one tag: its counts, and how complete its record is",
    .about = "An old name of the tag serves as well.",
    .least_words = 1,
    .most_words = 1,
    .run = run_show,
};
