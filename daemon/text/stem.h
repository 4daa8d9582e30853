/*
 * stem: words down to their stems by Snowball, by the language's code.
 *
 * A set keeps one stemmer a language open from its first use until stem_deinit; it serves one
 * thread at a time. Stemmers work on words in lower case; the stem of a word is no word that a
 * reader should see.
 */
#ifndef UNDERTAG_STEM_H
#define UNDERTAG_STEM_H

#include <stdbool.h>
#include <stddef.h>

struct sb_stemmer;

enum {
    STEM_LANGUAGES = 29
};

/* Zero-initialised is empty. Private. */
struct stem_set {
    struct sb_stemmer *stemmers[STEM_LANGUAGES];
};

void stem_deinit(struct stem_set *set);

/*
 * Whether there is a stemmer for the language: a code of ISO 639-1 or 639-2 (either of its two)
 * with or without more parts behind it, such as "en", "deu" or "de-CH"; case does not matter.
 */
bool stem_knows(const char *language);

/*
 * Calls `each` for every code that has a stemmer, with Snowball's name of it; anything but 0 ends
 * that and is returned; else 0.
 */
int stem_each_code(int (*each)(void *user, const char *code, const char *algorithm), void *user)
    __attribute__((warn_unused_result));

/*
 * The stemmer of the language, opened at need; it belongs to the set. *ret_stemmer is NULL where
 * stem_knows is false. Returns 0 or -ENOMEM.
 */
int stem_for(struct stem_set *set, const char *language, struct sb_stemmer **ret_stemmer)
    __attribute__((warn_unused_result));

/*
 * Stems a folded word. *ret_stem is valid until the stemmer's next word; it is never empty for a
 * word that is not. Returns 0 or -ENOMEM.
 */
int stem_word(struct sb_stemmer *stemmer, const char *word, size_t bytes, const char **ret_stem,
              size_t *ret_bytes) __attribute__((warn_unused_result));

#endif
