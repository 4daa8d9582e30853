/* The folder of a store: made, and held by one process at a time. */
#include "daemon/home.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <limits.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/unit/store_fixture.h"

struct places {
    char parent[FIXTURE_PATH_BYTES];
    char home[FIXTURE_PATH_BYTES + 64];
    char error[HOME_ERROR_BYTES];
};

static int set_up(void **state)
{
    static struct places places;
    home_make(places.parent);
    (void)snprintf(places.home, sizeof places.home, "%s/trust/logbooks", places.parent);
    places.error[0] = '\0';
    *state = &places;
    return 0;
}

static int tear_down(void **state)
{
    struct places *places = *state;
    home_remove(places->parent);
    return 0;
}

static void open_and_close(struct places *places)
{
    int fd = -1;
    int code = home_open(places->home, &fd, places->error);
    if (code != 0) {
        fail_msg("%d: %s", code, places->error);
    }
    assert_int_equal(close(fd), 0);
}

static mode_t mode_of(const char *path)
{
    struct stat status;
    assert_int_equal(stat(path, &status), 0);
    assert_true(S_ISDIR(status.st_mode));
    return status.st_mode & 0777;
}

static void every_folder_is_made_for_its_owner_alone(void **state)
{
    struct places *places = *state;
    char above[FIXTURE_PATH_BYTES + 64];
    open_and_close(places);
    (void)snprintf(above, sizeof above, "%s/trust", places->parent);
    assert_int_equal(mode_of(above), 0700);
    assert_int_equal(mode_of(places->home), 0700);
}

static void a_folder_that_is_there_keeps_its_mode(void **state)
{
    struct places *places = *state;
    (void)snprintf(places->home, sizeof places->home, "%s/shared", places->parent);
    assert_int_equal(mkdir(places->home, 0750), 0);
    assert_int_equal(chmod(places->home, 0750), 0);
    open_and_close(places);
    assert_int_equal(mode_of(places->home), 0750);
}

static void a_home_may_be_opened_again_and_end_in_a_slash(void **state)
{
    struct places *places = *state;
    open_and_close(places);
    open_and_close(places);
    (void)strcat(places->home, "/");
    open_and_close(places);
}

static void a_home_below_the_working_folder_is_made_there(void **state)
{
    struct places *places = *state;
    char before[PATH_MAX];
    char made[FIXTURE_PATH_BYTES + 64];
    (void)snprintf(made, sizeof made, "%s/trust/logbooks", places->parent);
    (void)snprintf(places->home, sizeof places->home, "trust/logbooks");
    assert_non_null(getcwd(before, sizeof before));
    assert_int_equal(chdir(places->parent), 0);
    open_and_close(places);
    assert_int_equal(chdir(before), 0);
    assert_int_equal(mode_of(made), 0700);
}

static void a_home_in_use_is_refused_and_names_the_holder(void **state)
{
    struct places *places = *state;
    char sentence[4 * HOME_ERROR_BYTES];
    int first = -1;
    int second = -77;
    assert_int_equal(home_open(places->home, &first, places->error), 0);
    assert_int_equal(home_open(places->home, &second, places->error), -EWOULDBLOCK);
    (void)snprintf(sentence, sizeof sentence,
                   "the home %s is in use: process %ld holds %s/lock already", places->home,
                   (long)getpid(), places->home);
    assert_string_equal(places->error, sentence);
    assert_int_equal(second, -77);
    assert_int_equal(close(first), 0);
    open_and_close(places);
}

static void assert_unusable(struct places *places, const char *path, int code, const char *reason)
{
    char sentence[4 * HOME_ERROR_BYTES];
    int fd = -77;
    assert_int_equal(home_open(path, &fd, places->error), code);
    (void)snprintf(sentence, sizeof sentence, "the home %.300s cannot be used: %s", path, reason);
    assert_string_equal(places->error, sentence);
    assert_int_equal(fd, -77);
}

static void a_file_is_no_home_and_has_none_below_it(void **state)
{
    struct places *places = *state;
    (void)snprintf(places->home, sizeof places->home, "%s/diary", places->parent);
    FILE *file = fopen(places->home, "w");
    assert_non_null(file);
    assert_int_equal(fclose(file), 0);
    assert_unusable(places, places->home, -ENOTDIR, "Not a directory");
    (void)strcat(places->home, "/logbooks");
    assert_unusable(places, places->home, -ENOTDIR, "Not a directory");
}

static void a_path_that_no_file_can_have_is_refused(void **state)
{
    char path[PATH_MAX + 16];
    assert_unusable(*state, "", -ENOENT, "No such file or directory");
    memset(path, 'a', sizeof path);
    path[PATH_MAX] = '\0';
    assert_unusable(*state, path, -ENAMETOOLONG, "File name too long");
    path[PATH_MAX - 5] = '\0'; /* room for the home, but not for its lock */
    assert_unusable(*state, path, -ENAMETOOLONG, "File name too long");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(every_folder_is_made_for_its_owner_alone),
        TEST(a_folder_that_is_there_keeps_its_mode),
        TEST(a_home_may_be_opened_again_and_end_in_a_slash),
        TEST(a_home_below_the_working_folder_is_made_there),
        TEST(a_home_in_use_is_refused_and_names_the_holder),
        TEST(a_file_is_no_home_and_has_none_below_it),
        TEST(a_path_that_no_file_can_have_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
