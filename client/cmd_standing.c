/*
 * standing: how good the proposals are, each item scored before it was learned.
 */
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "client/bar.h"
#include "client/command.h"
#include "client/facts.h"
#include "client/figures.h"
#include "client/format.h"
#include "client/request.h"
#include "client/table.h"

enum {
    WINDOW
};

enum {
    BAR_COLUMNS = 16,
    NAME_BYTES = 96,
    SENTENCE_BYTES = 512
};

static const struct args_option OPTIONS[] = {
    [WINDOW] = {"window", ARGS_WHOLE, "N", 0, 9e15,
                "over the last N items (default 10,000; 0: all of them)"},
};

static const struct table_column FIGURE_COLUMNS[] = {
    {.heading = "figure", .shortens = true},
    {.heading = "with", .right = true},
    {.heading = "error", .right = true},
    {.heading = "without", .right = true},
    {.heading = "gain", .right = true},
    {.heading = "between", .right = true, .gives_way = true},
};

static const struct table_column RELIABILITY_COLUMNS[] = {
    {.heading = "chance shown"},
    {.heading = "ruled on", .right = true},
    {.heading = "mean chance", .right = true},
    {.heading = "confirmed", .right = true},
    {.heading = "share", .right = true},
    {.heading = "", .gives_way = true, .style = SCREEN_BAR},
};

/* --- figures -------------------------------------------------------------------------------- */

static int add_figure(struct table *table, const json_t *band, const struct figure *figure)
{
    const json_t *with = json_object_get(json_object_get(band, "with"), figure->name);
    const json_t *without = json_object_get(json_object_get(band, "without"), figure->name);
    const json_t *gain = json_object_get(json_object_get(band, "gain"), figure->name);
    char value[FORMAT_BYTES];
    char error[FORMAT_BYTES];
    char other[FORMAT_BYTES];
    char change[FORMAT_BYTES];
    char between[2 * FORMAT_BYTES] = "-";
    double low = reply_number(gain, "low");
    double high = reply_number(gain, "high");
    if (!with) {
        return 0;
    }
    if (!isnan(low) && !isnan(high)) {
        int digits = fmax(fabs(low), fabs(high)) < 0.0995 ? 1 : 0;
        (void)snprintf(between, sizeof between, "%+.*f to %+.*f", digits, 100 * low, digits,
                       100 * high);
    }
    return table_add(
        table, (const char *[]){figure->full, format_figure(reply_number(with, "value"), value),
                                format_figure(reply_number(with, "error"), error),
                                format_figure(reply_number(without, "value"), other),
                                format_change(reply_number(gain, "value"), change), between});
}

static bool is_known(const json_t *band)
{
    const json_t *with = json_object_get(band, "with");
    for (size_t i = 0; i < FIGURES_COUNT; i++) {
        if (!isnan(reply_number(json_object_get(with, FIGURES[i].name), "value"))) {
            return true;
        }
    }
    return false;
}

/* Nothing for a band of which nothing is known. */
static int print_band(const struct client *client, const char *heading, const json_t *band)
{
    if (!is_known(band)) {
        return 0;
    }
    struct table *table =
        table_new(FIGURE_COLUMNS, sizeof FIGURE_COLUMNS / sizeof FIGURE_COLUMNS[0]);
    int failed = !table;
    for (size_t i = 0; i < FIGURES_COUNT && !failed; i++) {
        failed = add_figure(table, band, &FIGURES[i]);
    }
    if (!failed && table_rows(table) > 0) {
        (void)fprintf(client->out.stream, "\n%s%s%s\n", screen_begin(&client->out, SCREEN_HEADING),
                      heading, screen_end(&client->out, SCREEN_HEADING)); /* errors stay there */
        failed = table_print(table, &client->out);
    }
    table_free(table);
    return failed ? -1 : 0;
}

