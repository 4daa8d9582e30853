/*
 * The desk's commands, as a person runs them: rule, check, sample, worklist, completeness,
 * standing, and what they leave on an item.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/unit/client_run.h"

/* Every request is answered with the test's own result. */
static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    fake_daemon_answer(request, out, "\"result\":%s", fixture->result);
}

static int set_up(void **state)
{
    return client_run_start(state, answer);
}

/* --- rulings -------------------------------------------------------------------------------- */

static void a_ruling_says_what_belongs_and_what_does_not(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"seq\":1042}";
    assert_int_equal(run(fixture, "", "rule", "log/7", "--belongs", "wrecks", "--belongs=salvage",
                         "--not", "fog", "--editor", "east", NULL),
                     0);
    assert_string_equal(fixture->out, "ruled on      log/7 (change 1,042)\n"
                                      "belongs       wrecks\n"
                                      "              salvage\n"
                                      "does not      fog\n");
    assert_string_equal(asked(fixture),
                        "item.rule {\"id\":\"log/7\",\"belongs\":[\"wrecks\",\"salvage\"],"
                        "\"not\":[\"fog\"],\"editor\":\"east\"}\n");
}

static void a_ruling_on_no_tag_is_not_sent(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "rule", "log/7", NULL), 64);
    assert_string_equal(fixture->err, "undertag: rule needs --belongs TAG or --not TAG; see "
                                      "'undertag rule --help'\n");
    assert_string_equal(asked(fixture), "");
}

static void a_ruling_without_its_seq_in_the_answer_is_not_taken_for_done(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{}";
    assert_int_equal(run(fixture, "", "rule", "log/7", "--not", "fog", NULL), 76);
    assert_string_equal(fixture->err, "undertag: the daemon's answer is not one this client knows: "
                                      "/seq is not a number\n");
    assert_string_equal(fixture->out, "");
}

/* --- spot checks ---------------------------------------------------------------------------- */

static void a_check_says_what_was_missing_and_what_was_wrong(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"seq\":9,\"missed\":[\"wrecks\",\"salvage\"],\"extra\":[\"fog\"]}";
    assert_int_equal(run(fixture, "", "check", "log/7", "--tag=wrecks", "--tag=salvage",
                         "--drawn=random", "--checker", "west", NULL),
                     0);
    assert_string_equal(fixture->out, "checked       log/7 (change 9)\n"
                                      "its tags      wrecks\n"
                                      "              salvage\n"
                                      "\n"
                                      "2 tags were missing and are on it now:\n"
                                      "              wrecks\n"
                                      "              salvage\n"
                                      "\n"
                                      "1 tag was wrong and is taken off:\n"
                                      "              fog\n");
    assert_string_equal(asked(fixture),
                        "item.check {\"id\":\"log/7\",\"tags\":[\"wrecks\",\"salvage\"],"
                        "\"drawn\":\"random\",\"checker\":\"west\"}\n");
}

static void an_item_may_turn_out_to_have_no_tag(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"seq\":9,\"missed\":[],\"extra\":[]}";
    assert_int_equal(run(fixture, "", "check", "log/7", NULL), 0);
    assert_string_equal(fixture->out, "checked       log/7 (change 9)\n"
                                      "its tags      none\n"
                                      "\n"
                                      "Nothing was missing and nothing was wrong.\n");
    assert_string_equal(asked(fixture), "item.check {\"id\":\"log/7\",\"tags\":[]}\n");
}

static void a_check_is_drawn_at_random_or_picked(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "check", "log/7", "--drawn=often", NULL), 64);
    assert_string_equal(fixture->err, "undertag: --drawn takes random|picked, not 'often'\n");
    assert_string_equal(asked(fixture), "");
}

static void a_sample_is_one_id_a_line(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":[\"log/7\",\"log/12\"]}";
    assert_int_equal(run(fixture, "", "sample", "2", "--seed", "41", NULL), 0);
    assert_string_equal(fixture->out, "log/7\nlog/12\n");
    assert_string_equal(asked(fixture), "desk.sample {\"most\":2,\"seed\":41}\n");
}

