/* A file of a backup while its bytes come. */
#include "daemon/backup_file.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

struct writing {
    FILE *to;
    struct backup_file file;
    size_t told;
    size_t most; /* then it is stopped */
};

static bool wrote(void *user, size_t bytes)
{
    struct writing *writing = user;
    writing->told += bytes;
    return writing->told < writing->most;
}

static int set_up(void **state)
{
    static struct writing writing;
    writing = (struct writing){.to = tmpfile(), .most = SIZE_MAX};
    assert_non_null(writing.to);
    backup_file_begin(&writing.file, fileno(writing.to), 0, wrote, &writing);
    *state = &writing;
    return 0;
}

static int tear_down(void **state)
{
    struct writing *writing = *state;
    return fclose(writing->to);
}

/* The sum of "abc" is one of the examples that NIST publishes with FIPS 180. */
static void pieces_are_written_and_summed_up(void **state)
{
    struct writing *writing = *state;
    char sum[SHA256_TEXT_BYTES];
    char text[4] = "";
    assert_int_equal(backup_file_take(&writing->file, "a", 1), 0);
    assert_int_equal(backup_file_take(&writing->file, "bc", 2), 0);
    assert_int_equal(backup_file_end(&writing->file, sum), 0);
    assert_string_equal(sum, "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
    assert_int_equal(writing->file.bytes, 3);
    assert_int_equal(writing->told, 3);
    assert_int_equal(pread(fileno(writing->to), text, 3, 0), 3);
    assert_string_equal(text, "abc");
}

static void it_ends_where_whoever_is_told_wants_it(void **state)
{
    struct writing *writing = *state;
    char sum[SHA256_TEXT_BYTES];
    writing->most = 3;
    assert_int_equal(backup_file_take(&writing->file, "a", 1), 0);
    assert_int_equal(backup_file_take(&writing->file, "bc", 2), -ECANCELED);
    assert_int_equal(backup_file_end(&writing->file, sum), -ECANCELED);
}

/* /dev/full (full(4)) has no room for anything. */
static void a_full_disk_ends_it(void **state)
{
    struct writing *writing = *state;
    char sum[SHA256_TEXT_BYTES];
    int full = open("/dev/full", O_WRONLY);
    assert_true(full >= 0);
    backup_file_begin(&writing->file, full, 0, wrote, writing);
    assert_int_equal(backup_file_take(&writing->file, "a", 1), -ENOSPC);
    assert_int_equal(writing->told, 0);
    assert_int_equal(backup_file_end(&writing->file, sum), -ENOSPC);
    assert_int_equal(close(full), 0);
}

static void the_reserve_is_asked_for_every_now_and_then(void **state)
{
    enum {
        PIECE_BYTES = 1 << 20
    };
    static const char piece[PIECE_BYTES];
    struct writing *writing = *state;
    int code = 0;
    backup_file_begin(&writing->file, fileno(writing->to), UINT64_MAX, wrote, writing);
    for (int i = 0; i < 16 && code == 0; i++) {
        code = backup_file_take(&writing->file, piece, sizeof piece);
    }
    assert_int_equal(code, -ENOSPC);
    assert_int_equal(writing->file.bytes, 8 << 20);
}

static void room_is_what_is_left_behind_the_reserve(void **state)
{
    struct writing *writing = *state;
    assert_int_equal(backup_file_ask_room(fileno(writing->to), 0, 0), 0);
    assert_int_equal(backup_file_ask_room(fileno(writing->to), UINT64_MAX, 0), -ENOSPC);
    assert_int_equal(backup_file_ask_room(fileno(writing->to), 0, UINT64_MAX), -ENOSPC);
    assert_int_equal(backup_file_ask_room(fileno(writing->to), UINT64_MAX, UINT64_MAX), -ENOSPC);
    assert_int_equal(backup_file_ask_room(-1, 0, 0), -EBADF);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(pieces_are_written_and_summed_up),
        TEST(it_ends_where_whoever_is_told_wants_it),
        TEST(a_full_disk_ends_it),
        TEST(the_reserve_is_asked_for_every_now_and_then),
        TEST(room_is_what_is_left_behind_the_reserve),
    };
    return cmocka_run_group_tests_name("backup_file", tests, NULL, NULL);
}
