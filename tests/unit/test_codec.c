/* Numbers and byte strings into records and back. */
#include "storage/codec.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

static int setup(void **state)
{
    static struct codec_writer writer;
    *state = &writer;
    return 0;
}

static int teardown(void **state)
{
    codec_deinit(*state);
    return 0;
}

static struct codec_reader reader_of(const struct codec_writer *writer)
{
    return (struct codec_reader){.data = writer->data, .size = writer->size};
}

static void numbers_are_stored_with_their_low_byte_first(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u8(writer, 0xAB);
    codec_put_u32(writer, 0x01020304);
    codec_put_u64(writer, 0x1112131415161718);
    const unsigned char expected[] = {0xAB, 4,    3,    2,    1,    0x18, 0x17,
                                      0x16, 0x15, 0x14, 0x13, 0x12, 0x11};
    assert_int_equal(writer->size, sizeof expected);
    assert_memory_equal(writer->data, expected, sizeof expected);
}

static void floats_are_stored_as_their_bits(void **state)
{
    struct codec_writer *writer = *state;
    /* IEEE 754: -2 is sign 1, exponent 128 (1 + 127), fraction 0; in 64 bits exponent 1024. */
    codec_put_f32(writer, -2.0F);
    codec_put_f64(writer, -2.0);
    const unsigned char expected[] = {0, 0, 0, 0xC0, 0, 0, 0, 0, 0, 0, 0, 0xC0};
    assert_int_equal(writer->size, sizeof expected);
    assert_memory_equal(writer->data, expected, sizeof expected);
}

static void what_is_put_is_got_in_the_same_order(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u8(writer, UINT8_MAX);
    codec_put_blob(writer, "lamp", 4);
    codec_put_u32(writer, UINT32_MAX);
    codec_put_f32(writer, 0.1F);
    codec_put_u64(writer, UINT64_MAX);
    codec_put_f64(writer, 0.1);
    struct codec_reader reader = reader_of(writer);
    size_t size = 0;
    assert_int_equal(codec_get_u8(&reader), UINT8_MAX);
    assert_memory_equal(codec_get_blob(&reader, &size), "lamp", 4);
    assert_int_equal(size, 4);
    assert_int_equal(codec_get_u32(&reader), UINT32_MAX);
    assert_float_equal(codec_get_f32(&reader), 0.1F, 0.0F);
    assert_true(codec_get_u64(&reader) == UINT64_MAX);
    assert_true(codec_get_f64(&reader) == 0.1);
    assert_false(reader.failed);
    assert_int_equal(reader.at, reader.size);
}

static void an_empty_blob_is_its_length_alone(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_blob(writer, NULL, 0);
    struct codec_reader reader = reader_of(writer);
    size_t size = 1;
    assert_int_equal(writer->size, 4);
    assert_non_null(codec_get_blob(&reader, &size));
    assert_int_equal(size, 0);
    assert_false(reader.failed);
}

static void a_record_grows_as_it_is_filled(void **state)
{
    struct codec_writer *writer = *state;
    for (uint32_t i = 0; i < 10000; i++) {
        codec_put_u32(writer, i);
    }
    struct codec_reader reader = reader_of(writer);
    for (uint32_t i = 0; i < 10000; i++) {
        assert_int_equal(codec_get_u32(&reader), i);
    }
    assert_int_equal(writer->size, 40000);
}

static void a_reset_record_is_empty_and_keeps_its_memory(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u64(writer, 1);
    writer->failed = true;
    size_t capacity = writer->capacity;
    codec_reset(writer);
    assert_int_equal(writer->size, 0);
    assert_int_equal(writer->capacity, capacity);
    assert_false(writer->failed);
}

static void nothing_is_added_to_a_failed_record(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u8(writer, 1);
    writer->failed = true;
    codec_put_u8(writer, 2);
    assert_int_equal(writer->size, 1);
}

