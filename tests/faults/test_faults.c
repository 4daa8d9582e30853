/*
 * Any one call of the system fails, in any place: malloc and its family, write and its family, the
 * syncs, open, mmap. scene.h says what must hold then. What was failed is printed, each call site
 * once, and stands in BUILD/faults.txt.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/faults/exports.h"
#include "tests/faults/moments.h"
#include "tests/faults/scene.h"

#define TEXT "fog on the lower light the bell was rung for three hours and the boat came in late"
#define OTHER_TEXT "new oil for the lamp and a wick of the upper light trimmed by the second keeper"

/* --- steps ----------------------------------------------------------------------------------- */

static void name_item(const struct scene *scene, const char *kind, char id[PROMISE_ID_BYTES])
{
    (void)snprintf(id, PROMISE_ID_BYTES, "%s %u", kind, scene->stamp);
}

static struct promise change_of(const struct scene *scene, const char *kind, const char *before,
                                const char *after)
{
    struct promise change = {.before = before, .after = after};
    name_item(scene, kind, change.id);
    return change;
}

static void file_new(struct scene *scene, const char *kind)
{
    struct promise change = change_of(scene, kind, PROMISE_GONE, "bell,fog");
    scene_change(scene, change, "item.file",
                 "{'id': '%s', 'title': 'Entry %u', 'text': '" TEXT "', 'tags': ['fog', 'bell'], "
                 "'fields': {'desk': 'harbour', 'year': 1911}}",
                 change.id, scene->stamp);
}

/* The same entry with another title, so that there are not more of them with each round. */
static void file_again(struct scene *scene)
{
    scene->stamp++;
    assert_int_equal(scene_ask(scene, "item.file",
                               "{'id': 'filed again', 'title': 'Entry %u', 'text': '" TEXT
                               "', 'tags': ['fog', 'bell']}",
                               scene->stamp),
                     ACKNOWLEDGED);
}

static void file_for_sure(struct scene *scene, const char *kind, const char *tag, const char *text)
{
    char id[PROMISE_ID_BYTES];
    name_item(scene, kind, id);
    assert_int_equal(
        scene_ask(scene, "item.file", "{'id': '%s', 'text': '%s', 'tags': ['%s']}", id, text, tag),
        ACKNOWLEDGED);
}

static void file_some(struct scene *scene, unsigned count)
{
    for (unsigned i = 0; i < count; i++) {
        scene->stamp++;
        file_for_sure(scene, "entry", i % 2 == 0 ? "fog" : "oil", i % 2 == 0 ? TEXT : OTHER_TEXT);
    }
}

/* --- start-up of a fresh home ---------------------------------------------------------------- */

static bool start_afresh(struct scene *scene)
{
    size_t before = scene->promises.count;
    patient_new_home(&scene->patient);
    scene->stamp++;
    scene_arm(scene);
    if (patient_start(&scene->patient, true)) {
        file_new(scene, "first");
    }
    scene_stop(scene);
    bool is_hit = scene_disarm(scene);
    scene_restart_clean(scene, before);
    return is_hit;
}

static void a_start_with_a_failing_call_comes_up_or_says_why_not(void **state)
{
    struct scene scene;
    scene_begin(&scene, *state, "start-up");
    scene_play(&scene, start_afresh);
    scene_end(&scene);
}

/* --- filing ---------------------------------------------------------------------------------- */

static bool change_items(struct scene *scene)
{
    scene_be_up(scene);
    scene->stamp++;
    file_for_sure(scene, "ruled", "fog", TEXT);
    file_for_sure(scene, "withdrawn", "oil", OTHER_TEXT);
    scene_wait_until_learned(scene);
    struct promise ruling = change_of(scene, "ruled", "fog", "fog,shoal");
    struct promise withdrawal = change_of(scene, "withdrawn", "oil", PROMISE_GONE);
    scene_arm(scene);
    file_new(scene, "filed");
    scene_change(scene, ruling, "item.rule", "{'id': '%s', 'belongs': ['shoal']}", ruling.id);
    scene_change(scene, withdrawal, "item.withdraw", "{'id': '%s'}", withdrawal.id);
    scene_wait_until_learned(scene);
    bool is_hit = scene_disarm(scene);
    scene_look(scene);
    return is_hit;
}

static void a_filing_with_a_failing_call_is_made_or_refused(void **state)
{
    struct scene scene;
    scene_begin(&scene, *state, "filing");
    scene_be_up(&scene);
    file_for_sure(&scene, "vocabulary", "shoal", OTHER_TEXT);
    scene_play(&scene, change_items);
    scene_end(&scene);
}

/* --- asking ---------------------------------------------------------------------------------- */

