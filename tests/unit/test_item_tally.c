/*
 * Two thousand changes of all kinds, drawn with a fixed seed, on a few items and tags. After them
 * the items are what the changes say, and every count is what a recount of the items as they are
 * read finds. Sets of tags are the bits of words here: nothing is shared with what is tested.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <string.h>

#include "tests/unit/repeatable.h"
#include "tests/unit/store_fixture.h"

enum {
    ITEMS = 9,
    TAGS = 12,
    TAGGERS = 3, /* beside the one who files */
    ROUNDS = 20,
    CHANGES_A_ROUND = 100,
    CHANGES_A_VIEW = 10
};

static const char *const TAG[TAGS] = {"fog",  "gale", "wreck", "bell",  "lamp",  "horn",
                                      "quay", "buoy", "birds", "pilot", "ferry", "tide"};
static const char *const ITEM[ITEMS] = {"log/1", "log/2", "log/3", "log/4", "log/5",
                                        "log/6", "log/7", "log/8", "log/9"};
static const char *const TAGGER[TAGGERS] = {"o.reed", "p.inner", "t.homas"};

/* All that was said of an item; all 0 where there is none. */
struct facts {
    uint32_t is_there;
    uint32_t filed;
    uint32_t prompted;
    uint32_t declined;
    uint32_t belongs;
    uint32_t denied;
    uint32_t is_checked;
    uint32_t is_random;
    uint32_t is_filed_after;
    uint32_t list; /* of the check */
    uint32_t given;
    uint32_t hidden;
    uint32_t extra;
    uint32_t seen;
    uint32_t has_second[TAGGERS];
    uint32_t second[TAGGERS];
};

/* Current tags, as the protocol has them. */
static uint32_t tags_of(const struct facts *facts)
{
    uint32_t base = facts->filed;
    if (facts->is_checked) {
        base = facts->list;
        if (facts->is_filed_after) {
            base = (base | facts->filed) & ~facts->declined;
        }
    }
    return (base | facts->belongs) & ~facts->denied;
}

static uint32_t count_bits(uint32_t bits)
{
    return (uint32_t)__builtin_popcount(bits);
}

/* --- the run --- */

struct run {
    struct fixture *fixture;
    struct repeatable random;
    struct facts facts[ITEMS]; /* what must be there */
    struct item_filed filed;   /* of the last change */
    struct item_refusal refusal;
    struct store_error error;
};

static int set_up(void **state)
{
    struct run *run = calloc(1, sizeof *run);
    assert_non_null(run);
    run->random.state = 1911;
    void *fixture = NULL;
    (void)fixture_setup(&fixture);
    run->fixture = fixture;
    struct store_view *view = fixture_write(run->fixture);
    for (uint32_t k = 0; k < TAGS; k++) {
        uint32_t number = UINT32_MAX;
        assert_int_equal(vocabulary_open(view, TAG[k], strlen(TAG[k]), 1, &number, &run->error),
                         STORE_OK);
        assert_int_equal(number, k);
    }
    fixture_commit(view);
    *state = run;
    return 0;
}

static int tear_down(void **state)
{
    struct run *run = *state;
    void *fixture = run->fixture;
    free(run);
    return fixture_teardown(&fixture);
}

/* A few tags: each with a chance of a quarter. */
static uint32_t draw_tags(struct run *run)
{
    uint32_t all = (1U << TAGS) - 1U;
    uint32_t half = (uint32_t)repeatable_next(&run->random);
    return half & (uint32_t)repeatable_next(&run->random) & all;
}

static struct item_names names_of(uint32_t bits, struct store_text texts[TAGS + 1])
{
    size_t count = 0;
    for (uint32_t k = 0; k < TAGS; k++) {
        if (bits & (1U << k)) {
            texts[count++] = text_of(TAG[k]);
        }
    }
    return (struct item_names){texts, count};
}

/* --- changes: each is made in the store and in the facts --- */

