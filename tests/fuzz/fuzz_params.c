/*
 * Every method's params, through the dispatch of the daemon and with an engine behind it.
 *
 * Input: lines, each the name of a method, a blank and its params. Each is answered; what is
 * refused has a sentence and names a member, and changes nothing; what is filed can be read.
 */
#include <unistd.h>
#include <uv.h>

#include "daemon/call_queue.h"
#include "daemon/methods.h"

#include "tests/fuzz/home.h"

enum {
    INPUTS_A_HOME = 500, /* so that what was filed before does not pile up */
    LINES_MOST = 24      /* of an input */
};

struct world {
    char home[HOME_BYTES];
    struct options options;
    uv_loop_t loop;
    struct methods *methods;
    struct engine *engine;
    char exports[HOME_BYTES + sizeof "/exports"];
    struct snapshots *snapshots;
    struct call_queue queue;
    struct call_text text;
    unsigned inputs;
};

static struct world world;

/* --- the daemon but for its socket --- */

static void on_ended(void *user)
{
    (void)user;
}

static void open_world(void)
{
    char error[ENGINE_ERROR_BYTES] = "";
    home_make(world.home);
    options_defaults(&world.options);
    world.options.visible_within_ms = 0;
    world.options.map_size_bytes = HOME_MAP_BYTES;
    world.options.disk_reserve_bytes = 0;
    world.options.rehearsal_share = 0.0;
    FUZZ_NEED(uv_loop_init(&world.loop) == 0, "no loop");
    FUZZ_NEED(methods_new(&world.loop, &world.options, &world.methods) == 0, "no methods");
    const struct engine_settings settings = {.home = world.home,
                                             .options = &world.options,
                                             .user = world.methods,
                                             .changes_done = methods_wake};
    FUZZ_NEED(engine_open(&settings, &world.engine, error) == 0, error);
    (void)snprintf(world.exports, sizeof world.exports, "%s/exports", world.home);
    const struct snapshots_settings exports = {.engine = world.engine, .folder = world.exports};
    FUZZ_NEED(snapshots_new(&exports, &world.snapshots) == 0, "no snapshots");
    methods_use(world.methods, world.engine, world.snapshots);
    world.queue = (struct call_queue){.table = methods_table(world.methods),
                                      .user = &world,
                                      .ended = on_ended,
                                      .peer = {.uid = geteuid()}};
    world.inputs = 0;
}

static void close_world(void)
{
    if (!world.engine) {
        return;
    }
    methods_use(world.methods, NULL, NULL);
    snapshots_stop(world.snapshots);
    snapshots_free(world.snapshots);
    engine_close(world.engine);
    world.engine = NULL;
    methods_close(world.methods, NULL, NULL);
    (void)uv_run(&world.loop, UV_RUN_DEFAULT);
    FUZZ_CHECK(uv_loop_close(&world.loop) == 0);
    home_remove(world.home);
    free(world.text.bytes);
    world.text = (struct call_text){0};
}

/* --- asking --- */

/* The answer to a request; NULL where its texts cannot be sent. */
static json_t *ask(const char *method, const json_t *params)
{
    json_t *request = json_pack("{s:s, s:i, s:s, s:O}", "jsonrpc", "2.0", "id", 1, "method", method,
                                "params", params);
    char *line = json_dumps(request, JSON_COMPACT);
    json_decref(request);
    FUZZ_CHECK(line);
    call_queue_add_line(&world.queue, line, strlen(line));
    free(line);
    call_queue_start(&world.queue, SIZE_MAX);
    world.text.size = 0;
    while (!call_queue_is_empty(&world.queue)) {
        FUZZ_CHECK(call_queue_collect(&world.queue, &world.text) == 0);
        if (!call_queue_is_empty(&world.queue)) {
            (void)uv_run(&world.loop, UV_RUN_ONCE);
        }
    }
    FUZZ_CHECK(!world.queue.broken && world.text.size > 0);
    json_t *answer = json_loadb(world.text.bytes, world.text.size, JSON_REJECT_DUPLICATES, NULL);
    FUZZ_CHECK(answer);
    return answer;
}

/* The result of what cannot be refused. */
static json_t *ask_for_sure(const char *method, json_t *params)
{
    json_t *answer = ask(method, params);
    json_t *result = json_incref(json_object_get(answer, "result"));
    FUZZ_CHECK(result);
    json_decref(answer);
    json_decref(params);
    return result;
}

/* What a refused request must not change. */
static struct store_totals totals(void)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    FUZZ_CHECK(store_read(engine_store(world.engine), &view, &error) == STORE_OK);
    struct store_totals found = store_view_totals(view);
    store_end(view);
    return found;
}

