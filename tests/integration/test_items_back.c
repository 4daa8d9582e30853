/*
 * A home that is lost but for its items.jsonl: another daemon, with an empty home, takes that file
 * by `undertag file`, and then says the same of every item and counts the same of every tag.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/program.h"
#include "tests/integration/service.h"
#include "tests/unit/repeatable.h"

enum {
    ITEMS = 240,
    CALLS = 3000,
    LIST_BYTES = 512
};

static const char *const TAGS[] = {"fog",    "gale",    "lamp",    "wreck", "ice",    "bell",
                                   "supply", "visitor", "harbour", "birds", "repair", "drill"};

enum {
    TAG_COUNT = sizeof TAGS / sizeof TAGS[0]
};

struct homes {
    struct service *lost;
    struct service *found;
};

/* --- a ledger of all that may be said of an item ------------------------------------------------
 */

/* Which tags: a bit each. */
static unsigned draw(struct repeatable *random, double share)
{
    unsigned tags = 0;
    for (unsigned i = 0; i < TAG_COUNT; i++) {
        /* Those further down are rarer. */
        tags |= (unsigned)(repeatable_share(random) * (i + 4) < share * 8) << i;
    }
    return tags;
}

/* As a JSON array, with ' for ". */
static const char *list_of(unsigned tags, char list[LIST_BYTES])
{
    size_t used = 0;
    list[0] = '\0';
    for (unsigned i = 0; i < TAG_COUNT; i++) {
        if (tags & 1U << i) {
            used += (size_t)snprintf(list + used, LIST_BYTES - used, "%s'%s'", used ? ", " : "",
                                     TAGS[i]);
        }
    }
    return list;
}

static void say_filing(struct peer *peer, struct repeatable *random, unsigned item)
{
    static const char *const TAGGERS[] = {"keeper", "mate", "pilot"};
    char lists[3][LIST_BYTES];
    unsigned tags = draw(random, 0.35);
    unsigned prompted = repeatable_below(random, 3) == 0 ? draw(random, 0.3) & tags : 0;
    unsigned declined = repeatable_below(random, 3) == 0 ? draw(random, 0.1) & ~tags : 0;
    (void)peer_request(peer, "item.file",
                       "{'id': 'log/%u', 'title': 'Entry %u', 'text': 'watch %u of the %u', "
                       "'fields': {'desk': 'harbour', 'year': %u}, 'language': 'en', "
                       "'tagger': '%s', 'filed_at': '1911-02-03T04:05:06Z', "
                       "'tags': [%s], 'prompted': [%s], 'declined': [%s]}",
                       item, item, repeatable_below(random, 5), item % 17, 1900 + item % 30,
                       TAGGERS[repeatable_below(random, 3)], list_of(tags, lists[0]),
                       list_of(prompted, lists[1]), list_of(declined, lists[2]));
}

static void say_ruling(struct peer *peer, struct repeatable *random, unsigned item)
{
    char lists[2][LIST_BYTES];
    unsigned belongs = draw(random, 0.1);
    (void)peer_request(peer, "item.rule", "{'id': 'log/%u', 'belongs': [%s], 'not': [%s]%s}", item,
                       list_of(belongs, lists[0]), list_of(draw(random, 0.1) & ~belongs, lists[1]),
                       repeatable_below(random, 2) == 0 ? ", 'editor': 'e.ditor'" : "");
}

static void say_check(struct peer *peer, struct repeatable *random, unsigned item)
{
    char list[LIST_BYTES];
    (void)peer_request(peer, "item.check",
                       "{'id': 'log/%u', 'tags': [%s], 'drawn': '%s', 'checker': 'c.lerk'}", item,
                       list_of(draw(random, 0.4), list),
                       repeatable_below(random, 2) == 0 ? "random" : "picked");
}

static void say_second(struct peer *peer, struct repeatable *random, unsigned item)
{
    char list[LIST_BYTES];
    (void)peer_request(peer, "item.file",
                       "{'id': 'log/%u', 'independent': true, 'tagger': '%s', 'tags': [%s]}", item,
                       repeatable_below(random, 2) == 0 ? "mate" : "bosun",
                       list_of(draw(random, 0.35), list));
}

