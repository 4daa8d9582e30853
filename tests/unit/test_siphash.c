/*
 * SipHash-2-4 against the published test vectors: the paper's own (Aumasson & Bernstein 2012,
 * Appendix A: 15 bytes) and those of its authors' reference code, the key being the bytes 00 to 0f
 * and the message 00, 01, 02, … The table below is from memory and was found again by
 *   openssl mac -macopt hexkey:000102030405060708090a0b0c0d0e0f -macopt size:8 -in FILE SIPHASH
 * which prints a hash's bytes from the least on.
 */
#include "daemon/text/siphash.h"

#include "tests/unit/near.h"

static const struct siphash_key PAPER_KEY = {0x0706050403020100U, 0x0f0e0d0c0b0a0908U};

static uint64_t hash_of_first(size_t bytes)
{
    unsigned char message[64];
    for (size_t i = 0; i < sizeof message; i++) {
        message[i] = (unsigned char)i;
    }
    return siphash(&PAPER_KEY, message, bytes);
}

static void the_example_of_the_paper_has_its_published_hash(void **state)
{
    (void)state;
    assert_true(hash_of_first(15) == 0xa129ca6149be45e5U);
}

static void the_published_vectors_are_met(void **state)
{
    (void)state;
    static const struct {
        size_t bytes;
        uint64_t hash;
    } vectors[] = {
        {0, 0x726fdb47dd0e0e31U},  {1, 0x74f839c593dc67fdU},  {2, 0x0d6c8009d9a94f5aU},
        {3, 0x85676696d7fb7e2dU},  {4, 0xcf2794e0277187b7U},  {5, 0x18765564cd99a68dU},
        {6, 0xcbc9466e58fee3ceU},  {7, 0xab0200f58b01d137U},  {8, 0x93f5f5799a932462U},
        {16, 0x3f2acc7f57c29bdbU}, {63, 0x958a324ceb064572U},
    };
    for (size_t i = 0; i < sizeof vectors / sizeof vectors[0]; i++) {
        assert_true(hash_of_first(vectors[i].bytes) == vectors[i].hash);
    }
}

static void where_the_bytes_lie_changes_nothing(void **state)
{
    (void)state;
    const char text[] = "?harbour light";
    char aligned[sizeof text - 1];
    for (size_t i = 0; i < sizeof aligned; i++) {
        aligned[i] = text[i + 1];
    }
    assert_true(siphash(&PAPER_KEY, text + 1, 13) == siphash(&PAPER_KEY, aligned, 13));
}

static void another_key_gives_another_hash(void **state)
{
    (void)state;
    const struct siphash_key low = {1, 0};
    const struct siphash_key high = {0, 1};
    assert_true(siphash(&low, "fog", 3) != siphash(&high, "fog", 3));
}

static void every_byte_counts(void **state)
{
    (void)state;
    unsigned char message[40] = {0};
    uint64_t plain = siphash(&PAPER_KEY, message, sizeof message);
    for (size_t i = 0; i < sizeof message; i++) {
        message[i] = 0x80;
        assert_true(siphash(&PAPER_KEY, message, sizeof message) != plain);
        message[i] = 0;
    }
}

static void zero_bytes_at_the_end_count(void **state)
{
    (void)state;
    const char nothing[16] = {0};
    assert_true(siphash(&PAPER_KEY, nothing, 7) != siphash(&PAPER_KEY, nothing, 8));
    assert_true(siphash(&PAPER_KEY, nothing, 8) != siphash(&PAPER_KEY, nothing, 9));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_example_of_the_paper_has_its_published_hash),
        cmocka_unit_test(the_published_vectors_are_met),
        cmocka_unit_test(where_the_bytes_lie_changes_nothing),
        cmocka_unit_test(another_key_gives_another_hash),
        cmocka_unit_test(every_byte_counts),
        cmocka_unit_test(zero_bytes_at_the_end_count),
    };
    return cmocka_run_group_tests_name("siphash", tests, NULL, NULL);
}
