/*
 * The whole program, as a person or a script runs it, against a small daemon in a thread.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/unit/client_run.h"

static const char GAPS[] =
    "{\"gaps\": [{\"tag\":\"wreck\",\"chance\":0.84,\"score\":1.20,\"words\":[[\"reef\",0.5],"
    "[\"mast\\u001b[2J\",0.25]]},{\"tag\":\"fog\",\"chance\":0.1,\"score\":-0.5,\"words\":[]}],"
    "\"expected\":1.94,\"learned\":3012,\"early\":true}";

static const char SHOWN[] =
    "{\"id\":\"log/7\",\"seq\":12,\"title\":\"Fog at noon\",\"text\":\"Signal\\nsounded.\","
    "\"fields\":{\"year\":1911,\"boats\":[\"Tern\",\"Auk\"]},\"language\":null,\"tagger\":\"east\","
    "\"filed_at\":\"2031-05-04T10:00:00Z\",\"stored_at\":\"2031-05-04T10:00:01Z\","
    "\"tags\":[\"fog\",\"signal\"],\"filed\":[\"fog\",\"lamp\"],\"belongs\":[\"signal\"],"
    "\"not\":[\"lamp\"],\"checked\":null}";

static const char STATE[] =
    "{\"version\":\"9.1\",\"format\":1,\"uptime_s\":3725,\"items\":30300,\"tags\":598,"
    "\"words\":1,\"weights\":2,\"seq\":30310,\"learned\":30300,\"backlog\":10,"
    "\"memory\":{\"resident\":182333444},\"limits\":{\"line_limit\":8388608},"
    "\"faults\":[\"the disk is nearly full\"]}";

/* Pages of two tags, up to "tag 4". */
static void answer_tags(const json_t *request, const json_t *params, FILE *out)
{
    const char *after = json_string_value(json_object_get(params, "after"));
    int first = after ? atoi(after + 4) + 1 : 0;
    fake_daemon_answer(request, out,
                       "\"result\":{\"tags\":[{\"tag\":\"tag %d\",\"count\":1000,\"p\":0.5,"
                       "\"missing\":12.34,\"state\":\"open\"},{\"tag\":\"tag %d\",\"count\":3,"
                       "\"p\":0.25,\"missing\":1,\"state\":\"retired\"}]%s%d%s}",
                       first, first + 1,
                       first + 2 < 6 ? ",\"next\":\"tag " : ",\"more\":", first + 1,
                       first + 2 < 6 ? "\"" : "");
}

static void answer(struct fixture *fixture, const json_t *request, FILE *out)
{
    (void)fixture;
    const char *method = json_string_value(json_object_get(request, "method"));
    const json_t *params = json_object_get(request, "params");
    const char *id = json_string_value(json_object_get(params, "id"));
    if (strcmp(method, "item.gaps") == 0) {
        fake_daemon_answer(request, out, "\"result\":%s", GAPS);
    } else if (strcmp(method, "daemon.state") == 0) {
        fake_daemon_answer(request, out, "\"result\":%s", STATE);
    } else if (strcmp(method, "tag.list") == 0) {
        answer_tags(request, params, out);
    } else if (!id || strncmp(id, "none", 4) == 0) {
        fake_daemon_answer(request, out,
                           "\"error\":{\"code\":-32001,\"message\":\"There is no such item.\"}");
    } else if (strcmp(method, "item.show") == 0) {
        fake_daemon_answer(request, out, "\"result\":%s", SHOWN);
    } else {
        fake_daemon_answer(request, out, "\"result\":{\"seq\":1042,\"was\":\"new\"}");
    }
}

static int set_up(void **state)
{
    return client_run_start(state, answer);
}

/* --- gaps ----------------------------------------------------------------------------------- */

static void gaps_are_a_table_with_a_bar_each(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "gaps", "log/7", NULL), 0);
    assert_non_null(strstr(fixture->out, "chance\nwreck"));
    assert_non_null(strstr(fixture->out, "0.84  ████████████████▊\n"));
    assert_non_null(strstr(fixture->out, "Early days"));
    assert_non_null(strstr(
        fixture->out, "Expected number of tags missing: 1.9, as learned up to change 3,012.\n"));
    assert_string_equal(asked(fixture), "item.gaps {\"id\":\"log/7\"}\n");
}

