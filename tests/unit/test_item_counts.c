/* The counts of tags move with filings, revisions and withdrawals. */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static struct item_filed file_tags(struct fixture *fixture, struct names names)
{
    return fixture_file_as(fixture, (struct item_filing){.id = text_of("log/1911-02-03")}, names);
}

static void assert_counts(struct fixture *fixture, const char *name, uint32_t count,
                          uint32_t unprompted)
{
    struct vocabulary_tag tag = fixture_tag(fixture, name);
    if (tag.counts.count != count || tag.counts.unprompted != unprompted) {
        fail_msg("%s: %u, of them unprompted %u, not %u and %u", name, tag.counts.count,
                 tag.counts.unprompted, count, unprompted);
    }
}

static void counts_move_with_a_revision(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/2")},
                          (struct names){.tags = {"fog"}});
    assert_counts(fixture, "fog", 2, 2);
    assert_counts(fixture, "gale", 1, 1);
    (void)file_tags(fixture, (struct names){.tags = {"gale", "wreck"}});
    assert_counts(fixture, "fog", 1, 1);
    assert_counts(fixture, "gale", 1, 1);
    assert_counts(fixture, "wreck", 1, 1);
}

static void counts_move_with_a_withdrawal(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}, .prompted = {"gale"}});
    (void)fixture_withdraw(fixture, "log/1911-02-03");
    assert_counts(fixture, "fog", 0, 0);
    assert_counts(fixture, "gale", 0, 0);
    (void)file_tags(fixture, (struct names){.tags = {"fog"}});
    assert_counts(fixture, "fog", 1, 1);
}

static void a_prompted_tag_stays_out_of_the_unprompted_count(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}, .prompted = {"gale"}});
    assert_counts(fixture, "fog", 1, 1);
    assert_counts(fixture, "gale", 1, 0);
    /* Given again without a prompt, then with one for the other. */
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    assert_counts(fixture, "gale", 1, 1);
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}, .prompted = {"fog"}});
    assert_counts(fixture, "fog", 1, 0);
    assert_counts(fixture, "gale", 1, 1);
}

static void a_declined_tag_is_not_counted(void **state)
{
    struct fixture *fixture = *state;
    (void)file_tags(fixture, (struct names){.tags = {"fog", "gale"}});
    (void)file_tags(fixture, (struct names){.tags = {"fog"}, .declined = {"gale"}});
    assert_counts(fixture, "gale", 0, 0);
    struct item_record record = fixture_record(fixture, 2);
    assert_int_equal(record.declined.count, 1);
    assert_int_equal(record.declined.list[0], fixture_tag(fixture, "gale").number);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(counts_move_with_a_revision),
        TEST(counts_move_with_a_withdrawal),
        TEST(a_prompted_tag_stays_out_of_the_unprompted_count),
        TEST(a_declined_tag_is_not_counted),
    };
    return cmocka_run_group_tests_name("counts of tags", tests, NULL, NULL);
}
