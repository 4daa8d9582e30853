/*
 * The loop of fold_text takes one code point at a time from the source, decomposes it (and folds
 * its case) behind the code points of the stretch at hand, and finishes the stretch before a code
 * point that cannot join it: its marks are put into canonical order, the stretch is composed and
 * written out in UTF-8.
 *
 * utf8proc does the same for whole strings, but sorts marks in quadratic time and says nothing of
 * where the parts came from.
 */
#include "daemon/text/fold.h"

#include <errno.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>
#include <utf8proc.h>

#include "daemon/grow.h"

enum {
    DECOMPOSITION_POINTS = 32, /* more than any code point decomposes into (18, U+FDFA) */
    UTF8_BYTES = 4,
    SHORT_ROW = 32, /* up to here insertion is the faster sort */
    CLASSES = 256,
    REPLACEMENT = 0xfffd,
    HANGUL_MEDIAL_FIRST = 0x1160,
    HANGUL_FINAL_LAST = 0x11ff
};

void fold_deinit(struct fold *fold)
{
    free(fold->text);
    free(fold->stretches);
    free(fold->points);
    free(fold->sorted);
    memset(fold, 0, sizeof *fold);
}

static int combining_class(int32_t point)
{
    return utf8proc_get_property(point)->combining_class;
}

/* Whether a decomposed code point may combine with, or move before, what stands in front of it. */
static bool joins_before(int32_t point)
{
    if (point < 0x300) {
        return false;
    }
    if (point >= HANGUL_MEDIAL_FIRST && point <= HANGUL_FINAL_LAST) {
        return true;
    }
    utf8proc_category_t category = utf8proc_category(point);
    return category == UTF8PROC_CATEGORY_MN || category == UTF8PROC_CATEGORY_MC ||
           category == UTF8PROC_CATEGORY_ME;
}

static void sort_short(int32_t *row, size_t count)
{
    for (size_t i = 1; i < count; i++) {
        int32_t point = row[i];
        size_t to = i;
        while (to > 0 && combining_class(row[to - 1]) > combining_class(point)) {
            row[to] = row[to - 1];
            to--;
        }
        row[to] = point;
    }
}

/* A counting sort by class, for rows that only a hostile text has. */
static int sort_long(struct fold *fold, int32_t *row, size_t count)
{
    size_t places[CLASSES + 1] = {0};
    if (GROW(&fold->sorted, &fold->sorted_capacity, count) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count; i++) {
        places[(combining_class(row[i]) & (CLASSES - 1)) + 1]++;
    }
    for (size_t i = 1; i <= CLASSES; i++) {
        places[i] += places[i - 1];
    }
    for (size_t i = 0; i < count; i++) {
        fold->sorted[places[combining_class(row[i]) & (CLASSES - 1)]++] = row[i];
    }
    memcpy(row, fold->sorted, count * sizeof *row);
    return 0;
}

/* Canonical order (UAX #15): each row of marks between starters by class, equal ones as they were.
 */
static int sort_marks(struct fold *fold)
{
    size_t i = 0;
    while (i < fold->point_count) {
        size_t start = i;
        while (i < fold->point_count && combining_class(fold->points[i]) != 0) {
            i++;
        }
        size_t count = i - start;
        if (count > SHORT_ROW) {
            if (sort_long(fold, fold->points + start, count) < 0) {
                return -ENOMEM;
            }
        } else if (count > 1) {
            sort_short(fold->points + start, count);
        }
        i += count == 0;
    }
    return 0;
}

/* Orders, composes and writes out the stretch at hand, if there is one. */
static int finish_stretch(struct fold *fold)
{
    size_t count = fold->point_count;
    if (count > 1) {
        if (sort_marks(fold) < 0) {
            return -ENOMEM;
        }
        count = (size_t)utf8proc_normalize_utf32(fold->points, (utf8proc_ssize_t)count,
                                                 UTF8PROC_COMPOSE | UTF8PROC_STABLE);
    }
    if (GROW(&fold->text, &fold->text_capacity, fold->bytes + count * UTF8_BYTES) < 0) {
        return -ENOMEM;
    }
    for (size_t i = 0; i < count; i++) {
        fold->bytes += (size_t)utf8proc_encode_char(fold->points[i],
                                                    (utf8proc_uint8_t *)fold->text + fold->bytes);
    }
    fold->point_count = 0;
    return 0;
}

