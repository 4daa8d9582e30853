/*
 * Who may do what: people of other users and groups at the socket. Only root can be somebody else,
 * so to others these tests are skipped.
 *
 * The socket is of the group DESK, by the folder's set-group-ID bit (mkdir(2)), and open to
 * everybody, so that it is the daemon alone who refuses.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/program.h"
#include "tests/integration/service.h"

enum {
    DESK = 70001,
    HARBOUR = 70002,
    ELSEWHERE = 70003
};

/* A member of the desk's group by his own group, one by another of his groups, and a stranger. */
static const struct person EDITOR = {.uid = 61911, .gid = DESK};
static const struct person GUEST = {.uid = 61912, .gid = ELSEWHERE, .other_gid = DESK};
static const struct person STRANGER = {.uid = 61913, .gid = ELSEWHERE, .other_gid = HARBOUR};

/* Each method that there is, with params for a store that has an item 'a' with a tag 'fog', and the
 * option that grants it. No rebuild and no snapshot must begin: another would be refused
 * meanwhile. */
static const struct {
    const char *method;
    const char *params;
    const char *option;
    json_int_t code; /* where it is granted */
} METHODS[] = {
    {"item.file", "{'id': 'b', 'tags': ['fog']}", "may_file", 0},
    {"item.withdraw", "{'id': 'b'}", "may_file", 0},
    {"item.rule", "{'id': 'a', 'not': ['fog']}", "may_rule", 0},
    {"item.check", "{'id': 'a', 'tags': ['fog']}", "may_rule", 0},
    {"item.gaps", "{'id': 'a'}", "may_read", 0},
    {"item.show", "{'id': 'a'}", "may_read", 0},
    {"item.list", "{}", "may_read", 0},
    {"tag.show", "{'tag': 'fog'}", "may_read", 0},
    {"tag.list", "{}", "may_read", 0},
    {"desk.sample", "{}", "may_read", 0},
    {"desk.worklist", "{}", "may_read", 0},
    {"desk.completeness", "{}", "may_read", 0},
    {"desk.standing", "{}", "may_read", 0},
    {"daemon.state", "{}", "may_read", 0},
    {"daemon.rebuild", "{'settings': {'lamp': 1}}", "may_operate", -32602},
    {"snapshot.write", "{'name': 'latest'}", "may_operate", -32602},
    {"snapshot.list", "{}", "may_operate", 0},
    {"backup.write", "{'rate': 1}", "may_operate", -32602},
};

enum {
    METHOD_COUNT = sizeof METHODS / sizeof METHODS[0]
};

struct office {
    struct undertagd daemon;
    struct peer owner;
    struct peer peer; /* somebody else */
    char config[UNDERTAGD_PATH_BYTES];
    unsigned reloads;
};

/* --- the office ------------------------------------------------------------------------------ */

static int make_office(void **state)
{
    struct office *office = calloc(1, sizeof *office);
    assert_non_null(office);
    undertagd_make(&office->daemon);
    assert_int_equal(chown(office->daemon.folder, (uid_t)-1, DESK), 0);
    assert_int_equal(chmod(office->daemon.folder, S_ISGID | 0711), 0);
    undertagd_path(&office->daemon, "options", office->config);
    office->peer.fd = -1;
    *state = office;
    return 0;
}

/* Starts the daemon with these options and files the item 'a'. */
static void open_office(struct office *office, const char *options)
{
    undertagd_write(&office->daemon, "options", options);
    office->daemon.config = office->config;
    undertagd_start(&office->daemon);
    assert_int_equal(chmod(office->daemon.socket, 0666), 0);
    peer_open(&office->owner, office->daemon.socket);
    (void)ask(&office->owner, "item.file", "{'id': 'a', 'tags': ['fog']}");
}

static int set_up(void **state)
{
    if (geteuid() != 0) {
        *state = NULL;
        return 0;
    }
    int result = make_office(state);
    open_office(*state, "rehearsal_share = 0\n");
    return result;
}

static int tear_down(void **state)
{
    struct office *office = *state;
    if (!office) {
        return 0;
    }
    peer_close(&office->owner);
    peer_close(&office->peer);
    int result = undertagd_remove(&office->daemon);
    free(office);
    return result;
}

/* The office; or the test is skipped, with a sentence. */
static struct office *enter(void **state)
{
    if (!*state) {
        print_message("skipped: only root can be somebody else\n");
        skip();
    }
    return *state;
}

/* Somebody comes in the place of whoever was there before. */
static struct peer *come(struct office *office, struct person person)
{
    if (office->peer.fd >= 0) {
        peer_close(&office->peer);
    }
    peer_open_as(&office->peer, office->daemon.socket, person);
    return &office->peer;
}

