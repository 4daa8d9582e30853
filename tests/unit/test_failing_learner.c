/*
 * The learner without memory: whichever allocation fails, it says so, nothing leaks, and what only
 * asks leaves the model as it was.
 */
#include "daemon/learner/model.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>

#include "daemon/learner/model_parts.h"
#include "tests/unit/failing_calls.h"
#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

enum {
    STORED_ITEMS = 120,
    LEARNED_ITEMS = 12
};

/* What was learned before, as it is stored; and what a model that is made of it meets. */
struct life {
    struct memory *memory;
    struct memory *arriving;
    struct learner learner;
    struct entry filed; /* of what is stored: has tag 20, may lack 3 and 9 */
    struct entry entries[LEARNED_ITEMS];
    struct entry revised;
    struct entry ruled;
    struct entry checked;
    double expected; /* an answer before anything failed */
};

static int set_up(void **state)
{
    static struct life life;
    const struct model_settings settings = learner_settings();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    life = (struct life){.memory = memory_new(), .arriving = memory_new()};
    learner_renew(&life.learner, &settings);
    learner_read(&life.learner, &life.memory->base);
    for (int i = 0; i < STORED_ITEMS; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(&life.learner, &entry, NULL);
    }
    entry_set(&life.filed, DRAFT, TAGS(20));
    learner_change(&life.learner, &life.filed, NULL);
    memory_store(life.memory, life.learner.model);
    learner_trim(&life.learner, 0, 0);
    for (int i = 0; i < LEARNED_ITEMS; i++) {
        (void)stream_next(&stream, &life.entries[i], truth);
    }
    entry_set(&life.revised, "log t3q0 gale", TAGS(3, 41)); /* a word and a tag that are new */
    entry_follow(&life.ruled, &life.revised);
    entry_find_tag(&life.ruled, 9);
    entry_deny_tag(&life.ruled, 20);
    entry_follow(&life.checked, &life.ruled);
    life.checked.checked_below = STREAM_TAGS;
    entry_try_tag(&life.checked, 3, true);
    entry_try_tag(&life.checked, 9, false);
    *state = &life;
    return 0;
}

static int tear_down(void **state)
{
    struct life *life = *state;
    learner_free(&life->learner);
    free(life->memory);
    free(life->arriving);
    return 0;
}

static void check_no_memory(void *user, int result)
{
    (void)user;
    assert_int_equal(result, -ENOMEM);
}

/* --- a model's life: whatever fails, it is of no use any more, and is freed ---------------------
 */

static int take_up_figures(const struct memory *memory, struct model *model)
{
    int code = 0;
    for (int kind = 0; kind < MODEL_FIGURES_KINDS; kind++) {
        for (uint32_t number = 0; number < MEMORY_FIGURES && code == 0; number++) {
            const struct memory_figures *kept = &memory->figures[kind][number];
            const struct model_figures figures = {.kind = (enum model_figures_kind)kind,
                                                  .number = number,
                                                  .count = kept->count,
                                                  .values = kept->values};
            code = kept->count > 0 ? model_restore_figures(model, &figures) : 0;
        }
    }
    return code;
}

static int take_up(const struct memory *memory, struct model *model)
{
    int code = 0;
    for (uint32_t tag = 0; tag < MEMORY_TAGS && code == 0; tag++) {
        code = memory->has_tag[tag] ? model_restore_tag(model, &memory->tags[tag]) : 0;
    }
    code = code == 0 ? take_up_figures(memory, model) : code;
    code = code == 0 ? model_restore_totals(model, &memory->totals) : code;
    return code == 0 ? model_restored(model) : code;
}

static int learn(const struct learner *learner, const struct entry *item,
                 const struct entry *replaced)
{
    const struct model_item new_item = item ? entry_item(item) : (struct model_item){0};
    const struct model_item old_item = replaced ? entry_item(replaced) : (struct model_item){0};
    return model_learn(learner->model, item ? &new_item : NULL, replaced ? &old_item : NULL,
                       learner->scratch);
}

static int learn_changes(const struct life *life, const struct learner *learner)
{
    int code = 0;
    for (int i = 0; i < LEARNED_ITEMS && code == 0; i++) {
        code = learn(learner, &life->entries[i], NULL);
    }
    code = code == 0 ? learn(learner, &life->revised, &life->filed) : code;
    code = code == 0 ? learn(learner, &life->ruled, &life->revised) : code;
    code = code == 0 ? learn(learner, &life->checked, &life->ruled) : code;
    return code == 0 ? learn(learner, NULL, &life->entries[0]) : code;
}

/* One item's turn; which it is, makes no difference here. */
static int rehearse(const struct life *life, const struct learner *learner)
{
    uint64_t number = 0;
    struct model_item item = entry_item(&life->entries[1]);
    int code = model_next_rehearsal(learner->model, learner->base, &number);
    item.number = number;
    return code == 0 ? model_rehearse(learner->model, &item, learner->scratch) : code;
}

