/*
 * sites: the report on what was made to fail: how many calls a scene and a kind, and each call site
 * once.
 */
#ifndef UNDERTAG_TESTS_SITES_H
#define UNDERTAG_TESTS_SITES_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>

#include "tests/faults/fail_control.h"

enum {
    SITES_SCENES = 16,
    SITE_BYTES = 320
};

struct site {
    char text[SITE_BYTES];
    char call[32];
    bool is_of_lmdb;
    unsigned long count;
};

struct sites {
    const char *scenes[SITES_SCENES];
    unsigned long counts[SITES_SCENES][FAIL_KINDS];
    size_t scene_count;
    struct site *list;
    size_t count;
    size_t capacity;
};

const char *fail_kind_title(enum fail_kind kind);

/* What the control says was failed, as a text. */
void site_describe(const struct fail_control *control, char text[SITE_BYTES]);

/* Counts it, for the scene begun last; a new site is printed. */
void sites_begin_scene(struct sites *sites, const char *scene);
void sites_note(struct sites *sites, enum fail_kind kind, const struct fail_control *control);

/* How often such a call of LMDB's own was failed. */
unsigned long sites_of_lmdb(const struct sites *sites, const char *call);

void sites_print(const struct sites *sites, FILE *file);
void sites_deinit(struct sites *sites);

#endif
