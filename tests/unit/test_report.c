/* The page for a metadata manager, from answers as the daemon gives them. */
#include "client/report.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/jsons.h"

struct fixture {
    json_t *state;
    json_t *completeness;
    json_t *standing;
    json_t *worklist;
    struct report report;
    char *page;
    size_t length;
};

#define X(share, low, high, given, missing)                                                        \
    "'share':" share ",'low':" low ",'high':" high ",'given':" given ",'missing':" missing         \
    ",'from':'both'}"

static const char STATE[] =
    "{'version':'9.1','items':95322,'tags':20472,'words':61000,'weights':2100345,'seq':95400,"
    "'learned':95390}";

static const char COMPLETENESS[] = "{'overall':{" X("0.73", "0.7", "0.76", "248120", "92237.0") //
    ",'bands':{'head':{" X("0.9", "0.85", "0.95", "1800", "200.0")                              //
    ",'torso':{" X("0.6", "0.5", "0.7", "1200", "800.0")                                        //
    ",'tail':{" X("0.4", "0.3", "0.5", "40", "60.0")                                            //
    "},'tags':[{'tag':'wrecks'," X("0.5", "0.25", "0.75", "40", "40.0")                         //
    "],'checks':{'random':20,'picked':3},'wrong':{'share':0.02,'low':0.01,'high':0.04,'wrong':3,"
    "'seen':150},'second':null,'curve':{'a':0.55,'b':1.5,'fitted':false,'trials':87}}";

static const char STANDING[] =
    "{'items':100,'bands':{'all':{'with':{},'without':null,'gain':null}},'reliability':[{'from':0.2"
    ",'to':0.4,'shown':40,'mean_chance':0.3,'confirmed':10}],'history':[{'items':50,'with':{'P@1':"
    "0.5},'without':null},{'items':50,'with':{'P@1':0.6,'R@10':null},'without':{'P@1':0.55}}]}";

static const char WORKLIST[] =
    "{'items':[{'id':'log/7','title':'Fog at noon','gaps':[{'tag':'tide','chance':0.75}],"
    "'expected':0.75,'running':0.75}],'next':null}";

static const char NOTHING_GIVEN[] =
    "{'overall':{'share':null,'low':null,'high':null,'given':0,'missing':0,'from':'curve'},'bands':"
    "{"
    "'head':{'share':null,'low':null,'high':null,'given':0,'missing':0,'from':'curve'},'torso':{"
    "'share':null,'low':null,'high':null,'given':0,'missing':0,'from':'curve'},'tail':{'share':null"
    ",'low':null,'high':null,'given':0,'missing':0,'from':'curve'}},'tags':[],'checks':{'random':0,"
    "'picked':0},'wrong':null,'second':null,'curve':null}";

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){.state = json_of(STATE),
                               .completeness = json_of(COMPLETENESS),
                               .standing = json_of(STANDING),
                               .worklist = json_of(WORKLIST)};
    tag_curve_add(&fixture.report.curve, 1200, .9);
    tag_curve_add(&fixture.report.curve, 40, .6);
    tag_curve_add(&fixture.report.curve, 2, .2);
    tag_curve_end(&fixture.report.curve);
    fixture.report.made_at = 1935525600; /* 2031-05-02T22:00:00Z: date -u -d @1935525600 */
    *state = &fixture;
    return 0;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    json_decref(fixture->state);
    json_decref(fixture->completeness);
    json_decref(fixture->standing);
    json_decref(fixture->worklist);
    free(fixture->page);
    return 0;
}

/* Puts another answer in the place of one. */
static void replace(json_t **answer, const char *text)
{
    json_decref(*answer);
    *answer = json_of(text);
}

static const char *write_page(struct fixture *fixture)
{
    fixture->report.state = fixture->state;
    fixture->report.completeness = fixture->completeness;
    fixture->report.standing = fixture->standing;
    fixture->report.worklist = fixture->worklist;
    assert_int_equal(report_write(&fixture->report, &fixture->page, &fixture->length), 0);
    assert_int_equal(strlen(fixture->page), fixture->length);
    return fixture->page;
}

static size_t times_in(const char *page, const char *part)
{
    size_t count = 0;
    for (const char *at = strstr(page, part); at; at = strstr(at + 1, part)) {
        count++;
    }
    return count;
}

static void assert_in(const char *page, const char *part)
{
    if (!strstr(page, part)) {
        fail_msg("not on the page: %s", part);
    }
}

