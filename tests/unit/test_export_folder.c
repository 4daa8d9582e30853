/*
 * Folders that are written beside and take their name when they are whole: the trust's exports, in
 * a folder where others may have planted what they like.
 */
#include "daemon/export_folder.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/export_fixture.h"

static void assert_refused(struct exports *exports, const char *name, int expected)
{
    struct export_part *part = NULL;
    exports->error[0] = '\0';
    assert_int_equal(export_folder_begin(exports->folder, name, &part, exports->error), expected);
    assert_null(part);
    assert_non_null(strstr(exports->error, name));
}

/* --- the folder --- */

static void the_folder_is_in_the_home_unless_its_path_says_otherwise(void **state)
{
    struct exports *exports = *state;
    char path[32];
    assert_int_equal(export_folder_place("/home", "exports", path, sizeof path, exports->error), 0);
    assert_string_equal(path, "/home/exports");
    assert_int_equal(export_folder_place("/home", "/srv/out", path, sizeof path, exports->error),
                     0);
    assert_string_equal(path, "/srv/out");
    /* "/home/exports" has 13 bytes, and its end */
    assert_int_equal(export_folder_place("/home", "exports", path, 13, exports->error),
                     -ENAMETOOLONG);
    assert_int_equal(export_folder_place("/home", "exports", path, 14, exports->error), 0);
}

static void a_folder_that_is_not_there_is_made(void **state)
{
    struct exports *exports = *state;
    struct export_folder *folder = NULL;
    struct stat status;
    char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/out", exports->parent);
    assert_int_equal(export_folder_open_there(path, &folder, exports->error), -ENOENT);
    assert_int_equal(export_folder_open(path, &folder, exports->error), 0);
    assert_string_equal(export_folder_path(folder), path);
    export_folder_close(folder);
    assert_int_equal(stat(path, &status), 0);
    assert_true(S_ISDIR(status.st_mode));
    assert_int_equal(status.st_mode & 0027, 0); /* the umask may take more */
}