static void reading_beyond_the_end_fails_and_gives_zeros(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u8(writer, 7);
    codec_put_u8(writer, 7);
    codec_put_u8(writer, 7);
    struct codec_reader reader = reader_of(writer);
    assert_int_equal(codec_get_u32(&reader), 0);
    assert_true(reader.failed);
    /* Also what would still have fitted is not read any more. */
    assert_int_equal(codec_get_u8(&reader), 0);
    assert_int_equal(reader.at, 0);
}

static void a_blob_that_claims_more_than_there_is_fails(void **state)
{
    struct codec_writer *writer = *state;
    codec_put_u32(writer, UINT32_MAX);
    codec_put_raw(writer, "fog", 3);
    struct codec_reader reader = reader_of(writer);
    size_t size = 1;
    assert_string_equal(codec_get_blob(&reader, &size), "");
    assert_int_equal(size, 0);
    assert_true(reader.failed);
}

static void keys_sort_as_their_numbers_do(void **state)
{
    (void)state;
    const uint64_t rising[] = {0, 1, 255, 256, 65535, 65536, 0xFFFFFFFF, 0x100000000, UINT64_MAX};
    for (size_t i = 0; i + 1 < sizeof rising / sizeof rising[0]; i++) {
        unsigned char left[8];
        unsigned char right[8];
        codec_key_u64(left, rising[i]);
        codec_key_u64(right, rising[i + 1]);
        assert_true(memcmp(left, right, 8) < 0);
        codec_key_u32(left, (uint32_t)i);
        codec_key_u32(right, (uint32_t)(i + 1) << 8);
        assert_true(memcmp(left, right, 4) < 0);
    }
}

static void a_key_gives_its_number_back(void **state)
{
    (void)state;
    unsigned char key[8];
    codec_key_u64(key, 0x0102030405060708);
    assert_memory_equal(key, "\1\2\3\4\5\6\7\10", 8);
    assert_true(codec_u64_of_key(key) == 0x0102030405060708);
    codec_key_u32(key, 0xFEDCBA98);
    assert_int_equal(codec_u32_of_key(key), 0xFEDCBA98);
}

/* The check value of this CRC, that of the digits 1 to 9 in ASCII, is CBF43926 (from memory, as
 * catalogues of CRCs have it). */
static void the_checksum_is_the_crc_of_iso_3309(void **state)
{
    (void)state;
    assert_int_equal(codec_checksum("123456789", 9), 0xCBF43926);
    assert_int_equal(codec_checksum("", 0), 0);
}

static void one_wrong_bit_changes_the_checksum(void **state)
{
    (void)state;
    unsigned char text[] = "wind south west, sea calm";
    uint32_t right = codec_checksum(text, sizeof text);
    for (size_t bit = 0; bit < sizeof text * 8; bit++) {
        text[bit / 8] ^= (unsigned char)(1U << (bit % 8));
        assert_int_not_equal(codec_checksum(text, sizeof text), right);
        text[bit / 8] ^= (unsigned char)(1U << (bit % 8));
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, setup, teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(numbers_are_stored_with_their_low_byte_first),
        TEST(floats_are_stored_as_their_bits),
        TEST(what_is_put_is_got_in_the_same_order),
        TEST(an_empty_blob_is_its_length_alone),
        TEST(a_record_grows_as_it_is_filled),
        TEST(a_reset_record_is_empty_and_keeps_its_memory),
        TEST(nothing_is_added_to_a_failed_record),
        TEST(reading_beyond_the_end_fails_and_gives_zeros),
        TEST(a_blob_that_claims_more_than_there_is_fails),
        TEST(keys_sort_as_their_numbers_do),
        TEST(a_key_gives_its_number_back),
        TEST(the_checksum_is_the_crc_of_iso_3309),
        TEST(one_wrong_bit_changes_the_checksum),
    };
    return cmocka_run_group_tests_name("codec", tests, NULL, NULL);
}
