/*
 * A folder of exports in which any one call fails: of memory or of a file. Whoever finds a name
 * there finds all of it; what is left of anything else, the next sweep takes.
 */
#include "daemon/export_folder.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/export_fixture.h"
#include "tests/unit/failing_calls.h"

static const enum failing EACH[] = {FAILING_MEMORY, FAILING_FILES};

/* A call may fail and do no harm; what does harm is told. */
static void assert_told(const struct exports *exports, int code)
{
    assert_true(code == 0 || (code < 0 && exports->error[0] != '\0'));
}

/* Nothing fails here. */
static void sweep(struct exports *exports)
{
    size_t count = 0;
    assert_int_equal(export_folder_sweep(exports->folder, &count, exports->error), 0);
    assert_false(is_there(exports, ".spring.part"));
}

static void remove_spring(struct exports *exports)
{
    assert_int_equal(export_folder_remove(exports->folder, "spring", exports->error), 0);
}

/* --- opening it --- */

static int open_and_close(void *user)
{
    struct exports *exports = user;
    struct export_folder *folder = NULL;
    exports->error[0] = '\0';
    int code = export_folder_open(exports->path, &folder, exports->error);
    assert_true(code == 0 ? folder != NULL : folder == NULL);
    export_folder_close(folder);
    return code;
}

static void check_opened(void *user, int code)
{
    assert_told(user, code);
}

static void a_folder_that_cannot_be_opened_is_told(void **state)
{
    for (size_t i = 0; i < sizeof EACH / sizeof EACH[0]; i++) {
        assert_true(failing_each(EACH[i], open_and_close, check_opened, *state) > 0);
    }
}

/* --- writing one --- */

static int fill(struct exports *exports, struct export_part *part)
{
    int fd = -1;
    int code = export_part_add_folder(part, "pier", exports->error);
    if (code == 0) {
        code = export_part_add_file(part, "pier/log", &fd, exports->error);
    }
    if (code == 0) {
        assert_int_equal(__real_write(fd, "Dense fog.\n", 11), 11);
        assert_int_equal(__real_close(fd), 0);
    }
    return code;
}

static int write_spring(void *user)
{
    struct exports *exports = user;
    struct export_part *part = NULL;
    exports->error[0] = '\0';
    int code = export_folder_begin(exports->folder, "spring", &part, exports->error);
    if (code < 0) {
        return code;
    }
    code = fill(exports, part);
    if (code < 0) {
        export_part_abort_take(part);
        return code;
    }
    code = export_part_commit_take(part, exports->error);
    return code == 0 ? export_folder_point(exports->folder, "spring", exports->error) : code;
}

static void check_written(void *user, int code)
{
    struct exports *exports = user;
    assert_told(exports, code);
    if (code == 0 || is_there(exports, "spring")) {
        assert_text(at(exports, "spring/pier/log"), "Dense fog.\n");
        remove_spring(exports);
    }
    sweep(exports);
}

static void a_folder_takes_its_name_whole_or_not_at_all(void **state)
{
    struct exports *exports = *state;
    for (size_t i = 0; i < sizeof EACH / sizeof EACH[0]; i++) {
        assert_true(failing_each(EACH[i], write_spring, check_written, exports) > 0);
        check_written(exports, 0); /* the last round, in which nothing failed */
    }
}

/* --- removing one --- */

static int remove_and_say(void *user)
{
    struct exports *exports = user;
    exports->error[0] = '\0';
    return export_folder_remove(exports->folder, "spring", exports->error);
}

/* It is there, whole, or gone but for what a sweep takes. */
static void check_removed(void *user, int code)
{
    struct exports *exports = user;
    assert_told(exports, code);
    if (is_there(exports, "spring")) {
        assert_true(code < 0);
        assert_text(at(exports, "spring/pier/log"), "Dense fog.\n");
        remove_spring(exports);
    }
    sweep(exports);
    assert_int_equal(write_spring(exports), 0);
}

static void a_folder_that_cannot_be_removed_is_whole_or_swept(void **state)
{
    struct exports *exports = *state;
    for (size_t i = 0; i < sizeof EACH / sizeof EACH[0]; i++) {
        assert_int_equal(write_spring(exports), 0);
        assert_true(failing_each(EACH[i], remove_and_say, check_removed, exports) >=
                    0); /* it takes no memory */
    }
}

/* --- sweeping --- */

static int sweep_and_say(void *user)
{
    struct exports *exports = user;
    size_t count = 0;
    exports->error[0] = '\0';
    return export_folder_sweep(exports->folder, &count, exports->error);
}

static void leave_a_part(struct exports *exports)
{
    assert_int_equal(mkdir(at(exports, ".spring.part"), 0700), 0);
    write_text(at(exports, ".spring.part/log"), "Dense fog.\n");
}

static void check_swept(void *user, int code)
{
    struct exports *exports = user;
    assert_told(exports, code);
    assert_true(code < 0 || !is_there(exports, ".spring.part"));
    sweep(exports);
    leave_a_part(exports);
}

static void what_cannot_be_swept_is_told_and_swept_the_next_time(void **state)
{
    struct exports *exports = *state;
    leave_a_part(exports);
    assert_true(failing_each(FAILING_FILES, sweep_and_say, check_swept, exports) > 3);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_folder_that_cannot_be_opened_is_told),
        TEST(a_folder_takes_its_name_whole_or_not_at_all),
        TEST(a_folder_that_cannot_be_removed_is_whole_or_swept),
        TEST(what_cannot_be_swept_is_told_and_swept_the_next_time),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
