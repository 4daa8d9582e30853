#include "daemon/options.h"

#include <errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/text/words.h"

enum option_type {
    TYPE_WHOLE,
    TYPE_BYTES,
    TYPE_NUMBER,
    TYPE_SWITCH,
    TYPE_CHOICE,
    TYPE_LANGUAGE
};

struct option {
    const char *name;
    enum option_type type;
    size_t offset;
    double minimum;
    double maximum;
    const char *initial;
    const char *const *choices; /* of TYPE_CHOICE, by value; of TYPE_SWITCH, off then on */
    enum options_group group;
    bool on_reload;
    const char *sentence;
};

static const char *const ON_OFF[] = {"off", "on", NULL};
static const char *const UNKNOWN_TAGS[] = {"refuse", "open", NULL};
static const char *const LOSSES[] = {[SURROGATE_SQUARED_HINGE] = "squared_hinge",
                                     [SURROGATE_HINGE] = "hinge",
                                     [SURROGATE_LOGISTIC] = "logistic",
                                     NULL};

#define KIB 1024.0
#define MIB (1024.0 * KIB)
#define GIB (1024.0 * MIB)

/* clang-format off: a table is read by its columns */
#define AT(member) offsetof(struct options, member)
static const struct option OPTIONS[] = {
    {"line_limit", TYPE_BYTES, AT(line_limit_bytes), 64 * KIB, 256 * MIB, "8MiB", NULL,
     OPTIONS_LIMIT, false, "The longest line (one request or batch) that is read."},
    {"unread_limit", TYPE_BYTES, AT(unread_limit_bytes), MIB, GIB, "4MiB", NULL, OPTIONS_LIMIT,
     false, "Unread answers of one connection before reading from it stops."},
    {"connections", TYPE_WHOLE, AT(connections_limit), 1, 100000, "1024", NULL, OPTIONS_LIMIT,
     false, "Connections open at the same time."},
    {"text_limit", TYPE_BYTES, AT(text_limit_bytes), KIB, 64 * MIB, "1MiB", NULL, OPTIONS_LIMIT,
     true, "The longest text of an item."},
    {"tags_limit", TYPE_WHOLE, AT(tags_limit), 1, 100000, "1000", NULL, OPTIONS_LIMIT, true,
     "The most tags of an item."},
    {"words_limit", TYPE_WHOLE, AT(words_limit), 100, 1000000, "20000", NULL, OPTIONS_LIMIT, true,
     "The most different words of an item."},
    {"drain_ms", TYPE_WHOLE, AT(drain_ms), 0, 600000, "5000", NULL, OPTIONS_SETTING, false,
     "Milliseconds that stopping waits for readers that are slow."},
    {"visible_within_ms", TYPE_WHOLE, AT(visible_within_ms), 10, 60000, "1000", NULL,
     OPTIONS_SETTING, false,
     "Milliseconds after an acknowledgement until answers know what it taught; a feed is slowed "
     "for it."},
    {"unknown_tags", TYPE_CHOICE, AT(open_unknown_tags), 0, 0, "open", UNKNOWN_TAGS,
     OPTIONS_SETTING, true,
     "What a tag is that the vocabulary does not hold: opened by its use, or refused."},
    {"map_size", TYPE_BYTES, AT(map_size_bytes), 16 * MIB, 16384 * GIB, "64GiB", NULL,
     OPTIONS_SETTING, false,
     "The largest size of each of the two environments; address space, not disk, is taken at "
     "once."},
    {"disk_reserve", TYPE_BYTES, AT(disk_reserve_bytes), 0, 1024 * GIB, "64MiB", NULL,
     OPTIONS_SETTING, false, "Free disk space below which nothing more is written."},
    {"flush_every_ms", TYPE_WHOLE, AT(flush_every_ms), 10, 3600000, "2000", NULL, OPTIONS_SETTING,
     false, "Milliseconds after which what was learned is stored."},
    {"flush_changes", TYPE_WHOLE, AT(flush_changes), 1, 10000000, "20000", NULL, OPTIONS_SETTING,
     false,
     "Changes after which what was learned is stored before its time; storing still takes a tenth "
     "of "
     "the time at most."},
    {"memory_budget", TYPE_BYTES, AT(memory_budget_bytes), 64 * MIB, 1024 * GIB, "1GiB", NULL,
     OPTIONS_SETTING, false,
     "Memory for words, weights and what waits to be stored; what does not fit is read from the "
     "disk when it is wanted."},
    {"rehearsal_share", TYPE_NUMBER, AT(rehearsal_share), 0, 1, "0.25", NULL, OPTIONS_SETTING,
     false,
     "Share of a core for learning filed items again while there is nothing else to do; 0 for "
     "none."},
    {"stemming", TYPE_SWITCH, AT(stemming), 0, 0, "off", ON_OFF, OPTIONS_LEARNING, false,
     "Count the stems of words, where Snowball knows the item's language."},
    {"language", TYPE_LANGUAGE, AT(language), 0, 0, "", NULL, OPTIONS_LEARNING, false,
     "The language of items that name none, as a code such as en."},
    {"word_pairs", TYPE_SWITCH, AT(word_pairs), 0, 0, "off", ON_OFF, OPTIONS_LEARNING, false,
     "Count each two neighbouring words as a term of their own."},
    {"title_weight", TYPE_NUMBER, AT(title_weight), 0.1, 100, "1.5", NULL, OPTIONS_LEARNING, false,
     "How many times a word of the title counts."},
    {"loss", TYPE_CHOICE, AT(loss), 0, 0, "squared_hinge", LOSSES, OPTIONS_LEARNING, false,
     "The convex surrogate that is learned with."},
    {"correction", TYPE_SWITCH, AT(correction), 0, 0, "on", ON_OFF, OPTIONS_LEARNING, false,
     "Weigh given tags by 2/p - 1, p being the tag's propensity."},
    {"even_out", TYPE_SWITCH, AT(even_out), 0, 0, "on", ON_OFF, OPTIONS_LEARNING, false,
     "Divide the weights of given tags by their running mean: better rare tags for a little "
     "precision."},
    {"balance", TYPE_NUMBER, AT(balance), 0, 0.999999, "0", NULL, OPTIONS_LEARNING, false,
     "The beta of the class balance by effective numbers; 0 for none."},
    {"step", TYPE_NUMBER, AT(step), 0, 10, "0", NULL, OPTIONS_LEARNING, false,
     "The learner's step; 0 lets the size of the vocabulary and the loss decide."},
    {"specificity", TYPE_NUMBER, AT(specificity), 0, 1e9, "100", NULL, OPTIONS_LEARNING, false,
     "A word speaks for a tag only while at most this many times as many items hold it; 0 for no "
     "such rule."},
    {"propensity_a", TYPE_NUMBER, AT(propensity_a), 0.01, 5, "0.55", NULL, OPTIONS_LEARNING, false,
     "A of the propensity curve."},
    {"propensity_b", TYPE_NUMBER, AT(propensity_b), 0, 1000, "1.5", NULL, OPTIONS_LEARNING, false,
     "B of the propensity curve."},
    {"evidence_half_life", TYPE_NUMBER, AT(evidence_half_life), 100, 1e12, "5000", NULL,
     OPTIONS_LEARNING, false, "Items after which evidence behind the chances counts half."},
    {"shadow", TYPE_SWITCH, AT(shadow), 0, 0, "on", ON_OFF, OPTIONS_LEARNING, false,
     "Teach a second learner without the correction beside, to show what the correction gains; "
     "it takes half of the weights' memory again, and some time."},
};
#undef AT
/* clang-format on */

