#include "tests/faults/feeder.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <stdio.h>
#include <string.h>

#include "tests/integration/logbook.h"

/* --- what is said ---------------------------------------------------------------------------- */

const char *feeder_tagger(void)
{
    return "keeper";
}

const char *feeder_other_tagger(unsigned number)
{
    static const char *const NAMES[LEDGER_OTHER_TAGGERS] = {"mate", "pilot"};
    return NAMES[number];
}

void feeder_title(const struct change *change, unsigned k, char title[FEEDER_TITLE_BYTES])
{
    (void)snprintf(title, FEEDER_TITLE_BYTES, "entry %u of night %u", k, change->round);
}

void feeder_text(const struct change *change, char text[FEEDER_TEXT_BYTES])
{
    logbook_text(change->number, change->words, text, FEEDER_TEXT_BYTES);
}

/* As a JSON array, with ' for ". */
static void write_tags(const struct ledger *ledger, const struct tag_set *set,
                       char list[FEEDER_TAGS_BYTES])
{
    size_t used = 1;
    (void)strcpy(list, "[");
    for (unsigned i = 0; i < set->count; i++) {
        int length = snprintf(list + used, FEEDER_TAGS_BYTES - used, "%s'%s'", i > 0 ? ", " : "",
                              ledger->names[set->tags[i]]);
        used += (size_t)length;
        assert_in_range(used, 1, FEEDER_TAGS_BYTES - 2);
    }
    (void)strcpy(list + used, "]");
}

bool feeder_is_set(const struct ledger *ledger, const json_t *names, const struct tag_set *set)
{
    bool is_same = json_array_size(names) == set->count;
    for (unsigned i = 0; i < set->count && is_same; i++) {
        const char *wanted = ledger->names[set->tags[i]];
        size_t at = 0;
        while (at < set->count &&
               strcmp(json_string_value(json_array_get(names, at)), wanted) != 0) {
            at++;
        }
        is_same = at < set->count;
    }
    return is_same;
}

static unsigned send_filing(const struct ledger *ledger, struct peer *peer, unsigned k)
{
    const struct change *change = ledger_change(ledger, k);
    char title[FEEDER_TITLE_BYTES];
    char text[FEEDER_TEXT_BYTES];
    char tags[FEEDER_TAGS_BYTES];
    char prompted[FEEDER_TAGS_BYTES];
    char declined[FEEDER_TAGS_BYTES];
    feeder_title(change, k, title);
    feeder_text(change, text);
    write_tags(ledger, &change->tags, tags);
    write_tags(ledger, &change->prompted, prompted);
    write_tags(ledger, &change->against, declined);
    return peer_request(peer, "item.file",
                        "{'id': 'item %u', 'title': '%s', 'text': '%s', 'tagger': '%s', "
                        "'tags': %s, 'prompted': %s, 'declined': %s}",
                        change->item, title, text, feeder_tagger(), tags, prompted, declined);
}

/* Sends change k; the id of the request. */
static unsigned send_change(const struct ledger *ledger, struct peer *peer, unsigned k)
{
    const struct change *change = ledger_change(ledger, k);
    char tags[FEEDER_TAGS_BYTES];
    char against[FEEDER_TAGS_BYTES];
    write_tags(ledger, &change->tags, tags);
    write_tags(ledger, &change->against, against);
    switch (change->kind) {
    case CHANGE_WITHDRAW:
        return peer_request(peer, "item.withdraw", "{'id': 'item %u'}", change->item);
    case CHANGE_RULE:
        return peer_request(peer, "item.rule", "{'id': 'item %u', 'belongs': %s, 'not': %s}",
                            change->item, tags, against);
    case CHANGE_CHECK:
        return peer_request(peer, "item.check", "{'id': 'item %u', 'tags': %s, 'drawn': '%s'}",
                            change->item, tags, change->is_random ? "random" : "picked");
    case CHANGE_TAG_AGAIN:
        return peer_request(peer, "item.file",
                            "{'id': 'item %u', 'tags': %s, 'tagger': '%s', 'independent': true}",
                            change->item, tags, feeder_other_tagger(change->tagger));
    case CHANGE_FILE:
        break;
    }
    return send_filing(ledger, peer, k);
}

