#include "tests/faults/ledger.h"

#include <setjmp.h>
#include <stdarg.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/logbook.h"
#include "tests/unit/repeatable.h"

enum {
    SHORT_WORDS = 8,
    LONG_WORDS = 300, /* one in LONG_EVERY: learning falls behind now and then */
    LONG_EVERY = 24,
    OPENS_EVERY = 20, /* one in so many filings opens a tag, to begin with */
    OPENS_LESS = 100, /* and one in one more for so many tags */
    NAME_BYTES = 48
};

static const char *const BASE_TAGS[LEDGER_BASE_TAGS] = {"fog",    "lamp",    "wreck",   "birds",
                                                        "supply", "weather", "visitor", "harbour"};

/* --- what follows from a change -------------------------------------------------------------- */

static void apply_filing(struct ledger_item *item, const struct change *change, unsigned k)
{
    if (!item->stands) {
        *item = (struct ledger_item){.stands = true};
    }
    item->filed_seq = k;
    item->filed = change->tags;
    item->prompted = change->prompted;
    item->declined = change->against;
    item->filed_after_check = item->is_checked;
    tag_set_keep(&item->belongs, &item->declined, false); /* the latest word counts */
    tag_set_keep(&item->denied, &item->filed, false);
}

static void apply_rulings(struct ledger_item *item, const struct change *change)
{
    tag_set_keep(&item->belongs, &change->against, false);
    tag_set_keep(&item->denied, &change->tags, false);
    tag_set_unite(&item->belongs, &change->tags);
    tag_set_unite(&item->denied, &change->against);
}

static void apply_check(struct ledger_item *item, const struct change *change)
{
    item->is_checked = true;
    item->is_random = item->is_random || change->is_random;
    item->filed_after_check = false;
    item->checked = change->tags;
    tag_set_keep(&item->belongs, &change->tags, true);
    tag_set_keep(&item->denied, &change->tags, false);
}

static void apply(struct ledger_state *state, const struct change *change)
{
    struct ledger_item *item = &state->items[change->item];
    unsigned k = ++state->seq;
    switch (change->kind) {
    case CHANGE_FILE:
        apply_filing(item, change, k);
        break;
    case CHANGE_WITHDRAW:
        *item = (struct ledger_item){0};
        break;
    case CHANGE_RULE:
        apply_rulings(item, change);
        break;
    case CHANGE_CHECK:
        apply_check(item, change);
        break;
    case CHANGE_TAG_AGAIN:
        item->is_tagged_again[change->tagger] = true;
        item->again[change->tagger] = change->tags;
        break;
    }
    item->seq = k;
    state->tags += change->opens;
}

struct tag_set ledger_tags_of(const struct ledger_item *item)
{
    struct tag_set tags = item->is_checked ? item->checked : item->filed;
    if (item->is_checked && item->filed_after_check) {
        tag_set_unite(&tags, &item->filed);
        tag_set_keep(&tags, &item->declined, false);
    }
    tag_set_unite(&tags, &item->belongs);
    tag_set_keep(&tags, &item->denied, false);
    return tags;
}

/* --- drawing a change ------------------------------------------------------------------------ */

static bool one_in(struct repeatable *random, unsigned count)
{
    return repeatable_below(random, count) == 0;
}

/* Each base tag with a chance of one in `count`. */
static struct tag_set draw_tags(struct repeatable *random, unsigned count)
{
    struct tag_set tags = {0};
    for (unsigned tag = 0; tag < LEDGER_BASE_TAGS; tag++) {
        if (one_in(random, count)) {
            tag_set_add(&tags, tag);
        }
    }
    return tags;
}

/* The tags of an entry of the logbook, which its words go with. */
static struct tag_set logbook_set(unsigned number)
{
    char list[LOGBOOK_TAGS_BYTES];
    struct tag_set tags = {0};
    logbook_tags(number, list);
    for (unsigned tag = 0; tag < LEDGER_BASE_TAGS; tag++) {
        if (strstr(list, BASE_TAGS[tag])) {
            tag_set_add(&tags, tag);
        }
    }
    return tags;
}

static void name_tag(struct ledger *ledger, unsigned tag, const char *name)
{
    if (tag >= ledger->name_capacity) {
        size_t capacity = 2 * ledger->name_capacity + 64;
        char **grown = realloc(ledger->names, capacity * sizeof *grown);
        assert_non_null(grown);
        memset(grown + ledger->name_capacity, 0,
               (capacity - ledger->name_capacity) * sizeof *grown);
        ledger->names = grown;
        ledger->name_capacity = capacity;
    }
    free(ledger->names[tag]); /* of a change that was lost, if any */
    ledger->names[tag] = strdup(name);
    assert_non_null(ledger->names[tag]);
}

/* Another tag than the base ones: a new one, or one that was opened before. */
static void draw_other_tag(struct ledger *ledger, struct repeatable *random, struct change *change)
{
    unsigned tags = ledger->sent.tags;
    if (one_in(random, OPENS_EVERY + tags / OPENS_LESS)) {
        char name[NAME_BYTES];
        (void)snprintf(name, sizeof name, "light %u of night %u", tags, change->round);
        name_tag(ledger, tags, name);
        tag_set_add(&change->tags, tags);
        change->opens = 1;
    } else if (tags > LEDGER_BASE_TAGS && one_in(random, 4)) {
        tag_set_add(&change->tags,
                    LEDGER_BASE_TAGS + repeatable_below(random, tags - LEDGER_BASE_TAGS));
    }
}

