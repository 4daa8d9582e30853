/*
 * The JSON-RPC envelope: lines into calls, and calls into answers, in their order.
 *
 * Input: lines. "item.show" answers its params at once, "item.file" (a change) ends later; whatever
 * the lines hold, each has the answers that JSON-RPC 2.0 and daemon/WIRE.md owe it.
 */
#include "daemon/call_queue.h"
#include "daemon/rpc.h"

#include "tests/fuzz/fuzz.h"

enum {
    HELD_MOST = 1024, /* changes of one connection under way */
    ANSWER_BYTES = 1 << 16
};

struct world {
    struct method_table table;
    struct call_queue queue;
    struct call_text text;
    struct call *held[HELD_MOST];
    size_t held_count;
};

/* --- the methods --- */

static void show(struct call *call, const json_t *params)
{
    FUZZ_CHECK(json_is_object(params));
    call_answer_take(call, json_incref((json_t *)params));
}

static void hold(struct call *call, const json_t *params)
{
    struct world *world = call_context(call);
    FUZZ_CHECK(json_is_object(params));
    FUZZ_CHECK(world->held_count < HELD_MOST);
    world->held[world->held_count++] = call;
}

static const struct method METHODS[] = {{"item.show", METHOD_READ, show},
                                        {"item.file", METHOD_CHANGE, hold}};

static void on_ended(void *user)
{
    (void)user;
}

/* Runs all calls to their end. */
static void run(struct world *world)
{
    do {
        call_queue_start(&world->queue, ANSWER_BYTES);
        for (size_t i = world->held_count; i > 0; i--) {
            call_answer_take(world->held[i - 1], json_integer(1911)); /* the last one first */
        }
        world->held_count = 0;
        FUZZ_CHECK(call_queue_collect(&world->queue, &world->text) == 0);
        FUZZ_CHECK(!world->queue.broken);
    } while (!call_queue_is_empty(&world->queue));
}

/* --- what is due --- */

static size_t depth_of(const json_t *value)
{
    const char *name = NULL;
    const json_t *member = NULL;
    size_t at = 0;
    size_t deepest = 0;
    json_object_foreach((json_t *)value, name, member)
    {
        size_t depth = depth_of(member);
        deepest = depth > deepest ? depth : deepest;
    }
    json_array_foreach(value, at, member)
    {
        size_t depth = depth_of(member);
        deepest = depth > deepest ? depth : deepest;
    }
    return deepest + (json_is_object(value) || json_is_array(value) ? 1 : 0);
}

static bool is_id(const json_t *id)
{
    return json_is_string(id) || json_is_number(id) || json_is_null(id);
}

/* The code of a request's answer by sections 4 and 5 of the specification; 0 is a result. */
static json_int_t code_due(const json_t *request)
{
    const json_t *id = json_object_get(request, "id");
    const json_t *params = json_object_get(request, "params");
    const char *version = json_string_value(json_object_get(request, "jsonrpc"));
    const char *method = json_string_value(json_object_get(request, "method"));
    if ((id && !is_id(id)) || !version || strcmp(version, "2.0") != 0 || !method ||
        (params && !json_is_object(params) && !json_is_array(params))) {
        return FAULT_REQUEST;
    }
    if (json_is_array(params)) {
        return FAULT_PARAMS;
    }
    return strcmp(method, "item.show") == 0 || strcmp(method, "item.file") == 0 ? 0 : FAULT_METHOD;
}

/* --- what comes --- */

static void check_fault(const json_t *error, json_int_t code)
{
    const char *message = json_string_value(json_object_get(error, "message"));
    FUZZ_CHECK(json_integer_value(json_object_get(error, "code")) == code);
    FUZZ_CHECK(message && fuzz_is_sentence(message));
}

/* `id` NULL is null. */
static void check_answer(const json_t *answer, json_t *id, json_int_t code)
{
    const json_t *result = json_object_get(answer, "result");
    const json_t *error = json_object_get(answer, "error");
    FUZZ_CHECK(json_object_size(answer) == 3);
    FUZZ_CHECK(strcmp(json_string_value(json_object_get(answer, "jsonrpc")), "2.0") == 0);
    FUZZ_CHECK(json_equal(json_object_get(answer, "id"), id ? id : json_null()));
    FUZZ_CHECK(!result != !error);
    FUZZ_CHECK((code == 0) == (error == NULL));
    if (error) {
        check_fault(error, code);
    }
}

