/*
 * fault: what a request is refused with: a code of the wire contract, one sentence a person can act
 * on, and the member of params that is to blame.
 *
 * A fault is filled once, where it is found; the first one wins. It holds no pointers, so it may be
 * copied between threads.
 */
#ifndef UNDERTAG_FAULT_H
#define UNDERTAG_FAULT_H

#include <stdbool.h>

/* X(name, code): JSON-RPC 2.0's own codes, then those of the wire contract. */
#define FAULT_CODES(X)                                                                             \
    X(FAULT_PARSE, -32700)                                                                         \
    X(FAULT_REQUEST, -32600)                                                                       \
    X(FAULT_METHOD, -32601)                                                                        \
    X(FAULT_PARAMS, -32602)                                                                        \
    X(FAULT_INTERNAL, -32603)                                                                      \
    X(FAULT_NOT_FOUND, -32001)                                                                     \
    X(FAULT_VOCABULARY, -32002)                                                                    \
    X(FAULT_LIMIT, -32003)                                                                         \
    X(FAULT_FORBIDDEN, -32004)                                                                     \
    X(FAULT_STORE, -32005)                                                                         \
    X(FAULT_STOPPING, -32006)

enum fault_code {
#define FAULT_ENUM(name, code) name = (code),
    FAULT_CODES(FAULT_ENUM)
#undef FAULT_ENUM
};

enum {
    FAULT_FIELD_BYTES = 320,
    FAULT_MESSAGE_BYTES = 512
};

struct fault {
    int code;                      /* 0 while there is none */
    char field[FAULT_FIELD_BYTES]; /* JSON Pointer into params; "" where no member is to blame */
    char message[FAULT_MESSAGE_BYTES]; /* one sentence, UTF-8, never cut inside a character, with
                                        * '?' for control characters */
};

/*
 * Fills the fault unless it already holds one, and returns the code it holds afterwards (negative).
 * `field` is a JSON Pointer (RFC 6901) into params or NULL. The message is formatted as by printf;
 * what is too long is cut at a character's edge.
 */
int fault_set(struct fault *fault, enum fault_code code, const char *field, const char *format, ...)
    __attribute__((format(printf, 4, 5)));

#endif
