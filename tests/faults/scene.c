/*
 * Small counts are taken whole. Where there are thousands (allocations), every STRIDE-th is, from a
 * beginning that UNDERTAG_FAULTS may name (a number), or all of them with UNDERTAG_FAULTS=all.
 */
#include "tests/faults/scene.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <poll.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sysexits.h>

#include "daemon/clock.h"

enum {
    STRIDE = 61,
    SEED = 23,
    N_MOST = 100000,
    WRONG_MOST = 20,  /* then a scene is given up: one fault shows often */
    LOOK_EVERY = 25,  /* rounds with one daemon */
    LOOK_AGAIN_MS = 1 /* between two questions */
};

void scene_wrong(struct scene *scene, const char *format, ...)
{
    char what[512];
    char site[SITE_BYTES] = "nothing";
    va_list list;
    va_start(list, format);
    (void)vsnprintf(what, sizeof what, format, list);
    va_end(list);
    if (atomic_load(&scene->patient.control->is_injected)) {
        site_describe(scene->patient.control, site);
    }
    char *log = patient_log(&scene->patient);
    print_error("WRONG: %s, %s, n = %u, failed %s: %s\n%s", scene->name,
                fail_kind_title(scene->kind), scene->n, site, what, log);
    free(log);
    scene->wrong++;
}

void scene_begin(struct scene *scene, struct sites *sites, const char *name)
{
    *scene = (struct scene){.name = name, .sites = sites};
    patient_make(&scene->patient);
    scene->patient.daemon.settings[0] = "flush_every_ms=3600000";
    sites_begin_scene(sites, name);
}

void scene_end(struct scene *scene)
{
    unsigned wrong = scene->wrong;
    if (wrong == 0 && scene->is_up) {
        scene_stop(scene);
        scene_restart_clean(scene, 0);
    }
    wrong = scene->wrong;
    promises_deinit(&scene->promises);
    patient_remove(&scene->patient);
    if (wrong > 0) {
        fail_msg("%s: %u times something did not hold", scene->name, wrong);
    }
}

/* Another one takes other calls; the same takes the same, as far as threads let it. */
static unsigned seed(void)
{
    const char *text = getenv("UNDERTAG_FAULTS");
    return text && *text ? (unsigned)strtoul(text, NULL, 10) : SEED;
}

static void play_kind(struct scene *scene, scene_round play)
{
    const char *text = getenv("UNDERTAG_FAULTS");
    bool all = (text && strcmp(text, "all") == 0) || scene->kind != FAIL_MALLOC;
    unsigned sparse = scene->sparse > 0 && scene->kind == FAIL_MALLOC ? scene->sparse : 1;
    unsigned stride = (all ? 1 : STRIDE) * sparse;
    unsigned first = stride > 1 ? seed() % stride : 0;
    if (stride > 1) {
        (void)printf("%s, malloc: each %uth from %u on\n", scene->name, stride, first);
    }
    for (scene->n = first; scene->n < N_MOST && scene->wrong < WRONG_MOST; scene->n += stride) {
        if (!play(scene)) {
            return;
        }
    }
    if (scene->wrong == 0) {
        scene_wrong(scene, "there is no end of calls to fail");
    }
}

/* What a daemon leaves for which nothing fails: what libraries never give back. */
static long blocks_of_undisturbed(struct scene *scene, scene_round play)
{
    scene->kind = FAIL_MALLOC;
    scene->n = N_MOST;
    if (scene->is_up) {
        scene_stop(scene);
        scene_restart_clean(scene, 0);
    }
    if (play(scene)) {
        scene_wrong(scene, "there is no end of calls to fail");
    }
    if (scene->is_up) {
        scene_stop(scene);
        scene_restart_clean(scene, 0);
    }
    return scene->blocks_left;
}

static void look_for_leaks(struct scene *scene, scene_round play)
{
    long most = scene->blocks_most;
    long undisturbed = blocks_of_undisturbed(scene, play);
    (void)printf("%s: %ld blocks of memory left at most, %ld where nothing fails\n", scene->name,
                 most, undisturbed);
    if (undisturbed < 0 || most > undisturbed) {
        scene_wrong(scene, "%ld blocks of memory are left behind %s, n = %u; %ld otherwise", most,
                    fail_kind_title(scene->most_kind), scene->most_n, undisturbed);
    }
}

