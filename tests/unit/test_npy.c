/*
 * Arrays as files, byte by byte as NumPy Enhancement Proposal 1 lays them out (format version 1.0):
 * "\x93NUMPY", two bytes of version, the header's length in two bytes (the low one first), then the
 * header: a dictionary of Python with descr, fortran_order and shape, filled up with spaces to a
 * multiple of 16 in all and ended by a line end; then the numbers.
 */
#include "daemon/snapshot/npy.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/exports_fixture.h"

static void make(struct exports *exports, enum npy_type type, uint64_t count, struct npy *ret_npy)
{
    int code = npy_create(exports->part, "lamps.npy", type, count, ret_npy, &exports->error);
    if (code != STORE_OK) {
        fail_msg("%d: %s", code, exports->error.text);
    }
}

static void a_header_is_as_the_format_has_it(void **state)
{
    /* 10 bytes, 58 of the dictionary, 59 spaces, and the line end: 128 = 8 · 16 */
    static const char EXPECTED[] = "\x93NUMPY\x01\x00\x76\x00"
                                   "{'descr': '<f4', 'fortran_order': False, 'shape': (1911,), }"
                                   "                                                         \n";
    unsigned char header[NPY_HEADER_BYTES];
    (void)state;
    assert_int_equal(sizeof EXPECTED - 1, NPY_HEADER_BYTES);
    npy_header(header, NPY_F4, 1911);
    assert_memory_equal(header, EXPECTED, NPY_HEADER_BYTES);
}

static void every_type_has_its_code_and_its_size(void **state)
{
    static const struct {
        enum npy_type type;
        const char *code;
        size_t bytes;
    } TYPES[] = {{NPY_F4, "'<f4'", 4}, {NPY_I4, "'<i4'", 4}, {NPY_I8, "'<i8'", 8}};
    (void)state;
    for (size_t i = 0; i < sizeof TYPES / sizeof TYPES[0]; i++) {
        unsigned char header[NPY_HEADER_BYTES];
        npy_header(header, TYPES[i].type, 1);
        assert_memory_equal(header + 10, "{'descr': ", 10);
        assert_memory_equal(header + 20, TYPES[i].code, 5);
        assert_int_equal(npy_number_bytes(TYPES[i].type), TYPES[i].bytes);
    }
}

static void the_largest_count_fits_the_header(void **state)
{
    unsigned char header[NPY_HEADER_BYTES];
    (void)state;
    npy_header(header, NPY_I8, UINT64_MAX);
    assert_non_null(memmem(header, sizeof header, "(18446744073709551615,)", 23));
    assert_int_equal(header[NPY_HEADER_BYTES - 1], '\n');
}

static void the_numbers_follow_the_header_as_they_lie_in_memory(void **state)
{
    struct exports *exports = *state;
    struct npy npy;
    size_t size = 0;
    make(exports, NPY_I4, 3, &npy);
    const int32_t numbers[] = {1, -2, 0x01020304};
    memcpy(npy.data, numbers, sizeof numbers);
    npy_close(&npy);
    unsigned char *bytes = exports_bytes(exports, "lamps.npy", &size);
    assert_int_equal(size, NPY_HEADER_BYTES + 3 * 4);
    assert_memory_equal(bytes + NPY_HEADER_BYTES,
                        "\x01\x00\x00\x00\xFE\xFF\xFF\xFF\x04\x03\x02\x01", 12);
    free(bytes);
}

static void an_array_of_nothing_is_a_header(void **state)
{
    struct exports *exports = *state;
    struct npy npy;
    size_t size = 0;
    make(exports, NPY_F4, 0, &npy);
    npy_close(&npy);
    unsigned char *bytes = exports_bytes(exports, "lamps.npy", &size);
    assert_int_equal(size, NPY_HEADER_BYTES);
    assert_non_null(memmem(bytes, size, "'shape': (0,)", 13));
    free(bytes);
}

static void what_was_not_written_is_zero(void **state)
{
    struct exports *exports = *state;
    struct npy npy;
    make(exports, NPY_I8, 1000, &npy);
    const int64_t *numbers = npy.data;
    for (size_t i = 0; i < 1000; i++) {
        assert_int_equal(numbers[i], 0);
    }
    npy_close(&npy);
}

static void a_file_that_is_there_is_not_written_over(void **state)
{
    struct exports *exports = *state;
    struct npy npy = {.fd = -7};
    exports_add(exports, "lamps.npy", "oil", 3);
    assert_int_not_equal(npy_create(exports->part, "lamps.npy", NPY_F4, 1, &npy, &exports->error),
                         STORE_OK);
    assert_int_equal(npy.fd, -7); /* as it was */
    assert_true(exports->error.text[0] != '\0');
}

/* No file system has room for 2^60 bytes. */
static void what_there_is_no_room_for_is_refused(void **state)
{
    struct exports *exports = *state;
    struct npy npy;
    assert_int_not_equal(
        npy_create(exports->part, "lamps.npy", NPY_I8, (uint64_t)1 << 57, &npy, &exports->error),
        STORE_OK);
    assert_non_null(strstr(exports->error.text, "lamps.npy cannot be written: "));
}

#define TEST(function) cmocka_unit_test_setup_teardown(function, exports_set_up, exports_tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_header_is_as_the_format_has_it),
        cmocka_unit_test(every_type_has_its_code_and_its_size),
        cmocka_unit_test(the_largest_count_fits_the_header),
        TEST(the_numbers_follow_the_header_as_they_lie_in_memory),
        TEST(an_array_of_nothing_is_a_header),
        TEST(what_was_not_written_is_zero),
        TEST(a_file_that_is_there_is_not_written_over),
        TEST(what_there_is_no_room_for_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
