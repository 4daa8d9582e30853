/* An environment as a stream of bytes, taken while others write. */
#include "storage/kv_copy.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <sys/stat.h>

#include "tests/unit/store_fixture.h"

enum {
    LAMPS,
    SHIPS,
    ENTRIES = 2000,
    VALUE_BYTES = 500
};

static const char *const names[] = {"lamps", "ships"};

struct copying {
    char home[FIXTURE_PATH_BYTES];
    char from[FIXTURE_PATH_BYTES + 8];
    char to[FIXTURE_PATH_BYTES + 8];
    struct kv *kv;
    FILE *copy;
    uint64_t bytes;
    unsigned pieces;
    void (*meanwhile)(struct copying *copying); /* with the first bytes; NULL: nothing */
    unsigned most_pieces;                       /* then it is stopped; 0: never */
    struct store_error error;
};

static int open_kv(const char *directory, bool is_copy, struct kv **ret_kv,
                   struct store_error *error)
{
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = FIXTURE_MAP_BYTES,
                                         .tables = names,
                                         .table_count = 2,
                                         .read_only = is_copy,
                                         .is_alone = is_copy};
    return kv_open(&settings, ret_kv, error);
}

static int set_up(void **state)
{
    static struct copying copying;
    copying = (struct copying){0};
    home_make(copying.home);
    (void)snprintf(copying.from, sizeof copying.from, "%s/from", copying.home);
    (void)snprintf(copying.to, sizeof copying.to, "%s/to", copying.home);
    assert_int_equal(mkdir(copying.to, 0700), 0);
    assert_int_equal(open_kv(copying.from, false, &copying.kv, &copying.error), STORE_OK);
    *state = &copying;
    return 0;
}

static int tear_down(void **state)
{
    struct copying *copying = *state;
    kv_close(copying->kv);
    home_remove(copying->home);
    return 0;
}

/* --- steps --- */

static struct kv_bytes key_of(unsigned number, unsigned char key[4])
{
    memcpy(key, &number, 4);
    return kv_bytes_of(key, 4);
}

/* Puts entries of one byte over and over, or deletes every second of them (`value` 0). */
static void put_all(struct copying *copying, unsigned char value)
{
    unsigned char bytes[VALUE_BYTES];
    unsigned char key[4];
    struct kv_txn *txn = NULL;
    memset(bytes, value, sizeof bytes);
    assert_int_equal(kv_begin(copying->kv, true, &txn, &copying->error), STORE_OK);
    for (unsigned i = 0; i<ENTRIES; i += value> 0 ? 1 : 2) {
        int code = value > 0 ? kv_put(txn, LAMPS, key_of(i, key), kv_bytes_of(bytes, sizeof bytes),
                                      &copying->error)
                             : kv_delete(txn, LAMPS, key_of(i, key), &copying->error);
        assert_int_equal(code, STORE_OK);
    }
    assert_int_equal(kv_commit(txn, &copying->error), STORE_OK);
}

static int take(void *user, const void *data, size_t size)
{
    struct copying *copying = user;
    if (copying->pieces++ == 0 && copying->meanwhile) {
        copying->meanwhile(copying);
    }
    if (copying->pieces == copying->most_pieces) {
        return 1;
    }
    copying->bytes += size;
    return fwrite(data, 1, size, copying->copy) == size ? 0 : 1;
}

static int copy(struct copying *copying)
{
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/data.mdb", copying->to);
    copying->copy = fopen(path, "w");
    assert_non_null(copying->copy);
    int code = kv_copy(copying->kv, take, copying, &copying->error);
    assert_int_equal(fclose(copying->copy), 0);
    return code;
}

