/* A file is saved whole, or nothing changes. */
#include "client/save.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <fcntl.h>
#include <signal.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

struct fixture {
    char folder[64];
    char path[96];
    struct failure failure;
};

static int set_up(void **state)
{
    static struct fixture fixture;
    fixture = (struct fixture){.folder = "/tmp/undertag-test-XXXXXX"};
    *state = &fixture;
    if (!mkdtemp(fixture.folder)) {
        return -1;
    }
    (void)snprintf(fixture.path, sizeof fixture.path, "%s/page.html", fixture.folder);
    return 0;
}

/* How many entries the folder has; with `and_remove`, removes them. */
static size_t entries(const struct fixture *fixture, bool and_remove)
{
    size_t count = 0;
    DIR *folder = opendir(fixture->folder);
    assert_non_null(folder);
    for (struct dirent *entry = readdir(folder); entry; entry = readdir(folder)) {
        if (entry->d_name[0] != '.') {
            count++;
            if (and_remove) {
                assert_int_equal(unlinkat(dirfd(folder), entry->d_name, 0), 0);
            }
        }
    }
    assert_int_equal(closedir(folder), 0);
    return count;
}

static int tear_down(void **state)
{
    struct fixture *fixture = *state;
    (void)entries(fixture, true);
    return rmdir(fixture->folder);
}

static void assert_holds(const char *path, const char *expected)
{
    char text[64] = "";
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    size_t length = fread(text, 1, sizeof text - 1, file);
    text[length] = '\0';
    assert_int_equal(fclose(file), 0);
    assert_string_equal(text, expected);
}

static int save(struct fixture *fixture, const char *path, const char *text)
{
    fixture->failure = (struct failure){0};
    return save_file(path, text, strlen(text), &fixture->failure);
}

static void a_file_of_that_name_is_replaced_and_nothing_else_is_left(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(save(fixture, fixture->path, "the page of yesterday"), 0);
    assert_int_equal(save(fixture, fixture->path, "today"), 0);
    assert_holds(fixture->path, "today");
    assert_int_equal(entries(fixture, false), 1);
}

static void a_new_file_has_the_mode_of_any_new_file(void **state)
{
    struct fixture *fixture = *state;
    struct stat found;
    mode_t mask = umask(027);
    assert_int_equal(save(fixture, fixture->path, "today"), 0);
    (void)umask(mask);
    assert_int_equal(stat(fixture->path, &found), 0);
    assert_int_equal(found.st_mode & 0777, 0640);
}

static void a_file_that_is_replaced_keeps_its_mode(void **state)
{
    struct fixture *fixture = *state;
    struct stat found;
    assert_int_equal(save(fixture, fixture->path, "yesterday"), 0);
    assert_int_equal(chmod(fixture->path, 0604), 0);
    assert_int_equal(save(fixture, fixture->path, "today"), 0);
    assert_int_equal(stat(fixture->path, &found), 0);
    assert_int_equal(found.st_mode & 0777, 0604);
}

static void a_folder_that_is_not_there_is_named(void **state)
{
    struct fixture *fixture = *state;
    char path[128];
    char expected[256];
    (void)snprintf(path, sizeof path, "%s/none/page.html", fixture->folder);
    (void)snprintf(expected, sizeof expected, "%s cannot be written: there is no folder %s/none",
                   path, fixture->folder);
    assert_int_equal(save(fixture, path, "today"), FAILURE_IO);
    assert_string_equal(fixture->failure.message, expected);
}

static void only_a_file_is_ever_replaced(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(save(fixture, fixture->folder, "today"), FAILURE_IO);
    assert_int_equal(mkfifo(fixture->path, 0600), 0);
    assert_int_equal(save(fixture, fixture->path, "today"), FAILURE_IO);
    assert_non_null(strstr(fixture->failure.message, "it is not a file"));
    assert_int_equal(save(fixture, "", "today"), FAILURE_IO);
}

static void a_symbolic_link_stays_and_its_file_is_replaced(void **state)
{
    struct fixture *fixture = *state;
    char link_path[128];
    struct stat found;
    (void)snprintf(link_path, sizeof link_path, "%s/latest.html", fixture->folder);
    assert_int_equal(save(fixture, fixture->path, "yesterday"), 0);
    assert_int_equal(symlink(fixture->path, link_path), 0);
    assert_int_equal(save(fixture, link_path, "today"), 0);
    assert_int_equal(lstat(link_path, &found), 0);
    assert_true(S_ISLNK(found.st_mode));
    assert_holds(fixture->path, "today");
}

static void a_write_that_fails_leaves_the_file_as_it_was(void **state)
{
    struct fixture *fixture = *state;
    struct rlimit before;
    assert_int_equal(save(fixture, fixture->path, "old"), 0);
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &before), 0);
    void (*handler)(int) = signal(SIGXFSZ, SIG_IGN);
    const struct rlimit small = {.rlim_cur = 4, .rlim_max = before.rlim_max};
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &small), 0);
    int code = save(fixture, fixture->path, "longer than that");
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &before), 0);
    (void)signal(SIGXFSZ, handler);
    assert_int_equal(code, FAILURE_IO);
    assert_non_null(
        strstr(fixture->failure.message, "page.html cannot be written: File too large"));
    assert_holds(fixture->path, "old");
    assert_int_equal(entries(fixture, false), 1);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_file_of_that_name_is_replaced_and_nothing_else_is_left),
        TEST(a_new_file_has_the_mode_of_any_new_file),
        TEST(a_file_that_is_replaced_keeps_its_mode),
        TEST(a_folder_that_is_not_there_is_named),
        TEST(only_a_file_is_ever_replaced),
        TEST(a_symbolic_link_stays_and_its_file_is_replaced),
        TEST(a_write_that_fails_leaves_the_file_as_it_was),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
