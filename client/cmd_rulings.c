/*
 * rule, check, sample: what people say of the tags of an item, and which items to go through.
 */
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/request.h"
#include "client/text.h"

/* Prints the texts of an array, one a line behind the name. -1: no memory. */
static int print_texts(const struct client *client, const char *name, const json_t *texts)
{
    size_t i;
    json_t *text;
    json_array_foreach(texts, i, text)
    {
        if (facts_print(&client->out, FACTS_NAME_COLUMNS, i == 0 ? name : "",
                        json_string_value(text))) {
            return -1;
        }
    }
    return 0;
}

static int print_given(const struct client *client, const char *name,
                       const struct args_value *value)
{
    for (size_t i = 0; i < value->list_count; i++) {
        if (facts_print(&client->out, FACTS_NAME_COLUMNS, i == 0 ? name : "", value->list[i])) {
            return -1;
        }
    }
    return 0;
}

/* --- rule ----------------------------------------------------------------------------------- */

enum {
    BELONGS,
    NOT,
    EDITOR
};

static const struct args_option RULE_OPTIONS[] = {
    [BELONGS] = {"belongs", ARGS_LIST, "TAG", 0, 0, "a tag that belongs to the item"},
    [NOT] = {"not", ARGS_LIST, "TAG", 0, 0, "a tag that does not"},
    [EDITOR] = {"editor", ARGS_TEXT, "NAME", 0, 0, "who rules"},
};

static int print_ruled(const struct client *client, const json_t *result, const struct args *args)
{
    char seq[FORMAT_BYTES];
    if (facts_printf(&client->out, FACTS_NAME_COLUMNS, "ruled on", "%s (change %s)", args->words[0],
                     format_count(command_whole(result, "seq"), seq)) ||
        print_given(client, "belongs", &args->values[BELONGS]) ||
        print_given(client, "does not", &args->values[NOT])) {
        return -1;
    }
    return 0;
}

