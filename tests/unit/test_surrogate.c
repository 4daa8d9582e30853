/*
 * The surrogate losses against finite differences, against many small steps, and against the
 * unbiased loss for class-conditional noise of Natarajan et al. (NeurIPS 2013), both outcomes of y
 * enumerated.
 */
#include "daemon/learner/surrogate.h"

#include <stdbool.h>

#include "tests/unit/near.h"

static const enum surrogate KINDS[] = {SURROGATE_SQUARED_HINGE, SURROGATE_HINGE,
                                       SURROGATE_LOGISTIC};
static const double MARGINS[] = {-3.0, -1.0, -0.4, 0.0, 0.3, 0.9, 1.5, 4.0};
static const double FACTORS[] = {0.05, 1.0, 3.0, 7.0, 20.0};
static const double CURVATURES[] = {0.01, 0.3, 2.0};
static const double PROPENSITIES[] = {0.01, 0.25, 0.5, 0.9, 1.0};

#define EACH(item, list)                                                                           \
    (size_t item##_at = 0; item##_at < sizeof(list) / sizeof *(list); item##_at++)

/* --- the losses and their slopes ----------------------------------------------------------------
 */

static void a_margin_of_one_is_no_loss_to_the_hinges(void **state)
{
    (void)state;
    assert_near(surrogate_loss(SURROGATE_SQUARED_HINGE, 1.0), 0.0, 0.0);
    assert_near(surrogate_loss(SURROGATE_HINGE, 1.0), 0.0, 0.0);
    assert_near(surrogate_loss(SURROGATE_SQUARED_HINGE, 7.0), 0.0, 0.0);
    assert_near(surrogate_loss(SURROGATE_HINGE, 7.0), 0.0, 0.0);
}

static void the_losses_of_a_wrong_answer_by_hand(void **state)
{
    (void)state;
    assert_near(surrogate_loss(SURROGATE_SQUARED_HINGE, -1.0), 4.0, 0.0); /* (1 + 1)² */
    assert_near(surrogate_loss(SURROGATE_HINGE, -1.0), 2.0, 0.0);
    assert_near(surrogate_loss(SURROGATE_LOGISTIC, 0.0), 0.693147180560, 1e-12);  /* ln 2 */
    assert_near(surrogate_loss(SURROGATE_LOGISTIC, -1.0), 1.313261687518, 1e-12); /* ln(1 + e) */
}

static void the_logistic_loss_of_a_great_margin_is_finite(void **state)
{
    (void)state;
    assert_near(surrogate_loss(SURROGATE_LOGISTIC, -2000.0), 2000.0, 1e-9);
    assert_near(surrogate_loss(SURROGATE_LOGISTIC, 2000.0), 0.0, 0.0);
    assert_near(surrogate_slope(SURROGATE_LOGISTIC, -2000.0), -1.0, 0.0);
    assert_near(surrogate_slope(SURROGATE_LOGISTIC, 2000.0), 0.0, 0.0);
}

static void the_slope_is_the_finite_difference_of_the_loss(void **state)
{
    (void)state;
    const double width = 1e-5;
    for
        EACH(kind, KINDS)
        {
        for
            EACH(margin, MARGINS)
            {
                enum surrogate kind = KINDS[kind_at];
                double margin = MARGINS[margin_at];
                double rise =
                    surrogate_loss(kind, margin + width) - surrogate_loss(kind, margin - width);
                assert_near(surrogate_slope(kind, margin), rise / (2.0 * width), 1e-8);
            }
        }
}

static void at_the_kink_the_slope_is_zero(void **state)
{
    (void)state;
    assert_near(surrogate_slope(SURROGATE_HINGE, 1.0), 0.0, 0.0);
    assert_near(surrogate_slope(SURROGATE_SQUARED_HINGE, 1.0), 0.0, 0.0);
}

/* --- the step: Karampatziakis & Langford, UAI 2011 ----------------------------------------------
 */

/* Many small gradient steps of total length `factor`, each moving the margin. */
static double many_small_steps(enum surrogate kind, double margin, double factor, double curvature)
{
    enum {
        STEPS = 20000
    };
    double sum = 0.0;
    for (int i = 0; i < STEPS; i++) {
        double move = -surrogate_slope(kind, margin) * factor / STEPS;
        margin += move * curvature;
        sum += move;
    }
    return sum;
}

static void the_step_is_the_limit_of_many_small_steps(void **state)
{
    (void)state;
    for
        EACH(kind, KINDS)
        {
        for
            EACH(margin, MARGINS)
            {
            for
                EACH(factor, FACTORS)
                {
                for
                    EACH(curvature, CURVATURES)
                    {
                        double limit =
                            many_small_steps(KINDS[kind_at], MARGINS[margin_at], FACTORS[factor_at],
                                             CURVATURES[curvature_at]);
                        double step = surrogate_step(KINDS[kind_at], MARGINS[margin_at],
                                                     FACTORS[factor_at], CURVATURES[curvature_at]);
                        assert_near(step, limit, 2e-3 * (1.0 + limit));
                    }
                }
            }
        }
}

/* An example that counts 3 times is the same example learned for 1 and then for 2. */
static void a_step_may_be_taken_in_two_parts(void **state)
{
    (void)state;
    for
        EACH(kind, KINDS)
        {
        for
            EACH(margin, MARGINS)
            {
            for
                EACH(curvature, CURVATURES)
                {
                    enum surrogate kind = KINDS[kind_at];
                    double margin = MARGINS[margin_at];
                    double curvature = CURVATURES[curvature_at];
                    double whole = surrogate_step(kind, margin, 3.0, curvature);
                    double first = surrogate_step(kind, margin, 1.0, curvature);
                    double second =
                        surrogate_step(kind, margin + first * curvature, 2.0, curvature);
                    assert_near(first + second, whole, 1e-9 * (1.0 + whole));
                }
            }
        }
}

static void a_small_step_goes_along_the_gradient(void **state)
{
    (void)state;
    const double factor = 1e-6;
    for
        EACH(kind, KINDS)
        {
        for
            EACH(margin, MARGINS)
            {
                double step = surrogate_step(KINDS[kind_at], MARGINS[margin_at], factor, 0.3);
                assert_near(step / factor, -surrogate_slope(KINDS[kind_at], MARGINS[margin_at]),
                            1e-5);
            }
        }
}

static void the_steps_by_hand(void **state)
{
    (void)state;
    /* m = -1, h = 1, D = .5. Hinge: min(1, 2/.5). Squared hinge: 2·(1 - e^-1)/.5. */
    assert_near(surrogate_step(SURROGATE_HINGE, -1.0, 1.0, 0.5), 1.0, 1e-12);
    assert_near(surrogate_step(SURROGATE_HINGE, -1.0, 9.0, 0.5), 4.0, 1e-12);
    assert_near(surrogate_step(SURROGATE_SQUARED_HINGE, -1.0, 1.0, 0.5), 2.528482235314, 1e-12);
    /* Logistic, m = 0, D = 1, h = z + e^z - 1 with z = 1: h = e, so that α = 1. */
    assert_near(surrogate_step(SURROGATE_LOGISTIC, 0.0, 2.718281828459045, 1.0), 1.0, 1e-12);
}

static void the_logistic_step_solves_its_equation(void **state)
{
    (void)state;
    const double margins[] = {-40.0, -3.0, 0.0, 2.0, 12.0};
    for
        EACH(margin, margins)
        {
        for
            EACH(factor, FACTORS)
            {
            for
                EACH(curvature, CURVATURES)
                {
                    double margin = margins[margin_at];
                    double total = FACTORS[factor_at] * CURVATURES[curvature_at];
                    double moved = CURVATURES[curvature_at] *
                                   surrogate_step(SURROGATE_LOGISTIC, margin, FACTORS[factor_at],
                                                  CURVATURES[curvature_at]);
                    double goal = total + exp(margin);
                    assert_near(moved + exp(margin + moved), goal, 1e-10 * (1.0 + goal));
                    assert_true(moved > 0.0);
                }
            }
        }
}

static void no_factor_carries_the_hinges_beyond_their_goal(void **state)
{
    (void)state;
    for
        EACH(margin, MARGINS)
        {
            double margin = MARGINS[margin_at];
            double goal = margin < 1.0 ? 1.0 : margin;
            double moved = 0.3 * surrogate_step(SURROGATE_HINGE, margin, 1e9, 0.3);
            double squared = 0.3 * surrogate_step(SURROGATE_SQUARED_HINGE, margin, 1e9, 0.3);
            assert_near(margin + moved, goal, 1e-12);
            assert_near(margin + squared, goal, 1e-12);
        }
}

static void without_a_loss_there_is_no_step(void **state)
{
    (void)state;
    assert_near(surrogate_step(SURROGATE_HINGE, 1.0, 7.0, 0.3), 0.0, 0.0);
    assert_near(surrogate_step(SURROGATE_SQUARED_HINGE, 1.5, 7.0, 0.3), 0.0, 0.0);
    assert_near(surrogate_step(SURROGATE_LOGISTIC, 40.0, 7.0, 0.3), 0.0, 0.0);
}

/* --- the correction for missing tags: Natarajan et al., NeurIPS 2013 ----------------------------
 */

static void a_given_pair_counts_for_one_three_or_seven(void **state)
{
    (void)state;
    assert_near(surrogate_given_factor(1.0), 1.0, 0.0);
    assert_near(surrogate_given_factor(0.5), 3.0, 0.0);
    assert_near(surrogate_given_factor(0.25), 7.0, 0.0);
}

/* 0-1 loss of a score as an answer to y. */
static double zero_one(double score, bool y)
{
    return (score > 0.0) == y ? 0.0 : 1.0;
}

/* E over y of the loss that the learner counts, given what is true: P(y=1 | y*=1) = p, and a tag
 * that does not belong is never given. */
static double expected_counted(double propensity, bool belongs, double loss_given,
                               double loss_not_given)
{
    double chance_given = belongs ? propensity : 0.0;
    return chance_given * surrogate_given_factor(propensity) * loss_given +
           (1.0 - chance_given) * loss_not_given;
}

/*
 * The unbiased loss is ℓ(1)/p + (1 - 1/p)·ℓ(0) where y=1 and ℓ(0) where y=0. For 0-1 loss
 * ℓ(0) = 1 - ℓ(1), so that the first is (2/p - 1)·ℓ(1) + (1 - 1/p): the factor, and a constant that
 * no score changes. With the constant put back, the expectation is the true loss.
 */
static void the_corrected_zero_one_loss_is_unbiased_up_to_a_constant(void **state)
{
    (void)state;
    for
        EACH(p, PROPENSITIES)
        {
            for (int truth = 0; truth < 2; truth++) {
                for (int sign = -1; sign <= 1; sign += 2) {
                    double score = sign;
                    double p = PROPENSITIES[p_at];
                    double constant = (truth ? p : 0.0) * (1.0 - 1.0 / p);
                    double counted = expected_counted(p, truth != 0, zero_one(score, true),
                                                      zero_one(score, false));
                    assert_near(counted + constant, zero_one(score, truth != 0), 1e-12);
                }
            }
        }
}

/* Without the factor the expectation is off: of a tag that belongs, given with p = .5, a wrong
 * answer and a right one would cost the same half. */
static void the_uncorrected_loss_cannot_tell_right_from_wrong_at_one_half(void **state)
{
    (void)state;
    double wrong = 0.5 * zero_one(-1.0, true) + 0.5 * zero_one(-1.0, false);
    double right = 0.5 * zero_one(1.0, true) + 0.5 * zero_one(1.0, false);
    assert_near(wrong, right, 0.0);
    double corrected_wrong =
        expected_counted(0.5, true, zero_one(-1.0, true), zero_one(-1.0, false));
    double corrected_right = expected_counted(0.5, true, zero_one(1.0, true), zero_one(1.0, false));
    assert_near(corrected_wrong - corrected_right, 1.0, 1e-12);
}

/* The logistic loss bounds 0-1 loss in units of ln 2, its value at 0. */
static double in_units(enum surrogate kind, double loss)
{
    return kind == SURROGATE_LOGISTIC ? loss / surrogate_loss(kind, 0.0) : loss;
}

static void the_weighted_surrogate_bounds_the_weighted_zero_one_loss(void **state)
{
    (void)state;
    for
        EACH(kind, KINDS)
        {
        for
            EACH(p, PROPENSITIES)
            {
                for (int hundredths = -300; hundredths <= 300; hundredths += 5) {
                    double score = hundredths / 100.0;
                    enum surrogate kind = KINDS[kind_at];
                    for (int truth = 0; truth < 2; truth++) {
                        double surrogate =
                            expected_counted(PROPENSITIES[p_at], truth != 0,
                                             in_units(kind, surrogate_loss(kind, score)),
                                             in_units(kind, surrogate_loss(kind, -score)));
                        double bounded =
                            expected_counted(PROPENSITIES[p_at], truth != 0, zero_one(score, true),
                                             zero_one(score, false));
                        assert_true(surrogate >= bounded - 1e-12);
                    }
                }
            }
        }
}

/* Which makes it convex in the score: the factor is never below 0, nor below what an ungiven pair
 * counts for. */
static void no_given_pair_counts_less_than_once(void **state)
{
    (void)state;
    for (int hundredths = 1; hundredths <= 100; hundredths++) {
        assert_true(surrogate_given_factor(hundredths / 100.0) >= 1.0);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_margin_of_one_is_no_loss_to_the_hinges),
        cmocka_unit_test(the_losses_of_a_wrong_answer_by_hand),
        cmocka_unit_test(the_logistic_loss_of_a_great_margin_is_finite),
        cmocka_unit_test(the_slope_is_the_finite_difference_of_the_loss),
        cmocka_unit_test(at_the_kink_the_slope_is_zero),
        cmocka_unit_test(the_step_is_the_limit_of_many_small_steps),
        cmocka_unit_test(a_step_may_be_taken_in_two_parts),
        cmocka_unit_test(a_small_step_goes_along_the_gradient),
        cmocka_unit_test(the_steps_by_hand),
        cmocka_unit_test(the_logistic_step_solves_its_equation),
        cmocka_unit_test(no_factor_carries_the_hinges_beyond_their_goal),
        cmocka_unit_test(without_a_loss_there_is_no_step),
        cmocka_unit_test(a_given_pair_counts_for_one_three_or_seven),
        cmocka_unit_test(the_corrected_zero_one_loss_is_unbiased_up_to_a_constant),
        cmocka_unit_test(the_uncorrected_loss_cannot_tell_right_from_wrong_at_one_half),
        cmocka_unit_test(the_weighted_surrogate_bounds_the_weighted_zero_one_loss),
        cmocka_unit_test(no_given_pair_counts_less_than_once),
    };
    return cmocka_run_group_tests_name("surrogate", tests, NULL, NULL);
}
