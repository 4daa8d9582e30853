/*
 * Arrays in an archive. The two small members are held against bytes made by hand from NumPy
 * Enhancement Proposal 1; the archive is read back by the library that writes it, and begins and
 * ends as the ZIP format says (PKWARE's APPNOTE.TXT, 4.3.7 and 4.3.16; from memory).
 */
#include "daemon/snapshot/npz.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <zip.h>

#include "tests/unit/exports_fixture.h"

static void the_format_is_three_bytes_without_a_dimension(void **state)
{
    struct npz_text text;
    (void)state;
    npz_format(&text);
    assert_int_equal(text.size, 128 + 3);
    assert_memory_equal(text.bytes, "\x93NUMPY\x01\x00\x76\x00", 10);
    assert_memory_equal(text.bytes + 10, "{'descr': '|S3', 'fortran_order': False, 'shape': (), } ",
                        56);
    assert_memory_equal(text.bytes + 128, "csr", 3);
}

static void the_shape_is_two_numbers_of_eight_bytes(void **state)
{
    struct npz_text text;
    (void)state;
    npz_shape(&text, 3, 0x0102);
    assert_int_equal(text.size, 128 + 2 * 8);
    assert_memory_equal(text.bytes + 10,
                        "{'descr': '<i8', 'fortran_order': False, 'shape': (2,), } ", 58);
    assert_memory_equal(text.bytes + 128, "\x03\0\0\0\0\0\0\0\x02\x01\0\0\0\0\0\0", 16);
}

/* --- the archive --- */

static const char LAMPS[] = "lamps, and lamps, and lamps, and lamps";

static int write_two(struct exports *exports)
{
    static struct npz_text format;
    npz_format(&format);
    const struct npz_member members[] = {{.name = "lamps.npy", .file = "weights_lamps.npy"},
                                         {.name = "format.npy", .text = &format}};
    exports_add(exports, "weights_lamps.npy", LAMPS, sizeof LAMPS);
    return npz_write(exports->part, "weights.npz", members, 2, &exports->pace, &exports->error);
}

static void assert_member(zip_t *archive, zip_uint64_t at, const char *name, const void *bytes,
                          size_t size)
{
    unsigned char read[256];
    zip_stat_t status;
    assert_int_equal(zip_stat_index(archive, at, 0, &status), 0);
    assert_string_equal(status.name, name);
    assert_int_equal(status.size, size);
    zip_file_t *file = zip_fopen_index(archive, at, 0);
    assert_non_null(file);
    assert_int_equal(zip_fread(file, read, sizeof read), size);
    assert_memory_equal(read, bytes, size);
    assert_int_equal(zip_fclose(file), 0);
}

static void its_members_are_the_files_and_texts_in_their_order(void **state)
{
    struct exports *exports = *state;
    struct npz_text format;
    char path[FIXTURE_PATH_BYTES + 64];
    npz_format(&format);
    assert_int_equal(write_two(exports), STORE_OK);
    (void)snprintf(path, sizeof path, "%s/.spring.part/weights.npz", exports->path);
    zip_t *archive = zip_open(path, ZIP_RDONLY | ZIP_CHECKCONS, NULL);
    assert_non_null(archive);
    assert_int_equal(zip_get_num_entries(archive, 0), 2);
    assert_member(archive, 0, "lamps.npy", LAMPS, sizeof LAMPS);
    assert_member(archive, 1, "format.npy", format.bytes, format.size);
    zip_discard(archive);
}

static void it_begins_with_a_file_and_ends_with_its_directory(void **state)
{
    struct exports *exports = *state;
    size_t size = 0;
    assert_int_equal(write_two(exports), STORE_OK);
    unsigned char *bytes = exports_bytes(exports, "weights.npz", &size);
    assert_memory_equal(bytes, "PK\x03\x04", 4);
    assert_memory_equal(bytes + size - 22, "PK\x05\x06", 4);
    assert_memory_equal(bytes + size - 14, "\x02\x00\x02\x00",
                        4); /* two entries, here and in all */
    free(bytes);
}

static void what_is_packed_counts_for_the_pace(void **state)
{
    struct exports *exports = *state;
    assert_int_equal(write_two(exports), STORE_OK);
    assert_true(exports->pace.done > 0);
    assert_true(exports->pace.done <= sizeof LAMPS);
}

static void once_it_is_to_stop_there_is_no_archive(void **state)
{
    struct exports *exports = *state;
    pace_stop(&exports->pace);
    assert_int_equal(write_two(exports), STORE_STOPPED);
    assert_int_equal(faccessat(export_part_fd(exports->part), "weights.npz", F_OK, 0), -1);
}

static void a_file_that_is_not_there_is_named(void **state)
{
    struct exports *exports = *state;
    const struct npz_member member = {.name = "lamps.npy", .file = "weights_lamps.npy"};
    assert_int_equal(
        npz_write(exports->part, "weights.npz", &member, 1, &exports->pace, &exports->error),
        STORE_DENIED);
    assert_string_equal(exports->error.text,
                        "weights_lamps.npy cannot be written: No such file or directory");
    assert_int_equal(faccessat(export_part_fd(exports->part), "weights.npz", F_OK, 0), -1);
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, exports_set_up, exports_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_format_is_three_bytes_without_a_dimension),
        cmocka_unit_test(the_shape_is_two_numbers_of_eight_bytes),
        TEST(its_members_are_the_files_and_texts_in_their_order),
        TEST(it_begins_with_a_file_and_ends_with_its_directory),
        TEST(what_is_packed_counts_for_the_pace),
        TEST(once_it_is_to_stop_there_is_no_archive),
        TEST(a_file_that_is_not_there_is_named),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
