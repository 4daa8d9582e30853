/*
 * What was stored of the model is damaged, and learning meets it: it stops, says so, and forgets
 * what was stored, so that the next start learns everything again.
 */
#include "daemon/trainer.h"

#include <errno.h>
#include <sched.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/codec.h"
#include "storage/kv.h"
#include "tests/unit/trainer_fixture.h"

/* --- damage --- */

enum {
    ENTRIES = 30
};

static const char WEATHER[] = "fog on the reef";

/* Two tags whose words are not those of each other, in turns. */
static void file_entries(struct training *training)
{
    for (int i = 0; i < ENTRIES; i++) {
        char id[16];
        (void)snprintf(id, sizeof id, "log/%d", i);
        (void)fixture_file_as(
            training->store,
            (struct item_filing){.id = text_of(id),
                                 .text = text_of(i % 2 ? "fog bell haze" : "wreck ashore hull")},
            (struct names){.tags = {i % 2 ? "weather" : "casualties"}});
    }
    commit(training);
}

/* Learns the entries and stores the model. */
static void learn_and_stop(struct training *training)
{
    file_entries(training);
    start(training);
    assert_int_equal(learned(training), ENTRIES);
    stop(training);
    close_model(training);
}

/* Opens one of the closed model's tables for writing; model_store.c names them. */
static void begin_writing(struct training *training, const char *const *table, struct kv **ret_kv,
                          struct kv_txn **ret_txn)
{
    char directory[FIXTURE_PATH_BYTES + 8];
    (void)snprintf(directory, sizeof directory, "%s/model", training->store->home);
    const struct kv_settings settings = {
        .directory = directory, .map_bytes = FIXTURE_MAP_BYTES, .tables = table, .table_count = 1};
    assert_int_equal(kv_open(&settings, ret_kv, &training->error), STORE_OK);
    assert_int_equal(kv_begin(*ret_kv, true, ret_txn, &training->error), STORE_OK);
}

/* Turns one bit of the last byte of what stands under a key. */
static void damage(struct training *training, const char *table, struct kv_bytes key)
{
    unsigned char bytes[KV_ENTRY_BYTES];
    struct kv_bytes value = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    begin_writing(training, &table, &kv, &txn);
    assert_int_equal(kv_get(txn, 0, key, &value, &training->error), STORE_OK);
    memcpy(bytes, value.data, value.size);
    bytes[value.size - 1] ^= 1U;
    value = kv_bytes_of(bytes, value.size);
    assert_int_equal(kv_put(txn, 0, key, value, &training->error), STORE_OK);
    assert_int_equal(kv_commit(txn, &training->error), STORE_OK);
    kv_close(kv);
}

/* The first entry was filed first, and so were its words. */
static void damage_word(struct training *training)
{
    damage(training, "words", kv_bytes_of("wreck", 5));
}

static void damage_chunk(struct training *training)
{
    static const unsigned char first_of_word_0[8];
    damage(training, "chunks", kv_bytes_of(first_of_word_0, sizeof first_of_word_0));
}

static void damage_entry(struct training *training)
{
    unsigned char key[8];
    codec_key_u64(key, 1);
    damage(training, "worklist", kv_bytes_of(key, sizeof key));
}

/* --- what becomes of it --- */

/* The number of gaps that a question finds, and the score of the first of them. */
struct asked {
    size_t count;
    uint32_t tag;
    double score;
    double expected;
};

static struct asked ask(struct training *training, const char *text)
{
    struct asked asked = {.count = 0};
    struct workspace *workspace = workspaces_borrow(&training->workspaces);
    const struct features_source source = {.text = text, .text_bytes = strlen(text)};
    struct model_answer answer;
    struct model_base base;
    assert_non_null(workspace);
    assert_int_equal(features_extract(workspace->features, &source, SIZE_MAX), 0);
    const struct model_question question = {.features = features_list(workspace->features),
                                            .feature_count = features_count(workspace->features),
                                            .most = 2};
    shared_model_read(&training->shared);
    model_base_enter(&base, training->model_store);
    model_scratch_read(workspace->scratch, &base.base);
    assert_int_equal(model_ask(training->shared.model, &question, workspace->scratch, &answer), 0);
    assert_true(answer.gap_count > 0);
    asked = (struct asked){.count = answer.gap_count,
                           .tag = answer.gaps[0].tag,
                           .score = answer.gaps[0].score,
                           .expected = answer.expected};
    model_scratch_read(workspace->scratch, NULL);
    model_base_leave(&base);
    shared_model_unlock(&training->shared);
    workspaces_return(&training->workspaces, workspace);
    return asked;
}

static enum model_kept kept_now(struct training *training)
{
    struct model_origin origin = training->settings.origin;
    enum model_kept kept = MODEL_KEPT_OTHER;
    uint64_t seq = 0;
    origin.last_seq = fixture_totals(training->store).seq;
    assert_int_equal(
        model_keeper_look(training->model_store, &origin, &kept, &seq, &training->error), STORE_OK);
    return kept;
}

/* Revises the first entry, which reads all that was stored of it. */
static void revise(struct training *training)
{
    file(training, "log/0", "wreck ashore hull in fog");
    commit(training);
}