static void a_sample_of_nothing_leaves_the_list_empty(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":[]}";
    assert_int_equal(run(fixture, "", "sample", NULL), 0);
    assert_string_equal(fixture->out, "");
    assert_string_equal(fixture->err, "There is no item that has not been checked.\n");
    assert_string_equal(asked(fixture), "desk.sample {}\n");
}

static void a_sample_has_a_size(void **state)
{
    struct fixture *fixture = *state;
    static const char *const SIZES[] = {"0", "-3", "ten", "2x", "1001", "99999999999999999999"};
    for (size_t i = 0; i < sizeof SIZES / sizeof SIZES[0]; i++) {
        assert_int_equal(run(fixture, "", "sample", "--", SIZES[i], NULL), 64);
    }
    assert_string_equal(asked(fixture), "");
}

/* --- the worklist --------------------------------------------------------------------------- */

static const char WORKLIST[] =
    "{\"items\":[{\"id\":\"log/7\",\"title\":\"Fog at noon\",\"gaps\":[{\"tag\":\"wrecks\","
    "\"chance\":0.75},{\"tag\":\"salvage\",\"chance\":0.5},{\"tag\":\"oil\",\"chance\":0.25}],"
    "\"expected\":1.5,\"running\":1.5,\"scored_seq\":80},{\"id\":\"log/9\",\"title\":null,"
    "\"gaps\":[{\"tag\":\"tide\",\"chance\":0.5}],\"expected\":0.5,\"running\":2.0,"
    "\"scored_seq\":90}],\"next\":\"log/9\",\"learned\":90,\"kept\":2}";

static void the_worklist_has_each_gap_with_its_chance_and_the_sums(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = WORKLIST;
    assert_int_equal(run(fixture, "", "worklist", "--most=2", "--floor=0.25", NULL), 0);
    assert_string_equal(fixture->out,
                        "item, and its title  likely missing  chance          expected  in all\n"
                        "log/7                wrecks            0.75  ██████      1.50     1.5\n"
                        "  Fog at noon        salvage           0.50  ████\n"
                        "                     oil               0.25  ██\n"
                        "log/9                tide              0.50  ████        0.50     2.0\n"
                        "\n"
                        "The first 2 items should give about 2 missing tags.\n"
                        "Learned up to change 90; the oldest of these chances is of change 80.\n"
                        "\n"
                        "There are more: --after 'log/9'\n");
    assert_string_equal(asked(fixture), "desk.worklist {\"most\":2,\"floor\":0.25}\n");
}

static void a_worklist_for_a_tag_counts_its_uses(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = WORKLIST;
    assert_int_equal(
        run(fixture, "", "worklist", "--tag", "wrecks", "--after", "log/3", "--most", "2", NULL),
        0);
    assert_non_null(strstr(
        fixture->out, "\nAll items up to here should give about 2 missing uses of 'wrecks'.\n"));
    assert_string_equal(asked(fixture),
                        "desk.worklist {\"most\":2,\"after\":\"log/3\",\"tag\":\"wrecks\"}\n");
}

static void a_worklist_goes_on_where_the_page_before_ended(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = WORKLIST; /* two items a page, whatever is asked */
    assert_int_equal(run(fixture, "", "worklist", "--most=3", NULL), 0);
    assert_string_equal(asked(fixture), "desk.worklist {\"most\":3}\n"
                                        "desk.worklist {\"most\":1,\"after\":\"log/9\"}\n");
}

static void an_empty_worklist_is_said_in_words(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":[],\"next\":null,\"learned\":0,\"kept\":0}";
    assert_int_equal(run(fixture, "", "worklist", NULL), 0);
    assert_string_equal(fixture->out, "No item lacks a tag with a chance of 0.2 or more.\n");
}

static void a_worklist_without_chances_is_not_shown(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":[{\"id\":\"log/7\",\"gaps\":[{\"tag\":\"fog\"}],\"expected\":1,"
                      "\"running\":1}]}";
    assert_int_equal(run(fixture, "", "worklist", NULL), 76);
    assert_non_null(strstr(fixture->err, "/items/0/gaps/0/chance is not a number\n"));
    assert_string_equal(fixture->out, "");
}

/* --- completeness --------------------------------------------------------------------------- */