/* Other options from now on. An option of no other use here tells when they are in force. */
static void reload(struct office *office, const char *options)
{
    char text[512];
    json_int_t mark = 0;
    office->reloads++;
    (void)snprintf(text, sizeof text, "text_limit = %uMiB\nrehearsal_share = 0\n%s",
                   office->reloads + 1, options);
    undertagd_write(&office->daemon, "options", text);
    child_signal(&office->daemon.child, SIGHUP);
    while (mark != (office->reloads + 1) * 1024LL * 1024LL) { /* a reload is never lost */
        const json_t *limits = json_object_get(ask(&office->owner, "daemon.state", "{}"), "limits");
        mark = whole(limits, "text_limit");
    }
}

/* --- asking ---------------------------------------------------------------------------------- */

/* The code that a request is refused with, 0 where it is answered. */
static json_int_t code_of(struct peer *peer, size_t method)
{
    peer_say(peer, "{'jsonrpc': '2.0', 'id': 1, 'method': '%s', 'params': %s}",
             METHODS[method].method, METHODS[method].params);
    const json_t *error = json_object_get(peer_answer(peer), "error");
    return error ? whole(error, "code") : 0;
}

/* What is granted by one of these options goes on to be answered, everything else is refused. */
static void assert_may(struct peer *peer, const char *options)
{
    for (size_t i = 0; i < METHOD_COUNT; i++) {
        bool is_granted = strstr(options, METHODS[i].option) != NULL;
        json_int_t code = code_of(peer, i);
        if (code != (is_granted ? METHODS[i].code : -32004)) {
            fail_msg("%s: %lld", METHODS[i].method, (long long)code);
        }
    }
}

/* --- by default ------------------------------------------------------------------------------ */

static void the_owner_may_do_everything(void **state)
{
    struct office *office = enter(state);
    assert_may(&office->owner, "may_read may_file may_rule may_operate");
}

static void the_sockets_group_may_read_file_and_rule(void **state)
{
    struct office *office = enter(state);
    assert_may(come(office, EDITOR), "may_read may_file may_rule");
}

static void whoever_has_the_sockets_group_among_others_is_of_it(void **state)
{
    struct office *office = enter(state);
    assert_may(come(office, GUEST), "may_read may_file may_rule");
}

static void a_stranger_may_do_nothing(void **state)
{
    struct office *office = enter(state);
    assert_may(come(office, STRANGER), "");
    assert_int_equal(ask_seq(&office->owner), 1); /* nothing was changed */
}

/* Root's group is a group like others. */
static void a_member_of_roots_group_is_not_root(void **state)
{
    struct office *office = enter(state);
    assert_may(come(office, (struct person){.uid = 61914, .gid = 0}), "");
}

/* --- as configured --------------------------------------------------------------------------- */

/* Each right is granted by its own option and by no other, to a user and to a group. */
static void each_option_grants_its_right_and_no_other(void **state)
{
    struct office *office = enter(state);
    static const char *const OPTIONS[] = {"may_read", "may_file", "may_rule", "may_operate",
                                          "may_vocabulary"};
    for (size_t i = 0; i < sizeof OPTIONS / sizeof OPTIONS[0]; i++) {
        char text[256] = "";
        for (size_t j = 0; j < sizeof OPTIONS / sizeof OPTIONS[0]; j++) {
            size_t used = strlen(text);
            (void)snprintf(text + used, sizeof text - used, "%s = %s\n", OPTIONS[j],
                           i == j ? "61911 @70002" : "");
        }
        reload(office, text);
        assert_may(come(office, EDITOR), OPTIONS[i]);
        assert_may(come(office, STRANGER), OPTIONS[i]); /* he is of the harbour */
        assert_may(come(office, GUEST), "");
    }
}

static void a_reload_counts_for_connections_that_are_open(void **state)
{
    struct office *office = enter(state);
    struct peer *stranger = come(office, STRANGER);
    assert_may(stranger, "");
    reload(office, "may_read = @70002\nmay_file =\n");
    assert_may(stranger, "may_read");
    assert_may(come(office, EDITOR), "may_rule"); /* which alone is as it was */
}

/* A name that is nobody's is an error, at a start and at a reload. */
static void a_reload_with_a_name_that_is_not_there_changes_nothing(void **state)
{
    struct office *office = enter(state);
    undertagd_write(&office->daemon, "options",
                    "rehearsal_share = 0\nmay_read = @no-such-harbour\nmay_operate = 61911\n");
    child_signal(&office->daemon.child, SIGHUP);
    undertagd_wait_for(&office->daemon, "there is no group 'no-such-harbour'");
    assert_true(undertagd_said(&office->daemon, "options, line 2"));
    assert_may(come(office, EDITOR), "may_read may_file may_rule");
}

