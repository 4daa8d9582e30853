/*
 * words: a text into the words that the learner counts. Pure: no clock, no I/O, no globals.
 *
 * A text is cut at the word boundaries of UAX #29 (by libunistring); a piece with a letter or a
 * number in it is a word, put into NFKC and case-folded (by utf8proc). Runs of Han, Hiragana and
 * Katakana become overlapping pairs of characters (a run of one character stays as it is). Where a
 * stemmer (Snowball) is known for the language and stemming is on, the word's stem takes its place.
 * With `pairs`, each two neighbouring words also count as one term, "first second".
 *
 * A workspace serves one thread at a time.
 */
#ifndef UNDERTAG_WORDS_H
#define UNDERTAG_WORDS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef struct words words;

struct words_settings {
    bool stemming;
    bool pairs;
    const char *language; /* for a text that names none: "" for none; copied */
};

enum {
    WORDS_TERM_BYTES = 128
}; /* a longer word is passed over; a pair is at most 2 * 128 + 1 */

struct word {
    const char *term; /* as it is counted; not ended by NUL; valid during the call */
    uint32_t term_bytes;
    const char *surface; /* as written in the text; points into it */
    uint32_t surface_bytes;
};

/* Called for each word in the order of the text; anything but 0 ends the scan and is returned. */
typedef int (*words_each)(void *user, const struct word *word);

/* Makes a workspace. Returns 0 or -ENOMEM. */
int words_new(const struct words_settings *settings, words **ret_words)
    __attribute__((warn_unused_result));

void words_free(words *words);

/* Whether Snowball knows the language: a code such as "en" or "de-CH" (the first part counts). */
bool words_stems_language(const char *language);

/*
 * Cuts `text` (valid UTF-8, `bytes` long) into words and hands each to `each`. `language` is a code
 * such as "en", or NULL for the default of the settings. Returns 0, what `each` returned, or
 * -ENOMEM.
 */
int words_scan(words *words, const char *text, size_t bytes, const char *language, words_each each,
               void *user) __attribute__((warn_unused_result));

#endif