static void file(struct run *run, struct store_view *view, size_t item, bool again)
{
    struct facts *facts = &run->facts[item];
    struct facts filed = *facts;
    struct store_text texts[3][TAGS + 1];
    if (!again) {
        filed.filed = draw_tags(run);
        filed.prompted = draw_tags(run) & filed.filed;
        filed.declined = draw_tags(run) & ~filed.filed;
    }
    struct item_filing filing = {.id = text_of(ITEM[item]),
                                 .tagger = text_of("m.quill"),
                                 .tags = texts[0],
                                 .tag_count = names_of(filed.filed, texts[0]).count,
                                 .prompted = texts[1],
                                 .prompted_count = names_of(filed.prompted, texts[1]).count,
                                 .declined = texts[2],
                                 .declined_count = names_of(filed.declined, texts[2]).count};
    assert_int_equal(
        items_file(view, &filing, &run->fixture->buffer, &run->filed, &run->refusal, &run->error),
        STORE_OK);
    bool is_same = facts->is_there && memcmp(&filed, facts, sizeof filed) == 0;
    assert_int_equal(run->filed.was, !facts->is_there ? ITEM_NEW
                                     : is_same        ? ITEM_SAME
                                                      : ITEM_REVISED);
    if (!is_same) {
        filed.is_there = 1;
        filed.belongs &= ~filed.declined;
        filed.denied &= ~filed.filed;
        filed.is_filed_after = filed.is_checked;
        *facts = filed;
    }
}

static void withdraw(struct run *run, struct store_view *view, size_t item)
{
    uint64_t seq = 0;
    int result =
        items_withdraw(view, text_of(ITEM[item]), 0, 0, &run->fixture->buffer, &seq, &run->error);
    assert_int_equal(result, run->facts[item].is_there ? STORE_OK : STORE_NOT_FOUND);
    run->facts[item] = (struct facts){0};
}

static void rule(struct run *run, struct store_view *view, size_t item)
{
    struct facts *facts = &run->facts[item];
    struct store_text texts[2][TAGS + 1];
    uint32_t belongs = draw_tags(run);
    uint32_t denied = draw_tags(run) & ~belongs;
    struct item_saying saying = said_by("e.ditor", ITEM[item]);
    int result = items_rule(view, &saying, names_of(belongs, texts[0]), names_of(denied, texts[1]),
                            &run->fixture->buffer, &run->filed, &run->refusal, &run->error);
    assert_int_equal(result, facts->is_there ? STORE_OK : STORE_NOT_FOUND);
    if (facts->is_there) {
        facts->belongs = (facts->belongs & ~denied) | belongs;
        facts->denied = (facts->denied & ~belongs) | denied;
    }
}

/* What nobody had examined before: neither prompted nor ruled on nor declined. */
static void check_facts(struct facts *facts, uint32_t list, bool is_random)
{
    uint32_t before = tags_of(facts);
    uint32_t turned_down = (facts->declined | facts->denied) & ~before;
    uint32_t trials = list & ~facts->prompted & ~facts->belongs & ~turned_down;
    if (!facts->is_checked) { /* what one check has gone through is no trial for the next */
        facts->given = trials & facts->filed;
        facts->hidden = trials & ~facts->filed;
    }
    facts->extra = before & ~list;
    facts->seen = count_bits(before);
    facts->belongs &= list;
    facts->denied &= ~list;
    facts->list = list;
    facts->is_random = is_random || (facts->is_checked && facts->is_random);
    facts->is_checked = 1;
    facts->is_filed_after = 0;
}