static int print_bands(const struct client *client, const json_t *bands)
{
    static const char *const BANDS[][2] = {{"all", "All tags"},
                                           {"head", "Head: tags given 1,000 times or more"},
                                           {"torso", "Torso: tags given 30 to 999 times"},
                                           {"tail", "Tail: tags given fewer than 30 times"}};
    for (size_t i = 0; i < sizeof BANDS / sizeof BANDS[0]; i++) {
        if (print_band(client, BANDS[i][1], json_object_get(bands, BANDS[i][0]))) {
            return -1;
        }
    }
    return 0;
}

/* --- reliability ---------------------------------------------------------------------------- */

static int add_bin(struct table *table, const struct client *client, const json_t *bin)
{
    double shown = command_number(bin, "shown");
    double confirmed = command_number(bin, "confirmed");
    char range[FORMAT_BYTES];
    char count[FORMAT_BYTES];
    char mean[FORMAT_BYTES] = "-";
    char hits[FORMAT_BYTES];
    char share[FORMAT_BYTES] = "-";
    char bar[BAR_BYTES] = "";
    if (shown > 0) {
        (void)format_share(command_number(bin, "mean_chance"), mean);
        (void)format_share(confirmed / shown, share);
        bar_draw(confirmed / shown, BAR_COLUMNS, client->out.unicode, bar);
    }
    return table_add(table, (const char *[]){format_between(command_number(bin, "from"),
                                                            command_number(bin, "to"), range),
                                             format_amount(shown, count), mean,
                                             format_amount(confirmed, hits), share, bar});
}

static int print_reliability(const struct client *client, const json_t *bins)
{
    struct table *table =
        table_new(RELIABILITY_COLUMNS, sizeof RELIABILITY_COLUMNS / sizeof RELIABILITY_COLUMNS[0]);
    int failed = !table;
    double ruled = 0;
    size_t i;
    json_t *bin;
    json_array_foreach(bins, i, bin)
    {
        ruled += command_number(bin, "shown");
        failed = failed || add_bin(table, client, bin);
    }
    if (!failed && ruled > 0) {
        (void)fprintf(client->out.stream, "\n%sProposals that were ruled on%s\n",
                      screen_begin(&client->out, SCREEN_HEADING),
                      screen_end(&client->out, SCREEN_HEADING)); /* errors stay on the stream */
        failed = table_print(table, &client->out);
    } else if (!failed) {
        (void)fprintf(client->out.stream, "\nNo proposal has been ruled on yet.\n");
    }
    table_free(table);
    return failed ? -1 : 0;
}

/* --- the command ---------------------------------------------------------------------------- */

static int print(const struct client *client, const json_t *result, const struct args *args)
{
    char sentence[SENTENCE_BYTES];
    char items[FORMAT_BYTES];
    (void)args;
    int64_t count = command_whole(result, "items");
    if (count == 0) {
        (void)fprintf(client->out.stream, "Nothing has been scored yet: figures come with the "
                                          "items that are filed.\n");
        return print_reliability(client, json_object_get(result, "reliability"));
    }
    (void)snprintf(sentence, sizeof sentence,
                   "Over %s items, each scored before it was learned. 'With' and 'without' the "
                   "correction for forgotten tags; the gain of the one over the other, and the "
                   "range in which it lies with a probability of 90 %%.",
                   format_count(count, items));
    if (facts_text(&client->out, sentence, 0) ||
        print_bands(client, json_object_get(result, "bands")) ||
        print_reliability(client, json_object_get(result, "reliability"))) {
        return -1;
    }
    (void)fputc('\n', client->out.stream); /* errors stay on the stream */
    return facts_text(&client->out, FIGURES_MEANING, 0);
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    static const struct command_question QUESTION = {"desk.standing", REPLY_STANDING, print};
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    if (!code) {
        code = request_whole(params, "window", &args->values[WINDOW], failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    return command_show_take(client, &QUESTION, params, args, failure);
}

const struct command command_standing = {
    .name = "standing",
    .synopsis = "",
    .summary = "how good the proposals are, with and without the correction",
    .about = "Figures by how often a tag is given, from items scored before they were learned, and "
             "how the chances of proposals compare with what editors ruled. 'error' is the "
             "standard error of the figure 'with'.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .run = run,
};