/* --- how it is refused ----------------------------------------------------------------------- */

static void a_refusal_names_the_method_the_right_and_the_option(void **state)
{
    struct office *office = enter(state);
    const json_t *error =
        ask_refused(come(office, EDITOR), "daemon.rebuild", "{'settings': {'loss': 'none'}}");
    assert_error(error, -32004, ""); /* before anything else is looked at */
    assert_non_null(strstr(string(error, "message"), "daemon.rebuild"));
    assert_non_null(strstr(string(error, "message"), "to operate the daemon"));
    assert_non_null(strstr(string(error, "message"), "may_operate"));
}

static void a_refusal_leaves_the_connection_and_the_order_of_answers(void **state)
{
    struct office *office = enter(state);
    struct peer *peer = come(office, EDITOR);
    unsigned first = peer_request(peer, "item.show", "{'id': 'a'}");
    unsigned second = peer_request(peer, "daemon.rebuild", "{}");
    unsigned third = peer_request(peer, "item.show", "{'id': 'a'}");
    (void)peer_result(peer, first);
    assert_error(peer_error(peer, second), -32004, "");
    (void)peer_result(peer, third);
}

static void refusals_are_logged_a_few_at_a_time(void **state)
{
    struct office *office = enter(state);
    struct peer *peer = come(office, STRANGER);
    enum {
        MANY = 2000
    };
    for (unsigned i = 0; i < MANY; i++) {
        peer_say(peer, "{'jsonrpc': '2.0', 'method': 'item.withdraw', 'params': {'id': 'a'}}");
    }
    assert_may(peer, ""); /* all before it were read */
    assert_true(undertagd_said(&office->daemon, "refused: item.withdraw to user 61913"));
    struct stat status;
    assert_int_equal(stat(office->daemon.log, &status), 0);
    assert_in_range(status.st_size, 1, 20 * 100); /* far from 2,000 lines */
    assert_int_equal(whole(ask(&office->owner, "item.show", "{'id': 'a'}"), "seq"), 1);
}

/* --- who it was ------------------------------------------------------------------------------ */

static void every_change_is_recorded_with_its_user(void **state)
{
    struct office *office = enter(state);
    (void)ask(come(office, EDITOR), "item.file", "{'id': 'a', 'tags': ['fog', 'bell']}");
    (void)ask(come(office, GUEST), "item.rule", "{'id': 'a', 'not': ['bell'], 'editor': 'e.'}");
    (void)ask(&office->peer, "item.file",
              "{'id': 'a', 'tags': ['fog'], 'tagger': 'g.', 'independent': true}");
    (void)ask(&office->owner, "item.check", "{'id': 'a', 'tags': ['fog', 'bell']}");
    (void)ask(come(office, EDITOR), "item.rule", "{'id': 'a', 'belongs': ['fog']}");
    const json_t *item = ask(&office->peer, "item.show", "{'id': 'a'}");
    assert_int_equal(whole(item, "uid"), EDITOR.uid);
    assert_int_equal(whole(json_object_get(item, "checked"), "uid"), 0);
    assert_int_equal(whole(json_array_get(json_object_get(item, "second"), 0), "uid"), GUEST.uid);
    const json_t *rulings = json_object_get(item, "rulings");
    assert_int_equal(json_array_size(rulings), 1); /* the check has lifted the other */
    assert_members(json_array_get(rulings, 0),
                   "{'tag': 'fog', 'belongs': true, 'editor': null, 'uid': 61911}");
}

static void a_rebuild_is_logged_with_its_user(void **state)
{
    struct office *office = enter(state);
    reload(office, "may_operate = 61911\n");
    (void)ask(come(office, EDITOR), "daemon.rebuild", "{}");
    assert_true(undertagd_said(&office->daemon, "rebuild: user 61911 asked for it"));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_owner_may_do_everything),
        TEST(the_sockets_group_may_read_file_and_rule),
        TEST(whoever_has_the_sockets_group_among_others_is_of_it),
        TEST(a_stranger_may_do_nothing),
        TEST(a_member_of_roots_group_is_not_root),
        TEST(each_option_grants_its_right_and_no_other),
        TEST(a_reload_counts_for_connections_that_are_open),
        TEST(a_reload_with_a_name_that_is_not_there_changes_nothing),
        TEST(a_refusal_names_the_method_the_right_and_the_option),
        TEST(a_refusal_leaves_the_connection_and_the_order_of_answers),
        TEST(refusals_are_logged_a_few_at_a_time),
        TEST(every_change_is_recorded_with_its_user),
        TEST(a_rebuild_is_logged_with_its_user),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
