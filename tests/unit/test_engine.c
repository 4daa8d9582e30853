/* An open home as a whole: what is filed is learned, asked for, kept and erased. */
#include "daemon/engine.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <sysexits.h>

#include "storage/kv.h"
#include "tests/unit/engine_fixture.h"

/* Speaks for the stream's tags 3 and 9. */
static const char DRAFT[] = "log t3q0 t3q1 t9q1 t9q2 n5q0";

/* The code of a question whose answer does not matter. */
static int try_ask_draft(struct opened *opened, const char *text)
{
    struct workspaces *workspaces = engine_workspaces(opened->engine);
    struct workspace *workspace = workspaces_borrow(workspaces);
    const struct features_source source = {.text = text, .text_bytes = strlen(text)};
    struct model_answer answer;
    uint64_t learned = 0;
    assert_non_null(workspace);
    assert_int_equal(features_extract(workspace->features, &source, SIZE_MAX), 0);
    const struct model_question question = {.features = features_list(workspace->features),
                                            .feature_count = features_count(workspace->features),
                                            .most = ASKED_GAPS};
    int code = engine_ask(opened->engine, &question, workspace, &answer, &learned);
    workspaces_return(workspaces, workspace);
    return code;
}

static struct stream new_stream(void)
{
    return (struct stream){.random = {4}, .tag_count = 40, .given_share = 0.8};
}

/* --- filed, learned, asked --- */

static void what_is_filed_is_learned_and_asked_for(void **state)
{
    struct opened *opened = *state;
    struct asked asked;
    for (int i = 0; i < 30; i++) {
        char id[16];
        (void)snprintf(id, sizeof id, "log/%d", i);
        (void)FILE_ITEM(opened, id, i % 2 ? "fog and bell" : "wreck ashore",
                        i % 2 ? "weather" : "casualties");
    }
    ask_draft(opened, "the bell in the fog", &asked);
    assert_int_equal(asked.learned, 30);
    assert_int_equal(asked.count, 2);
    assert_int_equal(asked.gaps[0].tag, tag_number(opened, "weather"));
    assert_true(asked.gaps[0].chance > asked.gaps[1].chance);
    assert_true(asked.gaps[0].score > asked.gaps[1].score);
    assert_int_equal(engine_count(opened->engine).questions, 1);
}

static void the_home_can_be_measured(void **state)
{
    struct opened *opened = *state;
    struct engine_size size;
    struct asked asked;
    (void)FILE_ITEM(opened, "log/1", "fog bell", "weather");
    ask_draft(opened, "fog", &asked); /* so that it is learned */
    engine_measure(opened->engine, &size);
    assert_int_equal(size.model.documents, 1);
    assert_int_equal(size.model.words, 2);
    assert_int_equal(size.model.tags, 1);
    assert_true(size.store_bytes > 0);
    assert_true(size.model_bytes > 0);
    assert_true(size.asking_bytes > 0);
    assert_int_equal(size.budget_bytes, opened->options.memory_budget_bytes);
}

static void copy_fit(void *user, const struct model *model, const struct base *base,
                     uint64_t learned)
{
    (void)base;
    assert_int_equal(learned, 0);
    *(struct propensity_fit *)user = *model_fit(model);
}

/* Jain, Prabhu, Varma (2016): p = 1 / (1 + C (N + B)^-A), C = (log n - 1) (B + 1)^A, with their
 * A 0.55 and B 1.5, worked out with Python for n = 10000: C = 13.590272552785276. */
static void before_any_check_a_propensity_is_that_of_the_curve(void **state)
{
    struct opened *opened = *state;
    struct propensity_fit fit;
    assert_int_equal(engine_read_model(opened->engine, copy_fit, &fit), 0);
    assert_near(propensity_fit_mean(&fit, 8.0, 10000.0), 0.20243511213931997, 1e-12);
    assert_near(propensity_fit_mean(&fit, 9.0, 10000.0), 0.21146823515798704, 1e-12);
}

/* --- closed and opened again --- */

