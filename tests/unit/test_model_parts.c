/* The model stored part by part, put back, and gone on with. */
#include "daemon/learner/model_parts.h"

#include <errno.h>

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

enum {
    HISTORY_TAGS = 200, /* the word "log" has more than a chunk of weights */
    CHANGES = 900,
    STORE_EVERY = 37,
    QUESTIONS = 20
};

/* A history of items filed, revised and withdrawn, the same for every learner. */
struct change {
    const struct entry *item;
    const struct entry *replaced;
};

struct history {
    struct entry entries[CHANGES];
    struct change changes[CHANGES];
    const struct entry *live[CHANGES];
    size_t live_count;
};

static void write_change(struct history *history, struct stream *stream, size_t at)
{
    uint32_t truth[ENTRY_TAGS];
    uint32_t kind = repeatable_below(&stream->random, 10);
    struct change *change = &history->changes[at];
    size_t which = history->live_count;
    if (kind >= 6 && history->live_count > 10) {
        which = repeatable_below(&stream->random, (uint32_t)history->live_count);
        change->replaced = history->live[which];
    } else {
        history->live_count++;
    }
    if (kind >= 8 && change->replaced) {
        history->live[which] = history->live[--history->live_count];
        return;
    }
    (void)stream_next(stream, &history->entries[at], truth);
    change->item = &history->entries[at];
    if (kind == 1 && history->entries[at].tag_count > 0) {
        entry_add_tag(history->entries[at].examined, &history->entries[at].examined_count,
                      history->entries[at].tags[0]);
    }
    history->live[which] = change->item;
}

static int set_up(void **state)
{
    static struct history history;
    struct stream stream = {.random = {12}, .tag_count = HISTORY_TAGS, .given_share = 0.8};
    memset(&history, 0, sizeof history);
    for (size_t i = 0; i < CHANGES; i++) {
        write_change(&history, &stream, i);
    }
    *state = &history;
    return 0;
}

static struct model_settings settings_with_a_mean(void)
{
    struct model_settings settings = learner_settings();
    settings.even_out = true;
    settings.step = 0.0;
    settings.evidence_half_life_items = 20.0; /* the gain is taken back to 1 now and then */
    return settings;
}

/* Changes `from` to `to`, stored every so often and at the end. */
static void go_on(const struct history *history, size_t from, size_t to,
                  const struct learner *learner, struct memory *memory)
{
    for (size_t i = from; i < to; i++) {
        learner_change(learner, history->changes[i].item, history->changes[i].replaced);
        if (i % STORE_EVERY == 0) {
            memory_store(memory, learner->model);
        }
    }
    memory_store(memory, learner->model);
}

static void assert_same_answer(const struct model_answer *one, const struct model_answer *other)
{
    assert_int_equal(one->gap_count, other->gap_count);
    assert_true(one->expected == other->expected);
    assert_int_equal(one->early, other->early);
    for (size_t i = 0; i < one->gap_count; i++) {
        assert_int_equal(one->gaps[i].tag, other->gaps[i].tag);
        assert_true(one->gaps[i].chance == other->gaps[i].chance);
        assert_true(one->gaps[i].score == other->gaps[i].score);
        assert_int_equal(one->gaps[i].word_count, other->gaps[i].word_count);
        for (size_t k = 0; k < one->gaps[i].word_count; k++) {
            assert_int_equal(one->gaps[i].words[k].feature, other->gaps[i].words[k].feature);
            assert_true(one->gaps[i].words[k].share == other->gaps[i].words[k].share);
        }
    }
}

/* Drafts and filed items alike, to the last bit. */
static void assert_same_answers(const struct learner *one, const struct learner *other)
{
    struct stream stream = {.random = {13}, .tag_count = HISTORY_TAGS, .given_share = 0.5};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    for (int i = 0; i < QUESTIONS; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_question question = entry_question(&entry);
        question.tagged = i % 2 != 0;
        question.given = entry.tags;
        question.given_count = entry.tag_count;
        question.why = true;
        struct model_answer first = learner_answer(one, &question);
        struct model_answer second = learner_answer(other, &question);
        assert_same_answer(&first, &second);
    }
}

/* --- what has changed ---------------------------------------------------------------------------
 */

static void what_is_stored_is_not_put_out_again(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    learner_renew(&learner, &settings);
    go_on(*state, 0, 50, &learner, memory);
    memory_store(memory, learner.model);
    assert_int_equal(memory_parts_out(memory), 0);
    free(memory);
    learner_free(&learner);
}