#define ESTIMATE(share, low, high, given, missing)                                                 \
    "\"share\":" share ",\"low\":" low ",\"high\":" high ",\"given\":" given                       \
    ",\"missing\":" missing ",\"from\":\"both\"}"

static const char COMPLETENESS[] =
    "{\"overall\":{" ESTIMATE("0.75", "0.7", "0.8", "3000", "1000.0")                //
    ",\"bands\":{\"head\":{" ESTIMATE("0.9", "0.85", "0.95", "1800", "200.0")        //
    ",\"torso\":{" ESTIMATE("0.6", "0.5", "0.7", "1200", "800.0")                    //
    ",\"tail\":{" ESTIMATE("null", "null", "null", "0", "0.0")                       //
    "},\"tags\":[{\"tag\":\"wrecks\"," ESTIMATE("0.5", "0.25", "0.75", "40", "40.0") //
    "],\"checks\":{\"random\":20,\"picked\":3},"
    "\"wrong\":{\"share\":0.02,\"low\":0.01,\"high\":0.04,\"wrong\":3,\"seen\":150},"
    "\"second\":{\"items\":30,\"first\":59,\"second\":49,\"both\":29,\"chapman\":{\"true\":99.0,"
    "\"low\":90,\"high\":112},\"found_share\":0.596,\"rolling\":0.537,\"hooper\":0.367},"
    "\"curve\":{\"a\":0.55,\"b\":1.5,\"fitted\":true,\"trials\":87.0},\"learned\":90}";

static void completeness_is_shown_by_band_and_by_tag(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = COMPLETENESS;
    assert_int_equal(run(fixture, "", "completeness", "--most=5", NULL), 0);
    assert_memory_equal(fixture->out, "band   given  missing  on record       between\n", 47);
    assert_non_null(
        strstr(fixture->out, "all    3,000    1,000       0.75  0.70 to 0.80  ██████████████▓░\n"));
    assert_non_null(strstr(fixture->out,
                           "wrecks                  40       40       0.50  0.25 to 0.75  "
                           "█████▓▓▓▓▓░░░░░\n"));
    assert_non_null(strstr(fixture->out, "\nSpot checks: 20 items drawn at random, 3 picked. "));
    assert_string_equal(asked(fixture), "desk.completeness {\"most\":5}\n");
}

static void what_is_not_known_of_a_band_is_a_dash(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = COMPLETENESS;
    assert_int_equal(run(fixture, "", "completeness", NULL), 0);
    assert_non_null(strstr(fixture->out, "tail       0        0          -             -\n"));
}

static void completeness_of_one_tag_leaves_out_the_bands(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = COMPLETENESS;
    assert_int_equal(run(fixture, "", "completeness", "wrecks", NULL), 0);
    assert_memory_equal(fixture->out, "tag     given  missing", 22);
    assert_null(strstr(fixture->out, "torso"));
    assert_string_equal(asked(fixture), "desk.completeness {\"tag\":\"wrecks\"}\n");
}

static void wrong_tags_and_second_taggings_are_said_where_there_are_any(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = COMPLETENESS;
    assert_int_equal(run(fixture, "", "completeness", NULL), 0);
    assert_non_null(strstr(fixture->out, "\nWrong tags: 3 of 150 that stood on randomly checked "
                                         "items, 2.0 % (between 1.0 % and 4.0 %).\n"));
    assert_non_null(strstr(fixture->out, "\nSecond taggings: of 30 items. The first tagger found "
                                         "60 % of the tags"));
    assert_null(strstr(fixture->out, "Chapman")); /* that is for --how */
}

/* 3,000 / (3,000 + 1,000) = 0.75; (59 + 1) x (49 + 1) / (29 + 1) - 1 = 99. */
static void how_explains_with_the_figures_of_the_answer(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = COMPLETENESS;
    assert_int_equal(run(fixture, "", "completeness", "--how", NULL), 0);
    assert_non_null(strstr(fixture->out, "here 3,000 / (3,000 + 1,000) = 0.75."));
    assert_non_null(strstr(fixture->out, "A = 0.55"));
    assert_non_null(strstr(fixture->out, "it was fitted to 87 uses of tags"));
    assert_non_null(strstr(fixture->out, "/ (common + 1) - 1 = 99."));
}

