/*
 * engine_fixture: an open home with its two threads, filed to and asked as the methods do it. The
 * promise is "at once" (visible_within 0), so that an answer reflects every change before it.
 * Static functions, since each test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_ENGINE_FIXTURE_H
#define UNDERTAG_TESTS_ENGINE_FIXTURE_H

#include <pthread.h>
#include <sched.h>
#include <unistd.h>

#include "daemon/engine.h"
#include "tests/unit/entries.h"
#include "tests/unit/store_fixture.h"

enum {
    ASKED_GAPS = 64,
    ENGINE_GUARD_S = 240 /* a test that waits for what never comes ends */
};

struct opened {
    char home[FIXTURE_PATH_BYTES];
    struct options options;
    struct engine *engine;
    char error[ENGINE_ERROR_BYTES];
    pthread_mutex_t mutex;
    pthread_cond_t done;
};

/* An answer that stays. */
struct asked {
    struct model_gap gaps[ASKED_GAPS];
    size_t count;
    double expected;
    bool early;
    uint64_t learned;
};

/* --- life --- */

static inline void on_changes_done(void *user)
{
    struct opened *opened = user;
    (void)pthread_mutex_lock(&opened->mutex);
    (void)pthread_cond_signal(&opened->done);
    (void)pthread_mutex_unlock(&opened->mutex);
}

/* Returns the exit code, with the sentence in opened->error. */
static inline int try_open(struct opened *opened)
{
    const struct engine_settings settings = {.home = opened->home,
                                             .options = &opened->options,
                                             .user = opened,
                                             .changes_done = on_changes_done};
    return engine_open(&settings, &opened->engine, opened->error);
}

static inline void open_home(struct opened *opened)
{
    int code = try_open(opened);
    if (code != 0) {
        fail_msg("%d: %s", code, opened->error);
    }
}

static inline void close_home(struct opened *opened)
{
    engine_close(opened->engine);
    opened->engine = NULL;
}

static inline int opened_set_up(void **state)
{
    struct opened *opened = calloc(1, sizeof *opened);
    assert_non_null(opened);
    (void)alarm(ENGINE_GUARD_S);
    home_make(opened->home);
    options_defaults(&opened->options);
    opened->options.rehearsal_share = 0.0; /* what there is time for would make a difference */
    opened->options.visible_within_ms = 0;
    opened->options.map_size_bytes = FIXTURE_MAP_BYTES;
    opened->options.disk_reserve_bytes = 0;
    assert_int_equal(pthread_mutex_init(&opened->mutex, NULL), 0);
    assert_int_equal(pthread_cond_init(&opened->done, NULL), 0);
    open_home(opened);
    *state = opened;
    return 0;
}

static inline int opened_tear_down(void **state)
{
    struct opened *opened = *state;
    close_home(opened);
    home_remove(opened->home);
    (void)pthread_cond_destroy(&opened->done);
    (void)pthread_mutex_destroy(&opened->mutex);
    free(opened);
    return 0;
}

/* --- changes --- */

/* Hands a change over and takes it back when it is done. */
static inline void apply(struct opened *opened, struct change *change)
{
    engine_push(opened->engine, change);
    (void)pthread_mutex_lock(&opened->mutex);
    struct change *done = NULL;
    while (!(done = engine_take_done(opened->engine))) {
        (void)pthread_cond_wait(&opened->done, &opened->mutex);
    }
    (void)pthread_mutex_unlock(&opened->mutex);
    assert_ptr_equal(done, change);
    assert_null(done->next);
}

/* Files with tags in a list that ends at NULL; returns the seq. */
static inline uint64_t file_item(struct opened *opened, const char *id, const char *text,
                                 const char *const *tags)
{
    struct store_text names[FIXTURE_TAGS];
    struct change change = {.kind = CHANGE_FILE,
                            .filing = {.id = text_of(id),
                                       .text = text_of(text),
                                       .tags = names,
                                       .tag_count = texts_of(tags, names),
                                       .open_unknown = true}};
    apply(opened, &change);
    if (change.code != STORE_OK) {
        fail_msg("%d: %s", change.code, change.error.text);
    }
    return change.filed.seq;
}

