/*
 * daemon.rebuild: a model learned anew beside the one in use takes its place, with all that was
 * said meanwhile, and with other settings where those were asked for.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "tests/integration/answers.h"
#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    ITEMS = 200,
    WORDS = 16,
    TEXT_BYTES = 12 * WORDS + 1,
    PARAMS = -32602,
    STORE = -32005
};

/* Files the entry `item` with the words and tags of another entry. */
static void revise(struct peer *peer, unsigned item, unsigned as)
{
    char tags[LOGBOOK_TAGS_BYTES];
    char text[TEXT_BYTES];
    logbook_tags(as, tags);
    logbook_text(as, WORDS, text, sizeof text);
    (void)ask(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}", item, text, tags);
}

static json_int_t rebuild(struct peer *peer, const char *settings)
{
    json_int_t seq = whole(ask(peer, "daemon.rebuild", "{'settings': %s}", settings), "seq");
    wait_until_rebuilt(peer);
    return seq;
}

static const json_t *setting(struct peer *peer, const char *name)
{
    const json_t *settings = json_object_get(ask(peer, "daemon.state", "{}"), "settings");
    return json_object_get(settings, name);
}

/* --- the same settings ------------------------------------------------------------------------ */

/* Revisions and withdrawals, but not of the first items, which open the tags. */
static void file_revise_and_withdraw(struct peer *peer)
{
    logbook_file(peer, 0, ITEMS, WORDS);
    for (unsigned item = 50; item < 90; item++) {
        revise(peer, item, 1000 + item);
    }
    for (unsigned item = 60; item < 70; item++) {
        revise(peer, item, 2000 + item);
    }
    for (unsigned item = 80; item < 100; item++) {
        (void)ask(peer, "item.withdraw", "{'id': 'entry %u'}", item);
    }
}

/* Files what `from` has now with `into`, in the order of the changes. */
static void file_latest(struct peer *from, struct peer *into)
{
    const json_t *items = json_object_get(ask(from, "item.list", "{'most': 10000}"), "items");
    size_t i;
    const json_t *item;
    json_array_foreach(items, i, item)
    {
        if (json_is_true(json_object_get(item, "withdrawn"))) {
            continue;
        }
        const json_t *shown = ask(from, "item.show", "{'id': '%s'}", string(item, "id"));
        json_t *filing =
            json_pack("{s:O, s:O, s:O}", "id", json_object_get(shown, "id"), "text",
                      json_object_get(shown, "text"), "tags", json_object_get(shown, "filed"));
        assert_non_null(filing);
        peer_say(into, "{'jsonrpc': '2.0', 'id': 1, 'method': 'item.file', 'params': %s}",
                 text_of(into, filing));
        json_decref(filing);
        assert_non_null(peer_line(into));
    }
}

static void answers_are_those_of_a_daemon_that_was_fed_the_latest_records(void **state)
{
    struct service *service = *state;
    void *fresh_state = NULL;
    file_revise_and_withdraw(&service->peer);
    wait_until_learned(&service->peer);
    const char *before = answers_of(&service->peer, ITEMS);
    (void)rebuild(&service->peer, "{}");
    const char *after = answers_of(&service->peer, ITEMS);
    assert_string_not_equal(before, after); /* the model had met the items as they were */
    assert_int_equal(service_set_up(&fresh_state), 0);
    struct service *fresh = fresh_state;
    file_latest(&service->peer, &fresh->peer);
    wait_until_learned(&fresh->peer);
    assert_string_equal(after, answers_of(&fresh->peer, ITEMS));
    assert_int_equal(service_tear_down(&fresh_state), 0);
}

/* --- other settings --------------------------------------------------------------------------- */

