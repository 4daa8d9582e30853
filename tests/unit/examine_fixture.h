/*
 * examine_fixture: a learner that has seen a stream, and an entry that it has seen last: it speaks
 * for tags 3 and 9, less so for 20, and has 20 alone.
 */
#ifndef UNDERTAG_TESTS_EXAMINE_FIXTURE_H
#define UNDERTAG_TESTS_EXAMINE_FIXTURE_H

#include "tests/unit/model_fixture.h"
#include "tests/unit/model_memory.h"

struct examining {
    struct learner learner;
    struct entry filed;
    struct entry ruled; /* to be the same entry, with what has become known */
    struct memory *before;
    struct memory *after;
};

static inline int examining_set_up(void **state)
{
    static struct examining examining;
    struct model_settings settings = learner_settings();
    struct stream stream = {.random = {4}, .tag_count = STREAM_TAGS, .given_share = 0.8};
    uint32_t truth[ENTRY_TAGS];
    struct entry entry;
    settings.shadow = true;
    settings.evidence_half_life_items = 1e18; /* nothing fades */
    learner_renew(&examining.learner, &settings);
    for (int i = 0; i < 400; i++) {
        (void)stream_next(&stream, &entry, truth);
        learner_change(&examining.learner, &entry, NULL);
    }
    entry_set(&examining.filed, DRAFT, TAGS(20));
    learner_change(&examining.learner, &examining.filed, NULL);
    entry_follow(&examining.ruled, &examining.filed);
    examining.before = memory_new();
    examining.after = memory_new();
    *state = &examining;
    return 0;
}

static inline int examining_tear_down(void **state)
{
    struct examining *examining = *state;
    learner_free(&examining->learner);
    free(examining->before);
    free(examining->after);
    return 0;
}

/* Learns what is known of `ruled` by now, and takes all parts from before and after. */
static inline void examine(struct examining *examining)
{
    memory_take(examining->before, examining->learner.model);
    learner_change(&examining->learner, &examining->ruled, &examining->filed);
    memory_take(examining->after, examining->learner.model);
}

/* What the examination has added to the evidence. */
static inline struct calibrators_cell evidence_added(const struct examining *examining)
{
    struct calibrators_cell before = memory_evidence(examining->before, CALIBRATORS_BINS);
    struct calibrators_cell after = memory_evidence(examining->after, CALIBRATORS_BINS);
    return (struct calibrators_cell){.pairs = after.pairs - before.pairs,
                                     .given = after.given - before.given,
                                     .known = after.known - before.known,
                                     .known_true = after.known_true - before.known_true,
                                     .ruled = after.ruled - before.ruled,
                                     .ruled_true = after.ruled_true - before.ruled_true};
}

static inline void assert_added(const struct examining *examining, struct calibrators_cell expected)
{
    struct calibrators_cell added = evidence_added(examining);
    assert_near(added.pairs, expected.pairs, 1e-9);
    assert_near(added.given, expected.given, 1e-9);
    assert_near(added.known, expected.known, 1e-9);
    assert_near(added.known_true, expected.known_true, 1e-9);
    assert_near(added.ruled, expected.ruled, 1e-9);
    assert_near(added.ruled_true, expected.ruled_true, 1e-9);
}

#endif