static void draw_filing(struct ledger *ledger, struct repeatable *random, struct change *change)
{
    change->kind = CHANGE_FILE;
    change->words =
        one_in(random, LONG_EVERY) ? LONG_WORDS : SHORT_WORDS + repeatable_below(random, 24);
    change->tags = logbook_set(change->number);
    if (one_in(random, 4)) { /* somebody was shown proposals */
        change->prompted = draw_tags(random, 2);
        change->against = change->prompted;
        tag_set_keep(&change->prompted, &change->tags, true);
        tag_set_keep(&change->against, &change->tags, false);
    }
    draw_other_tag(ledger, random, change);
}

static void draw_first(struct ledger *ledger, struct change *change)
{
    change->kind = CHANGE_FILE;
    change->words = SHORT_WORDS;
    change->opens = LEDGER_BASE_TAGS;
    for (unsigned tag = 0; tag < LEDGER_BASE_TAGS; tag++) {
        name_tag(ledger, tag, BASE_TAGS[tag]);
        tag_set_add(&change->tags, tag);
    }
}

static void draw_rulings(struct repeatable *random, struct change *change)
{
    unsigned one = repeatable_below(random, LEDGER_BASE_TAGS);
    unsigned other = (one + 1 + repeatable_below(random, LEDGER_BASE_TAGS - 1)) % LEDGER_BASE_TAGS;
    unsigned which = repeatable_below(random, 3); /* belongs, not, or both */
    change->kind = CHANGE_RULE;
    if (which != 1) {
        tag_set_add(&change->tags, one);
    }
    if (which != 0) {
        tag_set_add(&change->against, other);
    }
}

/* The list of a check: mostly what is there, and at most one tag that is no base one. */
static void draw_check(struct repeatable *random, const struct ledger_item *item,
                       struct change *change)
{
    struct tag_set present = ledger_tags_of(item);
    bool has_other = false;
    change->kind = CHANGE_CHECK;
    change->is_random = one_in(random, 2);
    change->tags = draw_tags(random, 6);
    for (unsigned i = 0; i < present.count; i++) {
        bool is_other = present.tags[i] >= LEDGER_BASE_TAGS;
        if (!(is_other && has_other) && !one_in(random, 6)) {
            tag_set_add(&change->tags, present.tags[i]);
            has_other = has_other || is_other;
        }
    }
}

/* Never what he gave the last time, which would be no change. */
static void draw_second_tagging(struct repeatable *random, const struct ledger_item *item,
                                struct change *change)
{
    change->kind = CHANGE_TAG_AGAIN;
    change->tagger = repeatable_below(random, LEDGER_OTHER_TAGGERS);
    do {
        change->tags = draw_tags(random, 4);
    } while (item->is_tagged_again[change->tagger] &&
             tag_set_equal(&change->tags, &item->again[change->tagger]));
}

static void draw_of_item(struct ledger *ledger, struct repeatable *random, struct change *change)
{
    const struct ledger_item *item = &ledger->sent.items[change->item];
    unsigned which = repeatable_below(random, 16);
    if (!item->stands || which < 6) {
        draw_filing(ledger, random, change);
    } else if (which < 10) {
        draw_rulings(random, change);
    } else if (which < 12) {
        draw_check(random, item, change);
    } else if (which < 14) {
        draw_second_tagging(random, item, change);
    } else {
        change->kind = CHANGE_WITHDRAW;
    }
}

const struct change *ledger_draw(struct ledger *ledger, unsigned round)
{
    unsigned k = ledger->sent.seq + 1;
    struct repeatable random = {ledger->seed ^ ((uint64_t)round << 32U) ^ k};
    struct change change = {.round = round,
                            .item = repeatable_below(&random, LEDGER_ITEMS),
                            .number = (unsigned)repeatable_next(&random)};
    if (k == 1) {
        draw_first(ledger, &change);
    } else {
        draw_of_item(ledger, &random, &change);
    }
    if (k > ledger->change_capacity) {
        size_t capacity = 2 * ledger->change_capacity + 1024;
        struct change *grown = realloc(ledger->changes, capacity * sizeof *grown);
        assert_non_null(grown);
        ledger->changes = grown;
        ledger->change_capacity = capacity;
    }
    ledger->changes[k - 1] = change;
    apply(&ledger->sent, &change);
    return &ledger->changes[k - 1];
}

/* --- what became of it ----------------------------------------------------------------------- */

const struct change *ledger_change(const struct ledger *ledger, unsigned k)
{
    assert_in_range(k, 1, ledger->sent.seq);
    return &ledger->changes[k - 1];
}

void ledger_acknowledge(struct ledger *ledger)
{
    apply(&ledger->acknowledged, ledger_change(ledger, ledger->acknowledged.seq + 1));
}

void ledger_settle(struct ledger *ledger, unsigned seq)
{
    assert_in_range(seq, ledger->acknowledged.seq, ledger->sent.seq);
    while (ledger->acknowledged.seq < seq) {
        ledger_acknowledge(ledger);
    }
    ledger->sent = ledger->acknowledged;
}

void ledger_init(struct ledger *ledger, uint64_t seed)
{
    *ledger = (struct ledger){.seed = seed};
}

void ledger_deinit(struct ledger *ledger)
{
    for (size_t tag = 0; tag < ledger->name_capacity; tag++) {
        free(ledger->names[tag]);
    }
    free(ledger->names);
    free(ledger->changes);
}