void scene_play(struct scene *scene, scene_round play)
{
    for (int kind = 0; kind < FAIL_KINDS; kind++) {
        scene->kind = (enum fail_kind)kind;
        play_kind(scene, play);
    }
    if (scene->wrong == 0) {
        look_for_leaks(scene, play);
    }
}

/* --- the daemon ------------------------------------------------------------------------------ */

void scene_arm(struct scene *scene)
{
    patient_arm(&scene->patient, scene->kind, scene->n);
}

bool scene_disarm(struct scene *scene)
{
    bool is_hit = patient_disarm(&scene->patient);
    if (is_hit) {
        sites_note(scene->sites, scene->kind, scene->patient.control);
    }
    return is_hit;
}

/*
 * libuv has no way to say that it has no memory to watch another descriptor or for its pool, nor
 * the C library for what a thread has of its own: both call abort. libcrypto, which libzip asks for
 * a random name, uses a lock that it had no memory to make when it was first called. Nothing that
 * was acknowledged may be lost by it, and that is looked at all the same.
 */
static bool is_end_by_others(const struct scene *scene)
{
    const struct fail_control *control = scene->patient.control;
    return scene->kind == FAIL_MALLOC && atomic_load(&control->is_injected) &&
           (strncmp(control->module, "libuv", 5) == 0 ||
            strncmp(control->module, "ld-linux", 8) == 0 ||
            strncmp(control->module, "libcrypto", 9) == 0);
}

static void check_end(struct scene *scene, int exit_code, bool may_be_0)
{
    bool is_by_signal = exit_code == 128 + SIGABRT || exit_code == 128 + SIGSEGV;
    if (is_by_signal && is_end_by_others(scene)) {
        return;
    }
    bool is_sysexit = exit_code >= EX__BASE && exit_code <= EX__MAX;
    if (exit_code == PATIENT_HANGS) {
        scene_wrong(scene, "the daemon does not end");
    } else if (!is_sysexit && !(may_be_0 && exit_code == 0)) {
        scene_wrong(scene, "the daemon ended with %d", exit_code);
    } else if (is_sysexit && !patient_said_something(&scene->patient)) {
        scene_wrong(scene, "the daemon ended with %d and not a word", exit_code);
    }
}

static void note_blocks(struct scene *scene)
{
    scene->blocks_left = atomic_load(&scene->patient.control->blocks_left);
    if (scene->blocks_left > scene->blocks_most) {
        scene->blocks_most = scene->blocks_left;
        scene->most_kind = scene->kind;
        scene->most_n = scene->n;
    }
}

void scene_stop(struct scene *scene)
{
    if (scene->patient.daemon.child.pid > 0) {
        bool had_ended = patient_has_ended(&scene->patient);
        check_end(scene, patient_end(&scene->patient), !had_ended);
        note_blocks(scene);
    }
    scene->is_up = false;
    scene->needs_restart = false;
}

void scene_be_up(struct scene *scene)
{
    if (scene->is_up && (scene->needs_restart || ++scene->since_look >= LOOK_EVERY)) {
        scene_stop(scene);
        scene_restart_clean(scene, 0);
        scene->since_look = 0;
    }
    if (!scene->is_up) {
        if (!patient_start(&scene->patient, true)) {
            fail_msg("the daemon does not start with the shim, though nothing fails");
        }
        scene->is_up = true;
    }
}

static json_t *state_of(struct scene *scene, bool *ret_hangs)
{
    return patient_ask(&scene->patient, ret_hangs, "daemon.state", "{}");
}

void scene_wait_until_learned(struct scene *scene)
{
    uint64_t last_ms = clock_steady_ms() + DEADLINE_MS;
    while (clock_steady_ms() < last_ms && !patient_has_ended(&scene->patient)) {
        bool hangs = false;
        json_t *answer = state_of(scene, &hangs);
        const json_t *state = json_object_get(answer, "result");
        bool is_done = state && json_integer_value(json_object_get(state, "backlog")) == 0;
        scene->needs_restart =
            scene->needs_restart || json_array_size(json_object_get(state, "faults")) > 0;
        json_decref(answer);
        if (is_done || scene->needs_restart) {
            return;
        }
        (void)poll(NULL, 0, LOOK_AGAIN_MS);
    }
    if (!patient_has_ended(&scene->patient)) {
        scene_wrong(scene, "nothing is learned any more, and nobody says so");
        scene->needs_restart = true;
    }
}

