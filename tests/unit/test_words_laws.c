/* What holds for all texts, shown on every code point and on random texts. */
#include "daemon/text/words.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <utf8proc.h>

#include <cmocka.h>

#include "daemon/text/boundaries.h"
#include "daemon/text/script.h"

enum {
    MOST_WORDS = 64,
    TERM_ROOM = WORDS_TERM_BYTES + 1
};

struct scanned {
    size_t count;
    char terms[MOST_WORDS][TERM_ROOM];
    const char *surfaces[MOST_WORDS];
    size_t surface_bytes[MOST_WORDS];
};

struct fixture {
    struct words *words;
    struct scanned scanned;
    struct scanned other;
};

static int set_up(void **state)
{
    const struct words_settings settings = {.language = ""};
    struct fixture *fixture = calloc(1, sizeof *fixture);
    *state = fixture;
    return fixture && words_new(&settings, &fixture->words) == 0 ? 0 : -1;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    words_free(fixture->words);
    free(fixture);
    return 0;
}

static int collect(void *user, const struct word *word)
{
    struct scanned *scanned = user;
    assert_true(scanned->count < MOST_WORDS);
    assert_in_range(word->term_bytes, 1, WORDS_TERM_BYTES);
    memcpy(scanned->terms[scanned->count], word->term, word->term_bytes);
    scanned->terms[scanned->count][word->term_bytes] = '\0';
    scanned->surfaces[scanned->count] = word->surface;
    scanned->surface_bytes[scanned->count] = word->surface_bytes;
    scanned->count++;
    return 0;
}

static void scan(struct fixture *fixture, struct scanned *scanned, const char *text, size_t bytes)
{
    scanned->count = 0;
    assert_int_equal(words_scan(fixture->words, text, bytes, NULL, collect, scanned), 0);
}

static bool is_used_point(int32_t point)
{
    bool is_surrogate = point >= 0xd800 && point < 0xe000;
    bool is_unused = point >= 0x34000 && point < 0xe0000;
    return !is_surrogate && !is_unused;
}

static void no_word_holds_a_space_or_an_equals_sign(void **state)
{
    struct fixture *fixture = *state;
    for (int32_t point = 1; point < 0xe1000; point++) {
        if (!is_used_point(point)) {
            continue;
        }
        char text[8] = "a";
        size_t bytes = 1 + (size_t)utf8proc_encode_char(point, (utf8proc_uint8_t *)text + 1);
        text[bytes++] = '1';
        scan(fixture, &fixture->scanned, text, bytes);
        for (size_t i = 0; i < fixture->scanned.count; i++) {
            if (strpbrk(fixture->scanned.terms[i], "= \t\n\r\v\f")) {
                fail_msg("U+%04X gives \"%s\"", (unsigned)point, fixture->scanned.terms[i]);
            }
        }
    }
}

/* Scans "a", the point, an acute and "b" in NFC or NFD. */
static void scan_form(struct fixture *fixture, struct scanned *scanned, int32_t point,
                      utf8proc_option_t form)
{
    utf8proc_uint8_t text[16] = "a";
    utf8proc_uint8_t *mapped = NULL;
    utf8proc_ssize_t bytes = 1 + utf8proc_encode_char(point, text + 1);
    (void)stpcpy((char *)text + bytes, "\u0301b");
    bytes = utf8proc_map(text, bytes + 3, &mapped, (utf8proc_option_t)(UTF8PROC_STABLE | form));
    assert_true(bytes > 0);
    scan(fixture, scanned, (const char *)mapped, (size_t)bytes);
    free(mapped);
}

static void canonically_equal_texts_give_the_same_terms(void **state)
{
    struct fixture *fixture = *state;
    for (int32_t point = 0x80; point < 0xe1000; point++) {
        if (!is_used_point(point)) {
            continue;
        }
        scan_form(fixture, &fixture->scanned, point, UTF8PROC_COMPOSE);
        scan_form(fixture, &fixture->other, point, UTF8PROC_DECOMPOSE);
        assert_int_equal(fixture->scanned.count, fixture->other.count);
        for (size_t i = 0; i < fixture->scanned.count; i++) {
            assert_string_equal(fixture->scanned.terms[i], fixture->other.terms[i]);
        }
    }
}

/* The words as written that the full rules give for a whole text in NFKC, without runs. */
static size_t cut_whole(const char *text, size_t bytes, size_t starts[], size_t ends[])
{
    char is_boundary[128];
    assert_in_range(bytes, 1, sizeof is_boundary);
    boundaries_find(text, bytes, is_boundary);
    size_t count = 0;
    for (size_t start = 0; start < bytes;) {
        size_t end = start + 1;
        while (end < bytes && !is_boundary[end]) {
            end++;
        }
        bool is_word = false;
        int32_t point = 0;
        for (size_t at = start; at < end;) {
            at += (size_t)utf8proc_iterate((const utf8proc_uint8_t *)text + at,
                                           (utf8proc_ssize_t)(end - at), &point);
            is_word = is_word || script_in_word(point);
        }
        if (is_word) {
            starts[count] = start;
            ends[count++] = end;
        }
        start = end;
    }
    return count;
}

static bool is_nfkc(const char *text, size_t bytes)
{
    utf8proc_uint8_t *mapped = NULL;
    utf8proc_ssize_t mapped_bytes =
        utf8proc_map((const utf8proc_uint8_t *)text, (utf8proc_ssize_t)bytes, &mapped,
                     UTF8PROC_STABLE | UTF8PROC_COMPOSE | UTF8PROC_COMPAT);
    bool is_same = mapped_bytes == (utf8proc_ssize_t)bytes && memcmp(mapped, text, bytes) == 0;
    free(mapped);
    return is_same;
}

static void cutting_by_runs_is_cutting_the_whole(void **state)
{
    /* Letters, digits, joiners, marks and every kind of ASCII space, in random order. */
    const char *parts[] = {"a", "B",      "7",      "_",  ".",    "'",  ",",    ":", "\"",
                           " ", "\t",     "\n",     "\r", "\r\n", "\v", "\f",   "é", "\u0301",
                           "א", "\u200d", "\u00ad", "—",  "’",    "٣",  "🌫", "🇬", "\u200b"};
    struct fixture *fixture = *state;
    uint32_t random = 20;
    int compared = 0;
    for (int round = 0; round < 20000; round++) {
        char text[64];
        size_t bytes = 0;
        size_t starts[64];
        size_t ends[64];
        for (int i = 0; i < 12; i++) {
            random = random * 1664525U + 1013904223U;
            const char *part = parts[(random >> 16) % (sizeof parts / sizeof parts[0])];
            bytes = (size_t)(stpcpy(text + bytes, part) - text);
        }
        if (is_nfkc(text, bytes)) {
            compared++;
            size_t count = cut_whole(text, bytes, starts, ends);
            scan(fixture, &fixture->scanned, text, bytes);
            assert_int_equal(fixture->scanned.count, count);
            for (size_t i = 0; i < count; i++) {
                assert_ptr_equal(fixture->scanned.surfaces[i], text + starts[i]);
                assert_int_equal(fixture->scanned.surface_bytes[i], ends[i] - starts[i]);
            }
        }
    }
    assert_true(compared > 10000);
}

int main(void)
{
#define law(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        law(no_word_holds_a_space_or_an_equals_sign),
        law(canonically_equal_texts_give_the_same_terms),
        law(cutting_by_runs_is_cutting_the_whole),
    };
    return cmocka_run_group_tests_name("words_laws", tests, NULL, NULL);
}
