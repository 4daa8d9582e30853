/* The learner's model into its store and back: it must not matter to any answer. */
#include "daemon/model_keeper.h"

#include <errno.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "daemon/learner/model_parts.h"
#include "daemon/model_base.h"
#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"
#include "tests/unit/store_fixture.h"

static const unsigned char UUID[STORE_UUID_BYTES] = "fifteen letters";
static const unsigned char OTHER_UUID[STORE_UUID_BYTES] = "fifteen LETTERS";

struct keeping {
    char home[FIXTURE_PATH_BYTES];
    struct store_settings settings;
    struct model_store *store;
    struct model_base base; /* that both learners read */
    struct model_origin origin;
    struct stream stream;
    struct learner learner; /* what is stored */
    struct learner again;   /* what was restored */
    struct store_error error;
};

static struct model_settings settings_with_a_shadow(void)
{
    struct model_settings settings = learner_settings();
    settings.shadow = true;
    return settings;
}

/* What is stored now is what both read from now on. */
static void enter_base(struct keeping *keeping)
{
    model_base_enter(&keeping->base, keeping->store);
    learner_read(&keeping->learner, &keeping->base.base);
    learner_read(&keeping->again, &keeping->base.base);
}

static int set_up(void **state)
{
    struct keeping *keeping = calloc(1, sizeof *keeping);
    const struct model_settings settings = settings_with_a_shadow();
    assert_non_null(keeping);
    home_make(keeping->home);
    keeping->settings =
        (struct store_settings){.home = keeping->home, .map_bytes = FIXTURE_MAP_BYTES};
    keeping->origin =
        (struct model_origin){.store_uuid = UUID, .settings = "step=0.5\n", .last_seq = 1000};
    keeping->stream = (struct stream){.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    assert_int_equal(model_store_open(&keeping->settings, &keeping->store, &keeping->error),
                     STORE_OK);
    learner_renew(&keeping->learner, &settings);
    learner_renew(&keeping->again, &settings);
    enter_base(keeping);
    *state = keeping;
    return 0;
}

static int tear_down(void **state)
{
    struct keeping *keeping = *state;
    model_base_leave(&keeping->base);
    model_store_close(keeping->store);
    learner_free(&keeping->learner);
    learner_free(&keeping->again);
    home_remove(keeping->home);
    free(keeping);
    return 0;
}

/* The next entries of the stream, learned by one or by both. */
static void learn(struct keeping *keeping, int count, bool by_both)
{
    for (int i = 0; i < count; i++) {
        struct entry entry;
        uint32_t truth[ENTRY_TAGS];
        (void)stream_next(&keeping->stream, &entry, truth);
        learner_change(&keeping->learner, &entry, NULL);
        if (by_both) {
            learner_change(&keeping->again, &entry, NULL);
        }
    }
}

/* Says whether words were forgotten. */
static bool keep(struct keeping *keeping, uint64_t learned)
{
    bool forgot = false;
    model_base_leave(&keeping->base);
    int code = model_keeper_store(keeping->store, keeping->learner.model, &keeping->origin, learned,
                                  &forgot, &keeping->error);
    if (code != STORE_OK) {
        fail_msg("%d: %s", code, keeping->error.text);
    }
    model_clean(keeping->learner.model);
    enter_base(keeping);
    return forgot;
}

/* Into a new model, from a store that was opened anew. */
static int restore(struct keeping *keeping)
{
    const struct model_settings settings = settings_with_a_shadow();
    model_base_leave(&keeping->base);
    model_store_close(keeping->store);
    keeping->store = NULL;
    assert_int_equal(model_store_open(&keeping->settings, &keeping->store, &keeping->error),
                     STORE_OK);
    learner_renew(&keeping->again, &settings);
    enter_base(keeping);
    return model_keeper_load(keeping->store, keeping->again.model, &keeping->error);
}

static int look(struct keeping *keeping, enum model_kept *ret_kept, uint64_t *ret_learned)
{
    return model_keeper_look(keeping->store, &keeping->origin, ret_kept, ret_learned,
                             &keeping->error);
}

static void assert_kept(struct keeping *keeping, enum model_kept expected, uint64_t learned)
{
    enum model_kept kept = (enum model_kept)77;
    uint64_t found = 77;
    assert_int_equal(look(keeping, &kept, &found), STORE_OK);
    assert_int_equal(kept, expected);
    assert_int_equal(found, learned);
    assert_int_equal(keeping->error.code, STORE_OK);
}

/* To the last bit. */
static void assert_same_answers(struct keeping *keeping)
{
    struct model_answer first = learner_ask(&keeping->learner, DRAFT);
    struct model_answer second = learner_ask(&keeping->again, DRAFT);
    assert_true(first.gap_count > 0);
    assert_int_equal(second.gap_count, first.gap_count);
    assert_true(second.expected == first.expected);
    assert_int_equal(second.early, first.early);
    for (size_t i = 0; i < first.gap_count; i++) {
        assert_int_equal(second.gaps[i].tag, first.gaps[i].tag);
        assert_true(second.gaps[i].chance == first.gaps[i].chance);
        assert_true(second.gaps[i].score == first.gaps[i].score);
    }
}

/* The worklist, the standing and the propensities, to the last bit. */
static void assert_knows_the_same(struct keeping *keeping)
{
    const struct worklist *first = model_worklist(keeping->learner.model);
    const struct worklist *second = model_worklist(keeping->again.model);
    struct standing_answer standings[2];
    assert_true(worklist_size(first) > 0);
    assert_int_equal(worklist_size(second), worklist_size(first));
    struct worklist_entry entry = {.number = 0};
    struct worklist_entry same = {.number = 0};
    while (worklist_after(first, &keeping->base.base, entry.number, &entry) == 0) {
        assert_int_equal(worklist_after(second, &keeping->base.base, same.number, &same), 0);
        memory_assert_same_entry(&entry, &same);
    }
    assert_int_equal(worklist_after(second, &keeping->base.base, same.number, &same), -ENOENT);
    standing_ask(model_standing(keeping->learner.model), 0, &standings[0]);
    standing_ask(model_standing(keeping->again.model), 0, &standings[1]);
    assert_memory_equal(&standings[1], &standings[0], sizeof standings[0]);
    assert_memory_equal(model_fit(keeping->again.model), model_fit(keeping->learner.model),
                        sizeof(struct propensity_fit));
    assert_true(model_stale_below(keeping->again.model) ==
                model_stale_below(keeping->learner.model));
}

/* A draft is filed without its tags, which a check finds. */
static void examine(struct keeping *keeping)
{
    static struct entry filed;
    struct entry checked;
    entry_set(&filed, DRAFT, TAGS(20));
    learner_change(&keeping->learner, &filed, NULL);
    entry_follow(&checked, &filed);
    entry_find_tag(&checked, 3);
    entry_try_tag(&checked, 3, false);
    entry_try_tag(&checked, 20, true);
    checked.checked_below = STREAM_TAGS;
    learner_change(&keeping->learner, &checked, &filed);
}

/* --- there and back --- */

static void a_restored_model_answers_the_same(void **state)
{
    struct keeping *keeping = *state;
    learn(keeping, 300, false);
    assert_false(keep(keeping, 300));
    assert_int_equal(restore(keeping), STORE_OK);
    assert_same_answers(keeping);
}

static void a_restored_model_goes_on_learning_the_same(void **state)
{
    struct keeping *keeping = *state;
    learn(keeping, 300, false);
    (void)keep(keeping, 300);
    assert_int_equal(restore(keeping), STORE_OK);
    learn(keeping, 300, true);
    assert_same_answers(keeping);
    assert_knows_the_same(keeping);
}

static void a_restored_model_knows_what_was_found(void **state)
{
    struct keeping *keeping = *state;
    learn(keeping, 200, false);
    examine(keeping);
    (void)keep(keeping, 300);
    assert_int_equal(restore(keeping), STORE_OK);
    assert_knows_the_same(keeping);
    assert_near(model_fit(keeping->again.model)->trials, 2.0, 0.0);
    learn(keeping, 100, true);
    assert_same_answers(keeping);
    assert_knows_the_same(keeping);
}

/* Tags and figures are in memory at once; words and weights come when they are wanted. */
static void a_restored_model_holds_words_and_weights_only_when_they_are_wanted(void **state)
{
    struct keeping *keeping = *state;
    learn(keeping, 300, false);
    (void)keep(keeping, 300);
    assert_int_equal(restore(keeping), STORE_OK);
    struct model_size all = learner_size(&keeping->learner);
    struct model_size before = learner_size(&keeping->again);
    assert_int_equal(before.words, all.words);
    assert_int_equal(before.postings, all.postings);
    assert_int_equal(before.listed, all.listed);
    assert_true(before.weights_bytes < all.weights_bytes / 2);
    assert_true(before.dictionary_bytes < all.dictionary_bytes / 2);
    assert_null(keeping->base.view); /* nothing was read */
    learn(keeping, 1, true);
    assert_non_null(keeping->base.view);
    assert_true(learner_size(&keeping->again).weights_bytes > before.weights_bytes);
}

static void what_has_changed_since_is_stored_over_what_was(void **state)
{
    struct keeping *keeping = *state;
    for (uint64_t learned = 100; learned <= 500; learned += 100) {
        learn(keeping, 100, false);
        (void)keep(keeping, learned);
    }
    assert_kept(keeping, MODEL_KEPT_OURS, 500);
    assert_int_equal(restore(keeping), STORE_OK);
    assert_same_answers(keeping);
}

static void words_that_no_item_has_any_more_are_forgotten(void **state)
{
    struct keeping *keeping = *state;
    struct entry entry;
    learn(keeping, 100, false);
    entry_set(&entry, "schoonerwreckage fog", TAGS(3));
    learner_change(&keeping->learner, &entry, NULL);
    assert_false(keep(keeping, 101));
    uint64_t words = learner_size(&keeping->learner).words;
    learner_change(&keeping->learner, NULL, &entry);
    assert_true(keep(keeping, 102));
    assert_false(keep(keeping, 103)); /* once */
    assert_int_equal(restore(keeping), STORE_OK);
    assert_true(learner_size(&keeping->again).words < words);
    assert_int_equal(learner_size(&keeping->again).words, learner_size(&keeping->learner).words);
    assert_same_answers(keeping);
}

static void a_store_that_is_reset_holds_nothing(void **state)
{
    struct keeping *keeping = *state;
    learn(keeping, 100, false);
    (void)keep(keeping, 100);
    assert_int_equal(model_keeper_reset(keeping->store, &keeping->error), STORE_OK);
    assert_kept(keeping, MODEL_KEPT_NONE, 0);
}

/* --- whose it is --- */

static void a_new_home_holds_no_model(void **state)
{
    assert_kept(*state, MODEL_KEPT_NONE, 0);
}

static void a_stored_model_tells_how_far_it_has_learned(void **state)
{
    struct keeping *keeping = *state;
    (void)keep(keeping, 1000); /* as far as the store goes */
    assert_kept(keeping, MODEL_KEPT_OURS, 1000);
}

static void a_model_of_other_settings_is_of_no_use(void **state)
{
    struct keeping *keeping = *state;
    (void)keep(keeping, 12);
    keeping->origin.settings = "step=0.25\n";
    assert_kept(keeping, MODEL_KEPT_OTHER, 0);
    keeping->origin.settings = "step=0.5\n";
    assert_kept(keeping, MODEL_KEPT_OURS, 12);
}

static void a_model_of_another_store_is_of_no_use(void **state)
{
    struct keeping *keeping = *state;
    (void)keep(keeping, 12);
    keeping->origin.store_uuid = OTHER_UUID;
    keeping->origin.last_seq = 3; /* which says nothing where the store is another */
    assert_kept(keeping, MODEL_KEPT_OTHER, 0);
}

static void a_model_that_is_ahead_of_its_store_is_told(void **state)
{
    struct keeping *keeping = *state;
    enum model_kept kept = (enum model_kept)77;
    uint64_t learned = 77;
    (void)keep(keeping, 12);
    keeping->origin.last_seq = 11;
    assert_int_equal(look(keeping, &kept, &learned), STORE_CORRUPT);
    assert_string_equal(keeping->error.text,
                        "the model has learned up to change 12, but the store ends at 11: restore "
                        "the store, or remove the model to have it learned again");
    assert_int_equal(kept, 77);
    assert_int_equal(learned, 77);
}

/* --- damage --- */

/* Stores a part that model_keeper itself would not have stored. */
static void put(struct keeping *keeping, const struct model_store_chunk *chunk,
                const struct model_store_figures *figures, const struct model_store_head *head)
{
    struct model_store_writing *writing = NULL;
    assert_int_equal(model_store_begin(keeping->store, &writing, &keeping->error), STORE_OK);
    if (chunk) {
        assert_int_equal(model_store_put_chunk(writing, chunk, &keeping->error), STORE_OK);
    }
    if (figures) {
        assert_int_equal(model_store_put_figures(writing, figures, &keeping->error), STORE_OK);
    }
    if (head) {
        assert_int_equal(model_store_put_head(writing, head, &keeping->error), STORE_OK);
    }
    assert_int_equal(model_store_commit(writing, &keeping->error), STORE_OK);
}

static void assert_damaged(struct keeping *keeping, const char *sentence)
{
    assert_int_equal(restore(keeping), STORE_CORRUPT);
    assert_string_equal(keeping->error.text, sentence);
    keeping->error = (struct store_error){0};
}

/* Asks the restored model about one word. */
static int ask_about(struct keeping *keeping, const char *word)
{
    struct entry entry;
    struct model_answer answer;
    entry_set(&entry, word, NO_TAGS);
    const struct model_question question = entry_question(&entry);
    return model_ask(keeping->again.model, &question, keeping->again.scratch, &answer);
}

/* The first word has the number 0. */
static void a_chunk_that_is_no_list_of_postings_is_met_when_it_is_wanted(void **state)
{
    struct keeping *keeping = *state;
    const struct model_store_chunk chunk = {.word = 0, .bytes = kv_bytes_of("short", 5)};
    learner_file(&keeping->learner, "schoonerwreckage", TAGS(3));
    learner_file(&keeping->learner, "fog", TAGS(4));
    (void)keep(keeping, 2);
    put(keeping, &chunk, NULL, NULL);
    assert_int_equal(restore(keeping), STORE_OK);
    assert_int_equal(ask_about(keeping, "fog"), 0);
    assert_int_equal(ask_about(keeping, "schoonerwreckage"), -EIO);
}

/* More words than numbers were given out, or than there are numbers. */
static void totals_that_cannot_be_are_damage(void **state)
{
    struct keeping *keeping = *state;
    const struct model_store_head heads[] = {{.words = 3, .next_word = 2},
                                             {.words = 1ULL << 32U, .next_word = 1ULL << 32U}};
    for (size_t i = 0; i < sizeof heads / sizeof heads[0]; i++) {
        put(keeping, NULL, NULL, &heads[i]);
        assert_damaged(keeping, "the stored model does not fit together");
    }
}

static void a_bin_of_another_size_is_damage(void **state)
{
    struct keeping *keeping = *state;
    static const double VALUES[2] = {1.0, 0.5};
    const struct model_store_figures bin = {
        .kind = MODEL_FIGURES_BIN, .number = 3, .count = 2, .values = VALUES};
    learn(keeping, 10, false);
    (void)keep(keeping, 10);
    put(keeping, NULL, &bin, NULL);
    assert_damaged(keeping, "the stored model does not fit together");
}

/* Changes the byte behind a text, wherever that stands in the closed or open file. */
static void damage_behind(const char *path, const char *text)
{
    static char bytes[1 << 20];
    size_t count = 0;
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    char *at = bytes;
    while ((at = memmem(at, size - (size_t)(at - bytes), text, strlen(text)))) {
        at += strlen(text);
        assert_int_equal(fseek(file, at - bytes, SEEK_SET), 0);
        assert_int_not_equal(fputc(*at ^ 1, file), EOF);
        count++;
    }
    assert_int_equal(fclose(file), 0);
    assert_true(count > 0);
}

/* A word is a key, and what is stored of it stands right behind it in LMDB's pages. */
static void a_byte_that_went_wrong_in_a_word_is_met_when_it_is_wanted(void **state)
{
    struct keeping *keeping = *state;
    char path[FIXTURE_PATH_BYTES + 32];
    learner_file(&keeping->learner, "schoonerwreckage fog", TAGS(3));
    (void)keep(keeping, 1);
    (void)snprintf(path, sizeof path, "%s/model/data.mdb", keeping->home);
    damage_behind(path, "schoonerwreckage");
    assert_int_equal(restore(keeping), STORE_OK);
    assert_int_equal(ask_about(keeping, "fog"), 0);
    assert_int_equal(ask_about(keeping, "schoonerwreckage"), -EIO);
    assert_string_equal(keeping->base.error.text, "a stored word of the model is damaged");
}

static void a_model_without_a_head_cannot_be_loaded(void **state)
{
    assert_damaged(*state, "the stored model does not fit together");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_restored_model_answers_the_same),
        TEST(a_restored_model_goes_on_learning_the_same),
        TEST(a_restored_model_knows_what_was_found),
        TEST(a_restored_model_holds_words_and_weights_only_when_they_are_wanted),
        TEST(what_has_changed_since_is_stored_over_what_was),
        TEST(words_that_no_item_has_any_more_are_forgotten),
        TEST(a_store_that_is_reset_holds_nothing),
        TEST(a_new_home_holds_no_model),
        TEST(a_stored_model_tells_how_far_it_has_learned),
        TEST(a_model_of_other_settings_is_of_no_use),
        TEST(a_model_of_another_store_is_of_no_use),
        TEST(a_model_that_is_ahead_of_its_store_is_told),
        TEST(a_chunk_that_is_no_list_of_postings_is_met_when_it_is_wanted),
        TEST(totals_that_cannot_be_are_damage),
        TEST(a_bin_of_another_size_is_damage),
        TEST(a_byte_that_went_wrong_in_a_word_is_met_when_it_is_wanted),
        TEST(a_model_without_a_head_cannot_be_loaded),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
