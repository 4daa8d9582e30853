/*
 * What counts as a word, in several scripts. The expected terms were worked by hand from the rules
 * of UAX #29 and the case folding of the Unicode Standard.
 */
#include "daemon/text/words.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

enum {
    MOST_WORDS = 64,
    TERM_ROOM = 2 * WORDS_TERM_BYTES + 2
};

/* The words of one scan, as far as there is room. */
struct scanned {
    const char *text;
    size_t text_bytes;
    size_t count;
    char terms[MOST_WORDS][TERM_ROOM];
    const char *surfaces[MOST_WORDS];
    size_t surface_bytes[MOST_WORDS];
};

struct fixture {
    struct words *words;    /* neither stems nor pairs */
    struct words *stemming; /* by the text's language, else none */
    struct words *pairing;  /* English stems and pairs of words */
    struct scanned scanned;
};

static int set_up(void **state)
{
    const struct words_settings plain = {.language = ""};
    const struct words_settings stemming = {.stemming = true, .language = ""};
    const struct words_settings pairing = {.stemming = true, .pairs = true, .language = "en"};
    struct fixture *fixture = calloc(1, sizeof *fixture);
    *state = fixture;
    if (!fixture || words_new(&plain, &fixture->words) < 0 ||
        words_new(&stemming, &fixture->stemming) < 0 ||
        words_new(&pairing, &fixture->pairing) < 0) {
        return -1;
    }
    return 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    words_free(fixture->words);
    words_free(fixture->stemming);
    words_free(fixture->pairing);
    free(fixture);
    return 0;
}

/* Every word of every test passes here, so what holds for all is asserted here. */
static int collect(void *user, const struct word *word)
{
    struct scanned *scanned = user;
    assert_in_range(word->term_bytes, 1, TERM_ROOM - 1);
    assert_true(word->surface >= scanned->text);
    assert_true(word->surface + word->surface_bytes <= scanned->text + scanned->text_bytes);
    assert_true(word->surface_bytes > 0);
    if (scanned->count < MOST_WORDS) {
        memcpy(scanned->terms[scanned->count], word->term, word->term_bytes);
        scanned->terms[scanned->count][word->term_bytes] = '\0';
        scanned->surfaces[scanned->count] = word->surface;
        scanned->surface_bytes[scanned->count] = word->surface_bytes;
    }
    scanned->count++;
    return 0;
}

static void scan_bytes(struct fixture *fixture, struct words *words, const char *language,
                       const char *text, size_t bytes)
{
    fixture->scanned.text = text;
    fixture->scanned.text_bytes = bytes;
    fixture->scanned.count = 0;
    assert_int_equal(words_scan(words, text, bytes, language, collect, &fixture->scanned), 0);
}

static void check_terms(struct fixture *fixture, struct words *words, const char *language,
                        const char *text, const char *const *expected)
{
    const struct scanned *scanned = &fixture->scanned;
    scan_bytes(fixture, words, language, text, strlen(text));
    size_t count = 0;
    for (; expected[count]; count++) {
        if (count >= scanned->count || strcmp(scanned->terms[count], expected[count]) != 0) {
            fail_msg("\"%s\": word %zu is \"%s\", not \"%s\"", text, count,
                     count < scanned->count ? scanned->terms[count] : "(none)", expected[count]);
        }
    }
    if (scanned->count != count) {
        fail_msg("\"%s\": %zu words, not %zu", text, scanned->count, count);
    }
}

static void check_surfaces(struct fixture *fixture, struct words *words, const char *text,
                           const char *const *expected)
{
    const struct scanned *scanned = &fixture->scanned;
    scan_bytes(fixture, words, NULL, text, strlen(text));
    size_t count = 0;
    for (; expected[count]; count++) {
        assert_true(count < scanned->count);
        if (scanned->surface_bytes[count] != strlen(expected[count]) ||
            memcmp(scanned->surfaces[count], expected[count], strlen(expected[count])) != 0) {
            fail_msg("\"%s\": word %zu is written \"%.*s\", not \"%s\"", text, count,
                     (int)scanned->surface_bytes[count], scanned->surfaces[count], expected[count]);
        }
    }
    assert_int_equal(scanned->count, count);
}

#define LIST(...) ((const char *const[]){__VA_ARGS__, NULL})
#define assert_terms(text, ...)                                                                    \
    check_terms(*state, ((struct fixture *)*state)->words, NULL, text, LIST(__VA_ARGS__))