static void a_link_to_a_folder_is_refused_with_slashes_behind_it_too(void **state)
{
    struct exports *exports = *state;
    struct export_folder *folder = NULL;
    char path[PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/elsewhere", exports->parent);
    assert_int_equal(symlink(exports->path, path), 0);
    assert_int_equal(export_folder_open(path, &folder, exports->error), -ENOTDIR);
    assert_non_null(strstr(exports->error, "elsewhere is no folder"));
    (void)snprintf(path, sizeof path, "%s/elsewhere//", exports->parent);
    assert_int_equal(export_folder_open(path, &folder, exports->error), -ENOTDIR);
    assert_null(folder);
}

static void a_file_is_no_folder(void **state)
{
    struct exports *exports = *state;
    struct export_folder *folder = NULL;
    write_text(at(exports, "file"), "");
    assert_int_equal(export_folder_open(at(exports, "file"), &folder, exports->error), -ENOTDIR);
}

static void a_folder_that_others_may_write_to_is_refused(void **state)
{
    struct exports *exports = *state;
    struct export_folder *folder = NULL;
    static const mode_t modes[] = {0770, 0757, 01777};
    for (size_t i = 0; i < 3; i++) {
        assert_int_equal(chmod(exports->path, modes[i]), 0);
        assert_int_equal(export_folder_open(exports->path, &folder, exports->error), -EPERM);
        assert_non_null(strstr(exports->error, "can be written to by others"));
    }
    assert_int_equal(chmod(exports->path, 0755), 0);
    assert_int_equal(export_folder_open(exports->path, &folder, exports->error), 0);
    export_folder_close(folder);
}

static void a_folder_of_another_user_is_refused(void **state)
{
    struct exports *exports = *state;
    struct export_folder *folder = NULL;
    if (geteuid() != 0) {
        skip(); /* only root gives folders away */
    }
    assert_int_equal(chown(exports->path, 65534, 0), 0);
    assert_int_equal(export_folder_open(exports->path, &folder, exports->error), -EPERM);
    assert_non_null(strstr(exports->error, "belongs to user 65534"));
}

/* --- names --- */

static void names_are_of_letters_digits_dashes_dots_and_underscores(void **state)
{
    (void)state;
    static const char *const valid[] = {"a", "Wenlow_Bar-1927.2", "0", "_", "latest.1", "part"};
    for (size_t i = 0; i < sizeof valid / sizeof valid[0]; i++) {
        assert_true(export_name_is_valid(valid[i]));
    }
}

static void names_that_lead_elsewhere_are_refused(void **state)
{
    struct exports *exports = *state;
    static const char *const names[] = {"",        ".",  "..",  "../out", "a/b",    "/tmp/a",  ".a",
                                        ".a.part", "a ", "a\n", "-a",     "latest", "\xC3\xA9"};
    for (size_t i = 0; i < sizeof names / sizeof names[0]; i++) {
        assert_refused(exports, names[i], -EINVAL);
        assert_int_equal(export_folder_remove(exports->folder, names[i], exports->error), -EINVAL);
        assert_int_equal(export_folder_point(exports->folder, names[i], exports->error), -EINVAL);
    }
}

static void a_name_has_64_bytes_at_most(void **state)
{
    struct exports *exports = *state;
    char name[66];
    memset(name, 'a', sizeof name);
    name[65] = '\0';
    assert_false(export_name_is_valid(name));
    name[64] = '\0';
    write_one(exports, name);
    assert_true(is_there(exports, name));
}

static void paths_in_a_part_do_not_lead_out_of_it(void **state)
{
    struct exports *exports = *state;
    static const char *const paths[] = {
        "../log", "store/../../log", "/tmp/log", "store//log", "store/", ".log", ""};
    struct export_part *part = begin_full(exports, "monday");
    for (size_t i = 0; i < sizeof paths / sizeof paths[0]; i++) {
        int fd = -1;
        assert_int_equal(export_part_add_file(part, paths[i], &fd, exports->error), -EINVAL);
        assert_int_equal(fd, -1);
        assert_int_equal(export_part_add_folder(part, paths[i], exports->error), -EINVAL);
    }
    export_part_abort_take(part);
}

/* --- writing one --- */

static void nothing_has_the_name_before_it_is_whole(void **state)
{
    struct exports *exports = *state;
    struct export_part *part = begin_full(exports, "monday");
    assert_false(is_there(exports, "monday"));
    assert_true(is_there(exports, ".monday.part"));
    assert_int_equal(export_part_commit_take(part, exports->error), 0);
    assert_false(is_there(exports, ".monday.part"));
    assert_text(at(exports, "monday/log"), "monday");
    assert_text(at(exports, "monday/store/lamps"), "monday");
}

static void what_was_given_up_leaves_nothing(void **state)
{
    struct exports *exports = *state;
    struct export_part *part = begin_full(exports, "monday");
    export_part_abort_take(part);
    assert_false(is_there(exports, "monday"));
    assert_false(is_there(exports, ".monday.part"));
    write_one(exports, "monday"); /* the name is free */
}

static void a_file_is_made_anew_or_not_at_all(void **state)
{
    struct exports *exports = *state;
    int fd = -1;
    struct export_part *part = begin_full(exports, "monday");
    assert_int_equal(export_part_add_file(part, "log", &fd, exports->error), -EEXIST);
    assert_int_equal(symlink("../target", at(exports, ".monday.part/link")), 0);
    assert_int_equal(export_part_add_file(part, "link", &fd, exports->error), -EEXIST);
    assert_false(is_there(exports, "target"));
    export_part_abort_take(part);
}

static void a_name_that_is_there_is_refused_whatever_it_is(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "folder");
    write_text(at(exports, "file"), "as it was");
    assert_int_equal(symlink("nowhere", at(exports, "link")), 0);
    assert_refused(exports, "folder", -EEXIST);
    assert_refused(exports, "file", -EEXIST);
    assert_refused(exports, "link", -EEXIST);
    assert_text(at(exports, "file"), "as it was");
}

