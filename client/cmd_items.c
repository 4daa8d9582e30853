/*
 * show, withdraw, list: single items, and what changed.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/request.h"
#include "client/table.h"

/* --- show ----------------------------------------------------------------------------------- */

/* Prints a fact unless its value is empty. */
static int fact(const struct client *client, const char *name, const char *value)
{
    return *value ? facts_print(&client->out, FACTS_NAME_COLUMNS, name, value) : 0;
}

/* Prints the texts of an array, one a line behind the name. */
static int fact_list(const struct client *client, const char *name, const json_t *list)
{
    size_t i;
    json_t *entry;
    json_array_foreach(list, i, entry)
    {
        const char *text = json_string_value(entry);
        if (text && facts_print(&client->out, FACTS_NAME_COLUMNS, i == 0 ? name : "", text)) {
            return -1;
        }
    }
    return 0;
}

static int print_field(const struct client *client, const char *label, const char *name,
                       const json_t *value)
{
    char *text = json_dumps(value, JSON_ENCODE_ANY | JSON_REAL_PRECISION(15));
    if (!text) {
        return -1;
    }
    const char *plain = json_string_value(value);
    int result = facts_printf(&client->out, FACTS_NAME_COLUMNS, label, "%s = %s", name,
                              plain ? plain : text);
    free(text);
    return result;
}

static int print_fields(const struct client *client, const json_t *fields)
{
    const char *label = "fields";
    void *at =
        json_object_iter((json_t *)fields); /* reading only: jansson's iterator is not const */
    for (; at; at = json_object_iter_next((json_t *)fields, at)) {
        const char *name = json_object_iter_key(at);
        const json_t *value = json_object_iter_value(at);
        size_t i;
        json_t *entry;
        if (!json_is_array(value) && print_field(client, label, name, value)) {
            return -1;
        }
        json_array_foreach(value, i, entry)
        {
            if (print_field(client, i == 0 ? label : "", name, entry)) {
                return -1;
            }
        }
        label = "";
    }
    return 0;
}

/* "2031-05-04T10:00:00Z by keeper-3", or one of both, or "". */
static int print_filed(const struct client *client, const json_t *item)
{
    const char *at = command_text(item, "filed_at");
    const char *tagger = command_text(item, "tagger");
    if (!*at && !*tagger) {
        return 0;
    }
    return facts_printf(&client->out, FACTS_NAME_COLUMNS, "filed", "%s%s%s%s", at,
                        *at && *tagger ? " " : "", *tagger ? "by " : "", tagger);
}

/* True where the tags filed are, as a set, not the current ones. */
static bool differs(const json_t *filed, const json_t *tags)
{
    size_t i;
    json_t *tag;
    json_array_foreach(filed, i, tag)
    {
        size_t j;
        json_t *current;
        bool found = false;
        json_array_foreach(tags, j, current)
        {
            found = found || json_equal(tag, current);
        }
        if (!found) {
            return true;
        }
    }
    return json_array_size(filed) != json_array_size(tags);
}

/* The check, and its tags where they are not the current ones any more. */
static int print_checked(const struct client *client, const json_t *checked, const json_t *tags)
{
    const json_t *list = json_object_get(checked, "tags");
    if (!json_is_object(checked)) {
        return 0;
    }
    const char *checker = command_text(checked, "checker");
    const char *drawn =
        strcmp(command_text(checked, "drawn"), "random") == 0 ? ", drawn at random" : ", picked";
    if (facts_printf(&client->out, FACTS_NAME_COLUMNS, "checked", "%s%s%s%s",
                     command_text(checked, "at"), *checker ? " by " : "", checker, drawn)) {
        return -1;
    }
    return differs(list, tags) ? fact_list(client, "as checked", list) : 0;
}

