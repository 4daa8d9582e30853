/* What the scores of an item say before it is learned: how good the learner is, and which chances
 * its scores are worth. */
#include "daemon/learner/model.h"

#include <stdlib.h>

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

static struct model_settings settings_with_a_shadow(void)
{
    struct model_settings settings = learner_settings();
    settings.shadow = true;
    settings.evidence_half_life_items = 1e18; /* nothing fades */
    return settings;
}

/* All that a model holds. */
static struct memory *parts_of(const struct learner *learner)
{
    static struct memory memory;
    memory_clear(&memory);
    memory_take(&memory, learner->model);
    return &memory;
}

static struct standing_in_band band_of(const struct learner *learner, enum standing_band band)
{
    struct standing_answer answer;
    standing_ask(model_standing(learner->model), 0, &answer);
    return answer.bands[band];
}

/* --- how good it is: asked before each item, and recounted --------------------------------------
 */

enum {
    RECOUNTED = 500
};

/* Of the items that have a tag. */
struct recount {
    size_t items;
    double first;  /* P@1: the sum over items */
    double in_ten; /* R@10 */
};

static void recount_item(struct recount *recount, const struct entry *entry,
                         const struct model_answer *answer)
{
    double found = 0.0;
    if (entry->tag_count == 0) {
        return;
    }
    recount->items++;
    for (size_t i = 0; i < answer->gap_count && i < 10; i++) {
        bool is_proposed = answer->gaps[i].score > CALIBRATORS_FLOOR_SCORE;
        for (size_t t = 0; t < entry->tag_count && is_proposed; t++) {
            bool is_hit = answer->gaps[i].tag == entry->tags[t];
            recount->first += i == 0 && is_hit ? 1.0 : 0.0;
            found += is_hit ? 1.0 : 0.0;
        }
    }
    recount->in_ten += found / (double)entry->tag_count;
}

static void assert_recounted(const struct recount *recount, const struct standing_figure *figures)
{
    double items = (double)recount->items;
    assert_near(figures[RANKING_P1].value, recount->first / items, 1e-12);
    assert_near(figures[RANKING_R10].value, recount->in_ten / items, 1e-12);
}

static struct model_answer ask_about(const struct learner *learner, const struct entry *entry)
{
    struct model_question question = entry_question(entry);
    return learner_answer(learner, &question);
}

static void the_figures_are_those_of_the_answers_before_each_item(void **state)
{
    struct learner *learner = *state;
    const struct model_settings settings = settings_with_a_shadow();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    struct recount recount = {0};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    learner_renew(learner, &settings);
    for (int i = 0; i < RECOUNTED; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_answer answer = ask_about(learner, &entry);
        recount_item(&recount, &entry, &answer);
        learner_change(learner, &entry, NULL);
    }
    struct standing_in_band all = band_of(learner, STANDING_ALL);
    assert_int_equal(standing_items(model_standing(learner->model)), RECOUNTED);
    assert_int_equal(all.items, recount.items);
    assert_int_equal(all.paired, recount.items);
    assert_true(recount.first / (double)recount.items > 0.5);
    assert_recounted(&recount, all.with);
}

/* --- the shadow: what the learner would be without the correction -------------------------------
 */

/* By falling score, as a list that nobody has calibrated stands. */
static int compare_by_score(const void *left, const void *right)
{
    const struct model_gap *a = left;
    const struct model_gap *b = right;
    if (a->score != b->score) {
        return a->score > b->score ? -1 : 1;
    }
    return (a->tag > b->tag) - (a->tag < b->tag);
}

/* A stream learned by a learner with a shadow, and by one without the correction, which is asked
 * before each item and has a shadow, too. */
static void learn_both(struct learner *learner, struct learner *uncorrected,
                       struct recount *recount)
{
    struct model_settings settings = settings_with_a_shadow();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    static struct model_gap gaps[STREAM_TAGS];
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    learner_renew(learner, &settings);
    settings.correction = false;
    learner_renew(uncorrected, &settings);
    for (int i = 0; i < RECOUNTED; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_answer answer = ask_about(uncorrected, &entry);
        for (size_t g = 0; g < answer.gap_count; g++) {
            gaps[g] = answer.gaps[g];
        }
        qsort(gaps, answer.gap_count, sizeof *gaps, compare_by_score);
        answer.gaps = gaps;
        recount_item(recount, &entry, &answer);
        learner_change(learner, &entry, NULL);
        learner_change(uncorrected, &entry, NULL);
    }
}

/*
 * A lane rounds by chances of its own. An error of one rounding has a standard deviation of half a
 * step at most; no weight is moved by more than the 500 items, and what is wrong is pulled back by
 * the items that come after. So between two lanes, five standard deviations are at most
 * 5·√2·√500/2 = 79 steps.
 */