/* That the copy has so many entries, all of this byte. */
static void assert_copy_has(struct copying *copying, uint64_t expected, unsigned char value)
{
    unsigned char key[4];
    uint64_t count = 0;
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    struct kv_bytes found = {0};
    assert_int_equal(open_kv(copying->to, true, &kv, &copying->error), STORE_OK);
    assert_int_equal(kv_begin(kv, false, &txn, &copying->error), STORE_OK);
    assert_int_equal(kv_count(txn, LAMPS, &count, &copying->error), STORE_OK);
    assert_int_equal(count, expected);
    for (unsigned i = 1; i < ENTRIES && expected > 0; i += 2) {
        assert_int_equal(kv_get(txn, LAMPS, key_of(i, key), &found, &copying->error), STORE_OK);
        assert_int_equal(found.size, VALUE_BYTES);
        assert_int_equal(((const unsigned char *)found.data)[VALUE_BYTES - 1], value);
    }
    kv_abort(txn);
    kv_close(kv);
}

/* --- whole copies --- */

static void a_copy_has_all_that_is_committed(void **state)
{
    struct copying *copying = *state;
    put_all(copying, 'a');
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, ENTRIES, 'a');
}

static void an_empty_environment_can_be_copied(void **state)
{
    struct copying *copying = *state;
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, 0, 0);
}

/* Half of the entries are gone, and with them half of the pages: what is left is about 2,000 / 2
 * entries of 500 bytes, and less than the file by the same again. */
static void a_copy_has_no_free_pages_and_the_bytes_that_were_told(void **state)
{
    struct copying *copying = *state;
    uint64_t told = 0;
    put_all(copying, 'a');
    put_all(copying, 'b'); /* in other pages */
    assert_int_equal(kv_copy_bytes(copying->kv, &told, &copying->error), STORE_OK);
    assert_int_equal(copy(copying), STORE_OK);
    assert_int_equal(copying->bytes, told);
    assert_true(kv_file_bytes(copying->kv) > told + ENTRIES * VALUE_BYTES / 2);
    assert_copy_has(copying, ENTRIES, 'b');
}

static void no_lock_file_is_made_beside_a_copy_that_is_read_alone(void **state)
{
    struct copying *copying = *state;
    struct stat status;
    char path[FIXTURE_PATH_BYTES + 32];
    put_all(copying, 'a');
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, ENTRIES, 'a');
    (void)snprintf(path, sizeof path, "%s/lock.mdb", copying->to);
    assert_int_not_equal(stat(path, &status), 0);
}

/* --- meanwhile --- */

static void write_over(struct copying *copying)
{
    put_all(copying, 'b');
}

static void a_copy_is_of_the_moment_of_its_first_bytes(void **state)
{
    struct copying *copying = *state;
    put_all(copying, 'a');
    copying->meanwhile = write_over;
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, ENTRIES, 'a');
}

/* A round of scrubbing begins by opening the environment anew, which must not happen now. */
static void erase_and_scrub(struct copying *copying)
{
    size_t left = 0;
    put_all(copying, 0);
    assert_int_equal(kv_scrub(copying->kv, 10000, &left, &copying->error), STORE_OK);
    assert_true(left > 0);
}

static void nothing_that_a_copy_needs_is_scrubbed(void **state)
{
    struct copying *copying = *state;
    put_all(copying, 'a');
    copying->meanwhile = erase_and_scrub;
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, ENTRIES, 'a');
}

/* --- ended --- */

static void whoever_takes_the_bytes_may_end_it(void **state)
{
    struct copying *copying = *state;
    put_all(copying, 'a');
    copying->most_pieces = 3;
    assert_int_equal(copy(copying), STORE_STOPPED);
    assert_int_equal(copying->pieces, 3);
    assert_string_equal(copying->error.text, "");
    put_all(copying, 'b'); /* it is as it was */
    copying->most_pieces = 0;
    assert_int_equal(copy(copying), STORE_OK);
    assert_copy_has(copying, ENTRIES, 'b');
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_copy_has_all_that_is_committed),
        TEST(an_empty_environment_can_be_copied),
        TEST(a_copy_has_no_free_pages_and_the_bytes_that_were_told),
        TEST(no_lock_file_is_made_beside_a_copy_that_is_read_alone),
        TEST(a_copy_is_of_the_moment_of_its_first_bytes),
        TEST(nothing_that_a_copy_needs_is_scrubbed),
        TEST(whoever_takes_the_bytes_may_end_it),
    };
    return cmocka_run_group_tests_name("kv_copy", tests, NULL, NULL);
}
