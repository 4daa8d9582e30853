/*
 * All that is said of an item is a list of calls, the first of which is the line's own filing.
 *
 * The one thing that takes thought is a check. It has found its list, `given` and `hidden` (trials
 * of whether the tagger gives what belongs), `extra`, and how many tags it `saw` on the item; and
 * of an item that was checked twice, the trials are those of the first check and the rest of the
 * last. What the item was before is gone where it was filed again since. So:
 *
 *     filed again since    a filing is made up from which the check finds what it found; then comes
 *                          the check, then the filing on record
 *     otherwise            the filing on record, the rulings that must have come before, the check.
 *                          Where a check after those would find something else (there were two):
 *     the long way         a check of nothing but the trials; one that brings on the item what the
 *                          last check saw there; and that one
 */
#include "daemon/snapshot/snapshot_said.h"

#include <stdlib.h>
#include <string.h>

#include "daemon/answer.h"
#include "daemon/item_json.h"
#include "storage/vocabulary.h"

enum {
    OPEN_AT_ONCE = 1000, /* as many tags as an item may have where nobody has set tags_limit */
    SETS_MOST = 40       /* that are made of one record's, none larger than all of them */
};

struct filing {
    struct numbers tags;
    struct numbers prompted;
    struct numbers declined;
};

/* What is at hand. */
struct saying {
    struct snapshot_opened *opened;
    struct store_view *view;
    const struct item_record *record;
    struct store_error *error;
    uint32_t *room;         /* for sets, from here on */
    struct numbers trials;  /* of the check: given and hidden */
    struct numbers settled; /* found by it, and no trial: it had been examined before */
    struct numbers first;   /* tags of the first filing */
    json_t *calls;
};

/* --- sets ---------------------------------------------------------------------------------------
 */

static struct numbers taken(struct saying *saying, struct numbers made)
{
    saying->room += made.count;
    return made;
}

static struct numbers unite(struct saying *saying, struct numbers left, struct numbers right)
{
    return taken(saying, numbers_unite(left, right, saying->room));
}

static struct numbers without(struct saying *saying, struct numbers left, struct numbers right)
{
    return taken(saying, numbers_without(left, right, saying->room));
}

static struct numbers common(struct saying *saying, struct numbers left, struct numbers right)
{
    return taken(saying, numbers_common(left, right, saying->room));
}

static struct numbers first_of(struct numbers set, size_t count)
{
    return (struct numbers){.list = set.list, .count = count < set.count ? count : set.count};
}

static struct numbers behind(struct numbers set, size_t count)
{
    size_t passed = count < set.count ? count : set.count;
    return (struct numbers){.list = set.list + passed, .count = set.count - passed};
}

static bool are_same(struct numbers left, struct numbers right)
{
    return left.count == right.count &&
           (left.count == 0 || memcmp(left.list, right.list, left.count * sizeof *left.list) == 0);
}

/* --- calls --------------------------------------------------------------------------------------
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
    answer_append(&saying->calls, call);
}

/* With what the learner reads of the item, and who filed it. */
static void say_filing(struct saying *saying, struct filing filing)
{
    const struct item_record *record = saying->record;
    json_t *params = json_object();
    add_text(&params, "title", record->title);
    add_text(&params, "text", record->text);
    if (record->fields.size > 0) {
        answer_add(&params, "fields", item_fields_json(record->fields));
    }
    add_text(&params, "language", record->language);
    add_text(&params, "tagger", record->tagger);
    add_text(&params, "filed_at", record->filed_at);
    add_names(saying, &params, "tags", filing.tags);
    add_some_names(saying, &params, "prompted", filing.prompted);
    add_some_names(saying, &params, "declined", filing.declined);
    saying->first = json_array_size(saying->calls) == 0 ? filing.tags : saying->first;
    add_call(saying, "item.file", params);
}

static void say_check(struct saying *saying, struct numbers tags)
{
    const struct item_check *check = &saying->record->check;
    json_t *params = json_object();
    add_names(saying, &params, "tags", tags);
    answer_add(&params, "drawn", json_string(check->is_random ? "random" : "picked"));
    add_text(&params, "checker", check->checker);
    add_call(saying, "item.check", params);
}