static const double LANES_APART = 79.0 * (double)CELL_STEP;

/* Words have the same numbers in both. Returns how many weights there are. */
static size_t assert_weights_near(const struct memory *one, enum weights_lane lane,
                                  const struct memory *other, enum weights_lane other_lane)
{
    size_t there = 0;
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        for (uint32_t tag = 0; tag < STREAM_TAGS; tag++) {
            uint32_t cell = memory_weight(&one->words[w], tag, WEIGHTS_LANES, lane);
            uint32_t same = memory_weight(&other->words[w], tag, WEIGHTS_LANES, other_lane);
            assert_near((double)cell_weight(cell) * (double)CELL_STEP,
                        (double)cell_weight(same) * (double)CELL_STEP, LANES_APART);
            there += cell != 0;
        }
    }
    return there;
}

static void the_shadow_learns_what_a_learner_without_the_correction_does(void **state)
{
    struct learner uncorrected = {0};
    struct recount recount = {0};
    struct memory *other = memory_new();
    learn_both(*state, &uncorrected, &recount);
    const struct memory *parts = parts_of(*state);
    memory_take(other, uncorrected.model);
    assert_true(assert_weights_near(parts, WEIGHTS_SHADOW, other, WEIGHTS_MAIN) > 500);
    for (size_t tag = 0; tag < STREAM_TAGS; tag++) {
        assert_near((double)parts->tags[tag].shadow_bias.value, (double)other->tags[tag].bias.value,
                    LANES_APART);
    }
    free(other);
    learner_free(&uncorrected);
}

/* To the last bit: what the learner beside it learns is nothing to a shadow. */
static void the_shadow_learns_the_same_with_the_correction_and_without(void **state)
{
    struct learner uncorrected = {0};
    struct recount recount = {0};
    struct memory *other = memory_new();
    learn_both(*state, &uncorrected, &recount);
    const struct memory *parts = parts_of(*state);
    memory_take(other, uncorrected.model);
    size_t apart = 0;
    for (size_t w = 0; w < MEMORY_WORDS; w++) {
        for (uint32_t tag = 0; tag < STREAM_TAGS; tag++) {
            const struct memory_word *word = &parts->words[w];
            assert_int_equal(memory_weight(word, tag, WEIGHTS_LANES, WEIGHTS_SHADOW),
                             memory_weight(&other->words[w], tag, WEIGHTS_LANES, WEIGHTS_SHADOW));
            apart += memory_weight(word, tag, WEIGHTS_LANES, WEIGHTS_SHADOW) !=
                     memory_weight(word, tag, WEIGHTS_LANES, WEIGHTS_MAIN);
        }
    }
    for (size_t tag = 0; tag < STREAM_TAGS; tag++) {
        assert_memory_equal(&parts->tags[tag].shadow_bias, &other->tags[tag].shadow_bias,
                            sizeof(struct weights_bias));
    }
    assert_true(apart > 500);
    free(other);
    learner_free(&uncorrected);
}

/* Rounding may turn two near scores round, on one item in a hundred at most. */
static void the_figures_without_the_correction_are_those_of_the_shadow_s_scores(void **state)
{
    struct learner uncorrected = {0};
    struct recount recount = {0};
    learn_both(*state, &uncorrected, &recount);
    const struct standing_in_band all = band_of(*state, STANDING_ALL);
    const struct standing_in_band same = band_of(&uncorrected, STANDING_ALL);
    assert_near(all.without[RANKING_P1].value, recount.first / (double)recount.items, 0.01);
    assert_near(all.without[RANKING_R10].value, recount.in_ten / (double)recount.items, 0.01);
    assert_true(all.without[RANKING_P1].value == same.without[RANKING_P1].value);
    assert_true(all.without[RANKING_R10].value == same.without[RANKING_R10].value);
    learner_free(&uncorrected);
}

static void without_a_shadow_there_is_nothing_to_compare_with(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "fog", TAGS(0));
    learner_file(learner, "fog", TAGS(0));
    assert_int_equal(band_of(learner, STANDING_ALL).items, 2);
    assert_int_equal(band_of(learner, STANDING_ALL).paired, 0);
    /* One weight of one lane: a tag and a cell. */
    assert_int_equal(memory_find(parts_of(learner), "fog")->chunks[0].size, 2 * sizeof(uint32_t));
}

/* --- by band ------------------------------------------------------------------------------------
 */

/* Tag 0 is on every item, tag 1 on every tenth: by their counts with the item itself, 0 is in the
 * torso from its thirtieth on, and no third band is reached. */
