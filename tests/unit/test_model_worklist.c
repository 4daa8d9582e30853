/* What the worklist says of each filed item: scores without its own share, ranked by promise. */
#include "daemon/learner/model.h"

#include "tests/unit/model_fixture.h"

/* What floats lose between two ways to the same score. */
static const double ROUNDING = 1e-5;

/* A share is what the item's step adds by its formula; the weights are rounded besides. */
#define share_rounding(entry) rounding_of_words((entry)->feature_count)

static struct model_settings settings_with_a_shadow(void)
{
    struct model_settings settings = learner_settings();
    settings.shadow = true;
    return settings;
}

/* --- a learner and its twin ---------------------------------------------------------------------
 * Both know the same entries of two words that are always together, so that x is 1/√2 for each
 * however many there are. Only the learner then files the last one. */

struct twins {
    struct learner learner;
    struct learner twin; /* has never seen `last` */
    struct entry last;   /* has tag 2 */
};

static int twins_set_up(void **state)
{
    static struct twins twins;
    const struct model_settings settings = settings_with_a_shadow();
    struct entry entry;
    learner_renew(&twins.learner, &settings);
    learner_renew(&twins.twin, &settings);
    for (uint32_t i = 0; i < 30; i++) {
        const uint32_t tags[] = {i % 3, 3};
        entry_set(&entry, "fog bell", tags, i % 2 + 1);
        learner_change(&twins.learner, &entry, NULL);
        learner_change(&twins.twin, &entry, NULL);
    }
    entry_set(&twins.last, "fog bell", TAGS(2));
    learner_change(&twins.learner, &twins.last, NULL);
    *state = &twins;
    return 0;
}

static int twins_tear_down(void **state)
{
    struct twins *twins = *state;
    learner_free(&twins->learner);
    learner_free(&twins->twin);
    return 0;
}

/* The entry's gaps are the three other tags, with the twin's scores; learned so many times. */
static void assert_scores_of_twin(const struct twins *twins, const struct entry *entry, int times)
{
    const struct worklist_entry listed = learner_listed(&twins->learner, entry);
    double rounding = times * share_rounding(entry);
    assert_int_equal(listed.gap_count, 3);
    for (uint32_t i = 0; i < listed.gap_count; i++) {
        const struct worklist_gap *gap = &listed.gaps[i];
        double before = learner_score(&twins->twin, "fog bell", gap->tag);
        double now = learner_score(&twins->learner, "fog bell", gap->tag);
        assert_int_not_equal(gap->tag, 2);
        assert_near((double)gap->score, before, rounding);
        float own = listed_pair(&listed, gap->tag)->own;
        assert_near(now - (double)own, before, rounding);
        assert_true(own < -0.01F); /* learning the entry has spoken against its other tags */
    }
}

static void an_entry_has_the_scores_from_before_the_item_was_learned(void **state)
{
    const struct twins *twins = *state;
    assert_scores_of_twin(twins, &twins->last, 1);
}

static void scored_again_the_own_share_is_taken_out(void **state)
{
    const struct twins *twins = *state;
    learner_rescore(&twins->learner, &twins->last);
    assert_scores_of_twin(twins, &twins->last, 1);
}

/* Filed again with the same words, so learned twice: both shares are its own. */
static void a_revision_s_share_is_added_to_that_of_what_it_replaces(void **state)
{
    const struct twins *twins = *state;
    struct entry revised;
    const struct worklist_pair before = learner_listed(&twins->learner, &twins->last).pairs[0];
    entry_set(&revised, "fog bell", TAGS(2));
    learner_change(&twins->learner, &revised, &twins->last);
    assert_scores_of_twin(twins, &revised, 2);
    learner_rescore(&twins->learner, &revised);
    assert_scores_of_twin(twins, &revised, 2);
    const struct worklist_entry after = learner_listed(&twins->learner, &revised);
    assert_true(listed_pair(&after, before.tag)->own < before.own);
}

/* --- in a stream --------------------------------------------------------------------------------
 */

enum {
    FILED = 60
};

struct listing {
    struct learner learner; /* of a stream of STREAM_TAGS tags */
    struct stream stream;
    struct entry filed[FILED]; /* the newest of it, by their time */
};