/* Each second tagging: who and when, and its tags below. */
static int print_second(const struct client *client, const json_t *taggings)
{
    size_t i;
    json_t *tagging;
    json_array_foreach(taggings, i, tagging)
    {
        const char *at = command_text(tagging, "filed_at");
        const char *tagger = command_text(tagging, "tagger");
        const json_t *tags = json_object_get(tagging, "tags");
        if (facts_printf(&client->out, FACTS_NAME_COLUMNS, "tagged again", "%s%s%s%s%s", at,
                         *at && *tagger ? " " : "", *tagger ? "by " : "", tagger,
                         json_array_size(tags) > 0 ? "" : ", without a tag") ||
            fact_list(client, "", tags)) {
            return -1;
        }
    }
    return 0;
}

static int print_item(const struct client *client, const json_t *item)
{
    const json_t *tags = json_object_get(item, "tags");
    const json_t *filed = json_object_get(item, "filed");
    char seq[FORMAT_BYTES];
    if (fact(client, "id", command_text(item, "id")) ||
        fact(client, "title", command_text(item, "title")) || print_filed(client, item) ||
        facts_printf(&client->out, FACTS_NAME_COLUMNS, "stored", "%s%schange %s",
                     command_text(item, "stored_at"), *command_text(item, "stored_at") ? ", " : "",
                     format_count(command_whole(item, "seq"), seq)) ||
        fact(client, "language", command_text(item, "language")) ||
        print_fields(client, json_object_get(item, "fields"))) {
        return -1;
    }
    int result = json_array_size(tags) > 0
                     ? fact_list(client, "tags", tags)
                     : facts_print(&client->out, FACTS_NAME_COLUMNS, "tags", "none");
    if (result || (differs(filed, tags) && fact_list(client, "as filed", filed)) ||
        fact_list(client, "prompted", json_object_get(item, "prompted")) ||
        fact_list(client, "declined", json_object_get(item, "declined")) ||
        fact_list(client, "ruled in", json_object_get(item, "belongs")) ||
        fact_list(client, "ruled out", json_object_get(item, "not")) ||
        print_checked(client, json_object_get(item, "checked"), tags) ||
        print_second(client, json_object_get(item, "second"))) {
        return -1;
    }
    const char *text = command_text(item, "text");
    if (*text) {
        (void)fputc('\n', client->out.stream); /* errors stay on the stream */
        return facts_text(&client->out, text, 0);
    }
    return 0;
}

