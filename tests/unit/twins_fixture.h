/*
 * twins_fixture: two homes, one of which is made anew of what is said of the other's items: the
 * calls of snapshot_said, done as the daemon does them.
 */
#ifndef UNDERTAG_TESTS_TWINS_FIXTURE_H
#define UNDERTAG_TESTS_TWINS_FIXTURE_H

#include "daemon/snapshot/snapshot_said.h"
#include "tests/unit/store_fixture.h"

/* In the order of their bytes. */
static const char *const TWINS_TAGS[] = {"bell", "fog", "gale", "ice", "lamp", "supply", "wreck"};

enum {
    TWINS_TAG_COUNT = sizeof TWINS_TAGS / sizeof TWINS_TAGS[0],
    TWINS_TEXT_BYTES = 2048
};

struct twins {
    struct fixture *one; /* the home that the items are of */
    struct fixture *two; /* the one that they are filed in anew */
    char lines[64 * 1024];
};

static inline int twins_set_up(void **state)
{
    static struct twins twins;
    void *fixture = NULL;
    twins = (struct twins){0};
    (void)fixture_setup(&fixture);
    twins.one = fixture;
    (void)fixture_setup(&fixture);
    twins.two = fixture;
    *state = &twins;
    return 0;
}

static inline int twins_tear_down(void **state)
{
    struct twins *twins = *state;
    void *fixtures[] = {twins->one, twins->two};
    return fixture_teardown(&fixtures[0]) | fixture_teardown(&fixtures[1]);
}

/* --- saying it anew --- */

static inline void read_names(const json_t *params, const char *member,
                              const char *names[FIXTURE_TAGS])
{
    const json_t *list = json_object_get(params, member);
    assert_true(json_array_size(list) < FIXTURE_TAGS);
    for (size_t i = 0; i < json_array_size(list); i++) {
        names[i] = json_string_value(json_array_get(list, i));
    }
}

static inline struct store_text member_text(const json_t *params, const char *member)
{
    const char *text = json_string_value(json_object_get(params, member));
    return text ? text_of(text) : (struct store_text){0};
}

/* Does what the daemon does at the call. */
static inline void make_call(struct fixture *fixture, const char *method, const json_t *params,
                             const char *id)
{
    struct names names = {0};
    struct rulings rulings = {0};
    struct item_saying saying = {.id = text_of(id)};
    read_names(params, "tags", names.tags);
    read_names(params, "prompted", names.prompted);
    read_names(params, "declined", names.declined);
    read_names(params, "belongs", rulings.belongs);
    read_names(params, "not", rulings.denied);
    if (strcmp(method, "item.rule") == 0) {
        saying.who = member_text(params, "editor");
        assert_int_equal(fixture_rule(fixture, saying, rulings).result, STORE_OK);
    } else if (strcmp(method, "item.check") == 0) {
        const char *drawn = json_string_value(json_object_get(params, "drawn"));
        saying.who = member_text(params, "checker");
        assert_int_equal(fixture_check(fixture, saying, strcmp(drawn, "random") == 0, names).result,
                         STORE_OK);
    } else if (json_is_true(json_object_get(params, "independent"))) {
        saying.who = member_text(params, "tagger");
        assert_int_equal(fixture_tag_again(fixture, saying, "", true, names).result, STORE_OK);
    } else {
        (void)fixture_file_as(fixture,
                              (struct item_filing){.id = text_of(id),
                                                   .title = member_text(params, "title"),
                                                   .text = member_text(params, "text"),
                                                   .tagger = member_text(params, "tagger")},
                              names);
    }
}

static inline void make_item(struct fixture *fixture, const json_t *line)
{
    size_t i;
    json_t *call;
    const char *id = json_string_value(json_object_get(line, "id"));
    make_call(fixture, "item.file", line, id);
    json_array_foreach(json_object_get(line, "then"), i, call)
    {
        make_call(fixture, json_string_value(json_object_get(call, "method")),
                  json_object_get(call, "params"), id);
    }
}

struct walk {
    struct twins *twins;
    struct store_view *view;
    struct snapshot_opened opened;
};

static inline int say_one(void *user, const struct item_record *record)
{
    struct walk *walk = user;
    struct store_error error = {0};
    if (item_is_withdrawn(record)) {
        return STORE_OK;
    }
    json_t *line = snapshot_said(&walk->opened, walk->view, record, &error);
    assert_non_null(line);
    char *text = json_dumps(line, JSON_COMPACT);
    size_t used = strlen(walk->twins->lines);
    assert_true(used + strlen(text) + 2 < sizeof walk->twins->lines);
    (void)sprintf(walk->twins->lines + used, "%s\n", text);
    make_item(walk->twins->two, line);
    free(text);
    json_decref(line);
    return STORE_OK;
}

/* Says all items of the one home, and makes them in the other. */
static inline void make_anew(struct twins *twins)
{
    struct walk walk = {.twins = twins, .view = fixture_read(twins->one)};
    struct store_error error = {0};
    uint64_t next = 0;
    assert_int_equal(snapshot_opened_init(&walk.opened, walk.view), 0);
    assert_int_equal(
        items_changed(walk.view, 0, SIZE_MAX, say_one, &walk, &twins->one->reading, &next, &error),
        STORE_OK);
    snapshot_opened_deinit(&walk.opened);
    store_end(walk.view);
}