#define assert_no_terms(text)                                                                      \
    check_terms(*state, ((struct fixture *)*state)->words, NULL, text, LIST(NULL))
#define assert_stems(language, text, ...)                                                          \
    check_terms(*state, ((struct fixture *)*state)->stemming, language, text, LIST(__VA_ARGS__))
#define assert_paired_terms(text, ...)                                                             \
    check_terms(*state, ((struct fixture *)*state)->pairing, NULL, text, LIST(__VA_ARGS__))
#define assert_surfaces(text, ...)                                                                 \
    check_surfaces(*state, ((struct fixture *)*state)->words, text, LIST(__VA_ARGS__))
#define assert_paired_surfaces(text, ...)                                                          \
    check_surfaces(*state, ((struct fixture *)*state)->pairing, text, LIST(__VA_ARGS__))

/* --- Latin, numbers, punctuation --- */

static void english_is_cut_at_spaces_and_punctuation(void **state)
{
    assert_terms("Lamp lit at dusk; wind NW, fog-bell silent.", "lamp", "lit", "at", "dusk", "wind",
                 "nw", "fog", "bell", "silent");
}

static void numbers_keep_their_separators(void **state)
{
    assert_terms("1,000.5 gallons on the 3rd", "1,000.5", "gallons", "on", "the", "3rd");
    assert_terms("06:30, 12;", "06", "30", "12");
}

static void an_apostrophe_within_a_word_belongs_to_it(void **state)
{
    assert_terms("the keeper's 'boat'", "the", "keeper's", "boat");
}

static void both_apostrophes_give_one_term(void **state)
{
    assert_terms("the keeper’s ‘boat’", "the", "keeper's", "boat");
}

static void a_point_within_a_word_belongs_to_it(void **state)
{
    assert_terms("e.g. S.W. of log.txt", "e.g", "s.w", "of", "log.txt");
}

static void an_underscore_joins_but_makes_no_word(void **state)
{
    assert_terms("north_light ___ _", "north_light");
}

static void signs_and_space_are_no_words(void **state)
{
    assert_no_terms("");
    assert_no_terms(" \t\r\n");
    assert_no_terms("-- ... !? § € — “ ” = +");
}

static void sharp_s_counts_as_ss(void **state)
{
    assert_terms("Straße STRASSE Strasse", "strasse", "strasse", "strasse");
}

static void dotted_capital_i_folds_by_unicode_s_default(void **state)
{
    /* CaseFolding.txt, status F: 0130 becomes 0069 0307; the Turkish folding (T) is not used. */
    assert_terms("İstanbul", "i\u0307stanbul");
    assert_terms("ısı", "ısı");
}

static void composed_and_decomposed_letters_give_one_term(void **state)
{
    assert_terms("caf\u00e9 cafe\u0301", "café", "café");
    assert_terms("\u1e69 s\u0323\u0307 s\u0307\u0323", "ṩ", "ṩ", "ṩ");
}

static void ligatures_and_full_width_letters_become_plain(void **state)
{
    assert_terms("ﬁre Ｆｉｒｅ №５", "fire", "fire", "no5");
}

static void zero_width_characters_within_a_word_are_left_out(void **state)
{
    assert_terms("light\u00adhouse light\u200dhouse light\u2060house", "lighthouse", "lighthouse",
                 "lighthouse");
}

static void a_zero_width_space_parts_words(void **state)
{
    assert_terms("light\u200bhouse", "light", "house");
}

static void a_no_break_space_parts_words(void **state)
{
    assert_terms("fog\u00a0bell", "fog", "bell");
}

/* --- other scripts --- */

static void greek_final_sigma_counts_as_sigma(void **state)
{
    assert_terms("ΦΑΡΟΣ φάρος φαρος", "φαροσ", "φάροσ", "φαροσ");
}

static void cyrillic_is_folded(void **state)
{
    assert_terms("МАЯК Маяк-2, туман.", "маяк", "маяк", "2", "туман");
}

static void arabic_keeps_its_marks_with_the_letter(void **state)
{
    assert_terms("مَنارة البحر", "مَنارة", "البحر");
    assert_terms("٣ سفن", "٣", "سفن");
}

static void hebrew_joins_by_its_quotation_mark(void **state)
{
    assert_terms("צה\"ל", "צה\"ל");
}

static void han_becomes_overlapping_pairs(void **state)
{
    assert_terms("海上灯塔", "海上", "上灯", "灯塔");
}