/* Every answer lacks one thing that the tables rest on. */
static void an_answer_with_a_hole_in_it_is_not_shown(void **state)
{
    struct fixture *fixture = *state;
    static const char *const PLACES[] = {"overall", "bands", "tags", "checks"};
    for (size_t i = 0; i < sizeof PLACES / sizeof PLACES[0]; i++) {
        json_t *result = json_loads(COMPLETENESS, 0, NULL);
        assert_int_equal(json_object_del(result, PLACES[i]), 0);
        char *text = json_dumps(result, 0);
        fixture->result = text;
        assert_int_equal(run(fixture, "", "completeness", NULL), 76);
        assert_non_null(strstr(fixture->err, PLACES[i]));
        assert_string_equal(fixture->out, "");
        assert_int_equal(run(fixture, "", "completeness", "--json", NULL), 0); /* as it came */
        free(text);
        json_decref(result);
    }
}

/* --- standing ------------------------------------------------------------------------------- */

static const char STANDING[] =
    "{\"items\":10000,\"bands\":{\"all\":{\"with\":{\"P@1\":{\"value\":0.8821,\"error\":0.0041},"
    "\"PSP@5\":{\"value\":null,\"error\":null}},\"without\":{\"P@1\":{\"value\":0.84,\"error\":"
    "0.004}},\"gain\":{\"P@1\":{\"value\":0.0501,\"low\":0.03,\"high\":0.07,\"wins\":9,"
    "\"losses\":1,\"p\":0.02}}},\"tail\":{\"with\":{\"R@10\":{\"value\":0.4,\"error\":0.02}},"
    "\"without\":null,\"gain\":null}},\"reliability\":[{\"from\":0.2,\"to\":0.4,\"shown\":40,"
    "\"mean_chance\":0.3,\"confirmed\":10},{\"from\":0.4,\"to\":0.6,\"shown\":0,\"mean_chance\":"
    "null,\"confirmed\":0}],\"history\":[]}";

static void figures_have_their_full_names_and_the_gain(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = STANDING;
    assert_int_equal(run(fixture, "", "standing", "--window", "0", NULL), 0);
    assert_non_null(strstr(fixture->out, "Over 10,000 items, each scored before it was learned."));
    assert_non_null(strstr(fixture->out, "precision at 1                    0.882  0.004    0.840  "
                                         "+5.0 %  +3.0 to +7.0\n"));
    assert_string_equal(asked(fixture), "desk.standing {\"window\":0}\n");
}

static void a_figure_that_is_not_known_is_a_dash(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = STANDING;
    assert_int_equal(run(fixture, "", "standing", NULL), 0);
    assert_non_null(strstr(fixture->out, "propensity-scored precision at 5      -      -        -  "
                                         "     -             -\n"));
    assert_non_null(strstr(fixture->out, "recall at 10  0.400  0.020        -     -        -\n"));
}

static void a_band_of_which_nothing_is_known_is_left_out(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":9,\"bands\":{\"all\":{\"with\":{\"P@1\":{\"value\":0.5,\"error\":"
                      "null}}},\"head\":{\"with\":{\"P@1\":{\"value\":null,\"error\":null}}}},"
                      "\"reliability\":[]}";
    assert_int_equal(run(fixture, "", "standing", NULL), 0);
    assert_non_null(strstr(fixture->out, "All tags\n"));
    assert_null(strstr(fixture->out, "Head"));
}

/* 10 of 40 shown with a chance between 0.2 and 0.4 were confirmed: 0.25. */
static void reliability_compares_chances_with_rulings(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = STANDING;
    assert_int_equal(run(fixture, "", "standing", NULL), 0);
    assert_non_null(strstr(fixture->out, "0.20 to 0.40        40         0.30         10   0.25  "
                                         "████\n"));
    assert_non_null(
        strstr(fixture->out, "0.40 to 0.60         0            -          0      -\n"));
}

