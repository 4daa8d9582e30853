/*
 * A text is cut at ASCII white space into runs; no word spans one, since white space never joins
 * letters or numbers. Most runs are ASCII: these are cut by the short rules for ASCII and lower-
 * cased by hand. Any other run is put into NFKC, cut by the full rules, and each word is folded;
 * the stretches that fold keeps lead from a word back to where it stands in the text.
 */
#include "daemon/text/words.h"

#include <errno.h>
#include <stdlib.h>
#include <string.h>
#include <utf8proc.h>

#include "daemon/grow.h"
#include "daemon/text/boundaries.h"
#include "daemon/text/fold.h"
#include "daemon/text/script.h"
#include "daemon/text/stem.h"

struct words {
    bool stemming;
    bool pairs;
    char *language;
    struct stem_set stems;
    struct fold normal; /* the run at hand in NFKC */
    struct fold folded; /* the word at hand */
    char *is_boundary;
    size_t boundary_capacity;
};

/* The word before, for pairs of words; term_bytes is 0 when there is none. */
struct previous {
    size_t term_bytes;
    char term[WORDS_TERM_BYTES];
    const char *surface;
    size_t end;
};

/* Where a word stands: as written, and in the text as a whole in NFKC, where canonically equal
 * texts have it at the same place. */
struct place {
    const char *surface;
    size_t surface_bytes;
    size_t start;
    size_t end;
};

struct scan {
    struct words *words;
    struct sb_stemmer *stemmer; /* NULL: no stemming */
    words_each each;
    void *user;
    struct previous previous;
    size_t before; /* bytes of NFKC before the run at hand */
};

/* A run that is not ASCII, and where it is in its text. */
struct run {
    const char *text; /* in NFKC: either the run itself or words->normal */
    size_t bytes;
    const char *written;
    bool is_changed; /* NFKC changed it */
};

/* A row of characters that are counted in pairs, as far as it has been read. */
struct row {
    size_t start; /* the last character: an offset in the run's text, */
    size_t end;   /* equal to `start` when the row is empty */
    bool in_pair; /* it has been counted in a pair */
};

/* --- handing over ------------------------------------------------------------------------------
 */

static int hand_over_pair(struct scan *scan, const char *term, size_t term_bytes,
                          const char *surface_end)
{
    const struct previous *previous = &scan->previous;
    char pair[2 * WORDS_TERM_BYTES + 1];
    memcpy(pair, previous->term, previous->term_bytes);
    pair[previous->term_bytes] = ' ';
    memcpy(pair + previous->term_bytes + 1, term, term_bytes);
    struct word word = {
        .term = pair,
        .term_bytes = (uint32_t)(previous->term_bytes + 1 + term_bytes),
        .surface = previous->surface,
        .surface_bytes = (uint32_t)(surface_end - previous->surface),
    };
    return scan->each(scan->user, &word);
}

/* Hands over a folded word of 1 to WORDS_TERM_BYTES bytes; `stemmer` NULL leaves it as it is. */
static int hand_over(struct scan *scan, struct sb_stemmer *stemmer, const char *term, size_t bytes,
                     const struct place *place)
{
    if (stemmer) {
        const char *stem = NULL;
        size_t stem_bytes = 0;
        if (stem_word(stemmer, term, bytes, &stem, &stem_bytes) < 0) {
            return -ENOMEM;
        }
        if (stem_bytes <= WORDS_TERM_BYTES) {
            term = stem;
            bytes = stem_bytes;
        }
    }
    struct word word = {term, (uint32_t)bytes, place->surface, (uint32_t)place->surface_bytes};
    int result = scan->each(scan->user, &word);
    if (result != 0 || !scan->words->pairs) {
        return result;
    }
    struct previous *previous = &scan->previous;
    /* Characters that are counted in pairs overlap. */
    if (previous->term_bytes > 0 && place->start <= previous->end + WORDS_GAP_BYTES) {
        result = hand_over_pair(scan, term, bytes, place->surface + place->surface_bytes);
    }
    memcpy(previous->term, term, bytes);
    previous->term_bytes = bytes;
    previous->surface = place->surface;
    previous->end = place->end;
    return result;
}