void scene_look(struct scene *scene)
{
    if (patient_has_ended(&scene->patient)) {
        scene_stop(scene);
        scene_restart_clean(scene, 0);
        return;
    }
    bool hangs = false;
    json_t *answer = state_of(scene, &hangs);
    const json_t *state = json_object_get(answer, "result");
    if (!state && !is_end_by_others(scene)) { /* then it is about to end */
        scene_wrong(scene, "the daemon is up and does not answer");
    }
    bool is_well = state && json_array_size(json_object_get(state, "faults")) == 0;
    scene->needs_restart = scene->needs_restart || !is_well;
    json_decref(answer);
}

/* --- asking ---------------------------------------------------------------------------------- */

static enum outcome note_outcome(struct scene *scene, json_t *answer, bool hangs)
{
    char *text = answer ? json_dumps(answer, JSON_COMPACT) : NULL;
    enum outcome outcome = outcome_take(answer, hangs);
    if (outcome == NOT_IN_TIME) {
        scene_wrong(scene, "a request was not answered in time");
        scene->needs_restart = true;
    } else if (outcome == WRONG_BLAME) {
        scene_wrong(scene, "an answer blames the request: %s", text);
    }
    free(text);
    return outcome;
}

__attribute__((format(printf, 3, 0))) static enum outcome
ask(struct scene *scene, const char *method, const char *params, va_list list)
{
    char text[2048];
    bool hangs = false;
    (void)vsnprintf(text, sizeof text, params, list);
    json_t *answer = patient_ask(&scene->patient, &hangs, method, "%s", text);
    return note_outcome(scene, answer, hangs);
}

enum outcome scene_ask(struct scene *scene, const char *method, const char *params, ...)
{
    va_list list;
    va_start(list, params);
    enum outcome outcome = ask(scene, method, params, list);
    va_end(list);
    return outcome;
}

void scene_change(struct scene *scene, struct promise change, const char *method,
                  const char *params, ...)
{
    va_list list;
    va_start(list, params);
    enum outcome outcome = ask(scene, method, params, list);
    va_end(list);
    promises_note(&scene->promises, change.id, change.before, change.after, outcome);
}

static void compare_all(struct scene *scene, size_t from)
{
    for (size_t i = from; i < scene->promises.count; i++) {
        struct promise *entry = &scene->promises.entries[i];
        char found[PROMISE_TAGS_BYTES];
        bool hangs = false;
        json_t *answer =
            patient_ask(&scene->patient, &hangs, "item.show", "{'id': '%s'}", entry->id);
        const char *wrong = promises_compare(entry, answer, found);
        json_decref(answer);
        if (wrong) {
            scene_wrong(scene, "'%s' %s: before '%s', after '%s', found '%s'", entry->id, wrong,
                        entry->before, entry->after, found);
        }
        /* What nobody was told is what it is from here on. */
        entry->outcome = strcmp(found, entry->after) == 0 ? ACKNOWLEDGED : REFUSED;
    }
}

void scene_restart_clean(struct scene *scene, size_t from)
{
    if (!patient_start(&scene->patient, false)) {
        scene_wrong(scene, "it does not start again; it ended with %d",
                    patient_end(&scene->patient));
        return;
    }
    compare_all(scene, from);
    scene_wait_until_learned(scene);
    if (scene->needs_restart) {
        scene_wrong(scene, "something is wrong after a clean restart");
    }
    int exit_code = patient_end(&scene->patient);
    if (exit_code != 0) {
        scene_wrong(scene, "the daemon ended with %d, though nothing failed", exit_code);
    }
    if (patient_verify(&scene->patient) != 0) {
        scene_wrong(scene, "the home is not whole");
    }
    scene->is_up = false;
    scene->needs_restart = false;
}