static void check(struct run *run, struct store_view *view, size_t item, bool is_random)
{
    struct facts *facts = &run->facts[item];
    struct store_text texts[TAGS + 1];
    struct item_checked checked = {0};
    uint32_t list = draw_tags(run) | (facts->filed & draw_tags(run));
    uint32_t before = tags_of(facts);
    struct item_saying saying = said_by("c.lerk", ITEM[item]);
    int result = items_check(view, &saying, names_of(list, texts), is_random, &run->fixture->buffer,
                             &run->filed, &checked, &run->refusal, &run->error);
    assert_int_equal(result, facts->is_there ? STORE_OK : STORE_NOT_FOUND);
    if (facts->is_there) {
        assert_int_equal(checked.missed_count, count_bits(list & ~before));
        assert_int_equal(checked.extra_count, count_bits(before & ~list));
        check_facts(facts, list, is_random);
    }
    free(checked.missed);
    free(checked.extra);
}

static void tag_again(struct run *run, struct store_view *view, size_t item)
{
    struct facts *facts = &run->facts[item];
    struct store_text texts[TAGS + 1];
    size_t tagger = repeatable_below(&run->random, TAGGERS);
    /* Two taggers agree on some, and say the same again now and then. */
    uint32_t tags = draw_tags(run) | (facts->filed & draw_tags(run));
    tags = repeatable_below(&run->random, 4) == 0 ? facts->second[tagger] : tags;
    struct item_saying saying = said_by(TAGGER[tagger], ITEM[item]);
    int result = items_tag_again(view, &saying, names_of(tags, texts), text_of(""), true,
                                 &run->fixture->buffer, &run->filed, &run->refusal, &run->error);
    assert_int_equal(result, facts->is_there ? STORE_OK : STORE_NOT_FOUND);
    if (facts->is_there) {
        bool is_same = facts->has_second[tagger] && facts->second[tagger] == tags;
        assert_int_equal(run->filed.was, !facts->has_second[tagger] ? ITEM_NEW
                                         : is_same                  ? ITEM_SAME
                                                                    : ITEM_REVISED);
        facts->has_second[tagger] = 1;
        facts->second[tagger] = tags;
    }
}

/* A ruling on an unknown tag, which changes nothing. */
static void be_refused(struct run *run, struct store_view *view, size_t item)
{
    struct store_text texts[] = {text_of(TAG[0]), text_of("mermaid")};
    struct item_saying saying = said_by("e.ditor", ITEM[item]);
    int result = items_rule(view, &saying, (struct item_names){0}, (struct item_names){texts, 2},
                            &run->fixture->buffer, &run->filed, &run->refusal, &run->error);
    assert_int_equal(result, run->facts[item].is_there ? STORE_REFUSED : STORE_NOT_FOUND);
}

static void erase(struct run *run, struct store_view *view)
{
    uint64_t learned = store_view_totals(view).seq;
    size_t erased = 0;
    learned -= learned > 5 ? repeatable_below(&run->random, 5) : 0;
    assert_int_equal(store_erase_passed(view, learned, 1000, &erased, &run->error), STORE_OK);
}

static void make_change(struct run *run, struct store_view *view)
{
    uint32_t kind = repeatable_below(&run->random, 100);
    size_t item = repeatable_below(&run->random, ITEMS);
    if (kind < 25) {
        file(run, view, item, false);
    } else if (kind < 30) {
        file(run, view, item, true);
    } else if (kind < 55) {
        rule(run, view, item);
    } else if (kind < 70) {
        check(run, view, item, kind < 63);
    } else if (kind < 86) {
        tag_again(run, view, item);
    } else if (kind < 92) {
        withdraw(run, view, item);
    } else if (kind < 96) {
        be_refused(run, view, item);
    } else {
        erase(run, view);
    }
}

static void make_changes(struct run *run)
{
    for (int i = 0; i < CHANGES_A_ROUND; i += CHANGES_A_VIEW) {
        struct store_view *view = fixture_write(run->fixture);
        for (int j = 0; j < CHANGES_A_VIEW; j++) {
            make_change(run, view);
        }
        fixture_commit(view);
    }
}

/* --- items as they are read --- */

