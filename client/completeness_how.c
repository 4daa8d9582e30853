#include "client/completeness_how.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "client/command.h"
#include "client/facts.h"
#include "client/format.h"
#include "client/reply.h"

enum {
    PARAGRAPH_BYTES = 1024
};

/* A heading and a paragraph below it. -1: no memory. */
__attribute__((format(printf, 3, 4))) static int
explain(const struct screen *screen, const char *heading, const char *format, ...)
{
    char paragraph[PARAGRAPH_BYTES];
    va_list arguments;
    va_start(arguments, format);
    int written = vsnprintf(paragraph, sizeof paragraph, format, arguments);
    va_end(arguments);
    (void)fprintf(screen->stream, "\n%s%s%s\n", screen_begin(screen, SCREEN_HEADING), heading,
                  screen_end(screen, SCREEN_HEADING)); /* errors stay on the stream */
    return written < 0 ? -1 : facts_text(screen, paragraph, 2);
}

static int explain_share(const struct screen *screen, const struct reply_estimate *all)
{
    char given[FORMAT_BYTES];
    char missing[FORMAT_BYTES];
    char share[FORMAT_BYTES];
    if (isnan(all->share)) {
        return explain(screen, "On record",
                       "The number of tags given, divided by the tags given and missing together. "
                       "Nothing is given or missing yet, so there is no share.");
    }
    return explain(screen, "On record",
                   "The number of tags given, divided by the tags given and missing together: here "
                   "%s / (%s + %s) = %s. 'Given' is counted; 'missing' is estimated.",
                   format_amount(all->given, given), given, format_amount(all->missing, missing),
                   format_share(all->share, share));
}

/* The curve as the daemon has it: as published until spot checks have shown something. */
static int explain_missing(const struct screen *screen, const json_t *curve)
{
    char trials[FORMAT_BYTES];
    char basis[320];
    if (!json_is_object(curve)) {
        return 0;
    }
    if (json_is_true(json_object_get(curve, "fitted"))) {
        (void)snprintf(basis, sizeof basis,
                       "Starting from what is published, it was fitted to %s uses of tags that "
                       "spot checks found, each of which had been given or forgotten; the fewer "
                       "they are, the closer it stays to what is published.",
                       format_amount(command_number(curve, "trials"), trials));
    } else {
        (void)snprintf(basis, sizeof basis,
                       "It is as published: no spot check has shown yet how it is at this desk.");
    }
    return explain(screen, "Missing",
                   "A tag that is often given is seldom forgotten, a rare one often. For a tag "
                   "given n times unprompted, a curve says what share p of its true uses is on "
                   "record; then about n x (1 / p - 1) more are missing (a little fewer for the "
                   "rarest), less those found since by rulings. The curve is p = 1 / (1 + C x (n + "
                   "B)^-A) (Jain, Prabhu and Varma 2016), here with A = %.2f and B = %.2f. %s Tags "
                   "that were taken from proposals and items that were checked are known, and not "
                   "reckoned with the curve.",
                   command_number(curve, "a"), command_number(curve, "b"), basis);
}

static int explain_interval(const struct screen *screen, const struct reply_estimate *all,
                            int64_t random_checks)
{
    char low[FORMAT_BYTES];
    char high[FORMAT_BYTES];
    char checks[FORMAT_BYTES];
    (void)format_count(random_checks, checks);
    if (isnan(all->low) || isnan(all->high)) {
        return explain(screen, "Between",
                       "The range in which the true share lies with a probability of 90 %%. There "
                       "is too little to say one.");
    }
    (void)format_share(all->low, low);
    (void)format_share(all->high, high);
    if (strcmp(all->from, "curve") == 0) {
        return explain(screen, "Between",
                       "%s to %s for all tags together, with a probability of 90 %%, if this desk "
                       "forgets about as much as the published curve assumes. No spot check "
                       "stands behind it yet: check items that 'undertag sample' draws to learn "
                       "how it is here.",
                       low, high);
    }
    return explain(screen, "Between",
                   "%s to %s: the range in which the true share of all tags together lies with a "
                   "probability of 90 %%. It comes from %s, with %s items drawn at random. Four "
                   "times as many make it about half as wide.",
                   low, high, reply_source(all->from), checks);
}

static int explain_wrong(const struct screen *screen, const json_t *wrong)
{
    char taken[FORMAT_BYTES];
    char seen[FORMAT_BYTES];
    char share[FORMAT_BYTES];
    if (command_whole(wrong, "seen") == 0) {
        return 0;
    }
    return explain(screen, "Wrong tags",
                   "Of the %s tags that stood on randomly checked items, the checker took %s off: "
                   "%s. Picked items do not count, since they were picked for a reason.",
                   format_count(command_whole(wrong, "seen"), seen),
                   format_count(command_whole(wrong, "wrong"), taken),
                   format_percent(reply_number(wrong, "share"), share));
}

static int explain_second(const struct screen *screen, const json_t *second)
{
    char first[FORMAT_BYTES];
    char other[FORMAT_BYTES];
    char both[FORMAT_BYTES];
    char truth[FORMAT_BYTES];
    if (!json_is_object(second)) {
        return 0;
    }
    double n1 = command_number(second, "first");
    double n2 = command_number(second, "second");
    double common = command_number(second, "both");
    double found = reply_number(json_object_get(second, "chapman"), "true");
    return explain(screen, "Second taggings",
                   "Two people tagged the same items without seeing each other's tags: %s tags and "
                   "%s, %s of them the same. The fewer two careful people have in common, the more "
                   "both have missed. Chapman's estimate of all true tags is (first + 1) x (second "
                   "+ 1) / (common + 1) - 1 = %s. It is too low where both overlook the same "
                   "things. Agreement by Rolling (1981) is 2C / (A + B), by Hooper (1965) "
                   "C / (A + B - C), C being what they have in common.",
                   format_amount(n1, first), format_amount(n2, other), format_amount(common, both),
                   format_amount(found, truth));
}

int completeness_how(const struct screen *screen, const json_t *result)
{
    const struct reply_estimate all = reply_estimate(json_object_get(result, "overall"));
    const json_t *checks = json_object_get(result, "checks");
    if (explain_share(screen, &all) || explain_missing(screen, json_object_get(result, "curve")) ||
        explain_interval(screen, &all, command_whole(checks, "random")) ||
        explain_wrong(screen, json_object_get(result, "wrong")) ||
        explain_second(screen, json_object_get(result, "second"))) {
        return -1;
    }
    return 0;
}