enum {
    OPTION_COUNT = sizeof OPTIONS / sizeof OPTIONS[0]
};

static void *member_of(struct options *options, const struct option *option)
{
    return (char *)options + option->offset;
}

static const void *const_member_of(const struct options *options, const struct option *option)
{
    return (const char *)options + option->offset;
}

/* --- text into values --------------------------------------------------------------------------
 */

static int refuse(char *error, const struct option *option, const char *value)
{
    switch (option->type) {
    case TYPE_SWITCH:
        return snprintf(error, OPTIONS_ERROR_BYTES, "option %s is on or off, not '%s'",
                        option->name, value);
    case TYPE_CHOICE: {
        int used = snprintf(error, OPTIONS_ERROR_BYTES, "option %s is one of", option->name);
        for (size_t i = 0; option->choices[i] && used > 0 && used < OPTIONS_ERROR_BYTES; i++) {
            used += snprintf(error + used, OPTIONS_ERROR_BYTES - (size_t)used, "%s %s",
                             i ? "," : "", option->choices[i]);
        }
        if (used > 0 && used < OPTIONS_ERROR_BYTES) {
            used += snprintf(error + used, OPTIONS_ERROR_BYTES - (size_t)used, "; not '%s'", value);
        }
        return used;
    }
    case TYPE_LANGUAGE:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is empty or a code such as en that Snowball knows, not '%s'",
                        option->name, value);
    case TYPE_BYTES:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is a size from %.0f to %.0f bytes, such as 64MiB, not '%s'",
                        option->name, option->minimum, option->maximum, value);
    case TYPE_WHOLE:
        return snprintf(error, OPTIONS_ERROR_BYTES,
                        "option %s is a whole number from %.0f to %.0f, not '%s'", option->name,
                        option->minimum, option->maximum, value);
    case TYPE_NUMBER:
        break;
    }
    return snprintf(error, OPTIONS_ERROR_BYTES, "option %s is a number from %g to %g, not '%s'",
                    option->name, option->minimum, option->maximum, value);
}