static void opened_again_it_answers_the_same(void **state)
{
    struct opened *opened = *state;
    struct stream stream = new_stream();
    struct asked before;
    struct asked after;
    file_stream(opened, &stream, 0, 150);
    ask_draft(opened, DRAFT, &before);
    close_home(opened);
    open_home(opened);
    assert_int_equal(engine_count(opened->engine).progress.learned, 150); /* nothing to learn */
    ask_draft(opened, DRAFT, &after);
    assert_same_asked(&before, &after);
}

/* What the model knows of itself. */
struct known {
    struct standing_answer standing;
    size_t listed;
    uint64_t learned;
};

static void copy_known(void *user, const struct model *model, const struct base *base,
                       uint64_t learned)
{
    (void)base;
    struct known *known = user;
    standing_ask(model_standing(model), 0, &known->standing);
    known->listed = worklist_size(model_worklist(model));
    known->learned = learned;
}

static void opened_again_its_standing_and_worklist_are_the_same(void **state)
{
    struct opened *opened = *state;
    struct stream stream = new_stream();
    struct known before = {.listed = 0};
    struct known after = {.listed = 0};
    file_stream(opened, &stream, 0, 100);
    assert_int_equal(engine_read_model(opened->engine, copy_known, &before), 0);
    assert_int_equal(before.learned, 100); /* it waits for what was promised */
    assert_int_equal(before.listed, 100);
    assert_int_equal(before.standing.items, 100);
    assert_true(before.standing.bands[STANDING_ALL].with[RANKING_P1].value > 0.0);
    assert_true(before.standing.bands[STANDING_ALL].without[RANKING_P1].value > 0.0);
    close_home(opened);
    open_home(opened);
    assert_int_equal(engine_read_model(opened->engine, copy_known, &after), 0);
    assert_int_equal(after.listed, 100);
    assert_memory_equal(&after.standing, &before.standing, sizeof before.standing);
}

/* A home that was closed in between against one that was not. */
static void opened_again_it_goes_on_as_if_nothing_had_been(void **state)
{
    struct opened *opened = *state;
    struct opened *other = NULL;
    struct stream stream = new_stream();
    struct stream same = new_stream();
    struct asked first;
    struct asked second;
    file_stream(opened, &stream, 0, 100);
    wait_until_learned(opened, 100);
    close_home(opened);
    open_home(opened);
    file_stream(opened, &stream, 100, 50);
    ask_draft(opened, DRAFT, &first);
    (void)opened_set_up((void **)&other);
    file_stream(other, &same, 0, 150);
    ask_draft(other, DRAFT, &second);
    assert_same_asked(&first, &second);
    (void)opened_tear_down((void **)&other);
}

static void other_settings_have_everything_learned_again(void **state)
{
    struct opened *opened = *state;
    struct opened *fresh = NULL;
    struct stream stream = new_stream();
    struct stream same = new_stream();
    struct asked before;
    struct asked again;
    struct asked anew;
    file_stream(opened, &stream, 0, 100);
    ask_draft(opened, DRAFT, &before);
    close_home(opened);
    opened->options.step = 0.125;
    open_home(opened);
    wait_until_learned(opened, 100);
    ask_draft(opened, DRAFT, &again);
    assert_true(again.gaps[0].score != before.gaps[0].score);
    (void)opened_set_up((void **)&fresh);
    close_home(fresh);
    fresh->options.step = 0.125;
    open_home(fresh);
    file_stream(fresh, &same, 0, 100);
    ask_draft(fresh, DRAFT, &anew);
    assert_same_asked(&anew, &again);
    (void)opened_tear_down((void **)&fresh);
}

static uint64_t words_known(struct opened *opened)
{
    struct engine_size size;
    engine_measure(opened->engine, &size);
    return size.model.words;
}

