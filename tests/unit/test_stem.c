#include "daemon/text/stem.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

static void a_language_is_known_by_either_code(void **state)
{
    (void)state;
    assert_true(stem_knows("en"));
    assert_true(stem_knows("eng"));
    assert_true(stem_knows("de"));
    assert_true(stem_knows("deu"));
    assert_true(stem_knows("ger"));
}

static void only_the_first_part_of_a_code_counts(void **state)
{
    (void)state;
    assert_true(stem_knows("de-CH"));
    assert_true(stem_knows("pt_BR"));
    assert_true(stem_knows("sr-Cyrl-RS"));
}

static void case_does_not_matter(void **state)
{
    (void)state;
    assert_true(stem_knows("EN"));
    assert_true(stem_knows("En-gb"));
}

static void other_codes_are_unknown(void **state)
{
    (void)state;
    const char *others[] = {"",        "e",      "x",   "xx",  "zh",
                            "english", "porter", "-en", "e-n", "\xc3\xa9n"};
    for (size_t i = 0; i < sizeof others / sizeof others[0]; i++) {
        assert_false(stem_knows(others[i]));
    }
    assert_false(stem_knows(NULL));
}

static void every_stemmer_of_the_library_can_be_had(void **state)
{
    (void)state;
    /* In the order of sb_stemmer_list. The library's "porter" is an older one for English. */
    const char *codes[] = {"ar", "hy", "eu", "ca", "da", "nl", "en", "fi", "fr", "de",
                           "el", "hi", "hu", "id", "ga", "it", "lt", "ne", "nb", "pt",
                           "ro", "ru", "sr", "es", "sv", "ta", "tr", "yi"};
    struct stem_set set = {0};
    for (size_t i = 0; i < sizeof codes / sizeof codes[0]; i++) {
        struct sb_stemmer *stemmer = NULL;
        assert_true(stem_knows(codes[i]));
        assert_int_equal(stem_for(&set, codes[i], &stemmer), 0);
        assert_non_null(stemmer);
    }
    stem_deinit(&set);
}

static void a_stemmer_is_opened_once(void **state)
{
    (void)state;
    struct stem_set set = {0};
    struct sb_stemmer *first = NULL;
    struct sb_stemmer *again = NULL;
    assert_int_equal(stem_for(&set, "en", &first), 0);
    assert_int_equal(stem_for(&set, "eng-US", &again), 0);
    assert_ptr_equal(first, again);
    stem_deinit(&set);
}

static void an_unknown_language_has_no_stemmer(void **state)
{
    (void)state;
    struct stem_set set = {0};
    struct sb_stemmer *stemmer = (struct sb_stemmer *)&set;
    assert_int_equal(stem_for(&set, "zh", &stemmer), 0);
    assert_null(stemmer);
    stem_deinit(&set);
}

static void a_word_becomes_its_stem(void **state)
{
    (void)state;
    struct stem_set set = {0};
    struct sb_stemmer *stemmer = NULL;
    const char *stem = NULL;
    size_t bytes = 0;
    assert_int_equal(stem_for(&set, "en", &stemmer), 0);
    assert_int_equal(stem_word(stemmer, "lighting", 8, &stem, &bytes), 0);
    assert_int_equal(bytes, 5);
    assert_memory_equal(stem, "light", 5);
    stem_deinit(&set);
}

static void a_stem_is_never_empty(void **state)
{
    (void)state;
    struct stem_set set = {0};
    struct sb_stemmer *stemmer = NULL;
    const char *stem = NULL;
    size_t bytes = 0;
    assert_int_equal(stem_for(&set, "en", &stemmer), 0);
    assert_int_equal(stem_word(stemmer, "'s", 2, &stem, &bytes), 0);
    assert_true(bytes > 0);
    stem_deinit(&set);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_language_is_known_by_either_code),
        cmocka_unit_test(only_the_first_part_of_a_code_counts),
        cmocka_unit_test(case_does_not_matter),
        cmocka_unit_test(other_codes_are_unknown),
        cmocka_unit_test(every_stemmer_of_the_library_can_be_had),
        cmocka_unit_test(a_stemmer_is_opened_once),
        cmocka_unit_test(an_unknown_language_has_no_stemmer),
        cmocka_unit_test(a_word_becomes_its_stem),
        cmocka_unit_test(a_stem_is_never_empty),
    };
    return cmocka_run_group_tests_name("stem", tests, NULL, NULL);
}
