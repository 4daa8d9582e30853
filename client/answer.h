/*
 * answer: what the daemon answered, compared with the shape that a command needs before anything
 * of it is shown, so that an answer with a hole in it ends in a sentence and not in a table of
 * zeros. Members beyond the shape are passed over.
 */
#ifndef UNDERTAG_CLIENT_ANSWER_H
#define UNDERTAG_CLIENT_ANSWER_H

#include <jansson.h>
#include <stdbool.h>

#include "client/failure.h"

enum answer_kind {
    ANSWER_TEXT,
    ANSWER_NUMBER,
    ANSWER_TRUTH,
    ANSWER_OBJECT,
    ANSWER_OBJECTS, /* a list of them */
    ANSWER_TEXTS,   /* a list of them */
    ANSWER_LIST     /* of anything */
};

struct answer_member {
    const char *name; /* NULL ends a shape */
    enum answer_kind kind;
    bool may_be_null;                   /* or absent */
    const struct answer_member *inside; /* the shape of the object or objects; NULL: any */
};

/* FAILURE_PROTOCOL, with the first member that is not as the shape has it; otherwise 0. */
int answer_check(const json_t *result, const struct answer_member *shape, struct failure *failure)
    __attribute__((warn_unused_result));

/* A number of an object; NAN where there is none. */
double answer_number(const json_t *object, const char *name);

/* A share with its interval, as desk.completeness has it; NAN where the answer has null. */
struct answer_estimate {
    double share;
    double low;
    double high;
    double given;
    double missing;
    const char *from; /* borrowed: "curve", "checks" or "both" */
};

struct answer_estimate answer_estimate(const json_t *object);

/* Where an estimate comes from, for people. */
const char *answer_source(const char *from);

/* The shapes of the desk's answers. */
extern const struct answer_member ANSWER_RULED[];
extern const struct answer_member ANSWER_CHECKED[];
extern const struct answer_member ANSWER_SAMPLE[];
extern const struct answer_member ANSWER_WORKLIST[];
extern const struct answer_member ANSWER_COMPLETENESS[];
extern const struct answer_member ANSWER_STANDING[];
extern const struct answer_member ANSWER_STATE[];
extern const struct answer_member ANSWER_TAGS[];

#endif
