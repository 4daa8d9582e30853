#include "daemon/options.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/options_private.h"

static const char *const ON_OFF[] = {"off", "on", NULL};
static const char *const UNKNOWN_TAGS[] = {"refuse", "open", NULL};

/* clang-format off: a table is read by its columns */
#define AT(member) offsetof(struct options, member)
static const struct option OPTIONS[] = {
    {"line_limit", TYPE_BYTES, AT(line_limit_bytes), 64 * KIB, 256 * MIB, "8MiB", NULL,
     OPTIONS_LIMIT, false, "The longest line (one request or batch) that is read."},
    {"unread_limit", TYPE_BYTES, AT(unread_limit_bytes), MIB, GIB, "4MiB", NULL, OPTIONS_LIMIT,
     false, "Unread answers of one connection before reading from it stops."},
    {"connections", TYPE_WHOLE, AT(connections_limit), 1, 100000, "1024", NULL, OPTIONS_LIMIT,
     false,
     "Connections open at the same time; one more is refused, or takes the place of one that has "
     "asked for nothing for stalled_ms."},
    {"wire_limit", TYPE_BYTES, AT(wire_limit_bytes), 8 * MIB, 64 * GIB, "256MiB", NULL,
     OPTIONS_LIMIT, false,
     "What all connections hold together in lines, calls and unread answers; beyond it, those "
     "that hold more than their share are closed."},
    {"stalled_ms", TYPE_WHOLE, AT(stalled_ms), 100, 3600000, "60000", NULL, OPTIONS_LIMIT, false,
     "Milliseconds that a line may take from its beginning to its end, or answers may wait to be "
     "read on; then the connection is closed."},
    {"quiet_ms", TYPE_WHOLE, AT(quiet_ms), 0, 604800000, "0", NULL, OPTIONS_LIMIT, false,
     "Milliseconds after which a connection that asks for nothing is closed; 0 for never."},
    {"text_limit", TYPE_BYTES, AT(text_limit_bytes), KIB, 64 * MIB, "1MiB", NULL, OPTIONS_LIMIT,
     true, "The longest text of an item."},
    {"tags_limit", TYPE_WHOLE, AT(tags_limit), 1, 100000, "1000", NULL, OPTIONS_LIMIT, true,
     "The most tags of an item."},
    {"words_limit", TYPE_WHOLE, AT(words_limit), 100, 1000000, "20000", NULL, OPTIONS_LIMIT, true,
     "The most different words of an item."},
    {"drain_ms", TYPE_WHOLE, AT(drain_ms), 0, 600000, "5000", NULL, OPTIONS_SETTING, false,
     "Milliseconds that stopping waits for readers that are slow."},
    {"may_read", TYPE_PEERS, AT(may[RIGHT_READ]), 0, 0, "@socket", NULL, OPTIONS_SETTING, true,
     "Who may read what is stored and ask for proposals, beside root and the daemon's own user."},
    {"may_file", TYPE_PEERS, AT(may[RIGHT_FILE]), 0, 0, "@socket", NULL, OPTIONS_SETTING, true,
     "Who may file and withdraw items."},
    {"may_rule", TYPE_PEERS, AT(may[RIGHT_RULE]), 0, 0, "@socket", NULL, OPTIONS_SETTING, true,
     "Who may rule on gaps and check items."},
    {"may_vocabulary", TYPE_PEERS, AT(may[RIGHT_VOCABULARY]), 0, 0, "", NULL, OPTIONS_SETTING, true,
     "Who may change the vocabulary itself."},
    {"may_operate", TYPE_PEERS, AT(may[RIGHT_OPERATE]), 0, 0, "", NULL, OPTIONS_SETTING, true,
     "Who may operate the daemon, such as having its model learned anew."},
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
    {"export_dir", TYPE_PATH, AT(export_dir), 0, 0, "exports", NULL, OPTIONS_SETTING, false,
     "The folder that snapshots and backups are written into; it is in the home where it does not "
     "begin with /."},
    {"snapshot_every", TYPE_WHOLE, AT(snapshot_every_minutes), 0, 5256000, "0", NULL,
     OPTIONS_SETTING, true,
     "Minutes after which a snapshot is written, if anything has changed; 0 for never."},
    {"snapshot_changes", TYPE_WHOLE, AT(snapshot_changes), 0, 1e15, "0", NULL, OPTIONS_SETTING,
     true, "Changes after which a snapshot is written, whatever the time; 0 for never."},
    {"snapshot_keep", TYPE_WHOLE, AT(snapshot_keep), 1, 100000, "7", NULL, OPTIONS_SETTING, true,
     "How many snapshots are kept; those that were given a name are not counted, and stay."},
    {"snapshot_rate", TYPE_BYTES, AT(snapshot_rate_bytes), MIB, 64 * GIB, "64MiB", NULL,
     OPTIONS_SETTING, true, "Bytes a second that a snapshot is written with at most."},
    {"snapshot_items", TYPE_SWITCH, AT(snapshot_items), 0, 0, "off", ON_OFF, OPTIONS_SETTING, true,
     "Write the items, texts and all, into snapshots that are not asked for in detail."},
    {"snapshot_proposals", TYPE_SWITCH, AT(snapshot_proposals), 0, 0, "on", ON_OFF, OPTIONS_SETTING,
     true, "Write what each item may lack into them."},
    {"snapshot_floor", TYPE_NUMBER, AT(snapshot_floor), 0, 1, "0.2", NULL, OPTIONS_SETTING, true,
     "The least chance of what a snapshot says an item may lack."},
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
     "disk when it is wanted. What is known of each tag, some 150 bytes, always stays: for 500,000 "
     "tags give it 256 MiB or more."},
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
    {"loss", TYPE_CHOICE, AT(loss), 0, 0, "squared_hinge", OPTION_LOSSES, OPTIONS_LEARNING, false,
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

/* --- setting ------------------------------------------------------------------------------------
 */

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
    if (!option_read(option, member_of(options, option), value)) {
        option_refuse(option, value, error);
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
        if (!option_read(&OPTIONS[i], member_of(ret_options, &OPTIONS[i]), OPTIONS[i].initial)) {
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
    option_write(option, const_member_of(options, option), ret_row->value, sizeof ret_row->value);
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
        option_write(&OPTIONS[i], const_member_of(options, &OPTIONS[i]), value, sizeof value);
        int written = snprintf(text + used, size - used, "%s=%s\n", OPTIONS[i].name, value);
        if (written < 0 || (size_t)written >= size - used) {
            return -1;
        }
        used += (size_t)written;
    }
    return 0;
}

size_t options_reload(struct options *options, const struct options *wanted, const char **ret_first)
{
    size_t held_back = 0;
    for (size_t i = 0; i < OPTION_COUNT; i++) {
        const struct option *option = &OPTIONS[i];
        const void *from = const_member_of(wanted, option);
        void *into = member_of(options, option);
        if (memcmp(from, into, option_bytes(option)) == 0) {
            continue;
        }
        if (option->on_reload) {
            memcpy(into, from, option_bytes(option));
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
                   option_bytes(&OPTIONS[i]));
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
