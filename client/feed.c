/*
 * Happy path: read a piece of input, take lines from it while the window has room, make each into
 * its requests (one, but for lines with `then`), put it into the ring and queue them; a turn of the
 * wire moves bytes both ways; each answer is to the next request of the oldest unanswered line; the
 * last of them settles it, and it leaves the ring.
 *
 *     ring:  [oldest ............ answered ............ newest)
 *            kept for a new try    on their way
 *
 * While nothing has failed, oldest == answered. A -32005 leaves its line, and all that are answered
 * after it, in the ring; once all are answered, `oldest` to `newest` is sent again as a whole, but
 * for those requests of the oldest that were answered before the one that failed.
 * When the daemon goes away, what is in the ring between answered and newest is unanswered.
 */
#include "client/feed.h"

#include <assert.h>
#include <errno.h>
#include <jansson.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#include "client/filed_line.h"
#include "daemon/lines.h"

enum {
    READ_BYTES = 64 * 1024,
    WAIT_MOST_MS = 8000,
    REASON_BYTES = 1024
};

#define NONE_FAILED SIZE_MAX /* of a line's requests */

struct entry {
    struct filed_line line; /* owned */
    size_t length;          /* of the line as it came */
    const char *source;
    uint64_t number;          /* of the line, from 1 */
    size_t taken;             /* bytes of input, the line end included */
    int64_t id;               /* of the request that is answered next; the others follow it */
    size_t answered;          /* requests, of those that were sent last time */
    size_t failed;            /* the first of them that the store could not take; or NONE_FAILED */
    struct wire_answer filed; /* the answer to its filing, once that has come */
    char *refused;            /* why the first that was refused was, or NULL; owned */
    bool counted;             /* what became of it has been told */
};

struct feed {
    struct wire *wire;
    struct feed_settings settings;
    struct feed_hooks hooks;
    struct feed_counts counts;
    struct entry *ring; /* window_lines of them; index modulo that */
    uint64_t oldest;
    uint64_t answered;
    uint64_t newest;
    size_t bytes;              /* of the lines in the ring */
    unsigned tries;            /* of the line at `oldest` */
    bool failed;               /* the line at `oldest` was answered with -32005 */
    char reason[REASON_BYTES]; /* of that answer */
};

int feed_new(struct wire *wire, const struct feed_settings *settings,
             const struct feed_hooks *hooks, struct feed **ret_feed, struct failure *failure)
{
    assert(settings->window_lines >= 1 && settings->tries >= 1);
    struct feed *feed = calloc(1, sizeof *feed);
    struct entry *ring = calloc(settings->window_lines, sizeof *ring);
    if (!feed || !ring) {
        free(feed);
        free(ring);
        return failure_memory(failure);
    }
    feed->wire = wire;
    feed->settings = *settings;
    feed->hooks = *hooks;
    feed->ring = ring;
    *ret_feed = feed;
    return 0;
}

static struct entry *entry_at(const struct feed *feed, uint64_t index)
{
    return &feed->ring[index % feed->settings.window_lines];
}

/* What has been answered is forgotten. */
static void forget_answers(struct entry *entry)
{
    wire_answer_deinit(&entry->filed);
    entry->filed = (struct wire_answer){0};
    free(entry->refused);
    entry->refused = NULL;
}

static void entry_deinit(struct entry *entry)
{
    filed_line_deinit(&entry->line);
    forget_answers(entry);
    *entry = (struct entry){0};
}

void feed_free(struct feed *feed)
{
    if (!feed) {
        return;
    }
    for (uint64_t i = feed->oldest; i < feed->newest; i++) {
        entry_deinit(entry_at(feed, i));
    }
    free(feed->ring);
    free(feed);
}

struct feed_counts feed_counts(const struct feed *feed)
{
    struct feed_counts counts = feed->counts;
    counts.unanswered = feed->newest - feed->answered;
    return counts;
}

uint64_t feed_acknowledged(const struct feed_counts *counts)
{
    return counts->fresh + counts->revised + counts->same;
}

/* --- answers -------------------------------------------------------------------------------- */

