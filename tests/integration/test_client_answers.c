/*
 * The client and a daemon that answers otherwise than it should: each command gets the answers of a
 * real daemon, all but one, which has a hole, a member of another kind, or is none at all.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>
#include <unistd.h>

#include "tests/integration/every_command.h"

static struct program_run run;

/* --- answers that are none ------------------------------------------------------------------- */

/* Each answer of each command is that line instead, and the command ends so. */
static void assert_each_ends(struct every_command *all, const char *instead, bool closes,
                             int exit_code, const char *part)
{
    for (size_t i = 0; i < all->count; i++) {
        struct played *played = &all->played[i];
        for (size_t at = 0; at < played->rehearsal.count; at++) {
            stand_in_spoil(&all->stand_in, &played->rehearsal, at, instead, closes);
            every_command_run(all, played, NULL, &run);
            assert_ended_with_a_sentence(played, &run);
            if (run.exit_code != exit_code || !strstr(run.error, part)) {
                fail_msg("%s, answer %zu: ended with %d, not %d: %s", played_name(played), at,
                         run.exit_code, exit_code, run.error);
            }
        }
    }
}

static void a_line_that_is_no_json_is_told(void **state)
{
    assert_each_ends(*state, "The lamp was lit at dusk.\n", false, EX_PROTOCOL,
                     "is not an undertagd that this client knows");
}

static void an_answer_that_is_neither_result_nor_error_is_told(void **state)
{
    assert_each_ends(*state, "{\"jsonrpc\":\"2.0\",\"id\":#}\n", false, EX_PROTOCOL,
                     "a line is no answer of JSON-RPC 2.0");
}

static void an_answer_to_something_else_is_told(void **state)
{
    static const char LINE[] = "{\"jsonrpc\":\"2.0\",\"id\":#00,\"result\":{\"seq\":1}}\n";
    struct every_command *all = *state;
    for (size_t i = 0; i < all->count; i++) {
        struct played *played = &all->played[i];
        stand_in_spoil(&all->stand_in, &played->rehearsal, 0, LINE, false);
        every_command_run(all, played, NULL, &run);
        assert_ended_with_a_sentence(played, &run);
        assert_int_equal(run.exit_code, EX_PROTOCOL);
    }
}

static void a_daemon_that_goes_without_an_answer_is_told(void **state)
{
    assert_each_ends(*state, "", true, EX_UNAVAILABLE, "closed the connection");
}

static void a_daemon_that_goes_in_the_middle_of_an_answer_is_told(void **state)
{
    assert_each_ends(*state, "{\"jsonrpc\":\"2.0\",\"id\":#,\"result\":{\"se", true, EX_UNAVAILABLE,
                     "closed the connection");
}

static void a_daemon_that_stops_is_told_with_its_own_words(void **state)
{
    assert_each_ends(*state,
                     "{\"jsonrpc\":\"2.0\",\"id\":#,\"error\":{\"code\":-32006,\"message\":\"The "
                     "harbour closes.\"}}\n",
                     false, EX_TEMPFAIL, "The harbour closes");
}

static void what_is_forbidden_is_told_with_the_daemon_s_words(void **state)
{
    assert_each_ends(*state,
                     "{\"jsonrpc\":\"2.0\",\"id\":#,\"error\":{\"code\":-32004,\"message\":\"Not "
                     "you.\"}}\n",
                     false, EX_NOPERM, "Not you");
}

/* --- answers with a hole --------------------------------------------------------------------- */

enum {
    POINTER_BYTES = 512,
    LINE_BYTES = 256 * 1024
};

enum hole {
    ABSENT,
    NULL_THERE,
    OF_ANOTHER_KIND,
    HOLES
};

static json_t *other_kind(const json_t *value)
{
    if (json_is_object(value)) {
        return json_pack("[s]", "x");
    }
    if (json_is_array(value)) {
        return json_object();
    }
    return json_is_string(value) ? json_integer(7) : json_string("x");
}

/* The value that a pointer such as "/tags/0/tag" leads to, and what holds it. */
static json_t *find(json_t *root, const char *pointer, json_t **ret_parent, const char **ret_last)
{
    char step[POINTER_BYTES];
    json_t *value = root;
    while (*pointer && value) {
        size_t length = strcspn(pointer + 1, "/");
        (void)snprintf(step, sizeof step, "%.*s", (int)length, pointer + 1); /* it is part of it */
        *ret_parent = value;
        *ret_last = pointer + 1;
        value = json_is_array(value) ? json_array_get(value, strtoul(step, NULL, 10))
                                     : json_object_get(value, step);
        pointer += length + 1;
    }
    return value;
}

