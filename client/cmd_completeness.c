/*
 * completeness: the share of the true tags that is on record, by band and by tag.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/bar.h"
#include "client/command.h"
#include "client/completeness_how.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/request.h"
#include "client/table.h"

enum {
    MOST,
    HOW
};

enum {
    BAR_COLUMNS = 20,
    SENTENCE_BYTES = 1024
};

static const struct args_option OPTIONS[] = {
    [MOST] = {"most", ARGS_WHOLE, "N", 1, 1000,
              "show at most N of the tags that lose most (default 20)"},
    [HOW] = {"how", ARGS_FLAG, NULL, 0, 0, "explain where each figure comes from"},
};

/* --- the tables ----------------------------------------------------------------------------- */

static int add_estimate(struct table *table, const struct client *client, const char *name,
                        const json_t *object)
{
    const struct reply_estimate x = reply_estimate(object);
    char given[FORMAT_BYTES];
    char missing[FORMAT_BYTES];
    char share[FORMAT_BYTES] = "-";
    char between[FORMAT_BYTES];
    char bar[BAR_BYTES] = "";
    if (!isnan(x.share)) {
        (void)format_share(x.share, share);
        bar_draw_between(x.share, x.low, x.high, BAR_COLUMNS, client->out.unicode, bar);
    }
    return table_add(table, (const char *[]){name, format_amount(x.given, given),
                                             format_amount(x.missing, missing), share,
                                             format_between(x.low, x.high, between), bar});
}

static struct table *new_table(const char *what, struct table_column columns[6])
{
    columns[0] = (struct table_column){.heading = what, .shortens = true};
    columns[1] = (struct table_column){.heading = "given", .right = true};
    columns[2] = (struct table_column){.heading = "missing", .right = true};
    columns[3] = (struct table_column){.heading = "on record", .right = true};
    columns[4] = (struct table_column){.heading = "between", .right = true};
    columns[5] = (struct table_column){.gives_way = true, .heading = "", .style = SCREEN_BAR};
    return table_new(columns, 6);
}

static int print_bands(const struct client *client, const json_t *result)
{
    static const char *const BANDS[] = {"head", "torso", "tail"};
    struct table_column columns[6];
    struct table *table = new_table("band", columns);
    const json_t *bands = json_object_get(result, "bands");
    int failed = !table || add_estimate(table, client, "all", json_object_get(result, "overall"));
    for (size_t i = 0; i < sizeof BANDS / sizeof BANDS[0] && !failed; i++) {
        failed = add_estimate(table, client, BANDS[i], json_object_get(bands, BANDS[i]));
    }
    if (!failed) {
        failed = table_print(table, &client->out);
    }
    table_free(table);
    return failed ? -1
                  : facts_text(&client->out,
                               "Head: tags given 1,000 times or more; torso: 30 to 999; tail: "
                               "fewer than 30.",
                               0);
}

static int print_tags(const struct client *client, const json_t *tags, bool one)
{
    struct table_column columns[6];
    struct table *table = new_table(one ? "tag" : "tags that lose most", columns);
    int failed = !table;
    size_t i;
    json_t *tag;
    json_array_foreach(tags, i, tag)
    {
        failed = failed || add_estimate(table, client, command_text(tag, "tag"), tag);
    }
    if (!failed && i > 0) {
        (void)fprintf(client->out.stream, one ? "" : "\n"); /* errors stay on the stream */
        failed = table_print(table, &client->out);
    }
    table_free(table);
    return failed ? -1 : 0;
}

/* --- the sentences below -------------------------------------------------------------------- */

static int print_checks(const struct client *client, const json_t *checks, const json_t *overall)
{
    char sentence[SENTENCE_BYTES];
    char random[FORMAT_BYTES];
    char picked[FORMAT_BYTES];
    (void)snprintf(sentence, sizeof sentence,
                   "\nSpot checks: %s items drawn at random, %s picked. The figures come from %s.",
                   format_count(command_whole(checks, "random"), random),
                   format_count(command_whole(checks, "picked"), picked),
                   reply_source(command_text(overall, "from")));
    return facts_text(&client->out, sentence, 0);
}

static int print_wrong(const struct client *client, const json_t *wrong)
{
    char sentence[SENTENCE_BYTES];
    char share[FORMAT_BYTES];
    char low[FORMAT_BYTES];
    char high[FORMAT_BYTES];
    char seen[FORMAT_BYTES];
    char taken[FORMAT_BYTES];
    if (command_whole(wrong, "seen") == 0) {
        return 0;
    }
    (void)snprintf(sentence, sizeof sentence,
                   "Wrong tags: %s of %s that stood on randomly checked items, %s (between %s and "
                   "%s).",
                   format_count(command_whole(wrong, "wrong"), taken),
                   format_count(command_whole(wrong, "seen"), seen),
                   format_percent(reply_number(wrong, "share"), share),
                   format_percent(reply_number(wrong, "low"), low),
                   format_percent(reply_number(wrong, "high"), high));
    return facts_text(&client->out, sentence, 0);
}

static int print_second(const struct client *client, const json_t *second)
{
    char sentence[SENTENCE_BYTES];
    char items[FORMAT_BYTES];
    char found[FORMAT_BYTES];
    char rolling[FORMAT_BYTES];
    char hooper[FORMAT_BYTES];
    if (!json_is_object(second)) {
        return 0;
    }
    (void)snprintf(sentence, sizeof sentence,
                   "Second taggings: of %s items. The first tagger found %s of the tags that the "
                   "two together lead to expect; they agree by %s (Rolling) or %s (Hooper).",
                   format_count(command_whole(second, "items"), items),
                   format_percent(reply_number(second, "found_share"), found),
                   format_percent(reply_number(second, "rolling"), rolling),
                   format_percent(reply_number(second, "hooper"), hooper));
    return facts_text(&client->out, sentence, 0);
}

static int print(const struct client *client, const json_t *result, const struct args *args)
{
    bool one = args->word_count > 0;
    const json_t *overall = json_object_get(result, "overall");
    const json_t *tags = json_object_get(result, "tags");
    if ((!one && print_bands(client, result)) || print_tags(client, tags, one) ||
        print_checks(client, json_object_get(result, "checks"),
                     one && json_array_size(tags) > 0 ? json_array_get(tags, 0) : overall) ||
        print_wrong(client, json_object_get(result, "wrong")) ||
        print_second(client, json_object_get(result, "second"))) {
        return -1;
    }
    return args->values[HOW].given ? completeness_how(&client->out, result) : 0;
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"desk.completeness", REPLY_COMPLETENESS,
                                                     print};
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    if (!code && args->word_count > 0) {
        json_decref(params);
        params = NULL;
        code = request_new("tag", args->words[0], "the tag", &params, failure);
    }
    if (!code) {
        code = request_whole(params, "most", &args->values[MOST], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    return command_show_take(client, &QUESTION, params, args, failure);
}

const struct command command_completeness = {
    .name = "completeness",
    .synopsis = "[TAG]",
    .summary = "the share of the true tags on record, and where it is lowest",
    .about =
        "For all tags, by how often they are given, and for the tags that lose most: how often "
        "given, how often expected to be missing, the share on record, and the range in which "
        "it lies with a probability of 90 %. In the bar, the full part ends where the range "
        "begins, the dark part at the share, the light part where the range ends.\n"
        "\n"
        "With a TAG, of that one.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .most_words = 1,
    .run = run,
};
