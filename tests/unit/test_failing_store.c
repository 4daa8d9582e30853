/*
 * A store in which any one call fails: of memory, of LMDB, of a file, of what begins a lock. What
 * was committed is there, all of it, what was not is not, and the store is whole.
 */
#include "storage/store.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sys/stat.h>

#include "storage/items_latest.h"
#include "storage/items_sample.h"
#include "storage/store_notes.h"
#include "storage/verify.h"
#include "tests/unit/failing_calls.h"
#include "tests/unit/store_fixture.h"

#define NOTE "the lamps were counted"

enum {
    CHANGES_BEFORE = 3,
    CHANGES_AFTER = 9,
    TEXT_BYTES = 5000 /* several pieces */
};

/* A home as it is before each round, and what one round has been told. */
struct round {
    struct fixture *fixture; /* its home and its settings; nothing is open */
    char *file;
    size_t file_bytes;
    char text[TEXT_BYTES + 1];
    bool is_committed;
    struct store_error error;
};

static void file_path(const struct round *round, char path[FIXTURE_PATH_BYTES + 32])
{
    (void)snprintf(path, FIXTURE_PATH_BYTES + 32, "%s/store/data.mdb", round->fixture->home);
}

static void keep_file(struct round *round)
{
    char path[FIXTURE_PATH_BYTES + 32];
    struct stat status;
    file_path(round, path);
    assert_int_equal(stat(path, &status), 0);
    round->file_bytes = (size_t)status.st_size;
    round->file = malloc(round->file_bytes);
    FILE *file = fopen(path, "rb");
    assert_true(round->file && file);
    assert_int_equal(fread(round->file, 1, round->file_bytes, file), round->file_bytes);
    assert_int_equal(fclose(file), 0);
}

static void put_file_back(const struct round *round)
{
    char path[FIXTURE_PATH_BYTES + 32];
    file_path(round, path);
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(round->file, 1, round->file_bytes, file), round->file_bytes);
    assert_int_equal(fclose(file), 0);
}

static void give_back_buffers(struct round *round)
{
    codec_deinit(&round->fixture->buffer);
    item_buffer_deinit(&round->fixture->reading);
    round->fixture->buffer = (struct codec_writer){0};
    round->fixture->reading = (struct item_buffer){0};
}

static int set_up(void **state)
{
    static struct round round;
    void *fixture = NULL;
    (void)fixture_setup(&fixture);
    round = (struct round){.fixture = fixture};
    memset(round.text, 'x', TEXT_BYTES);
    (void)fixture_file_as(round.fixture, (struct item_filing){.id = text_of("log/1")},
                          (struct names){.tags = {"fog", "bell"}});
    (void)fixture_file_as(round.fixture,
                          (struct item_filing){.id = text_of("log/2"), .tagger = text_of("first")},
                          (struct names){.tags = {"oil"}, .prompted = {"oil"}});
    (void)fixture_file_as(round.fixture, (struct item_filing){.id = text_of("log/3")},
                          (struct names){.tags = {"oil"}, .declined = {"fog"}});
    fixture_close(round.fixture);
    give_back_buffers(&round);
    keep_file(&round);
    *state = &round;
    return 0;
}

static int tear_down(void **state)
{
    struct round *round = *state;
    void *fixture = round->fixture;
    free(round->file);
    return fixture_teardown(&fixture);
}

/* --- changes, in one view -----------------------------------------------------------------------
 */

static int file_and_revise(struct round *round, struct store_view *view)
{
    const struct store_text tags[] = {text_of("fog"), text_of("gale")}; /* one is new */
    struct item_filed filed;
    struct item_refusal refusal;
    struct item_filing filing = {.id = text_of("log/4"),
                                 .title = text_of("Tenth watch"),
                                 .text = {round->text, TEXT_BYTES},
                                 .tags = tags,
                                 .tag_count = 2,
                                 .open_unknown = true};
    int code = items_file(view, &filing, &round->fixture->buffer, &filed, &refusal, &round->error);
    filing.id = text_of("log/1");
    return code == STORE_OK
               ? items_file(view, &filing, &round->fixture->buffer, &filed, &refusal, &round->error)
               : code;
}