/* --- runs of ASCII -----------------------------------------------------------------------------
 */

static bool is_ascii_letter_or_digit(char character)
{
    char letter = (char)(character | 0x20);
    return (letter >= 'a' && letter <= 'z') || (character >= '0' && character <= '9');
}

/* Lower-cases ASCII; false where there is neither letter nor digit in it. */
static bool lower_ascii(const char *piece, size_t bytes, char *lower)
{
    bool is_word = false;
    for (size_t i = 0; i < bytes; i++) {
        bool is_upper = piece[i] >= 'A' && piece[i] <= 'Z';
        lower[i] = (char)(is_upper ? piece[i] | 0x20 : piece[i]);
        is_word = is_word || is_ascii_letter_or_digit(piece[i]);
    }
    return is_word;
}

static int scan_ascii_run(struct scan *scan, const char *run, size_t bytes)
{
    char lower[WORDS_TERM_BYTES];
    size_t at = 0;
    while (at < bytes) {
        size_t end = boundaries_ascii_end(run, bytes, at);
        if (end - at > WORDS_TERM_BYTES) {
            scan->previous.term_bytes = 0;
        } else if (lower_ascii(run + at, end - at, lower)) {
            const struct place place = {run + at, end - at, scan->before + at, scan->before + end};
            int result = hand_over(scan, scan->stemmer, lower, end - at, &place);
            if (result != 0) {
                return result;
            }
        }
        at = end;
    }
    scan->before += bytes;
    return 0;
}

/* --- other runs --------------------------------------------------------------------------------
 */

/* Folds bytes [start, end) of a run and hands them over as one word, or passes them over. */
static int hand_over_piece(struct scan *scan, const struct run *run, struct sb_stemmer *stemmer,
                           size_t start, size_t end)
{
    struct words *words = scan->words;
    size_t from = run->is_changed ? fold_origin_start(&words->normal, start) : start;
    size_t to = run->is_changed ? fold_origin_end(&words->normal, end) : end;
    if (end - start > WORDS_WRITTEN_BYTES) {
        scan->previous.term_bytes = 0;
        return 0;
    }
    int error = fold_text(&words->folded, FOLD_CASE, run->text + start, end - start);
    if (error < 0) {
        return error;
    }
    if (words->folded.bytes == 0 || words->folded.bytes > WORDS_TERM_BYTES) {
        scan->previous.term_bytes = 0;
        return 0;
    }
    const struct place place = {run->written + from, to - from, scan->before + start,
                                scan->before + end};
    return hand_over(scan, stemmer, words->folded.text, words->folded.bytes, &place);
}

static size_t next_point(const struct run *run, size_t at, int32_t *ret_point)
{
    utf8proc_ssize_t length = utf8proc_iterate((const utf8proc_uint8_t *)run->text + at,
                                               (utf8proc_ssize_t)(run->bytes - at), ret_point);
    if (length <= 0) {
        *ret_point = 0xfffd;
        length = 1;
    }
    return at + (size_t)length;
}

enum piece {
    PIECE_OTHER,   /* no word */
    PIECE_WORD,    /* a word */
    PIECE_IN_PAIRS /* characters that are counted in pairs, and their marks */
};

/* What bytes [start, end) of a run are. */
static enum piece piece_kind(const struct run *run, size_t start, size_t end)
{
    enum piece kind = PIECE_OTHER;
    int32_t point = 0;
    for (size_t at = start; at < end;) {
        at = next_point(run, at, &point);
        if (script_in_pairs(point)) {
            kind = kind == PIECE_OTHER ? PIECE_IN_PAIRS : kind;
        } else if (script_in_word(point)) {
            return PIECE_WORD;
        }
    }
    return kind;
}

/* The row has ended: its only character, if it was one, counts alone. */
static int end_row(struct scan *scan, const struct run *run, struct row *row)
{
    int result = 0;
    if (row->end > row->start && !row->in_pair) {
        result = hand_over_piece(scan, run, NULL, row->start, row->end);
    }
    *row = (struct row){0};
    return result;
}