static void a_single_han_character_stays(void **state)
{
    assert_terms("雾", "雾");
    assert_terms("雾，灯", "雾", "灯");
}

static void japanese_pairs_run_across_its_scripts(void **state)
{
    assert_terms("灯台のライト", "灯台", "台の", "のラ", "ライ", "イト");
}

static void the_prolonged_sound_mark_is_a_character_of_the_run(void **state)
{
    assert_terms("ハーバー", "ハー", "ーバ", "バー");
}

static void half_width_katakana_counts_as_katakana(void **state)
{
    assert_terms("ﾊﾞﾙﾌﾞ バルブ", "バル", "ルブ", "バル", "ルブ");
}

static void other_letters_and_digits_end_a_run_of_pairs(void **state)
{
    assert_terms("第3号灯台abc灯", "第", "3", "号灯", "灯台", "abc", "灯");
}

static void an_ideograph_s_variation_is_left_out(void **state)
{
    assert_terms("灯\U000e0100台", "灯台");
}

static void ideographs_beyond_the_basic_plane_are_paired(void **state)
{
    assert_terms("\U00020bb7\U0002a6b2灯", "\U00020bb7\U0002a6b2", "\U0002a6b2灯");
}

static void hangul_is_cut_into_words(void **state)
{
    assert_terms("등대의 불빛", "등대의", "불빛");
    assert_terms("\u1103\u1173\u11bc", "등");
}

static void thai_is_left_as_uax_29_leaves_it(void **state)
{
    /* Without a dictionary each letter with its marks is a piece (UAX #29, section 4). */
    assert_terms("สวัสดี", "ส", "วั", "ส", "ดี");
}

static void emoji_are_no_words(void **state)
{
    assert_no_terms("👩‍🚀 ❤️ 🇬🇧 👍🏽");
    assert_terms("fog🌫bell", "fog", "bell");
}

/* --- as written --- */

static void a_surface_points_at_the_word_as_written(void **state)
{
    assert_surfaces("The LAMP, Straße.", "The", "LAMP", "Straße");
}

static void a_surface_is_found_where_nfkc_changed_the_text(void **state)
{
    assert_surfaces("(ﬁre,cafe\u0301)", "ﬁre", "cafe\u0301");
    assert_surfaces("海上，灯塔；雾", "海上", "灯塔", "雾");
    assert_surfaces("ﾊﾞﾙﾌﾞ", "ﾊﾞﾙ", "ﾙﾌﾞ");
}

static void words_of_one_character_share_its_surface(void **state)
{
    /* U+FDFA stands for four words. */
    assert_surfaces("\ufdfa", "\ufdfa", "\ufdfa", "\ufdfa", "\ufdfa");
}

static void a_surface_holds_what_the_term_leaves_out(void **state)
{
    assert_surfaces("light\u00adhouse,", "light\u00adhouse");
}

/* --- stems and pairs of words --- */

static void words_are_stemmed_by_the_language_of_the_text(void **state)
{
    assert_stems("en", "Lighting the lamps", "light", "the", "lamp");
    assert_stems("en-GB", "Lighting", "light");
    assert_stems("de", "Straßen und Häfen", "strass", "und", "haf");
    assert_stems("ru", "маяками", "маяк");
}

static void a_text_without_a_known_language_is_not_stemmed(void **state)
{
    assert_stems(NULL, "lighting lamps", "lighting", "lamps");
    assert_stems("xx", "lighting lamps", "lighting", "lamps");
}

static void nothing_is_stemmed_where_stemming_is_off(void **state)
{
    struct fixture *fixture = *state;
    check_terms(fixture, fixture->words, "en", "lighting lamps", LIST("lighting", "lamps"));
}

static void characters_in_pairs_are_not_stemmed(void **state)
{
    assert_stems("en", "灯台 lamps", "灯台", "lamp");
}

static void neighbours_count_as_one_term_too(void **state)
{
    assert_paired_terms("Lighting lamps twice.", "light", "lamp", "light lamp", "twice",
                        "lamp twice");
    assert_paired_surfaces("Lighting lamps, twice.", "Lighting", "lamps", "Lighting lamps", "twice",
                           "lamps, twice");
}

static void a_single_word_has_no_neighbour(void **state)
{
    assert_paired_terms("lamp", "lamp");
    assert_paired_terms("lamp", "lamp"); /* nor does the word of the scan before count */
}

