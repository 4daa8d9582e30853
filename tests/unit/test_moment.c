/* Store and stored model as of one and the same change, made by the trainer for who copies them. */
#include "daemon/moment.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/trainer_fixture.h"

static int want(struct training *training, struct moment *ret_moment)
{
    moments_want(training->moments);
    backlog_nudge(training->backlog);
    return moments_take(training->moments, ret_moment, &training->error);
}

/* Up to where the model of a moment has learned. */
static uint64_t learned_in(struct training *training, const struct moment *moment)
{
    struct model_store_head head;
    assert_int_equal(model_view_head(moment->model, &head, &training->error), STORE_OK);
    return head.learned;
}

static void a_moment_has_all_that_was_filed_before_it_in_both_stores(void **state)
{
    struct training *training = *state;
    struct moment moment;
    file(training, "log/1", "fog bell");
    file(training, "log/2", "fog lamp");
    commit(training);
    start(training);
    assert_int_equal(want(training, &moment), STORE_OK);
    assert_int_equal(moment.seq, 2);
    assert_int_equal(store_view_totals(moment.store).seq, 2);
    assert_int_equal(learned_in(training, &moment), 2);
    moments_give_back(training->moments, &moment);
}

/* What is filed and stored while it is held does not come into it. */
static void a_moment_stays_as_it_is_while_learning_goes_on(void **state)
{
    struct training *training = *state;
    struct moment moment;
    file(training, "log/1", "fog bell");
    commit(training);
    training->settings.flush_changes = 1;
    training->settings.flush_every_ms = 1;
    start(training);
    assert_int_equal(want(training, &moment), STORE_OK);
    file(training, "log/2", "fog lamp");
    commit(training);
    wait_until_kept(training, 2);
    assert_int_equal(learned(training), 2);
    assert_int_equal(store_view_totals(moment.store).seq, 1);
    assert_int_equal(learned_in(training, &moment), 1);
    moments_give_back(training->moments, &moment);
    assert_int_equal(want(training, &moment), STORE_OK);
    assert_int_equal(moment.seq, 2);
    assert_int_equal(learned_in(training, &moment), 2);
    moments_give_back(training->moments, &moment);
}

static void its_model_can_be_left_before_its_store(void **state)
{
    struct training *training = *state;
    struct moment moment;
    file(training, "log/1", "fog bell");
    commit(training);
    start(training);
    assert_int_equal(want(training, &moment), STORE_OK);
    moment_leave_model(&moment);
    assert_null(moment.model);
    assert_true(moments_are_held(training->moments));
    assert_int_equal(store_view_totals(moment.store).items, 1);
    moments_give_back(training->moments, &moment);
    assert_false(moments_are_held(training->moments));
}

static void nothing_learned_yet_is_a_moment_too(void **state)
{
    struct training *training = *state;
    struct moment moment;
    start(training);
    assert_int_equal(want(training, &moment), STORE_OK);
    assert_int_equal(moment.seq, 0);
    moments_give_back(training->moments, &moment);
}

static void who_waits_is_told_when_the_daemon_stops(void **state)
{
    struct training *training = *state;
    struct moment moment;
    moments_want(training->moments); /* there is no trainer to make it */
    moments_stop(training->moments);
    assert_int_equal(moments_take(training->moments, &moment, &training->error), STORE_STOPPED);
    start(training);
    assert_false(moments_are_wanted(training->moments));
}

static void a_model_that_cannot_be_stored_makes_no_moment(void **state)
{
    struct training *training = *state;
    struct moment moment;
    model_store_close(training->model_store);
    training->model_settings.reserve_bytes = SIZE_MAX / 2; /* there is never so much room */
    assert_int_equal(
        model_store_open(&training->model_settings, &training->model_store, &training->error),
        STORE_OK);
    training->settings.model_store = training->model_store;
    training->shared.store = training->model_store;
    file(training, "log/1", "fog bell");
    commit(training);
    start(training);
    assert_int_equal(want(training, &moment), STORE_FULL);
    assert_string_equal(training->error.text, "what was learned cannot be stored");
    assert_false(moments_are_held(training->moments));
}

int main(void)
{
#define TRAINED(test) cmocka_unit_test_setup_teardown(test, training_set_up, training_tear_down)
    const struct CMUnitTest tests[] = {
        TRAINED(a_moment_has_all_that_was_filed_before_it_in_both_stores),
        TRAINED(a_moment_stays_as_it_is_while_learning_goes_on),
        TRAINED(its_model_can_be_left_before_its_store),
        TRAINED(nothing_learned_yet_is_a_moment_too),
        TRAINED(who_waits_is_told_when_the_daemon_stops),
        TRAINED(a_model_that_cannot_be_stored_makes_no_moment),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