static int listing_set_up(void **state)
{
    static struct listing listing;
    const struct model_settings settings = settings_with_a_shadow();
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    listing.stream = (struct stream){.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.5};
    learner_renew(&listing.learner, &settings);
    for (int i = 0; i < 300; i++) {
        (void)stream_next(&listing.stream, &entry, truth);
        learner_change(&listing.learner, &entry, NULL);
    }
    for (int i = 0; i < FILED; i++) {
        (void)stream_next(&listing.stream, &listing.filed[i], truth);
        learner_change(&listing.learner, &listing.filed[i], NULL);
    }
    *state = &listing;
    return 0;
}

static int listing_tear_down(void **state)
{
    learner_free(&((struct listing *)*state)->learner);
    return 0;
}

/* Other items of the stream, so that the model moves on. */
static void go_on(struct listing *listing, int count)
{
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    for (int i = 0; i < count; i++) {
        (void)stream_next(&listing->stream, &entry, truth);
        learner_change(&listing->learner, &entry, NULL);
    }
}

static void assert_rescored_alike(const struct worklist_entry *before,
                                  const struct worklist_entry *after, double rounding)
{
    assert_int_equal(after->gap_count, before->gap_count);
    assert_true(after->counted == before->counted && after->scored == before->scored);
    for (uint32_t i = 0; i < after->gap_count; i++) {
        const struct worklist_gap *was = listed_gap(before, after->gaps[i].tag);
        assert_non_null(was);
        assert_near((double)after->gaps[i].score, (double)was->score, rounding);
    }
    assert_int_equal(after->pair_count, before->pair_count);
    assert_memory_equal(after->pairs, before->pairs, sizeof after->pairs);
}

static void scored_again_at_once_an_item_has_the_same_scores(void **state)
{
    struct listing *listing = *state;
    size_t gaps = 0;
    for (int i = 0; i < 100; i++) {
        uint32_t truth[ENTRY_TAGS];
        struct entry entry;
        (void)stream_next(&listing->stream, &entry, truth);
        learner_change(&listing->learner, &entry, NULL);
        const struct worklist_entry before = learner_listed(&listing->learner, &entry);
        learner_rescore(&listing->learner, &entry);
        const struct worklist_entry after = learner_listed(&listing->learner, &entry);
        assert_rescored_alike(&before, &after, share_rounding(&entry));
        gaps += before.gap_count;
    }
    assert_true(gaps > 200); /* or the test is weaker than it says */
}

static void scored_again_later_an_item_keeps_its_own_shares_and_what_was_counted(void **state)
{
    struct listing *listing = *state;
    size_t moved = 0;
    go_on(listing, 200);
    for (int i = 0; i < FILED; i++) {
        const struct entry *entry = &listing->filed[i];
        const struct worklist_entry before = learner_listed(&listing->learner, entry);
        learner_rescore(&listing->learner, entry);
        const struct worklist_entry after = learner_listed(&listing->learner, entry);
        assert_true(after.scored > before.scored);
        assert_true(after.counted == before.counted);
        assert_int_equal(after.pair_count, before.pair_count);
        assert_memory_equal(after.pairs, before.pairs, sizeof after.pairs);
        for (uint32_t g = 0; g < after.gap_count; g++) {
            const struct worklist_gap *was = listed_gap(&before, after.gaps[g].tag);
            moved += was && after.gaps[g].score != was->score;
        }
    }
    assert_true(moved > FILED);
}

/* What is given, or known not to belong, is no gap; what else a question finds likely is one. */
static void an_entry_lists_what_a_question_about_the_item_finds(void **state)
{
    const struct listing *listing = *state;
    for (int i = 0; i < FILED; i++) {
        const struct entry *entry = &listing->filed[i];
        learner_rescore(&listing->learner, entry);
        const struct worklist_entry listed = learner_listed(&listing->learner, entry);
        struct model_question question = filed_question(entry);
        question.most = WORKLIST_GAPS;
        question.floor = 0.005;
        struct model_answer answer = learner_answer(&listing->learner, &question);
        assert_int_equal(listed.gap_count, answer.gap_count);
        for (size_t g = 0; g < answer.gap_count; g++) {
            const struct worklist_gap *gap = listed_gap(&listed, answer.gaps[g].tag);
            assert_non_null(gap);
            assert_near(model_gap_chance(listing->learner.model, &listed, gap),
                        answer.gaps[g].chance, ROUNDING);
        }
    }
}