/* --- what is answered ------------------------------------------------------------------------ */

/* Members of `from` that `without` does not hold. */
static bool is_difference(const struct ledger *ledger, const json_t *names, struct tag_set from,
                          const struct tag_set *without)
{
    tag_set_keep(&from, without, false);
    return feeder_is_set(ledger, names, &from);
}

/* What an acknowledgement says of the item as it was before. */
static void assert_acknowledged(const struct ledger *ledger, const struct change *change,
                                const json_t *result)
{
    const struct ledger_item *item = &ledger->acknowledged.items[change->item];
    if (change->kind == CHANGE_FILE) {
        assert_string_equal(string(result, "was"), item->stands ? "revised" : "new");
    }
    if (change->kind == CHANGE_TAG_AGAIN) {
        assert_string_equal(string(result, "was"),
                            item->is_tagged_again[change->tagger] ? "revised" : "new");
    }
    if (change->kind == CHANGE_CHECK) {
        struct tag_set present = ledger_tags_of(item);
        assert_true(
            is_difference(ledger, json_object_get(result, "missed"), change->tags, &present));
        assert_true(
            is_difference(ledger, json_object_get(result, "extra"), present, &change->tags));
    }
}

/* The answer must be that to the first change that is not acknowledged yet. */
static void take_answer(struct feeder *feeder, const json_t *answer)
{
    unsigned k = feeder->ledger->acknowledged.seq + 1;
    const json_t *result = json_object_get(answer, "result");
    assert_int_equal(whole(answer, "id"), feeder->ids[k % FEEDER_WINDOW]);
    if (!result) {
        fail_msg("change %u was refused: %s", k, text_of(&feeder->peer, answer));
    }
    assert_int_equal(whole(result, "seq"), k);
    assert_acknowledged(feeder->ledger, ledger_change(feeder->ledger, k), result);
    ledger_acknowledge(feeder->ledger);
}

static void take(struct feeder *feeder)
{
    take_answer(feeder, peer_answer(&feeder->peer));
}

static unsigned under_way(const struct feeder *feeder)
{
    return feeder->ledger->sent.seq - feeder->ledger->acknowledged.seq;
}

/* --- feeding --------------------------------------------------------------------------------- */

void feeder_open(struct feeder *feeder, struct ledger *ledger, const char *socket, unsigned round)
{
    *feeder = (struct feeder){.ledger = ledger, .round = round};
    peer_open(&feeder->peer, socket);
    feeder->peer.may_be_cut = true;
}

void feeder_pump(struct feeder *feeder, bool more, bool at_once)
{
    while (under_way(feeder) > 0 && peer_has_something(&feeder->peer)) {
        take(feeder);
    }
    if (more && under_way(feeder) < FEEDER_WINDOW) {
        (void)ledger_draw(feeder->ledger, feeder->round);
        unsigned k = feeder->ledger->sent.seq;
        feeder->ids[k % FEEDER_WINDOW] = send_change(feeder->ledger, &feeder->peer, k);
    } else if (!at_once) {
        struct pollfd line = {.fd = feeder->peer.fd, .events = POLLIN};
        (void)poll(&line, 1, 1); /* it is looked at again */
    }
}

void feeder_drain(struct feeder *feeder)
{
    while (under_way(feeder) > 0) {
        take(feeder);
    }
}

void feeder_close_after_kill(struct feeder *feeder)
{
    const char *line = NULL;
    while ((line = peer_line(&feeder->peer))) {
        json_t *answer = json_loads(line, JSON_REJECT_DUPLICATES, NULL);
        assert_non_null(answer);
        take_answer(feeder, answer);
        json_decref(answer);
    }
    peer_close(&feeder->peer);
}

void feeder_repeat(const struct ledger *ledger, struct peer *peer, unsigned before, unsigned last)
{
    unsigned ids[FEEDER_WINDOW];
    unsigned sent = before;
    for (unsigned k = before + 1; k <= last; k++) {
        while (sent < last && sent + 1 < k + FEEDER_WINDOW) {
            sent++;
            ids[sent % FEEDER_WINDOW] = send_change(ledger, peer, sent);
        }
        assert_int_equal(whole(peer_result(peer, ids[k % FEEDER_WINDOW]), "seq"), k);
    }
}
