/* One process at a time, by a lock that ends with its holder. */
#include "daemon/lockfile.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <sys/stat.h>
#include <sys/wait.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

struct places {
    char home[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 16];
    char error[LOCKFILE_ERROR_BYTES];
};

static int set_up(void **state)
{
    static struct places places;
    home_make(places.home);
    (void)snprintf(places.path, sizeof places.path, "%s/lock", places.home);
    places.error[0] = '\0';
    *state = &places;
    return 0;
}

static int tear_down(void **state)
{
    struct places *places = *state;
    home_remove(places->home);
    return 0;
}

static int take(struct places *places)
{
    int fd = -1;
    int code = lockfile_take(places->path, &fd, places->error);
    if (code != 0) {
        fail_msg("%d: %s", code, places->error);
    }
    return fd;
}

static void assert_refused(struct places *places, int code, const char *sentence)
{
    int fd = -77;
    assert_int_equal(lockfile_take(places->path, &fd, places->error), code);
    assert_string_equal(places->error, sentence);
    assert_int_equal(fd, -77);
}

static void the_file_holds_the_number_of_the_process(void **state)
{
    struct places *places = *state;
    char found[32] = "";
    char expected[32];
    int fd = take(places);
    (void)snprintf(expected, sizeof expected, "%ld\n", (long)getpid());
    assert_true(pread(fd, found, sizeof found - 1, 0) > 0);
    assert_string_equal(found, expected);
    assert_int_equal(close(fd), 0);
}

static void what_an_earlier_holder_wrote_is_gone(void **state)
{
    struct places *places = *state;
    FILE *file = fopen(places->path, "w");
    assert_non_null(file);
    assert_true(fputs("1234567890123456789\nand more\n", file) >= 0);
    assert_int_equal(fclose(file), 0);
    the_file_holds_the_number_of_the_process(state);
}

static void nobody_else_may_read_it_and_no_child_inherits_it(void **state)
{
    struct places *places = *state;
    struct stat status;
    int fd = take(places);
    assert_int_equal(fstat(fd, &status), 0);
    assert_int_equal(status.st_mode & 0777, 0600);
    assert_true(fcntl(fd, F_GETFD) & FD_CLOEXEC);
    assert_int_equal(close(fd), 0);
}

static void a_held_lock_is_refused_and_names_the_holder(void **state)
{
    struct places *places = *state;
    char sentence[2 * LOCKFILE_ERROR_BYTES];
    int fd = take(places);
    (void)snprintf(sentence, sizeof sentence, "process %ld holds %s already", (long)getpid(),
                   places->path);
    assert_refused(places, -EWOULDBLOCK, sentence);
    assert_int_equal(close(fd), 0);
}

static void a_holder_that_wrote_no_number_is_another_process(void **state)
{
    struct places *places = *state;
    char sentence[2 * LOCKFILE_ERROR_BYTES];
    int fd = take(places);
    assert_int_equal(ftruncate(fd, 0), 0);
    (void)snprintf(sentence, sizeof sentence, "another process holds %s already", places->path);
    assert_refused(places, -EWOULDBLOCK, sentence);
    assert_int_equal(close(fd), 0);
}

static void the_lock_ends_with_its_descriptor_and_the_file_stays(void **state)
{
    struct places *places = *state;
    assert_int_equal(close(take(places)), 0);
    assert_int_equal(access(places->path, F_OK), 0);
    assert_int_equal(close(take(places)), 0);
}

static void the_lock_ends_with_its_process_however_that_ends(void **state)
{
    struct places *places = *state;
    int status = 0;
    pid_t child = fork();
    if (child == 0) {
        int fd = -1;
        int code = lockfile_take(places->path, &fd, places->error);
        _exit(code == 0 ? 7 : 1); /* without closing anything */
    }
    assert_true(child > 0);
    assert_int_equal(waitpid(child, &status, 0), child);
    assert_true(WIFEXITED(status));
    assert_int_equal(WEXITSTATUS(status), 7);
    assert_int_equal(close(take(places)), 0);
}

static void a_folder_that_is_not_there_is_told(void **state)
{
    struct places *places = *state;
    char sentence[2 * LOCKFILE_ERROR_BYTES];
    (void)snprintf(places->path, sizeof places->path, "%s/none/lock", places->home);
    (void)snprintf(sentence, sizeof sentence, "%s cannot be opened: No such file or directory",
                   places->path);
    assert_refused(places, -ENOENT, sentence);
}

/* Otherwise who may write to the folder could have any file of ours emptied. */
static void a_link_is_not_followed(void **state)
{
    struct places *places = *state;
    char target[FIXTURE_PATH_BYTES + 16];
    (void)snprintf(target, sizeof target, "%s/diary", places->home);
    assert_int_equal(symlink(target, places->path), 0);
    int fd = -77;
    assert_int_equal(lockfile_take(places->path, &fd, places->error), -ELOOP);
    assert_int_equal(access(target, F_OK), -1);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_file_holds_the_number_of_the_process),
        TEST(what_an_earlier_holder_wrote_is_gone),
        TEST(nobody_else_may_read_it_and_no_child_inherits_it),
        TEST(a_held_lock_is_refused_and_names_the_holder),
        TEST(a_holder_that_wrote_no_number_is_another_process),
        TEST(the_lock_ends_with_its_descriptor_and_the_file_stays),
        TEST(the_lock_ends_with_its_process_however_that_ends),
        TEST(a_folder_that_is_not_there_is_told),
        TEST(a_link_is_not_followed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
