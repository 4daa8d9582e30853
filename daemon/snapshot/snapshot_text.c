#include "daemon/snapshot/snapshot_text.h"

#include <stdio.h>

#include "daemon/answer.h"
#include "daemon/learner/model.h"
#include "daemon/snapshot/point_ranges.h"
#include "daemon/text/boundaries.h"
#include "daemon/text/fold.h"
#include "daemon/text/script.h"
#include "daemon/text/stem.h"
#include "daemon/text/words.h"

enum {
    FORMAT = 1,
    ASCII_END = 0x80
};

/* In the order in which they are done. */
static const char *const STEPS[] = {
    "Title and text are worked apart. Each is cut at words.white_space into runs; no word and no "
    "row spans two runs.",
    "A run is put into Unicode's normal form NFKC and cut into pieces at the word boundaries of "
    "UAX #29, with the properties in words.word_break (a code point not listed is Other) and "
    "words.extended_pictographic. What rule WB3c joins is not what WB6, WB7b or WB12 look ahead "
    "for.",
    "A piece with a code point of words.in_word that is not of words.in_pairs is a word. Any "
    "other piece with a code point of words.in_pairs goes into the row: each of those is a "
    "character of the row, with the code points behind it in the piece that are none; what stands "
    "in front of the piece's first one is a character, too. Any other piece is passed over.",
    "Pieces of a row that follow each other make one row; a word, a piece passed over or the end "
    "of the run ends it. Each two neighbouring characters of a row are a word; a row of one "
    "character is that word.",
    "A word is folded: code points of words.fold.ignored are left out, in words.fold.replaced [a, "
    "b] says that b takes the place of a, the rest is case-folded in full (CaseFolding.txt, C and "
    "F) and put into NFKC again. A word of more than words.most_bytes.written bytes of UTF-8 "
    "before that, or of none or more than words.most_bytes.term after it, is passed over.",
    "With words.stemming.on a word, but none of a row, gives way to its stem by the Snowball "
    "algorithm of the item's language, or of words.stemming.language where it names none: the "
    "part of the code before the first - or _ in lower case, looked up in "
    "words.stemming.algorithms; where it is not there, or the stem is empty or above "
    "words.most_bytes.term, the word stays.",
    "With words.pairs.on each two neighbouring words are a term besides: both as counted, with a "
    "space between. They are neighbours where at most words.pairs.gap_bytes bytes of UTF-8 lie "
    "between them, the runs being in NFKC and each character of white space one byte, and no word "
    "that was passed over stands between.",
    "A field is a term \"name=value\", as given: a string as it is, true or false, a whole number "
    "in decimal, any other number as C's %.17g; of an array each value is a term. One of more "
    "than fields.most_bytes bytes is passed over.",
    "A term's frequency tf is its count in the text + title_weight * its count in the title; a "
    "field's is 1.",
    "n is the number of filed items that hold the term (documents in words.jsonl, 0 where it is "
    "not there). A draft counts as one item more, with all its terms: N = documents + 1 and n + "
    "1. A filed item is counted in: N = documents and n, at least 1.",
    "x = share * w(tf) * idf, with w(tf) = 1 + ln tf from tf = 1 and tf below, idf = ln(1 + N/n), "
    "and share = unshared_share where n (the item itself included) is 1, else 1.",
    "x is divided by its Euclidean norm over all terms of the item, those that words.jsonl does "
    "not have included; these are then left out.",
};

static json_t *steps_json(void)
{
    json_t *steps = json_array();
    for (size_t i = 0; i < sizeof STEPS / sizeof STEPS[0]; i++) {
        answer_append(&steps, json_string(STEPS[i]));
    }
    return steps;
}

static json_t *versions_json(void)
{
    char boundaries[32];
    int version = boundaries_version();
    (void)snprintf(boundaries, sizeof boundaries, "libunistring %d.%d", version >> 8,
                   version & 0xff);
    return json_pack("{s:s, s:s}", "word_break", boundaries, "the_rest", fold_unicode_version());
}

/* --- words --------------------------------------------------------------------------------------
 */

static json_t *white_space_json(void)
{
    char list[ASCII_END];
    size_t count = 0;
    for (int character = 1; character < ASCII_END; character++) {
        if (words_is_white_space((char)character)) {
            list[count++] = (char)character;
        }
    }
    return json_stringn(list, count);
}

static json_t *fold_json(void)
{
    return json_pack("{s:o, s:[[i, i]]}", "ignored", point_ranges_json(fold_ignores), "replaced",
                     FOLD_APOSTROPHE, '\'');
}

static int add_algorithm(void *user, const char *code, const char *algorithm)
{
    json_t **algorithms = user;
    answer_add(algorithms, code, json_string(algorithm));
    return *algorithms ? 0 : -1;
}

static json_t *stemming_json(const struct words_settings *settings)
{
    json_t *algorithms = json_object();
    if (stem_each_code(add_algorithm, &algorithms) < 0) {
        return NULL; /* answer_add has freed them */
    }
    return json_pack("{s:b, s:s, s:o}", "on", (int)settings->stemming, "language",
                     settings->language ? settings->language : "", "algorithms", algorithms);
}

static json_t *words_json(const struct words_settings *settings)
{
    json_t *words = json_object();
    answer_add(&words, "white_space", white_space_json());
    answer_add(&words, "normal_form", json_string("NFKC"));
    answer_add(&words, "most_bytes",
               json_pack("{s:i, s:i}", "written", WORDS_WRITTEN_BYTES, "term", WORDS_TERM_BYTES));
    answer_add(&words, "stemming", stemming_json(settings));
    answer_add(&words, "pairs",
               json_pack("{s:b, s:i}", "on", (int)settings->pairs, "gap_bytes", WORDS_GAP_BYTES));
    answer_add(&words, "fold", fold_json());
    answer_add(&words, "word_break", point_ranges_by_name_json(boundaries_property, "Other"));
    answer_add(&words, "extended_pictographic", point_ranges_json(boundaries_is_pictographic));
    answer_add(&words, "in_word", point_ranges_json(script_in_word));
    answer_add(&words, "in_pairs", point_ranges_json(script_in_pairs));
    return words;
}

json_t *snapshot_text_json(const struct features_settings *settings, uint64_t documents)
{
    json_t *text = json_object();
    answer_add(&text, "format", json_integer(FORMAT));
    answer_add(&text, "means",
               json_string("How an item becomes x, step by step. Ranges are pairs of code points, "
                           "the first and the last."));
    answer_add(&text, "steps", steps_json());
    answer_add(&text, "unicode", versions_json());
    answer_add(&text, "documents", answer_count(documents));
    answer_add(&text, "title_weight", json_real(settings->title_weight));
    answer_add(&text, "unshared_share", json_real(MODEL_UNSHARED_WORD_SHARE));
    answer_add(&text, "fields", json_pack("{s:i}", "most_bytes", FEATURES_FIELD_BYTES));
    answer_add(&text, "words", words_json(&settings->words));
    return text;
}
