/*
 * options: what can be configured. One flat table (options.c) says of each option its name, type,
 * unit, bounds, default, whether a reload takes it, and a sentence; everything else follows from
 * it: reading the file, --set, --check-config, daemon.state and the sample in config/undertag.ini.
 *
 * Nothing is taken until everything is right: the callers read into a new struct and then swap.
 */
#ifndef UNDERTAG_OPTIONS_H
#define UNDERTAG_OPTIONS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "daemon/accounts.h"
#include "daemon/learner/model.h"
#include "daemon/text/features.h"

enum {
    OPTIONS_LANGUAGE_BYTES = 16,
    OPTIONS_PATH_BYTES = 256,
    OPTIONS_ERROR_BYTES = 512,
    OPTIONS_VALUE_BYTES = ACCOUNTS_TEXT_BYTES /* the longest value as text */
};

struct options {
    /* the wire */
    uint64_t line_limit_bytes;
    uint64_t unread_limit_bytes;
    uint64_t connections_limit;
    uint64_t wire_limit_bytes;
    uint64_t stalled_ms;
    uint64_t quiet_ms;
    uint64_t text_limit_bytes;
    uint64_t tags_limit;
    uint64_t words_limit;
    uint64_t drain_ms;
    uint64_t visible_within_ms;
    struct rights_list may[RIGHT_KINDS];
    /* the vocabulary */
    bool open_unknown_tags;
    /* the store */
    uint64_t map_size_bytes;
    uint64_t disk_reserve_bytes;
    char export_dir[OPTIONS_PATH_BYTES];
    uint64_t snapshot_every_minutes;
    uint64_t snapshot_changes;
    uint64_t snapshot_keep;
    uint64_t snapshot_rate_bytes;
    bool snapshot_items;
    bool snapshot_proposals;
    double snapshot_floor;
    uint64_t flush_every_ms;
    uint64_t flush_changes;
    uint64_t memory_budget_bytes;
    double rehearsal_share;
    /* words */
    bool stemming;
    char language[OPTIONS_LANGUAGE_BYTES];
    bool word_pairs;
    double title_weight;
    /* the learner */
    enum surrogate loss;
    bool correction;
    bool even_out;
    double balance;
    double step;
    double specificity;
    double propensity_a;
    double propensity_b;
    double evidence_half_life;
    bool shadow;
};

void options_defaults(struct options *ret_options);

/*
 * Sets one option from text. Returns 0, or -1 with a sentence in `error` (OPTIONS_ERROR_BYTES) that
 * names the option and what it may be.
 */
int options_set(struct options *options, const char *name, const char *value, char *error)
    __attribute__((warn_unused_result));

/* Sets one from "name=value", as --set has it. */
int options_set_pair(struct options *options, const char *pair, char *error)
    __attribute__((warn_unused_result));

/*
 * Reads a file of `name = value` lines over what is there (options_file.c). An unknown, repeated or
 * wrong line is an error that names file and line. On failure *options is untouched.
 */
int options_read_file(struct options *options, const char *path, char *error)
    __attribute__((warn_unused_result));

/*
 * Takes from `wanted` what a reload may change. Returns how many options differ but need a restart;
 * the first one's name goes to *ret_first.
 */
size_t options_reload(struct options *options, const struct options *wanted,
                      const char **ret_first);

/* Takes the options that learning depends on. */
void options_take_learning(struct options *options, const struct options *from);

size_t options_count(void);

/* The place of an option in the table; options_count() where there is none of that name. */
size_t options_find(const char *name);

enum options_group {
    OPTIONS_LIMIT,
    OPTIONS_SETTING,
    OPTIONS_LEARNING
};

/* One option's row, with its value as text (in the form that options_set takes). */
struct options_row {
    const char *name;
    const char *sentence;
    enum options_group group;
    bool is_number;
    bool on_reload;
    char value[OPTIONS_VALUE_BYTES];
};

void options_describe(const struct options *options, size_t index, struct options_row *ret_row);

/*
 * What learning depends on, as text: two models may be taken for each other only where it is equal.
 * Returns 0, or -1 where `size` is too small.
 */
int options_learning_text(const struct options *options, char *text, size_t size)
    __attribute__((warn_unused_result));

/* The settings of the words (but for their key) and of the model. The language is borrowed. */
struct features_settings options_features_settings(const struct options *options);
struct model_settings options_model_settings(const struct options *options);

#endif
