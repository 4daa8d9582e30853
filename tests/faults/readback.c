#include "tests/faults/readback.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <limits.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/faults/feeder.h"

enum {
    LIST_MOST = 1000 /* a page of item.list and tag.list */
};

struct reading {
    const struct ledger *ledger;
    struct peer *peer;
    unsigned item; /* the one at hand */
};

/* --- one item -------------------------------------------------------------------------------- */

static void assert_text(const struct reading *reading, const json_t *shown, const char *member,
                        const char *wanted)
{
    if (strcmp(string(shown, member), wanted) != 0) {
        fail_msg("item %u has another %s than was acknowledged: '%s' and not '%s'", reading->item,
                 member, string(shown, member), wanted);
    }
}

static void assert_tags(const struct reading *reading, const json_t *shown, const char *member,
                        const struct tag_set *wanted)
{
    if (!feeder_is_set(reading->ledger, json_object_get(shown, member), wanted)) {
        fail_msg("item %u has other %s than was acknowledged: %s, and not %u tags, the first '%s'",
                 reading->item, member, text_of(reading->peer, json_object_get(shown, member)),
                 wanted->count, wanted->count > 0 ? reading->ledger->names[wanted->tags[0]] : "");
    }
}

static void assert_check(const struct reading *reading, const json_t *shown,
                         const struct ledger_item *item)
{
    const json_t *check = json_object_get(shown, "checked");
    assert_true(json_is_object(check) == item->is_checked);
    if (item->is_checked) {
        assert_tags(reading, check, "tags", &item->checked);
        assert_text(reading, check, "drawn", item->is_random ? "random" : "picked");
    }
}

/* One for each other tagger who has tagged it, and none beside. */
static void assert_second(const struct reading *reading, const json_t *shown,
                          const struct ledger_item *item)
{
    const json_t *list = json_object_get(shown, "second");
    size_t wanted = 0;
    for (unsigned tagger = 0; tagger < LEDGER_OTHER_TAGGERS; tagger++) {
        if (!item->is_tagged_again[tagger]) {
            continue;
        }
        const json_t *second = NULL;
        for (size_t at = 0; at < json_array_size(list) && !second; at++) {
            const json_t *entry = json_array_get(list, at);
            bool is_his = strcmp(string(entry, "tagger"), feeder_other_tagger(tagger)) == 0;
            second = is_his ? entry : NULL;
        }
        assert_non_null(second);
        assert_tags(reading, second, "tags", &item->again[tagger]);
        wanted++;
    }
    assert_int_equal(json_array_size(list), wanted);
}

static void assert_item(const struct reading *reading, const json_t *shown,
                        const struct ledger_item *item)
{
    char title[FEEDER_TITLE_BYTES];
    char text[FEEDER_TEXT_BYTES];
    struct tag_set tags = ledger_tags_of(item);
    const struct change *filing = ledger_change(reading->ledger, item->filed_seq);
    feeder_title(filing, item->filed_seq, title);
    feeder_text(filing, text);
    assert_int_equal(whole(shown, "seq"), item->seq);
    assert_text(reading, shown, "title", title);
    assert_text(reading, shown, "text", text);
    assert_text(reading, shown, "tagger", feeder_tagger());
    assert_tags(reading, shown, "tags", &tags);
    assert_tags(reading, shown, "filed", &item->filed);
    assert_tags(reading, shown, "prompted", &item->prompted);
    assert_tags(reading, shown, "declined", &item->declined);
    assert_tags(reading, shown, "belongs", &item->belongs);
    assert_tags(reading, shown, "not", &item->denied);
    assert_check(reading, shown, item);
    assert_second(reading, shown, item);
}

/* --- all items ------------------------------------------------------------------------------- */

static void assert_items(const struct ledger *ledger, struct peer *peer)
{
    enum {
        PART = 50 /* asked for at a time */
    };
    unsigned ids[PART];
    struct reading reading = {.ledger = ledger, .peer = peer};
    for (unsigned first = 0; first < LEDGER_ITEMS; first += PART) {
        for (unsigned i = 0; i < PART; i++) {
            ids[i] = peer_request(peer, "item.show", "{'id': 'item %u'}", first + i);
        }
        for (unsigned i = 0; i < PART; i++) {
            const struct ledger_item *item = &ledger->acknowledged.items[first + i];
            reading.item = first + i;
            if (item->stands) {
                assert_item(&reading, peer_result(peer, ids[i]), item);
            } else {
                assert_error(peer_error(peer, ids[i]), -32001, "/id");
            }
        }
    }
}