static int score_again(const struct life *life, const struct learner *learner)
{
    const struct model_item item = entry_item(&life->entries[2]);
    struct worklist_entry listed;
    int code = model_rescore(learner->model, &item, learner->scratch, &listed);
    code = code == 0 ? model_relist(learner->model, learner->base, &listed) : code;
    return code == 0 ? model_delist(learner->model, learner->base, life->entries[3].number) : code;
}

static int store(struct life *life, struct model *model)
{
    const struct model_sink sink = memory_sink(life->arriving);
    int code = model_changes(model, &sink);
    code = code == 0 ? model_seal(model) : code;
    while (code == 0 && model_seal_words(model)) {
    }
    return code;
}

static int live(void *user)
{
    struct life *life = user;
    const struct model_settings settings = learner_settings();
    const struct siphash_key key = {7, 8};
    struct learner learner = {.base = &life->memory->base};
    memcpy(life->arriving, life->memory, sizeof *life->arriving);
    int code = model_new(&settings, &key, &learner.model);
    code = code == 0 ? model_scratch_new(&learner.scratch) : code;
    if (code == 0) {
        model_scratch_read(learner.scratch, learner.base);
        code = take_up(life->memory, learner.model);
    }
    code = code == 0 ? learn_changes(life, &learner) : code;
    code = code == 0 ? rehearse(life, &learner) : code;
    code = code == 0 ? score_again(life, &learner) : code;
    code = code == 0 ? store(life, learner.model) : code;
    code = code == 0 ? learn(&learner, &life->entries[0], NULL) : code; /* above what is sealed */
    learner_free(&learner);
    return code;
}

static void a_model_that_has_no_memory_says_so_and_gives_back_what_it_had(void **state)
{
    assert_true(failing_each(FAILING_MEMORY, live, check_no_memory, *state) > 50);
}

/* --- asking: the model stays as it is -----------------------------------------------------------
 */

static int ask_about(const struct life *life, struct model_scratch *scratch, double *ret_expected)
{
    struct model_question question = filed_question(&life->filed);
    struct model_answer answer;
    question.why = true;
    int code = model_ask(life->learner.model, &question, scratch, &answer);
    if (code == 0) {
        *ret_expected = answer.expected;
    }
    return code;
}

static int ask_with_a_new_scratch(void *user)
{
    struct life *life = user;
    struct model_scratch *scratch = NULL;
    double expected = life->expected;
    int code = model_scratch_new(&scratch);
    if (code == 0) {
        model_scratch_read(scratch, &life->memory->base);
        code = ask_about(life, scratch, &expected);
    }
    model_scratch_free(scratch);
    assert_true(expected == life->expected);
    return code;
}

/* The workspace of a question that found no memory answers the next one. */
static int ask_twice_with_one_scratch(void *user)
{
    struct life *life = user;
    struct model_scratch *scratch = NULL;
    double expected = 0.0;
    int code = model_scratch_new(&scratch);
    if (code < 0) {
        return code;
    }
    model_scratch_read(scratch, &life->memory->base);
    code = ask_about(life, scratch, &expected);
    if (code < 0) {
        assert_int_equal(code, -ENOMEM);
        assert_int_equal(ask_about(life, scratch, &expected), 0);
    }
    assert_true(expected == life->expected);
    model_scratch_free(scratch);
    return code;
}

static void a_question_that_has_no_memory_leaves_the_model_as_it_is(void **state)
{
    struct life *life = *state;
    assert_int_equal(ask_about(life, life->learner.scratch, &life->expected), 0);
    assert_true(life->expected > 0.0);
    assert_true(failing_each(FAILING_MEMORY, ask_with_a_new_scratch, check_no_memory, life) > 5);
}

static void a_scratch_that_had_no_memory_answers_the_next_question(void **state)
{
    struct life *life = *state;
    assert_int_equal(ask_about(life, life->learner.scratch, &life->expected), 0);
    assert_true(failing_each(FAILING_MEMORY, ask_twice_with_one_scratch, check_no_memory, life) >
                5);
}

static int rank(void *user)
{
    struct life *life = user;
    struct model_ranked *ranked = NULL;
    size_t count = 0;
    int code = model_rank_worklist(life->learner.model, &life->memory->base, MODEL_ANY_TAG, 0.0,
                                   &ranked, &count);
    assert_true(code == 0 ? count > 0 : !ranked);
    free(ranked);
    return code;
}

static void a_worklist_that_has_no_memory_is_not_half_a_worklist(void **state)
{
    assert_true(failing_each(FAILING_MEMORY, rank, check_no_memory, *state) > 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_model_that_has_no_memory_says_so_and_gives_back_what_it_had),
        TEST(a_question_that_has_no_memory_leaves_the_model_as_it_is),
        TEST(a_scratch_that_had_no_memory_answers_the_next_question),
        TEST(a_worklist_that_has_no_memory_is_not_half_a_worklist),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