/* The rulings on tags of a set, or on all others; a call each, since each has its editor. */
static void say_rulings(struct saying *saying, struct numbers tags, bool are_in)
{
    for (size_t i = 0; i < saying->record->ruling_count; i++) {
        const struct item_ruling *ruling = &saying->record->rulings[i];
        if (numbers_hold(tags, ruling->tag) == are_in) {
            json_t *params = json_object();
            add_names(saying, &params, ruling->belongs ? "belongs" : "not",
                      (struct numbers){.list = &ruling->tag, .count = 1});
            add_text(&params, "editor", ruling->editor);
            add_call(saying, "item.rule", params);
        }
    }
}

static void say_seconds(struct saying *saying)
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

/* --- courses that lead to the check -------------------------------------------------------------
 */

static const struct numbers NONE = {0};

static struct filing filing_on_record(const struct item_record *record)
{
    return (struct filing){
        .tags = record->filed, .prompted = record->prompted, .declined = record->declined};
}

/* The filing on record, behind a check that came after `earlier`. Were both the same, nothing would
 * change, and the item would not count as filed since. */
static void say_filed_again(struct saying *saying, struct filing earlier)
{
    struct filing filing = filing_on_record(saying->record);
    if (are_same(earlier.tags, filing.tags) && are_same(earlier.prompted, filing.prompted) &&
        are_same(earlier.declined, filing.declined)) {
        say_filing(saying, (struct filing){0});
    }
    say_filing(saying, filing);
}

/*
 * What was settled before the check was on the item if it had been pointed out, and not if it had
 * been declined: as many of each as make up what was seen. False where that cannot be.
 */
static bool say_refiled(struct saying *saying)
{
    const struct item_check *check = &saying->record->check;
    size_t others = check->given.count + check->extra.count;
    if (without(saying, saying->trials, check->tags).count > 0 || check->seen < others ||
        check->seen - others > saying->settled.count) {
        return false;
    }
    struct filing earlier = {.prompted = first_of(saying->settled, check->seen - others),
                             .declined = behind(saying->settled, check->seen - others)};
    earlier.tags = unite(saying, check->given, check->extra);
    earlier.tags = unite(saying, earlier.tags, earlier.prompted);
    say_filing(saying, earlier);
    say_check(saying, check->tags);
    say_filed_again(saying, earlier);
    say_rulings(saying, NONE, false);
    return true;
}

/* Whether a check that comes after the filing and these rulings finds what it found
 * (items_examine.c). */
static bool would_find_the_same(struct saying *saying, struct numbers belongs,
                                struct numbers denied)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    struct numbers tags = unite(saying, record->filed, belongs);
    tags = without(saying, tags, denied);
    struct numbers known_not = unite(saying, record->declined, denied);
    known_not = without(saying, known_not, tags);
    struct numbers tried = without(saying, check->tags, record->prompted);
    tried = without(saying, tried, belongs);
    tried = without(saying, tried, known_not);
    return are_same(common(saying, tried, record->filed), check->given) &&
           are_same(without(saying, tried, record->filed), check->hidden) &&
           are_same(without(saying, tags, check->tags), check->extra) && tags.count == check->seen;
}

/*
 * Rulings that came before the check: what was settled for it and is still ruled to belong, and
 * what was filed and neither found nor taken off. What else was settled must have been ruled out,
 * since the check has lifted that ruling.
 */
static bool say_straight(struct saying *saying)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    struct numbers belongs = common(saying, record->belongs, saying->settled);
    struct numbers denied = without(saying, record->filed, check->tags);
    denied = common(saying, without(saying, denied, check->extra), record->denied);
    struct numbers lifted = without(saying, saying->settled, record->prompted);
    lifted = without(saying, lifted, record->declined);
    lifted = without(saying, lifted, belongs);
    if (!would_find_the_same(saying, belongs, unite(saying, denied, lifted))) {
        return false;
    }
    struct numbers before = unite(saying, belongs, denied);
    say_filing(saying, filing_on_record(record));
    say_rulings(saying, before, true);
    if (lifted.count > 0) {
        json_t *params = json_object();
        add_names(saying, &params, "not", lifted);
        add_call(saying, "item.rule", params);
    }
    say_check(saying, check->tags);
    say_rulings(saying, before, false);
    return true;
}

