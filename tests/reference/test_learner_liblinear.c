/*
 * The online learner against a batch solver: liblinear's dual coordinate descent for the squared
 * hinge (Hsieh et al., ICML 2008), one problem a tag, its positives weighed by 2/p - 1 as ours are.
 *
 * The corpus is invented and the same in every run: entries of one to three tags, low numbers far
 * more often; each tag has words of its own, but two words in five are another tag's; and a tag
 * that belongs is given with a known p. Both learn from what was given, both see the same x, and
 * both are judged by what is true.
 */
#include "daemon/learner/weights.h"

#include <linear.h>
#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include <cmocka.h>

#include "tests/unit/near.h"
#include "tests/unit/repeatable.h"

enum {
    TAGS = 40,
    WORDS_OF_TAG = 6,
    COMMON_WORDS = 80,
    WORDS = TAGS * WORDS_OF_TAG + COMMON_WORDS,
    WORDS_OF_ENTRY = 14,
    TRAINED = 1600,
    TESTED = 800,
    ENTRIES = TRAINED + TESTED,
    PASSES = 3
};

static const double STEP = 0.15; /* for few tags; with .3 a third pass learns the noise by heart */
static const double BATCH_COST = 0.3;

struct entry {
    uint32_t words[WORDS_OF_ENTRY];
    float values[WORDS_OF_ENTRY]; /* x */
    size_t word_count;
    bool belongs[TAGS];
    bool is_given[TAGS];
};

/* Scores of every tag for every tested entry. */
struct scores {
    double of[TESTED][TAGS];
};

struct corpus {
    struct entry entries[ENTRIES];
    uint32_t document_counts[WORDS];
    uint32_t tag_counts[TAGS]; /* given, among the trained */
    struct scores online;
    struct scores batch;
    struct scores plain; /* online, every pair counting once */
    struct scores popularity;
};

/* --- the corpus ---------------------------------------------------------------------------------
 */

static double propensity_of(uint32_t tag)
{
    return 0.9 - 0.6 * tag / TAGS;
}

static double given_factor(uint32_t tag)
{
    return surrogate_given_factor(propensity_of(tag));
}

static void add_word(struct entry *entry, uint32_t word)
{
    for (size_t i = 0; i < entry->word_count; i++) {
        if (entry->words[i] == word) {
            return;
        }
    }
    assert_true(entry->word_count < WORDS_OF_ENTRY);
    entry->words[entry->word_count++] = word;
}

static uint32_t word_of_tag(struct repeatable *random, uint32_t tag)
{
    uint32_t speaking = repeatable_share(random) < 0.6 ? tag : repeatable_below(random, TAGS);
    return speaking * WORDS_OF_TAG + repeatable_below(random, WORDS_OF_TAG);
}

static void write_entry(struct repeatable *random, struct entry *entry)
{
    uint32_t tag_count = 1 + repeatable_below(random, 3);
    for (uint32_t i = 0; i < tag_count; i++) {
        double share = repeatable_share(random);
        uint32_t tag = (uint32_t)(share * share * TAGS);
        entry->belongs[tag] = true;
        entry->is_given[tag] = repeatable_share(random) < propensity_of(tag);
        for (int k = 0; k < 3; k++) {
            add_word(entry, word_of_tag(random, tag));
        }
    }
    for (int k = 0; k < 4; k++) {
        double share = repeatable_share(random);
        add_word(entry, TAGS * WORDS_OF_TAG + (uint32_t)(share * share * COMMON_WORDS));
    }
}

/* x = idf, L2-normalised; from the counts of the trained entries. */
static void weigh_words(const struct corpus *corpus, struct entry *entry)
{
    double squares = 0.0;
    for (size_t i = 0; i < entry->word_count; i++) {
        double count = 1.0 + corpus->document_counts[entry->words[i]];
        entry->values[i] = (float)log(1.0 + TRAINED / count);
        squares += (double)entry->values[i] * (double)entry->values[i];
    }
    for (size_t i = 0; i < entry->word_count; i++) {
        entry->values[i] /= (float)sqrt(squares);
    }
}