/* The answer's line with that hole; "" where there is no such place. */
static void dig(const json_t *answer, const char *pointer, enum hole hole, char *line)
{
    json_t *result = json_deep_copy(json_object_get(answer, "result"));
    json_t *parent = NULL;
    const char *last = NULL;
    json_t *value = find(result, pointer, &parent, &last);
    line[0] = '\0';
    if (value && json_is_array(parent)) {
        size_t at = strtoul(last, NULL, 10);
        assert_int_equal(hole == ABSENT       ? json_array_remove(parent, at)
                         : hole == NULL_THERE ? json_array_set_new(parent, at, json_null())
                                              : json_array_set_new(parent, at, other_kind(value)),
                         0);
    } else if (value) {
        assert_int_equal(hole == ABSENT ? json_object_del(parent, last)
                         : hole == NULL_THERE
                             ? json_object_set_new(parent, last, json_null())
                             : json_object_set_new(parent, last, other_kind(value)),
                         0);
    }
    char *text = json_dumps(result, JSON_COMPACT);
    assert_true(text && !strchr(text, '#')); /* which stands for the id */
    if (value) {
        int length =
            snprintf(line, LINE_BYTES, "{\"jsonrpc\":\"2.0\",\"id\":#,\"result\":%s}\n", text);
        assert_in_range(length, 1, LINE_BYTES - 1);
    }
    free(text);
    json_decref(result);
}

/* What a walk through all places of an answer needs. */
struct digging {
    struct every_command *all;
    struct played *played;
    size_t at;     /* of the answers */
    size_t told;   /* holes that ended in a sentence */
    size_t passed; /* that did no harm */
    char line[LINE_BYTES];
};

static void try_hole(struct digging *digging, const char *pointer, enum hole hole)
{
    struct played *played = digging->played;
    dig(played->rehearsal.answers[digging->at], pointer, hole, digging->line);
    stand_in_spoil(&digging->all->stand_in, &played->rehearsal, digging->at, digging->line, false);
    every_command_run(digging->all, played, NULL, &run);
    if (run.exit_code == 0) {
        assert_string_equal(run.error, "");
        digging->passed++;
        return;
    }
    assert_ended_with_a_sentence(played, &run);
    if (run.exit_code != EX_PROTOCOL && run.exit_code != EX_TEMPFAIL) {
        fail_msg("%s with a hole at %s ended with %d: %s", played_name(played), pointer,
                 run.exit_code, run.error);
    }
    digging->told++;
}

/* Tries all holes below a value: each member of an object, the first entry of a list. */
static void dig_everywhere(struct digging *digging, const json_t *value, const char *pointer)
{
    char below[POINTER_BYTES];
    const char *name;
    json_t *member;
    json_object_foreach((json_t *)value, name, member) /* it is only read */
    {
        assert_in_range(snprintf(below, sizeof below, "%s/%s", pointer, name), 1, sizeof below - 1);
        for (enum hole hole = ABSENT; hole < HOLES; hole++) {
            try_hole(digging, below, hole);
        }
        dig_everywhere(digging, member, below);
    }
    if (json_array_size(value) > 0) {
        assert_in_range(snprintf(below, sizeof below, "%s/0", pointer), 1, sizeof below - 1);
        for (enum hole hole = NULL_THERE; hole < HOLES; hole++) {
            try_hole(digging, below, hole);
        }
        dig_everywhere(digging, json_array_get(value, 0), below);
    }
}

static void no_hole_in_an_answer_ends_otherwise_than_in_a_sentence(void **state)
{
    struct digging *digging = calloc(1, sizeof *digging);
    assert_non_null(digging);
    digging->all = *state;
    for (size_t i = 0; i < digging->all->count; i++) {
        digging->played = &digging->all->played[i];
        if (strcmp(digging->played->command->arguments[0], "--json") == 0) {
            continue; /* prints whatever comes */
        }
        for (digging->at = 0; digging->at < digging->played->rehearsal.count; digging->at++) {
            const json_t *answer = digging->played->rehearsal.answers[digging->at];
            dig_everywhere(digging, json_object_get(answer, "result"), "");
        }
    }
    print_message("%zu holes were told, %zu did no harm\n", digging->told, digging->passed);
    assert_true(digging->told > 100 && digging->passed > 100);
    free(digging);
}

/* --- output that cannot be written ----------------------------------------------------------- */

static void output_that_is_full_is_told(void **state)
{
    struct every_command *all = *state;
    int full = open("/dev/full", O_WRONLY | O_CLOEXEC);
    assert_true(full >= 0);
    for (size_t i = 0; i < all->count; i++) {
        struct played *played = &all->played[i];
        stand_in_repeat(&all->stand_in, &played->rehearsal);
        every_command_run(all, played, &(struct program_way){.output = full}, &run);
        assert_ended_with_a_sentence(played, &run);
        assert_int_equal(run.exit_code, EX_IOERR);
        assert_non_null(strstr(run.error, "the output cannot be written"));
    }
    assert_int_equal(close(full), 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_line_that_is_no_json_is_told),
        cmocka_unit_test(an_answer_that_is_neither_result_nor_error_is_told),
        cmocka_unit_test(an_answer_to_something_else_is_told),
        cmocka_unit_test(a_daemon_that_goes_without_an_answer_is_told),
        cmocka_unit_test(a_daemon_that_goes_in_the_middle_of_an_answer_is_told),
        cmocka_unit_test(a_daemon_that_stops_is_told_with_its_own_words),
        cmocka_unit_test(what_is_forbidden_is_told_with_the_daemon_s_words),
        cmocka_unit_test(no_hole_in_an_answer_ends_otherwise_than_in_a_sentence),
        cmocka_unit_test(output_that_is_full_is_told),
    };
    if (undertagd_is_slowed()) {
        (void)printf("skipped: it starts thousands of clients, which takes hours\n");
        return 0;
    }
    return cmocka_run_group_tests(tests, every_command_set_up, every_command_tear_down);
}
