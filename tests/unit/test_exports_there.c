/* Exports that are there: sweeping, removing, and which is the latest. */
#include "daemon/export_folder.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/export_fixture.h"

static size_t sweep(struct exports *exports)
{
    size_t count = 99;
    int code = export_folder_sweep(exports->folder, &count, exports->error);
    if (code != 0) {
        fail_msg("%d: %s", code, exports->error);
    }
    return count;
}

/* --- those that are there --- */

static void sweeping_removes_what_a_crash_has_left_and_nothing_else(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    assert_int_equal(mkdir(at(exports, ".tuesday.part"), 0700), 0);
    assert_int_equal(mkdir(at(exports, ".tuesday.part/store"), 0700), 0);
    write_text(at(exports, ".tuesday.part/store/data"), "half");
    assert_int_equal(mkdir(at(exports, ".b.part"), 0700), 0);
    static const char *const kept[] = {".part", "..part", ".a.parts", "c.part", ".-d.part"};
    for (size_t i = 0; i < sizeof kept / sizeof kept[0]; i++) {
        assert_int_equal(mkdir(at(exports, kept[i]), 0700), 0);
    }
    write_text(at(exports, ".file.part"), "no folder");
    assert_int_equal(symlink("monday", at(exports, ".link.part")), 0);
    assert_int_equal(sweep(exports), 2);
    assert_false(is_there(exports, ".tuesday.part"));
    assert_false(is_there(exports, ".b.part"));
    for (size_t i = 0; i < sizeof kept / sizeof kept[0]; i++) {
        assert_true(is_there(exports, kept[i]));
    }
    assert_text(at(exports, ".file.part"), "no folder");
    assert_true(is_there(exports, ".link.part"));
    assert_text(at(exports, "monday/log"), "monday");
    assert_int_equal(sweep(exports), 0);
}

static void what_lies_too_deep_is_told_and_the_others_are_swept(void **state)
{
    struct exports *exports = *state;
    char path[PATH_BYTES];
    size_t count = 0;
    (void)snprintf(path, sizeof path, "%s/.deep.part", exports->path);
    for (int depth = 0; depth < 20; depth++) {
        assert_int_equal(mkdir(path, 0700), 0);
        (void)snprintf(path + strlen(path), sizeof path - strlen(path), "/d");
    }
    assert_int_equal(mkdir(at(exports, ".a.part"), 0700), 0);
    assert_int_equal(export_folder_sweep(exports->folder, &count, exports->error), -ELOOP);
    assert_int_equal(count, 1);
    assert_non_null(strstr(exports->error, ".deep.part cannot be removed"));
    assert_false(is_there(exports, ".a.part"));
}

static void one_is_removed_as_a_whole(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    write_one(exports, "tuesday");
    assert_int_equal(export_folder_remove(exports->folder, "monday", exports->error), 0);
    assert_false(is_there(exports, "monday"));
    assert_false(is_there(exports, ".monday.part"));
    assert_text(at(exports, "tuesday/log"), "tuesday");
    assert_int_equal(export_folder_remove(exports->folder, "monday", exports->error), -ENOENT);
}

static void a_link_is_not_removed_as_an_export(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    assert_int_equal(symlink("monday", at(exports, "link")), 0);
    assert_int_equal(export_folder_remove(exports->folder, "link", exports->error), -ENOTDIR);
    assert_true(is_there(exports, "link"));
    assert_text(at(exports, "monday/log"), "monday");
}

/* --- the latest --- */

static void the_latest_is_the_one_pointed_to(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    write_one(exports, "tuesday");
    assert_int_equal(export_folder_point(exports->folder, "monday", exports->error), 0);
    assert_text(at(exports, "latest/log"), "monday");
    assert_int_equal(export_folder_point(exports->folder, "tuesday", exports->error), 0);
    assert_text(at(exports, "latest/log"), "tuesday");
}

static void the_latest_is_never_one_that_is_not_whole(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    assert_int_equal(export_folder_point(exports->folder, "monday", exports->error), 0);
    struct export_part *part = begin_full(exports, "tuesday");
    assert_int_equal(export_folder_point(exports->folder, "tuesday", exports->error), -ENOENT);
    assert_text(at(exports, "latest/log"), "monday");
    export_part_abort_take(part);
}

static void removing_the_latest_takes_the_link_along(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    write_one(exports, "monday-2");
    assert_int_equal(export_folder_point(exports->folder, "monday-2", exports->error), 0);
    assert_int_equal(export_folder_remove(exports->folder, "monday", exports->error), 0);
    assert_text(at(exports, "latest/log"), "monday-2");
    assert_int_equal(export_folder_remove(exports->folder, "monday-2", exports->error), 0);
    assert_false(is_there(exports, "latest"));
}

static void what_a_crash_has_left_of_the_link_is_replaced(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    assert_int_equal(symlink("nowhere", at(exports, ".latest.part")), 0);
    assert_int_equal(export_folder_point(exports->folder, "monday", exports->error), 0);
    assert_text(at(exports, "latest/log"), "monday");
    assert_false(is_there(exports, ".latest.part"));
}

static void what_is_called_latest_and_no_link_stays(void **state)
{
    struct exports *exports = *state;
    write_one(exports, "monday");
    write_text(at(exports, "latest"), "as it was");
    assert_int_equal(export_folder_point(exports->folder, "monday", exports->error), -EEXIST);
    assert_text(at(exports, "latest"), "as it was");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(sweeping_removes_what_a_crash_has_left_and_nothing_else),
        TEST(what_lies_too_deep_is_told_and_the_others_are_swept),
        TEST(one_is_removed_as_a_whole),
        TEST(a_link_is_not_removed_as_an_export),
        TEST(the_latest_is_the_one_pointed_to),
        TEST(the_latest_is_never_one_that_is_not_whole),
        TEST(removing_the_latest_takes_the_link_along),
        TEST(what_a_crash_has_left_of_the_link_is_replaced),
        TEST(what_is_called_latest_and_no_link_stays),
    };
    return cmocka_run_group_tests_name("exports there", tests, NULL, NULL);
}