/* Every id that was ever filed is listed once, and nothing else. */
static void assert_list(const struct ledger *ledger, struct peer *peer)
{
    const json_t *answer = ask(peer, "item.list", "{'most': %d}", LIST_MOST);
    const json_t *list = json_object_get(answer, "items");
    size_t wanted = 0;
    assert_int_equal(whole(answer, "next"), ledger->acknowledged.seq);
    for (unsigned i = 0; i < LEDGER_ITEMS; i++) {
        wanted += ledger->acknowledged.items[i].seq > 0 ? 1 : 0;
    }
    assert_int_equal(json_array_size(list), wanted);
    for (size_t at = 0; at < wanted; at++) { /* seqs are different, so that none is there twice */
        const json_t *entry = json_array_get(list, at);
        unsigned long number = strtoul(string(entry, "id") + strlen("item "), NULL, 10);
        assert_in_range(number, 0, LEDGER_ITEMS - 1);
        const struct ledger_item *item = &ledger->acknowledged.items[number];
        assert_int_equal(whole(entry, "seq"), item->seq);
        assert_int_equal(json_is_true(json_object_get(entry, "withdrawn")), !item->stands);
    }
}

/* --- the vocabulary -------------------------------------------------------------------------- */

/* The counts that the items of the ledger give; the caller frees them. */
static unsigned *count_tags(const struct ledger *ledger)
{
    unsigned *counts = calloc(ledger->acknowledged.tags + 1, sizeof *counts);
    assert_non_null(counts);
    for (unsigned i = 0; i < LEDGER_ITEMS; i++) {
        const struct ledger_item *item = &ledger->acknowledged.items[i];
        struct tag_set tags = ledger_tags_of(item);
        for (unsigned at = 0; at < tags.count && item->stands; at++) {
            counts[tags.tags[at]]++;
        }
    }
    return counts;
}

/* A tag by its name; there is one. */
static unsigned find_tag(const struct ledger *ledger, const char *name)
{
    unsigned tag = 0;
    if (strncmp(name, "light ", strlen("light ")) == 0) {
        tag = (unsigned)strtoul(name + strlen("light "), NULL, 10);
    } else {
        while (tag < LEDGER_BASE_TAGS && strcmp(ledger->names[tag], name) != 0) {
            tag++;
        }
    }
    if (tag >= ledger->acknowledged.tags || strcmp(ledger->names[tag], name) != 0) {
        fail_msg("there is a tag '%s', which no change that is in has opened", name);
    }
    return tag;
}

static void assert_count(const struct ledger *ledger, const json_t *shown, unsigned *counts)
{
    const char *name = string(shown, "tag");
    unsigned tag = find_tag(ledger, name);
    if (whole(shown, "count") != counts[tag]) {
        fail_msg("'%s' has a count of %lld and not %u", name, (long long)whole(shown, "count"),
                 counts[tag]);
    }
    counts[tag] = UINT_MAX; /* or it would be there twice */
}

static void assert_vocabulary(const struct ledger *ledger, struct peer *peer)
{
    unsigned *counts = count_tags(ledger);
    size_t listed = 0;
    const json_t *page = ask(peer, "tag.list", "{'most': %d}", LIST_MOST);
    while (page) {
        const json_t *list = json_object_get(page, "tags");
        for (size_t at = 0; at < json_array_size(list); at++) {
            assert_count(ledger, json_array_get(list, at), counts);
        }
        listed += json_array_size(list);
        const json_t *next = json_object_get(page, "next");
        page = next ? ask(peer, "tag.list", "{'most': %d, 'after': '%s'}", LIST_MOST,
                          json_string_value(next))
                    : NULL;
    }
    assert_int_equal(listed, ledger->acknowledged.tags);
    free(counts);
}

void readback_assert(const struct ledger *ledger, struct peer *peer)
{
    assert_int_equal(ask_seq(peer), ledger->acknowledged.seq);
    assert_list(ledger, peer);
    assert_items(ledger, peer);
    assert_vocabulary(ledger, peer);
}