#define FILE_ITEM(opened, id, text, ...)                                                           \
    file_item(opened, id, text, (const char *const[]){__VA_ARGS__, NULL})

static inline void withdraw_item(struct opened *opened, const char *id)
{
    struct change change = {.kind = CHANGE_WITHDRAW, .filing = {.id = text_of(id)}};
    apply(opened, &change);
    assert_int_equal(change.code, STORE_OK);
}

/* Files the entries of an invented stream, from `first` on. */
static inline void file_stream(struct opened *opened, struct stream *stream, int first, int count)
{
    for (int i = first; i < first + count; i++) {
        struct entry entry;
        uint32_t truth[ENTRY_TAGS];
        char id[32];
        char names[ENTRY_TAGS][16];
        const char *tags[FIXTURE_TAGS + 1] = {NULL};
        (void)stream_next(stream, &entry, truth);
        for (size_t t = 0; t < entry.tag_count; t++) {
            (void)snprintf(names[t], sizeof names[t], "tag %u", entry.tags[t]);
            tags[t] = names[t];
        }
        (void)snprintf(id, sizeof id, "log/%d", i);
        (void)file_item(opened, id, entry.text, tags);
    }
}

/* --- questions --- */

static inline void ask_draft(struct opened *opened, const char *text, struct asked *ret_asked)
{
    struct workspaces *workspaces = engine_workspaces(opened->engine);
    struct workspace *workspace = workspaces_borrow(workspaces);
    const struct features_source source = {.text = text, .text_bytes = strlen(text)};
    struct model_answer answer;
    assert_non_null(workspace);
    assert_int_equal(features_extract(workspace->features, &source, SIZE_MAX), 0);
    const struct model_question question = {.features = features_list(workspace->features),
                                            .feature_count = features_count(workspace->features),
                                            .most = ASKED_GAPS};
    *ret_asked = (struct asked){0};
    assert_int_equal(engine_ask(opened->engine, &question, workspace, &answer, &ret_asked->learned),
                     0);
    for (size_t i = 0; i < answer.gap_count; i++) {
        ret_asked->gaps[i] = answer.gaps[i];
    }
    ret_asked->count = answer.gap_count;
    ret_asked->expected = answer.expected;
    ret_asked->early = answer.early;
    workspaces_return(workspaces, workspace);
}

/* To the last bit. */
static inline void assert_same_asked(const struct asked *first, const struct asked *second)
{
    assert_true(first->count > 0);
    assert_int_equal(second->count, first->count);
    assert_true(second->expected == first->expected);
    assert_int_equal(second->early, first->early);
    for (size_t i = 0; i < first->count; i++) {
        assert_int_equal(second->gaps[i].tag, first->gaps[i].tag);
        assert_true(second->gaps[i].chance == first->gaps[i].chance);
        assert_true(second->gaps[i].score == first->gaps[i].score);
    }
}

/* The backlog of a start is not promised, so whoever wants it learned must look. */
static inline void wait_until_learned(struct opened *opened, uint64_t seq)
{
    while (engine_count(opened->engine).progress.learned < seq) {
        (void)sched_yield();
    }
}

/* The seq of the store's last change. */
static inline uint64_t committed(struct opened *opened)
{
    return engine_count(opened->engine).progress.committed;
}

/* The number of a tag. */
static inline uint32_t tag_number(struct opened *opened, const char *name)
{
    struct store_error error = {0};
    struct store_view *view = NULL;
    struct vocabulary_tag tag = {0};
    assert_int_equal(store_read(engine_store(opened->engine), &view, &error), STORE_OK);
    assert_int_equal(vocabulary_find(view, name, strlen(name), &tag, &error), STORE_OK);
    store_end(view);
    return tag.number;
}

#endif