static void the_page_begins_with_the_share_on_record(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "<p class=\"lead\">73 % of the tags that belong to 95,322 items are on record; "
                    "about 92,000 are missing.</p>");
}

static void the_page_has_its_date_and_the_totals_of_the_daemon(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "2 May 2031, 22:00 UTC");
    assert_in(page, "95,322 items, 20,472 tags, 61,000 words, 2,100,345 weights, and has learned "
                    "up to change 95,390 of 95,400. Written by undertag from undertagd 9.1.");
}

static void the_page_says_that_an_editor_decides(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "an editor decides.");
    assert_in(page, "need a qualified eye");
}

static void bands_have_their_range_beside_their_share(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "Tail<small>given fewer than 30 times</small></td><td class=\"n\">40</td>"
                    "<td class=\"n\">60</td><td class=\"n\">40 %</td><td class=\"n soft\">30 % to "
                    "50 %</td>");
    assert_in(page, "of 150 tags on randomly checked items, 3 did not belong (2.0 %, between 1.0 % "
                    "and 4.0 %)");
}

static void proposals_that_were_ruled_on_are_dots_with_their_number(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "Proposals that editors ruled on: 40.");
    assert_int_equal(times_in(page, "<circle"), 1);
}

static void the_worklist_says_what_its_first_items_should_give(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "should give about 0.8 missing tags.");
    assert_in(page, "log/7<small>Fog at noon</small>");
    assert_in(page, "tide <b>75 %</b>");
}

static void text_from_outside_is_escaped_wherever_it_stands(void **state)
{
    struct fixture *fixture = *state;
    const char *const evil = "<script>x</script>\"&'";
    json_t *tag = json_array_get(json_object_get(fixture->completeness, "tags"), 0);
    json_t *item = json_array_get(json_object_get(fixture->worklist, "items"), 0);
    json_t *gap = json_array_get(json_object_get(item, "gaps"), 0);
    assert_int_equal(json_object_set_new(tag, "tag", json_string(evil)), 0);
    assert_int_equal(json_object_set_new(item, "id", json_string(evil)), 0);
    assert_int_equal(json_object_set_new(item, "title", json_string(evil)), 0);
    assert_int_equal(json_object_set_new(gap, "tag", json_string(evil)), 0);
    assert_int_equal(json_object_set_new(fixture->state, "version", json_string(evil)), 0);
    const char *page = write_page(fixture);
    assert_int_equal(times_in(page, "<script"), 0);
    assert_int_equal(times_in(page, "&lt;script&gt;x&lt;/script&gt;&quot;&amp;&#39;"), 5);
}

static void the_page_needs_nothing_from_elsewhere(void **state)
{
    const char *page = write_page(*state);
    static const char *const NEVER[] = {"<script", "<link", "<img",    "<iframe", "http:",
                                        "https:",  "url(",  "@import", " src=",   " href="};
    for (size_t i = 0; i < sizeof NEVER / sizeof NEVER[0]; i++) {
        assert_int_equal(times_in(page, NEVER[i]), 0);
    }
    assert_in(page, "default-src 'none'");
}

static void the_page_is_made_for_light_dark_and_print(void **state)
{
    const char *page = write_page(*state);
    assert_in(page, "prefers-color-scheme:dark");
    assert_in(page, "@media print");
}

static void what_is_opened_is_closed(void **state)
{
    const char *page = write_page(*state);
    static const char *const PAIRS[][2] = {{"<section", "</section>"},
                                           {"<div", "</div>"},
                                           {"<table", "</table>"},
                                           {"<tr", "</tr>"},
                                           {"<svg", "</svg>"},
                                           {"<text", "</text>"},
                                           {"<p>", "</p>"},
                                           {"<small", "</small>"},
                                           {"<main", "</main>"}};
    for (size_t i = 0; i < sizeof PAIRS / sizeof PAIRS[0]; i++) {
        size_t opened = times_in(page, PAIRS[i][0]);
        if (strcmp(PAIRS[i][0], "<p>") == 0) {
            opened += times_in(page, "<p class");
        }
        assert_true(opened > 0);
        assert_int_equal(opened, times_in(page, PAIRS[i][1]));
    }
}