static uint32_t bits_of(struct numbers numbers)
{
    uint32_t bits = 0;
    for (size_t i = 0; i < numbers.count; i++) {
        assert_true(numbers.list[i] < TAGS);
        bits |= 1U << numbers.list[i];
    }
    assert_int_equal(count_bits(bits), numbers.count); /* none twice */
    return bits;
}

static struct facts facts_of(const struct item_record *record)
{
    struct facts facts = {.is_there = 1,
                          .filed = bits_of(record->filed),
                          .prompted = bits_of(record->prompted),
                          .declined = bits_of(record->declined),
                          .is_checked = record->check.is_there,
                          .is_random = record->check.is_random,
                          .is_filed_after = record->filed_after_check,
                          .list = bits_of(record->check.tags),
                          .given = bits_of(record->check.given),
                          .hidden = bits_of(record->check.hidden),
                          .extra = bits_of(record->check.extra),
                          .seen = record->check.seen};
    for (size_t i = 0; i < record->ruling_count; i++) {
        const struct item_ruling *ruling = &record->rulings[i];
        uint32_t *side = ruling->belongs ? &facts.belongs : &facts.denied;
        assert_int_equal((facts.belongs | facts.denied) & (1U << ruling->tag), 0);
        *side |= 1U << ruling->tag;
    }
    for (size_t i = 0; i < record->second_count; i++) {
        size_t tagger = 0;
        while (tagger < TAGGERS - 1 && !is_text(record->seconds[i].tagger, TAGGER[tagger])) {
            tagger++;
        }
        assert_true(is_text(record->seconds[i].tagger, TAGGER[tagger]));
        assert_false(facts.has_second[tagger]);
        facts.has_second[tagger] = 1;
        facts.second[tagger] = bits_of(record->seconds[i].tags);
    }
    return facts;
}

static void assert_what_follows(const struct item_record *record, const struct facts *facts)
{
    uint32_t tags = tags_of(facts);
    uint32_t unprompted = facts->filed & ~facts->prompted & tags;
    assert_int_equal(bits_of(record->tags), tags);
    assert_int_equal(bits_of(record->unprompted), unprompted);
    assert_int_equal(bits_of(record->examined), tags & ~unprompted);
    assert_int_equal(bits_of(record->belongs), facts->belongs);
    assert_int_equal(bits_of(record->denied), facts->denied);
    assert_int_equal(bits_of(record->known_not), (facts->declined | facts->denied) & ~tags);
}

/* Reads all items; those that are not there are all 0. */
static void read_items(struct run *run, struct facts items[ITEMS])
{
    struct store_view *view = fixture_read(run->fixture);
    for (size_t i = 0; i < ITEMS; i++) {
        struct item_record record = {0};
        uint64_t seq = 0;
        items[i] = (struct facts){0};
        if (items_find(view, text_of(ITEM[i]), &seq, &run->error) == STORE_OK) {
            assert_int_equal(items_read(view, seq, &run->fixture->reading, &record, &run->error),
                             STORE_OK);
            items[i] = facts_of(&record);
            assert_what_follows(&record, &items[i]);
        }
    }
    store_end(view);
}

/* --- the recount --- */

static uint32_t is_in(uint32_t bits, uint32_t tag)
{
    return (bits >> tag) & 1U;
}

static void recount_tag(struct vocabulary_counts *counts, const struct facts *item, uint32_t tag)
{
    uint32_t unprompted = item->filed & ~item->prompted;
    uint32_t is_open = item->is_checked ? 0 : 1;
    counts->count += is_in(tags_of(item), tag);
    counts->unprompted += is_in(unprompted & tags_of(item), tag);
    counts->unchecked += is_open & is_in(unprompted & tags_of(item), tag);
    counts->found += is_open & is_in(item->belongs & ~item->filed, tag);
    counts->ruled_belongs += is_in(item->belongs, tag);
    counts->ruled_not += is_in(item->denied, tag);
    counts->check_true += item->is_random & is_in(item->given | item->hidden, tag);
    counts->check_given += item->is_random & is_in(item->given, tag);
    for (size_t i = 0; i < TAGGERS; i++) {
        counts->second_true += is_in(item->second[i], tag);
        counts->second_given += is_in(item->second[i] & unprompted, tag);
    }
}

