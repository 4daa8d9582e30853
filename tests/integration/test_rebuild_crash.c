/*
 * kill -9 in the middle of a rebuild. Whatever the moment, a restart has the old model or the new
 * one, whole, with the settings that it was learned with; and the rebuild goes on by itself.
 *
 * The moments are counted in what daemon.state says of the rebuild, and then spread over its last
 * steps, in which the model is stored and takes its place.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/answers.h"
#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    ITEMS = 300,
    ASKED = 60, /* of the items */
    WORDS = 40,
    ROUNDS = 16
};

struct trial {
    struct service *service;
    char *old; /* answers */
    char *new;
};

static char *copy_of(const char *text)
{
    char *copy = strdup(text);
    assert_non_null(copy);
    return copy;
}

/* Items of two visits, so that some have been superseded. */
static void file_items(struct peer *peer)
{
    logbook_file(peer, 0, ITEMS, WORDS);
    for (unsigned item = 100; item < 120; item++) {
        (void)ask(peer, "item.file", "{'id': 'entry %u', 'text': 'dense fog', 'tags': ['fog']}",
                  item);
    }
    wait_until_learned(peer);
}

static void begin_rebuild(struct peer *peer)
{
    (void)ask(peer, "daemon.rebuild", "{'settings': {'loss': 'hinge', 'word_pairs': 'on'}}");
}

/* What is built is stored all the time, so that there is something to go on with. */
static int set_up(void **state)
{
    void *reference_state = service_new("flush_every_ms=10", "flush_changes=1", NULL);
    struct service *reference = reference_state;
    struct trial *trial = calloc(1, sizeof *trial);
    assert_non_null(trial);
    file_items(&reference->peer);
    begin_rebuild(&reference->peer);
    wait_until_rebuilt(&reference->peer);
    trial->new = copy_of(answers_of(&reference->peer, ASKED));
    assert_int_equal(service_tear_down(&reference_state), 0);
    trial->service = service_new("flush_every_ms=10", "flush_changes=1", NULL);
    file_items(&trial->service->peer);
    service_stop_and_start(trial->service); /* all is stored */
    trial->old = copy_of(answers_of(&trial->service->peer, ASKED));
    *state = trial;
    return 0;
}

static int tear_down(void **state)
{
    struct trial *trial = *state;
    void *service = trial->service;
    int result = service_tear_down(&service);
    free(trial->old);
    free(trial->new);
    free(trial);
    return result;
}

static const char *loss_of(struct peer *peer)
{
    return string(json_object_get(ask(peer, "daemon.state", "{}"), "settings"), "loss");
}

static bool is_rebuilding(struct peer *peer)
{
    return json_is_object(json_object_get(ask(peer, "daemon.state", "{}"), "rebuild"));
}

/* The answers are those of the one or of the other. (A model may take its place just between two
 * questions: then they are asked again.) */
static void assert_one_or_the_other(struct trial *trial)
{
    struct peer *peer = &trial->service->peer;
    const char *answers = NULL;
    const char *loss = NULL;
    do {
        loss = loss_of(peer);
        answers = answers_of(peer, ASKED);
    } while (strcmp(loss, loss_of(peer)) != 0);
    assert_string_equal(answers, strcmp(loss, "hinge") == 0 ? trial->new : trial->old);
}

static void kill_and_restart(struct trial *trial)
{
    undertagd_kill(&trial->service->daemon);
    service_restart(trial->service);
    assert_one_or_the_other(trial);
}

/* Waits until the build has learned so much, or is over. */
static void wait_until_built(struct peer *peer, json_int_t learned)
{
    for (;;) {
        const json_t *rebuild = json_object_get(ask(peer, "daemon.state", "{}"), "rebuild");
        if (json_is_null(rebuild) || whole(rebuild, "learned") >= learned) {
            return;
        }
    }
}

static void the_answers_are_all_old_or_all_new_whenever_it_is_killed(void **state)
{
    struct trial *trial = *state;
    struct peer *peer = &trial->service->peer;
    begin_rebuild(peer);
    for (unsigned round = 0; round < ROUNDS && is_rebuilding(peer); round++) {
        wait_until_built(peer, round * (ITEMS + 20) / ROUNDS);
        kill_and_restart(trial);
    }
    wait_until_rebuilt(peer);
    assert_string_equal(loss_of(peer), "hinge");
    assert_string_equal(answers_of(peer, ASKED), trial->new);
}

static void so_they_are_when_it_is_killed_while_the_model_takes_its_place(void **state)
{
    struct trial *trial = *state;
    struct peer *peer = &trial->service->peer;
    begin_rebuild(peer);
    for (int round = 0; round < ROUNDS && is_rebuilding(peer); round++) {
        wait_until_built(peer, ITEMS + 20);
        (void)poll(NULL, 0, round * round); /* ms; it waits for nothing: it is another moment */
        kill_and_restart(trial);
    }
    wait_until_rebuilt(peer);
    assert_string_equal(answers_of(peer, ASKED), trial->new);
}

static void one_that_is_killed_is_gone_on_with_and_not_begun_again(void **state)
{
    struct trial *trial = *state;
    struct peer *peer = &trial->service->peer;
    begin_rebuild(peer);
    undertagd_wait_for(&trial->service->daemon, "rebuild: a new model is learned");
    kill_and_restart(trial);
    assert_true(undertagd_said(&trial->service->daemon, "is gone on with"));
    wait_until_rebuilt(peer);
    assert_string_equal(answers_of(peer, ASKED), trial->new);
}

static void a_model_that_is_in_use_stays_so_when_it_is_killed_right_then(void **state)
{
    struct trial *trial = *state;
    struct peer *peer = &trial->service->peer;
    begin_rebuild(peer);
    undertagd_wait_for(&trial->service->daemon, "the new model is in use");
    undertagd_kill(&trial->service->daemon);
    service_restart(trial->service);
    assert_string_equal(loss_of(peer), "hinge");
    assert_string_equal(answers_of(peer, ASKED), trial->new);
    assert_false(is_rebuilding(peer));
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_answers_are_all_old_or_all_new_whenever_it_is_killed),
        TEST(so_they_are_when_it_is_killed_while_the_model_takes_its_place),
        TEST(one_that_is_killed_is_gone_on_with_and_not_begun_again),
        TEST(a_model_that_is_in_use_stays_so_when_it_is_killed_right_then),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