static void an_empty_desk_gives_a_page_that_says_so(void **state)
{
    struct fixture *fixture = *state;
    replace(&fixture->state,
            "{'version':'9.1','items':0,'tags':0,'words':0,'weights':0,'seq':0,'learned':0}");
    replace(&fixture->completeness, NOTHING_GIVEN);
    replace(&fixture->standing, "{'items':0,'bands':{'all':{'with':{},'without':null,'gain':null}},"
                                "'reliability':[],'history':[]}");
    replace(&fixture->worklist, "{'items':[]}");
    fixture->report.curve = (struct tag_curve){0};
    const char *page = write_page(fixture);
    assert_in(page, "Nothing has been filed yet.");
    assert_in(page, "There are no tags to show yet.");
    assert_in(page, "No tag has been given yet.");
    assert_in(page, "No figures yet");
    assert_in(page, "No proposal has been ruled on yet.");
    assert_in(page, "The worklist is empty");
    assert_int_equal(times_in(page, "<svg"), 0);
}

static void figures_that_are_not_known_are_never_written_as_numbers(void **state)
{
    struct fixture *fixture = *state;
    replace(&fixture->completeness, NOTHING_GIVEN);
    replace(&fixture->standing,
            "{'items':50,'bands':{'all':{'with':{},'without':null,'gain':null}},'reliability':[{"
            "'from':0,'to':1,'shown':3,'mean_chance':null,'confirmed':1}],'history':[{'items':0,"
            "'with':{'P@1':null},'without':null}]}");
    const char *page = write_page(fixture);
    const char *body = strstr(page, "<body>");
    assert_int_equal(times_in(body, "nan") + times_in(body, "inf\""), 0);
    assert_int_equal(times_in(body, "-nan") + times_in(body, "inf %"), 0);
    assert_in(page, "and no tag has been given yet.");
}

static void a_single_tag_and_a_single_item_can_be_drawn(void **state)
{
    struct fixture *fixture = *state;
    fixture->report.curve = (struct tag_curve){0};
    tag_curve_add(&fixture->report.curve, 1, .1);
    tag_curve_end(&fixture->report.curve);
    replace(&fixture->standing, "{'items':1,'bands':{'all':{'with':{},'without':null,'gain':null}},"
                                "'reliability':[],'history':[{'items':1,'with':{'P@1':1},'without'"
                                ":null}]}");
    const char *page = write_page(fixture);
    assert_in(page, "<path class=\"curve\" d=\"M64.0");
    assert_int_equal(times_in(page, "nan"), 0);
}

static void lists_are_cut_to_twenty(void **state)
{
    struct fixture *fixture = *state;
    json_t *tags = json_object_get(fixture->completeness, "tags");
    json_t *items = json_object_get(fixture->worklist, "items");
    for (int i = 0; i < 30; i++) {
        assert_int_equal(json_array_append(tags, json_array_get(tags, 0)), 0);
        assert_int_equal(json_array_append(items, json_array_get(items, 0)), 0);
    }
    const char *page = write_page(fixture);
    assert_int_equal(times_in(page, ">wrecks<"), 20);
    assert_int_equal(times_in(page, ">log/7<"), 20);
    assert_in(page, "The first 20 items of the worklist should give");
}

static void a_hundred_thousand_tags_make_no_large_page(void **state)
{
    struct fixture *fixture = *state;
    fixture->report.curve = (struct tag_curve){0};
    for (int rank = 1; rank <= 100000; rank++) {
        tag_curve_add(&fixture->report.curve, 100000.0 / rank, .5);
    }
    tag_curve_end(&fixture->report.curve);
    (void)write_page(fixture);
    assert_in_range(fixture->length, 10000, 300000);
    assert_in(fixture->page, "Tags in use: 100,000.");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_page_begins_with_the_share_on_record),
        TEST(the_page_has_its_date_and_the_totals_of_the_daemon),
        TEST(the_page_says_that_an_editor_decides),
        TEST(bands_have_their_range_beside_their_share),
        TEST(proposals_that_were_ruled_on_are_dots_with_their_number),
        TEST(the_worklist_says_what_its_first_items_should_give),
        TEST(text_from_outside_is_escaped_wherever_it_stands),
        TEST(the_page_needs_nothing_from_elsewhere),
        TEST(the_page_is_made_for_light_dark_and_print),
        TEST(what_is_opened_is_closed),
        TEST(an_empty_desk_gives_a_page_that_says_so),
        TEST(figures_that_are_not_known_are_never_written_as_numbers),
        TEST(a_single_tag_and_a_single_item_can_be_drawn),
        TEST(lists_are_cut_to_twenty),
        TEST(a_hundred_thousand_tags_make_no_large_page),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