/* One of them; the daemon refuses some, and says why. */
static void say_something(struct peer *peer, struct repeatable *random)
{
    unsigned item = repeatable_below(random, ITEMS);
    unsigned kind = repeatable_below(random, 20);
    if (kind < 8) {
        say_filing(peer, random, item);
    } else if (kind < 12) {
        say_ruling(peer, random, item);
    } else if (kind < 15) {
        say_check(peer, random, item);
    } else if (kind < 18) {
        say_second(peer, random, item);
    } else {
        (void)peer_request(peer, "item.withdraw", "{'id': 'log/%u'}", item);
    }
}

static void say_all(struct peer *peer)
{
    enum {
        WINDOW = 50
    };
    struct repeatable random = {1911};
    size_t taken = 0;
    for (unsigned i = 0; i < CALLS + WINDOW; i++) {
        if (i >= WINDOW) {
            taken += json_object_get(peer_answer(peer), "result") != NULL;
        }
        if (i < CALLS) {
            say_something(peer, &random);
        }
    }
    assert_in_range(taken, CALLS / 2, CALLS);
}

/* --- the two homes ------------------------------------------------------------------------------
 */

/* The first has lived; the second has been given what its items.jsonl says. */
static int set_up(void **state)
{
    static struct homes homes;
    static struct program_run run;
    homes = (struct homes){.lost = service_new(NULL, NULL, NULL),
                           .found = service_new(NULL, NULL, NULL)};
    say_all(&homes.lost->peer);
    const json_t *written = ask(&homes.lost->peer, "snapshot.write", "{'items': true}");
    char path[CHILD_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/items.jsonl", string(written, "path"));
    program_run("undertag",
                (const char *const[]){"--socket", homes.found->daemon.socket, "file", path, NULL},
                "", &run);
    if (run.exit_code != 0) {
        fail_msg("%d: %s", run.exit_code, run.error);
    }
    wait_until_learned(&homes.lost->peer);
    wait_until_learned(&homes.found->peer);
    *state = &homes;
    return 0;
}

static int tear_down(void **state)
{
    struct homes *homes = *state;
    void *services[] = {homes->lost, homes->found};
    return service_tear_down(&services[0]) | service_tear_down(&services[1]);
}

/* --- what both say ------------------------------------------------------------------------------
 */

static void take_out(json_t *object, const char *member)
{
    (void)json_object_del(object, member); /* it may not be there */
}

static int compare_rulings(const void *left, const void *right)
{
    return strcmp(string(*(json_t *const *)left, "tag"), string(*(json_t *const *)right, "tag"));
}

/* By the names of their tags: they come in the order in which those were opened. */
static json_t *sorted(const json_t *rulings)
{
    json_t *list[TAG_COUNT];
    size_t count = json_array_size(rulings);
    json_t *result = json_array();
    assert_in_range(count, 0, TAG_COUNT);
    for (size_t i = 0; i < count; i++) {
        list[i] = json_array_get(rulings, i);
        take_out(list[i], "at");
        take_out(list[i], "uid");
    }
    if (count > 1) {
        qsort(list, count, sizeof *list, compare_rulings);
    }
    for (size_t i = 0; i < count; i++) {
        assert_int_equal(json_array_append(result, list[i]), 0);
    }
    return result;
}

/* The item without times, users and numbers of changes. */
static const char *item_of(struct peer *peer, const char *id)
{
    static const char *const MEMBERS[] = {"seq", "stored_at", "uid"};
    size_t i;
    json_t *second;
    json_t *item = ask(peer, "item.show", "{'id': '%s'}", id);
    for (size_t at = 0; at < sizeof MEMBERS / sizeof MEMBERS[0]; at++) {
        take_out(item, MEMBERS[at]);
    }
    take_out(json_object_get(item, "checked"), "at");
    take_out(json_object_get(item, "checked"), "uid");
    json_array_foreach(json_object_get(item, "second"), i, second)
    {
        take_out(second, "uid");
    }
    assert_int_equal(json_object_set_new(item, "rulings", sorted(json_object_get(item, "rulings"))),
                     0);
    return text_of(peer, item);
}

/* Calls `each` for every item that is there. */
static size_t each_item(struct peer *peer, void (*each)(struct homes *homes, const char *id),
                        struct homes *homes)
{
    size_t i;
    size_t count = 0;
    json_t *entry;
    const json_t *list = ask(peer, "item.list", "{'most': 1000}");
    json_array_foreach(json_object_get(list, "items"), i, entry)
    {
        if (json_is_false(json_object_get(entry, "withdrawn"))) {
            count++;
            each(homes, string(entry, "id"));
        }
    }
    return count;
}

static void assert_same_item(struct homes *homes, const char *id)
{
    assert_string_equal(item_of(&homes->found->peer, id), item_of(&homes->lost->peer, id));
}

static void every_item_is_the_same(void **state)
{
    struct homes *homes = *state;
    size_t count = each_item(&homes->lost->peer, assert_same_item, homes);
    assert_in_range(count, ITEMS / 2, ITEMS);
    assert_int_equal(whole(ask(&homes->found->peer, "daemon.state", "{}"), "items"), count);
}

static void every_tag_counts_the_same(void **state)
{
    struct homes *homes = *state;
    for (size_t i = 0; i < TAG_COUNT; i++) {
        const json_t *lost = ask(&homes->lost->peer, "tag.show", "{'tag': '%s'}", TAGS[i]);
        const json_t *found = ask(&homes->found->peer, "tag.show", "{'tag': '%s'}", TAGS[i]);
        assert_int_equal(whole(found, "count"), whole(lost, "count"));
        assert_int_equal(whole(found, "unprompted"), whole(lost, "unprompted"));
        assert_true(
            json_equal(json_object_get(found, "rulings"), json_object_get(lost, "rulings")));
    }
}

static void the_lists_of_tags_count_the_same(void **state)
{
    struct homes *homes = *state;
    const json_t *lost = json_object_get(ask(&homes->lost->peer, "tag.list", "{}"), "tags");
    const json_t *found = json_object_get(ask(&homes->found->peer, "tag.list", "{}"), "tags");
    assert_int_equal(json_array_size(lost), TAG_COUNT);
    assert_int_equal(json_array_size(found), TAG_COUNT);
    for (size_t i = 0; i < TAG_COUNT; i++) {
        const json_t *one = json_array_get(lost, i);
        const json_t *other = json_array_get(found, i);
        assert_string_equal(string(other, "tag"), string(one, "tag"));
        assert_int_equal(whole(other, "count"), whole(one, "count"));
    }
}

/* Checks, what they found wrong, and second taggings. (That the trials are the same, tag by tag,
 * is for tests/unit/test_snapshot_said.c.) */
static void completeness_rests_on_the_same_evidence(void **state)
{
    static const char *const MEMBERS[] = {"checks", "wrong", "second"};
    struct homes *homes = *state;
    const json_t *lost = ask(&homes->lost->peer, "desk.completeness", "{}");
    const json_t *found = ask(&homes->found->peer, "desk.completeness", "{}");
    assert_true(whole(json_object_get(lost, "checks"), "random") > 10);
    for (size_t i = 0; i < sizeof MEMBERS / sizeof MEMBERS[0]; i++) {
        const char *expected = text_of(&homes->lost->peer, json_object_get(lost, MEMBERS[i]));
        assert_string_equal(text_of(&homes->found->peer, json_object_get(found, MEMBERS[i])),
                            expected);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_item_is_the_same),
        cmocka_unit_test(every_tag_counts_the_same),
        cmocka_unit_test(the_lists_of_tags_count_the_same),
        cmocka_unit_test(completeness_rests_on_the_same_evidence),
    };
    return cmocka_run_group_tests(tests, set_up, tear_down);
}
