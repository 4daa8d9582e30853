/*
 * A stored model in which any one call fails: of memory, of LMDB, of a file, of what begins a lock.
 * It is as of its last commit then, whole, and so is the one that was to take its place.
 */
#include "storage/model_store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/model_store_next.h"
#include "storage/model_view.h"
#include "storage/verify.h"
#include "tests/unit/failing_calls.h"
#include "tests/unit/store_fixture.h"

enum {
    WORDS = 60,
    WRITINGS = 6,     /* behind the first: few enough chunks change in one that it makes news */
    LEARNED_NEXT = 99 /* by the model that takes the place of the first */
};

struct round {
    char home[FIXTURE_PATH_BYTES];
    struct store_settings settings;
    uint64_t learned; /* as of the last commit that was acknowledged; 0: nothing is stored */
    struct store_error error;
};

static void begin_anew(struct round *round)
{
    home_make(round->home);
    round->settings = (struct store_settings){.home = round->home, .map_bytes = FIXTURE_MAP_BYTES};
}

static int set_up(void **state)
{
    static struct round round;
    begin_anew(&round);
    *state = &round;
    return 0;
}

static int tear_down(void **state)
{
    struct round *round = *state;
    home_remove(round->home);
    return 0;
}

/* --- writing ------------------------------------------------------------------------------------
 */

static int put_word(struct model_store_writing *writing, uint32_t number, struct store_error *error)
{
    char term[16];
    const uint32_t chunk[] = {0, number, 1, 9};
    (void)snprintf(term, sizeof term, "lamp%02u", number);
    const struct model_store_word word = {
        .term = term, .term_bytes = strlen(term), .number = number, .count = 1};
    const struct model_store_chunk put = {.word = number,
                                          .bytes = kv_bytes_of(chunk, sizeof chunk)};
    int code = model_store_put_word(writing, &word, error);
    return code == STORE_OK ? model_store_put_chunk(writing, &put, error) : code;
}

/* Each of the others. */
static int put_parts(struct model_store_writing *writing, struct store_error *error)
{
    static const uint32_t tags[] = {0, 1};
    static const float values[] = {0.5F, 0.25F, 0.125F, 1.0F};
    static const double figures[] = {1.5, -2.0};
    const struct model_store_figures list = {.kind = 1, .number = 2, .count = 2, .values = figures};
    const struct model_store_tag tag = {.number = 1, .count = 3};
    const struct model_store_entry entry = {
        .number = 1, .scored = 1, .gaps = {2, tags, values}, .pairs = {2, tags, values}};
    int code = model_store_put_tag(writing, &tag, error);
    code = code == STORE_OK ? model_store_put_figures(writing, &list, error) : code;
    return code == STORE_OK ? model_store_put_entry(writing, &entry, error) : code;
}

static int put_first(struct model_store_writing *writing, struct store_error *error)
{
    int code = put_parts(writing, error);
    for (uint32_t i = 0; i < WORDS && code == STORE_OK; i++) {
        code = put_word(writing, i, error);
    }
    return code;
}

/* A chunk changes; with the last writing a word goes, and an entry. */
static int put_later(struct model_store_writing *writing, uint32_t at, struct store_error *error)
{
    const uint32_t chunk[] = {0, 1000 + at, 1, 9};
    const struct model_store_chunk put = {.word = 2, .bytes = kv_bytes_of(chunk, sizeof chunk)};
    const struct model_store_word gone = {.term = "lamp01", .term_bytes = 6, .number = 1};
    int code = model_store_put_chunk(writing, &put, error);
    code = code == STORE_OK ? model_store_put_count(writing, 2, 1 + at, error) : code;
    if (code == STORE_OK && at == WRITINGS) {
        code = model_store_remove_chunk(writing, 1, 0, error);
        code = code == STORE_OK ? model_store_forget_word(writing, &gone, error) : code;
        code = code == STORE_OK ? model_store_remove_entry(writing, 1, error) : code;
    }
    return code;
}

