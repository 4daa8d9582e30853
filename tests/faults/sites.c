#include "tests/faults/sites.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <inttypes.h>
#include <stdlib.h>
#include <string.h>

static const char *const TITLES[] = {
#define FAIL_TITLE(name, error, title) title,
    FAIL_KINDS_OF(FAIL_TITLE)
#undef FAIL_TITLE
};

const char *fail_kind_title(enum fail_kind kind)
{
    return TITLES[kind];
}

void site_describe(const struct fail_control *control, char text[SITE_BYTES])
{
    (void)snprintf(text, SITE_BYTES, "%-14s in %s+0x%" PRIx64 "%s%s", control->call,
                   control->module, control->offset, control->symbol[0] ? " " : "",
                   control->symbol);
}

void sites_begin_scene(struct sites *sites, const char *scene)
{
    assert_true(sites->scene_count < SITES_SCENES);
    sites->scenes[sites->scene_count++] = scene;
}

static struct site *find(struct sites *sites, const char *text)
{
    for (size_t i = 0; i < sites->count; i++) {
        if (strcmp(sites->list[i].text, text) == 0) {
            return &sites->list[i];
        }
    }
    return NULL;
}

static struct site *add(struct sites *sites, const char *text, const struct fail_control *control)
{
    if (sites->count == sites->capacity) {
        sites->capacity = 2 * sites->capacity + 64;
        sites->list = realloc(sites->list, sites->capacity * sizeof sites->list[0]);
        assert_non_null(sites->list);
    }
    struct site *site = &sites->list[sites->count++];
    *site = (struct site){.is_of_lmdb = strncmp(control->module, "liblmdb", 7) == 0};
    (void)snprintf(site->text, sizeof site->text, "%s", text);
    (void)snprintf(site->call, sizeof site->call, "%s", control->call);
    (void)printf("failed: %s\n", text);
    return site;
}

void sites_note(struct sites *sites, enum fail_kind kind, const struct fail_control *control)
{
    char text[SITE_BYTES];
    site_describe(control, text);
    struct site *site = find(sites, text);
    site = site ? site : add(sites, text, control);
    site->count++;
    sites->counts[sites->scene_count - 1][kind]++;
}

unsigned long sites_of_lmdb(const struct sites *sites, const char *call)
{
    unsigned long count = 0;
    for (size_t i = 0; i < sites->count; i++) {
        bool is_one = sites->list[i].is_of_lmdb && strcmp(sites->list[i].call, call) == 0;
        count += is_one ? sites->list[i].count : 0;
    }
    return count;
}

void sites_print(const struct sites *sites, FILE *file)
{
    (void)fprintf(file, "%-12s", "failed calls");
    for (int kind = 0; kind < FAIL_KINDS; kind++) {
        (void)fprintf(file, " %16s", TITLES[kind]);
    }
    for (size_t i = 0; i < sites->scene_count; i++) {
        (void)fprintf(file, "\n%-12s", sites->scenes[i]);
        for (int kind = 0; kind < FAIL_KINDS; kind++) {
            (void)fprintf(file, " %16lu", sites->counts[i][kind]);
        }
    }
    (void)fprintf(file, "\n%zu call sites\n", sites->count);
}

void sites_deinit(struct sites *sites)
{
    free(sites->list);
    *sites = (struct sites){0};
}
