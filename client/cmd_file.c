/*
 * file: items to the daemon, a stream of JSON Lines or a single one.
 */
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <time.h>
#include <unistd.h>

#include "client/command.h"
#include "client/feed.h"
#include "client/format.h"
#include "client/progress.h"
#include "client/request.h"
#include "client/text.h"

enum {
    ID,
    TITLE,
    TAG,
    LANGUAGE,
    TAGGER,
    FILED_AT,
    FIELD,
    PROMPTED,
    DECLINED,
    INDEPENDENT
};

enum {
    LINE_LIMIT_BYTES = 8 * 1024 * 1024, /* where the daemon does not tell its own */
    TEXT_BYTES = 8 * 1024 * 1024,       /* the daemon's own limit is lower */
    ENVELOPE_BYTES = 128                /* what a request is longer than its params, and more */
};

static const struct args_option OPTIONS[] = {
    [ID] = {"id", ARGS_TEXT, "X", 0, 0,
            "file one item under this id, its text from standard input"},
    [TITLE] = {"title", ARGS_TEXT, "T", 0, 0, "the item's title"},
    [TAG] = {"tag", ARGS_LIST, "TAG", 0, 0, "a tag of the item; once for each tag"},
    [LANGUAGE] = {"language", ARGS_TEXT, "L", 0, 0, "the language of its words"},
    [TAGGER] = {"tagger", ARGS_TEXT, "T", 0, 0, "who tagged it"},
    [FILED_AT] = {"filed-at", ARGS_TEXT, "TIME", 0, 0, "when, as in 2031-05-04T10:00:00Z"},
    [FIELD] = {"field", ARGS_LIST, "NAME=VALUE", 0, 0,
               "a field to learn from, as text; a name given again makes a list"},
    [PROMPTED] = {"prompted", ARGS_LIST, "TAG", 0, 0,
                  "one of the tags that was taken from proposals"},
    [DECLINED] = {"declined", ARGS_LIST, "TAG", 0, 0, "a tag that was proposed and turned down"},
    [INDEPENDENT] = {"independent", ARGS_FLAG, NULL, 0, 0,
                     "a second tagging by another --tagger, kept beside the first as evidence"},
};

/* --- one item ------------------------------------------------------------------------------- */

/* Puts a value beside what the field holds already. */
static int add_field(json_t *fields, const char *field, struct failure *failure)
{
    const char *equals = strchr(field, '=');
    if (!equals || equals == field) {
        return failure_set(failure, FAILURE_USAGE, "--field takes NAME=VALUE, not '%s'", field);
    }
    size_t length = (size_t)(equals - field);
    char *name = strndup(field, length);
    json_t *value = json_string(equals + 1);
    json_t *before = name ? json_object_get(fields, name) : NULL;
    int result = name && value ? 0 : -1;
    if (!result && json_is_array(before)) {
        result = json_array_append(before, value);
    } else if (!result && before) {
        result = json_object_set_new(fields, name, json_pack("[OO]", before, value));
    } else if (!result) {
        result = json_object_set(fields, name, value);
    }
    json_decref(value);
    free(name);
    return result ? failure_memory(failure) : 0;
}

static int add_fields(json_t *params, const struct args_value *value, struct failure *failure)
{
    if (!value->given) {
        return 0;
    }
    json_t *fields = json_object();
    if (json_object_set_new(params, "fields", fields)) {
        return failure_memory(failure);
    }
    int code = 0;
    for (size_t i = 0; i < value->list_count && !code; i++) {
        code = add_field(fields, value->list[i], failure);
    }
    return code;
}

/* The text of the item from standard input, unless that is a terminal. */
static int add_input(const struct client *client, json_t *params, struct failure *failure)
{
    if (isatty(STDIN_FILENO) == 1) {
        return 0;
    }
    char *text = NULL;
    size_t length = 0;
    int code = command_read_input(client, "the text", TEXT_BYTES, &text, &length, failure);
    if (!code && length > 0 && json_object_set_new(params, "text", json_stringn(text, length))) {
        code = failure_memory(failure);
    }
    free(text);
    return code;
}