static void refuse(struct feed *feed, const char *source, uint64_t number, const char *reason)
{
    feed->counts.refused++;
    feed->hooks.refused(feed->hooks.user, source, number, reason);
}

static void drop_oldest(struct feed *feed)
{
    struct entry *entry = entry_at(feed, feed->oldest);
    feed->counts.bytes += entry->taken;
    feed->bytes -= entry->length;
    entry_deinit(entry);
    feed->oldest++;
}

static int count_result(struct feed *feed, const struct wire_answer *answer,
                        struct failure *failure)
{
    const char *was = json_string_value(json_object_get(answer->result, "was"));
    if (was && strcmp(was, "new") == 0) {
        feed->counts.fresh++;
    } else if (was && strcmp(was, "revised") == 0) {
        feed->counts.revised++;
    } else if (was && strcmp(was, "same") == 0) {
        feed->counts.same++;
    } else {
        return failure_set(failure, FAILURE_PROTOCOL,
                           "the daemon took a line without telling whether it is new");
    }
    feed->hooks.acknowledged(feed->hooks.user, answer);
    return 0;
}

/* Tells what became of a line all of whose requests are answered, unless that was told before. */
static int tell(struct feed *feed, struct entry *entry, struct failure *failure)
{
    if (entry->counted) {
        return 0;
    }
    entry->counted = true;
    if (!entry->refused) {
        return count_result(feed, &entry->filed, failure);
    }
    refuse(feed, entry->source, entry->number, entry->refused);
    return 0;
}

/* Keeps why a request was refused, if it is the line's first. */
static int keep_reason(struct entry *entry, size_t at, const struct wire_answer *answer,
                       struct failure *failure)
{
    char reason[REASON_BYTES];
    wire_reason(answer, reason, sizeof reason);
    if (!entry->refused && at == 0) {
        entry->refused = strdup(reason);
    } else if (!entry->refused && asprintf(&entry->refused, "then[%zu] (%s): %s", at - 1,
                                           entry->line.requests[at].method, reason) < 0) {
        entry->refused = NULL;
    }
    return entry->refused ? 0 : failure_memory(failure);
}

/* True for what says nothing about the line: going on with the next would not help. */
static bool stops_all(const struct wire_answer *answer)
{
    return answer->code == WIRE_FORBIDDEN || answer->code == WIRE_STOPPING ||
           answer->code == WIRE_METHOD || answer->code == WIRE_REQUEST;
}

/* Takes the answer to one request; the line's filing is kept. */
static int settle(struct feed *feed, struct entry *entry, struct wire_answer *answer,
                  struct failure *failure)
{
    size_t at = entry->answered++;
    entry->id++;
    if (answer->code == WIRE_STORE) {
        entry->failed = entry->failed < at ? entry->failed : at;
        if (!feed->failed) {
            feed->failed = true;
            wire_reason(answer, feed->reason, sizeof feed->reason);
        }
        return 0;
    }
    if (entry->failed != NONE_FAILED) {
        return 0; /* it is asked again: this answer may come of the one that is missing */
    }
    if (answer->code != 0) {
        return keep_reason(entry, at, answer, failure);
    }
    if (at == 0) {
        wire_answer_deinit(&entry->filed);
        entry->filed = *answer;
        *answer = (struct wire_answer){0};
    }
    return 0;
}

static int take_answer(struct feed *feed, struct wire_answer *answer, struct failure *failure)
{
    struct entry *entry = entry_at(feed, feed->answered);
    if (feed->answered == feed->newest || (answer->id != 0 && answer->id != entry->id)) {
        return failure_set(failure, FAILURE_PROTOCOL,
                           "the daemon's answers do not follow the order of the lines");
    }
    if (stops_all(answer)) {
        return wire_fail(answer, failure);
    }
    int code = settle(feed, entry, answer, failure);
    if (code || entry->answered < entry->line.count) {
        return code;
    }
    feed->answered++;
    code = entry->failed == NONE_FAILED ? tell(feed, entry, failure) : 0;
    if (!feed->failed) {
        feed->tries = 0;
        drop_oldest(feed);
    }
    return code;
}

