/*
 * entries: logbook entries to teach a learner with: by hand ("fog bell", tags 0 and 1) or from an
 * invented stream in which every tag has words of its own.
 */
#ifndef UNDERTAG_TESTS_ENTRIES_H
#define UNDERTAG_TESTS_ENTRIES_H

#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "daemon/learner/model.h"
#include "daemon/text/features.h"
#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    ENTRY_WORDS = 24,
    ENTRY_TAGS = 8,
    ENTRY_TEXT = 320
};

/* An item that holds its own text; it must stay where it is. Its lists of tags rise. */
struct entry {
    uint64_t number; /* one for each that entry_set makes, rising */
    char text[ENTRY_TEXT];
    struct feature features[ENTRY_WORDS];
    size_t feature_count;
    uint32_t tags[ENTRY_TAGS];
    size_t tag_count;
    uint32_t examined[ENTRY_TAGS];
    size_t examined_count;
    uint32_t known_not[ENTRY_TAGS];
    size_t known_not_count;
    uint32_t checked_below;
    bool same_words;
    struct model_trial trials[ENTRY_TAGS];
    size_t trial_count;
};

/* Several tag numbers as two arguments: the array and its length. */
#define TAGS(...)                                                                                  \
    (const uint32_t[]){__VA_ARGS__}, sizeof((const uint32_t[]){__VA_ARGS__}) / sizeof(uint32_t)
#define NO_TAGS NULL, 0

static inline uint64_t entry_new_number(void)
{
    static uint64_t last;
    return ++last;
}

/* Puts a tag into its place in a rising list of fewer than ENTRY_TAGS. */
static inline void entry_add_tag(uint32_t *list, size_t *count, uint32_t tag)
{
    size_t at = (*count)++;
    assert_true(at < ENTRY_TAGS);
    for (; at > 0 && list[at - 1] > tag; at--) {
        list[at] = list[at - 1];
    }
    list[at] = tag;
}

static inline bool entry_list_holds(const uint32_t *list, size_t count, uint32_t tag)
{
    size_t at = 0;
    while (at < count && list[at] != tag) {
        at++;
    }
    return at < count;
}

/* `words` with a space between each, none twice. */
static inline void entry_set(struct entry *entry, const char *words, const uint32_t *tags,
                             size_t tag_count)
{
    memset(entry, 0, sizeof *entry);
    entry->number = entry_new_number();
    size_t text_bytes = strlen(words);
    assert_true(text_bytes < sizeof entry->text && tag_count <= ENTRY_TAGS);
    memcpy(entry->text, words, text_bytes);
    for (const char *at = entry->text; *at != '\0'; at += strspn(at, " ")) {
        size_t bytes = strcspn(at, " ");
        assert_true(entry->feature_count < ENTRY_WORDS);
        entry->features[entry->feature_count++] =
            (struct feature){.term = at,
                             .term_bytes = (uint32_t)bytes,
                             .frequency = 1.0F,
                             .surface = at,
                             .surface_bytes = (uint32_t)bytes};
        at += bytes;
    }
    for (size_t i = 0; i < tag_count; i++) {
        entry_add_tag(entry->tags, &entry->tag_count, tags[i]);
    }
}

/* --- what is said of an entry -------------------------------------------------------------------
 * The entry as it is afterwards: the same words, which stay where they were. */

static inline void entry_follow(struct entry *next, const struct entry *before)
{
    *next = *before;
    next->number = entry_new_number();
    next->same_words = true;
}

/* A tag is found to belong. */
static inline void entry_find_tag(struct entry *entry, uint32_t tag)
{
    entry_add_tag(entry->tags, &entry->tag_count, tag);
    entry_add_tag(entry->examined, &entry->examined_count, tag);
}

/* A tag that is not on it is found not to belong. */
static inline void entry_deny_tag(struct entry *entry, uint32_t tag)
{
    entry_add_tag(entry->known_not, &entry->known_not_count, tag);
}

/* A check at random says whether a tag that belongs was given. */
static inline void entry_try_tag(struct entry *entry, uint32_t tag, bool was_given)
{
    assert_true(entry->trial_count < ENTRY_TAGS);
    entry->trials[entry->trial_count++] =
        (struct model_trial){.tag = tag, .halves = 2, .given_halves = was_given ? 2 : 0};
}

/* --- an invented stream -------------------------------------------------------------------------
 * One or two tags an entry, low numbers more often; each tag has four words, of which an entry
 * holds two or three. "log" stands in every entry, and three words of no tag at all. */

struct stream {
    struct repeatable random;
    uint32_t tag_count;
    double given_share; /* of the tags that belong */
};

static inline void stream_word(char *text, char kind, uint32_t first, uint32_t second)
{
    char word[32];
    (void)snprintf(word, sizeof word, " %c%uq%u", kind, first, second);
    if (!strstr(text, word + 1)) {
        size_t bytes = strlen(text);
        assert_true(bytes + strlen(word) < ENTRY_TEXT);
        memcpy(text + bytes, word, strlen(word) + 1);
    }
}

/* The tags that belong go to `ret_truth`, ENTRY_TAGS of them at most; some are left out of the
 * entry. Returns their number. */
static inline size_t stream_next(struct stream *stream, struct entry *entry, uint32_t *ret_truth)
{
    char text[ENTRY_TEXT] = "log";
    uint32_t given[ENTRY_TAGS];
    size_t given_count = 0;
    size_t belonging = 1 + repeatable_below(&stream->random, 2);
    for (size_t i = 0; i < belonging; i++) {
        double share = repeatable_share(&stream->random);
        uint32_t tag = (uint32_t)(share * share * (double)stream->tag_count);
        if (i == 1 && tag == ret_truth[0]) {
            tag = (tag + 1) % stream->tag_count;
        }
        ret_truth[i] = tag;
        uint32_t left_out = repeatable_below(&stream->random, 4);
        for (uint32_t word = 0; word < 4; word++) {
            if (word != left_out && (word > 0 || repeatable_below(&stream->random, 2))) {
                stream_word(text, 't', tag, word);
            }
        }
        if (repeatable_share(&stream->random) < stream->given_share) {
            given[given_count++] = tag;
        }
    }
    for (int i = 0; i < 3; i++) {
        stream_word(text, 'n', repeatable_below(&stream->random, 40), 0);
    }
    entry_set(entry, text, given, given_count);
    return belonging;
}

#endif