/* What the last check saw: all that it took off, and so many of what it found. */
static struct numbers seen_by_the_last(struct saying *saying)
{
    const struct item_check *check = &saying->record->check;
    size_t left = check->seen > check->extra.count ? check->seen - check->extra.count : 0;
    struct numbers tried = first_of(common(saying, check->tags, saying->trials), left);
    struct numbers other =
        first_of(without(saying, check->tags, saying->trials), left - tried.count);
    struct numbers found = unite(saying, tried, other);
    return unite(saying, check->extra, found);
}

/* The trials are those of the first check; whatever comes later makes none. */
static void say_the_long_way(struct saying *saying)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    struct filing filing = filing_on_record(record);
    struct filing first = {.tags = check->given};
    struct numbers own = without(saying, record->filed, record->prompted);
    struct numbers hidden_from = unite(saying, record->filed, record->declined);
    bool fits = without(saying, check->given, own).count == 0 &&
                common(saying, check->hidden, hidden_from).count == 0;
    say_filing(saying, fits && !record->filed_after_check ? filing : first);
    say_check(saying, saying->trials);
    if (!fits && !record->filed_after_check) {
        say_filing(saying, filing);
    }
    say_check(saying, seen_by_the_last(saying));
    say_check(saying, check->tags);
    if (record->filed_after_check) {
        say_filed_again(saying, first);
    }
    say_rulings(saying, NONE, false);
}

static void say_item(struct saying *saying)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    if (!check->is_there) {
        say_filing(saying, filing_on_record(record));
        say_rulings(saying, NONE, false);
    } else {
        saying->trials = unite(saying, check->given, check->hidden);
        saying->settled = without(saying, check->tags, saying->trials);
        bool is_said = record->filed_after_check ? say_refiled(saying) : say_straight(saying);
        if (!is_said) {
            say_the_long_way(saying);
        }
    }
    say_seconds(saying);
}

/* --- tags that must be open ---------------------------------------------------------------------
 */

int snapshot_opened_init(struct snapshot_opened *opened, struct store_view *view)
{
    *opened = (struct snapshot_opened){.tag_count = (size_t)store_view_totals(view).tags};
    opened->is_open = calloc(opened->tag_count + 1, sizeof *opened->is_open);
    return opened->is_open ? 0 : -1;
}

void snapshot_opened_deinit(struct snapshot_opened *opened)
{
    free(opened->is_open);
    *opened = (struct snapshot_opened){0};
}

static bool is_open(const struct snapshot_opened *opened, uint32_t tag)
{
    return tag >= opened->tag_count || opened->is_open[tag]; /* one beyond is not to be named */
}

static void mark_open(struct snapshot_opened *opened, struct numbers tags)
{
    for (size_t i = 0; i < tags.count; i++) {
        if (tags.list[i] < opened->tag_count) {
            opened->is_open[tags.list[i]] = true;
        }
    }
    while (opened->first_closed < opened->tag_count && opened->is_open[opened->first_closed]) {
        opened->first_closed++;
    }
}

/* Opens what is not open yet; returns those, in the saying's room. */
static struct numbers open_now(struct saying *saying, struct numbers tags)
{
    size_t count = 0;
    for (size_t i = 0; i < tags.count; i++) {
        if (!is_open(saying->opened, tags.list[i])) {
            saying->room[count++] = tags.list[i];
        }
    }
    struct numbers closed = taken(saying, (struct numbers){.list = saying->room, .count = count});
    mark_open(saying->opened, closed);
    return closed;
}

