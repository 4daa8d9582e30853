/*
 * What could not be synced may be on the disk or not, and asking again does not tell: the kernel
 * marks the pages as clean all the same (fsync(2); Rebello et al., "Can Applications Recover from
 * fsync Failures?", USENIX ATC 2020). So nothing more is written until a restart, which reads what
 * is there.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "daemon/clock.h"
#include "tests/faults/patient.h"

enum {
    STORE = -32005,
    NOT_THERE = -32001
};

/* A daemon that has acknowledged "kept", and then failed to sync "lost". */
static int set_up_with(void **state, const char *setting)
{
    struct patient *patient = calloc(1, sizeof *patient);
    assert_non_null(patient);
    patient_make(patient);
    patient->daemon.settings[0] = setting;
    assert_true(patient_start(patient, true));
    *state = patient;
    return 0;
}

/* A member of what is answered, 0 where it is not there. */
static json_int_t answer(const struct patient *patient, const char *member, const char *method,
                         const char *id)
{
    bool hangs = false;
    json_t *text = patient_ask(patient, &hangs, method,
                               strcmp(method, "item.file") == 0
                                   ? "{'id': '%s', 'text': 'fog and bell', 'tags': ['fog']}"
                                   : "{'id': '%s'}",
                               id);
    assert_non_null(text);
    const json_t *part = json_object_get(text, strcmp(member, "code") == 0 ? "error" : "result");
    json_int_t value = json_integer_value(json_object_get(part, member));
    json_decref(text);
    return value;
}

static int set_up(void **state)
{
    (void)set_up_with(state, "flush_every_ms=3600000");
    struct patient *patient = *state;
    assert_int_equal(answer(patient, "seq", "item.file", "kept"), 1);
    patient_arm_sync_of(patient, "/store/data.mdb");
    assert_int_equal(answer(patient, "code", "item.file", "lost"), STORE);
    assert_true(patient_disarm(patient));
    return 0;
}

static int tear_down(void **state)
{
    patient_remove(*state);
    free(*state);
    return 0;
}

/* Whether a sentence of daemon.state's faults has the part. */
static bool state_says(const struct patient *patient, const char *part)
{
    bool hangs = false;
    bool found = false;
    size_t index = 0;
    const json_t *fault = NULL;
    json_t *state = patient_ask(patient, &hangs, "daemon.state", "{}");
    json_array_foreach(json_object_get(json_object_get(state, "result"), "faults"), index, fault)
    {
        found = found || strstr(json_string_value(fault), part) != NULL;
    }
    json_decref(state);
    return found;
}

static void no_more_changes_are_taken(void **state)
{
    assert_int_equal(answer(*state, "code", "item.file", "later"), STORE);
    assert_int_equal(answer(*state, "code", "item.withdraw", "kept"), STORE);
}

static void what_was_acknowledged_can_still_be_read(void **state)
{
    assert_int_equal(answer(*state, "seq", "item.show", "kept"), 1);
    assert_int_equal(answer(*state, "code", "item.show", "lost"), NOT_THERE);
}

static void the_state_and_the_log_say_so(void **state)
{
    struct patient *patient = *state;
    assert_true(state_says(patient, "changes cannot be stored"));
    assert_true(undertagd_said(&patient->daemon, "changes cannot be stored"));
}

static void the_exit_code_says_so(void **state)
{
    struct patient *patient = *state;
    assert_int_equal(patient_end(patient), EX_IOERR);
    assert_true(undertagd_said(&patient->daemon, "a write had failed"));
}

static void a_restart_is_clean(void **state)
{
    struct patient *patient = *state;
    (void)patient_end(patient);
    assert_int_equal(patient_verify(patient), 0);
    assert_true(patient_start(patient, false));
    assert_false(state_says(patient, ""));
    assert_int_equal(answer(patient, "seq", "item.show", "kept"), 1);
    assert_int_equal(answer(patient, "code", "item.show", "lost"), NOT_THERE);
    assert_int_equal(answer(patient, "seq", "item.file", "lost"), 2);
    assert_int_equal(patient_end(patient), 0);
    assert_int_equal(patient_verify(patient), 0);
}

/* --- the model ------------------------------------------------------------------------------- */

static int set_up_flushing(void **state)
{
    return set_up_with(state, "flush_every_ms=100");
}

static bool waits_for_fault(const struct patient *patient, const char *part)
{
    uint64_t last_ms = clock_steady_ms() + DEADLINE_MS;
    bool found = false;
    while (!found && clock_steady_ms() < last_ms) {
        found = state_says(patient, part);
        (void)poll(NULL, 0, 1); /* between two questions */
    }
    return found;
}

static void a_model_that_is_not_synced_keeps_nobody_from_filing(void **state)
{
    struct patient *patient = *state;
    patient_arm_sync_of(patient, "/model/data.mdb");
    assert_int_equal(answer(patient, "seq", "item.file", "kept"), 1);
    assert_true(waits_for_fault(patient, "what was learned cannot be stored"));
    assert_true(patient_disarm(patient));
    assert_int_equal(answer(patient, "seq", "item.file", "more"), 2);
    assert_int_equal(patient_end(patient), EX_IOERR);
    assert_int_equal(patient_verify(patient), 0);
    assert_true(patient_start(patient, false));
    assert_int_equal(answer(patient, "seq", "item.show", "more"), 2);
    assert_int_equal(patient_end(patient), 0);
}

#define TEST_OF_STORE(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST_OF_STORE(no_more_changes_are_taken),
        TEST_OF_STORE(what_was_acknowledged_can_still_be_read),
        TEST_OF_STORE(the_state_and_the_log_say_so),
        TEST_OF_STORE(the_exit_code_says_so),
        TEST_OF_STORE(a_restart_is_clean),
        cmocka_unit_test_setup_teardown(a_model_that_is_not_synced_keeps_nobody_from_filing,
                                        set_up_flushing, tear_down),
    };
    return !patient_is_possible() ? 0 : cmocka_run_group_tests(tests, NULL, NULL);
}