/* Writing `at`, 0 for the first. */
static int write_one(struct round *round, struct model_store *store, uint32_t at)
{
    struct model_store_writing *writing = NULL;
    uint64_t words = at == WRITINGS ? WORDS - 1 : WORDS;
    const struct model_store_head head = {.settings = "step = 1",
                                          .learned = at + 1,
                                          .words = words,
                                          .next_word = WORDS,
                                          .postings = 2 * words};
    int code = model_store_begin(store, &writing, &round->error);
    if (code != STORE_OK) {
        return code;
    }
    code = at == 0 ? put_first(writing, &round->error) : put_later(writing, at, &round->error);
    code = code == STORE_OK ? model_store_put_head(writing, &head, &round->error) : code;
    if (code != STORE_OK) {
        model_store_abort(writing);
        return code;
    }
    code = model_store_commit(writing, &round->error);
    round->learned = code == STORE_OK ? head.learned : round->learned;
    return code;
}

/* --- reading ------------------------------------------------------------------------------------
 */

static int see_tag(void *user, const struct model_store_tag *tag)
{
    *(unsigned *)user += tag->count > 0;
    return 0;
}

static int see_figures(void *user, const struct model_store_figures *figures)
{
    *(unsigned *)user += figures->count > 0;
    return 0;
}

static int see_word(void *user, const struct model_store_word *word)
{
    *(unsigned *)user += word->term_bytes > 0;
    return 0;
}

static int see_chunk(void *user, const struct model_store_chunk *chunk)
{
    *(unsigned *)user += chunk->bytes.size > 0;
    return 0;
}

static int read_parts(struct round *round, struct model_view *view)
{
    struct kv_bytes bytes;
    struct model_store_word word;
    struct model_store_entry entry;
    int code = model_view_word(view, "lamp02", 6, &word, &round->error);
    code = code == STORE_OK ? model_view_chunk(view, 2, 0, &bytes, &round->error) : code;
    assert_true(code != STORE_OK || (word.count == WRITINGS && bytes.size > 0));
    code = code == STORE_OK ? model_view_entry(view, 1, &entry, &round->error) : code;
    code = code == STORE_OK ? model_view_entry_after(view, 0, &entry, &round->error) : code;
    assert_true(code != STORE_OK || entry.gaps.count == 2);
    return code;
}

/* Before the last writing. */
static int look(struct round *round, struct model_store *store)
{
    unsigned seen = 0;
    struct model_store_head head;
    const struct model_store_sink sink = {.user = &seen, .tag = see_tag, .figures = see_figures};
    struct model_view *view = NULL;
    int code = model_view_open(store, &view, &round->error);
    code = code == STORE_OK ? read_parts(round, view) : code;
    code = code == STORE_OK ? model_view_head(view, &head, &round->error) : code;
    code = code == STORE_OK ? model_view_load(view, &sink, &round->error) : code;
    code = code == STORE_OK ? model_view_each_word(view, see_word, &seen, &round->error) : code;
    code = code == STORE_OK ? model_view_each_chunk(view, see_chunk, &seen, &round->error) : code;
    model_view_close(view);
    assert_true(code != STORE_OK || seen == 1 + 1 + 2 * WORDS);
    return code;
}

static int take_bytes(void *user, const void *data, size_t size)
{
    (void)data;
    *(uint64_t *)user += size;
    return 0;
}

static void no_fault(void *user, const char *sentence)
{
    (void)user;
    fail_msg("%s", sentence);
}

static int copy(struct round *round, struct model_store *store)
{
    uint64_t expected = 0;
    uint64_t taken = 0;
    size_t left = 1;
    int code = model_store_copy_bytes(store, &expected, &round->error);
    code = code == STORE_OK ? model_store_copy(store, take_bytes, &taken, &round->error) : code;
    assert_true(code != STORE_OK || (taken > 0 && taken == expected));
    code = code == STORE_OK ? model_store_check_pages(store, no_fault, NULL, &round->error) : code;
    while (code == STORE_OK && left > 0) {
        code = model_store_scrub(store, 1000, &left, &round->error);
    }
    return code;
}

/* --- another one in its place -------------------------------------------------------------------
 */

static int write_next(struct round *round, struct model_store *next)
{
    struct model_store_writing *writing = NULL;
    const struct model_store_head head = {.settings = "step = 2", .learned = LEARNED_NEXT};
    int code = model_store_begin(next, &writing, &round->error);
    if (code != STORE_OK) {
        return code;
    }
    code = model_store_clear(writing, &round->error);
    code = code == STORE_OK ? model_store_put_head(writing, &head, &round->error) : code;
    if (code != STORE_OK) {
        model_store_abort(writing);
        return code;
    }
    return model_store_commit(writing, &round->error);
}