static void write_corpus(struct corpus *corpus)
{
    struct repeatable random = {77};
    for (size_t i = 0; i < ENTRIES; i++) {
        struct entry *entry = &corpus->entries[i];
        write_entry(&random, entry);
        for (size_t k = 0; i < TRAINED && k < entry->word_count; k++) {
            corpus->document_counts[entry->words[k]]++;
        }
        for (size_t tag = 0; i < TRAINED && tag < TAGS; tag++) {
            corpus->tag_counts[tag] += entry->is_given[tag];
        }
    }
    for (size_t i = 0; i < ENTRIES; i++) {
        weigh_words(corpus, &corpus->entries[i]);
    }
}

/* --- the online learner -------------------------------------------------------------------------
 */

static size_t features_of(const struct entry *entry, struct weights_feature *x)
{
    for (size_t i = 0; i < entry->word_count; i++) {
        x[i] = (struct weights_feature){
            .word = entry->words[i], .document_count = 1, .value = entry->values[i]};
    }
    return entry->word_count;
}

static void learn_entry(struct weights *weights, struct weights_scratch *scratch,
                        const struct entry *entry, uint64_t number, bool corrected)
{
    struct weights_feature x[WORDS_OF_ENTRY];
    struct weights_given given[TAGS];
    size_t count = features_of(entry, x);
    size_t given_count = 0;
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        if (entry->is_given[tag]) {
            given[given_count++] = (struct weights_given){
                .tag = tag, .tag_count = 1, .factors = {corrected ? given_factor(tag) : 1.0}};
        }
    }
    assert_int_equal(weights_score(weights, NULL, x, count, 1, scratch), 0);
    assert_int_equal(weights_admit(weights, NULL, x, count), 0);
    assert_int_equal(weights_learn(weights,
                                   &(const struct weights_example){.number = number,
                                                                   .lanes = 1,
                                                                   .x = x,
                                                                   .count = count,
                                                                   .given = given,
                                                                   .given_count = given_count,
                                                                   .step = STEP},
                                   scratch),
                     0);
}

static void learn_online(const struct corpus *corpus, bool corrected, struct scores *ret_scores)
{
    const struct weights_settings settings = {.surrogate = SURROGATE_SQUARED_HINGE};
    struct weights *weights = NULL;
    struct weights_scratch *scratch = NULL;
    struct weights_feature x[WORDS_OF_ENTRY];
    assert_int_equal(weights_new(&settings, &weights), 0);
    assert_int_equal(weights_scratch_new(&scratch), 0);
    assert_int_equal(weights_reserve_tags(weights, TAGS), 0);
    uint64_t number = 0;
    for (int pass = 0; pass < PASSES; pass++) {
        for (size_t i = 0; i < TRAINED; i++) {
            learn_entry(weights, scratch, &corpus->entries[i], number++, corrected);
        }
    }
    for (size_t i = 0; i < TESTED; i++) {
        size_t count = features_of(&corpus->entries[TRAINED + i], x);
        assert_int_equal(weights_score(weights, NULL, x, count, 1, scratch), 0);
        for (uint32_t tag = 0; tag < TAGS; tag++) {
            ret_scores->of[i][tag] = (double)weights_tag_score(weights, scratch, WEIGHTS_MAIN, tag);
        }
    }
    weights_scratch_free(scratch);
    weights_free(weights);
}

/* --- the batch solver ---------------------------------------------------------------------------
 */

enum {
    NODES_OF_ENTRY = WORDS_OF_ENTRY + 2 /* the bias, and the end */
};

struct batch {
    struct feature_node nodes[ENTRIES][NODES_OF_ENTRY];
    struct feature_node *rows[ENTRIES];
    double targets[ENTRIES];
};

