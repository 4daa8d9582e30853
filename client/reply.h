/*
 * reply: what the daemon answered, compared with the shape that a command needs before anything
 * of it is shown, so that an answer with a hole in it ends in a sentence and not in a table of
 * zeros. Members beyond the shape are passed over.
 */
#ifndef UNDERTAG_CLIENT_REPLY_H
#define UNDERTAG_CLIENT_REPLY_H

#include <jansson.h>
#include <stdbool.h>

#include "client/failure.h"

enum reply_kind {
    REPLY_TEXT,
    REPLY_NUMBER,
    REPLY_TRUTH,
    REPLY_OBJECT,
    REPLY_OBJECTS, /* a list of them */
    REPLY_TEXTS,   /* a list of them */
    REPLY_LIST     /* of anything */
};

struct reply_member {
    const char *name; /* NULL ends a shape */
    enum reply_kind kind;
    bool may_be_null;                  /* or absent */
    const struct reply_member *inside; /* the shape of the object or objects; NULL: any */
};

/* FAILURE_PROTOCOL, with the first member that is not as the shape has it; otherwise 0. */
int reply_check(const json_t *result, const struct reply_member *shape, struct failure *failure)
    __attribute__((warn_unused_result));

/* A number of an object; NAN where there is none. */
double reply_number(const json_t *object, const char *name);

/* A share with its interval, as desk.completeness has it; NAN where the answer has null. */
struct reply_estimate {
    double share;
    double low;
    double high;
    double given;
    double missing;
    const char *from; /* borrowed: "curve", "checks" or "both" */
};

struct reply_estimate reply_estimate(const json_t *object);

/* Where an estimate comes from, for people. */
const char *reply_source(const char *from);

/* The shapes of the desk's answers. */
extern const struct reply_member REPLY_RULED[];
extern const struct reply_member REPLY_CHECKED[];
extern const struct reply_member REPLY_SAMPLE[];
extern const struct reply_member REPLY_WORKLIST[];
extern const struct reply_member REPLY_COMPLETENESS[];
extern const struct reply_member REPLY_STANDING[];
extern const struct reply_member REPLY_STATE[];
extern const struct reply_member REPLY_TAGS[];

#endif