static void an_item_counts_in_the_bands_of_its_tags(void **state)
{
    const struct learner *learner = *state;
    for (int i = 1; i <= 100; i++) {
        const uint32_t tags[] = {0, 1};
        learner_file(learner, "fog bell", tags, i % 10 ? 1 : 2);
    }
    assert_int_equal(band_of(learner, STANDING_ALL).items, 100);
    assert_int_equal(band_of(learner, STANDING_TORSO).items, 71);
    assert_int_equal(band_of(learner, STANDING_TAIL).items, 29 + 8); /* tag 1's from 30 on */
    assert_int_equal(band_of(learner, STANDING_HEAD).items, 0);
}

static void an_item_without_tags_counts_as_an_item_alone(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, "fog", TAGS(0));
    learner_file(learner, "fog", NO_TAGS);
    assert_int_equal(standing_items(model_standing(learner->model)), 2);
    assert_int_equal(band_of(learner, STANDING_ALL).items, 1);
}

static void a_revised_or_withdrawn_item_leaves_the_standing_as_it_is(void **state)
{
    const struct learner *learner = *state;
    struct entry fog;
    struct entry revised;
    entry_set(&fog, "fog", TAGS(0));
    entry_set(&revised, "fog bell", TAGS(0));
    learner_change(learner, &fog, NULL);
    learner_change(learner, &revised, &fog);
    learner_change(learner, NULL, &revised);
    assert_int_equal(standing_items(model_standing(learner->model)), 1);
}

/* --- what the desk was prompted with ------------------------------------------------------------
 */

/* Tags 3 and 9 were proposed for the draft; 3 was taken, 9 declined. */
static void proposals_taken_and_declined_are_rated_by_the_chances_shown(void **state)
{
    const struct learner *learner = *state;
    struct entry entry;
    entry_set(&entry, DRAFT, TAGS(20));
    entry_find_tag(&entry, 3);
    entry_deny_tag(&entry, 9);
    struct model_answer answer = ask_about(learner, &entry);
    double taken = find_gap(&answer, 3)->chance;
    double declined = find_gap(&answer, 9)->chance;
    assert_int_equal(learner_rated(learner).shown, 0);
    learner_change(learner, &entry, NULL);
    struct learner_rated sum = learner_rated(learner);
    assert_int_equal(sum.shown, 2);
    assert_int_equal(sum.confirmed, 1);
    assert_near(sum.chances, taken + declined, 1e-6);
}

static void what_was_given_unprompted_is_not_rated(void **state)
{
    const struct learner *learner = *state;
    learner_file(learner, DRAFT, TAGS(3, 9));
    assert_int_equal(learner_rated(learner).shown, 0);
}

/* Of a tag that nobody had used; and of one that no item has any more. */
static void what_cannot_have_been_proposed_is_not_rated(void **state)
{
    const struct learner *learner = *state;
    struct entry lost;
    struct entry entry;
    entry_set(&lost, "fog", TAGS(0));
    learner_change(learner, &lost, NULL);
    learner_change(learner, NULL, &lost);
    entry_set(&entry, "fog bell", TAGS(2));
    entry_find_tag(&entry, 1);
    entry_deny_tag(&entry, 0);
    entry_deny_tag(&entry, 77);
    learner_change(learner, &entry, NULL);
    assert_int_equal(learner_rated(learner).shown, 0);
}

/* --- pairs as evidence --------------------------------------------------------------------------
 */

/* By class of the other items' counts. */
struct pairs {
    double pairs[CALIBRATORS_CLASSES];
    double given[CALIBRATORS_CLASSES];
    double known[CALIBRATORS_CLASSES];
    double known_true[CALIBRATORS_CLASSES];
};

/* How often each tag is on the items so far. */
struct uses {
    uint32_t count[STREAM_TAGS];
    uint32_t unprompted[STREAM_TAGS];
};

/* One pair for each tag that some item has had; an item's number is how many there are with it. */
static void recount_pairs(struct pairs *pairs, const struct uses *uses, const struct entry *entry,
                          uint64_t documents)
{
    for (uint32_t tag = 0; tag < STREAM_TAGS; tag++) {
        size_t class = calibrators_class(uses->unprompted[tag], documents);
        bool is_on = entry_list_holds(entry->tags, entry->tag_count, tag);
        bool is_examined = entry_list_holds(entry->examined, entry->examined_count, tag);
        if (uses->count[tag] == 0) {
            continue;
        }
        if (is_examined || entry_list_holds(entry->known_not, entry->known_not_count, tag)) {
            pairs->known[class] += 1.0;
            pairs->known_true[class] += is_examined ? 1.0 : 0.0;
        } else {
            pairs->pairs[class] += 1.0;
            pairs->given[class] += is_on ? 1.0 : 0.0;
        }
    }
}