/* With pairs of words "fog bell lamp" is five terms, without them three. */
static void nothing_of_the_old_model_is_left_when_all_is_learned_again(void **state)
{
    struct opened *opened = *state;
    close_home(opened);
    opened->options.word_pairs = true;
    open_home(opened);
    (void)FILE_ITEM(opened, "log/1", "fog bell lamp", "weather");
    wait_until_learned(opened, 1);
    assert_int_equal(words_known(opened), 5);
    close_home(opened);
    opened->options.word_pairs = false;
    open_home(opened);
    wait_until_learned(opened, 1);
    assert_int_equal(words_known(opened), 3);
    close_home(opened);
    open_home(opened);
    assert_int_equal(engine_count(opened->engine).progress.kept, 1); /* loaded */
    assert_int_equal(words_known(opened), 3);
}

static void settings_that_learning_does_not_depend_on_have_nothing_learned_again(void **state)
{
    struct opened *opened = *state;
    (void)FILE_ITEM(opened, "log/1", "fog", "weather");
    wait_until_learned(opened, 1);
    close_home(opened);
    opened->options.tags_limit = 7;
    open_home(opened);
    assert_int_equal(engine_count(opened->engine).progress.kept, 1);
}

/* Puts a value into a table of the closed home's model; model_store.c names them so. */
static void write_model(struct opened *opened, const char *table, struct kv_bytes key,
                        struct kv_bytes value)
{
    char directory[FIXTURE_PATH_BYTES + 8];
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    (void)snprintf(directory, sizeof directory, "%s/model", opened->home);
    static const char *const OTHERS[] = {"chunks", "counts", "figures", "meta",
                                         "news",   "tags",   "words",   "worklist"};
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = FIXTURE_MAP_BYTES,
                                         .tables = &table,
                                         .table_count = 1,
                                         .earlier_tables = OTHERS,
                                         .earlier_count = sizeof OTHERS / sizeof OTHERS[0]};
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, true, &txn, &error), STORE_OK);
    assert_int_equal(kv_put(txn, 0, key, value, &error), STORE_OK);
    assert_int_equal(kv_commit(txn, &error), STORE_OK);
    kv_close(kv);
}

/* What is filed and asked, with something done to the closed home in between, is learned again. */
static void assert_learned_again(struct opened *opened, const char *table, struct kv_bytes key,
                                 struct kv_bytes value)
{
    struct stream stream = new_stream();
    struct asked before;
    struct asked after;
    file_stream(opened, &stream, 0, 100);
    ask_draft(opened, DRAFT, &before);
    close_home(opened);
    write_model(opened, table, key, value);
    open_home(opened);
    assert_int_equal(engine_count(opened->engine).progress.kept, 0);
    wait_until_learned(opened, 100);
    ask_draft(opened, DRAFT, &after);
    assert_same_asked(&before, &after);
    close_home(opened);
    open_home(opened);
    assert_int_equal(engine_count(opened->engine).progress.kept, 100); /* and stored as ours */
    ask_draft(opened, DRAFT, &after);
    assert_same_asked(&before, &after);
}

/* The tags are loaded at a start; their first one has the number 0. */
static void a_damaged_model_is_learned_again(void **state)
{
    static const unsigned char tag[4];
    assert_learned_again(*state, "tags", kv_bytes_of(tag, sizeof tag), kv_bytes_of("fog", 3));
}

/* Format 2 had a table more; what is there of it must not be in the way. */
static void a_model_of_an_older_format_is_learned_again(void **state)
{
    struct opened *opened = *state;
    const unsigned char format_2[] = {2, 0, 0, 0, 'o', 'u', 'r', 's'};
    close_home(opened);
    write_model(opened, "shadow_chunks", kv_bytes_of("gale", 4), kv_bytes_of("fog", 3));
    open_home(opened);
    assert_learned_again(opened, "meta", kv_bytes_of("model", 5),
                         kv_bytes_of(format_2, sizeof format_2));
}

/* Words are not loaded at a start: the damage of one is met when it is wanted, by who asks, by
 * log/3 and, sooner or later, by the trainer, which scores log/1 again. */