static void what_was_not_said_to_be_stored_is_put_out_again(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    (void)state;
    learner_renew(&learner, &settings);
    learner_file(&learner, "fog", TAGS(0));
    memory_take(memory, learner.model);
    learner_file(&learner, "bell", TAGS(1));
    memory_take(memory, learner.model);
    assert_int_equal(memory->words_out, 2);
    assert_int_equal(memory->tags_out, 2);
    assert_int_equal(memory->chunks_out, 2);
    free(memory);
    learner_free(&learner);
}

static void one_item_puts_out_what_it_touched_alone(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    (void)state;
    learner_renew(&learner, &settings);
    for (int i = 0; i < 10; i++) {
        learner_file(&learner, "fog", TAGS(0));
    }
    learner_file(&learner, "horn", TAGS(0)); /* which the words before it say nothing of */
    memory_store(memory, learner.model);
    learner_file(&learner, "bell lamp", TAGS(1));
    memory_store(memory, learner.model);
    assert_int_equal(memory->words_out, 2);
    assert_int_equal(memory->chunks_out, 2);
    assert_int_equal(memory->tags_out, 2); /* 0 is a rival by its bias */
    free(memory);
    learner_free(&learner);
}

static void a_forgotten_word_is_put_out_once_by_its_name(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    struct entry fog;
    (void)state;
    learner_renew(&learner, &settings);
    entry_set(&fog, "fog", TAGS(0));
    learner_change(&learner, &fog, NULL);
    memory_store(memory, learner.model);
    assert_non_null(memory_find(memory, "fog"));
    learner_change(&learner, NULL, &fog);
    memory_store(memory, learner.model);
    assert_int_equal(memory->forgotten_out, 1);
    assert_int_equal(memory->words_out, 0);
    assert_null(memory_find(memory, "fog"));
    memory_store(memory, learner.model);
    assert_int_equal(memory->forgotten_out, 0);
    free(memory);
    learner_free(&learner);
}

/* Forgotten and used again between two stores: the name goes and comes, the old weights go. */
static void a_word_that_goes_and_comes_back_is_stored_as_new(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    struct entry fog;
    (void)state;
    learner_renew(&learner, &settings);
    entry_set(&fog, "fog", TAGS(0));
    learner_change(&learner, &fog, NULL);
    memory_store(memory, learner.model);
    learner_change(&learner, NULL, &fog);
    learner_file(&learner, "fog", NO_TAGS);
    memory_store(memory, learner.model);
    const struct memory_word *kept = memory_find(memory, "fog");
    assert_non_null(kept);
    assert_int_equal(kept->count, 1);
    assert_int_equal(kept->chunks[0].count, 0);
    free(memory);
    learner_free(&learner);
}

/* What is stored after all the comings and goings is what the live items hold, no more. */
static void the_stored_counts_are_those_of_the_live_items(void **state)
{
    const struct history *history = *state;
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    learner_renew(&learner, &settings);
    go_on(history, 0, CHANGES, &learner, memory);
    assert_int_equal(memory->totals.documents, history->live_count);
    for (size_t i = 0; i < history->live_count; i++) {
        const struct entry *entry = history->live[i];
        for (size_t k = 0; k < entry->feature_count; k++) {
            char term[MEMORY_TERM] = "";
            memcpy(term, entry->features[k].term, entry->features[k].term_bytes);
            for (size_t w = 0; w < MEMORY_WORDS; w++) {
                if (memory->words[w].is_set && strcmp(memory->words[w].term, term) == 0) {
                    memory->words[w].count--;
                }
            }
        }
        for (size_t k = 0; k < entry->tag_count; k++) {
            memory->tags[entry->tags[k]].count--;
            memory->tags[entry->tags[k]].unprompted--;
        }
        for (size_t k = 0; k < entry->examined_count; k++) {
            memory->tags[entry->examined[k]].unprompted++;
        }
    }
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        assert_int_equal(memory->words[w].count, 0);
    }
    for (size_t tag = 0; tag < MEMORY_TAGS; tag++) {
        assert_int_equal(memory->tags[tag].count, 0);
        assert_int_equal(memory->tags[tag].unprompted, 0);
    }
    free(memory);
    learner_free(&learner);
}

static int refuse_bin(void *user, const struct model_figures *figures)
{
    (void)user;
    return figures->kind == MODEL_FIGURES_BIN && figures->number == 3 ? -ENOSPC : 0;
}