static void gaps_why_shows_the_words_below_each_tag(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "gaps", "--why", "--most=2", "--floor", "0", "log/7", NULL),
                     0);
    assert_non_null(strstr(fixture->out, "\n  reef "));
    assert_non_null(strstr(fixture->out, "0.50  ██████████\n"));
    assert_null(strchr(fixture->out, '\033')); /* that word holds one */
    assert_string_equal(asked(fixture),
                        "item.gaps {\"id\":\"log/7\",\"most\":2,\"floor\":0.0,\"why\":true}\n");
}

static void a_draft_may_be_plain_text(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "Fog at \"noon\"\n", "gaps", NULL), 0);
    assert_non_null(strstr(fixture->out, "Expected number of tags in all: 1.9"));
    assert_string_equal(asked(fixture), "item.gaps {\"text\":\"Fog at \\\"noon\\\"\\n\"}\n");
}

static void a_draft_may_be_what_would_be_filed(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(
        run(fixture,
            " {\"id\":\"x\",\"title\":\"T\",\"tags\":[\"fog\"],\"tagger\":\"east\","
            "\"filed_at\":\"2031-05-04T10:00:00Z\",\n\"prompted\":[],\"declined\":[]}\n",
            "gaps", NULL),
        0);
    assert_string_equal(asked(fixture), "item.gaps {\"title\":\"T\",\"tags\":[\"fog\"]}\n");
}

static void a_draft_of_nothing_is_bad_data(void **state)
{
    struct fixture *fixture = *state;
    static const char *const DRAFTS[] = {"", " \n", "{}", "{\"id\":\"x\"}", "{\"text\":", "a\xFF"};
    for (size_t i = 0; i < sizeof DRAFTS / sizeof DRAFTS[0]; i++) {
        assert_int_equal(run(fixture, DRAFTS[i], "gaps", NULL), 65);
        assert_memory_equal(fixture->err, "undertag: the draft ", 20);
    }
    assert_string_equal(asked(fixture), "");
}

static void json_is_the_answer_to_the_byte(void **state)
{
    struct fixture *fixture = *state;
    char expected[sizeof GAPS + 1];
    (void)snprintf(expected, sizeof expected, "%s\n", GAPS);
    assert_int_equal(run(fixture, "", "--json", "gaps", "log/7", NULL), 0);
    assert_string_equal(fixture->out, expected);
    assert_int_equal(run(fixture, "", "gaps", "log/7", "--json", NULL), 0);
    assert_string_equal(fixture->out, expected);
}

/* --- items ---------------------------------------------------------------------------------- */

static void show_tells_what_is_known_of_an_item(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "show", "log/7", NULL), 0);
    assert_string_equal(fixture->out, "id            log/7\n"
                                      "title         Fog at noon\n"
                                      "filed         2031-05-04T10:00:00Z by east\n"
                                      "stored        2031-05-04T10:00:01Z, change 12\n"
                                      "fields        year = 1911\n"
                                      "              boats = Tern\n"
                                      "              boats = Auk\n"
                                      "tags          fog\n"
                                      "              signal\n"
                                      "as filed      fog\n"
                                      "              lamp\n"
                                      "ruled in      signal\n"
                                      "ruled out     lamp\n"
                                      "\n"
                                      "Signal\n"
                                      "sounded.\n");
}

static void an_item_that_is_not_there_is_bad_data(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "show", "none", NULL), 65);
    assert_string_equal(fixture->err, "undertag: There is no such item\n");
    assert_string_equal(fixture->out, "");
}

static void withdrawing_goes_on_after_an_id_that_is_not_there(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "withdraw", "a", "none", "b", NULL), 65);
    assert_string_equal(fixture->out, "withdrawn     a (change 1,042)\n"
                                      "withdrawn     b (change 1,042)\n");
    assert_string_equal(fixture->err, "undertag: none: There is no such item\n");
}

/* --- file ----------------------------------------------------------------------------------- */

static void file_counts_and_names_what_was_refused(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(
        run(fixture, "{\"id\":\"a\"}\nfog\n{\"id\":\"none\"}\n{\"id\":\"b\"}\n", "file", NULL), 65);
    assert_string_equal(fixture->out, "2 new, 0 revised, 0 same, 2 refused\n");
    assert_non_null(strstr(fixture->err, "standard input:2: this is not JSON: "));
    assert_non_null(strstr(fixture->err, "standard input:3: There is no such item\n"));
}

static void file_without_a_fault_is_silent_beside_its_counts(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "{\"id\":\"a\"}\n", "file", "-", NULL), 0);
    assert_string_equal(fixture->out, "1 new, 0 revised, 0 same, 0 refused\n");
    assert_string_equal(fixture->err, "");
}