/* By tag: how likely it belongs (which other tags have no say in), and its score. */
struct answered {
    double chances[STREAM_TAGS];
    double scores[STREAM_TAGS];
};

static struct answered ask(const struct listing *listing, const struct entry *entry)
{
    struct answered answered = {.chances = {0.0}};
    struct model_question question = filed_question(entry);
    question.tagged = false;
    struct model_answer answer = learner_answer(&listing->learner, &question);
    for (size_t i = 0; i < answer.gap_count; i++) {
        answered.chances[answer.gaps[i].tag] = answer.gaps[i].chance;
        answered.scores[answer.gaps[i].tag] = answer.gaps[i].score;
    }
    return answered;
}

/* The chance is that of the score without the item's share; the score shown is what it is. Out of
 * the worklist, an item's shares are not known. */
static void a_question_with_a_number_takes_the_own_share_out_of_the_chances(void **state)
{
    const struct listing *listing = *state;
    size_t greater = 0;
    for (int i = 0; i < FILED; i++) {
        const struct entry *entry = &listing->filed[i];
        const struct worklist_entry listed = learner_listed(&listing->learner, entry);
        struct answered honest = ask(listing, entry);
        assert_int_equal(model_delist(listing->learner.model, listing->learner.base, entry->number),
                         0);
        struct answered raw = ask(listing, entry);
        assert_memory_equal(honest.scores, raw.scores, sizeof raw.scores);
        for (uint32_t g = 0; g < listed.gap_count; g++) {
            uint32_t tag = listed.gaps[g].tag;
            assert_true(listed_pair(&listed, tag)->own <= 0.0F);
            assert_true(honest.chances[tag] >= raw.chances[tag]);
            greater += honest.chances[tag] > raw.chances[tag];
        }
    }
    assert_true(greater > FILED);
}

static void the_expected_number_is_of_the_chances_without_the_own_share(void **state)
{
    const struct listing *listing = *state;
    struct model_question question = filed_question(&listing->filed[FILED - 1]);
    struct model_answer answer = learner_answer(&listing->learner, &question);
    double sum = 0.0;
    for (size_t i = 0; i < answer.gap_count; i++) {
        sum += answer.gaps[i].chance;
    }
    assert_near(answer.expected, sum, 1e-9);
}

/* --- what has become known ----------------------------------------------------------------------
 */

/* An item of the stream that may lack two tags at least. */
static const struct entry *doubtful(const struct listing *listing)
{
    for (int i = 0; i < FILED; i++) {
        if (learner_listed(&listing->learner, &listing->filed[i]).gap_count >= 2) {
            return &listing->filed[i];
        }
    }
    fail_msg("no item lacks anything");
    return NULL;
}

/* All gaps of `before` but that of `tag` stand in `after`, to the last bit. */
static void assert_only_left(const struct worklist_entry *before,
                             const struct worklist_entry *after, uint32_t tag)
{
    assert_int_equal(after->gap_count, before->gap_count - 1);
    assert_null(listed_gap(after, tag));
    assert_true(after->scored == before->scored && after->counted == before->counted);
    for (uint32_t i = 0; i < before->gap_count; i++) {
        const struct worklist_gap *gap = &before->gaps[i];
        if (gap->tag != tag) {
            assert_memory_equal(listed_gap(after, gap->tag), gap, sizeof *gap);
        }
    }
}

static void what_is_found_to_belong_leaves_the_entry(void **state)
{
    const struct listing *listing = *state;
    const struct entry *entry = doubtful(listing);
    const struct worklist_entry before = learner_listed(&listing->learner, entry);
    struct entry ruled;
    entry_follow(&ruled, entry);
    entry_find_tag(&ruled, before.gaps[1].tag);
    learner_change(&listing->learner, &ruled, entry);
    const struct worklist_entry after = learner_listed(&listing->learner, &ruled);
    assert_only_left(&before, &after, before.gaps[1].tag);
}

