/*
 * words: a text into the words that the learner counts. Pure: no clock, no I/O, no globals.
 *
 * A text is cut at the word boundaries of UAX #29 (by libunistring) after it was put into NFKC; a
 * piece with a letter or a number in it is a word, and is case-folded (by utf8proc; see fold.h).
 * Runs of Han, Hiragana and Katakana become overlapping pairs of characters (a run of one character
 * stays as it is). Where a stemmer (Snowball) is known for the language and stemming is on, the
 * word's stem takes its place. With `pairs`, each two neighbouring words also count as one term,
 * "first second", of the words as they are counted.
 *
 * Canonically equal texts give the same terms. No term of a word holds a space or '='; that of a
 * pair of words holds one space.
 *
 * A workspace serves one thread at a time. It keeps the room that its longest text needed.
 */
#ifndef UNDERTAG_WORDS_H
#define UNDERTAG_WORDS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct words;

struct words_settings {
    bool stemming;
    bool pairs;
    const char *language; /* for a text that names none: "" or NULL for none; copied */
};

enum {
    WORDS_TERM_BYTES = 128,    /* a longer word is passed over; a pair is at most 2 * 128 + 1 */
    WORDS_WRITTEN_BYTES = 512, /* a word that takes more in NFKC, before it is folded, is passed
                                * over too */
    WORDS_GAP_BYTES = 64       /* words with more than this between them, in NFKC, are not
                                * neighbours */
};

struct word {
    const char *term; /* as it is counted; not ended by NUL; valid during the call */
    uint32_t term_bytes;
    const char *surface; /* as written in the text; points into it */
    uint32_t surface_bytes;
};

/* Called for each word in the order of the text; anything but 0 ends the scan and is returned. */
typedef int (*words_each)(void *user, const struct word *word);

/* Makes a workspace. Returns 0 or -ENOMEM. */
int words_new(const struct words_settings *settings, struct words **ret_words)
    __attribute__((warn_unused_result));

void words_free(struct words *words);

/* Whether a text is cut at this character before anything else: ASCII white space. */
bool words_is_white_space(char character);

/* Whether Snowball knows the language: a code such as "en" or "de-CH" (the first part counts). */
bool words_stems_language(const char *language);

/*
 * Cuts `text` (valid UTF-8, `bytes` long) into words and hands each to `each`. `language` is a code
 * such as "en", or NULL for the default of the settings; an unknown one is not stemmed. A pair of
 * words is handed over right after its second word. Returns 0, what `each` returned, -ENOMEM, or
 * -E2BIG for a text beyond FOLD_TEXT_BYTES (256 MiB).
 */
int words_scan(struct words *words, const char *text, size_t bytes, const char *language,
               words_each each, void *user) __attribute__((warn_unused_result));

#endif
