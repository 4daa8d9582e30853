/*
 * A cell's rounding: right in the mean, never stuck, the same for the same noise.
 *
 * The bounds of means: a number rounded by chance to one of two neighbours a step apart has a
 * standard deviation of at most half a step, and the mean of n of them of at most step/(2·√n).
 * Five times that is left in 1 of 1.7 million trials, and these trials are the same in every run.
 */
#include "daemon/learner/cell.h"

#include <stdbool.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    ROUNDINGS = 100000,
    HALF = 1 << (CELL_FRACTION_DROPPED - 1), /* in place of chance: to the nearest */
    FRACTION = 1024                          /* steps of an accumulator to a power of two */
};

/* Five standard deviations of the mean of ROUNDINGS, in steps. */
static double mean_bound(void)
{
    return 5.0 * 0.5 / sqrt((double)ROUNDINGS);
}

/* --- weights ------------------------------------------------------------------------------------
 */

/* In steps; `change` is a part of a step. */
static double mean_moved(int16_t from, double change)
{
    double sum = 0.0;
    for (uint32_t i = 0; i < ROUNDINGS; i++) {
        sum += cell_move_weight(from, (float)change * CELL_STEP, cell_noise(i, 3, 7));
    }
    return sum / ROUNDINGS;
}

/* A float near `from` has a step of its own, which is added: half of it is 2^-12 at ±2047. */
static void a_move_of_a_weight_is_right_in_the_mean(void **state)
{
    (void)state;
    static const double changes[] = {0.25, -0.25, 0.01, -0.01, 0.5, 0.99, 3.7, -3.7};
    static const int16_t weights[] = {0, 1, -1, 700, -700, 2047, -2047};
    for (size_t i = 0; i < sizeof changes / sizeof *changes; i++) {
        for (size_t k = 0; k < sizeof weights / sizeof *weights; k++) {
            assert_near(mean_moved(weights[k], changes[i]), weights[k] + changes[i],
                        mean_bound() + 0x1p-12);
        }
    }
}

static void a_move_ends_on_one_of_the_two_neighbours(void **state)
{
    (void)state;
    int ups = 0;
    for (uint32_t i = 0; i < 1000; i++) {
        int16_t moved = cell_move_weight(10, 2.5F * CELL_STEP, cell_noise(i, 0, 0));
        assert_true(moved == 12 || moved == 13);
        ups += moved == 13;
    }
    assert_true(ups > 400 && ups < 600);
}

static void a_move_of_whole_steps_needs_no_chance(void **state)
{
    (void)state;
    assert_int_equal(cell_move_weight(10, 5.0F * CELL_STEP, 0), 15);
    assert_int_equal(cell_move_weight(10, 5.0F * CELL_STEP, UINT64_MAX >> 9U), 15);
    assert_int_equal(cell_move_weight(10, -15.0F * CELL_STEP, UINT64_MAX >> 9U), -5);
}

/* A million times 1/1000 of a step is 1000 steps; the standard deviation of each is
 * √(.001·.999) = .0316, of a million of them 31.6. To the nearest, it would be 0. */
static void a_million_small_moves_of_a_weight_arrive(void **state)
{
    (void)state;
    int16_t weight = 0;
    int16_t nearest = 0;
    for (uint32_t i = 0; i < 1000000; i++) {
        weight = cell_move_weight(weight, 0.001F * CELL_STEP, cell_noise(i, 11, 2));
        nearest = cell_move_weight(nearest, 0.001F * CELL_STEP, (uint64_t)1 << 55U);
    }
    assert_near(weight, 1000.0, 5.0 * 31.6);
    assert_int_equal(nearest, 0);
}

static void a_weight_ends_at_sixteen_on_either_side(void **state)
{
    (void)state;
    assert_int_equal(cell_move_weight(0, 16.5F, 0), CELL_MOST_WEIGHT);
    assert_int_equal(cell_move_weight(0, -16.5F, 0), -CELL_MOST_WEIGHT);
    assert_int_equal(cell_move_weight(CELL_MOST_WEIGHT, 1e30F, UINT64_MAX), CELL_MOST_WEIGHT);
    assert_int_equal(cell_move_weight(-CELL_MOST_WEIGHT, -1e30F, 0), -CELL_MOST_WEIGHT);
    assert_int_equal(cell_move_weight(CELL_MOST_WEIGHT, -CELL_STEP, 0), CELL_MOST_WEIGHT - 1);
    assert_near(CELL_MOST_WEIGHT * (double)CELL_STEP, 16.0, (double)CELL_STEP);
}

/* --- accumulators -------------------------------------------------------------------------------
 */

static double round_accumulator(double value, uint64_t noise)
{
    return (double)cell_accumulator(cell_of(0, cell_code_accumulator((float)value, noise)));
}

/* The step of the numbers from 2^k to 2^(k+1) is 2^k/1024. */
static double accumulator_step(double value)
{
    return exp2(floor(log2(value))) / FRACTION;
}