/* --- faults --- */

/* The first name of a JSON Pointer (RFC 6901), unescaped. */
static void first_name(const char *pointer, char name[FAULT_FIELD_BYTES])
{
    size_t used = 0;
    FUZZ_CHECK(pointer[0] == '/');
    for (const char *at = pointer + 1; *at != '\0' && *at != '/'; at++) {
        if (*at == '~') {
            at++;
            FUZZ_CHECK(*at == '0' || *at == '1');
            name[used++] = *at == '0' ? '~' : '/';
        } else {
            name[used++] = *at;
        }
    }
    name[used] = '\0';
}

/* The member to blame was given, or the sentence says that it is missed. */
static void check_field(const char *field, const char *message, const json_t *params)
{
    char name[FAULT_FIELD_BYTES];
    FUZZ_CHECK(!u8_check((const uint8_t *)field, strlen(field)));
    if (strlen(field) + 8 >= FAULT_FIELD_BYTES) {
        return; /* a long name is cut */
    }
    first_name(field, name);
    FUZZ_CHECK(json_object_get(params, name) || strstr(message, name));
}

static void check_fault(const char *method, const json_t *error, const json_t *params)
{
    const char *message = json_string_value(json_object_get(error, "message"));
    const json_t *data = json_object_get(error, "data");
    json_int_t code = json_integer_value(json_object_get(error, "code"));
    FUZZ_CHECK(message && fuzz_is_sentence(message));
    /* All that an input can bring about; -32603 would be a fault of ours. */
    FUZZ_CHECK(code == FAULT_METHOD || code == FAULT_PARAMS || code == FAULT_NOT_FOUND ||
               code == FAULT_VOCABULARY || code == FAULT_LIMIT ||
               (code == FAULT_STORE && (strcmp(method, "daemon.rebuild") == 0 || /* under way */
                                        strcmp(method, "backup.write") == 0)));
    if (data) {
        check_field(json_string_value(json_object_get(data, "field")), message, params);
    }
}

/* --- results --- */

/* Both hold the same strings, in any order and as often as it may be. */
static void check_same_set(const json_t *left, const json_t *right)
{
    json_t *sets[2] = {json_object(), json_object()};
    const json_t *lists[2] = {left, right};
    for (size_t i = 0; i < 2; i++) {
        for (size_t j = 0; j < json_array_size(lists[i]); j++) {
            const char *name = json_string_value(json_array_get(lists[i], j));
            FUZZ_CHECK(name && json_object_set_new(sets[i], name, json_true()) == 0);
        }
    }
    FUZZ_CHECK(json_equal(sets[0], sets[1]));
    json_decref(sets[0]);
    json_decref(sets[1]);
}

/* A member that was filed, or what stands for it where it was not. */
static void check_filed(const json_t *shown, const json_t *params, const char *member)
{
    const json_t *given = json_object_get(params, member);
    const json_t *stored = json_object_get(shown, member);
    FUZZ_CHECK(stored);
    if (given && json_string_length(given) + json_object_size(given) > 0) {
        FUZZ_CHECK(json_equal(given, stored));
    }
}

/* What was filed is shown, and is the same when it is filed again. */
static void check_filing(const json_t *params, const json_t *result)
{
    if (json_is_true(json_object_get(params, "independent"))) {
        return;
    }
    json_t *id = json_object_get(params, "id");
    json_t *shown = ask_for_sure("item.show", json_pack("{s:O}", "id", id));
    check_filed(shown, params, "id");
    check_filed(shown, params, "title");
    check_filed(shown, params, "text");
    check_filed(shown, params, "fields");
    check_filed(shown, params, "language");
    check_same_set(json_object_get(params, "tags"), json_object_get(shown, "filed"));
    json_t *again = ask_for_sure("item.file", json_incref((json_t *)params));
    FUZZ_CHECK(strcmp(json_string_value(json_object_get(again, "was")), "same") == 0);
    FUZZ_CHECK(json_integer_value(json_object_get(again, "seq")) <=
               json_integer_value(json_object_get(result, "seq")));
    json_decref(shown);
    json_decref(again);
}

/* By falling chance, each from 0 to 1, and no tag that the draft has. */
static void check_gaps(const json_t *params, const json_t *result)
{
    double before = 1.0;
    size_t at = 0;
    const json_t *gap = NULL;
    const json_t *gaps = json_object_get(result, "gaps");
    FUZZ_CHECK(json_is_array(gaps));
    json_array_foreach(gaps, at, gap)
    {
        double chance = json_number_value(json_object_get(gap, "chance"));
        FUZZ_CHECK(chance >= 0.0 && chance <= before);
        before = chance;
        size_t i = 0;
        const json_t *tag = NULL;
        json_array_foreach(json_object_get(params, "tags"), i, tag)
        {
            FUZZ_CHECK(!json_equal(tag, json_object_get(gap, "tag")));
        }
    }
}