static void other_settings_show_in_the_state_and_the_answers_also_after_a_restart(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    const char *before = answers_of(&service->peer, ITEMS);
    (void)rebuild(&service->peer, "{'loss': 'hinge', 'title_weight': 2, 'word_pairs': 'on'}");
    assert_json(setting(&service->peer, "loss"), "'hinge'");
    assert_json(setting(&service->peer, "title_weight"), "2");
    assert_json(setting(&service->peer, "word_pairs"), "'on'");
    char *after = strdup(answers_of(&service->peer, ITEMS));
    assert_non_null(after);
    assert_string_not_equal(before, after);
    service_stop_and_start(service);
    assert_json(setting(&service->peer, "loss"), "'hinge'");
    assert_false(undertagd_said(&service->daemon, "learned again"));
    wait_until_learned(&service->peer);
    assert_string_equal(after, answers_of(&service->peer, ITEMS));
    free(after);
}

static void items_filed_later_are_learned_with_the_other_settings(void **state)
{
    struct service *service = *state;
    void *other_state = service_new("loss=hinge", "word_pairs=on", NULL);
    struct service *other = other_state;
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    logbook_file(&other->peer, 0, ITEMS, WORDS);
    (void)rebuild(&service->peer, "{'loss': 'hinge', 'word_pairs': 'on'}");
    logbook_file(&service->peer, ITEMS, ITEMS, WORDS);
    logbook_file(&other->peer, ITEMS, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    wait_until_learned(&other->peer);
    assert_string_equal(answers_of(&service->peer, 2 * ITEMS), answers_of(&other->peer, 2 * ITEMS));
    assert_int_equal(service_tear_down(&other_state), 0);
}

static void settings_that_are_not_named_stay_as_an_earlier_rebuild_has_left_them(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 0, 10, WORDS);
    (void)rebuild(&service->peer, "{'loss': 'hinge'}");
    (void)rebuild(&service->peer, "{'step': 0.25}");
    assert_json(setting(&service->peer, "loss"), "'hinge'");
    assert_json(setting(&service->peer, "step"), "0.25");
}

static void an_option_that_is_changed_in_the_configuration_is_the_configurations_again(void **state)
{
    struct service *service = *state;
    logbook_file(&service->peer, 0, 10, WORDS);
    (void)rebuild(&service->peer, "{'loss': 'hinge', 'step': 0.25}");
    service->daemon.settings[0] = "loss=logistic";
    service_stop_and_start(service);
    assert_json(setting(&service->peer, "loss"), "'logistic'");
    assert_json(setting(&service->peer, "step"), "0.25"); /* of which it says what it said */
    service->daemon.settings[0] = NULL;
    service_stop_and_start(service);
    assert_json(setting(&service->peer, "loss"), "'squared_hinge'"); /* overtaken for good */
    assert_json(setting(&service->peer, "step"), "0.25");
}

/* --- while it runs ---------------------------------------------------------------------------- */

enum {
    MANY = 600,
    LONG_WORDS = 200
};

/* Sends a filing of the entry `item` with the words and tags of another, and does not wait. */
static void send_filing(struct peer *peer, unsigned item, unsigned as)
{
    char tags[LOGBOOK_TAGS_BYTES];
    char text[TEXT_BYTES];
    logbook_tags(as, tags);
    logbook_text(as, WORDS, text, sizeof text);
    (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}", item,
                       text, tags);
}

/* Sends changes of every kind, of items that were there and of new ones. */
static void send_changes(struct peer *peer)
{
    for (unsigned item = 100; item < 140; item++) {
        send_filing(peer, item, 1000 + item);
        send_filing(peer, item, 2000 + item);
        send_filing(peer, MANY + item - 100, MANY + item);
    }
    for (unsigned item = 120; item < 130; item++) {
        (void)peer_request(peer, "item.withdraw", "{'id': 'entry %u'}", item);
        (void)peer_request(peer, "item.rule",
                           "{'id': 'entry %u', 'belongs': ['fog'], 'not': ['tea']}", item + 15);
        (void)peer_request(peer, "item.check",
                           "{'id': 'entry %u', 'tags': ['fog', 'lamp'], 'drawn': 'random'}",
                           item + 30);
    }
    send_filing(peer, MANY + 1, 5000);
    (void)peer_request(peer, "item.withdraw", "{'id': 'entry %u'}", MANY + 2);
}