static int take_answers(struct feed *feed, struct failure *failure)
{
    for (;;) {
        struct wire_answer answer = {0};
        int code = wire_next(feed->wire, &answer, failure);
        if (code <= 0) {
            return code;
        }
        code = take_answer(feed, &answer, failure);
        wire_answer_deinit(&answer);
        if (code) {
            return code;
        }
    }
}

/* --- sending -------------------------------------------------------------------------------- */

/* Sends the line's requests from one of them on. */
static int send_entry(struct feed *feed, struct entry *entry, size_t from, struct failure *failure)
{
    int code = 0;
    entry->answered = from;
    entry->failed = NONE_FAILED;
    for (size_t i = from; i < entry->line.count && !code; i++) {
        const struct filed_request *request = &entry->line.requests[i];
        int64_t id = 0;
        code =
            wire_queue(feed->wire, request->method, request->params, request->length, &id, failure);
        entry->id = i == from ? id : entry->id; /* the wire counts them up */
    }
    return code;
}

/* The oldest line failed, and is gone on with where it did; the others are made anew. */
static int send_again(struct feed *feed, struct entry *entry, bool is_oldest,
                      struct failure *failure)
{
    if (is_oldest) {
        return send_entry(feed, entry, entry->failed, failure);
    }
    forget_answers(entry);
    return send_entry(feed, entry, 0, failure);
}

/* One turn of the wire and the answers it brought; closed while lines are open is a failure. */
static int turn(struct feed *feed, struct pollfd *input, int timeout_ms, struct failure *failure)
{
    int code = wire_turn(feed->wire, input, timeout_ms, failure);
    if (!code) {
        code = take_answers(feed, failure);
    }
    if (!code && wire_closed(feed->wire) && feed->oldest < feed->newest) {
        code = wire_fail_closed(feed->wire, failure);
    }
    struct feed_counts counts = feed_counts(feed);
    feed->hooks.moved(feed->hooks.user, &counts);
    return code;
}

static int64_t now_ms(void)
{
    struct timespec now = {0};
    (void)clock_gettime(CLOCK_MONOTONIC, &now); /* always there on Linux */
    return (int64_t)now.tv_sec * 1000 + now.tv_nsec / 1000000;
}

static int wait_a_while(struct feed *feed, unsigned wait_ms, struct failure *failure)
{
    int64_t end = now_ms() + wait_ms;
    int code = 0;
    for (int64_t left = wait_ms; left > 0 && !code; left = end - now_ms()) {
        int turn_ms = left < feed->settings.turn_ms ? (int)left : feed->settings.turn_ms;
        code = turn(feed, NULL, turn_ms, failure);
    }
    return code;
}

/* Waits and sends again what is in the ring, once all of it is answered. */
static int try_again(struct feed *feed, struct failure *failure)
{
    if (!feed->failed || feed->answered < feed->newest) {
        return 0;
    }
    feed->tries++;
    if (feed->tries >= feed->settings.tries) {
        return failure_set(failure, FAILURE_AGAIN,
                           "the store does not take items now, after %u tries: %s", feed->tries,
                           feed->reason);
    }
    unsigned wait_ms = feed->settings.first_wait_ms;
    for (unsigned i = 1; i < feed->tries && wait_ms < WAIT_MOST_MS; i++) {
        wait_ms *= 2;
    }
    wait_ms = wait_ms < WAIT_MOST_MS ? wait_ms : WAIT_MOST_MS;
    feed->hooks.waiting(feed->hooks.user, feed->reason, wait_ms);
    int code = wait_a_while(feed, wait_ms, failure);
    for (uint64_t i = feed->oldest; i < feed->newest && !code; i++) {
        code = send_again(feed, entry_at(feed, i), i == feed->oldest, failure);
    }
    if (!code) {
        feed->failed = false;
        feed->answered = feed->oldest;
    }
    return code;
}

static bool has_room(const struct feed *feed)
{
    uint64_t held = feed->newest - feed->oldest;
    return !feed->failed && held < feed->settings.window_lines &&
           (held == 0 || feed->bytes < feed->settings.window_bytes);
}