static void meet_a_damaged_word(struct opened *opened)
{
    (void)FILE_ITEM(opened, "log/1", "schoonerwreckage", "casualties");
    (void)FILE_ITEM(opened, "log/2", "fog", "weather");
    wait_until_learned(opened, 2);
    close_home(opened);
    write_model(opened, "words", kv_bytes_of("schoonerwreckage", 16), kv_bytes_of("fog", 3));
    open_home(opened);
    assert_int_equal(try_ask_draft(opened, "schoonerwreckage"), -EIO);
    (void)FILE_ITEM(opened, "log/3", "schoonerwreckage", "casualties");
}

static void a_damaged_word_is_told_to_who_asks_and_stops_learning(void **state)
{
    struct opened *opened = *state;
    char sentence[TROUBLE_BYTES];
    meet_a_damaged_word(opened);
    assert_int_equal(try_ask_draft(opened, "fog"), -EIO); /* no more, since it knows a half */
    assert_int_equal(engine_read_model(opened->engine, copy_known, NULL), -EIO);
    troubles_read(engine_troubles(opened->engine), TROUBLE_LEARNING, sentence);
    assert_string_equal(sentence, "learning has stopped at change 2 (what was learned before "
                                  "cannot be read: a stored word of the model is damaged); "
                                  "restart the daemon to go on");
}

static void after_a_damaged_word_a_restart_learns_everything_again(void **state)
{
    struct opened *opened = *state;
    struct asked again;
    meet_a_damaged_word(opened);
    (void)try_ask_draft(opened, "fog"); /* waits until it is met */
    close_home(opened);
    open_home(opened);
    wait_until_learned(opened, 3);
    ask_draft(opened, "schoonerwreckage", &again);
    assert_int_equal(again.gaps[0].tag, tag_number(opened, "casualties"));
}

/* --- refusals --- */

static void too_many_words_are_refused_and_change_nothing(void **state)
{
    struct opened *opened = *state;
    static const char TEXT[] = "fog bell lamp quay";
    const struct features_source source = {.text = TEXT, .text_bytes = sizeof TEXT - 1};
    struct change change = {.kind = CHANGE_FILE,
                            .filing = {.id = text_of("log/1"), .text = text_of(TEXT)},
                            .counted = &source,
                            .words_limit = 3};
    apply(opened, &change);
    assert_int_equal(change.code, STORE_REFUSED);
    assert_true(change.has_too_many_words);
    assert_int_equal(committed(opened), 0);
}

static void a_refused_change_is_not_learned(void **state)
{
    struct opened *opened = *state;
    const struct store_text tags[] = {text_of("weather"), text_of("wrekc")};
    struct asked asked;
    struct change change = {
        .kind = CHANGE_FILE,
        .filing = {.id = text_of("log/2"), .text = text_of("wreck"), .tags = tags, .tag_count = 2}};
    (void)FILE_ITEM(opened, "log/1", "fog", "weather");
    apply(opened, &change);
    assert_int_equal(change.code, STORE_REFUSED);
    assert_int_equal(change.refusal.at, 1);
    (void)FILE_ITEM(opened, "log/3", "calm", "weather");
    ask_draft(opened, "wreck", &asked);
    assert_int_equal(asked.learned, 2);
    assert_int_equal(committed(opened), 2);
}

static void a_home_in_use_is_refused(void **state)
{
    struct opened *opened = *state;
    struct opened second = *opened;
    char sentence[FIXTURE_PATH_BYTES + 32];
    second.engine = NULL;
    assert_int_equal(try_open(&second), EX_TEMPFAIL);
    (void)snprintf(sentence, sizeof sentence, "the home %s is in use: ", opened->home);
    assert_non_null(strstr(second.error, sentence));
    assert_null(second.engine);
}

static void a_home_that_is_a_file_is_refused_and_nothing_is_held(void **state)
{
    struct opened *opened = *state;
    char home[FIXTURE_PATH_BYTES];
    memcpy(home, opened->home, sizeof home);
    close_home(opened);
    (void)strcat(opened->home, "/lock"); /* which is there */
    assert_int_equal(try_open(opened), EX_IOERR);
    assert_non_null(strstr(opened->error, "cannot be used: Not a directory"));
    memcpy(opened->home, home, sizeof home);
    open_home(opened);
}