static void the_same_name_is_not_written_twice_at_a_time(void **state)
{
    struct exports *exports = *state;
    struct export_part *part = begin(exports, "monday");
    assert_refused(exports, "monday", -EEXIST);
    assert_int_equal(export_part_commit_take(part, exports->error), 0);
}

static void a_name_taken_meanwhile_is_not_replaced(void **state)
{
    struct exports *exports = *state;
    struct export_part *part = begin_full(exports, "monday");
    assert_int_equal(mkdir(at(exports, "monday"), 0700), 0); /* a plain rename would replace it */
    assert_int_equal(export_part_commit_take(part, exports->error), -EEXIST);
    assert_false(is_there(exports, "monday/log"));
    assert_false(is_there(exports, ".monday.part"));
}

static void a_link_planted_for_the_part_is_not_followed(void **state)
{
    struct exports *exports = *state;
    char outside[PATH_BYTES];
    (void)snprintf(outside, sizeof outside, "%s/outside", exports->parent);
    assert_int_equal(mkdir(outside, 0700), 0);
    assert_int_equal(symlink(outside, at(exports, ".monday.part")), 0);
    assert_refused(exports, "monday", -EEXIST);
    assert_int_equal(rmdir(outside), 0); /* it is empty */
}

static void a_part_with_a_link_in_it_is_not_committed(void **state)
{
    struct exports *exports = *state;
    struct export_part *part = begin_full(exports, "monday");
    assert_int_equal(symlink("log", at(exports, ".monday.part/link")), 0);
    assert_int_equal(export_part_commit_take(part, exports->error), -ELOOP);
    assert_false(is_there(exports, "monday"));
}

static void giving_up_follows_no_link_out_of_the_part(void **state)
{
    struct exports *exports = *state;
    char outside[PATH_BYTES];
    (void)snprintf(outside, sizeof outside, "%s/outside", exports->parent);
    assert_int_equal(mkdir(outside, 0700), 0);
    (void)snprintf(outside, sizeof outside, "%s/outside/log", exports->parent);
    write_text(outside, "as it was");
    struct export_part *part = begin_full(exports, "monday");
    assert_int_equal(symlink("../../outside", at(exports, ".monday.part/store/folder")), 0);
    assert_int_equal(symlink("../../outside/log", at(exports, ".monday.part/file")), 0);
    export_part_abort_take(part);
    assert_false(is_there(exports, ".monday.part"));
    assert_text(outside, "as it was");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(the_folder_is_in_the_home_unless_its_path_says_otherwise),
        TEST(a_folder_that_is_not_there_is_made),
        TEST(a_link_to_a_folder_is_refused_with_slashes_behind_it_too),
        TEST(a_file_is_no_folder),
        TEST(a_folder_that_others_may_write_to_is_refused),
        TEST(a_folder_of_another_user_is_refused),
        TEST(names_are_of_letters_digits_dashes_dots_and_underscores),
        TEST(names_that_lead_elsewhere_are_refused),
        TEST(a_name_has_64_bytes_at_most),
        TEST(paths_in_a_part_do_not_lead_out_of_it),
        TEST(nothing_has_the_name_before_it_is_whole),
        TEST(what_was_given_up_leaves_nothing),
        TEST(a_file_is_made_anew_or_not_at_all),
        TEST(a_name_that_is_there_is_refused_whatever_it_is),
        TEST(the_same_name_is_not_written_twice_at_a_time),
        TEST(a_name_taken_meanwhile_is_not_replaced),
        TEST(a_link_planted_for_the_part_is_not_followed),
        TEST(a_part_with_a_link_in_it_is_not_committed),
        TEST(giving_up_follows_no_link_out_of_the_part),
    };
    return cmocka_run_group_tests_name("export folder", tests, NULL, NULL);
}