static void whoever_stores_may_refuse_a_part(void **state)
{
    struct learner learner = {0};
    const struct model_settings settings = learner_settings();
    struct memory *memory = memory_new();
    struct model_sink sink = memory_sink(memory);
    sink.figures = refuse_bin;
    (void)state;
    learner_renew(&learner, &settings);
    learner_file(&learner, "fog", TAGS(0));
    assert_int_equal(model_changes(learner.model, &sink), -ENOSPC);
    memory_store(memory, learner.model);
    assert_int_equal(memory->words_out, 1); /* it is still to be stored */
    free(memory);
    learner_free(&learner);
}

/* --- the same numbers every time ----------------------------------------------------------------
 */

static void the_same_items_give_the_same_model_whatever_the_key(void **state)
{
    const struct siphash_key other_key = {99, 1};
    const struct model_settings settings = settings_with_a_mean();
    struct learner one = {0};
    struct learner other = {0};
    struct memory *memory = memory_new();
    struct memory *other_memory = memory_new();
    learner_renew(&one, &settings);
    assert_int_equal(model_new(&settings, &other_key, &other.model), 0);
    assert_int_equal(model_scratch_new(&other.scratch), 0);
    go_on(*state, 0, CHANGES, &one, memory);
    go_on(*state, 0, CHANGES, &other, other_memory);
    memory_assert_same(memory, other_memory);
    assert_same_answers(&one, &other);
    free(memory);
    free(other_memory);
    learner_free(&one);
    learner_free(&other);
}

/* Stopped after every third of the history, put back, and gone on with. */
static void a_model_put_back_goes_on_to_the_same_numbers(void **state)
{
    const struct model_settings settings = settings_with_a_mean();
    struct learner whole = {0};
    struct learner stopped = {0};
    struct memory *memory = memory_new();
    struct memory *stopped_memory = memory_new();
    learner_renew(&whole, &settings);
    learner_renew(&stopped, &settings);
    go_on(*state, 0, CHANGES, &whole, memory);
    for (size_t third = 0; third < 3; third++) {
        go_on(*state, third * CHANGES / 3, (third + 1) * CHANGES / 3, &stopped, stopped_memory);
        learner_renew(&stopped, &settings);
        memory_restore(stopped_memory, stopped.model);
    }
    memory_assert_same(memory, stopped_memory);
    assert_same_answers(&whole, &stopped);
    bool has_second_chunk = memory_find(memory, "log")->chunks[1].count > 0;
    assert_true(has_second_chunk); /* or the test is weaker than it says */
    free(memory);
    free(stopped_memory);
    learner_free(&whole);
    learner_free(&stopped);
}

/* An entry revised, one withdrawn, and numbers below a used one that no item ever had: 0 and 1 have
 * lost their items, 2 and 3 never had any, 4 is in use. */
static void leave_tags_unused(const struct learner *learner)
{
    struct entry fog;
    struct entry revised;
    struct entry bell;
    entry_set(&fog, "fog lamp", TAGS(0));
    entry_set(&revised, "fog lamp", TAGS(4));
    entry_set(&bell, "bell lamp", TAGS(1));
    learner_change(learner, &fog, NULL);
    learner_change(learner, &bell, NULL);
    learner_change(learner, &revised, &fog);
    learner_change(learner, NULL, &bell);
}

static void tags_that_no_item_has_are_as_unused_after_the_model_was_put_back(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner whole = {0};
    struct learner other = {0};
    struct memory *memory = memory_new();
    struct entry entry;
    (void)state;
    learner_renew(&whole, &settings);
    learner_renew(&other, &settings);
    leave_tags_unused(&whole);
    memory_store(memory, whole.model);
    memory_restore(memory, other.model);
    for (int i = 0; i < 4; i++) {
        entry_set(&entry, i % 2 == 0 ? "fog lamp" : "moon", NO_TAGS);
        struct model_question question = entry_question(&entry);
        question.tagged = i / 2 != 0;
        struct model_answer first = learner_answer(&whole, &question);
        struct model_answer second = learner_answer(&other, &question);
        assert_int_equal(second.gap_count, 1);
        assert_int_equal(second.gaps[0].tag, 4);
        assert_near(second.expected, second.gaps[0].chance, 1e-11);
        assert_same_answer(&first, &second);
    }
    free(memory);
    learner_free(&whole);
    learner_free(&other);
}

