/*
 * The standard errors against the jackknife (Quenouille 1949, Tukey 1958; in Efron & Tibshirani, An
 * Introduction to the Bootstrap, 1993, from memory): with θ_i the figure of all items but the i-th,
 * √((n - 1)/n·Σ(θ_i - mean θ)²). Of a mean it is the same as ours; of a ratio of sums nearly.
 */
#include "daemon/learner/standing.h"

#include "tests/unit/standing_fixture.h"

enum {
    ITEMS = 700,
    BAND = STANDING_TORSO
};

static const double INTERVAL_Z = 1.6448536269514722;

/* Of each item that counts in the band: one ratio's numerator and denominator. */
struct ratio {
    size_t count;
    double over[ITEMS];
    double under[ITEMS];
};

enum ratio_kind {
    WITH_OVER_BASIS,
    WITHOUT_OVER_BASIS,
    WITH_OVER_WITHOUT
};

static void draw_ratio(enum ratio_kind kind, enum ranking_figure figure, struct ratio *ratio)
{
    ratio->count = 0;
    for (uint64_t number = 0; number < ITEMS; number++) {
        struct drawn_item item;
        struct ranking_amounts bases;
        struct ranking_amounts with;
        struct ranking_amounts without;
        draw_item(number, &item);
        if (item.truths[BAND].count == 0) {
            continue;
        }
        ranking_bases(&item.truths[BAND], &bases);
        ranking_amounts(&item.truths[BAND], &item.with[BAND], &with);
        ranking_amounts(&item.truths[BAND], &item.without[BAND], &without);
        ratio->over[ratio->count] = (kind == WITHOUT_OVER_BASIS ? &without : &with)->of[figure];
        ratio->under[ratio->count] = (kind == WITH_OVER_WITHOUT ? &without : &bases)->of[figure];
        ratio->count++;
    }
}

/* Without the item at `left_out`; there is none at `count`. */
static double value_without(const struct ratio *ratio, size_t left_out)
{
    double over = 0.0;
    double under = 0.0;
    for (size_t i = 0; i < ratio->count; i++) {
        if (i != left_out) {
            over += ratio->over[i];
            under += ratio->under[i];
        }
    }
    return over / under;
}

static double jackknife(enum ratio_kind kind, enum ranking_figure figure)
{
    struct ratio ratio;
    double values[ITEMS];
    double mean = 0.0;
    double squares = 0.0;
    draw_ratio(kind, figure, &ratio);
    double n = (double)ratio.count;
    for (size_t i = 0; i < ratio.count; i++) {
        values[i] = value_without(&ratio, i);
        mean += values[i] / n;
    }
    for (size_t i = 0; i < ratio.count; i++) {
        squares += (values[i] - mean) * (values[i] - mean);
    }
    return sqrt((n - 1.0) / n * squares);
}

static struct standing_in_band asked(const struct standing *standing)
{
    struct standing_answer answer;
    standing_ask(standing, 0, &answer);
    return answer.bands[BAND];
}

static int set_up_drawn(void **state)
{
    (void)set_up(state);
    add_drawn(*state, 0, ITEMS);
    return 0;
}

static bool has_varying_basis(enum ranking_figure figure)
{
    return figure >= RANKING_PSP1 && figure <= RANKING_PSNDCG5;
}

static void the_error_of_a_mean_is_the_jackknife_s(void **state)
{
    struct standing_in_band band = asked(*state);
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        if (!has_varying_basis(i)) {
            assert_near(band.with[i].error, jackknife(WITH_OVER_BASIS, i), 1e-10);
            assert_near(band.without[i].error, jackknife(WITHOUT_OVER_BASIS, i), 1e-10);
        }
    }
}

static void the_error_of_a_ratio_is_nearly_the_jackknife_s(void **state)
{
    struct standing_in_band band = asked(*state);
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        if (has_varying_basis(i)) {
            double expected = jackknife(WITH_OVER_BASIS, i);
            assert_near(band.with[i].error, expected, 0.01 * expected);
        }
    }
}

static void the_interval_of_a_gain_is_nearly_the_jackknife_s(void **state)
{
    struct standing_in_band band = asked(*state);
    for (unsigned i = 0; i < RANKING_FIGURES; i++) {
        double reach = INTERVAL_Z * jackknife(WITH_OVER_WITHOUT, i);
        assert_near(band.gain[i].high - band.gain[i].value, reach, 0.02 * reach);
        assert_near(band.gain[i].value - band.gain[i].low, reach, 0.02 * reach);
    }
}

#define test(name) cmocka_unit_test_setup_teardown(name, set_up_drawn, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        test(the_error_of_a_mean_is_the_jackknife_s),
        test(the_error_of_a_ratio_is_nearly_the_jackknife_s),
        test(the_interval_of_a_gain_is_nearly_the_jackknife_s),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
