/* Whether the chances shown hold, by ten classes of chance. */
#include "daemon/learner/reliability.h"

#include "tests/unit/near.h"

static int set_up(void **state)
{
    static struct reliability reliability;
    reliability = (struct reliability){0};
    *state = &reliability;
    return 0;
}

static struct reliability_row row_of(const struct reliability *reliability, size_t at)
{
    struct reliability_row rows[RELIABILITY_CLASSES];
    reliability_rows(reliability, rows);
    return rows[at];
}

static void without_rulings_the_mean_chance_is_unknown(void **state)
{
    for (size_t i = 0; i < RELIABILITY_CLASSES; i++) {
        struct reliability_row row = row_of(*state, i);
        assert_int_equal(row.shown, 0);
        assert_int_equal(row.confirmed, 0);
        assert_true(isnan(row.mean_chance));
    }
}

static void the_classes_lie_side_by_side_from_none_to_certain(void **state)
{
    assert_near(row_of(*state, 0).from, 0.0, 0.0);
    assert_near(row_of(*state, 9).to, 1.0, 0.0);
    for (size_t i = 0; i + 1 < RELIABILITY_CLASSES; i++) {
        assert_near(row_of(*state, i).to, row_of(*state, i + 1).from, 0.0);
    }
}

static void a_class_tells_how_many_were_confirmed_and_their_mean_chance(void **state)
{
    reliability_add(*state, 0.72, true);
    reliability_add(*state, 0.78, false);
    reliability_add(*state, 0.75, true);
    struct reliability_row row = row_of(*state, 7);
    assert_int_equal(row.shown, 3);
    assert_int_equal(row.confirmed, 2);
    assert_near(row.mean_chance, 0.75, 1e-15);
    assert_int_equal(row_of(*state, 6).shown, 0);
    assert_int_equal(row_of(*state, 8).shown, 0);
}

/* As it is written down: .3 is 3/10, although 3·.1 is a last bit more. */
static void a_chance_on_a_border_belongs_to_the_class_above(void **state)
{
    static const double borders[] = {0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9};
    for (size_t i = 0; i < 9; i++) {
        reliability_add(*state, borders[i], true);
        assert_int_equal(row_of(*state, i + 1).shown, 1);
    }
    assert_int_equal(row_of(*state, 0).shown, 0);
}

static void the_first_and_the_last_class_hold_both_ends(void **state)
{
    reliability_add(*state, 0.0, false);
    reliability_add(*state, 1.0, true);
    assert_int_equal(row_of(*state, 0).shown, 1);
    assert_int_equal(row_of(*state, 9).shown, 1);
    assert_int_equal(row_of(*state, 9).confirmed, 1);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup(without_rulings_the_mean_chance_is_unknown, set_up),
        cmocka_unit_test_setup(the_classes_lie_side_by_side_from_none_to_certain, set_up),
        cmocka_unit_test_setup(a_class_tells_how_many_were_confirmed_and_their_mean_chance, set_up),
        cmocka_unit_test_setup(a_chance_on_a_border_belongs_to_the_class_above, set_up),
        cmocka_unit_test_setup(the_first_and_the_last_class_hold_both_ends, set_up),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