/* --- comparing --- */

/* Adds the names of a set, in the order of TWINS_TAGS, which is that of their bytes. */
static inline void tell_names(struct fixture *fixture, const char *what, struct numbers numbers,
                              char text[TWINS_TEXT_BYTES])
{
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    size_t used = strlen(text);
    used += (size_t)snprintf(text + used, TWINS_TEXT_BYTES - used, " %s", what);
    for (size_t i = 0; i < TWINS_TAG_COUNT; i++) {
        struct vocabulary_tag tag = {0};
        int result = vocabulary_find(view, TWINS_TAGS[i], strlen(TWINS_TAGS[i]), &tag, &error);
        if (result == STORE_OK && numbers_hold(numbers, tag.number)) {
            used += (size_t)snprintf(text + used, TWINS_TEXT_BYTES - used, " %s", TWINS_TAGS[i]);
        }
    }
    assert_true(used < TWINS_TEXT_BYTES);
    store_end(view);
}

static inline void tell_number(const char *what, uint64_t number, char text[TWINS_TEXT_BYTES])
{
    size_t used = strlen(text);
    used +=
        (size_t)snprintf(text + used, TWINS_TEXT_BYTES - used, " %s %u", what, (unsigned)number);
    assert_true(used < TWINS_TEXT_BYTES);
}

static inline void tell_text(const char *what, struct store_text words, char text[TWINS_TEXT_BYTES])
{
    size_t used = strlen(text);
    used += (size_t)snprintf(text + used, TWINS_TEXT_BYTES - used, " %s '%.*s'", what,
                             (int)words.size, words.size ? words.data : "");
    assert_true(used < TWINS_TEXT_BYTES);
}

/* All that a record says, times, users and numbers apart. */
static inline void tell_item(struct fixture *fixture, const char *id, char text[TWINS_TEXT_BYTES])
{
    struct item_record record = fixture_item(fixture, id);
    const struct item_check *check = &record.check;
    text[0] = '\0';
    tell_text("text", record.text, text);
    tell_text("tagger", record.tagger, text);
    tell_names(fixture, "filed", record.filed, text);
    tell_names(fixture, "prompted", record.prompted, text);
    tell_names(fixture, "declined", record.declined, text);
    tell_names(fixture, "tags", record.tags, text);
    if (check->is_there) {
        tell_text("checked by", check->checker, text);
        tell_names(fixture, check->is_random ? "at random" : "picked", check->tags, text);
        tell_names(fixture, "given", check->given, text);
        tell_names(fixture, "hidden", check->hidden, text);
        tell_names(fixture, "extra", check->extra, text);
        tell_number("seen", check->seen, text);
    }
    for (size_t i = 0; i < TWINS_TAG_COUNT; i++) { /* rulings in the order of names */
        for (size_t j = 0; j < record.ruling_count; j++) {
            const struct item_ruling *ruling = &record.rulings[j];
            char told[TWINS_TEXT_BYTES] = "";
            tell_names(fixture, ruling->belongs ? "belongs" : "not",
                       (struct numbers){.list = &ruling->tag, .count = 1}, told);
            if (strstr(told, TWINS_TAGS[i])) {
                tell_text(told, ruling->editor, text);
            }
        }
    }
    for (size_t i = 0; i < record.second_count; i++) {
        tell_text("second", record.seconds[i].tagger, text);
        tell_names(fixture, "gives", record.seconds[i].tags, text);
    }
}

static inline void assert_same_item(struct twins *twins, const char *id)
{
    char one[TWINS_TEXT_BYTES];
    char two[TWINS_TEXT_BYTES];
    tell_item(twins->one, id, one);
    tell_item(twins->two, id, two);
    if (strcmp(one, two) != 0) {
        fail_msg("%s\n%s was\n  %s\nand is\n  %s", twins->lines, id, one, two);
    }
}

/* Of a tag that is not there, nothing is counted. */
static inline struct vocabulary_counts counts_of(struct fixture *fixture, const char *name)
{
    struct store_error error = {0};
    struct vocabulary_tag tag = {0};
    struct store_view *view = fixture_read(fixture);
    int result = vocabulary_find(view, name, strlen(name), &tag, &error);
    store_end(view);
    return result == STORE_OK ? tag.counts : (struct vocabulary_counts){0};
}

static inline void assert_same_counts(struct twins *twins)
{
    struct store_totals one = fixture_totals(twins->one);
    struct store_totals two = fixture_totals(twins->two);
    assert_int_equal(one.items, two.items);
    assert_memory_equal(&one.evidence, &two.evidence, sizeof one.evidence);
    for (size_t i = 0; i < TWINS_TAG_COUNT; i++) {
        struct vocabulary_counts before = counts_of(twins->one, TWINS_TAGS[i]);
        struct vocabulary_counts after = counts_of(twins->two, TWINS_TAGS[i]);
        assert_memory_equal(&before, &after, sizeof before);
    }
}

#endif
