#include "daemon/snapshot/snapshot_said.h"

#include <stdlib.h>

#include "daemon/answer.h"
#include "daemon/item_json.h"

/* What is at hand. */
struct saying {
    struct store_view *view;
    const struct item_record *record;
    struct store_error *error;
    uint32_t *room; /* for four lists of the longest */
    size_t longest;
    json_t *then;
};

/* --- members ------------------------------------------------------------------------------------
 */

static void add_names(const struct saying *saying, json_t **params, const char *member,
                      struct numbers tags)
{
    answer_add(params, member, item_names_json(saying->view, tags, saying->error));
}

static void add_some_names(const struct saying *saying, json_t **params, const char *member,
                           struct numbers tags)
{
    if (tags.count > 0) {
        add_names(saying, params, member, tags);
    }
}

static void add_text(json_t **params, const char *member, struct store_text text)
{
    if (text.size > 0) {
        answer_add(params, member, item_text_json(text));
    }
}

static void add_call(struct saying *saying, const char *method, json_t *params)
{
    json_t *call = json_object();
    answer_add(&call, "method", json_string(method));
    answer_add(&call, "params", params);
    answer_append(&saying->then, call);
}

/* What the learner reads of the item, and who filed it; its tags are to follow. */
static void add_content(const struct item_record *record, json_t **params)
{
    add_text(params, "title", record->title);
    add_text(params, "text", record->text);
    if (record->fields.size > 0) {
        answer_add(params, "fields", item_fields_json(record->fields));
    }
    add_text(params, "language", record->language);
    add_text(params, "tagger", record->tagger);
    add_text(params, "filed_at", record->filed_at);
}

static void add_filing(const struct saying *saying, json_t **params)
{
    const struct item_record *record = saying->record;
    add_content(record, params);
    add_names(saying, params, "tags", record->filed);
    add_some_names(saying, params, "prompted", record->prompted);
    add_some_names(saying, params, "declined", record->declined);
}

/* --- calls --------------------------------------------------------------------------------------
 */

static void add_seconds(struct saying *saying)
{
    for (size_t i = 0; i < saying->record->second_count; i++) {
        const struct item_second *second = &saying->record->seconds[i];
        json_t *params = json_object();
        answer_add(&params, "independent", json_true());
        add_text(&params, "tagger", second->tagger);
        add_text(&params, "filed_at", second->filed_at);
        add_names(saying, &params, "tags", second->tags);
        add_call(saying, "item.file", params);
    }
}

static bool is_before_check(const struct saying *saying, const struct item_ruling *ruling)
{
    return saying->record->check.is_there && ruling->at_ms <= saying->record->check.at_ms;
}

/* The rulings from before the check, or all others; a call each, since each has its editor. */
static void add_rulings(struct saying *saying, bool before_check)
{
    for (size_t i = 0; i < saying->record->ruling_count; i++) {
        const struct item_ruling *ruling = &saying->record->rulings[i];
        const struct numbers tag = {.list = &ruling->tag, .count = 1};
        if (is_before_check(saying, ruling) != before_check) {
            continue;
        }
        json_t *params = json_object();
        add_names(saying, &params, ruling->belongs ? "belongs" : "not", tag);
        add_text(&params, "editor", ruling->editor);
        add_call(saying, "item.rule", params);
    }
}

static void add_check_of(struct saying *saying, struct numbers tags, bool is_random)
{
    json_t *params = json_object();
    add_names(saying, &params, "tags", tags);
    answer_add(&params, "drawn", json_string(is_random ? "random" : "picked"));
    add_text(&params, "checker", saying->record->check.checker);
    add_call(saying, "item.check", params);
}

/* Room for another list of the longest; `at` is below 4. */
static uint32_t *room_at(const struct saying *saying, size_t at)
{
    return saying->room + at * saying->longest;
}

/*
 * What the check found without a trial had been examined before: pointed out in the filing, or
 * ruled on. A ruling that the check has contradicted is gone, and is said again.
 */
static void add_contradicted(struct saying *saying, struct numbers tried)
{
    const struct item_record *record = saying->record;
    struct numbers left = numbers_without(record->check.tags, tried, room_at(saying, 1));
    left = numbers_without(left, record->prompted, room_at(saying, 2));
    left = numbers_without(left, record->declined, room_at(saying, 1));
    left = numbers_without(left, record->belongs, room_at(saying, 2));
    if (left.count > 0) {
        json_t *params = json_object();
        add_names(saying, &params, "not", left);
        add_call(saying, "item.rule", params);
    }
}

/*
 * Trials that an earlier check made and the latest list does not hold any more: that check comes
 * first, with what it found. Otherwise the one check finds all of it again.
 */
static void add_checks(struct saying *saying)
{
    const struct item_check *check = &saying->record->check;
    struct numbers tried = numbers_unite(check->given, check->hidden, room_at(saying, 0));
    if (!saying->record->filed_after_check) {
        add_contradicted(saying, tried);
    }
    struct numbers lost = numbers_without(tried, check->tags, room_at(saying, 1));
    if (lost.count > 0) {
        add_check_of(saying, tried, check->is_random);
    }
    add_check_of(saying, check->tags, check->is_random);
}

/*
 * The filing that the check met, where another has taken its place since: it gave what the check
 * found given and what the check took off. What it found without a trial had been examined.
 */
static void add_earlier_filing(const struct saying *saying, json_t **params)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    struct numbers found = numbers_without(check->tags, check->hidden, room_at(saying, 0));
    struct numbers examined = numbers_without(found, check->given, room_at(saying, 1));
    struct numbers taken_off = numbers_unite(check->given, check->extra, room_at(saying, 2));
    struct numbers tags = numbers_unite(taken_off, examined, room_at(saying, 3));
    add_content(record, params);
    add_names(saying, params, "tags", tags);
    add_some_names(saying, params, "prompted", examined);
}

static json_t *say(struct saying *saying)
{
    const struct item_record *record = saying->record;
    bool is_refiled = record->check.is_there && record->filed_after_check;
    json_t *params = json_object();
    answer_add(&params, "id", item_text_json(record->id));
    if (is_refiled) {
        add_earlier_filing(saying, &params);
    } else {
        add_filing(saying, &params);
    }
    add_rulings(saying, true);
    if (record->check.is_there) {
        add_checks(saying);
    }
    if (is_refiled) {
        json_t *filing = json_object();
        add_filing(saying, &filing);
        add_call(saying, "item.file", filing);
    }
    add_rulings(saying, false);
    add_seconds(saying);
    if (json_array_size(saying->then) > 0 || !saying->then) {
        answer_add(&params, "then", json_incref(saying->then));
    }
    return params;
}

json_t *snapshot_said(struct store_view *view, const struct item_record *record,
                      struct store_error *error)
{
    const struct item_check *check = &record->check;
    struct saying saying = {.view = view,
                            .record = record,
                            .error = error,
                            .longest = check->tags.count + check->given.count +
                                       check->hidden.count + check->extra.count + 1,
                            .then = json_array()};
    saying.room = calloc(4 * saying.longest, sizeof *saying.room);
    json_t *params = saying.room ? say(&saying) : NULL;
    free(saying.room);
    json_decref(saying.then);
    return params;
}
