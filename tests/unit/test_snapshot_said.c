/*
 * What was said of an item, said anew in an empty store, makes the same item and the same counts:
 * for histories by hand, and for any that chance comes up with.
 */
#include "daemon/snapshot/snapshot_said.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/repeatable.h"
#include "tests/unit/twins_fixture.h"

static const char ID[] = "log/1911-02-03";

/* The line says so (' for "), and what it makes is the same. */
static void assert_said(struct twins *twins, const char *expected)
{
    char lines[TWINS_TEXT_BYTES];
    make_anew(twins);
    assert_true(strlen(twins->lines) < sizeof lines);
    strcpy(lines, twins->lines);
    for (char *at = lines; *at; at++) {
        *at = (char)(*at == '"' ? '\'' : *at);
    }
    assert_string_equal(lines, expected);
    assert_same_item(twins, ID);
    assert_same_counts(twins);
}

/* --- histories by hand --- */

static void file(struct twins *twins, const char *text, struct names names)
{
    (void)fixture_file_as(twins->one,
                          (struct item_filing){.id = text_of(ID), .text = text_of(text)}, names);
}

static void rule(struct twins *twins, struct rulings rulings)
{
    assert_int_equal(fixture_rule(twins->one, said_by("e.ditor", ID), rulings).result, STORE_OK);
}

static void check(struct twins *twins, struct names names)
{
    assert_int_equal(fixture_check(twins->one, said_by("c.lerk", ID), true, names).result,
                     STORE_OK);
}

#define CHECKED(tags)                                                                              \
    "{'method':'item.check','params':{'tags':[" tags "],'drawn':'random','checker':'c.lerk'}}"

static void a_filing_is_said_as_it_was_filed(void **state)
{
    struct twins *twins = *state;
    file(twins, "Fog at noon.", (struct names){.tags = {"fog", "bell"}, .prompted = {"bell"}});
    assert_said(twins, "{'id':'log/1911-02-03','text':'Fog at noon.','tags':['bell','fog'],"
                       "'prompted':['bell']}\n");
}

static void rulings_follow_with_their_editors(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "gale"}});
    rule(twins, (struct rulings){.denied = {"gale"}});
    assert_said(twins, "{'id':'log/1911-02-03','tags':['fog','gale'],'then':["
                       "{'method':'item.rule','params':{'not':['gale'],'editor':'e.ditor'}}]}\n");
}

/* Somebody has used the tag once, and has taken it off again. */
static void a_tag_that_is_named_only_in_a_ruling_is_opened_first(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"ice"}});
    file(twins, "", (struct names){.tags = {"fog"}});
    rule(twins, (struct rulings){.denied = {"ice"}});
    assert_said(twins, "{'id':'log/1911-02-03','tags':['ice'],'then':["
                       "{'method':'item.file','params':{'tags':['fog']}},"
                       "{'method':'item.rule','params':{'not':['ice'],'editor':'e.ditor'}}]}\n");
}

static void a_check_follows_the_filing(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "gale"}});
    check(twins, (struct names){.tags = {"fog"}});
    assert_said(twins,
                "{'id':'log/1911-02-03','tags':['fog','gale'],'then':[" CHECKED("'fog'") "]}\n");
}

/* gale had been ruled out and is found all the same: it was no trial. */
static void a_ruling_that_the_check_has_lifted_is_said_before_it(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "gale"}});
    rule(twins, (struct rulings){.denied = {"gale"}});
    check(twins, (struct names){.tags = {"fog", "gale"}});
    assert_said(twins,
                "{'id':'log/1911-02-03','tags':['fog','gale'],'then':["
                "{'method':'item.rule','params':{'not':['gale']}}," CHECKED("'fog','gale'") "]}\n");
}

/* The check has seen fog alone; bell was in the filing, and is so again. */
static void a_filing_after_the_check_comes_after_one_that_the_check_may_have_seen(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "bell"}});
    check(twins, (struct names){.tags = {"fog"}});
    file(twins, "Ice.", (struct names){.tags = {"fog", "ice"}});
    assert_said(twins,
                "{'id':'log/1911-02-03','text':'Ice.','tags':['bell','fog'],'then':[" CHECKED(
                    "'fog'") ",{'method':'item.file','params':{'text':'Ice.',"
                             "'tags':['fog','ice']}}]}\n");
}

/* The second check saw what the first had left there: it took off fog alone, not ice. */
static void a_check_of_what_an_earlier_one_left_comes_after_that(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "ice"}});
    check(twins, (struct names){.tags = {"fog"}});
    check(twins, (struct names){.tags = {"ice"}});
    make_anew(twins);
    struct item_record record = fixture_item(twins->two, ID);
    assert_names(twins->two, record.check.given, "fog");
    assert_names(twins->two, record.check.extra, "fog");
    assert_int_equal(record.check.seen, 1);
    assert_same_item(twins, ID);
    assert_same_counts(twins);
}

/* To file what is filed already changes nothing, not even that it came after the check. */
static void a_filing_like_the_one_before_the_check_is_said_behind_another(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"fog", "ice"}});
    check(twins, (struct names){.tags = {"fog"}});
    file(twins, "", (struct names){.tags = {"ice"}});
    file(twins, "", (struct names){.tags = {"fog", "ice"}});
    make_anew(twins);
    assert_names(twins->two, fixture_item(twins->two, ID).tags, "fog ice");
    assert_same_item(twins, ID);
    assert_same_counts(twins);
}