static int make_item(const struct client *client, const struct args_value *values,
                     json_t **ret_params, struct failure *failure)
{
    json_t *params = json_object();
    int code = params ? 0 : failure_memory(failure);
    static const struct {
        int option;
        const char *member;
    } TEXTS[] = {{ID, "id"},
                 {TITLE, "title"},
                 {LANGUAGE, "language"},
                 {TAGGER, "tagger"},
                 {FILED_AT, "filed_at"}};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0] && !code; i++) {
        code = request_text(params, TEXTS[i].member, &values[TEXTS[i].option], failure);
    }
    if (!code) {
        code = request_list(params, "tags", &values[TAG], failure);
    }
    if (!code && values[PROMPTED].given) {
        code = request_list(params, "prompted", &values[PROMPTED], failure);
    }
    if (!code && values[DECLINED].given) {
        code = request_list(params, "declined", &values[DECLINED], failure);
    }
    if (!code && values[INDEPENDENT].given &&
        json_object_set_new(params, "independent", json_true())) {
        code = failure_memory(failure);
    }
    if (!code) {
        code = add_fields(params, &values[FIELD], failure);
    }
    if (!code) {
        code = add_input(client, params, failure);
    }
    if (code) {
        json_decref(params);
        return code;
    }
    *ret_params = params;
    return 0;
}

static int file_one(const struct client *client, const struct args *args, struct failure *failure)
{
    json_t *params = NULL;
    struct wire_answer answer = {0};
    int code = make_item(client, args->values, &params, failure);
    if (!code) {
        code = command_ask_take(client, "item.file", params, &answer, failure);
    }
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else {
        char seq[FORMAT_BYTES];
        char *id = text_clean(args->values[ID].text, TEXT_ONE_LINE);
        if (id) {
            (void)fprintf(client->out.stream, "%s: %s (change %s)\n", id,
                          command_text(answer.result, "was"),
                          format_count(command_whole(answer.result, "seq"), seq));
        } else {
            code = failure_memory(failure);
        }
        free(id);
    }
    wire_answer_deinit(&answer);
    return code;
}

/* --- a stream of items ---------------------------------------------------------------------- */

/* What the hooks of the feed write to. */
struct telling {
    const struct client *client;
    struct progress progress;
};

static int64_t now_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

static void tell_refused(void *user, const char *source, uint64_t line, const char *reason)
{
    struct telling *telling = user;
    char *clean_source = text_clean(source, TEXT_ONE_LINE);
    char *clean_reason = text_clean(reason, TEXT_ONE_LINE);
    progress_clear(&telling->progress);
    /* Nothing is left to tell it to where standard error cannot be written. */
    (void)fprintf(telling->client->err.stream, "%s:%llu: %s\n", clean_source ? clean_source : "",
                  (unsigned long long)line, clean_reason ? clean_reason : "refused");
    free(clean_reason);
    free(clean_source);
}

static void tell_acknowledged(void *user, const struct wire_answer *answer)
{
    const struct telling *telling = user;
    if (telling->client->json) {
        command_print_json(telling->client, answer);
    }
}

static void tell_moved(void *user, const struct feed_counts *counts)
{
    struct telling *telling = user;
    progress_update(&telling->progress, feed_acknowledged(counts) + counts->refused, counts->bytes,
                    now_ms());
}

static void tell_waiting(void *user, const char *reason, unsigned wait_ms)
{
    struct telling *telling = user;
    progress_clear(&telling->progress);
    command_complain(telling->client,
                     "the store does not take items now: %s; trying again in %.2g s", reason,
                     wait_ms / 1000.0);
}

static bool is_input(const char *path)
{
    return strcmp(path, "-") == 0;
}

static int fail_open(const char *path, int error, struct failure *failure)
{
    return failure_set(failure, error == EACCES ? FAILURE_FORBIDDEN : FAILURE_IO,
                       "%s cannot be read: %s", path, strerror(error));
}