/* The same, until all are acknowledged. */
static void change_many(struct peer *peer)
{
    unsigned before = peer->last_id;
    send_changes(peer);
    for (unsigned id = before + 1; id <= peer->last_id; id++) {
        (void)peer_result(peer, id);
    }
}

static void file_many(struct peer *peer)
{
    (void)ask(peer, "item.file", "{'id': 'cup', 'text': 'tea', 'tags': ['tea']}");
    logbook_file(peer, 0, MANY, LONG_WORDS);
    for (unsigned item = 200; item < 220; item++) {
        revise(peer, item, 3000 + item);
    }
}

/* What the model in use has learned is stored at once: so the writer would erase what was
 * superseded, if the build did not need it. */
static int set_up_quick_to_erase(void **state)
{
    *state = service_new("flush_every_ms=10", "flush_changes=1", NULL);
    return 0;
}

/* A change made during a rebuild is as if it had been made behind it. */
static void what_is_changed_meanwhile_is_in_the_new_model(void **state)
{
    struct service *service = *state;
    void *later_state = NULL;
    assert_int_equal(service_set_up(&later_state), 0);
    struct service *later = later_state;
    file_many(&service->peer);
    (void)ask(&service->peer, "daemon.rebuild", "{'settings': {'step': 0.25}}");
    change_many(&service->peer);
    assert_true(json_is_object(
        json_object_get(ask(&service->peer, "daemon.state", "{}"), "rebuild"))); /* meanwhile */
    file_many(&later->peer);
    (void)rebuild(&later->peer, "{'step': 0.25}");
    change_many(&later->peer);
    wait_until_rebuilt(&service->peer);
    wait_until_learned(&service->peer);
    wait_until_learned(&later->peer);
    assert_string_equal(answers_of(&service->peer, MANY + 40), answers_of(&later->peer, MANY + 40));
    assert_string_equal(text_of(&service->peer, ask(&service->peer, "desk.completeness", "{}")),
                        text_of(&service->peer, ask(&later->peer, "desk.completeness", "{}")));
    assert_int_equal(service_tear_down(&later_state), 0);
}

static void the_state_tells_how_far_it_has_come_and_with_what(void **state)
{
    struct service *service = *state;
    file_many(&service->peer);
    json_int_t last = ask_seq(&service->peer);
    json_int_t seq =
        whole(ask(&service->peer, "daemon.rebuild", "{'settings': {'loss': 'hinge'}}"), "seq");
    const json_t *now = ask(&service->peer, "daemon.state", "{}");
    const json_t *running = json_object_get(now, "rebuild");
    assert_int_equal(seq, last);
    assert_int_equal(whole(running, "seq"), seq);
    assert_int_equal(whole(running, "of"), last);
    assert_in_range(whole(running, "learned"), 0, last);
    assert_members(json_object_get(running, "settings"), "{'loss': 'hinge', 'even_out': 'on'}");
    assert_members(json_object_get(now, "settings"), "{'loss': 'squared_hinge'}");
    wait_until_rebuilt(&service->peer);
    const json_t *ended = json_object_get(ask(&service->peer, "daemon.state", "{}"), "rebuilt");
    assert_int_equal(whole(ended, "seq"), seq);
    assert_true(json_is_null(json_object_get(ended, "failure")));
}

static void a_second_rebuild_is_refused_while_one_runs(void **state)
{
    struct service *service = *state;
    file_many(&service->peer);
    (void)ask(&service->peer, "daemon.rebuild", "{'settings': {'step': 0.25}}");
    assert_error(ask_refused(&service->peer, "daemon.rebuild", "{}"), STORE, "");
    wait_until_rebuilt(&service->peer);
    assert_json(setting(&service->peer, "step"), "0.25");
    (void)rebuild(&service->peer, "{}");
}