/* A number with nothing but digits, one point, a sign and an exponent; no hex, no "inf". */
static bool parse_number(const char *text, const char **ret_end, double *ret_number)
{
    if (strspn(text, "+-.0123456789") == 0) {
        return false;
    }
    char *end = NULL;
    errno = 0;
    double number = strtod(text, &end); /* the daemon never leaves the "C" locale */
    bool has_hex =
        memchr(text, 'x', (size_t)(end - text)) || memchr(text, 'X', (size_t)(end - text));
    if (end == text || errno != 0 || !isfinite(number) || has_hex) {
        return false;
    }
    *ret_end = end;
    *ret_number = number + 0.0; /* minus zero becomes zero */
    return true;
}

static bool parse_bytes(const char *text, double *ret_number)
{
    static const struct {
        const char *suffix;
        double factor;
    } units[] = {{"", 1.0}, {"KiB", KIB}, {"MiB", MIB}, {"GiB", GIB}};
    const char *end = NULL;
    double number = 0.0;
    if (!parse_number(text, &end, &number)) {
        return false;
    }
    while (*end == ' ') {
        end++;
    }
    for (size_t i = 0; i < sizeof units / sizeof units[0]; i++) {
        if (strcmp(end, units[i].suffix) == 0) {
            *ret_number = number * units[i].factor;
            return true;
        }
    }
    return false;
}

static bool set_amount(const struct option *option, void *member, const char *value)
{
    double number = 0.0;
    const char *end = "";
    bool parsed = option->type == TYPE_BYTES ? parse_bytes(value, &number)
                                             : parse_number(value, &end, &number) && *end == '\0';
    if (!parsed || number < option->minimum || number > option->maximum) {
        return false;
    }
    if (option->type == TYPE_NUMBER) {
        memcpy(member, &number, sizeof number);
        return true;
    }
    if (number != floor(number)) {
        return false;
    }
    uint64_t whole = (uint64_t)number;
    memcpy(member, &whole, sizeof whole);
    return true;
}

static bool set_choice(const struct option *option, void *member, const char *value)
{
    for (int i = 0; option->choices[i]; i++) {
        if (strcmp(value, option->choices[i]) != 0) {
            continue;
        }
        if (option->choices == LOSSES) {
            *(enum surrogate *)member = (enum surrogate)i;
        } else {
            *(bool *)member = i != 0;
        }
        return true;
    }
    return false;
}

static bool set_language(char *member, const char *value)
{
    if (strlen(value) >= OPTIONS_LANGUAGE_BYTES ||
        (value[0] != '\0' && !words_stems_language(value))) {
        return false;
    }
    memset(member, 0, OPTIONS_LANGUAGE_BYTES);
    (void)snprintf(member, OPTIONS_LANGUAGE_BYTES, "%s", value); /* it fits */
    return true;
}

static bool set_value(const struct option *option, void *member, const char *value)
{
    switch (option->type) {
    case TYPE_SWITCH:
    case TYPE_CHOICE:
        return set_choice(option, member, value);
    case TYPE_LANGUAGE:
        return set_language(member, value);
    case TYPE_WHOLE:
    case TYPE_BYTES:
    case TYPE_NUMBER:
        break;
    }
    return set_amount(option, member, value);
}

static const struct option *find_option(const char *name, size_t bytes)
{
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (strlen(OPTIONS[i].name) == bytes && memcmp(OPTIONS[i].name, name, bytes) == 0) {
            return &OPTIONS[i];
        }
    }
    return NULL;
}

int options_set(struct options *options, const char *name, const char *value, char *error)
{
    const struct option *option = find_option(name, strlen(name));
    if (!option) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES,
                       "there is no option '%s' (see config/undertag.ini for those there are)",
                       name);
        return -1;
    }
    if (!set_value(option, member_of(options, option), value)) {
        (void)refuse(error, option, value);
        return -1;
    }
    return 0;
}

int options_set_pair(struct options *options, const char *pair, char *error)
{
    const char *equals = strchr(pair, '=');
    const struct option *option = equals ? find_option(pair, (size_t)(equals - pair)) : NULL;
    if (!equals) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES, "--set takes name=value, not '%s'", pair);
        return -1;
    }
    if (!option) {
        (void)snprintf(error, OPTIONS_ERROR_BYTES, "there is no option '%.*s'",
                       (int)(equals - pair), pair);
        return -1;
    }
    return options_set(options, option->name, equals + 1, error);
}