static int start_stretch(struct fold *fold, size_t origin)
{
    if (GROW(&fold->stretches, &fold->stretch_capacity, fold->stretch_count + 1) < 0) {
        return -ENOMEM;
    }
    fold->stretches[fold->stretch_count++] =
        (struct fold_stretch){(uint32_t)fold->bytes, (uint32_t)origin};
    return 0;
}

/* Takes in one code point that starts at `origin` in the source. */
static int take_point(struct fold *fold, enum fold_form form, int32_t point, size_t origin)
{
    int options = UTF8PROC_COMPAT | UTF8PROC_COMPOSE | UTF8PROC_STABLE;
    if (form == FOLD_CASE) {
        options |= UTF8PROC_CASEFOLD | UTF8PROC_IGNORE;
        point = point == FOLD_APOSTROPHE ? '\'' : point;
    }
    if (GROW(&fold->points, &fold->point_capacity, fold->point_count + DECOMPOSITION_POINTS) < 0) {
        return -ENOMEM;
    }
    int boundary_class = 0;
    int32_t decomposed[DECOMPOSITION_POINTS];
    utf8proc_ssize_t count = utf8proc_decompose_char(point, decomposed, DECOMPOSITION_POINTS,
                                                     (utf8proc_option_t)options, &boundary_class);
    if (count <= 0 || count > DECOMPOSITION_POINTS) {
        return 0; /* ignorable; none is longer, as the unit test of every code point shows */
    }
    if (fold->stretch_count == 0 || !joins_before(decomposed[0])) {
        if (finish_stretch(fold) < 0 || start_stretch(fold, origin) < 0) {
            return -ENOMEM;
        }
    }
    memcpy(fold->points + fold->point_count, decomposed, (size_t)count * sizeof *decomposed);
    fold->point_count += (size_t)count;
    return 0;
}

int fold_text(struct fold *fold, enum fold_form form, const char *source, size_t bytes)
{
    fold->bytes = 0;
    fold->stretch_count = 0;
    fold->point_count = 0;
    fold->source_bytes = 0;
    if (bytes > FOLD_TEXT_BYTES) {
        return -E2BIG;
    }
    size_t at = 0;
    int error = 0;
    while (at < bytes && error == 0) {
        int32_t point = 0;
        utf8proc_ssize_t length = utf8proc_iterate((const utf8proc_uint8_t *)source + at,
                                                   (utf8proc_ssize_t)(bytes - at), &point);
        if (length <= 0) {
            length = 1;
            point = REPLACEMENT;
        }
        error = take_point(fold, form, point, at);
        at += (size_t)length;
    }
    if (error == 0) {
        error = finish_stretch(fold);
    }
    if (error < 0) {
        fold->bytes = 0;
        fold->stretch_count = 0;
        return error;
    }
    fold->source_bytes = (uint32_t)bytes;
    return 0;
}

/* The number of stretches that start at or before result byte `at`. */
static size_t stretches_up_to(const struct fold *fold, size_t at)
{
    size_t low = 0;
    size_t high = fold->stretch_count;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (fold->stretches[middle].at <= at) {
            low = middle + 1;
        } else {
            high = middle;
        }
    }
    return low;
}

size_t fold_origin_start(const struct fold *fold, size_t at)
{
    if (at >= fold->bytes) {
        return fold->source_bytes;
    }
    size_t count = stretches_up_to(fold, at);
    return count == 0 ? 0 : fold->stretches[count - 1].origin;
}

size_t fold_origin_end(const struct fold *fold, size_t at)
{
    if (at == 0) {
        return 0;
    }
    size_t next = stretches_up_to(fold, at - 1);
    return next < fold->stretch_count ? fold->stretches[next].origin : fold->source_bytes;
}

bool fold_ignores(int32_t point)
{
    return utf8proc_get_property(point)->ignorable;
}

const char *fold_unicode_version(void)
{
    return utf8proc_unicode_version();
}