static const struct question {
    const char *method;
    const char *params;
    bool is_of_the_moment; /* it answers otherwise each time */
} ASKED[] = {
    {"item.gaps", "{'text': 'fog at the lower light and the bell', 'floor': 0, 'why': true}",
     false},
    {"item.gaps", "{'id': 'entry 3', 'floor': 0, 'why': true}", false},
    {"item.show", "{'id': 'said'}", false},
    {"item.list", "{'since': 3, 'most': 5}", false},
    {"tag.show", "{'tag': 'oil'}", false},
    {"tag.list", "{'order': 'missing'}", false},
    {"desk.sample", "{'seed': 7, 'most': 4}", false},
    {"desk.worklist", "{'floor': 0}", false},
    {"desk.worklist", "{'tag': 'oil', 'floor': 0, 'most': 3}", false},
    {"desk.completeness", "{}", false},
    {"desk.standing", "{}", false},
    {"snapshot.list", "{}", false},
    {"daemon.state", "{}", true},
};

enum {
    QUESTIONS = sizeof ASKED / sizeof ASKED[0]
};

static char *answer_to(struct scene *scene, const struct question *question)
{
    bool hangs = false;
    json_t *answer = patient_ask(&scene->patient, &hangs, question->method, "%s", question->params);
    const json_t *result = json_object_get(answer, "result");
    char *text = result ? json_dumps(result, JSON_SORT_KEYS) : NULL;
    if (!result && outcome_take(json_incref(answer), hangs) > UNANSWERED) {
        char *error = json_dumps(answer, 0);
        scene_wrong(scene, "%s: %s", question->method, error ? error : "hangs");
        free(error);
    }
    json_decref(answer);
    return text;
}

/* An answer is the right one; there may be none where a call was failed. */
static void check_answer(struct scene *scene, size_t asked, bool must_be)
{
    char *const *right = scene->own;
    const struct question *question = &ASKED[asked];
    char *answer = answer_to(scene, question);
    bool is_right = answer && (question->is_of_the_moment || strcmp(answer, right[asked]) == 0);
    if (answer ? !is_right : must_be) {
        scene_wrong(scene, "%s: %s, and not %s", question->method, answer ? answer : "no answer",
                    right[asked]);
    }
    free(answer);
}

static bool ask_all(struct scene *scene)
{
    scene_be_up(scene);
    scene_arm(scene);
    for (size_t i = 0; i < QUESTIONS; i++) {
        check_answer(scene, i, false);
    }
    bool is_hit = scene_disarm(scene);
    scene_look(scene);
    scene_be_up(scene);
    for (size_t i = 0; i < QUESTIONS; i++) {
        check_answer(scene, i, true);
    }
    return is_hit;
}

/* One of which there is something to tell of every kind. */
static void say_of_an_item(struct scene *scene)
{
    static const char *const SAID[][2] = {
        {"item.file",
         "{'id': 'said', 'title': 'Tenth watch', 'text': 'fog and oil', 'tags': ['fog'], "
         "'tagger': 'first keeper', 'declined': ['bell'], "
         "'fields': {'desk': 'harbour', 'watches': ['first', 'last']}}"},
        {"item.file", "{'id': 'said', 'tags': ['oil'], 'tagger': 'second keeper', "
                      "'independent': true}"},
        {"item.rule", "{'id': 'said', 'belongs': ['oil'], 'editor': 'second keeper'}"},
        {"item.check", "{'id': 'said', 'tags': ['oil'], 'drawn': 'random'}"},
    };
    file_for_sure(scene, "heard", "bell", TEXT);
    for (size_t i = 0; i < sizeof SAID / sizeof SAID[0]; i++) {
        assert_int_equal(scene_ask(scene, SAID[i][0], "%s", SAID[i][1]), ACKNOWLEDGED);
    }
}

static void an_answer_with_a_failing_call_is_right_or_refused(void **state)
{
    struct scene scene;
    char *right[QUESTIONS];
    scene_begin(&scene, *state, "asking");
    scene_be_up(&scene);
    file_some(&scene, 12);
    say_of_an_item(&scene);
    scene_wait_until_learned(&scene);
    for (size_t i = 0; i < QUESTIONS; i++) {
        right[i] = answer_to(&scene, &ASKED[i]);
        assert_non_null(right[i]);
    }
    scene.own = right;
    scene_play(&scene, ask_all);
    scene_end(&scene);
    for (size_t i = 0; i < QUESTIONS; i++) {
        free(right[i]);
    }
}

/* --- a flush: the model is stored ------------------------------------------------------------ */

/* Stopping stores what was learned, and nothing did before. */
static bool store_the_model(struct scene *scene)
{
    scene_be_up(scene);
    scene->stamp++;
    file_new(scene, "filed");
    scene_wait_until_learned(scene);
    scene_arm(scene);
    scene_stop(scene);
    bool is_hit = scene_disarm(scene);
    scene_restart_clean(scene, scene->promises.count > 5 ? scene->promises.count - 5 : 0);
    return is_hit;
}

static void a_flush_with_a_failing_call_loses_nothing(void **state)
{
    struct scene scene;
    scene_begin(&scene, *state, "flush");
    scene_be_up(&scene);
    file_some(&scene, 12);
    scene_play(&scene, store_the_model);
    scene_end(&scene);
}