static int say_of_items(struct round *round, struct store_view *view)
{
    const struct store_text fog = text_of("fog");
    const struct store_text oil = text_of("oil");
    const struct item_saying first = said_by("keeper", "log/1");
    const struct item_saying second = said_by("keeper", "log/2");
    struct codec_writer *buffer = &round->fixture->buffer;
    struct item_filed filed;
    struct item_refusal refusal;
    struct item_checked checked = {0};
    int code = items_rule(view, &second, (struct item_names){&fog, 1}, (struct item_names){&oil, 1},
                          buffer, &filed, &refusal, &round->error);
    if (code == STORE_OK) {
        code = items_tag_again(view, &second, (struct item_names){&fog, 1}, text_of(""), true,
                               buffer, &filed, &refusal, &round->error);
    }
    if (code == STORE_OK) {
        code = items_check(view, &first, (struct item_names){&oil, 1}, true, buffer, &filed,
                           &checked, &refusal, &round->error);
        free(checked.missed);
        free(checked.extra);
    }
    return code;
}

static int change(struct round *round, struct store *store)
{
    struct store_view *view = NULL;
    uint64_t seq = 0;
    int code = store_write(store, &view, &round->error);
    if (code != STORE_OK) {
        return code;
    }
    code = file_and_revise(round, view);
    code = code == STORE_OK ? say_of_items(round, view) : code;
    if (code == STORE_OK) {
        code = items_withdraw(view, text_of("log/3"), 0, 0, &round->fixture->buffer, &seq,
                              &round->error);
    }
    if (code == STORE_OK) {
        code = store_put_note(view, "watch", NOTE, strlen(NOTE), &round->error);
    }
    if (code != STORE_OK) {
        store_end(view);
        return code;
    }
    code = store_commit(view, &round->error);
    round->is_committed = code == STORE_OK;
    return code;
}

/* --- reading ------------------------------------------------------------------------------------
 */

static int see_item(void *user, const struct item_record *record)
{
    (void)record;
    ++*(unsigned *)user;
    return 0;
}

static int see_tag(void *user, const struct vocabulary_tag *tag)
{
    assert_true(tag->name[0] != '\0');
    ++*(unsigned *)user;
    return 0;
}

static int read_items(struct round *round, struct store_view *view)
{
    struct item_buffer *buffer = &round->fixture->reading;
    struct item_record record;
    uint64_t seqs[ITEMS_SAMPLE_MOST];
    uint64_t seq = 0;
    uint64_t next = 0;
    size_t drawn = 0;
    unsigned seen = 0;
    bool was_latest = false;
    int code = items_find(view, text_of("log/4"), &seq, &round->error);
    code = code == STORE_OK ? items_read(view, seq, buffer, &record, &round->error) : code;
    code = code == STORE_OK
               ? items_changed(view, 0, 100, see_item, &seen, buffer, &next, &round->error)
               : code;
    code = code == STORE_OK ? items_sample(view, 7, 10, buffer, seqs, &drawn, &round->error) : code;
    code = code == STORE_OK ? items_was_latest(view, text_of("log/1"), 1, CHANGES_BEFORE, buffer,
                                               &was_latest, &round->error)
                            : code;
    assert_true(code != STORE_OK || (seen == 4 && drawn == 2 && was_latest));
    return code;
}

static int read_tags(struct round *round, struct store_view *view)
{
    struct vocabulary_tag tag;
    unsigned seen = 0;
    int code = vocabulary_find(view, "gale", strlen("gale"), &tag, &round->error);
    code = code == STORE_OK ? vocabulary_by_name(view, "", 0, see_tag, &seen, &round->error) : code;
    code = code == STORE_OK ? vocabulary_by_number(view, see_tag, &seen, &round->error) : code;
    code = code == STORE_OK ? store_get_note(view, "watch", &round->fixture->buffer, &round->error)
                            : code;
    assert_true(code != STORE_OK || seen == 2 * 4);
    return code;
}

static int look(struct round *round, struct store *store)
{
    struct store_view *view = NULL;
    int code = store_read(store, &view, &round->error);
    code = code == STORE_OK ? read_items(round, view) : code;
    code = code == STORE_OK ? read_tags(round, view) : code;
    store_end(view);
    return code;
}

/* --- what the file itself needs -----------------------------------------------------------------
 */