static void what_is_found_not_to_belong_leaves_the_entry_for_good(void **state)
{
    const struct listing *listing = *state;
    const struct entry *entry = doubtful(listing);
    const struct worklist_entry before = learner_listed(&listing->learner, entry);
    struct entry ruled;
    entry_follow(&ruled, entry);
    entry_deny_tag(&ruled, before.gaps[0].tag);
    learner_change(&listing->learner, &ruled, entry);
    const struct worklist_entry after = learner_listed(&listing->learner, &ruled);
    assert_only_left(&before, &after, before.gaps[0].tag);
    learner_rescore(&listing->learner, &ruled);
    assert_false(learner_lists_gap(&listing->learner, &ruled, before.gaps[0].tag));
}

static void the_entry_follows_the_item_to_its_new_number(void **state)
{
    const struct listing *listing = *state;
    const struct entry *entry = doubtful(listing);
    uint64_t listed = learner_size(&listing->learner).listed;
    struct entry ruled;
    entry_follow(&ruled, entry);
    entry_deny_tag(&ruled, learner_listed(&listing->learner, entry).gaps[0].tag);
    learner_change(&listing->learner, &ruled, entry);
    assert_false(learner_lists(&listing->learner, entry));
    assert_true(learner_listed(&listing->learner, &ruled).number == ruled.number);
    assert_int_equal(learner_size(&listing->learner).listed, listed);
}

static void a_revised_item_has_an_entry_of_its_new_words(void **state)
{
    const struct listing *listing = *state;
    const struct entry *entry = &listing->filed[0];
    uint64_t listed = learner_size(&listing->learner).listed;
    struct entry revised;
    entry_set(&revised, DRAFT, TAGS(9));
    learner_change(&listing->learner, &revised, entry);
    assert_false(learner_lists(&listing->learner, entry));
    assert_true(learner_lists_gap(&listing->learner, &revised, 3));
    assert_false(learner_lists_gap(&listing->learner, &revised, 9));
    assert_int_equal(learner_size(&listing->learner).listed, listed);
}

/* Its pairs were evidence on the day that it was filed, and are no second time. */
static void a_revision_keeps_the_scores_that_its_pairs_were_counted_with(void **state)
{
    struct listing *listing = *state;
    const struct entry *entry = doubtful(listing);
    const struct worklist_entry before = learner_listed(&listing->learner, entry);
    struct entry revised;
    size_t moved = 0;
    go_on(listing, 100);
    entry_follow(&revised, entry);
    revised.same_words = false;
    learner_change(&listing->learner, &revised, entry);
    const struct worklist_entry after = learner_listed(&listing->learner, &revised);
    assert_true(after.counted == before.counted);
    for (uint32_t i = 0; i < after.pair_count; i++) {
        const struct worklist_pair *was = listed_pair(&before, after.pairs[i].tag);
        assert_true(!was || after.pairs[i].counted == was->counted);
        moved += was && listed_gap(&after, was->tag)->score != was->counted;
    }
    assert_true(moved > 0);
}

static void a_withdrawn_item_leaves_the_worklist(void **state)
{
    const struct listing *listing = *state;
    uint64_t listed = learner_size(&listing->learner).listed;
    learner_change(&listing->learner, NULL, &listing->filed[7]);
    assert_false(learner_lists(&listing->learner, &listing->filed[7]));
    assert_int_equal(learner_size(&listing->learner).listed, listed - 1);
}

static void what_is_declined_when_the_item_is_filed_is_no_gap(void **state)
{
    const struct listing *listing = *state;
    struct entry plain;
    struct entry declined;
    entry_set(&plain, DRAFT, TAGS(9));
    entry_set(&declined, DRAFT, TAGS(9));
    entry_deny_tag(&declined, 3);
    learner_change(&listing->learner, &declined, NULL);
    learner_change(&listing->learner, &plain, NULL);
    assert_true(learner_lists_gap(&listing->learner, &plain, 3));
    assert_false(learner_lists_gap(&listing->learner, &declined, 3));
}

/* --- checked items ------------------------------------------------------------------------------
 */