/* Checks the answer to a request, if one is due; says whether that was so. */
static bool check_request(const json_t *request, const json_t *answer)
{
    json_t *id = json_object_get(request, "id");
    json_int_t code = code_due(request);
    if (code != FAULT_REQUEST && !id) {
        return false;
    }
    FUZZ_CHECK(answer);
    check_answer(answer, is_id(id) ? id : NULL, code);
    const json_t *params = json_object_get(request, "params");
    const char *method = json_string_value(json_object_get(request, "method"));
    if (code == 0 && params && strcmp(method, "item.show") == 0) {
        FUZZ_CHECK(json_equal(json_object_get(answer, "result"), params));
    }
    return true;
}

static void check_batch(const json_t *batch, const json_t *answers)
{
    size_t due = 0;
    for (size_t i = 0; i < json_array_size(batch); i++) {
        due += check_request(json_array_get(batch, i), json_array_get(answers, due));
    }
    FUZZ_CHECK(json_array_size(answers) == due);
    FUZZ_CHECK((answers == NULL) == (due == 0));
}

/* What came for a line: nothing, or one line that is JSON. */
static json_t *read_answer(struct world *world)
{
    struct call_text *text = &world->text;
    if (text->size == 0) {
        return NULL;
    }
    FUZZ_CHECK(memchr(text->bytes, '\n', text->size) == text->bytes + text->size - 1);
    json_t *answer =
        json_loadb(text->bytes, text->size, JSON_REJECT_DUPLICATES | JSON_ALLOW_NUL, NULL);
    FUZZ_CHECK(answer);
    text->size = 0;
    return answer;
}

static void check_line(struct world *world, const char *line, size_t length)
{
    json_t *text = json_loadb(line, length, JSON_REJECT_DUPLICATES | JSON_DECODE_ANY, NULL);
    call_queue_add_line(&world->queue, line, length);
    run(world);
    json_t *answer = read_answer(world);
    if (!text || depth_of(text) > RPC_DEPTH) {
        check_answer(answer, NULL, FAULT_PARSE);
    } else if (json_array_size(text) > 0) {
        check_batch(text, answer);
    } else {
        FUZZ_CHECK(check_request(text, answer) == (answer != NULL));
    }
    json_decref(text);
    json_decref(answer);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    struct world world = {.held_count = 0};
    world.table = (struct method_table){
        .methods = METHODS, .count = sizeof METHODS / sizeof METHODS[0], .context = &world};
    world.queue =
        (struct call_queue){.table = &world.table, .user = &world, .ended = on_ended, .uid = 1911};
    while (input.size > 0) {
        struct fuzz_input line = fuzz_until(&input, '\n');
        char *copy = fuzz_copy(line);
        check_line(&world, copy, line.size);
        free(copy);
    }
    FUZZ_CHECK(world.queue.line_bytes == 0);
    FUZZ_CHECK(world.queue.answer_bytes == 0);
    call_queue_abandon(&world.queue);
    free(world.text.bytes);
    return 0;
}

/* --- made inputs --- */

/* An object of so many different members. */
static uint8_t *many_members(unsigned count, size_t *ret_size)
{
    static const char HEAD[] =
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.show\",\"params\":{";
    uint8_t *made = fuzz_room(sizeof HEAD + 20 * (size_t)count);
    size_t used = sizeof HEAD - 1;
    memcpy(made, HEAD, used);
    for (unsigned i = 0; i < count; i++) {
        used += (size_t)sprintf((char *)made + used, "%s\"lamp%u\":1", i > 0 ? "," : "", i);
    }
    made[used++] = '}';
    made[used++] = '}';
    *ret_size = used;
    return made;
}

uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    static const char SHOW[] =
        "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"item.show\",\"params\":{\"a\":";
    switch (number) {
    case 0:
        return fuzz_repeated("", "[", 8U << 20U, "", ret_size);
    case 1:
        return fuzz_repeated(SHOW, "{\"a\":", 1U << 20U, "", ret_size);
    case 2: /* 64 levels with the request and its params */
        return fuzz_repeated(SHOW, "[", 62,
                             "]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]"
                             "]]]]]]]]}}",
                             ret_size);
    case 3:
        return fuzz_repeated(SHOW, "[", 63,
                             "]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]]"
                             "]]]]]]]]]}}",
                             ret_size);
    case 4: /* brackets in a string do not nest */
        return fuzz_repeated(SHOW, "\\\"[{", 64, "", ret_size);
    case 5: /* a batch with one request for each few bytes */
        return fuzz_repeated("[1", ",1", 20000, "]", ret_size);
    case 6:
        return fuzz_repeated("{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"", "\xC3\xA9", 4U << 20U,
                             "\"}", ret_size);
    case 7:
        return fuzz_repeated("{\"jsonrpc\":\"2.0\",\"method\":\"item.show\",\"id\":", "9",
                             1U << 20U, "}", ret_size);
    case 8:
        return many_members(100000, ret_size);
    default:
        return NULL;
    }
}