static int send_line(struct feed *feed, const char *source, uint64_t number, const char *line,
                     size_t length, size_t taken, struct failure *failure)
{
    char reason[FILED_LINE_REASON_BYTES];
    struct filed_line requests = {0};
    if (length == 0) {
        feed->counts.bytes += taken;
        return 0;
    }
    switch (filed_line_read(line, length, &requests, reason)) {
    case FILED_LINE_NO_MEMORY:
        return failure_memory(failure);
    case FILED_LINE_BAD:
        feed->counts.bytes += taken;
        refuse(feed, source, number, reason);
        return 0;
    case FILED_LINE_GOOD:
        break;
    }
    struct entry *entry = entry_at(feed, feed->newest);
    *entry = (struct entry){
        .line = requests, .length = length, .source = source, .number = number, .taken = taken};
    feed->newest++;
    feed->bytes += length;
    return send_entry(feed, entry, 0, failure);
}

/* --- reading -------------------------------------------------------------------------------- */

struct input {
    int fd;
    const char *source;
    struct lines lines;
    uint64_t number; /* of the last line taken */
    bool ended;
};

/* Sends the lines that have been read, while there is room. */
static int send_lines(struct feed *feed, struct input *input, bool *ret_more,
                      struct failure *failure)
{
    static const char MARK[] = "\xEF\xBB\xBF"; /* U+FEFF, which some editors put first */
    while (has_room(feed)) {
        char *line = NULL;
        size_t length = 0;
        size_t taken = 0;
        enum lines_found found = lines_next(&input->lines, &line, &length, &taken);
        if (found == LINES_NONE && input->ended) {
            found = lines_last(&input->lines, &line, &length, &taken);
        }
        if (found == LINES_NONE) {
            *ret_more = !input->ended;
            return 0;
        }
        input->number++;
        int code = 0;
        if (found == LINES_LONG) {
            feed->counts.bytes += taken;
            refuse(feed, input->source, input->number, "the line is longer than the daemon takes");
        } else {
            size_t mark = input->number == 1 && strncmp(line, MARK, 3) == 0 ? 3 : 0;
            code = send_line(feed, input->source, input->number, line + mark, length - mark, taken,
                             failure);
        }
        if (code) {
            return code;
        }
    }
    return 0;
}

static int read_piece(struct input *input, struct failure *failure)
{
    char *room = lines_room(&input->lines, READ_BYTES);
    if (!room) {
        return failure_memory(failure);
    }
    ssize_t count = read(input->fd, room, READ_BYTES);
    if (count > 0) {
        lines_added(&input->lines, (size_t)count);
    } else if (count == 0) {
        input->ended = true;
    } else if (errno != EINTR && errno != EAGAIN) {
        return failure_set(failure, FAILURE_IO, "%s cannot be read: %s", input->source,
                           strerror(errno));
    }
    return 0;
}

int feed_file(struct feed *feed, int fd, const char *source, struct failure *failure)
{
    struct input input = {.fd = fd, .source = source};
    lines_init(&input.lines, feed->settings.line_limit_bytes);
    bool more = true;
    int code = send_lines(feed, &input, &more, failure);
    while (!code && more) {
        bool room = has_room(feed);
        struct pollfd ready = {.fd = room ? fd : -1, .events = POLLIN};
        code = turn(feed, &ready, feed->settings.turn_ms, failure);
        if (!code && room && ready.revents && !input.ended) {
            code = read_piece(&input, failure);
        }
        if (!code) {
            code = try_again(feed, failure);
        }
        if (!code) {
            code = send_lines(feed, &input, &more, failure);
        }
    }
    lines_deinit(&input.lines);
    return code;
}

int feed_finish(struct feed *feed, struct failure *failure)
{
    int code = 0;
    while (!code && feed->oldest < feed->newest) {
        code = turn(feed, NULL, feed->settings.turn_ms, failure);
        if (!code) {
            code = try_again(feed, failure);
        }
    }
    return code;
}