static void a_checked_item_promises_nothing(void **state)
{
    const struct listing *listing = *state;
    const struct entry *entry = doubtful(listing);
    struct entry checked;
    entry_follow(&checked, entry);
    checked.checked_below = STREAM_TAGS;
    learner_change(&listing->learner, &checked, entry);
    assert_int_equal(learner_listed(&listing->learner, &checked).gap_count, 0);
    learner_rescore(&listing->learner, &checked);
    assert_int_equal(learner_listed(&listing->learner, &checked).gap_count, 0);
    struct model_question question = filed_question(&checked);
    struct model_answer answer = learner_answer(&listing->learner, &question);
    assert_int_equal(answer.gap_count, 0);
    assert_near(answer.expected, 0.0, 0.0);
}

static void a_check_of_half_of_the_vocabulary_leaves_the_gaps_of_the_other_half(void **state)
{
    const struct listing *listing = *state;
    struct entry entry;
    struct entry checked;
    entry_set(&entry, DRAFT, NO_TAGS); /* speaks for tags 3 and 9 */
    learner_change(&listing->learner, &entry, NULL);
    assert_true(learner_lists_gap(&listing->learner, &entry, 3));
    entry_follow(&checked, &entry);
    checked.checked_below = 9;
    learner_change(&listing->learner, &checked, &entry);
    assert_false(learner_lists_gap(&listing->learner, &checked, 3));
    assert_true(learner_lists_gap(&listing->learner, &checked, 9));
}

/* A tag of the item's words, opened after somebody went through all the others. */
static void a_tag_opened_after_the_check_may_be_missing(void **state)
{
    const struct listing *listing = *state;
    struct entry entry;
    struct entry checked;
    entry_set(&entry, "log t3q0 t3q1 breeches buoy", TAGS(3));
    learner_change(&listing->learner, &entry, NULL);
    entry_follow(&checked, &entry);
    checked.checked_below = STREAM_TAGS;
    learner_change(&listing->learner, &checked, &entry);
    for (int i = 0; i < 5; i++) {
        learner_file(&listing->learner, "log breeches buoy", TAGS(STREAM_TAGS));
    }
    learner_rescore(&listing->learner, &checked);
    const struct worklist_entry listed = learner_listed(&listing->learner, &checked);
    assert_int_equal(listed.gap_count, 1);
    assert_int_equal(listed.gaps[0].tag, STREAM_TAGS);
    struct model_question question = filed_question(&checked);
    struct model_answer answer = learner_answer(&listing->learner, &question);
    assert_int_equal(answer.gap_count, 1);
    assert_near(answer.expected, model_gap_chance(listing->learner.model, &listed, listed.gaps),
                ROUNDING);
}

int main(void)
{
#define twins_test(name) cmocka_unit_test_setup_teardown(name, twins_set_up, twins_tear_down)
#define listing_test(name) cmocka_unit_test_setup_teardown(name, listing_set_up, listing_tear_down)
    const struct CMUnitTest tests[] = {
        twins_test(an_entry_has_the_scores_from_before_the_item_was_learned),
        twins_test(scored_again_the_own_share_is_taken_out),
        twins_test(a_revision_s_share_is_added_to_that_of_what_it_replaces),
        listing_test(scored_again_at_once_an_item_has_the_same_scores),
        listing_test(scored_again_later_an_item_keeps_its_own_shares_and_what_was_counted),
        listing_test(an_entry_lists_what_a_question_about_the_item_finds),
        listing_test(a_question_with_a_number_takes_the_own_share_out_of_the_chances),
        listing_test(the_expected_number_is_of_the_chances_without_the_own_share),
        listing_test(what_is_found_to_belong_leaves_the_entry),
        listing_test(what_is_found_not_to_belong_leaves_the_entry_for_good),
        listing_test(the_entry_follows_the_item_to_its_new_number),
        listing_test(a_revised_item_has_an_entry_of_its_new_words),
        listing_test(a_revision_keeps_the_scores_that_its_pairs_were_counted_with),
        listing_test(a_withdrawn_item_leaves_the_worklist),
        listing_test(what_is_declined_when_the_item_is_filed_is_no_gap),
        listing_test(a_checked_item_promises_nothing),
        listing_test(a_check_of_half_of_the_vocabulary_leaves_the_gaps_of_the_other_half),
        listing_test(a_tag_opened_after_the_check_may_be_missing),
    };
    return cmocka_run_group_tests_name("entries of the worklist", tests, NULL, NULL);
}