static void count_uses(struct uses *uses, const struct entry *entry)
{
    for (size_t i = 0; i < entry->tag_count; i++) {
        uses->count[entry->tags[i]]++;
        uses->unprompted[entry->tags[i]] +=
            entry_list_holds(entry->examined, entry->examined_count, entry->tags[i]) ? 0 : 1;
    }
}

/* On every third entry the first tag was prompted; on every fourth a tag was declined. */
static void prompt(struct entry *entry, int i)
{
    uint32_t declined = (uint32_t)i * 7 % STREAM_TAGS;
    if (i % 3 == 0 && entry->tag_count > 0) {
        entry_add_tag(entry->examined, &entry->examined_count, entry->tags[0]);
    }
    if (i % 4 == 0 && !entry_list_holds(entry->tags, entry->tag_count, declined)) {
        entry_deny_tag(entry, declined);
    }
}

static void assert_same_pairs(const struct pairs *expected, const struct memory *parts)
{
    for (size_t c = 0; c < CALIBRATORS_CLASSES; c++) {
        struct calibrators_cell sum = {0};
        for (size_t b = 0; b < CALIBRATORS_BINS; b++) {
            struct calibrators_cell cell = memory_cell(parts, b, c);
            sum.pairs += cell.pairs;
            sum.given += cell.given;
            sum.known += cell.known;
            sum.known_true += cell.known_true;
        }
        assert_near(sum.pairs, expected->pairs[c], 1e-9);
        assert_near(sum.given, expected->given[c], 1e-9);
        assert_near(sum.known, expected->known[c], 1e-9);
        assert_near(sum.known_true, expected->known_true[c], 1e-9);
    }
}

/* No tag of so short a stream comes to 64 uses: the census is exact. */
static void every_pair_is_counted_once_and_what_was_examined_apart(void **state)
{
    struct learner *learner = *state;
    const struct model_settings settings = settings_with_a_shadow();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    struct pairs expected = {.pairs = {0.0}};
    struct uses uses = {.count = {0}};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    learner_renew(learner, &settings);
    for (int i = 0; i < 200; i++) {
        (void)stream_next(&stream, &entry, truth);
        prompt(&entry, i);
        recount_pairs(&expected, &uses, &entry, (uint64_t)i + 1);
        learner_change(learner, &entry, NULL);
        count_uses(&uses, &entry);
    }
    assert_same_pairs(&expected, parts_of(learner));
}

/* Pair by pair, where they were scored: the scores of the answers before each item. */
static void pairs_are_counted_with_their_scores_from_before_the_item(void **state)
{
    struct learner *learner = *state;
    const struct model_settings settings = settings_with_a_shadow();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    double above[CALIBRATORS_BINS] = {0.0};
    struct entry entry;
    uint32_t truth[ENTRY_TAGS];
    learner_renew(learner, &settings);
    for (int i = 0; i < 200; i++) {
        (void)stream_next(&stream, &entry, truth);
        struct model_answer answer = ask_about(learner, &entry);
        for (size_t g = 0; g < answer.gap_count; g++) {
            double up = answer.gaps[g].score - CALIBRATORS_FLOOR_SCORE;
            above[up > 0.0 ? 1 + (size_t)(up / 0.02) : 0] += 1.0;
        }
        learner_change(learner, &entry, NULL);
    }
    for (size_t bin = 1; bin < CALIBRATORS_BINS; bin++) {
        assert_near(memory_evidence(parts_of(learner), bin).pairs, above[bin], 1e-9);
    }
}

int main(void)
{
#define new_test(name) cmocka_unit_test_setup_teardown(name, learner_set_up, learner_tear_down)
#define stream_test(name) cmocka_unit_test_setup_teardown(name, stream_set_up, learner_tear_down)
    const struct CMUnitTest tests[] = {
        new_test(the_figures_are_those_of_the_answers_before_each_item),
        new_test(the_shadow_learns_what_a_learner_without_the_correction_does),
        new_test(the_shadow_learns_the_same_with_the_correction_and_without),
        new_test(the_figures_without_the_correction_are_those_of_the_shadow_s_scores),
        new_test(without_a_shadow_there_is_nothing_to_compare_with),
        new_test(an_item_counts_in_the_bands_of_its_tags),
        new_test(an_item_without_tags_counts_as_an_item_alone),
        new_test(a_revised_or_withdrawn_item_leaves_the_standing_as_it_is),
        stream_test(proposals_taken_and_declined_are_rated_by_the_chances_shown),
        stream_test(what_was_given_unprompted_is_not_rated),
        new_test(what_cannot_have_been_proposed_is_not_rated),
        new_test(every_pair_is_counted_once_and_what_was_examined_apart),
        new_test(pairs_are_counted_with_their_scores_from_before_the_item),
    };
    return cmocka_run_group_tests_name("evidence", tests, NULL, NULL);
}
