/*
 * items_examine: what people say of an item once it is filed: rulings on single tags, spot checks
 * of all of them, and second taggings that know nothing of the first. Each becomes a record that
 * takes the place of the item's last one.
 *
 * Each function returns STORE_NOT_FOUND where there is no such item, and STORE_REFUSED with
 * *ret_refusal where a tag is unknown or retired; nothing is changed then. `buffer` is workspace.
 */
#ifndef UNDERTAG_ITEMS_EXAMINE_H
#define UNDERTAG_ITEMS_EXAMINE_H

#include "storage/items.h"
#include "storage/vocabulary.h"

/* Who says it of what, and when. */
struct item_saying {
    struct store_text id;
    struct store_text who; /* may be empty */
    int64_t at_ms;
    uint32_t uid;
};

/* Names of tags, none twice. */
struct item_names {
    const struct store_text *names;
    size_t count;
};

/* Rules that tags belong to the item, or that they do not; no tag is in both lists. */
int items_rule(struct store_view *view, const struct item_saying *saying, struct item_names belongs,
               struct item_names denied, struct codec_writer *buffer, struct item_filed *ret_filed,
               struct item_refusal *ret_refusal, struct store_error *error)
    __attribute__((warn_unused_result));

/* What a check has found; the caller frees both lists. */
struct item_checked {
    struct vocabulary_tag *missed; /* not on the item before */
    size_t missed_count;
    struct vocabulary_tag *extra; /* on the item, and taken off */
    size_t extra_count;
};

/* Stores a check: `tags` is the complete list after going through the whole vocabulary. */
int items_check(struct store_view *view, const struct item_saying *saying, struct item_names tags,
                bool is_random, struct codec_writer *buffer, struct item_filed *ret_filed,
                struct item_checked *ret_checked, struct item_refusal *ret_refusal,
                struct store_error *error) __attribute__((warn_unused_result));

/*
 * Stores a second tagging by `saying->who`, who is named and not the one who filed the item
 * (REFUSED_TAGGER), in the place of an earlier one of his.
 */
int items_tag_again(struct store_view *view, const struct item_saying *saying,
                    struct item_names tags, struct store_text filed_at, bool open_unknown,
                    struct codec_writer *buffer, struct item_filed *ret_filed,
                    struct item_refusal *ret_refusal, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