static struct numbers ruled_on(struct saying *saying)
{
    for (size_t i = 0; i < saying->record->ruling_count; i++) {
        saying->room[i] = saying->record->rulings[i].tag;
    }
    return taken(saying,
                 (struct numbers){.list = saying->room, .count = saying->record->ruling_count});
}

/* All that is named otherwise than in a filing's tags, which open themselves. */
static struct numbers named(struct saying *saying)
{
    const struct item_record *record = saying->record;
    const struct item_check *check = &record->check;
    struct numbers all = unite(saying, record->declined, ruled_on(saying));
    all = unite(saying, all, check->tags);
    all = unite(saying, all, saying->trials);
    return unite(saying, all, check->extra);
}

/* Opens what was in the vocabulary on the day of the check, as far as a filing can. What an editor
 * has gone through is not to be asked about again. */
static struct numbers open_gone_through(struct saying *saying, size_t most)
{
    struct snapshot_opened *opened = saying->opened;
    size_t end = saying->record->check.is_there ? saying->record->check.vocabulary : 0;
    size_t count = 0;
    end = end < opened->tag_count ? end : opened->tag_count;
    for (size_t tag = opened->first_closed; tag < end && count < most; tag++) {
        if (!opened->is_open[tag]) {
            saying->room[count++] = (uint32_t)tag;
        }
    }
    struct numbers closed = taken(saying, (struct numbers){.list = saying->room, .count = count});
    mark_open(opened, closed);
    return closed;
}

/* Filings of the tags alone, in front of what was said. */
static void say_opening(struct saying *saying)
{
    mark_open(saying->opened, saying->first);
    struct numbers needed = open_now(saying, named(saying));
    size_t room = OPEN_AT_ONCE - needed.count % OPEN_AT_ONCE;
    struct numbers all = unite(saying, needed, open_gone_through(saying, room));
    mark_open(saying->opened, saying->record->filed);
    for (size_t i = 0; i < saying->record->second_count; i++) {
        mark_open(saying->opened, saying->record->seconds[i].tags);
    }
    size_t at = (all.count + OPEN_AT_ONCE - 1) / OPEN_AT_ONCE;
    while (at-- > 0) {
        json_t *params = json_object();
        add_names(saying, &params, "tags", first_of(behind(all, at * OPEN_AT_ONCE), OPEN_AT_ONCE));
        json_t *call = json_object();
        answer_add(&call, "method", json_string("item.file"));
        answer_add(&call, "params", params);
        if (!saying->calls) {
            json_decref(call);
        } else if (json_array_insert_new(saying->calls, 0, call) < 0) {
            json_decref(saying->calls);
            saying->calls = NULL;
        }
    }
}

/* --- the line -----------------------------------------------------------------------------------
 */

/* The first call as the line's own, the others behind it. */
static json_t *line_of(const struct saying *saying)
{
    json_t *line = json_object();
    answer_add(&line, "id", item_text_json(saying->record->id));
    if (!line || !saying->calls ||
        json_object_update(line, json_object_get(json_array_get(saying->calls, 0), "params")) < 0 ||
        json_array_remove(saying->calls, 0) < 0) {
        json_decref(line);
        return NULL;
    }
    if (json_array_size(saying->calls) > 0) {
        answer_add(&line, "then", json_incref(saying->calls));
    }
    return line;
}

json_t *snapshot_said(struct snapshot_opened *opened, struct store_view *view,
                      const struct item_record *record, struct store_error *error)
{
    const struct item_check *check = &record->check;
    size_t longest = record->filed.count + record->declined.count + record->ruling_count +
                     check->tags.count + check->given.count + check->hidden.count +
                     check->extra.count;
    uint32_t *room = calloc(SETS_MOST * longest + 2 * (size_t)OPEN_AT_ONCE + 1, sizeof *room);
    struct saying saying = {.opened = opened,
                            .view = view,
                            .record = record,
                            .error = error,
                            .room = room,
                            .calls = json_array()};
    json_t *line = NULL;
    if (room) {
        say_item(&saying);
        say_opening(&saying);
        line = line_of(&saying);
    }
    free(room);
    json_decref(saying.calls);
    return line;
}
