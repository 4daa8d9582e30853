/*
 * peer: one connection to the daemon, as a plain blocking client has it.
 *
 * JSON is written with ' for ", which reads better in C and stands in no text of ours. What is
 * returned lives until the peer is closed. Everything fails the test instead of returning an error,
 * and nothing waits longer than PATIENCE_MS.
 */
#ifndef UNDERTAG_TESTS_PEER_H
#define UNDERTAG_TESTS_PEER_H

#include <jansson.h>
#include <stdbool.h>
#include <stddef.h>

struct peer {
    int fd; /* -1: closed */
    char *bytes;
    size_t start; /* of what has been read and not taken */
    size_t end;
    size_t capacity;
    unsigned last_id;
    bool may_be_cut; /* the daemon may be killed in the middle of a line */
    json_t *kept;    /* what was returned */
};

void peer_open(struct peer *peer, const char *socket_path);
void peer_close(struct peer *peer);

/* Somebody else: a user, his own group, and another one (0: none). */
struct person {
    unsigned uid;
    unsigned gid;
    unsigned other_gid;
};

/* Connects as somebody else, which only root can. */
void peer_open_as(struct peer *peer, const char *socket_path, struct person person);

/* The peer has nothing more to say, but listens on. */
void peer_end_saying(struct peer *peer);

/* --- bytes and lines --- */

void peer_send(struct peer *peer, const char *bytes, size_t size);

/* Sends one line as it stands, with its end. */
void peer_say(struct peer *peer, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* Sends as much as is taken without waiting; returns how much. */
size_t peer_offer(struct peer *peer, const char *bytes, size_t size);

/* The next line without its end, valid until the next call; NULL once the daemon has closed. */
const char *peer_line(struct peer *peer);

/* The next line, parsed. */
json_t *peer_answer(struct peer *peer);

/* Whether there is something to read. */
bool peer_has_something(const struct peer *peer);

/* --- requests --- */

/* Sends a request without reading its answer; returns its id. */
unsigned peer_request(struct peer *peer, const char *method, const char *params, ...)
    __attribute__((format(printf, 3, 4)));

/* The answer to a request, which must be the next one: its result, or its error. */
json_t *peer_result(struct peer *peer, unsigned id);
json_t *peer_error(struct peer *peer, unsigned id);

/* Request and answer in one. */
json_t *ask(struct peer *peer, const char *method, const char *params, ...)
    __attribute__((format(printf, 3, 4)));
json_t *ask_refused(struct peer *peer, const char *method, const char *params, ...)
    __attribute__((format(printf, 3, 4)));

/* --- what many tests ask --- */

/* The number of the last change, and how far the model has come. */
json_int_t ask_seq(struct peer *peer);
json_int_t ask_learned(struct peer *peer);

/* Asks daemon.state until a member of it has this value. */
void wait_until_state(struct peer *peer, const char *member, json_int_t value);

/* Asks until all that is acknowledged is learned. */
void wait_until_learned(struct peer *peer);

/* Bytes of the stored model's file. */
json_int_t ask_model_bytes(struct peer *peer);

/* Asks until it has more than so many: the model is stored while learning goes on. */
void wait_until_model_takes(struct peer *peer, json_int_t bytes);

/* --- looking into JSON --- */

json_int_t whole(const json_t *object, const char *member);
double number(const json_t *object, const char *member);
const char *string(const json_t *object, const char *member);

/* A copy of a text, kept like the rest. */
const char *keep_text(struct peer *peer, const char *text);

/* The text of JSON in its shortest form, kept like the rest. */
const char *text_of(struct peer *peer, const json_t *json);

/* Equal as JSON to what `expected` (with ' for ") says. */
void assert_json(const json_t *json, const char *expected);

/* Each member of `expected` is there and equal: what has been added since does not matter. */
void assert_members(const json_t *object, const char *expected);

/* An error of this code, to blame on this member ("" for none), with a sentence. */
void assert_error(const json_t *error, int code, const char *field);

#endif
