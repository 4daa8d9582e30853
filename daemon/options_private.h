/*
 * options_private: a row of the table of options, and its value as text and in memory
 * (options_value.c).
 */
#ifndef UNDERTAG_OPTIONS_PRIVATE_H
#define UNDERTAG_OPTIONS_PRIVATE_H

#include "daemon/options.h"

#define KIB 1024.0
#define MIB (1024.0 * KIB)
#define GIB (1024.0 * MIB)

enum option_type {
    TYPE_WHOLE,
    TYPE_BYTES,
    TYPE_NUMBER,
    TYPE_SWITCH,
    TYPE_CHOICE,
    TYPE_LANGUAGE,
    TYPE_PEERS,
    TYPE_PATH
};

struct option {
    const char *name;
    enum option_type type;
    size_t offset;
    double minimum;
    double maximum;
    const char *initial;
    const char *const *choices; /* of TYPE_CHOICE, by value; of TYPE_SWITCH, off then on */
    enum options_group group;
    bool on_reload;
    const char *sentence;
};

/* The words for `loss`, by enum surrogate. */
extern const char *const OPTION_LOSSES[];

/* The bytes of the member that holds the value. */
size_t option_bytes(const struct option *option);

/* Reads a value into its member; false where it is none, which option_refuse makes a sentence of.
 */
bool option_read(const struct option *option, void *member, const char *value)
    __attribute__((warn_unused_result));
void option_refuse(const struct option *option, const char *value, char *error);

/* The value as text, in the form that option_read takes. */
void option_write(const struct option *option, const void *member, char *text, size_t size);

#endif