static void a_model_just_put_back_has_nothing_to_store(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner learner = {0};
    struct memory *memory = memory_new();
    learner_renew(&learner, &settings);
    go_on(*state, 0, 50, &learner, memory);
    struct model_size size = learner_size(&learner);
    learner_renew(&learner, &settings);
    memory_restore(memory, learner.model);
    assert_int_equal(learner_size(&learner).documents, size.documents);
    assert_int_equal(learner_size(&learner).words, size.words);
    assert_int_equal(learner_size(&learner).tags, size.tags);
    assert_int_equal(learner_size(&learner).postings, size.postings);
    memory_store(memory, learner.model);
    assert_int_equal(memory_parts_out(memory), 0);
    free(memory);
    learner_free(&learner);
}

/* The scratch keeps the chances as of the empty model; they must not outlive it. */
static void a_question_before_the_model_was_put_back_spoils_no_answer(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner whole = {0};
    struct learner asked = {0};
    struct memory *memory = memory_new();
    learner_renew(&whole, &settings);
    learner_renew(&asked, &settings);
    go_on(*state, 0, 300, &whole, memory);
    (void)learner_ask(&asked, "log");
    memory_restore(memory, asked.model);
    assert_same_answers(&whole, &asked);
    free(memory);
    learner_free(&whole);
    learner_free(&asked);
}

/* --- what cannot belong to one model ------------------------------------------------------------
 */

static void a_word_is_not_put_back_twice(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner learner = {0};
    const struct model_word fog = {.term = "fog", .term_bytes = 3, .number = 0, .count = 1};
    const struct model_word same_number = {.term = "bell", .term_bytes = 4, .number = 0};
    const struct model_word same_term = {.term = "fog", .term_bytes = 3, .number = 1};
    (void)state;
    learner_renew(&learner, &settings);
    assert_int_equal(model_restore_word(learner.model, &fog), 0);
    assert_int_equal(model_restore_word(learner.model, &same_number), -EINVAL);
    assert_int_equal(model_restore_word(learner.model, &same_term), -EINVAL);
    learner_free(&learner);
}

static void a_chunk_out_of_order_and_a_bin_too_many_are_refused(void **state)
{
    const struct model_settings settings = learner_settings();
    const struct calibrators_bin bin = {0};
    const struct model_figures figures = {.kind = MODEL_FIGURES_BIN,
                                          .number = CALIBRATORS_BINS,
                                          .count = sizeof bin / sizeof(double),
                                          .values = &bin.cells[0].pairs};
    const float number = 0.5F;
    const uint32_t tag = 0;
    const struct weights_chunk chunk = {
        .number = 1, .count = 1, .tags = &tag, .values = &number, .accumulators = &number};
    const struct model_word fog = {.term = "fog", .term_bytes = 3, .number = 0, .count = 1};
    struct learner learner = {0};
    (void)state;
    learner_renew(&learner, &settings);
    assert_int_equal(model_restore_word(learner.model, &fog), 0);
    assert_int_equal(model_restore_chunk(learner.model, &chunk), -EINVAL);
    assert_int_equal(model_restore_figures(learner.model, &figures), -EINVAL);
    learner_free(&learner);
}

int main(void)
{
#define parts_test(name) cmocka_unit_test_setup(name, set_up)
    const struct CMUnitTest tests[] = {
        parts_test(what_is_stored_is_not_put_out_again),
        cmocka_unit_test(what_was_not_said_to_be_stored_is_put_out_again),
        cmocka_unit_test(one_item_puts_out_what_it_touched_alone),
        cmocka_unit_test(a_forgotten_word_is_put_out_once_by_its_name),
        cmocka_unit_test(a_word_that_goes_and_comes_back_is_stored_as_new),
        parts_test(the_stored_counts_are_those_of_the_live_items),
        cmocka_unit_test(whoever_stores_may_refuse_a_part),
        parts_test(the_same_items_give_the_same_model_whatever_the_key),
        parts_test(a_model_put_back_goes_on_to_the_same_numbers),
        cmocka_unit_test(tags_that_no_item_has_are_as_unused_after_the_model_was_put_back),
        parts_test(a_model_just_put_back_has_nothing_to_store),
        parts_test(a_question_before_the_model_was_put_back_spoils_no_answer),
        cmocka_unit_test(a_word_is_not_put_back_twice),
        cmocka_unit_test(a_chunk_out_of_order_and_a_bin_too_many_are_refused),
    };
    return cmocka_run_group_tests_name("storing the model", tests, NULL, NULL);
}
