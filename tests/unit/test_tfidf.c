/* The weights of terms by hand: ln 2 = .693147, ln 3 = 1.098612, ln 11 = 2.397895. */
#include "daemon/text/tfidf.h"

#include <float.h>
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static void assert_near(double value, double expected, double tolerance)
{
    if (!(fabs(value - expected) <= tolerance)) {
        fail_msg("%.9g is not %.9g", value, expected);
    }
}

static void a_term_that_stands_once_weighs_one(void **state)
{
    (void)state;
    assert_near(tfidf_frequency_weight(1.0), 1.0, 0.0);
}

static void more_of_a_term_weighs_by_its_logarithm(void **state)
{
    (void)state;
    assert_near(tfidf_frequency_weight(2.0), 1.693147, 1e-6);
    assert_near(tfidf_frequency_weight(3.0), 2.098612, 1e-6);
}

static void less_than_one_weighs_itself(void **state)
{
    (void)state;
    assert_near(tfidf_frequency_weight(0.25), 0.25, 0.0);
    assert_near(tfidf_frequency_weight(0.0), 0.0, 0.0);
}

static void what_is_no_frequency_weighs_nothing(void **state)
{
    (void)state;
    assert_near(tfidf_frequency_weight(-1.0), 0.0, 0.0);
    assert_near(tfidf_frequency_weight((double)NAN), 0.0, 0.0);
}

static void the_weight_rises_with_the_frequency(void **state)
{
    (void)state;
    double last = tfidf_frequency_weight(0.0);
    for (int i = 1; i < 400; i++) {
        double weight = tfidf_frequency_weight((double)i / 100.0);
        assert_true(weight > last);
        last = weight;
    }
}

static void the_slope_does_not_jump_at_one(void **state)
{
    (void)state;
    double below = (tfidf_frequency_weight(1.0) - tfidf_frequency_weight(1.0 - 1e-6)) / 1e-6;
    double above = (tfidf_frequency_weight(1.0 + 1e-6) - tfidf_frequency_weight(1.0)) / 1e-6;
    assert_near(below, above, 1e-5);
}

static void a_term_of_every_document_has_idf_ln_2(void **state)
{
    (void)state;
    assert_near(tfidf_idf(1.0, 1.0), 0.693147, 1e-6);
    assert_near(tfidf_idf(5000.0, 5000.0), 0.693147, 1e-6);
}

static void a_rarer_term_has_a_greater_idf(void **state)
{
    (void)state;
    assert_near(tfidf_idf(10.0, 5.0), 1.098612, 1e-6);
    assert_near(tfidf_idf(10.0, 1.0), 2.397895, 1e-6);
}

static void a_term_never_seen_counts_as_seen_once(void **state)
{
    (void)state;
    assert_near(tfidf_idf(10.0, 0.0), tfidf_idf(10.0, 1.0), 0.0);
}

static void an_empty_store_gives_a_finite_idf_above_zero(void **state)
{
    (void)state;
    assert_near(tfidf_idf(0.0, 0.0), 0.693147, 1e-6);
    assert_true(tfidf_idf(0.0, 1e12) > 0.0);
    assert_true(isfinite(tfidf_idf(1e12, 0.0)));
}

static void a_vector_is_divided_by_its_length(void **state)
{
    (void)state;
    float x[] = {3.0F, 0.0F, -4.0F};
    tfidf_normalise(x, 3);
    assert_float_equal(x[0], 0.6F, 1e-7F);
    assert_float_equal(x[1], 0.0F, 0.0F);
    assert_float_equal(x[2], -0.8F, 1e-7F);
}

static void a_vector_of_zeros_stays_as_it_is(void **state)
{
    (void)state;
    float x[] = {0.0F, 0.0F};
    tfidf_normalise(x, 2);
    assert_float_equal(x[0], 0.0F, 0.0F);
    assert_float_equal(x[1], 0.0F, 0.0F);
    tfidf_normalise(NULL, 0);
}

static void the_largest_and_the_smallest_floats_have_a_length(void **state)
{
    (void)state;
    float large[] = {FLT_MAX, FLT_MAX};
    tfidf_normalise(large, 2);
    assert_float_equal(large[0], 0.70710678F, 1e-6F);
    float small[] = {FLT_TRUE_MIN, 0.0F};
    tfidf_normalise(small, 2);
    assert_float_equal(small[0], 1.0F, 1e-6F);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_term_that_stands_once_weighs_one),
        cmocka_unit_test(more_of_a_term_weighs_by_its_logarithm),
        cmocka_unit_test(less_than_one_weighs_itself),
        cmocka_unit_test(what_is_no_frequency_weighs_nothing),
        cmocka_unit_test(the_weight_rises_with_the_frequency),
        cmocka_unit_test(the_slope_does_not_jump_at_one),
        cmocka_unit_test(a_term_of_every_document_has_idf_ln_2),
        cmocka_unit_test(a_rarer_term_has_a_greater_idf),
        cmocka_unit_test(a_term_never_seen_counts_as_seen_once),
        cmocka_unit_test(an_empty_store_gives_a_finite_idf_above_zero),
        cmocka_unit_test(a_vector_is_divided_by_its_length),
        cmocka_unit_test(a_vector_of_zeros_stays_as_it_is),
        cmocka_unit_test(the_largest_and_the_smallest_floats_have_a_length),
    };
    return cmocka_run_group_tests_name("tfidf", tests, NULL, NULL);
}