static int run_rule(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"item.rule", REPLY_RULED, print_ruled};
    const struct args_value *values = args->values;
    if (!values[BELONGS].given && !values[NOT].given) {
        return failure_set(failure, FAILURE_USAGE,
                           "rule needs --belongs TAG or --not TAG; see 'undertag rule --help'");
    }
    json_t *params = NULL;
    int code = request_new("id", args->words[0], "the ID", &params, failure);
    if (!code && values[BELONGS].given) {
        code = request_list(params, "belongs", &values[BELONGS], failure);
    }
    if (!code && values[NOT].given) {
        code = request_list(params, "not", &values[NOT], failure);
    }
    if (!code) {
        code = request_text(params, "editor", &values[EDITOR], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    return command_show_take(client, &QUESTION, params, args, failure);
}

const struct command command_rule = {
    .name = "rule",
    .synopsis = "ID",
    .summary = "an editor's word: these tags belong to an item, those do not",
    .about =
        "A tag that is ruled in is on the item at once, one that is ruled out is taken off and "
        "never proposed for it again. The latest word counts for each tag. Give --belongs and "
        "--not once for each tag.",
    .options = RULE_OPTIONS,
    .option_count = sizeof RULE_OPTIONS / sizeof RULE_OPTIONS[0],
    .least_words = 1,
    .most_words = 1,
    .run = run_rule,
};

/* --- check ---------------------------------------------------------------------------------- */

enum {
    TAG,
    DRAWN,
    CHECKER
};

static const struct args_option CHECK_OPTIONS[] = {
    [TAG] = {"tag", ARGS_LIST, "TAG", 0, 0,
             "a tag of the item; once for each of them, and not at all if it has none"},
    [DRAWN] = {"drawn", ARGS_CHOICE, "random|picked", 0, 0,
               "how the item came up: by 'undertag sample', or otherwise (the default, picked)"},
    [CHECKER] = {"checker", ARGS_TEXT, "NAME", 0, 0, "who checked"},
};

/* "2 tags were missing and are on it now:" and the tags. */
static int print_found(const struct client *client, const json_t *tags, const char *one,
                       const char *many)
{
    size_t count = json_array_size(tags);
    char figure[FORMAT_BYTES];
    if (count == 0) {
        return 0;
    }
    (void)fprintf(client->out.stream, "\n%s %s:\n", format_count((int64_t)count, figure),
                  count == 1 ? one : many); /* errors stay on the stream */
    return print_texts(client, "", tags);
}

static int print_checked(const struct client *client, const json_t *result, const struct args *args)
{
    const json_t *missed = json_object_get(result, "missed");
    const json_t *extra = json_object_get(result, "extra");
    size_t count = args->values[TAG].list_count;
    char seq[FORMAT_BYTES];
    if (facts_printf(&client->out, FACTS_NAME_COLUMNS, "checked", "%s (change %s)", args->words[0],
                     format_count(command_whole(result, "seq"), seq)) ||
        (count > 0 ? print_given(client, "its tags", &args->values[TAG])
                   : facts_print(&client->out, FACTS_NAME_COLUMNS, "its tags", "none"))) {
        return -1;
    }
    if (json_array_size(missed) == 0 && json_array_size(extra) == 0) {
        (void)fprintf(client->out.stream, "\nNothing was missing and nothing was wrong.\n");
        return 0;
    }
    return print_found(client, missed, "tag was missing and is on it now",
                       "tags were missing and are on it now") ||
                   print_found(client, extra, "tag was wrong and is taken off",
                               "tags were wrong and are taken off")
               ? -1
               : 0;
}

static int run_check(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"item.check", REPLY_CHECKED, print_checked};
    const struct args_value *values = args->values;
    json_t *params = NULL;
    int code = request_new("id", args->words[0], "the ID", &params, failure);
    if (!code) {
        code = request_list(params, "tags", &values[TAG], failure);
    }
    if (!code) {
        code = request_text(params, "drawn", &values[DRAWN], failure);
    }
    if (!code) {
        code = request_text(params, "checker", &values[CHECKER], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    return command_show_take(client, &QUESTION, params, args, failure);
}

const struct command command_check = {
    .name = "check",
    .synopsis = "ID",
    .summary = "a spot check: all the tags that belong to an item, and no other",
    .about =
        "Give the complete list of the item's tags, after going through the whole vocabulary with "
        "it: what is on the item and not in the list is taken off, what is in the list and not on "
        "the item is put on it. Without --tag, the item has no tag at all.\n"
        "\n"
        "Only items that 'undertag sample' drew say how complete the whole stock is: give those "
        "--drawn random, and check each of them.",
    .options = CHECK_OPTIONS,
    .option_count = sizeof CHECK_OPTIONS / sizeof CHECK_OPTIONS[0],
    .least_words = 1,
    .most_words = 1,
    .run = run_check,
};

/* --- sample --------------------------------------------------------------------------------- */

enum {
    SEED
};

enum {
    SAMPLE_MOST = 1000
};

static const struct args_option SAMPLE_OPTIONS[] = {
    [SEED] = {"seed", ARGS_WHOLE, "N", 0, 9e15, "draw the same items again from the same stock"},
};

static int print_sample(const struct client *client, const json_t *result, const struct args *args)
{
    (void)args;
    const json_t *items = json_object_get(result, "items");
    if (json_array_size(items) == 0) {
        /* Beside the list, which stays empty for a script. */
        (void)fprintf(client->err.stream, "There is no item that has not been checked.\n");
    }
    size_t i;
    json_t *item;
    json_array_foreach(items, i, item)
    {
        char *id = text_clean(json_string_value(item), TEXT_ONE_LINE);
        if (!id) {
            return -1;
        }
        (void)fprintf(client->out.stream, "%s\n", id); /* errors stay on the stream */
        free(id);
    }
    return 0;
}

static int read_sample_size(const char *word, json_t *params, struct failure *failure)
{
    char *end = NULL;
    errno = 0;
    long long most = strtoll(word, &end, 10);
    if (end == word || *end || errno || most < 1 || most > SAMPLE_MOST) {
        return failure_set(failure, FAILURE_USAGE,
                           "sample takes a whole number from 1 to %d, not '%.200s'", SAMPLE_MOST,
                           word);
    }
    return json_object_set_new(params, "most", json_integer(most)) ? failure_memory(failure) : 0;
}

static int run_sample(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"desk.sample", REPLY_SAMPLE, print_sample};
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    if (!code && args->word_count > 0) {
        code = read_sample_size(args->words[0], params, failure);
    }
    if (!code) {
        code = request_whole(params, "seed", &args->values[SEED], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    return command_show_take(client, &QUESTION, params, args, failure);
}

const struct command command_sample = {
    .name = "sample",
    .synopsis = "[N]",
    .summary = "items drawn at random for spot checks, one ID a line",
    .about = "Draws N items (default 20) that have not been checked, each with an equal chance. "
             "Check every one of them with 'undertag check ID --drawn random': to leave out the "
             "hard ones would make the figures of completeness wrong.",
    .options = SAMPLE_OPTIONS,
    .option_count = sizeof SAMPLE_OPTIONS / sizeof SAMPLE_OPTIONS[0],
    .most_words = 1,
    .run = run_sample,
};