static int exchange(struct round *round, struct model_store *used)
{
    struct model_store *next = NULL;
    int code = model_store_open_next(&round->settings, &next, &round->error);
    code = code == STORE_OK ? write_next(round, next) : code;
    code = code == STORE_OK ? model_store_exchange(used, next, &round->error) : code;
    round->learned = code == STORE_OK ? LEARNED_NEXT : round->learned;
    model_store_close(next);
    return code == STORE_OK ? model_store_settle(&round->settings, &round->error) : code;
}

/* --- rounds -------------------------------------------------------------------------------------
 */

static int use(void *user)
{
    struct round *round = user;
    struct model_store *store = NULL;
    round->learned = 0;
    round->error = (struct store_error){0};
    int code = model_store_open(&round->settings, &store, &round->error);
    for (uint32_t at = 0; at < WRITINGS && code == STORE_OK; at++) {
        code = write_one(round, store, at);
    }
    code = code == STORE_OK ? look(round, store) : code;
    code = code == STORE_OK ? write_one(round, store, WRITINGS) : code;
    code = code == STORE_OK ? copy(round, store) : code;
    code = code == STORE_OK ? exchange(round, store) : code;
    model_store_close(store);
    return code == STORE_OK ? model_store_remove_next(&round->settings, &round->error) : code;
}

static int verify(void *user)
{
    static const unsigned char uuid[STORE_UUID_BYTES];
    struct round *round = user;
    struct store_settings settings = round->settings;
    const struct verify_origin origin = {.store_uuid = uuid, .last_seq = LEARNED_NEXT, .tags = 2};
    const struct verify_sink sink = {.fault = no_fault};
    struct verify_model_sums sums = {0};
    struct model_store *store = NULL;
    settings.read_only = true;
    round->error = (struct store_error){0};
    int code = model_store_open(&settings, &store, &round->error);
    code = code == STORE_OK ? verify_model(store, &origin, &sink, &sums, &round->error) : code;
    model_store_close(store);
    assert_true(code != STORE_OK || sums.head.learned == round->learned);
    return code;
}

static void check_told(void *user, int result)
{
    const struct round *round = user;
    if (result != STORE_OK && result != STORE_NOT_FOUND) {
        assert_int_equal(result, round->error.code);
        assert_true(round->error.text[0] != '\0');
    }
}

static void check_use(void *user, int result)
{
    struct round *round = user;
    check_told(round, result);
    if (round->learned > 0) {
        assert_int_equal(verify(round), STORE_OK);
    }
    home_remove(round->home);
    begin_anew(round);
}

static void without_memory_a_writing_is_whole_or_not_there(void **state)
{
    assert_true(failing_each(FAILING_MEMORY, use, check_use, *state) > 40);
}

static void where_lmdb_fails_a_writing_is_whole_or_not_there(void **state)
{
    assert_true(failing_each(FAILING_LMDB, use, check_use, *state) > 300);
}

static void where_a_file_fails_a_writing_is_whole_or_not_there(void **state)
{
    assert_true(failing_each(FAILING_FILES, use, check_use, *state) > 20);
}

static void where_no_lock_can_be_made_a_writing_is_whole_or_not_there(void **state)
{
    assert_true(failing_each(FAILING_NEW, use, check_use, *state) > 5);
}

static void check_verify(void *user, int result)
{
    check_told(user, result);
    assert_int_not_equal(result, STORE_OK);
}

/* A model that could not be looked through is not said to be damaged. */
static void verifying_finds_no_fault_where_a_call_fails(void **state)
{
    struct round *round = *state;
    struct model_store *store = NULL;
    assert_int_equal(model_store_open(&round->settings, &store, &round->error), STORE_OK);
    for (uint32_t at = 0; at <= WRITINGS; at++) {
        assert_int_equal(write_one(round, store, at), STORE_OK);
    }
    model_store_close(store);
    assert_true(failing_each(FAILING_MEMORY, verify, check_verify, round) > 5);
    assert_true(failing_each(FAILING_LMDB, verify, check_verify, round) > 30);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(without_memory_a_writing_is_whole_or_not_there),
        TEST(where_lmdb_fails_a_writing_is_whole_or_not_there),
        TEST(where_a_file_fails_a_writing_is_whole_or_not_there),
        TEST(where_no_lock_can_be_made_a_writing_is_whole_or_not_there),
        TEST(verifying_finds_no_fault_where_a_call_fails),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