static void words_far_apart_are_no_neighbours(void **state)
{
    char text[4 + WORDS_GAP_BYTES + 1 + 4 + 1];
    (void)snprintf(text, sizeof text, "lamp%*sbell", WORDS_GAP_BYTES, "");
    assert_paired_terms(text, "lamp", "bell", "lamp bell");
    (void)snprintf(text, sizeof text, "lamp%*sbell", WORDS_GAP_BYTES + 1, "");
    assert_paired_terms(text, "lamp", "bell");
}

/* U+1D15E, a note, has two canonical spellings: 4 bytes, and two characters of 4 bytes each, which
 * is its NFC and NFKC. So there are 66 bytes between the words, however it is written. */
static void words_are_as_far_apart_in_all_canonically_equal_texts(void **state)
{
    char text[128];
    (void)snprintf(text, sizeof text, "lamp%.*s\U0001d15ebell", 58,
                   "----------------------------------------------------------");
    assert_paired_terms(text, "lamp", "bell");
    (void)snprintf(text, sizeof text, "lamp%.*s\U0001d157\U0001d165bell", 58,
                   "----------------------------------------------------------");
    assert_paired_terms(text, "lamp", "bell");
}

/* --- limits --- */

static void a_word_of_the_greatest_length_is_taken_and_a_longer_one_passed_over(void **state)
{
    struct fixture *fixture = *state;
    char text[2 * WORDS_TERM_BYTES + 3];
    memset(text, 'a', sizeof text);
    text[WORDS_TERM_BYTES] = ' ';
    scan_bytes(fixture, fixture->words, NULL, text, sizeof text - 1);
    assert_int_equal(fixture->scanned.count, 1);
    assert_int_equal(strlen(fixture->scanned.terms[0]), WORDS_TERM_BYTES);
}

static void a_long_word_that_is_not_ascii_is_passed_over_too(void **state)
{
    struct fixture *fixture = *state;
    char text[WORDS_TERM_BYTES + 3];
    for (size_t i = 0; i < WORDS_TERM_BYTES + 2; i += 2) {
        (void)stpcpy(text + i, "é");
    }
    scan_bytes(fixture, fixture->words, NULL, text, WORDS_TERM_BYTES + 2);
    assert_int_equal(fixture->scanned.count, 0);
    scan_bytes(fixture, fixture->words, NULL, text, WORDS_TERM_BYTES);
    assert_int_equal(fixture->scanned.count, 1);
}

static void a_word_passed_over_has_no_neighbours(void **state)
{
    struct fixture *fixture = *state;
    char text[5 + WORDS_TERM_BYTES + 1 + 5 + 1] = "lamp ";
    memset(text + 5, 'a', WORDS_TERM_BYTES + 1);
    (void)stpcpy(text + 5 + WORDS_TERM_BYTES + 1, " bell");
    scan_bytes(fixture, fixture->pairing, NULL, text, sizeof text - 1);
    assert_int_equal(fixture->scanned.count, 2);
}

static void a_short_term_that_takes_much_room_as_written_is_passed_over(void **state)
{
    struct fixture *fixture = *state;
    char text[1 + 2 * WORDS_WRITTEN_BYTES + 1] = "a";
    for (size_t i = 1; i < sizeof text - 1; i += 2) {
        (void)stpcpy(text + i, "\u00ad");
    }
    text[sizeof text - 1] = 'b';
    scan_bytes(fixture, fixture->words, NULL, text, sizeof text);
    assert_int_equal(fixture->scanned.count, 0);
}

/* 25 letters and 215 soft hyphens: 75 + 430 bytes in NFKC, but 200 + 430 with each letter as an
 * alpha and three marks. Folded, the letter is 5 bytes. */
static void a_word_is_as_long_in_all_canonically_equal_texts(void **state)
{
    struct fixture *fixture = *state;
    const char *const letters[] = {"\u1f82", "\u03b1\u0313\u0300\u0345"};
    for (size_t i = 0; i < 2; i++) {
        char text[25 * 8 + 215 * 2 + 1];
        char *end = text;
        for (int letter = 0; letter < 25; letter++) {
            end = stpcpy(end, letters[i]);
        }
        for (int hyphen = 0; hyphen < 215; hyphen++) {
            end = stpcpy(end, "\u00ad");
        }
        scan_bytes(fixture, fixture->words, NULL, text, (size_t)(end - text));
        assert_int_equal(fixture->scanned.count, 1);
        assert_int_equal(strlen(fixture->scanned.terms[0]), 25 * 5);
    }
}