static void check_result(const char *method, const json_t *params, const json_t *result)
{
    if (strcmp(method, "item.file") == 0) {
        check_filing(params, result);
    } else if (strcmp(method, "item.gaps") == 0) {
        check_gaps(params, result);
    }
}

/* --- the input --- */

static void run_request(const char *method, const json_t *params)
{
    struct store_totals before = totals();
    json_t *answer = ask(method, params);
    const json_t *error = json_object_get(answer, "error");
    const json_t *result = json_object_get(answer, "result");
    FUZZ_CHECK(!error != !result);
    if (error) {
        struct store_totals after = totals();
        check_fault(method, error, params);
        FUZZ_CHECK(memcmp(&before, &after, sizeof before) == 0);
    } else {
        check_result(method, params, result);
    }
    json_decref(answer);
}

static void run_line(struct fuzz_input line)
{
    struct fuzz_input name = fuzz_until(&line, ' ');
    char *method = fuzz_text(name);
    json_t *params = json_loadb((const char *)line.data, line.size, JSON_REJECT_DUPLICATES, NULL);
    if (params) {
        run_request(method, params);
    }
    json_decref(params);
    free(method);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static bool will_close;
    struct fuzz_input input = {.data = data, .size = size};
    if (world.inputs == INPUTS_A_HOME) {
        close_world();
    }
    if (!world.engine) {
        open_world();
    }
    if (!will_close) {
        will_close = true;
        (void)atexit(close_world); /* else a home would be left */
    }
    world.inputs++;
    for (int i = 0; i < LINES_MOST && input.size > 0; i++) {
        run_line(fuzz_until(&input, '\n'));
    }
    return 0;
}

/* --- made inputs --- */

/* That many different strings, after what comes before them and before what comes behind. */
static uint8_t *many(const char *before, unsigned count, const char *behind, size_t *ret_size)
{
    uint8_t *made = fuzz_room(strlen(before) + 20 * (size_t)count + strlen(behind) + 1);
    size_t used = (size_t)sprintf((char *)made, "%s", before);
    for (unsigned i = 0; i < count; i++) {
        used += (size_t)sprintf((char *)made + used, "%s\"t%u\"", i > 0 ? "," : "", i);
    }
    used += (size_t)sprintf((char *)made + used, "%s", behind);
    *ret_size = used;
    return made;
}

static uint8_t *many_tags(unsigned count, size_t *ret_size)
{
    return many("item.file {\"id\":\"many tags\",\"tags\":[", count, "]}", ret_size);
}

uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    static const char TEXT[] = "item.file {\"id\":\"a\",\"tags\":[\"fog\"],\"text\":\"";
    switch (number) {
    case 0:
        return many_tags(1000000, ret_size);
    case 1:
        return many_tags(100000, ret_size);
    case 2:
        return many_tags(1000, ret_size);
    case 3: /* a tag a million times counts once */
        return fuzz_repeated("item.file {\"id\":\"a\",\"tags\":[\"fog\"", ",\"fog\"", 99999, "]}",
                             ret_size);
    case 4: /* one word as long as a text may be */
        return fuzz_repeated(TEXT, "f", 1U << 20U, "\"}", ret_size);
    case 5:
        return fuzz_repeated(TEXT, "f", (1U << 20U) + 1, "\"}", ret_size);
    case 6: /* marks upon one letter */
        return fuzz_repeated(TEXT, "\xCC\x81", 1U << 19U, "\"}", ret_size);
    case 7: /* joiners, which are ignored */
        return fuzz_repeated(TEXT, "\xE2\x80\x8B\xE2\x80\x8D", 170000, "\"}", ret_size);
    case 8: /* more words than words_limit, and none of them in a text */
        return many("item.file {\"id\":\"a\",\"tags\":[],\"fields\":{\"lamp\":[", 30000, "]}}",
                    ret_size);
    case 9:
        return many("item.gaps {\"fields\":{\"lamp\":[", 30000, "]}}", ret_size);
    case 10:
        return fuzz_repeated("item.file {\"id\":\"a\",\"tags\":[],\"fields\":{\"lamp\":[\"\"",
                             ",\"oil\"", 100000, "]}}", ret_size);
    case 11:
        return fuzz_repeated("item.gaps {\"tags\":[\"\"", ",\"\"", 1000000, "]}", ret_size);
    default:
        return NULL;
    }
}