void options_defaults(struct options *ret_options)
{
    memset(ret_options, 0, sizeof *ret_options);
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (!set_value(&OPTIONS[i], member_of(ret_options, &OPTIONS[i]), OPTIONS[i].initial)) {
            abort(); /* our own table is wrong */
        }
    }
}

/* --- values into text --------------------------------------------------------------------------
 */

size_t options_count(void)
{
    return OPTION_COUNT;
}

size_t options_find(const char *name)
{
    const struct option *option = find_option(name, strlen(name));
    return option ? (size_t)(option - OPTIONS) : OPTION_COUNT;
}

static void write_value(const struct options *options, const struct option *option, char *text,
                        size_t size)
{
    const void *member = const_member_of(options, option);
    uint64_t whole = 0;
    double number = 0.0;
    switch (option->type) {
    case TYPE_WHOLE:
    case TYPE_BYTES:
        memcpy(&whole, member, sizeof whole);
        (void)snprintf(text, size, "%llu", (unsigned long long)whole);
        return;
    case TYPE_NUMBER:
        memcpy(&number, member, sizeof number);
        (void)snprintf(text, size, "%.17g", number);
        return;
    case TYPE_LANGUAGE:
        (void)snprintf(text, size, "%s", (const char *)member);
        return;
    case TYPE_SWITCH:
    case TYPE_CHOICE:
        break;
    }
    int at = option->choices == LOSSES ? (int)*(const enum surrogate *)member
                                       : (int)*(const bool *)member;
    (void)snprintf(text, size, "%s", option->choices[at]);
}

void options_describe(const struct options *options, size_t index, struct options_row *ret_row)
{
    const struct option *option = &OPTIONS[index];
    *ret_row = (struct options_row){.name = option->name,
                                    .sentence = option->sentence,
                                    .group = option->group,
                                    .on_reload = option->on_reload,
                                    .is_number = option->type == TYPE_WHOLE ||
                                                 option->type == TYPE_BYTES ||
                                                 option->type == TYPE_NUMBER};
    write_value(options, option, ret_row->value, sizeof ret_row->value);
}

int options_learning_text(const struct options *options, char *text, size_t size)
{
    int head = snprintf(text, size, "learner=%d\n", MODEL_LEARNER_VERSION);
    if (head < 0 || (size_t)head >= size) {
        return -1;
    }
    size_t used = (size_t)head;
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (OPTIONS[i].group != OPTIONS_LEARNING) {
            continue;
        }
        char value[64];
        write_value(options, &OPTIONS[i], value, sizeof value);
        int written = snprintf(text + used, size - used, "%s=%s\n", OPTIONS[i].name, value);
        if (written < 0 || (size_t)written >= size - used) {
            return -1;
        }
        used += (size_t)written;
    }
    return 0;
}

static size_t member_bytes(const struct option *option)
{
    switch (option->type) {
    case TYPE_SWITCH:
        return sizeof(bool);
    case TYPE_CHOICE:
        return option->choices == LOSSES ? sizeof(enum surrogate) : sizeof(bool);
    case TYPE_LANGUAGE:
        return OPTIONS_LANGUAGE_BYTES;
    case TYPE_WHOLE:
    case TYPE_BYTES:
    case TYPE_NUMBER:
        break;
    }
    return sizeof(uint64_t);
}

size_t options_reload(struct options *options, const struct options *wanted, const char **ret_first)
{
    size_t held_back = 0;
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        const struct option *option = &OPTIONS[i];
        const void *from = const_member_of(wanted, option);
        void *into = member_of(options, option);
        if (memcmp(from, into, member_bytes(option)) == 0) {
            continue;
        }
        if (option->on_reload) {
            memcpy(into, from, member_bytes(option));
        } else if (held_back++ == 0) {
            *ret_first = option->name;
        }
    }
    return held_back;
}

void options_take_learning(struct options *options, const struct options *from)
{
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        if (OPTIONS[i].group == OPTIONS_LEARNING) {
            memcpy(member_of(options, &OPTIONS[i]), const_member_of(from, &OPTIONS[i]),
                   member_bytes(&OPTIONS[i]));
        }
    }
}

/* --- for those who are set ----------------------------------------------------------------------
 */

struct features_settings options_features_settings(const struct options *options)
{
    return (struct features_settings){.words = {.stemming = options->stemming,
                                                .pairs = options->word_pairs,
                                                .language = options->language},
                                      .title_weight = options->title_weight};
}

struct model_settings options_model_settings(const struct options *options)
{
    return (struct model_settings){
        .weights = {.surrogate = options->loss, .specificity = options->specificity},
        .curve = {.a = options->propensity_a, .b = options->propensity_b},
        .correction = options->correction,
        .even_out = options->even_out,
        .balance = options->balance,
        .step = options->step,
        .evidence_half_life_items = options->evidence_half_life,
        .shadow = options->shadow};
}