static int erase(struct round *round, struct store *store)
{
    struct store_view *view = NULL;
    size_t erased = 0;
    size_t left = 1;
    int code = store_write(store, &view, &round->error);
    if (code != STORE_OK) {
        return code;
    }
    code = store_erase_passed(view, CHANGES_AFTER, 100, &erased, &round->error);
    if (code != STORE_OK) {
        store_end(view);
        return code;
    }
    code = store_commit(view, &round->error);
    while (code == STORE_OK && left > 0) {
        code = store_scrub(store, 1000, &left, &round->error);
    }
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

static int copy(struct round *round, struct store *store)
{
    uint64_t expected = 0;
    uint64_t taken = 0;
    int code = store_copy_bytes(store, &expected, &round->error);
    code = code == STORE_OK ? store_copy(store, take_bytes, &taken, &round->error) : code;
    assert_true(code != STORE_OK || (taken > 0 && taken == expected));
    return code == STORE_OK ? store_check_pages(store, no_fault, NULL, &round->error) : code;
}

/* --- rounds -------------------------------------------------------------------------------------
 */

static int use(void *user)
{
    struct round *round = user;
    struct store *store = NULL;
    round->is_committed = false;
    round->error = (struct store_error){0};
    int code = store_open(&round->fixture->settings, &store, &round->error);
    code = code == STORE_OK ? change(round, store) : code;
    code = code == STORE_OK ? look(round, store) : code;
    code = code == STORE_OK ? erase(round, store) : code;
    code = code == STORE_OK ? copy(round, store) : code;
    store_close(store);
    give_back_buffers(round);
    return code;
}

static int verify(void *user)
{
    struct round *round = user;
    struct store_settings settings = round->fixture->settings;
    struct verify_store_sums sums = {0};
    const struct verify_sink sink = {.fault = no_fault};
    struct store *store = NULL;
    settings.read_only = true;
    round->error = (struct store_error){0};
    int code = store_open(&settings, &store, &round->error);
    code = code == STORE_OK ? verify_store(store, &sink, &sums, &round->error) : code;
    store_close(store);
    if (code == STORE_OK) {
        assert_int_equal(sums.totals.seq, round->is_committed ? CHANGES_AFTER : CHANGES_BEFORE);
    }
    return code;
}

/* A failure is told, unless what failed only tidies up. */
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
    assert_true(result != STORE_OK || round->is_committed);
    assert_int_equal(verify(round), STORE_OK);
    put_file_back(round);
}

static void use_with_failing(struct round *round, enum failing kind, long least)
{
    put_file_back(round);
    assert_true(failing_each(kind, use, check_use, round) >= least);
}

static void without_memory_a_change_is_whole_or_not_there(void **state)
{
    use_with_failing(*state, FAILING_MEMORY, 20);
}

static void where_lmdb_fails_a_change_is_whole_or_not_there(void **state)
{
    use_with_failing(*state, FAILING_LMDB, 100);
}

static void where_a_file_fails_a_change_is_whole_or_not_there(void **state)
{
    use_with_failing(*state, FAILING_FILES, 10);
}

static void where_no_lock_can_be_made_a_change_is_whole_or_not_there(void **state)
{
    use_with_failing(*state, FAILING_NEW, 3);
}

static void check_verify(void *user, int result)
{
    check_told(user, result);
    assert_int_not_equal(result, STORE_NOT_FOUND);
}

/* A look through a store that could not be looked through is no fault of the store. */
static void verifying_finds_no_fault_where_a_call_fails(void **state)
{
    struct round *round = *state;
    round->is_committed = false;
    assert_true(failing_each(FAILING_MEMORY, verify, check_verify, round) > 5);
    assert_true(failing_each(FAILING_LMDB, verify, check_verify, round) > 30);
    assert_true(failing_each(FAILING_FILES, verify, check_verify, round) > 2);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(without_memory_a_change_is_whole_or_not_there),
        TEST(where_lmdb_fails_a_change_is_whole_or_not_there),
        TEST(where_a_file_fails_a_change_is_whole_or_not_there),
        TEST(where_no_lock_can_be_made_a_change_is_whole_or_not_there),
        TEST(verifying_finds_no_fault_where_a_call_fails),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