/* Takes the characters of a piece into the row, which the piece before may have begun. */
static int extend_row(struct scan *scan, const struct run *run, struct row *row, size_t start,
                      size_t end)
{
    size_t at = start;
    while (at < end) {
        int32_t point = 0;
        size_t next = next_point(run, at, &point);
        size_t character_end = next;
        while (next < end) { /* what is no letter belongs to the character before */
            next = next_point(run, next, &point);
            if (script_in_pairs(point)) {
                break;
            }
            character_end = next;
        }
        if (row->end > row->start) {
            int result = hand_over_piece(scan, run, NULL, row->start, character_end);
            if (result != 0) {
                return result;
            }
        }
        *row = (struct row){at, character_end, row->end > row->start};
        at = character_end;
    }
    return 0;
}

static int scan_piece(struct scan *scan, const struct run *run, struct row *row, size_t start,
                      size_t end)
{
    enum piece kind = piece_kind(run, start, end);
    if (kind == PIECE_IN_PAIRS) {
        return extend_row(scan, run, row, start, end);
    }
    int result = end_row(scan, run, row);
    if (result == 0 && kind == PIECE_WORD) {
        result = hand_over_piece(scan, run, scan->stemmer, start, end);
    }
    return result;
}

static int scan_run(struct scan *scan, const char *text, size_t bytes)
{
    struct words *words = scan->words;
    int result = fold_text(&words->normal, FOLD_NFKC, text, bytes);
    if (result < 0) {
        return result;
    }
    struct run run = {words->normal.text, words->normal.bytes, text, true};
    if (run.bytes == bytes && memcmp(run.text, text, bytes) == 0) {
        run = (struct run){text, bytes, text, false};
    }
    if (GROW(&words->is_boundary, &words->boundary_capacity, run.bytes) < 0) {
        return -ENOMEM;
    }
    boundaries_find(run.text, run.bytes, words->is_boundary);
    struct row row = {0};
    size_t start = 0;
    while (start < run.bytes && result == 0) {
        size_t end = start + 1;
        while (end < run.bytes && !words->is_boundary[end]) {
            end++;
        }
        result = scan_piece(scan, &run, &row, start, end);
        start = end;
    }
    result = result == 0 ? end_row(scan, &run, &row) : result;
    scan->before += run.bytes;
    return result;
}

/* --- the text ----------------------------------------------------------------------------------
 */

bool words_is_white_space(char character)
{
    return character == ' ' || (character >= '\t' && character <= '\r');
}

int words_scan(struct words *words, const char *text, size_t bytes, const char *language,
               words_each each, void *user)
{
    if (bytes > FOLD_TEXT_BYTES) {
        return -E2BIG;
    }
    struct scan scan = {.words = words, .each = each, .user = user};
    if (words->stemming &&
        stem_for(&words->stems, language ? language : words->language, &scan.stemmer) < 0) {
        return -ENOMEM;
    }
    size_t at = 0;
    int result = 0;
    while (at < bytes && result == 0) {
        size_t start = at;
        unsigned char all = 0;
        while (at < bytes && !words_is_white_space(text[at])) {
            all |= (unsigned char)text[at++];
        }
        if (all >= 0x80) {
            result = scan_run(&scan, text + start, at - start);
        } else {
            result = scan_ascii_run(&scan, text + start, at - start);
        }
        at++;
        scan.before++; /* the white space */
    }
    return result;
}

int words_new(const struct words_settings *settings, struct words **ret_words)
{
    struct words *words = calloc(1, sizeof *words);
    if (!words) {
        return -ENOMEM;
    }
    words->language = strdup(settings->language ? settings->language : "");
    if (!words->language) {
        free(words);
        return -ENOMEM;
    }
    words->stemming = settings->stemming;
    words->pairs = settings->pairs;
    *ret_words = words;
    return 0;
}

void words_free(struct words *words)
{
    if (!words) {
        return;
    }
    stem_deinit(&words->stems);
    fold_deinit(&words->normal);
    fold_deinit(&words->folded);
    free(words->is_boundary);
    free(words->language);
    free(words);
}

bool words_stems_language(const char *language)
{
    return stem_knows(language);
}