static void one_item_is_filed_by_options(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "Signal sounded.", "file", "--id", "log/7", "--title=Fog",
                         "--tag", "fog", "--tag", "signal", "--field", "boat=Tern", "--field",
                         "boat=Auk", "--filed-at=2031-05-04T10:00:00Z", "--declined=lamp", NULL),
                     0);
    assert_string_equal(fixture->out, "log/7: new (change 1,042)\n");
    assert_string_equal(asked(fixture),
                        "item.file {\"id\":\"log/7\",\"title\":\"Fog\","
                        "\"filed_at\":\"2031-05-04T10:00:00Z\",\"tags\":[\"fog\",\"signal\"],"
                        "\"declined\":[\"lamp\"],\"fields\":{\"boat\":[\"Tern\",\"Auk\"]},"
                        "\"text\":\"Signal sounded.\"}\n");
}

static void a_file_that_cannot_be_read_stops_before_anything_is_filed(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(
        run(fixture, "{\"id\":\"a\"}\n", "file", "-", "/tmp/undertag-none.jsonl", NULL), 74);
    assert_string_equal(fixture->err, "undertag: /tmp/undertag-none.jsonl cannot be read: No such "
                                      "file or directory\n");
    assert_string_equal(asked(fixture), "");
}

static void a_store_that_is_full_for_one_item_is_try_again(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32005,\"message\":\"The disk is full.\"}";
    assert_int_equal(run(fixture, "", "file", "--id", "a", NULL), 75);
    assert_string_equal(fixture->err, "undertag: The disk is full\n");
}

/* --- the daemon ----------------------------------------------------------------------------- */

static void state_names_figures_in_full(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "state", NULL), 0);
    assert_non_null(strstr(fixture->out, "9.1, up 1 h 2 min, store format 1\n"));
    assert_non_null(strstr(fixture->out, "30,310, learned up to 30,300, 10 behind\n"));
    assert_non_null(strstr(fixture->out, "182.3 MB\n"));
    assert_non_null(strstr(fixture->out, "the disk is nearly full\n"));
}

static void the_vocabulary_is_read_page_by_page(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "tags", "list", "--order=count", "--most", "4", NULL), 0);
    assert_non_null(strstr(fixture->out, "tag 0  1,000     12.3       0.50  ████████\n"));
    assert_non_null(strstr(fixture->out, "tag 3      3      1.0       0.25  ████      retired\n"));
    assert_null(strstr(fixture->out, "tag 4 "));
    assert_non_null(strstr(fixture->out, "There are more: --after 'tag 3'\n"));
    assert_string_equal(asked(fixture),
                        "tag.list {\"most\":4,\"order\":\"count\"}\n"
                        "tag.list {\"most\":2,\"order\":\"count\",\"after\":\"tag 1\"}\n");
}

static void without_a_daemon_the_exit_code_is_69(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "", "--socket", "/tmp/undertag-none/s", "state", NULL), 69);
    assert_string_equal(fixture->err,
                        "undertag: no daemon is reached: there is no socket /tmp/undertag-none/s; "
                        "start undertagd, or name its socket by --socket PATH\n");
}

static void a_daemon_that_goes_away_is_told_with_what_was_acknowledged(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(run(fixture, "{\"id\":\"a\"}\n{\"id\":\"last\"}\n", "file", NULL), 69);
    assert_non_null(strstr(fixture->err, "closed the connection; 1 lines were acknowledged, 0 "
                                         "refused, 1 sent without an answer: run the same command "
                                         "again, which is safe"));
    assert_string_equal(fixture->out, "");
}

static void a_peer_that_is_not_allowed_ends_in_77(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32004,\"message\":\"User 7 may not withdraw items.\"}";
    assert_int_equal(run(fixture, "", "withdraw", "a", "b", NULL), 77);
    assert_string_equal(fixture->err, "undertag: User 7 may not withdraw items\n");
}

static void control_characters_of_an_error_do_not_reach_the_terminal(void **state)
{
    struct fixture *fixture = *state;
    fixture->error = "{\"code\":-32001,\"message\":\"There is no item '\\u001b[2J'.\"}";
    assert_int_equal(run(fixture, "", "show", "a", NULL), 65);
    assert_string_equal(fixture->err, "undertag: There is no item '\uFFFD[2J'\n");
}

/* --- the command line and the output -------------------------------------------------------- */

