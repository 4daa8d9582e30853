/*
 * The text pipeline: words, features, stems, and the dictionary behind them.
 *
 * Input: a byte of settings, a byte for the language, the title up to a NUL, then the text. What
 * comes out is held against what words.h and features.h promise of any text.
 */
#include <uninorm.h>

#include "daemon/text/boundaries.h"
#include "daemon/text/dictionary.h"
#include "daemon/text/features.h"

#include "tests/fuzz/fuzz.h"

enum {
    MOST_TERMS = 20000 /* the default of words_limit */
};

static const char *const LANGUAGES[] = {NULL, "en", "de-CH", "ru", "fr", "tr", "zz", "ar"};

/* --- words --- */

/* All terms of a text, each ended by '\n', which no term holds. */
struct terms {
    struct fuzz_input text;
    bool pairs;
    char *bytes;
    size_t size;
    size_t capacity;
    size_t count;
};

static void check_word(const struct terms *terms, const struct word *word)
{
    size_t most = terms->pairs ? 2 * WORDS_TERM_BYTES + 1 : WORDS_TERM_BYTES;
    const char *blank = memchr(word->term, ' ', word->term_bytes);
    FUZZ_CHECK(word->term_bytes > 0 && word->term_bytes <= most);
    FUZZ_CHECK(!u8_check((const uint8_t *)word->term, word->term_bytes));
    FUZZ_CHECK(!memchr(word->term, '=', word->term_bytes));
    FUZZ_CHECK(!memchr(word->term, '\n', word->term_bytes));
    FUZZ_CHECK(!blank || terms->pairs);
    /* The surface lies in the text, and is whole characters of it. */
    const char *text = (const char *)terms->text.data;
    FUZZ_CHECK(word->surface >= text);
    FUZZ_CHECK(word->surface_bytes > 0);
    FUZZ_CHECK((size_t)(word->surface - text) + word->surface_bytes <= terms->text.size);
    FUZZ_CHECK(!u8_check((const uint8_t *)word->surface, word->surface_bytes));
}

static int keep_word(void *user, const struct word *word)
{
    struct terms *terms = user;
    check_word(terms, word);
    if (terms->size + word->term_bytes + 1 > terms->capacity) {
        terms->capacity = 2 * terms->capacity + word->term_bytes + 1;
        terms->bytes = realloc(terms->bytes, terms->capacity);
        FUZZ_CHECK(terms->bytes);
    }
    memcpy(terms->bytes + terms->size, word->term, word->term_bytes);
    terms->size += word->term_bytes;
    terms->bytes[terms->size++] = '\n';
    terms->count++;
    return 0;
}

static struct terms scan(struct words *words, bool pairs, struct fuzz_input text,
                         const char *language)
{
    struct terms terms = {.text = text, .pairs = pairs};
    FUZZ_CHECK(words_scan(words, (const char *)text.data, text.size, language, keep_word, &terms) ==
               0);
    return terms;
}

/* A text and its canonical forms (UAX #15) give the same terms: words.h promises it. */
static size_t check_words(const struct words_settings *settings, struct fuzz_input text,
                          const char *language)
{
    uninorm_t const forms[] = {UNINORM_NFC, UNINORM_NFD};
    struct words *words = NULL;
    FUZZ_CHECK(words_new(settings, &words) == 0);
    struct terms terms = scan(words, settings->pairs, text, language);
    for (size_t i = 0; i < 2 && text.size > 0; i++) {
        size_t size = 0;
        uint8_t *form = u8_normalize(forms[i], text.data, text.size, NULL, &size);
        FUZZ_CHECK(form);
        struct terms same = scan(words, settings->pairs, (struct fuzz_input){form, size}, language);
        FUZZ_CHECK(same.size == terms.size);
        FUZZ_CHECK(
            memcmp(same.bytes ? same.bytes : "", terms.bytes ? terms.bytes : "", terms.size) == 0);
        free(same.bytes);
        free(form);
    }
    free(terms.bytes);
    words_free(words);
    return terms.count;
}

/* --- boundaries: the quick way for ASCII finds what the other finds --- */

static void check_boundaries(struct fuzz_input text)
{
    for (size_t i = 0; i < text.size; i++) {
        if (text.data[i] >= 0x80) {
            return;
        }
    }
    char *is_boundary = fuzz_room(text.size);
    if (text.size > 0) {
        boundaries_find((const char *)text.data, text.size, is_boundary);
    }
    for (size_t at = 0; at < text.size;) {
        size_t end = boundaries_ascii_end((const char *)text.data, text.size, at);
        FUZZ_CHECK(end > at && end <= text.size);
        for (size_t i = at + 1; i < end; i++) {
            FUZZ_CHECK(!is_boundary[i]);
        }
        FUZZ_CHECK(end == text.size || is_boundary[end]);
        at = end;
    }
    free(is_boundary);
}