static void an_accumulator_is_right_in_the_mean(void **state)
{
    (void)state;
    static const double values[] = {0.1,   0.12499, 0.3,    1.0, 1.9995,
                                    31.97, 777.77,  2047.4, 1e6, 1e12};
    for (size_t i = 0; i < sizeof values / sizeof *values; i++) {
        double value = (double)(float)values[i];
        double sum = 0.0;
        for (uint32_t k = 0; k < ROUNDINGS; k++) {
            sum += round_accumulator(value, cell_noise(k, 5, 1)) - value;
        }
        assert_near(sum / ROUNDINGS, 0.0, mean_bound() * accumulator_step(value));
    }
}

static void an_accumulator_is_never_off_by_a_step(void **state)
{
    (void)state;
    struct repeatable random = {5};
    for (uint32_t i = 0; i < ROUNDINGS; i++) {
        double value = (double)(float)exp2(40.0 * repeatable_share(&random) - 3.0);
        double rounded = round_accumulator(value, repeatable_next(&random));
        assert_true(fabs(rounded - value) < accumulator_step(value));
    }
}

/* Each of 1,024 codes to a power of two is a number of its own: it comes back as it is. */
static void what_a_cell_can_say_comes_back_whatever_the_chance(void **state)
{
    (void)state;
    for (uint32_t code = 0; code < UINT16_MAX; code++) {
        float value = cell_accumulator(cell_of(0, (uint16_t)code));
        assert_int_equal(cell_code_accumulator(value, 0), code);
        assert_int_equal(cell_code_accumulator(value, UINT64_MAX), code);
    }
}

/* .1 + 200,000 times .01. */
static double add_small_parts(bool by_chance)
{
    uint32_t cell = cell_of(0, cell_code_accumulator(CELL_FIRST_ACCUMULATOR, HALF));
    for (uint32_t i = 0; i < 200000; i++) {
        uint64_t noise = by_chance ? cell_noise(i, 1, 1) : HALF;
        cell = cell_of(0, cell_code_accumulator(cell_accumulator(cell) + 0.01F, noise));
    }
    return (double)cell_accumulator(cell);
}

/*
 * Ten bits of fraction to the nearest, which is what a half float has, stall at 32: from there on a
 * step is 1/32, and .01 is less than half of it. By chance they arrive at 2000.1. The step is at
 * most 1, so an addition's variance at most .01·1, that of all of them 2000 and the standard
 * deviation 44.7.
 */
static void small_parts_of_an_accumulator_arrive_where_half_floats_stall(void **state)
{
    (void)state;
    assert_near(add_small_parts(false), 32.0, 0.0);
    assert_near(add_small_parts(true), 2000.1, 5.0 * 44.7);
}

/* A million times 1 to 10^6: the step at most 512, the variance of all at most 512·10^6, the
 * standard deviation 22,627. */
static void a_million_parts_of_an_accumulator_arrive(void **state)
{
    (void)state;
    float value = CELL_FIRST_ACCUMULATOR;
    for (uint32_t i = 0; i < 1000000; i++) {
        value = (float)round_accumulator((double)value + 1.0, cell_noise(i, 8, 4));
    }
    assert_near((double)value, 1e6, 5.0 * 22627.0);
}

/* 64 powers of two from 2^-4 on: the last number is 2^60 less a step of 2^49. */
static void an_accumulator_ends_at_the_largest_that_a_cell_can_say(void **state)
{
    (void)state;
    double largest = 0x1p60 - 0x1p49;
    assert_near((double)cell_accumulator(cell_of(0, UINT16_MAX)), largest, 0.0);
    assert_near(round_accumulator(0x1p60, 0), largest, 0.0);
    assert_near(round_accumulator(largest, UINT64_MAX), largest, 0.0);
    assert_near(round_accumulator(1e30, UINT64_MAX), largest, 0.0);
    assert_near(round_accumulator((double)INFINITY, UINT64_MAX), largest, 0.0);
}

/* --- the cell -----------------------------------------------------------------------------------
 */

static void a_cell_gives_back_both_of_its_numbers(void **state)
{
    (void)state;
    for (int32_t weight = -CELL_MOST_WEIGHT; weight <= CELL_MOST_WEIGHT; weight += 331) {
        uint16_t accumulator = (uint16_t)(weight * 7);
        uint32_t cell = cell_of((int16_t)weight, accumulator);
        assert_int_equal(cell_weight(cell), weight);
        assert_int_equal(cell_accumulator_code(cell), accumulator);
    }
}

/* An accumulator never falls below .1, whose code is 614 or 615: (.1·16 - 1)·1024 = 614.4. */
static void no_weight_that_is_there_is_coded_as_none(void **state)
{
    (void)state;
    assert_int_equal(cell_code_accumulator(CELL_FIRST_ACCUMULATOR, 0), 614);
    assert_int_equal(cell_code_accumulator(CELL_FIRST_ACCUMULATOR, UINT64_MAX), 615);
    assert_int_not_equal(cell_of(0, 614), 0);
    assert_int_equal(cell_of(0, 0), 0);
}

/* --- noise --------------------------------------------------------------------------------------
 */