static void before_the_first_item_there_is_nothing_to_stand_on(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"items\":0,\"bands\":{\"all\":{\"with\":{},\"without\":null,\"gain\":null}"
                      "},\"reliability\":[],\"history\":[]}";
    assert_int_equal(run(fixture, "", "standing", NULL), 0);
    assert_string_equal(fixture->out,
                        "Nothing has been scored yet: figures come with the items that are "
                        "filed.\n\nNo proposal has been ruled on yet.\n");
}

/* --- on the item ---------------------------------------------------------------------------- */

static void show_has_the_proposals_the_check_and_the_second_taggings(void **state)
{
    struct fixture *fixture = *state;
    fixture->result =
        "{\"id\":\"log/"
        "7\",\"seq\":12,\"tags\":[\"fog\"],\"filed\":[\"fog\"],\"prompted\":[\"fog\"],"
        "\"declined\":[\"oil\"],\"belongs\":[],\"not\":[],\"checked\":{\"tags\":[\"fog\",\"tide\"],"
        "\"drawn\":\"random\",\"at\":\"2031-05-04T10:00:00Z\",\"checker\":\"west\"},\"second\":["
        "{\"tagger\":\"north\",\"tags\":[\"tide\"],\"filed_at\":\"2031-05-05T10:00:00Z\"},"
        "{\"tagger\":\"south\",\"tags\":[],\"filed_at\":null}]}";
    assert_int_equal(run(fixture, "", "show", "log/7", NULL), 0);
    assert_string_equal(fixture->out,
                        "id            log/7\n"
                        "stored        change 12\n"
                        "tags          fog\n"
                        "prompted      fog\n"
                        "declined      oil\n"
                        "checked       2031-05-04T10:00:00Z by west, drawn at random\n"
                        "as checked    fog\n"
                        "              tide\n"
                        "tagged again  2031-05-05T10:00:00Z by north\n"
                        "              tide\n"
                        "tagged again  by south, without a tag\n");
}

static void a_second_tagging_is_filed_as_independent(void **state)
{
    struct fixture *fixture = *state;
    fixture->result = "{\"seq\":13,\"was\":\"new\"}";
    assert_int_equal(run(fixture, "", "file", "--id", "log/7", "--tagger", "north", "--tag=tide",
                         "--independent", NULL),
                     0);
    assert_string_equal(asked(fixture), "item.file {\"id\":\"log/7\",\"tagger\":\"north\","
                                        "\"tags\":[\"tide\"],\"independent\":true}\n");
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_ruling_says_what_belongs_and_what_does_not),
        TEST(a_ruling_on_no_tag_is_not_sent),
        TEST(a_ruling_without_its_seq_in_the_answer_is_not_taken_for_done),
        TEST(a_check_says_what_was_missing_and_what_was_wrong),
        TEST(an_item_may_turn_out_to_have_no_tag),
        TEST(a_check_is_drawn_at_random_or_picked),
        TEST(a_sample_is_one_id_a_line),
        TEST(a_sample_of_nothing_leaves_the_list_empty),
        TEST(a_sample_has_a_size),
        TEST(the_worklist_has_each_gap_with_its_chance_and_the_sums),
        TEST(a_worklist_for_a_tag_counts_its_uses),
        TEST(a_worklist_goes_on_where_the_page_before_ended),
        TEST(an_empty_worklist_is_said_in_words),
        TEST(a_worklist_without_chances_is_not_shown),
        TEST(completeness_is_shown_by_band_and_by_tag),
        TEST(what_is_not_known_of_a_band_is_a_dash),
        TEST(completeness_of_one_tag_leaves_out_the_bands),
        TEST(wrong_tags_and_second_taggings_are_said_where_there_are_any),
        TEST(how_explains_with_the_figures_of_the_answer),
        TEST(an_answer_with_a_hole_in_it_is_not_shown),
        TEST(figures_have_their_full_names_and_the_gain),
        TEST(a_figure_that_is_not_known_is_a_dash),
        TEST(a_band_of_which_nothing_is_known_is_left_out),
        TEST(reliability_compares_chances_with_rulings),
        TEST(before_the_first_item_there_is_nothing_to_stand_on),
        TEST(show_has_the_proposals_the_check_and_the_second_taggings),
        TEST(a_second_tagging_is_filed_as_independent),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
