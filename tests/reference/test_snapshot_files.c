/*
 * A snapshot's files give the daemon's own scores and chances, by a reader in C that has nothing
 * but them (snapshot_files.h, snapshot_chances.h).
 *
 *   test_snapshot_files                the tests
 *   test_snapshot_files FOLDER         reads lines {"draft", "gaps"} from standard input, the gaps
 *                                      as item.gaps has answered, and prints by how much the files
 *                                      in the folder say otherwise, at most
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/integration/service.h"
#include "tests/reference/snapshot_chances.h"

enum {
    ENTRIES = 400
};

/* How far the files may be from the daemon. */
static const double SCORES_APART = 1e-4;
static const double CHANCES_APART = 1e-3;

/* The largest differences so far, and over how much. */
struct apart {
    size_t drafts;
    size_t gaps;
    double score;
    double chance;
};

/* What is not a number is further apart than anything. */
static double further(double so_far, double one, double other)
{
    double between = fabs(one - other);
    return isnan(between) ? INFINITY : fmax(so_far, between);
}

static void compare(struct snapshot_files *files, const json_t *draft, const json_t *gaps,
                    struct apart *apart)
{
    double *scores = calloc(files->tag_count + 1, sizeof *scores);
    double *chances = calloc(files->tag_count + 1, sizeof *chances);
    assert_true(scores && chances && json_is_array(gaps));
    snapshot_chances(files, draft, scores, chances);
    for (size_t i = 0; i < json_array_size(gaps); i++) {
        const json_t *gap = json_array_get(gaps, i);
        size_t row = snapshot_files_row(files, json_string_value(json_object_get(gap, "tag")));
        assert_true(row < files->tag_count);
        apart->score = further(apart->score, scores[row], snapshot_number(gap, "score"));
        apart->chance = further(apart->chance, chances[row], snapshot_number(gap, "chance"));
    }
    apart->drafts++;
    apart->gaps += json_array_size(gaps);
    free(scores);
    free(chances);
}

/* --- beside a daemon ----------------------------------------------------------------------------
 */

struct scene {
    struct service *service;
    struct snapshot_files files;
};

/* Entries about two of four things each, in marks, capitals and two more scripts; every third one
 * lacks the second tag. */
static void file_entries(struct peer *peer)
{
    static const char *const WORDS[] = {"dense fog, naïve pilot", "LAMP lit at 4:30",
                                        "oil délivered, 3,500 lb.", "燈台の霧 κερί"};
    static const char *const TAGS[] = {"'fog'", "'lamp'", "'oil'", "'candles'"};
    for (unsigned i = 0; i < ENTRIES; i++) {
        unsigned one = i % 4;
        unsigned other = (one + 1 + i / 4 % 3) % 4;
        bool is_forgotten = i % 3 == 0;
        (void)ask(peer, "item.file",
                  "{'id': 'entry %u', 'title': '%s', 'text': '%s on day %u', 'tags': [%s%s%s],"
                  " 'fields': {'year': %u}}",
                  i, WORDS[other], WORDS[one], i, TAGS[one], is_forgotten ? "" : ", ",
                  is_forgotten ? "" : TAGS[other], 1868 + i % 7);
    }
    wait_until_learned(peer);
}

static int set_up(void **state)
{
    static struct scene scene;
    scene.service = service_new("memory_budget=64MiB", "rehearsal_share=0", "word_pairs=on");
    struct peer *peer = &scene.service->peer;
    file_entries(peer);
    const json_t *written = ask(peer, "snapshot.write", "{'name': 'parity'}");
    snapshot_files_open(&scene.files, string(written, "path"));
    *state = &scene;
    return 0;
}

static int tear_down(void **state)
{
    struct scene *scene = *state;
    void *service = scene->service;
    snapshot_files_close(&scene->files);
    return service_tear_down(&service);
}

/* Asks the daemon about a draft, and then the files; all tags are compared. */
static void assert_draft_is_answered_alike(struct scene *scene, const char *draft)
{
    struct peer *peer = &scene->service->peer;
    struct apart apart = {0};
    const json_t *answer = ask(peer, "item.gaps", "{%s, 'most': 50, 'floor': 0}", draft);
    char *text = NULL;
    assert_true(asprintf(&text, "{%s}", draft) > 0);
    for (char *at = text; *at; at++) {
        *at = *at == '\'' ? '"' : *at;
    }
    json_t *asked = json_loads(text, 0, NULL);
    assert_non_null(asked);
    compare(&scene->files, asked, json_object_get(answer, "gaps"), &apart);
    json_decref(asked);
    free(text);
    size_t given = strstr(draft, "'tags'") ? 1 : 0;
    assert_int_equal(apart.gaps, scene->files.tag_count - given);
    if (apart.score > SCORES_APART || apart.chance > CHANCES_APART) {
        fail_msg("%s: scores %g apart, chances %g", draft, apart.score, apart.chance);
    }
}

static void a_draft_is_scored_as_the_daemon_scores_it(void **state)
{
    assert_draft_is_answered_alike(*state, "'title': 'Fog', 'text': 'Dense FOG; the naïve pilot.'");
    assert_draft_is_answered_alike(*state, "'text': '霧の燈台 — ΚΕΡΙ', 'language': 'ja'");
}

static void a_field_counts_for_a_draft(void **state)
{
    assert_draft_is_answered_alike(*state, "'text': 'oil', 'fields': {'year': 1871, 'lit': true}");
}

static void a_draft_with_a_tag_is_told_what_is_missing(void **state)
{
    assert_draft_is_answered_alike(*state, "'title': 'lamp lit', 'text': 'oil', 'tags': ['oil']");
    assert_draft_is_answered_alike(*state, "'text': 'dense fog, naïve pilot', 'tags': ['fog']");
}

static void a_draft_whose_words_say_nothing_goes_by_how_common_tags_are(void **state)
{
    assert_draft_is_answered_alike(*state, "'text': 'zeppelin'");
    assert_draft_is_answered_alike(*state, "'text': ''");
    assert_draft_is_answered_alike(*state, "'text': 'zeppelin', 'tags': ['lamp']");
}

/* --- on what somebody else has asked ------------------------------------------------------------
 */

static int compare_lines(const char *folder)
{
    struct snapshot_files files;
    struct apart apart = {0};
    char *line = NULL;
    size_t room = 0;
    snapshot_files_open(&files, folder);
    while (getline(&line, &room, stdin) > 0) {
        json_t *asked = json_loads(line, 0, NULL);
        assert_non_null(asked);
        compare(&files, json_object_get(asked, "draft"), json_object_get(asked, "gaps"), &apart);
        json_decref(asked);
    }
    free(line);
    snapshot_files_close(&files);
    printf("{\"drafts\": %zu, \"gaps\": %zu, \"score\": %.3g, \"chance\": %.3g}\n", apart.drafts,
           apart.gaps, apart.score, apart.chance);
    return EXIT_SUCCESS;
}

int main(int argc, char **argv)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_draft_is_scored_as_the_daemon_scores_it),
        cmocka_unit_test(a_field_counts_for_a_draft),
        cmocka_unit_test(a_draft_with_a_tag_is_told_what_is_missing),
        cmocka_unit_test(a_draft_whose_words_say_nothing_goes_by_how_common_tags_are),
    };
    return argc > 1
               ? compare_lines(argv[1])
               : cmocka_run_group_tests_name("snapshots by their files", tests, set_up, tear_down);
}
