/*
 * A home in which any one call fails: of memory, of LMDB, of a file, of what begins a thread or a
 * process. It is opened, looked through, and made of a backup; each is done, or is refused with a
 * sentence and can be done again, and nothing is said to be damaged that is not.
 */
#include "daemon/restore.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <jansson.h>
#include <sys/stat.h>
#include <sysexits.h>

#include "daemon/backup.h"
#include "daemon/verify_home.h"
#include "tests/unit/engine_fixture.h"
#include "tests/unit/failing_calls.h"

enum {
    ITEMS = 12,
    TAGS = 40,
    SENTENCE_BYTES = 1024
};

_Static_assert((int)ENGINE_ERROR_BYTES <= (int)SENTENCE_BYTES &&
                   (int)RESTORE_ERROR_BYTES <= (int)SENTENCE_BYTES,
               "each sentence has room");

static const enum failing EACH[] = {FAILING_MEMORY, FAILING_LMDB, FAILING_FILES, FAILING_NEW};

/* A closed home with items, a backup of it, and a place for another home. */
struct kept {
    struct opened *opened;
    char backup[PATH_MAX];
    char parent[FIXTURE_PATH_BYTES];
    char home[FIXTURE_PATH_BYTES + 16];
    char error[SENTENCE_BYTES];
};

static void write_backup(struct kept *kept)
{
    const struct backup_wanted wanted = {.name = "kept", .rate = BACKUP_RATE};
    struct opened *opened = kept->opened;
    struct backup_outcome outcome;
    assert_int_equal(backup_begin(engine_backup(opened->engine), &wanted), 0);
    (void)pthread_mutex_lock(&opened->mutex);
    while (!backup_take_done(engine_backup(opened->engine), &outcome)) {
        (void)pthread_cond_wait(&opened->done, &opened->mutex);
    }
    (void)pthread_mutex_unlock(&opened->mutex);
    if (outcome.code != 0) {
        fail_msg("%d: %s", outcome.code, outcome.error);
    }
    (void)snprintf(kept->backup, sizeof kept->backup, "%s", outcome.path);
}

/* jansson's blocks are counted, since we free some; that they fail is for faults/test_faults. */
static void *allocate_json(size_t size)
{
    return failing_count(__real_malloc(size));
}

static int set_up(void **state)
{
    static struct kept kept;
    struct stream stream = {.random = {4}, .tag_count = TAGS, .given_share = 0.8};
    void *opened = NULL;
    kept = (struct kept){0};
    json_set_alloc_funcs(allocate_json, free);
    (void)opened_set_up(&opened);
    kept.opened = opened;
    file_stream(kept.opened, &stream, 0, ITEMS);
    write_backup(&kept);
    close_home(kept.opened);
    home_make(kept.parent);
    (void)snprintf(kept.home, sizeof kept.home, "%s/home", kept.parent);
    *state = &kept;
    return 0;
}

static int tear_down(void **state)
{
    struct kept *kept = *state;
    void *opened = kept->opened;
    home_remove(kept->parent);
    return opened_tear_down(&opened);
}

static void assert_sentence(const struct kept *kept, int exit_code)
{
    assert_in_range(exit_code, EX__BASE, EX__MAX);
    assert_true(kept->error[0] != '\0');
}

/* --- looking through it -------------------------------------------------------------------------
 */

/* What it says goes nowhere. */
static int look_through(const struct kept *kept, const char *home)
{
    FILE *out = fopen("/dev/null", "w");
    assert_non_null(out);
    (void)fflush(NULL); /* or a forked process writes it once more */
    int exit_code = verify_home(home, &kept->opened->options, out);
    (void)fclose(out); /* as above */
    return exit_code;
}

static int verify(void *user)
{
    const struct kept *kept = user;
    return look_through(kept, kept->opened->home);
}

static void check_verify(void *user, int exit_code)
{
    (void)user;
    assert_int_not_equal(exit_code, EX_DATAERR);
    while (__real_waitpid(-1, NULL, 0) > 0) { /* one that could not be waited for */
    }
}

static void a_home_that_cannot_be_looked_through_is_not_said_to_be_damaged(void **state)
{
    for (size_t i = 0; i < sizeof EACH / sizeof EACH[0]; i++) {
        assert_true(failing_each(EACH[i], verify, check_verify, *state) > 3);
    }
}

/* --- a home of a backup -------------------------------------------------------------------------
 */

static int restore_to_other(void *user)
{
    struct kept *kept = user;
    FILE *out = fopen("/dev/null", "w");
    assert_non_null(out);
    kept->error[0] = '\0';
    int exit_code =
        restore_home(kept->home, kept->backup, &kept->opened->options, out, kept->error);
    (void)fclose(out); /* what it says goes nowhere */
    return exit_code;
}

static void remove_other(const struct kept *kept)
{
    home_remove(kept->parent);
    assert_int_equal(__real_mkdir(kept->parent, 0700), 0); /* this one is not to fail */
}

/* Restoring again begins anew, unless a whole home is there already. */
static void check_restored(void *user, int exit_code)
{
    struct kept *kept = user;
    if (exit_code != 0) {
        assert_sentence(kept, exit_code);
        bool is_whole = access(kept->home, F_OK) == 0 && look_through(kept, kept->home) == 0;
        assert_true(is_whole || restore_to_other(kept) == 0);
    }
    assert_int_equal(look_through(kept, kept->home), 0);
    remove_other(kept);
}

static int restore_and_remove(void *user)
{
    int exit_code = restore_to_other(user);
    if (exit_code == 0 && atomic_load(&failing->left) >= 0) { /* the last round: nothing failed */
        remove_other(user);
    }
    return exit_code;
}

static void a_home_of_a_backup_is_whole_or_can_be_made_again(void **state)
{
    for (size_t i = 0; i < 3; i++) { /* it begins no threads */
        assert_true(failing_each(EACH[i], restore_and_remove, check_restored, *state) > 3);
    }
}

/* --- an engine in it ----------------------------------------------------------------------------
 */

static int open_and_close(void *user)
{
    struct kept *kept = user;
    int exit_code = try_open(kept->opened);
    if (exit_code != 0) {
        (void)snprintf(kept->error, sizeof kept->error, "%s", kept->opened->error);
        return exit_code;
    }
    struct engine *engine = kept->opened->engine;
    (void)snprintf(kept->error, sizeof kept->error, "a write had failed");
    kept->opened->engine = NULL;
    return engine_close(engine);
}

/* Whatever it was, the next one is in order. */
static void check_opened(void *user, int exit_code)
{
    struct kept *kept = user;
    if (exit_code != 0) {
        assert_sentence(kept, exit_code);
    }
    open_home(kept->opened);
    assert_int_equal(engine_count(kept->opened->engine).progress.committed, ITEMS);
    assert_int_equal(engine_close(kept->opened->engine), 0);
    kept->opened->engine = NULL;
}

static void an_engine_opens_or_says_why_not_and_the_next_one_opens(void **state)
{
    for (size_t i = 0; i < sizeof EACH / sizeof EACH[0]; i++) {
        assert_true(failing_each(EACH[i], open_and_close, check_opened, *state) > 5);
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_home_that_cannot_be_looked_through_is_not_said_to_be_damaged),
        TEST(a_home_of_a_backup_is_whole_or_can_be_made_again),
        TEST(an_engine_opens_or_says_why_not_and_the_next_one_opens),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
