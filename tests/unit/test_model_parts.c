/* The model stored part by part, put back, and gone on with. */
#include "daemon/learner/model_parts.h"

#include <errno.h>

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

/* A learner with a shadow that has seen some of everything. */
static void learn_some(struct learner *learner)
{
    struct model_settings settings = learner_settings();
    struct stream stream = {.random = {12}, .tag_count = 20, .given_share = 0.8};
    uint32_t truth[ENTRY_TAGS];
    static struct entry entry;
    struct entry ruled;
    settings.shadow = true;
    learner_renew(learner, &settings);
    for (int i = 0; i < 50; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(learner, &entry, NULL);
    }
    entry_set(&entry, DRAFT, TAGS(9));
    learner_change(learner, &entry, NULL);
    entry_follow(&ruled, &entry);
    entry_find_tag(&ruled, 3);
    entry_try_tag(&ruled, 3, false);
    ruled.checked_below = 20;
    learner_change(learner, &ruled, &entry);
}

/* Stores what has changed; the learner reads it there from then on. */
static void store(struct memory *memory, struct learner *learner)
{
    memory_store(memory, learner->model);
    learner_read(learner, &memory->base);
}

/* Back into a new learner. */
static void restore(struct memory *memory, struct learner *learner)
{
    memory_restore(memory, learner->model);
    learner_read(learner, &memory->base);
}

/* --- what has changed ---------------------------------------------------------------------------
 */

static void what_is_stored_is_not_put_out_again(void **state)
{
    struct learner learner = {0};
    struct memory *memory = memory_new();
    (void)state;
    learn_some(&learner);
    store(memory, &learner);
    assert_true(memory->out.chunks > 0 && memory->out.listed > 0);
    store(memory, &learner);
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
    assert_int_equal(memory->out.words, 2);
    assert_int_equal(memory->out.tags, 2);
    assert_int_equal(memory->out.chunks, 2);
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
    store(memory, &learner);
    learner_file(&learner, "bell lamp", TAGS(1));
    store(memory, &learner);
    assert_int_equal(memory->out.words, 2);
    assert_int_equal(memory->out.chunks, 2);
    assert_int_equal(memory->out.tags, 2); /* 0 is a rival by its bias */
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
    store(memory, &learner);
    assert_non_null(memory_find(memory, "fog"));
    learner_change(&learner, NULL, &fog);
    store(memory, &learner);
    assert_int_equal(memory->out.forgotten, 1);
    assert_int_equal(memory->out.words, 0);
    assert_null(memory_find(memory, "fog"));
    store(memory, &learner);
    assert_int_equal(memory->out.forgotten, 0);
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
    store(memory, &learner);
    learner_change(&learner, NULL, &fog);
    learner_file(&learner, "fog", NO_TAGS);
    store(memory, &learner);
    const struct memory_word *kept = memory_find(memory, "fog");
    assert_non_null(kept);
    assert_int_equal(kept->count, 1);
    assert_int_equal(kept->chunks[0].size, 0);
    assert_int_equal(memory_word_count(memory), 1);
    free(memory);
    learner_free(&learner);
}

/* Of fifty items and one that was ruled on: its entry has gone over to its new number. */
static void an_entry_that_goes_is_put_out_by_its_number(void **state)
{
    struct learner learner = {0};
    struct memory *memory = memory_new();
    struct entry fog;
    (void)state;
    learn_some(&learner);
    entry_set(&fog, "fog", TAGS(0));
    learner_change(&learner, &fog, NULL);
    store(memory, &learner);
    size_t listed = memory->entry_count;
    assert_int_equal(listed, 52);
    assert_non_null(memory_find_entry(memory, fog.number));
    learner_change(&learner, NULL, &fog);
    store(memory, &learner);
    assert_int_equal(memory->out.delisted, 1);
    assert_int_equal(memory->out.listed, 0);
    assert_null(memory_find_entry(memory, fog.number));
    assert_int_equal(memory->entry_count, listed - 1);
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
    store(memory, &learner);
    assert_int_equal(memory->out.words, 1); /* it is still to be stored */
    free(memory);
    learner_free(&learner);
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
    store(memory, &whole);
    restore(memory, &other);
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
    struct model_settings settings = learner_settings();
    struct learner learner = {0};
    struct memory *memory = memory_new();
    (void)state;
    learn_some(&learner);
    store(memory, &learner);
    struct model_size size = learner_size(&learner);
    settings.shadow = true;
    learner_renew(&learner, &settings);
    restore(memory, &learner);
    assert_int_equal(learner_size(&learner).documents, size.documents);
    assert_int_equal(learner_size(&learner).words, size.words);
    assert_int_equal(learner_size(&learner).tags, size.tags);
    assert_int_equal(learner_size(&learner).postings, size.postings);
    assert_int_equal(learner_size(&learner).listed, size.listed);
    assert_int_equal(learner_size(&learner).stale, size.stale);
    store(memory, &learner);
    assert_int_equal(memory_parts_out(memory), 0);
    free(memory);
    learner_free(&learner);
}

