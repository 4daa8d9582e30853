/*
 * figures: the names of the progressive figures, in full.
 */
#ifndef UNDERTAG_CLIENT_FIGURES_H
#define UNDERTAG_CLIENT_FIGURES_H

#include <stddef.h>

struct figure {
    const char *name; /* as the daemon has it */
    const char *full; /* for people */
};

/* In the order in which they are shown. */
extern const struct figure FIGURES[];
extern const size_t FIGURES_COUNT;

/* What the figures mean, as paragraphs. */
extern const char FIGURES_MEANING[];

#endif
