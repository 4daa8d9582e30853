#include "daemon/text/stem.h"

#include <errno.h>
#include <libstemmer.h>
#include <limits.h>
#include <stdint.h>
#include <string.h>

enum {
    CODE_BYTES = 4
};

/* The codes of ISO 639-1 and 639-2 (terminology, bibliography) and Snowball's name. */
struct stem_language {
    char codes[3][CODE_BYTES];
    const char *algorithm;
};

static const struct stem_language languages[] = {
    {{"ar", "ara", ""}, "arabic"},     {{"hy", "hye", "arm"}, "armenian"},
    {{"eu", "eus", "baq"}, "basque"},  {{"ca", "cat", ""}, "catalan"},
    {{"da", "dan", ""}, "danish"},     {{"nl", "nld", "dut"}, "dutch"},
    {{"en", "eng", ""}, "english"},    {{"fi", "fin", ""}, "finnish"},
    {{"fr", "fra", "fre"}, "french"},  {{"de", "deu", "ger"}, "german"},
    {{"el", "ell", "gre"}, "greek"},   {{"hi", "hin", ""}, "hindi"},
    {{"hu", "hun", ""}, "hungarian"},  {{"id", "ind", ""}, "indonesian"},
    {{"ga", "gle", ""}, "irish"},      {{"it", "ita", ""}, "italian"},
    {{"lt", "lit", ""}, "lithuanian"}, {{"ne", "nep", ""}, "nepali"},
    {{"no", "nor", ""}, "norwegian"},  {{"nb", "nob", ""}, "norwegian"},
    {{"pt", "por", ""}, "portuguese"}, {{"ro", "ron", "rum"}, "romanian"},
    {{"ru", "rus", ""}, "russian"},    {{"sr", "srp", ""}, "serbian"},
    {{"es", "spa", ""}, "spanish"},    {{"sv", "swe", ""}, "swedish"},
    {{"ta", "tam", ""}, "tamil"},      {{"tr", "tur", ""}, "turkish"},
    {{"yi", "yid", ""}, "yiddish"},
};

_Static_assert(sizeof languages / sizeof languages[0] == STEM_LANGUAGES,
               "a set has a place for each language");

/* The first part of a code in lower case; false where it is not two or three ASCII letters. */
static bool first_part(const char *language, char code[CODE_BYTES])
{
    size_t length = strcspn(language, "-_");
    if (length < 2 || length >= CODE_BYTES) {
        return false;
    }
    for (size_t i = 0; i < length; i++) {
        char letter = (char)(language[i] | 0x20);
        if (letter < 'a' || letter > 'z') {
            return false;
        }
        code[i] = letter;
    }
    code[length] = '\0';
    return true;
}

/* Whether the installed library has the algorithm. */
static bool is_installed(const char *algorithm)
{
    for (const char **name = sb_stemmer_list(); *name; name++) {
        if (strcmp(*name, algorithm) == 0) {
            return true;
        }
    }
    return false;
}

/* The row of the language in `languages`, or -1. */
static int find_language(const char *language)
{
    char code[CODE_BYTES];
    if (!language || !first_part(language, code)) {
        return -1;
    }
    for (int row = 0; row < STEM_LANGUAGES; row++) {
        for (size_t i = 0; i < 3; i++) {
            if (strcmp(languages[row].codes[i], code) == 0) {
                return row;
            }
        }
    }
    return -1;
}

void stem_deinit(struct stem_set *set)
{
    for (size_t i = 0; i < STEM_LANGUAGES; i++) {
        sb_stemmer_delete(set->stemmers[i]);
        set->stemmers[i] = NULL;
    }
}

bool stem_knows(const char *language)
{
    int row = find_language(language);
    return row >= 0 && is_installed(languages[row].algorithm);
}

int stem_each_code(int (*each)(void *user, const char *code, const char *algorithm), void *user)
{
    int result = 0;
    for (size_t row = 0; row < STEM_LANGUAGES; row++) {
        const struct stem_language *language = &languages[row];
        for (size_t i = 0; i < 3 && is_installed(language->algorithm) && result == 0; i++) {
            if (language->codes[i][0] != '\0') {
                result = each(user, language->codes[i], language->algorithm);
            }
        }
    }
    return result;
}

int stem_for(struct stem_set *set, const char *language, struct sb_stemmer **ret_stemmer)
{
    int row = find_language(language);
    if (row < 0 || (!set->stemmers[row] && !is_installed(languages[row].algorithm))) {
        *ret_stemmer = NULL;
        return 0;
    }
    if (!set->stemmers[row]) {
        set->stemmers[row] = sb_stemmer_new(languages[row].algorithm, NULL);
        if (!set->stemmers[row]) {
            return -ENOMEM;
        }
    }
    *ret_stemmer = set->stemmers[row];
    return 0;
}

int stem_word(struct sb_stemmer *stemmer, const char *word, size_t bytes, const char **ret_stem,
              size_t *ret_bytes)
{
    if (bytes > INT_MAX) {
        return -ENOMEM;
    }
    const sb_symbol *stem = sb_stemmer_stem(stemmer, (const sb_symbol *)word, (int)bytes);
    if (!stem) {
        return -ENOMEM;
    }
    int length = sb_stemmer_length(stemmer);
    if (length <= 0) {
        *ret_stem = word;
        *ret_bytes = bytes;
        return 0;
    }
    *ret_stem = (const char *)stem;
    *ret_bytes = (size_t)length;
    return 0;
}