static void recount_store(struct store_evidence *evidence, const struct facts *item)
{
    uint32_t unprompted = item->filed & ~item->prompted;
    uint32_t taggers = 0;
    evidence->checks_random += item->is_checked & item->is_random;
    evidence->checks_picked += item->is_checked & ~item->is_random;
    evidence->seen += item->is_random ? item->seen : 0;
    evidence->wrong += item->is_random ? count_bits(item->extra) : 0;
    for (size_t i = 0; i < TAGGERS; i++) {
        taggers += item->has_second[i];
        evidence->second_second += count_bits(item->second[i]);
        evidence->second_both += count_bits(item->second[i] & unprompted);
    }
    evidence->second_items += taggers > 0;
    evidence->second_first += (uint64_t)taggers * count_bits(unprompted);
}

static void assert_counts(struct run *run, uint32_t tag, const struct vocabulary_counts *expected)
{
    struct vocabulary_counts counts = fixture_counts(run->fixture, TAG[tag]);
    assert_memory_equal(&counts, expected, sizeof counts);
}

static void assert_recounted(struct run *run)
{
    struct facts items[ITEMS];
    struct store_totals expected = {.tags = TAGS};
    read_items(run, items);
    for (size_t i = 0; i < ITEMS; i++) {
        expected.items += items[i].is_there;
        recount_store(&expected.evidence, &items[i]);
    }
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        struct vocabulary_counts counts = {0};
        for (size_t i = 0; i < ITEMS; i++) {
            recount_tag(&counts, &items[i], tag);
        }
        assert_counts(run, tag, &counts);
    }
    struct store_totals found = fixture_totals(run->fixture);
    expected.seq = found.seq;
    assert_memory_equal(&found, &expected, sizeof found);
}

static void the_items_are_what_the_changes_say(void **state)
{
    struct run *run = *state;
    for (int round = 0; round < ROUNDS; round++) {
        struct facts items[ITEMS];
        make_changes(run);
        read_items(run, items);
        for (size_t i = 0; i < ITEMS; i++) {
            assert_memory_equal(&items[i], &run->facts[i], sizeof items[i]);
        }
    }
}

static void all_counts_are_those_of_a_recount(void **state)
{
    struct run *run = *state;
    for (int round = 0; round < ROUNDS; round++) {
        make_changes(run);
        assert_recounted(run);
    }
    fixture_close(run->fixture);
    fixture_open(run->fixture);
    assert_recounted(run);
}

static void all_counts_are_zero_once_all_items_are_withdrawn(void **state)
{
    struct run *run = *state;
    const struct vocabulary_counts none = {0};
    for (int round = 0; round < ROUNDS; round++) {
        make_changes(run);
    }
    assert_true(fixture_totals(run->fixture).evidence.second_both > 0);
    struct store_view *view = fixture_write(run->fixture);
    for (size_t i = 0; i < ITEMS; i++) {
        withdraw(run, view, i);
    }
    fixture_commit(view);
    struct store_totals totals = fixture_totals(run->fixture);
    struct store_totals expected = {.seq = totals.seq, .tags = TAGS};
    assert_memory_equal(&totals, &expected, sizeof totals);
    for (uint32_t tag = 0; tag < TAGS; tag++) {
        assert_counts(run, tag, &none);
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_items_are_what_the_changes_say),
        TEST(all_counts_are_those_of_a_recount),
        TEST(all_counts_are_zero_once_all_items_are_withdrawn),
    };
    return cmocka_run_group_tests_name("tally of items", tests, NULL, NULL);
}