/* --- features and the dictionary --- */

/* Each term has one number, by which it is found. */
static void check_dictionary(const struct features *features)
{
    const struct siphash_key key = {1911, 3};
    struct dictionary *dictionary = NULL;
    FUZZ_CHECK(dictionary_new(&key, &dictionary) == 0);
    for (size_t i = 0; i < features_count(features); i++) {
        const struct feature *feature = &features_list(features)[i];
        uint32_t word = DICTIONARY_NONE;
        FUZZ_CHECK(dictionary_intern(dictionary, NULL, feature->term, feature->term_bytes, &word) ==
                   0);
        FUZZ_CHECK(word == i);
        dictionary_set_count(dictionary, word, 1);
    }
    for (size_t i = 0; i < features_count(features); i++) {
        const struct feature *feature = &features_list(features)[i];
        struct base_word found = {0};
        FUZZ_CHECK(dictionary_find(dictionary, NULL, feature->term, feature->term_bytes, &found) ==
                   0);
        FUZZ_CHECK(found.number == i && found.count == 1);
    }
    dictionary_free(dictionary);
}

/* Every word is counted once, by its weight; no term stands twice. */
static void check_features(const struct features_settings *settings, struct fuzz_input title,
                           struct fuzz_input text, const char *language, size_t title_words,
                           size_t text_words)
{
    struct features *features = NULL;
    const struct features_source source = {.title = (const char *)title.data,
                                           .title_bytes = title.size,
                                           .text = (const char *)text.data,
                                           .text_bytes = text.size,
                                           .language = language};
    FUZZ_CHECK(features_new(settings, &features) == 0);
    int code = features_extract(features, &source, MOST_TERMS);
    if (code != 0) {
        FUZZ_CHECK(features_count(features) == 0);
        FUZZ_CHECK(title_words + text_words > MOST_TERMS);
    } else {
        double sum = 0.0;
        for (size_t i = 0; i < features_count(features); i++) {
            sum += (double)features_list(features)[i].frequency;
        }
        double due = (double)text_words + settings->title_weight * (double)title_words;
        FUZZ_CHECK(sum > due - 0.01 && sum < due + 0.01); /* halves: floats hold them */
        check_dictionary(features);
    }
    features_free(features);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    unsigned bits = fuzz_byte(&input);
    const char *language = LANGUAGES[fuzz_byte(&input) % 8];
    const struct features_settings settings = {
        .words = {.stemming = bits & 1U, .pairs = bits & 2U, .language = bits & 4U ? "en" : ""},
        .title_weight = 1.5,
        .key = {7, 9}};
    struct fuzz_input parts[2] = {fuzz_until(&input, '\0'), input};
    size_t words[2] = {0};
    for (size_t i = 0; i < 2; i++) {
        char *text = fuzz_text(parts[i]);
        /* Without the NUL behind it, so that what is read beyond is seen. */
        parts[i].data = (const uint8_t *)fuzz_copy(
            (struct fuzz_input){.data = (const uint8_t *)text, .size = parts[i].size});
        free(text);
        words[i] = check_words(&settings.words, parts[i], language);
        check_boundaries(parts[i]);
    }
    check_features(&settings, parts[0], parts[1], language, words[0], words[1]);
    free((void *)parts[0].data);
    free((void *)parts[1].data);
    return 0;
}

/* --- made inputs --- */

uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    static const char *const PIECES[] = {
        "f",                                     /* one word as long as a text may be */
        "\xCC\x81",                              /* marks upon nothing */
        "\xE1\x84\x80",                          /* conjoining letters that never end a syllable */
        "\xE2\x80\x8D",                          /* joiners */
        "\xEF\xB7\xBA",                          /* a letter whose NFKC has 18 */
        "\xE9\x9C\xA7",                          /* one run of Han */
        "'",                                     /* what may stand within a word and does not */
        "a.",                                    /* letters with what joins them */
        "\xF0\x9F\x87\xA6",                      /* regional indicators, which pair */
        "\xE2\x80\xAE\xD7\x90\xCC\xA7\xCC\x81 ", /* right to left, marks out of order */
    };
    if (number >= 2 * (sizeof PIECES / sizeof PIECES[0])) {
        return NULL;
    }
    const char *piece = PIECES[number / 2];
    const char *before = number % 2 == 0 ? "\4\1t" : "\7\2t"; /* plain, then stems and pairs */
    uint8_t *made = fuzz_repeated(before, piece, (256U << 10U) / strlen(piece), "", ret_size);
    made[2] = '\0'; /* no title */
    return made;
}
