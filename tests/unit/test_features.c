#include "daemon/text/features.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

enum {
    MOST = 1000
};

static int set_up(void **state)
{
    const struct features_settings settings = {.title_weight = 2.5, .key = {1, 2}};
    struct features *features = NULL;
    if (features_new(&settings, &features) < 0) {
        return -1;
    }
    *state = features;
    return 0;
}

static int tear_down(void **state)
{
    features_free(*state);
    return 0;
}

static int extract(struct features *features, const char *title, const char *text, size_t most)
{
    struct features_source source = {
        .title = title,
        .title_bytes = title ? strlen(title) : 0,
        .text = text,
        .text_bytes = text ? strlen(text) : 0,
    };
    return features_extract(features, &source, most);
}

static void assert_feature(const struct features *features, size_t place, const char *term,
                           float frequency)
{
    assert_true(place < features_count(features));
    const struct feature *feature = &features_list(features)[place];
    if (feature->term_bytes != strlen(term) ||
        memcmp(feature->term, term, feature->term_bytes) != 0) {
        fail_msg("term %zu is \"%.*s\", not \"%s\"", place, (int)feature->term_bytes, feature->term,
                 term);
    }
    assert_float_equal(feature->frequency, frequency, 0.0F);
}

static void a_term_is_listed_once_with_its_count(void **state)
{
    assert_int_equal(extract(*state, NULL, "Lamp out. The lamp, the LAMP.", MOST), 0);
    assert_int_equal(features_count(*state), 3);
    assert_feature(*state, 0, "lamp", 3.0F);
    assert_feature(*state, 1, "out", 1.0F);
    assert_feature(*state, 2, "the", 2.0F);
}

static void a_word_of_the_title_counts_by_the_title_weight(void **state)
{
    assert_int_equal(extract(*state, "Lamp lamp", "Lamp out", MOST), 0);
    assert_int_equal(features_count(*state), 2);
    assert_feature(*state, 0, "lamp", 6.0F); /* 1 + 2 · 2.5 */
    assert_feature(*state, 1, "out", 1.0F);
}

static void a_title_alone_is_enough(void **state)
{
    assert_int_equal(extract(*state, "Fog", NULL, MOST), 0);
    assert_int_equal(features_count(*state), 1);
    assert_feature(*state, 0, "fog", 2.5F);
}

static void nothing_gives_no_features(void **state)
{
    assert_int_equal(extract(*state, NULL, NULL, MOST), 0);
    assert_int_equal(features_count(*state), 0);
    assert_int_equal(extract(*state, "", "-- ... --", MOST), 0);
    assert_int_equal(features_count(*state), 0);
}

static void the_surface_is_where_the_term_first_stood(void **state)
{
    const char *title = "The LAMP";
    const char *text = "a lamp, and Oil";
    assert_int_equal(extract(*state, title, text, MOST), 0);
    const struct feature *lamp = &features_list(*state)[1];
    const struct feature *oil = &features_list(*state)[4];
    assert_ptr_equal(lamp->surface, title + 4);
    assert_int_equal(lamp->surface_bytes, 4);
    assert_ptr_equal(oil->surface, text + 12);
    assert_int_equal(oil->surface_bytes, 3);
}

static void fields_are_features_of_their_own(void **state)
{
    const struct features_field fields[] = {
        {"desk", "harbour"}, {"year", "1911"}, {"desk", "lights"}, {"desk", "harbour"}};
    struct features_source source = {
        .text = "harbour", .text_bytes = 7, .fields = fields, .field_count = 4};
    assert_int_equal(features_extract(*state, &source, MOST), 0);
    assert_int_equal(features_count(*state), 4);
    assert_feature(*state, 0, "harbour", 1.0F);
    assert_feature(*state, 1, "desk=harbour", 1.0F); /* given twice, counted once */
    assert_feature(*state, 2, "year=1911", 1.0F);
    assert_feature(*state, 3, "desk=lights", 1.0F);
}

static void a_field_is_counted_as_it_is_given(void **state)
{
    const struct features_field field = {"Desk", "Ｌights & Harbours"};
    struct features_source source = {.fields = &field, .field_count = 1};
    assert_int_equal(features_extract(*state, &source, MOST), 0);
    assert_feature(*state, 0, "Desk=Ｌights & Harbours", 1.0F);
}

static void the_surface_of_a_field_is_its_term(void **state)
{
    const struct features_field field = {"desk", "harbour"};
    struct features_source source = {.fields = &field, .field_count = 1};
    assert_int_equal(features_extract(*state, &source, MOST), 0);
    const struct feature *feature = &features_list(*state)[0];
    assert_int_equal(feature->surface_bytes, 12);
    assert_memory_equal(feature->surface, "desk=harbour", 12);
}

static void a_field_that_is_too_long_is_passed_over(void **state)
{
    char fits[FEATURES_FIELD_BYTES - 1];
    memset(fits, 'v', sizeof fits - 1);
    fits[sizeof fits - 1] = '\0'; /* "n=" and 253 bytes: 255 in all */
    char too_long[FEATURES_FIELD_BYTES];
    memset(too_long, 'v', sizeof too_long - 1);
    too_long[sizeof too_long - 1] = '\0';
    const struct features_field fields[] = {{"n", too_long}, {"n", fits}, {too_long, "v"}};
    struct features_source source = {.fields = fields, .field_count = 3};
    assert_int_equal(features_extract(*state, &source, MOST), 0);
    assert_int_equal(features_count(*state), 1);
    assert_int_equal(features_list(*state)[0].term_bytes, FEATURES_FIELD_BYTES);
}

