/*
 * call_fixture: the calls of one connection, for the tests of the queue. The methods "read" and
 * "change" keep their calls until the test ends them; each call has a name, and the test follows
 * which names were started. Static functions, since each test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_CALL_FIXTURE_H
#define UNDERTAG_TESTS_CALL_FIXTURE_H

#include <stdio.h>

#include "daemon/call_queue.h"
#include "tests/unit/jsons.h"

enum {
    CALLS = 2048
};

struct fixture {
    struct method_table table;
    struct call_queue queue;
    struct call_text text;
    char started[CALLS * 2]; /* names, a letter each */
    struct call *calls[128]; /* by name, while they run */
    size_t start_count;
    size_t ended;
};

/* --- the methods --- */

static inline void keep(struct call *call, const json_t *params)
{
    struct fixture *fixture = call_context(call);
    char name = *json_string_value(json_object_get(params, "name"));
    fixture->started[fixture->start_count++] = name;
    fixture->calls[(unsigned char)name] = call;
}

static inline void answer_at_once(struct call *call, const json_t *params)
{
    struct fixture *fixture = call_context(call);
    fixture->started[fixture->start_count++] = *json_string_value(json_object_get(params, "name"));
    call_answer_take(call, json_incref(json_object_get(params, "name")));
}

static inline void answer_nothing(struct call *call, const json_t *params)
{
    (void)params;
    call_answer_take(call, NULL);
}

static const struct method METHODS[] = {{"read", METHOD_READ, RIGHT_READ, keep},
                                        {"change", METHOD_CHANGE, RIGHT_FILE, keep},
                                        {"echo", METHOD_READ, RIGHT_READ, answer_at_once},
                                        {"nothing", METHOD_READ, RIGHT_READ, answer_nothing}};

/* --- the fixture --- */

static inline void on_ended(void *user)
{
    struct fixture *fixture = user;
    fixture->ended++;
}

static inline int calls_set_up(void **state)
{
    struct fixture *fixture = calloc(1, sizeof *fixture);
    assert_non_null(fixture);
    fixture->table = (struct method_table){
        .methods = METHODS, .count = sizeof METHODS / sizeof METHODS[0], .context = fixture};
    fixture->queue = (struct call_queue){
        .table = &fixture->table, .user = fixture, .ended = on_ended, .peer = {.uid = 1911}};
    *state = fixture;
    return 0;
}

static inline int calls_tear_down(void **state)
{
    struct fixture *fixture = *state;
    call_queue_abandon(&fixture->queue);
    assert_true(call_queue_is_empty(&fixture->queue));
    free(fixture->text.bytes);
    free(fixture);
    return 0;
}

static inline void add(struct fixture *fixture, const char *line)
{
    char *copy = quoted(line);
    call_queue_add_line(&fixture->queue, copy, strlen(copy));
    free(copy);
}

/* A request whose id is its name. */
static inline void ask(struct fixture *fixture, const char *method, char name)
{
    char line[128];
    (void)snprintf(line, sizeof line,
                   "{'jsonrpc':'2.0','id':'%c','method':'%s','params':{'name':'%c'}}", name, method,
                   name);
    add(fixture, line);
}

static inline void notify(struct fixture *fixture, const char *method, char name)
{
    char line[128];
    (void)snprintf(line, sizeof line, "{'jsonrpc':'2.0','method':'%s','params':{'name':'%c'}}",
                   method, name);
    add(fixture, line);
}

static inline void start(struct fixture *fixture)
{
    call_queue_start(&fixture->queue, SIZE_MAX);
}

static inline void end(struct fixture *fixture, char name)
{
    struct call *call = fixture->calls[(unsigned char)name];
    assert_non_null(call);
    fixture->calls[(unsigned char)name] = NULL;
    call_answer_take(call, json_true());
}

/* The ids (or codes, where an id is null) of what has come out since the last time, a line each:
 * "a\n", "[ab]\n", "-32700\n". */
static inline void assert_out(struct fixture *fixture, const char *expected)
{
    char found[256] = "";
    size_t used = 0;
    assert_int_equal(call_queue_collect(&fixture->queue, &fixture->text), 0);
    char *text = strndup(fixture->text.bytes ? fixture->text.bytes : "", fixture->text.size);
    fixture->text.size = 0;
    for (char *line = strtok(text, "\n"); line; line = strtok(NULL, "\n")) {
        json_t *answer = json_loads(line, 0, NULL);
        assert_non_null(answer);
        bool is_batch = json_is_array(answer);
        used += (size_t)snprintf(found + used, sizeof found - used, "%s", is_batch ? "[" : "");
        for (size_t i = 0; i < (is_batch ? json_array_size(answer) : 1); i++) {
            const json_t *one = is_batch ? json_array_get(answer, i) : answer;
            const char *id = json_string_value(json_object_get(one, "id"));
            json_int_t code =
                json_integer_value(json_object_get(json_object_get(one, "error"), "code"));
            used += (size_t)(id ? snprintf(found + used, sizeof found - used, "%s", id) : 0);
            used +=
                (size_t)(code ? snprintf(found + used, sizeof found - used, "%d", (int)code) : 0);
        }
        used += (size_t)snprintf(found + used, sizeof found - used, "%s\n", is_batch ? "]" : "");
        json_decref(answer);
    }
    free(text);
    assert_string_equal(found, expected);
}

/* Two calls and a notification. */
static const char BATCH[] = "[{'jsonrpc':'2.0','id':'a','method':'read','params':{'name':'a'}},"
                            "{'jsonrpc':'2.0','method':'read','params':{'name':'n'}},"
                            "{'jsonrpc':'2.0','id':'b','method':'read','params':{'name':'b'}}]";

#endif
