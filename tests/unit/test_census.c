#include "daemon/learner/census.h"

#include "tests/unit/near.h"

static void up_to_sixty_three_each_count_has_its_own_bin(void **state)
{
    (void)state;
    for (uint32_t count = 0; count < 64; count++) {
        assert_int_equal(census_bin(count), count);
        assert_near(census_middle(count), count, 0.0);
    }
}

/* 64 to 127 are eight bins of eight counts, 128 to 255 eight of sixteen. */
static void from_there_eight_bins_make_an_octave(void **state)
{
    (void)state;
    assert_int_equal(census_bin(64), 64);
    assert_int_equal(census_bin(71), 64);
    assert_int_equal(census_bin(72), 65);
    assert_int_equal(census_bin(127), 71);
    assert_int_equal(census_bin(128), 72);
    assert_int_equal(census_bin(143), 72);
    assert_int_equal(census_bin(144), 73);
}

/* 64, 65, … 71: the middle is 67.5. 128 … 143: 135.5. */
static void the_middle_is_the_mean_of_the_bins_counts(void **state)
{
    (void)state;
    assert_near(census_middle(64), 67.5, 0.0);
    assert_near(census_middle(72), 135.5, 0.0);
}

static void every_middle_lies_in_its_own_bin(void **state)
{
    (void)state;
    for (size_t bin = 0; bin < CENSUS_BINS; bin++) {
        assert_int_equal(census_bin((uint32_t)census_middle(bin)), bin);
    }
}

static void no_count_is_a_sixteenth_away_from_the_middle_of_its_bin(void **state)
{
    (void)state;
    for (uint32_t count = 64; count < 1U << 31U; count += 1 + count / 50) {
        assert_near(census_middle(census_bin(count)), count, count / 16.0);
    }
}

static void a_greater_count_is_never_in_an_earlier_bin(void **state)
{
    (void)state;
    for (uint32_t count = 1; count < 100000; count++) {
        size_t rise = census_bin(count) - census_bin(count - 1);
        assert_true(rise <= 1);
    }
}

static void the_greatest_count_is_in_the_last_bin(void **state)
{
    (void)state;
    assert_int_equal(census_bin(UINT32_MAX), CENSUS_BINS - 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(up_to_sixty_three_each_count_has_its_own_bin),
        cmocka_unit_test(from_there_eight_bins_make_an_octave),
        cmocka_unit_test(the_middle_is_the_mean_of_the_bins_counts),
        cmocka_unit_test(every_middle_lies_in_its_own_bin),
        cmocka_unit_test(no_count_is_a_sixteenth_away_from_the_middle_of_its_bin),
        cmocka_unit_test(a_greater_count_is_never_in_an_earlier_bin),
        cmocka_unit_test(the_greatest_count_is_in_the_last_bin),
    };
    return cmocka_run_group_tests_name("census", tests, NULL, NULL);
}