static void assert_learning_stops(struct training *training, const char *what)
{
    char sentence[TROUBLE_BYTES];
    char expected[TROUBLE_BYTES];
    assert_int_equal(training->shared.learned, ENTRIES);
    revise(training);
    start(training);
    assert_int_equal(learned(training), ENTRIES); /* nobody waits for more */
    (void)snprintf(expected, sizeof expected,
                   "learning has stopped at change %d (what was learned before cannot be read: "
                   "a stored %s of the model is damaged); restart the daemon to go on",
                   ENTRIES, what);
    troubles_read(&training->troubles, TROUBLE_LEARNING, sentence);
    assert_string_equal(sentence, expected);
    stop(training);
    assert_int_equal(training->shared.broken, -EIO); /* nobody may ask */
    assert_int_equal(kept_now(training), MODEL_KEPT_NONE);
    close_model(training);
}

/* As a restart does, to the last bit that a question shows. */
static void assert_all_is_learned_again(struct training *training)
{
    struct training *sound = NULL;
    open_model(training);
    assert_int_equal(training->shared.learned, 0);
    commit(training);
    start(training);
    assert_int_equal(learned(training), ENTRIES + 1);
    (void)training_set_up((void **)&sound);
    file_entries(sound);
    revise(sound);
    start(sound);
    assert_int_equal(learned(sound), ENTRIES + 1);
    struct asked again = ask(training, WEATHER);
    struct asked never_damaged = ask(sound, WEATHER);
    assert_int_equal(again.count, never_damaged.count);
    assert_int_equal(again.tag, never_damaged.tag);
    assert_true(again.score == never_damaged.score);
    assert_true(again.expected == never_damaged.expected);
    (void)training_tear_down((void **)&sound);
}

static void assert_damage_is_learned_over(struct training *training,
                                          void (*harm)(struct training *training), const char *what)
{
    learn_and_stop(training);
    harm(training);
    open_model(training);
    assert_learning_stops(training, what);
    assert_all_is_learned_again(training);
}

static void after_a_damaged_word_everything_is_learned_again(void **state)
{
    assert_damage_is_learned_over(*state, damage_word, "word");
}

static void after_a_damaged_chunk_everything_is_learned_again(void **state)
{
    assert_damage_is_learned_over(*state, damage_chunk, "chunk");
}

static void after_a_damaged_entry_everything_is_learned_again(void **state)
{
    assert_damage_is_learned_over(*state, damage_entry, "entry");
}

/* Twice as many changes make the scores of the first entries stale. */
static void damage_that_scoring_again_meets_is_told_and_learned_over(void **state)
{
    struct training *training = *state;
    char sentence[TROUBLE_BYTES] = "";
    learn_and_stop(training);
    damage_entry(training);
    open_model(training);
    for (int i = 0; i < ENTRIES; i++) {
        char id[16];
        (void)snprintf(id, sizeof id, "calm/%d", i);
        file(training, id, "calm sea, lamp lit");
    }
    commit(training);
    start(training);
    while (sentence[0] == '\0') { /* nothing else would ever tell */
        (void)sched_yield();
        troubles_read(&training->troubles, TROUBLE_LEARNING, sentence);
    }
    stop(training);
    assert_non_null(strstr(sentence, "a stored entry of the model is damaged"));
    assert_int_equal(training->shared.broken, -EIO); /* what they would read is gone */
    assert_int_equal(kept_now(training), MODEL_KEPT_NONE);
}

/* --- what it says --- */

/* Standard error goes into a pipe for as long as the trainer runs. */
static void that_all_will_be_learned_again_stands_in_the_log(void **state)
{
    struct training *training = *state;
    char text[4096];
    int ends[2];
    learn_and_stop(training);
    damage_word(training);
    open_model(training);
    int own_stderr = dup(STDERR_FILENO);
    assert_int_equal(pipe(ends), 0);
    assert_int_equal(dup2(ends[1], STDERR_FILENO), STDERR_FILENO);
    revise(training);
    start(training);
    (void)learned(training);
    stop(training);
    assert_int_equal(dup2(own_stderr, STDERR_FILENO), STDERR_FILENO);
    assert_int_equal(close(own_stderr) | close(ends[1]), 0);
    ssize_t size = read(ends[0], text, sizeof text - 1);
    assert_int_equal(close(ends[0]), 0);
    assert_true(size > 0);
    text[size] = '\0';
    assert_non_null(
        strstr(text, "the stored model is damaged: a restart learns all items again\n"));
    assert_non_null(strstr(text, "learning has stopped at change 30 "));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, training_set_up, training_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(after_a_damaged_word_everything_is_learned_again),
        TEST(after_a_damaged_chunk_everything_is_learned_again),
        TEST(after_a_damaged_entry_everything_is_learned_again),
        TEST(damage_that_scoring_again_meets_is_told_and_learned_over),
        TEST(that_all_will_be_learned_again_stands_in_the_log),
    };
    return cmocka_run_group_tests_name("trainer and damage", tests, NULL, NULL);
}
