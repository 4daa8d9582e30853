/* A vocabulary of any size becomes a line of few points that keeps its shape. */
#include "client/tag_curve.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

static void add_many(struct tag_curve *curve, size_t tags)
{
    for (size_t rank = 1; rank <= tags; rank++) {
        tag_curve_add(curve, (double)(tags + 1 - rank), .5);
    }
    tag_curve_end(curve);
}

static void the_first_tags_are_all_points(void **state)
{
    (void)state;
    struct tag_curve curve = {0};
    add_many(&curve, 30);
    assert_int_equal(curve.points, 30);
    for (size_t i = 0; i < curve.points; i++) {
        assert_true(curve.rank[i] == (double)(i + 1));
        assert_true(curve.count[i] == (double)(30 - i));
    }
}

static void later_points_are_three_per_cent_apart(void **state)
{
    (void)state;
    struct tag_curve curve = {0};
    add_many(&curve, 100000);
    assert_in_range(curve.points, 100, 400);
    for (size_t i = 33; i < curve.points; i++) {
        assert_true(curve.rank[i] <= curve.rank[i - 1] * 1.03 + 1);
    }
}

static void the_last_tag_is_a_point(void **state)
{
    (void)state;
    for (size_t tags = 995; tags < 1005; tags++) {
        struct tag_curve curve = {0};
        add_many(&curve, tags);
        assert_true(curve.rank[curve.points - 1] == (double)tags);
        assert_true(curve.count[curve.points - 1] == 1);
    }
}

static void ten_million_tags_have_room(void **state)
{
    (void)state;
    struct tag_curve curve = {0};
    add_many(&curve, 10000000);
    assert_in_range(curve.points, 300, TAG_CURVE_POINTS - 1);
}

/* Head from 1,000 uses, torso from 30. */
static void tags_and_uses_are_counted_by_band(void **state)
{
    (void)state;
    static const double COUNTS[] = {5000, 1000, 999, 30, 29, 1, 0, 0};
    struct tag_curve curve = {0};
    for (size_t i = 0; i < sizeof COUNTS / sizeof COUNTS[0]; i++) {
        tag_curve_add(&curve, COUNTS[i], .5);
    }
    tag_curve_end(&curve);
    assert_int_equal(curve.tags, 6);
    assert_int_equal(curve.unused, 2);
    assert_int_equal(curve.points, 6);
    for (size_t band = 0; band < TAG_CURVE_BANDS; band++) {
        assert_int_equal(curve.band_tags[band], 2);
    }
    assert_true(curve.band_uses[0] == 6000 && curve.band_uses[1] == 1029 &&
                curve.band_uses[2] == 30);
}

static void without_tags_there_is_no_point(void **state)
{
    (void)state;
    struct tag_curve curve = {0};
    tag_curve_add(&curve, 0, .1);
    tag_curve_end(&curve);
    assert_int_equal(curve.points, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_first_tags_are_all_points),
        cmocka_unit_test(later_points_are_three_per_cent_apart),
        cmocka_unit_test(the_last_tag_is_a_point),
        cmocka_unit_test(ten_million_tags_have_room),
        cmocka_unit_test(tags_and_uses_are_counted_by_band),
        cmocka_unit_test(without_tags_there_is_no_point),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