/*
 * Looks at all inputs before anything is filed: each can be read. *ret_total: their bytes, 0 where
 * that is not known.
 */
static int look_at(const struct client *client, const char *const *paths, size_t count,
                   uint64_t *ret_total, struct failure *failure)
{
    uint64_t total = 0;
    bool known = true;
    for (size_t i = 0; i < count; i++) {
        struct stat found;
        bool input = is_input(paths[i]);
        if (input ? fstat(STDIN_FILENO, &found) : stat(paths[i], &found)) {
            return fail_open(paths[i], errno, failure);
        }
        if (input && isatty(STDIN_FILENO) == 1 && client->err.terminal) {
            (void)fprintf(client->err.stream, "Reading JSON Lines; end them with Ctrl-D.\n");
        }
        if (S_ISDIR(found.st_mode)) {
            return fail_open(paths[i], EISDIR, failure);
        }
        if (!input && access(paths[i], R_OK)) {
            return fail_open(paths[i], errno, failure);
        }
        known = known && S_ISREG(found.st_mode);
        total += known ? (uint64_t)found.st_size : 0;
    }
    *ret_total = known ? total : 0;
    return 0;
}

static int feed_path(struct feed *feed, const char *path, struct failure *failure)
{
    if (is_input(path)) {
        return feed_file(feed, STDIN_FILENO, "standard input", failure);
    }
    int fd = open(path, O_RDONLY | O_CLOEXEC);
    if (fd < 0) {
        return fail_open(path, errno, failure);
    }
    int code = feed_file(feed, fd, path, failure);
    (void)close(fd); /* only read from */
    return code;
}

/*
 * Asks how long a line may be. The answer also shows, before a line is at stake, that the daemon
 * takes this connection; other errors say nothing against filing.
 */
static int ask_limit(struct wire *wire, size_t *ret_limit, struct failure *failure)
{
    struct wire_answer answer = {0};
    struct failure own = {0};
    int code = wire_call_take(wire, "daemon.state", json_object(), &answer, &own);
    int64_t limit = command_whole(json_object_get(answer.result, "limits"), "line_limit");
    wire_answer_deinit(&answer);
    if (code == FAILURE_DATA || code == FAILURE_INTERNAL) {
        code = 0;
    }
    if (code) {
        *failure = own;
        return code;
    }
    *ret_limit =
        limit > (json_int_t)2 * ENVELOPE_BYTES ? (size_t)limit - ENVELOPE_BYTES : LINE_LIMIT_BYTES;
    return 0;
}

static void print_counts(const struct client *client, const struct feed_counts *counts)
{
    char fresh[FORMAT_BYTES];
    char revised[FORMAT_BYTES];
    char same[FORMAT_BYTES];
    char refused[FORMAT_BYTES];
    if (!client->json) {
        (void)fprintf(client->out.stream, "%s new, %s revised, %s same, %s refused\n",
                      format_count((int64_t)counts->fresh, fresh),
                      format_count((int64_t)counts->revised, revised),
                      format_count((int64_t)counts->same, same),
                      format_count((int64_t)counts->refused, refused));
    }
}

/* Says beside a failure how far the feed came, and what to do. */
static int fail_broken(const struct feed_counts *counts, int code, struct failure *failure)
{
    struct failure whole = {0};
    char done[FORMAT_BYTES];
    char open_lines[FORMAT_BYTES];
    char refused[FORMAT_BYTES];
    (void)failure_set(&whole, code,
                      "%s; %s lines were acknowledged, %s refused, %s sent without an answer: run "
                      "the same command again, which is safe, since items filed already count as "
                      "'same'",
                      failure->message, format_count((int64_t)feed_acknowledged(counts), done),
                      format_count((int64_t)counts->refused, refused),
                      format_count((int64_t)counts->unanswered, open_lines));
    *failure = whole;
    return code;
}