static void stopping_ends_it_and_the_next_start_goes_on(void **state)
{
    struct service *service = *state;
    file_many(&service->peer);
    (void)ask(&service->peer, "daemon.rebuild", "{'settings': {'step': 0.25}}");
    service_stop_and_start(service);
    assert_true(undertagd_said(&service->daemon, "is gone on with"));
    wait_until_rebuilt(&service->peer);
    assert_json(setting(&service->peer, "step"), "0.25");
    char *stopped = strdup(answers_of(&service->peer, MANY));
    (void)rebuild(&service->peer, "{}"); /* this one in one go */
    assert_string_equal(stopped, answers_of(&service->peer, MANY));
    free(stopped);
}

/* --- what is refused, what fails ---------------------------------------------------------------
 */

static void a_setting_that_cannot_be_is_refused_by_name(void **state)
{
    struct service *service = *state;
    struct peer *peer = &service->peer;
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': {'los': 'hinge'}}"), PARAMS,
                 "/settings/los");
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': {'loss': 'hing'}}"), PARAMS,
                 "/settings/loss");
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': {'step': 11}}"), PARAMS,
                 "/settings/step");
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': {'step': [1]}}"), PARAMS,
                 "/settings/step");
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': {'drain_ms': 10}}"), PARAMS,
                 "/settings/drain_ms"); /* nothing that is learned with */
    assert_error(ask_refused(peer, "daemon.rebuild", "{'settings': ['step']}"), PARAMS,
                 "/settings");
    assert_error(ask_refused(peer, "daemon.rebuild", "{'wait': true}"), PARAMS, "/wait");
    assert_true(json_is_null(json_object_get(ask(peer, "daemon.state", "{}"), "rebuild")));
}

static void one_that_fails_is_told_and_leaves_the_model_as_it_was(void **state)
{
    struct service *service = *state;
    char path[UNDERTAGD_PATH_BYTES];
    logbook_file(&service->peer, 0, ITEMS, WORDS);
    wait_until_learned(&service->peer);
    const char *before = answers_of(&service->peer, ITEMS);
    undertagd_write(&service->daemon, "home/model.next", "a file where a folder should be");
    (void)rebuild(&service->peer, "{'loss': 'hinge'}");
    const json_t *now = ask(&service->peer, "daemon.state", "{}");
    const char *failure = string(json_object_get(now, "rebuilt"), "failure");
    assert_non_null(strstr(failure, "the model stays as it was"));
    assert_string_equal(json_string_value(json_array_get(json_object_get(now, "faults"), 0)),
                        failure);
    assert_json(setting(&service->peer, "loss"), "'squared_hinge'");
    assert_string_equal(answers_of(&service->peer, ITEMS), before);
    undertagd_path(&service->daemon, "home/model.next", path);
    assert_int_equal(unlink(path), 0);
    (void)rebuild(&service->peer, "{'loss': 'hinge'}"); /* there is nothing in the way any more */
    assert_json(setting(&service->peer, "loss"), "'hinge'");
    assert_json(json_object_get(ask(&service->peer, "daemon.state", "{}"), "faults"), "[]");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, service_set_up, service_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(answers_are_those_of_a_daemon_that_was_fed_the_latest_records),
        TEST(other_settings_show_in_the_state_and_the_answers_also_after_a_restart),
        TEST(items_filed_later_are_learned_with_the_other_settings),
        TEST(settings_that_are_not_named_stay_as_an_earlier_rebuild_has_left_them),
        TEST(an_option_that_is_changed_in_the_configuration_is_the_configurations_again),
        cmocka_unit_test_setup_teardown(what_is_changed_meanwhile_is_in_the_new_model,
                                        set_up_quick_to_erase, service_tear_down),
        TEST(the_state_tells_how_far_it_has_come_and_with_what),
        TEST(a_second_rebuild_is_refused_while_one_runs),
        TEST(stopping_ends_it_and_the_next_start_goes_on),
        TEST(a_setting_that_cannot_be_is_refused_by_name),
        TEST(one_that_fails_is_told_and_leaves_the_model_as_it_was),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