static void the_same_change_has_the_same_bits(void **state)
{
    (void)state;
    uint64_t noise = cell_noise(12, 34, 56);
    assert_true(noise == cell_noise(12, 34, 56));
    assert_true(noise != cell_noise(13, 34, 56));
    assert_true(noise != cell_noise(12, 35, 56));
    assert_true(noise != cell_noise(12, 34, 57));
    assert_true(cell_noise(12, 34, 56) != cell_noise(12, 56, 34));
}

/* The two parts of noise that cells use, each as a share of 1 less its mean. */
static double weight_share(uint64_t noise)
{
    return (double)((noise >> 32U) & 0xFFFFFFU) * 0x1p-24 - 0.5;
}

static double accumulator_share(uint64_t noise)
{
    return (double)(noise & 0x1FFFU) * 0x1p-13 - 0.5;
}

/* A correlation of n pairs of independent numbers has a standard deviation of 1/√n; of shares of
 * 1 the variance is 1/12. */
static void assert_uncorrelated(double products, double count)
{
    assert_near(12.0 * products / count, 0.0, 5.0 / sqrt(count));
}

/* Noise of change, word and tag against that of their neighbours so far away. */
static void check_neighbours(uint64_t change, uint32_t word, uint32_t tag)
{
    double weights = 0.0;
    double accumulators = 0.0;
    for (uint32_t i = 0; i < ROUNDINGS; i++) {
        uint64_t here = cell_noise(i, i / 7, i % 50);
        uint64_t there = cell_noise(i + change, i / 7 + word, i % 50 + tag);
        weights += weight_share(here) * weight_share(there);
        accumulators += accumulator_share(here) * accumulator_share(there);
    }
    assert_uncorrelated(weights, ROUNDINGS);
    assert_uncorrelated(accumulators, ROUNDINGS);
}

static void noise_of_neighbours_is_uncorrelated(void **state)
{
    (void)state;
    check_neighbours(1, 0, 0);
    check_neighbours(2, 0, 0); /* the same lane of the next change */
    check_neighbours(0, 1, 0);
    check_neighbours(0, 0, 1);
    check_neighbours(1, 1, 1);
    check_neighbours(1000, 0, 0);
}

static void the_two_parts_of_noise_are_uncorrelated(void **state)
{
    (void)state;
    double products = 0.0;
    for (uint32_t i = 0; i < ROUNDINGS; i++) {
        uint64_t noise = cell_noise(i, 2, 3);
        products += weight_share(noise) * accumulator_share(noise);
    }
    assert_uncorrelated(products, ROUNDINGS);
}

/* The variance of a share of 1 is 1/12, of its square 1/180; the mean's bound as above. */
static void check_moments(uint64_t change, uint32_t word, uint32_t tag)
{
    double sums[] = {0.0, 0.0};
    double squares[] = {0.0, 0.0};
    for (uint32_t i = 0; i < ROUNDINGS; i++) {
        uint64_t noise = cell_noise(i * change, i * word, i * tag);
        const double shares[] = {weight_share(noise), accumulator_share(noise)};
        for (size_t k = 0; k < 2; k++) {
            sums[k] += shares[k];
            squares[k] += shares[k] * shares[k];
        }
    }
    for (size_t k = 0; k < 2; k++) {
        assert_near(sums[k] / ROUNDINGS, 0.0, 5.0 * sqrt(1.0 / 12.0 / ROUNDINGS) + 0x1p-14);
        assert_near(squares[k] / ROUNDINGS, 1.0 / 12.0, 5.0 * sqrt(1.0 / 180.0 / ROUNDINGS));
    }
}

static void noise_is_spread_evenly_over_changes_and_words_and_tags(void **state)
{
    (void)state;
    check_moments(1, 0, 0);
    check_moments(0, 1, 0);
    check_moments(0, 0, 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_move_of_a_weight_is_right_in_the_mean),
        cmocka_unit_test(a_move_ends_on_one_of_the_two_neighbours),
        cmocka_unit_test(a_move_of_whole_steps_needs_no_chance),
        cmocka_unit_test(a_million_small_moves_of_a_weight_arrive),
        cmocka_unit_test(a_weight_ends_at_sixteen_on_either_side),
        cmocka_unit_test(an_accumulator_is_right_in_the_mean),
        cmocka_unit_test(an_accumulator_is_never_off_by_a_step),
        cmocka_unit_test(what_a_cell_can_say_comes_back_whatever_the_chance),
        cmocka_unit_test(small_parts_of_an_accumulator_arrive_where_half_floats_stall),
        cmocka_unit_test(a_million_parts_of_an_accumulator_arrive),
        cmocka_unit_test(an_accumulator_ends_at_the_largest_that_a_cell_can_say),
        cmocka_unit_test(a_cell_gives_back_both_of_its_numbers),
        cmocka_unit_test(no_weight_that_is_there_is_coded_as_none),
        cmocka_unit_test(the_same_change_has_the_same_bits),
        cmocka_unit_test(noise_of_neighbours_is_uncorrelated),
        cmocka_unit_test(the_two_parts_of_noise_are_uncorrelated),
        cmocka_unit_test(noise_is_spread_evenly_over_changes_and_words_and_tags),
    };
    return cmocka_run_group_tests_name("cell", tests, NULL, NULL);
}