/* --- erasing --- */

static void wait_until_gone(const struct opened *opened, const char *text)
{
    while (home_occurrences(opened->home, "store/data.mdb", text) > 0 ||
           home_occurrences(opened->home, "model/data.mdb", text) > 0) {
        (void)sched_yield();
    }
}

static void what_was_revised_or_withdrawn_is_erased_from_every_file(void **state)
{
    struct opened *opened = *state;
    close_home(opened);
    opened->options.flush_every_ms = 1;
    opened->options.flush_changes = 1;
    open_home(opened);
    (void)FILE_ITEM(opened, "log/1", "schoonerwreckage", "casualties");
    (void)FILE_ITEM(opened, "log/2", "smugglerslantern", "crime");
    (void)FILE_ITEM(opened, "log/3", "lighthousekeeper", "staff");
    (void)FILE_ITEM(opened, "log/1", "a quiet night", "weather");
    withdraw_item(opened, "log/2");
    wait_until_gone(opened, "schoonerwreckage");
    wait_until_gone(opened, "smugglerslantern");
    assert_true(home_occurrences(opened->home, "store/data.mdb", "lighthousekeeper") > 0);
    assert_true(home_occurrences(opened->home, "model/data.mdb", "lighthousekeeper") > 0);
}

/* As after a crash between storing the model and erasing. */
static void what_was_left_at_the_end_is_erased_at_the_next_start(void **state)
{
    struct opened *opened = *state;
    (void)FILE_ITEM(opened, "log/1", "schoonerwreckage", "casualties");
    withdraw_item(opened, "log/1");
    wait_until_learned(opened, 2);
    close_home(opened); /* which stores the model */
    open_home(opened);
    wait_until_gone(opened, "schoonerwreckage");
}

/* --- many threads --- */

static void *ask_for_a_while(void *argument)
{
    struct opened *opened = argument;
    static const char TEXT[] = "log t3q0 t9q1";
    for (int i = 0; i < 200; i++) {
        struct asked asked;
        ask_draft(opened, TEXT, &asked);
    }
    return NULL;
}

static void many_may_ask_while_one_files(void **state)
{
    struct opened *opened = *state;
    struct stream stream = new_stream();
    struct asked asked;
    pthread_t threads[2];
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(pthread_create(&threads[i], NULL, ask_for_a_while, opened), 0);
    }
    file_stream(opened, &stream, 0, 100);
    for (size_t i = 0; i < 2; i++) {
        assert_int_equal(pthread_join(threads[i], NULL), 0);
    }
    ask_draft(opened, DRAFT, &asked);
    assert_int_equal(asked.learned, 100);
    assert_int_equal(engine_count(opened->engine).questions, 401);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, opened_set_up, opened_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_filed_is_learned_and_asked_for),
        TEST(the_home_can_be_measured),
        TEST(before_any_check_a_propensity_is_that_of_the_curve),
        TEST(opened_again_it_answers_the_same),
        TEST(opened_again_its_standing_and_worklist_are_the_same),
        TEST(opened_again_it_goes_on_as_if_nothing_had_been),
        TEST(other_settings_have_everything_learned_again),
        TEST(nothing_of_the_old_model_is_left_when_all_is_learned_again),
        TEST(settings_that_learning_does_not_depend_on_have_nothing_learned_again),
        TEST(a_damaged_model_is_learned_again),
        TEST(a_model_of_an_older_format_is_learned_again),
        TEST(a_damaged_word_is_told_to_who_asks_and_stops_learning),
        TEST(after_a_damaged_word_a_restart_learns_everything_again),
        TEST(too_many_words_are_refused_and_change_nothing),
        TEST(a_refused_change_is_not_learned),
        TEST(a_home_in_use_is_refused),
        TEST(a_home_that_is_a_file_is_refused_and_nothing_is_held),
        TEST(what_was_revised_or_withdrawn_is_erased_from_every_file),
        TEST(what_was_left_at_the_end_is_erased_at_the_next_start),
        TEST(many_may_ask_while_one_files),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