/* No item has bell any more; whoever made the check has had it before his eyes. */
static void tags_from_the_day_of_the_check_are_there_before_it(void **state)
{
    struct twins *twins = *state;
    file(twins, "", (struct names){.tags = {"bell"}});
    file(twins, "", (struct names){.tags = {"fog"}});
    check(twins, (struct names){.tags = {"fog"}});
    make_anew(twins);
    assert_int_equal(fixture_item(twins->two, ID).check.vocabulary, 2);
    assert_int_equal(fixture_tag(twins->two, "bell").counts.count, 0);
    assert_same_item(twins, ID);
}

/* --- any history --- */

enum {
    ITEMS = 10
};

static const char *id_of(unsigned number)
{
    static char id[32];
    (void)snprintf(id, sizeof id, "log/%u", number);
    return id;
}

static void choose(struct repeatable *random, double share, const char *names[FIXTURE_TAGS])
{
    size_t count = 0;
    for (size_t i = 0; i < TWINS_TAG_COUNT; i++) {
        if (repeatable_share(random) < share) {
            names[count++] = TWINS_TAGS[i];
        }
    }
}

/* Takes out of a list what is in another. */
static void leave_out(const char *names[FIXTURE_TAGS], const char *const out[FIXTURE_TAGS])
{
    size_t kept = 0;
    for (size_t i = 0; i < FIXTURE_TAGS && names[i]; i++) {
        bool is_out = false;
        for (size_t j = 0; j < FIXTURE_TAGS && out[j]; j++) {
            is_out = is_out || names[i] == out[j];
        }
        if (!is_out) {
            names[kept++] = names[i];
        }
    }
    memset(names + kept, 0, (FIXTURE_TAGS - kept) * sizeof *names);
}

static void file_some(struct fixture *fixture, struct repeatable *random, const char *id)
{
    static const char *const TEXTS[] = {"", "Fog at noon.", "The lamp was lit."};
    static const char *const TAGGERS[] = {"", "keeper", "mate"};
    struct names names = {0};
    choose(random, 0.3, names.tags);
    if (repeatable_below(random, 2) == 0) {
        const char *kept[FIXTURE_TAGS] = {0};
        choose(random, 0.5, kept);
        memcpy(names.prompted, names.tags, sizeof kept);
        leave_out(names.prompted, kept);
        choose(random, 0.2, names.declined);
        leave_out(names.declined, names.tags);
    }
    (void)fixture_file_as(
        fixture,
        (struct item_filing){.id = text_of(id),
                             .text = text_of(TEXTS[repeatable_below(random, 3)]),
                             .tagger = text_of(TAGGERS[repeatable_below(random, 3)])},
        names);
}

/* What is refused, since the item is not there or the tagger is the first, changes nothing. */
static void do_something(struct fixture *fixture, struct repeatable *random)
{
    const char *id = id_of(repeatable_below(random, ITEMS));
    struct names names = {0};
    struct rulings rulings = {0};
    struct item_saying saying = {.id = text_of(id)};
    switch (repeatable_below(random, 8)) {
    case 0:
    case 1:
        file_some(fixture, random, id);
        break;
    case 2:
    case 3:
        saying.who = text_of("e.ditor");
        choose(random, 0.15, rulings.belongs);
        choose(random, 0.15, rulings.denied);
        leave_out(rulings.denied, rulings.belongs);
        (void)fixture_rule(fixture, saying, rulings);
        break;
    case 4:
    case 5:
        saying.who = text_of("c.lerk");
        choose(random, 0.3, names.tags);
        (void)fixture_check(fixture, saying, repeatable_below(random, 2) == 0, names);
        break;
    default:
        saying.who = text_of(repeatable_below(random, 2) == 0 ? "keeper" : "mate");
        choose(random, 0.3, names.tags);
        (void)fixture_tag_again(fixture, saying, "", true, names);
        break;
    }
}

static void any_history_makes_the_same_items_and_counts(void **state)
{
    struct twins *twins = *state;
    struct repeatable random = {1911};
    for (unsigned i = 0; i < ITEMS; i++) { /* with every tag there is: so each may be declined */
        const char *id = id_of(i);
        (void)fixture_file_as(
            twins->one, (struct item_filing){.id = text_of(id)},
            (struct names){.tags = {TWINS_TAGS[0], TWINS_TAGS[1], TWINS_TAGS[2], TWINS_TAGS[3],
                                    TWINS_TAGS[4], TWINS_TAGS[5], TWINS_TAGS[6]}});
    }
    for (int i = 0; i < 200; i++) {
        do_something(twins->one, &random);
    }
    make_anew(twins);
    for (unsigned i = 0; i < ITEMS; i++) {
        assert_same_item(twins, id_of(i));
    }
    assert_same_counts(twins);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, twins_set_up, twins_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_filing_is_said_as_it_was_filed),
        TEST(rulings_follow_with_their_editors),
        TEST(a_tag_that_is_named_only_in_a_ruling_is_opened_first),
        TEST(a_check_follows_the_filing),
        TEST(a_ruling_that_the_check_has_lifted_is_said_before_it),
        TEST(a_filing_after_the_check_comes_after_one_that_the_check_may_have_seen),
        TEST(a_check_of_what_an_earlier_one_left_comes_after_that),
        TEST(a_filing_like_the_one_before_the_check_is_said_behind_another),
        TEST(tags_from_the_day_of_the_check_are_there_before_it),
        TEST(any_history_makes_the_same_items_and_counts),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