static void a_text_of_a_mebibyte_gives_all_its_words(void **state)
{
    const size_t bytes = 1 << 20;
    const char *fillings[] = {"fog ", "né, ", "灯", "q\u0301\u0323 "};
    char *text = malloc(bytes);
    assert_non_null(text);
    struct fixture *fixture = *state;
    for (size_t i = 0; i < sizeof fillings / sizeof fillings[0]; i++) {
        size_t length = strlen(fillings[i]);
        size_t copies = bytes / length;
        for (size_t at = 0; at < copies; at++) {
            memcpy(text + at * length, fillings[i], length);
        }
        scan_bytes(fixture, fixture->words, NULL, text, copies * length);
        assert_int_equal(fixture->scanned.count, i == 2 ? copies - 1 : copies);
    }
    free(text);
}

static int stop_at_third(void *user, const struct word *word)
{
    (void)word;
    int *calls = user;
    return ++*calls == 3 ? -7 : 0;
}

static void the_scan_ends_when_the_caller_says_so(void **state)
{
    struct fixture *fixture = *state;
    const char *texts[] = {"one two three four", "é ö ü ä", "海上灯塔雾"};
    for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
        int calls = 0;
        assert_int_equal(
            words_scan(fixture->words, texts[i], strlen(texts[i]), NULL, stop_at_third, &calls),
            -7);
        assert_int_equal(calls, 3);
    }
}

int main(void)
{
#define words_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        words_test(english_is_cut_at_spaces_and_punctuation),
        words_test(numbers_keep_their_separators),
        words_test(an_apostrophe_within_a_word_belongs_to_it),
        words_test(both_apostrophes_give_one_term),
        words_test(a_point_within_a_word_belongs_to_it),
        words_test(an_underscore_joins_but_makes_no_word),
        words_test(signs_and_space_are_no_words),
        words_test(sharp_s_counts_as_ss),
        words_test(dotted_capital_i_folds_by_unicode_s_default),
        words_test(composed_and_decomposed_letters_give_one_term),
        words_test(ligatures_and_full_width_letters_become_plain),
        words_test(zero_width_characters_within_a_word_are_left_out),
        words_test(a_zero_width_space_parts_words),
        words_test(a_no_break_space_parts_words),
        words_test(greek_final_sigma_counts_as_sigma),
        words_test(cyrillic_is_folded),
        words_test(arabic_keeps_its_marks_with_the_letter),
        words_test(hebrew_joins_by_its_quotation_mark),
        words_test(han_becomes_overlapping_pairs),
        words_test(a_single_han_character_stays),
        words_test(japanese_pairs_run_across_its_scripts),
        words_test(the_prolonged_sound_mark_is_a_character_of_the_run),
        words_test(half_width_katakana_counts_as_katakana),
        words_test(other_letters_and_digits_end_a_run_of_pairs),
        words_test(an_ideograph_s_variation_is_left_out),
        words_test(ideographs_beyond_the_basic_plane_are_paired),
        words_test(hangul_is_cut_into_words),
        words_test(thai_is_left_as_uax_29_leaves_it),
        words_test(emoji_are_no_words),
        words_test(a_surface_points_at_the_word_as_written),
        words_test(a_surface_is_found_where_nfkc_changed_the_text),
        words_test(words_of_one_character_share_its_surface),
        words_test(a_surface_holds_what_the_term_leaves_out),
        words_test(words_are_stemmed_by_the_language_of_the_text),
        words_test(a_text_without_a_known_language_is_not_stemmed),
        words_test(nothing_is_stemmed_where_stemming_is_off),
        words_test(characters_in_pairs_are_not_stemmed),
        words_test(neighbours_count_as_one_term_too),
        words_test(a_single_word_has_no_neighbour),
        words_test(words_far_apart_are_no_neighbours),
        words_test(words_are_as_far_apart_in_all_canonically_equal_texts),
        words_test(a_word_of_the_greatest_length_is_taken_and_a_longer_one_passed_over),
        words_test(a_long_word_that_is_not_ascii_is_passed_over_too),
        words_test(a_word_passed_over_has_no_neighbours),
        words_test(a_short_term_that_takes_much_room_as_written_is_passed_over),
        words_test(a_word_is_as_long_in_all_canonically_equal_texts),
        words_test(a_text_of_a_mebibyte_gives_all_its_words),
        words_test(the_scan_ends_when_the_caller_says_so),
    };
    return cmocka_run_group_tests_name("words", tests, NULL, NULL);
}
