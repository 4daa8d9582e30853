/*
 * store_error: how storage says what went wrong: a code to act on and a sentence for people.
 */
#ifndef UNDERTAG_STORE_ERROR_H
#define UNDERTAG_STORE_ERROR_H

/* X(name, value, sentence) */
#define STORE_ERRORS(X)                                                                            \
    X(STORE_OK, 0, "no error")                                                                     \
    X(STORE_NO_MEMORY, -1, "out of memory")                                                        \
    X(STORE_FULL, -2, "there is no room: nothing was changed")                                     \
    X(STORE_BROKEN, -3, "a write failed: no more writes until a restart")                          \
    X(STORE_CORRUPT, -4, "what is stored is damaged")                                              \
    X(STORE_NEWER, -5, "written by a newer version")                                               \
    X(STORE_DENIED, -6, "cannot be opened")                                                        \
    X(STORE_NOT_FOUND, -7, "not there")                                                            \
    X(STORE_REFUSED, -8, "refused by the vocabulary")                                              \
    X(STORE_STOPPED, -9, "stopped by the caller")

enum store_code {
#define STORE_ENUM(name, value, sentence) name = (value),
    STORE_ERRORS(STORE_ENUM)
#undef STORE_ENUM
};

enum {
    STORE_ERROR_BYTES = 512
};

struct store_error {
    enum store_code code;
    char text[STORE_ERROR_BYTES];
};

/* The sentence of a code. */
const char *store_code_sentence(enum store_code code);

/* Fills the error, unless it holds one already, and returns its code. */
enum store_code store_fail(struct store_error *error, enum store_code code, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

#endif
