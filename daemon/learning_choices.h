/*
 * learning_choices: learning options that a rebuild has set to something else than the
 * configuration says. They are in force, over the configuration, for as long as it still says what
 * it said then; an option that has been changed in it since is the configuration's again.
 */
#ifndef UNDERTAG_LEARNING_CHOICES_H
#define UNDERTAG_LEARNING_CHOICES_H

#include <stddef.h>
#include <stdint.h>

#include "daemon/options.h"
#include "storage/codec.h"

enum {
    LEARNING_CHOICES_MOST = 24, /* more than there are options of learning */
    LEARNING_NAME_BYTES = 32,
    LEARNING_VALUE_BYTES = 64
};

struct learning_choice {
    char name[LEARNING_NAME_BYTES];
    char value[LEARNING_VALUE_BYTES];      /* as options_set takes it */
    char configured[LEARNING_VALUE_BYTES]; /* what the configuration said */
};

struct learning_choices {
    uint64_t number; /* of the rebuild, from 1; 0: there was none */
    uint64_t seq;    /* the store's last change as it began */
    size_t count;
    struct learning_choice list[LEARNING_CHOICES_MOST];
};

/* What has to be chosen so that `wanted` is in force where `configured` is configured. */
void learning_choose(const struct options *configured, const struct options *wanted,
                     uint64_t number, uint64_t seq, struct learning_choices *ret_choices);

/*
 * Lays the choices over what is configured. Those that the configuration has overtaken are dropped;
 * returns how many, and the first one's name to *ret_first (LEARNING_NAME_BYTES).
 */
size_t learning_lay_over(struct learning_choices *choices, struct options *options,
                         char *ret_first);

/*
 * What a model is known by: all that learning depends on (options_learning_text), and which rebuild
 * began it. Returns 0, or -1 where `size` is too small.
 */
int learning_text(const struct options *options, uint64_t number, char *text, size_t size)
    __attribute__((warn_unused_result));

/* The rebuild that such a text names; 0: none. */
uint64_t learning_number_of(const char *text);

/* Into a record and back; learning_choices_get returns -1 for what is none. */
void learning_choices_put(const struct learning_choices *choices, struct codec_writer *record);
int learning_choices_get(struct codec_reader *record, struct learning_choices *ret_choices)
    __attribute__((warn_unused_result));

#endif