static void a_command_line_that_is_wrong_ends_in_64_and_says_how(void **state)
{
    struct fixture *fixture = *state;
    static const char *const LINES[][3] = {{NULL},
                                           {"rule", "x"},
                                           {"gpas", "x"},
                                           {"tags"},
                                           {"show"},
                                           {"show", "a", "b"},
                                           {"gaps", "--mots"},
                                           {"file", "--title=x"},
                                           {"gaps", "--floor=2"},
                                           {"show", "a\xFF"}};
    for (size_t i = 0; i < sizeof LINES / sizeof LINES[0]; i++) {
        const char *const *line = LINES[i];
        assert_int_equal(run(fixture, "", line[0], line[1], line[2], NULL), 64);
        assert_memory_equal(fixture->err, "undertag: ", 10);
        assert_string_equal(fixture->out, "");
    }
    assert_string_equal(asked(fixture), "");
}

static void every_command_explains_itself(void **state)
{
    struct fixture *fixture = *state;
    static const char *const NAMES[] = {"file",         "gaps",     "show",  "withdraw", "list",
                                        "state",        "rule",     "check", "sample",   "worklist",
                                        "completeness", "standing", "report"};
    assert_int_equal(run(fixture, "", "--help", NULL), 0);
    char all[sizeof fixture->out];
    strcpy(all, fixture->out);
    for (size_t i = 0; i < sizeof NAMES / sizeof NAMES[0]; i++) {
        char usage[64];
        (void)snprintf(usage, sizeof usage, "Usage: undertag %s", NAMES[i]);
        assert_non_null(strstr(all, NAMES[i]));
        assert_int_equal(run(fixture, "", NAMES[i], "--help", NULL), 0);
        assert_ptr_equal(strstr(fixture->out, usage), fixture->out);
    }
    assert_int_equal(run(fixture, "", "tags", "show", "--help", NULL), 0);
    assert_non_null(strstr(fixture->out, "Usage: undertag tags show TAG"));
    assert_int_equal(run(fixture, "", "--version", NULL), 0);
    assert_memory_equal(fixture->out, "undertag ", 9);
}

static void a_pipe_that_is_closed_ends_in_74(void **state)
{
    struct fixture *fixture = *state;
    int ends[2];
    assert_int_equal(pipe(ends), 0);
    assert_int_equal(close(ends[0]), 0);
    assert_int_equal(run_into(fixture, ends[1], "show", "log/7", NULL), 74);
    assert_string_equal(fixture->err, "undertag: the output cannot be written: Broken pipe\n");
    assert_int_equal(close(ends[1]), 0);
}

static void a_full_disk_behind_the_output_ends_in_74(void **state)
{
    struct fixture *fixture = *state;
    int full = open("/dev/full", O_WRONLY | O_CLOEXEC);
    assert_true(full >= 0);
    assert_int_equal(run_into(fixture, full, "state", NULL), 74);
    assert_int_equal(close(full), 0);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(gaps_are_a_table_with_a_bar_each),
        TEST(gaps_why_shows_the_words_below_each_tag),
        TEST(a_draft_may_be_plain_text),
        TEST(a_draft_may_be_what_would_be_filed),
        TEST(a_draft_of_nothing_is_bad_data),
        TEST(json_is_the_answer_to_the_byte),
        TEST(show_tells_what_is_known_of_an_item),
        TEST(an_item_that_is_not_there_is_bad_data),
        TEST(withdrawing_goes_on_after_an_id_that_is_not_there),
        TEST(file_counts_and_names_what_was_refused),
        TEST(file_without_a_fault_is_silent_beside_its_counts),
        TEST(one_item_is_filed_by_options),
        TEST(a_file_that_cannot_be_read_stops_before_anything_is_filed),
        TEST(a_store_that_is_full_for_one_item_is_try_again),
        TEST(state_names_figures_in_full),
        TEST(the_vocabulary_is_read_page_by_page),
        TEST(without_a_daemon_the_exit_code_is_69),
        TEST(a_daemon_that_goes_away_is_told_with_what_was_acknowledged),
        TEST(a_peer_that_is_not_allowed_ends_in_77),
        TEST(control_characters_of_an_error_do_not_reach_the_terminal),
        TEST(a_command_line_that_is_wrong_ends_in_64_and_says_how),
        TEST(every_command_explains_itself),
        TEST(a_pipe_that_is_closed_ends_in_74),
        TEST(a_full_disk_behind_the_output_ends_in_74),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