static int compare_nodes(const void *left, const void *right)
{
    const struct feature_node *a = left;
    const struct feature_node *b = right;
    return a->index - b->index;
}

/* Words from 1 on by rising number, the bias as one more, -1 at the end. */
static void write_row(const struct entry *entry, struct feature_node *nodes)
{
    for (size_t i = 0; i < entry->word_count; i++) {
        nodes[i] = (struct feature_node){(int)entry->words[i] + 1, (double)entry->values[i]};
    }
    qsort(nodes, entry->word_count, sizeof *nodes, compare_nodes);
    nodes[entry->word_count] = (struct feature_node){WORDS + 1, 1.0};
    nodes[entry->word_count + 1] = (struct feature_node){-1, 0.0};
}

static void say_nothing(const char *text)
{
    (void)text;
}

static void solve_tag(struct batch *batch, const struct corpus *corpus, uint32_t tag,
                      struct scores *ret_scores)
{
    int label = 1;
    double weight = given_factor(tag);
    struct parameter parameter = {.solver_type = L2R_L2LOSS_SVC_DUAL,
                                  .eps = 0.01,
                                  .C = BATCH_COST,
                                  .nr_weight = 1,
                                  .weight_label = &label,
                                  .weight = &weight};
    struct problem problem = {
        .l = TRAINED, .n = WORDS + 1, .y = batch->targets, .x = batch->rows, .bias = 1.0};
    for (size_t i = 0; i < TRAINED; i++) {
        batch->targets[i] = corpus->entries[i].is_given[tag] ? 1.0 : -1.0;
    }
    assert_null(check_parameter(&problem, &parameter));
    struct model *solved = train(&problem, &parameter);
    for (size_t i = 0; i < TESTED; i++) {
        double score = 0.0; /* of the label that came first */
        (void)predict_values(solved, batch->rows[TRAINED + i], &score);
        ret_scores->of[i][tag] = solved->label[0] == 1 ? score : -score;
    }
    free_and_destroy_model(&solved);
}

static void solve_batch(const struct corpus *corpus, struct scores *ret_scores)
{
    struct batch *batch = calloc(1, sizeof *batch);
    assert_non_null(batch);
    set_print_string_function(say_nothing);
    for (size_t i = 0; i < ENTRIES; i++) {
        write_row(&corpus->entries[i], batch->nodes[i]);
        batch->rows[i] = batch->nodes[i];
    }
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        solve_tag(batch, corpus, tag, ret_scores);
    }
    free(batch);
}

/* --- judging ------------------------------------------------------------------------------------
 */

static const struct entry *tested(const struct corpus *corpus, size_t at)
{
    return &corpus->entries[TRAINED + at];
}

/* How many tags score higher than this one. */
static size_t rank_of(const double *scores, size_t tag)
{
    size_t rank = 0;
    for (size_t other = 0; other < TAGS; other++) {
        rank += scores[other] > scores[tag] || (scores[other] == scores[tag] && other < tag);
    }
    return rank;
}

/* The share of the tested entries whose best tag belongs. */
static double precision_at_1(const struct corpus *corpus, const struct scores *scores)
{
    size_t hits = 0;
    for (size_t i = 0; i < TESTED; i++) {
        for (size_t tag = 0; tag < TAGS; tag++) {
            hits += tested(corpus, i)->belongs[tag] && rank_of(scores->of[i], tag) == 0;
        }
    }
    return (double)hits / TESTED;
}

/* The share of the belonging tags, from `first` on, that are among the five best. */
static double recall_at_5(const struct corpus *corpus, const struct scores *scores, size_t first)
{
    size_t hits = 0;
    size_t all = 0;
    for (size_t i = 0; i < TESTED; i++) {
        for (size_t tag = first; tag < TAGS; tag++) {
            if (tested(corpus, i)->belongs[tag]) {
                all++;
                hits += rank_of(scores->of[i], tag) < 5;
            }
        }
    }
    return (double)hits / (double)all;
}