/* --- a restart on a home with content -------------------------------------------------------- */

static void leave_a_backlog(struct scene *scene)
{
    if (!patient_start(&scene->patient, false)) {
        fail_msg("the daemon does not start, though nothing fails");
    }
    scene->stamp++;
    file_new(scene, "filed");
    patient_kill(&scene->patient);
}

static bool restart(struct scene *scene)
{
    leave_a_backlog(scene);
    scene_arm(scene);
    if (patient_start(&scene->patient, true)) {
        scene_wait_until_learned(scene);
    }
    scene_stop(scene);
    bool is_hit = scene_disarm(scene);
    scene_restart_clean(scene, scene->promises.count > 5 ? scene->promises.count - 5 : 0);
    return is_hit;
}

static void a_restart_with_a_failing_call_loses_nothing(void **state)
{
    struct scene scene;
    scene_begin(&scene, *state, "restart");
    scene_be_up(&scene);
    file_some(&scene, 12);
    scene_stop(&scene);
    scene_play(&scene, restart);
    scene_end(&scene);
}

/* --- a snapshot ------------------------------------------------------------------------------ */

enum {
    SNAPSHOTS_KEPT = 2
};

/* What is left of one that failed, or of an old one that could not be removed, goes at the next
 * start. */
static void look_for_parts(struct scene *scene, bool is_new_start)
{
    if (!moments_is_writing_snapshot(scene->patient.daemon.home)) {
        return;
    }
    if (is_new_start) {
        scene_wrong(scene, "what was left of a snapshot is still there after a restart");
    }
    scene->needs_restart = true;
}

/* It is whole or not there, and those before are as they were. */
static bool write_a_snapshot(struct scene *scene)
{
    unsigned *whole = scene->own;
    scene_be_up(scene);
    look_for_parts(scene, true);
    file_again(scene);
    scene_wait_until_learned(scene);
    scene_arm(scene);
    enum outcome outcome = scene_ask(scene, "snapshot.write", "{'items': true}");
    bool is_hit = scene_disarm(scene);
    scene_look(scene);
    unsigned found = exports_assert_whole(scene->patient.daemon.home);
    if (outcome == ACKNOWLEDGED && found == 0) {
        scene_wrong(scene, "a snapshot that was acknowledged is not there");
    }
    if (found < *whole && found < SNAPSHOTS_KEPT) {
        scene_wrong(scene, "an older snapshot is gone");
    }
    *whole = found;
    look_for_parts(scene, false);
    return is_hit;
}

static void a_snapshot_with_a_failing_call_is_whole_or_not_there(void **state)
{
    struct scene scene;
    unsigned whole = 0;
    scene_begin(&scene, *state, "snapshot");
    scene.patient.daemon.settings[1] = "snapshot_keep=2";
    scene.sparse = 29; /* the tables of text.json alone take thousands */
    scene_be_up(&scene);
    file_some(&scene, 12);
    scene.own = &whole;
    scene_play(&scene, write_a_snapshot);
    assert_int_equal(whole, SNAPSHOTS_KEPT);
    scene_end(&scene);
}

/* --- the report ------------------------------------------------------------------------------ */

/* Several pages in a row go by one call; by which, LMDB chose when it was built. */
static void lmdb_s_own_writes_were_among_them(void **state)
{
    const struct sites *sites = *state;
    assert_true(sites_of_lmdb(sites, "pwrite") > 0);
    assert_true(sites_of_lmdb(sites, "pwritev") + sites_of_lmdb(sites, "writev") > 0);
    assert_true(sites_of_lmdb(sites, "fdatasync") > 0);
}

static int set_up(void **state)
{
    *state = calloc(1, sizeof(struct sites));
    return *state ? 0 : -1;
}

static int tear_down(void **state)
{
    char path[CHILD_PATH_BYTES];
    child_program("faults.txt", path);
    FILE *file = fopen(path, "we");
    sites_print(*state, stdout);
    if (file) {
        sites_print(*state, file);
        (void)fclose(file); /* it is on the terminal, too */
    }
    sites_deinit(*state);
    free(*state);
    return 0;
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_start_with_a_failing_call_comes_up_or_says_why_not),
        cmocka_unit_test(a_filing_with_a_failing_call_is_made_or_refused),
        cmocka_unit_test(an_answer_with_a_failing_call_is_right_or_refused),
        cmocka_unit_test(a_flush_with_a_failing_call_loses_nothing),
        cmocka_unit_test(a_restart_with_a_failing_call_loses_nothing),
        cmocka_unit_test(a_snapshot_with_a_failing_call_is_whole_or_not_there),
        cmocka_unit_test(lmdb_s_own_writes_were_among_them),
    };
    return !patient_is_possible() ? 0 : cmocka_run_group_tests(tests, set_up, tear_down);
}