static void as_many_terms_as_the_limit_are_taken(void **state)
{
    assert_int_equal(extract(*state, "fog", "fog lamp oil lamp", 3), 0);
    assert_int_equal(features_count(*state), 3);
}

static void one_term_more_than_the_limit_is_refused(void **state)
{
    assert_int_equal(extract(*state, "fog", "fog lamp oil lamp wreck", 3), -E2BIG);
    assert_int_equal(features_count(*state), 0);
    assert_int_equal(extract(*state, "fog", NULL, 0), -E2BIG);
}

static void a_field_counts_towards_the_limit(void **state)
{
    const struct features_field field = {"desk", "harbour"};
    struct features_source source = {
        .text = "fog", .text_bytes = 3, .fields = &field, .field_count = 1};
    assert_int_equal(features_extract(*state, &source, 1), -E2BIG);
    assert_int_equal(features_extract(*state, &source, 2), 0);
}

static void an_extraction_leaves_nothing_to_the_next(void **state)
{
    assert_int_equal(extract(*state, "wreck", "wreck ashore", MOST), 0);
    assert_int_equal(extract(*state, "fog", "wreck", 1), -E2BIG);
    assert_int_equal(extract(*state, NULL, "wreck", MOST), 0);
    assert_int_equal(features_count(*state), 1);
    assert_feature(*state, 0, "wreck", 1.0F);
}

static void many_terms_keep_their_order_and_their_counts(void **state)
{
    enum {
        TERMS = 20000,
        TERM_ROOM = 8
    };
    char *text = malloc((size_t)2 * TERMS * TERM_ROOM);
    assert_non_null(text);
    size_t bytes = 0;
    for (int i = 0; i < 2 * TERMS; i++) {
        bytes += (size_t)snprintf(text + bytes, TERM_ROOM, "w%d ", i % TERMS);
    }
    assert_int_equal(extract(*state, NULL, text, TERMS), 0);
    assert_int_equal(features_count(*state), TERMS);
    for (int i = 0; i < TERMS; i++) {
        char term[TERM_ROOM];
        (void)snprintf(term, sizeof term, "w%d", i);
        assert_feature(*state, (size_t)i, term, 2.0F);
    }
    free(text);
}

static void the_key_of_the_table_changes_nothing_that_is_seen(void **state)
{
    const struct features_settings settings = {.title_weight = 2.5, .key = {77, 99}};
    struct features *other = NULL;
    assert_int_equal(features_new(&settings, &other), 0);
    const char *text = "fog from the north east all night and the bell rung by hand";
    assert_int_equal(extract(*state, "Fog bell", text, MOST), 0);
    assert_int_equal(extract(other, "Fog bell", text, MOST), 0);
    assert_int_equal(features_count(*state), features_count(other));
    for (size_t i = 0; i < features_count(*state); i++) {
        const struct feature *feature = &features_list(*state)[i];
        const struct feature *same = &features_list(other)[i];
        assert_int_equal(feature->term_bytes, same->term_bytes);
        assert_memory_equal(feature->term, same->term, same->term_bytes);
        assert_float_equal(feature->frequency, same->frequency, 0.0F);
    }
    features_free(other);
}

static void pairs_of_words_do_not_join_title_and_text(void **state)
{
    (void)state;
    const struct features_settings settings = {.words = {.pairs = true}, .title_weight = 1.0};
    struct features *features = NULL;
    assert_int_equal(features_new(&settings, &features), 0);
    assert_int_equal(extract(features, "Fog bell", "rung twice", MOST), 0);
    assert_int_equal(features_count(features), 6);
    assert_feature(features, 0, "fog", 1.0F);
    assert_feature(features, 1, "bell", 1.0F);
    assert_feature(features, 2, "fog bell", 1.0F);
    assert_feature(features, 3, "rung", 1.0F);
    assert_feature(features, 4, "twice", 1.0F);
    assert_feature(features, 5, "rung twice", 1.0F);
    features_free(features);
}

static void the_language_of_the_source_chooses_the_stemmer(void **state)
{
    (void)state;
    const struct features_settings settings = {.words = {.stemming = true, .language = "de"},
                                               .title_weight = 1.0};
    struct features *features = NULL;
    assert_int_equal(features_new(&settings, &features), 0);
    struct features_source source = {.text = "lamps lamp", .text_bytes = 10, .language = "en"};
    assert_int_equal(features_extract(features, &source, MOST), 0);
    assert_int_equal(features_count(features), 1);
    assert_feature(features, 0, "lamp", 2.0F);
    features_free(features);
}

int main(void)
{
#define features_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        features_test(a_term_is_listed_once_with_its_count),
        features_test(a_word_of_the_title_counts_by_the_title_weight),
        features_test(a_title_alone_is_enough),
        features_test(nothing_gives_no_features),
        features_test(the_surface_is_where_the_term_first_stood),
        features_test(fields_are_features_of_their_own),
        features_test(a_field_is_counted_as_it_is_given),
        features_test(the_surface_of_a_field_is_its_term),
        features_test(a_field_that_is_too_long_is_passed_over),
        features_test(as_many_terms_as_the_limit_are_taken),
        features_test(one_term_more_than_the_limit_is_refused),
        features_test(a_field_counts_towards_the_limit),
        features_test(an_extraction_leaves_nothing_to_the_next),
        features_test(many_terms_keep_their_order_and_their_counts),
        features_test(the_key_of_the_table_changes_nothing_that_is_seen),
        cmocka_unit_test(pairs_of_words_do_not_join_title_and_text),
        cmocka_unit_test(the_language_of_the_source_chooses_the_stemmer),
    };
    return cmocka_run_group_tests_name("features", tests, NULL, NULL);
}