/* `total` as look_at gives it. */
static int file_paths(const struct client *client, struct wire *wire, const char *const *paths,
                      size_t count, uint64_t total, struct failure *failure)
{
    struct telling telling = {.client = client};
    struct feed_settings settings = {.window_lines = 512,
                                     .window_bytes = (size_t)4 * 1024 * 1024,
                                     .first_wait_ms = 250,
                                     .tries = 8,
                                     .turn_ms = 250};
    const struct feed_hooks hooks = {.user = &telling,
                                     .refused = tell_refused,
                                     .acknowledged = tell_acknowledged,
                                     .moved = tell_moved,
                                     .waiting = tell_waiting};
    struct screen progress_screen = client->err;
    struct feed *feed = NULL;
    int code = ask_limit(wire, &settings.line_limit_bytes, failure);
    if (!code) {
        code = feed_new(wire, &settings, &hooks, &feed, failure);
    }
    if (code) {
        return code;
    }
    progress_init(&telling.progress, &progress_screen, total, now_ms());
    for (size_t i = 0; i < count && !code; i++) {
        code = feed_path(feed, paths[i], failure);
    }
    if (!code || code == FAILURE_IO) {
        struct failure later = {0};
        int late = feed_finish(feed, &later); /* also what was sent before a file broke off */
        if (!code && late) {
            code = late;
            *failure = later;
        }
    }
    progress_clear(&telling.progress);
    struct feed_counts counts = feed_counts(feed);
    feed_free(feed);
    if (code) {
        return fail_broken(&counts, code, failure);
    }
    print_counts(client, &counts);
    return counts.refused > 0 ? FAILURE_DATA : 0; /* each was reported */
}

static int run(struct client *client, const struct args *args, struct failure *failure)
{
    static const char *const INPUT[] = {"-"};
    if (args->values[ID].given) {
        if (args->word_count > 0) {
            return failure_set(failure, FAILURE_USAGE,
                               "--id files one item and takes its text from standard input, no "
                               "FILE; see 'undertag file --help'");
        }
        return file_one(client, args, failure);
    }
    for (size_t i = 0; i < args->option_count; i++) {
        if (args->values[i].given) {
            return failure_set(failure, FAILURE_USAGE,
                               "--%s describes a single item, which needs --id as well; see "
                               "'undertag file --help'",
                               args->options[i].name);
        }
    }
    const char *const *paths = args->word_count > 0 ? args->words : INPUT;
    size_t count = args->word_count > 0 ? args->word_count : 1;
    uint64_t total = 0;
    struct wire *wire = NULL;
    int code = look_at(client, paths, count, &total, failure);
    if (!code) {
        code = wire_open(client->socket_path, &wire, failure);
    }
    if (!code) {
        code = file_paths(client, wire, paths, count, total, failure);
    }
    wire_free(wire);
    return code;
}

const struct command command_file = {
    .name = "file",
    .synopsis = "[FILE...]",
    .summary = "file items: JSON Lines, or one item by options",
    .about =
        "Files items from JSON Lines, in files or on standard input (also as '-'). Each line is an "
        "object:\n"
        "\n"
        "  {\"id\": \"log/42\", \"title\": \"Fog at noon\", \"text\": \"...\", \"tags\": "
        "[\"fog\"]}\n"
        "\n"
        "and may hold fields, language, tagger, filed_at, prompted, declined and independent "
        "besides. A line that is refused is reported as FILE:LINE: REASON and the others go on. "
        "What is "
        "acknowledged is durable. To run the same command again after a break is safe: what was "
        "filed already counts as 'same'.\n"
        "\n"
        "Takes back a snapshot's items.jsonl, too. Its lines may hold then, a list of calls that "
        "are made of the item behind its filing, in that order: item.file, item.rule and "
        "item.check, each as {\"method\": ..., \"params\": {...}} without the id. Such a line "
        "counts once, as refused where any of its calls is.\n"
        "\n"
        "With --id, files one item by its options, its text from standard input.",
    .options = OPTIONS,
    .option_count = sizeof OPTIONS / sizeof OPTIONS[0],
    .most_words = SIZE_MAX,
    .run = run,
};