static int run_show(struct client *client, const struct args *args, struct failure *failure)
{
    json_t *params = NULL;
    struct wire_answer answer = {0};
    int code = request_new("id", args->words[0], "the ID", &params, failure);
    if (!code) {
        code = command_ask_take(client, "item.show", params, &answer, failure);
    }
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else if (print_item(client, answer.result)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

const struct command command_show = {
    .name = "show",
    .synopsis = "ID",
    .summary = "a filed item: its text, its tags, what was ruled and checked",
    .about = "Shows the item as it stands, every acknowledged change included.",
    .least_words = 1,
    .most_words = 1,
    .run = run_show,
};

/* --- withdraw ------------------------------------------------------------------------------- */

static int withdraw(struct client *client, struct wire *wire, const char *id,
                    struct failure *failure)
{
    json_t *params = NULL;
    struct wire_answer answer = {0};
    int code = request_new("id", id, "the ID", &params, failure);
    if (!code) {
        code = wire_call_take(wire, "item.withdraw", params, &answer, failure);
    }
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else {
        char seq[FORMAT_BYTES];
        code = facts_printf(&client->out, FACTS_NAME_COLUMNS, "withdrawn", "%s (change %s)", id,
                            format_count(command_whole(answer.result, "seq"), seq));
        code = code ? failure_memory(failure) : 0;
    }
    wire_answer_deinit(&answer);
    return code;
}

static int run_withdraw(struct client *client, const struct args *args, struct failure *failure)
{
    struct wire *wire = NULL;
    int code = wire_open(client->socket_path, &wire, failure);
    int bad = 0; /* the first ID's code that was bad data: the others are still withdrawn */
    for (size_t i = 0; i < args->word_count && !code; i++) {
        code = withdraw(client, wire, args->words[i], failure);
        if (code == FAILURE_DATA) {
            command_complain(client, "%s: %s", args->words[i], failure->message);
            *failure = (struct failure){0};
            bad = bad ? bad : code;
            code = 0;
        }
    }
    wire_free(wire);
    return code ? code : bad;
}

const struct command command_withdraw = {
    .name = "withdraw",
    .synopsis = "ID...",
    .summary = "take items out of the store and of every answer",
    .about = "The items and their text are gone from every answer at once. An ID that is not there "
             "is reported, and the others are withdrawn all the same.",
    .least_words = 1,
    .most_words = SIZE_MAX,
    .run = run_withdraw,
};

/* --- list ----------------------------------------------------------------------------------- */

enum {
    SINCE,
    MOST
};

enum {
    MOST_BY_DEFAULT = 1000,
    MOST_AT_ONCE = 1000 /* what is asked of the daemon in one request */
};

static const struct args_option LIST_OPTIONS[] = {
    [SINCE] = {"since", ARGS_WHOLE, "SEQ", 0, 9e15, "what changed after that change (default 0)"},
    [MOST] = {"most", ARGS_WHOLE, "N", 1, 9e15, "show at most N items (default 1,000)"},
};

static int add_items(struct table *table, const json_t *items)
{
    size_t i;
    json_t *item;
    json_array_foreach(items, i, item)
    {
        char seq[FORMAT_BYTES];
        bool withdrawn = json_is_true(json_object_get(item, "withdrawn"));
        const char *cells[] = {format_count(command_whole(item, "seq"), seq),
                               withdrawn ? "withdrawn" : "filed", command_text(item, "id")};
        if (table_add(table, cells)) {
            return -1;
        }
    }
    return 0;
}

/* Asks for one page; *inout_since moves on, *ret_count are the items it held. */
static int list_page(struct client *client, struct wire *wire, struct table *table,
                     int64_t *inout_since, int64_t most, int64_t *ret_count,
                     struct failure *failure)
{
    struct wire_answer answer = {0};
    json_t *params =
        json_pack("{s:I,s:I}", "since", (json_int_t)*inout_since, "most", (json_int_t)most);
    int code = wire_call_take(wire, "item.list", params, &answer, failure);
    if (code) {
        return code;
    }
    const json_t *items = json_object_get(answer.result, "items");
    if (client->json) {
        command_print_json(client, &answer);
        code = command_flush(failure);
    } else if (add_items(table, items)) {
        code = failure_memory(failure);
    }
    *ret_count = (int64_t)json_array_size(items);
    *inout_since = command_whole(answer.result, "next");
    wire_answer_deinit(&answer);
    return code;
}

static int run_list(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct table_column COLUMNS[] = {{.heading = "change", .right = true},
                                                  {.heading = "item"},
                                                  {.heading = "id", .shortens = true}};
    int64_t since = args->values[SINCE].given ? args->values[SINCE].whole : 0;
    int64_t left = args->values[MOST].given ? args->values[MOST].whole : MOST_BY_DEFAULT;
    struct wire *wire = NULL;
    struct table *table = table_new(COLUMNS, sizeof COLUMNS / sizeof COLUMNS[0]);
    int code = table ? wire_open(client->socket_path, &wire, failure) : failure_memory(failure);
    bool more = !code;
    while (more && left > 0) {
        int64_t asked = left < MOST_AT_ONCE ? left : MOST_AT_ONCE;
        int64_t count = 0;
        code = list_page(client, wire, table, &since, asked, &count, failure);
        left -= count;
        more = !code && count >= asked;
    }
    if (!code && !client->json) {
        if (table_rows(table) == 0) {
            (void)fprintf(client->out.stream, "Nothing changed after that.\n");
        } else if (table_print(table, &client->out)) {
            code = failure_memory(failure);
        } else if (more) {
            (void)fprintf(client->out.stream, "\nThere may be more: --since %lld\n",
                          (long long)since);
        }
    }
    table_free(table);
    wire_free(wire);
    return code;
}

const struct command command_list = {
    .name = "list",
    .synopsis = "",
    .summary = "what was filed, revised or withdrawn after a change",
    .about =
        "Lists each item once, at its latest change, so that a feed can compare what it holds.",
    .options = LIST_OPTIONS,
    .option_count = sizeof LIST_OPTIONS / sizeof LIST_OPTIONS[0],
    .run = run_list,
};