/* --- what cannot belong to one model ------------------------------------------------------------
 */

/* Numbers are given out from 0 on, so there are as many words at most. */
static void more_words_than_numbers_are_refused(void **state)
{
    const struct model_settings settings = learner_settings();
    struct learner learner = {0};
    struct model_totals totals = {.words = {.next_number = 3, .size = 4}};
    (void)state;
    learner_renew(&learner, &settings);
    assert_int_equal(model_restore_totals(learner.model, &totals), -EINVAL);
    totals.words.size = 3;
    assert_int_equal(model_restore_totals(learner.model, &totals), 0);
    learner_free(&learner);
}

/* The counts of the worklist say how many entries there are twice over: in all, and by age. */
static void counts_of_the_worklist_that_disagree_are_refused(void **state)
{
    struct learner learner = {0};
    struct memory *memory = memory_new();
    const struct model_settings settings = learner_settings();
    (void)state;
    learn_some(&learner);
    store(memory, &learner);
    learner_renew(&learner, &settings);
    struct model_figures figures = {.kind = MODEL_FIGURES_WORKLIST,
                                    .number = 0,
                                    .count = memory->figures[MODEL_FIGURES_WORKLIST][0].count,
                                    .values = memory->figures[MODEL_FIGURES_WORKLIST][0].values};
    assert_int_equal(model_restore_figures(learner.model, &figures), 0);
    assert_int_equal(model_restored(learner.model), -EINVAL);
    free(memory);
    learner_free(&learner);
}

/* Each list with a number too many, and with a value too many. */
static void a_list_of_figures_too_many_or_too_long_is_refused(void **state)
{
    struct learner learner = {0};
    struct memory *memory = memory_new();
    (void)state;
    learn_some(&learner);
    store(memory, &learner);
    for (int kind = 0; kind < MODEL_FIGURES_KINDS; kind++) {
        struct model_figures figures = {.kind = (enum model_figures_kind)kind};
        const struct memory_figures *kept = memory->figures[kind];
        assert_true(kept[0].count > 0);
        figures.values = kept[0].values;
        figures.count = kept[0].count + 1;
        assert_int_equal(model_restore_figures(learner.model, &figures), -EINVAL);
        figures.count = kept[0].count;
        assert_int_equal(model_restore_figures(learner.model, &figures), 0);
        figures.number = MEMORY_FIGURES;
        assert_int_equal(model_restore_figures(learner.model, &figures), -EINVAL);
    }
    struct model_figures bin = {.kind = MODEL_FIGURES_BIN,
                                .number = CALIBRATORS_BINS,
                                .count = memory->figures[MODEL_FIGURES_BIN][0].count,
                                .values = memory->figures[MODEL_FIGURES_BIN][0].values};
    assert_int_equal(model_restore_figures(learner.model, &bin), -EINVAL);
    bin.kind = MODEL_FIGURES_KINDS;
    assert_int_equal(model_restore_figures(learner.model, &bin), -EINVAL);
    free(memory);
    learner_free(&learner);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_is_stored_is_not_put_out_again),
        cmocka_unit_test(what_was_not_said_to_be_stored_is_put_out_again),
        cmocka_unit_test(one_item_puts_out_what_it_touched_alone),
        cmocka_unit_test(a_forgotten_word_is_put_out_once_by_its_name),
        cmocka_unit_test(a_word_that_goes_and_comes_back_is_stored_as_new),
        cmocka_unit_test(an_entry_that_goes_is_put_out_by_its_number),
        cmocka_unit_test(whoever_stores_may_refuse_a_part),
        cmocka_unit_test(tags_that_no_item_has_are_as_unused_after_the_model_was_put_back),
        cmocka_unit_test(a_model_just_put_back_has_nothing_to_store),
        cmocka_unit_test(more_words_than_numbers_are_refused),
        cmocka_unit_test(counts_of_the_worklist_that_disagree_are_refused),
        cmocka_unit_test(a_list_of_figures_too_many_or_too_long_is_refused),
    };
    return cmocka_run_group_tests_name("storing the model", tests, NULL, NULL);
}
