/* What small values end with, so that damage is seen. */
#include "storage/proof.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

enum {
    VALUE_BYTES = 9
};

static const struct kv_bytes KEY = {"farrow/1", 8};

/* "123456789" under KEY, with its proof. */
static struct kv_bytes proven(unsigned char bytes[VALUE_BYTES + PROOF_BYTES])
{
    struct codec_writer writer = {
        .data = bytes, .size = VALUE_BYTES, .capacity = VALUE_BYTES + PROOF_BYTES};
    memcpy(bytes, "123456789", VALUE_BYTES);
    proof_put(&writer, KEY);
    assert_int_equal(writer.size, VALUE_BYTES + PROOF_BYTES);
    assert_ptr_equal(writer.data, bytes);
    return kv_bytes_of(bytes, VALUE_BYTES + PROOF_BYTES);
}

static void what_was_put_holds(void **state)
{
    (void)state;
    unsigned char bytes[VALUE_BYTES + PROOF_BYTES];
    assert_true(proof_holds(KEY, proven(bytes), VALUE_BYTES));
}

static void a_proof_is_the_checksums_of_key_and_value(void **state)
{
    (void)state;
    unsigned char bytes[VALUE_BYTES + PROOF_BYTES];
    /* CRC-32 of "123456789" is cbf43926: the check value of ISO 3309's in Koopman's tables and all
     * catalogues (from memory). */
    uint32_t proof = UINT32_C(0xCBF43926) ^ codec_checksum(KEY.data, KEY.size);
    (void)proven(bytes);
    assert_int_equal(bytes[VALUE_BYTES], 0xA5); /* the mark */
    for (size_t i = 0; i < sizeof proof; i++) {
        assert_int_equal(bytes[VALUE_BYTES + 1 + i], proof >> 8 * i & 0xFF);
    }
}

static void a_bit_that_is_turned_over_is_seen_wherever_it_is(void **state)
{
    (void)state;
    unsigned char bytes[VALUE_BYTES + PROOF_BYTES];
    for (unsigned bit = 0; bit < 8 * sizeof bytes; bit++) {
        struct kv_bytes value = proven(bytes);
        bytes[bit / 8] ^= (unsigned char)(1U << bit % 8);
        assert_false(proof_holds(KEY, value, VALUE_BYTES));
    }
}

static void the_value_of_another_key_does_not_hold(void **state)
{
    (void)state;
    unsigned char bytes[VALUE_BYTES + PROOF_BYTES];
    assert_false(proof_holds(kv_bytes_of("farrow/2", 8), proven(bytes), VALUE_BYTES));
}

static void a_value_of_another_length_does_not_hold(void **state)
{
    (void)state;
    unsigned char bytes[VALUE_BYTES + PROOF_BYTES];
    struct kv_bytes value = proven(bytes);
    for (value.size = 0; value.size < VALUE_BYTES + PROOF_BYTES; value.size++) {
        assert_int_equal(proof_holds(KEY, value, VALUE_BYTES), value.size == VALUE_BYTES);
    }
}

static void what_an_earlier_version_wrote_has_no_proof_and_holds(void **state)
{
    (void)state;
    assert_true(proof_holds(KEY, kv_bytes_of("123456789", VALUE_BYTES), VALUE_BYTES));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_was_put_holds),
        cmocka_unit_test(a_proof_is_the_checksums_of_key_and_value),
        cmocka_unit_test(a_bit_that_is_turned_over_is_seen_wherever_it_is),
        cmocka_unit_test(the_value_of_another_key_does_not_hold),
        cmocka_unit_test(a_value_of_another_length_does_not_hold),
        cmocka_unit_test(what_an_earlier_version_wrote_has_no_proof_and_holds),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