static int set_up(void **state)
{
    struct corpus *corpus = calloc(1, sizeof *corpus);
    if (!corpus) {
        return -1;
    }
    *state = corpus;
    write_corpus(corpus);
    learn_online(corpus, true, &corpus->online);
    learn_online(corpus, false, &corpus->plain);
    solve_batch(corpus, &corpus->batch);
    for (size_t i = 0; i < TESTED; i++) {
        for (size_t tag = 0; tag < TAGS; tag++) {
            corpus->popularity.of[i][tag] = corpus->tag_counts[tag];
        }
    }
    print_message("P@1: online %.3f, batch %.3f, uncorrected %.3f, popularity %.3f\n",
                  precision_at_1(corpus, &corpus->online), precision_at_1(corpus, &corpus->batch),
                  precision_at_1(corpus, &corpus->plain),
                  precision_at_1(corpus, &corpus->popularity));
    print_message("R@5 of the rarer half: online %.3f, batch %.3f, uncorrected %.3f\n",
                  recall_at_5(corpus, &corpus->online, TAGS / 2),
                  recall_at_5(corpus, &corpus->batch, TAGS / 2),
                  recall_at_5(corpus, &corpus->plain, TAGS / 2));
    return 0;
}

static int tear_down(void **state)
{
    free(*state);
    return 0;
}

static void the_best_tag_is_right_as_often_as_the_batch_solver_s(void **state)
{
    const struct corpus *corpus = *state;
    double batch = precision_at_1(corpus, &corpus->batch);
    assert_true(precision_at_1(corpus, &corpus->online) > batch - 0.03);
}

static void the_best_five_hold_as_many_tags_as_the_batch_solver_s(void **state)
{
    const struct corpus *corpus = *state;
    double batch = recall_at_5(corpus, &corpus->batch, 0);
    assert_true(recall_at_5(corpus, &corpus->online, 0) > batch - 0.03);
}

static void popularity_alone_is_far_behind(void **state)
{
    const struct corpus *corpus = *state;
    double popularity = precision_at_1(corpus, &corpus->popularity);
    assert_true(precision_at_1(corpus, &corpus->online) > popularity + 0.3);
}

/* The rarer a tag, the less of it is given here: what is missing must not count as a no. */
static void the_correction_finds_more_of_the_rarer_tags(void **state)
{
    const struct corpus *corpus = *state;
    double plain = recall_at_5(corpus, &corpus->plain, TAGS / 2);
    assert_true(recall_at_5(corpus, &corpus->online, TAGS / 2) > plain + 0.03);
}

/* The scores of both are of one kind: around 1 where a tag belongs, around -1 where not. */
static void the_scores_of_both_go_together(void **state)
{
    const struct corpus *corpus = *state;
    double products = 0.0;
    double online_squares = 0.0;
    double batch_squares = 0.0;
    for (size_t i = 0; i < TESTED; i++) {
        for (size_t tag = 0; tag < TAGS; tag++) {
            double online = corpus->online.of[i][tag] + 1.0;
            double batch = corpus->batch.of[i][tag] + 1.0;
            products += online * batch;
            online_squares += online * online;
            batch_squares += batch * batch;
        }
    }
    double cosine = products / sqrt(online_squares * batch_squares);
    print_message("cosine of the scores above the base: %.3f\n", cosine);
    assert_true(cosine > 0.9);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_best_tag_is_right_as_often_as_the_batch_solver_s),
        cmocka_unit_test(the_best_five_hold_as_many_tags_as_the_batch_solver_s),
        cmocka_unit_test(popularity_alone_is_far_behind),
        cmocka_unit_test(the_correction_finds_more_of_the_rarer_tags),
        cmocka_unit_test(the_scores_of_both_go_together),
    };
    return cmocka_run_group_tests_name("the learner against liblinear", tests, set_up, tear_down);
}
