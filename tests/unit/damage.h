/*
 * damage: turns a bit of a stored value over, as bit rot does. Static functions, since each test is
 * one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_DAMAGE_H
#define UNDERTAG_TESTS_DAMAGE_H

#include "storage/store_private.h"
#include "tests/unit/store_fixture.h"

/* In byte `at` of the value under a key of the table, in the store itself. */
static inline void damage_value(struct fixture *fixture, enum store_table table,
                                struct kv_bytes key, size_t at)
{
    struct store_error error = {0};
    struct kv_bytes value = {0};
    unsigned char copy[KV_ENTRY_BYTES] = {0};
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(kv_get(view->txn, table, key, &value, &error), STORE_OK);
    assert_true(at < value.size && value.size <= sizeof copy);
    memcpy(copy, value.data, value.size);
    copy[at] ^= 1U;
    assert_int_equal(kv_put(view->txn, table, key, kv_bytes_of(copy, value.size), &error),
                     STORE_OK);
    /* As a commit of the store, but without the record of its totals, which may be the damaged. */
    assert_int_equal(kv_commit(view->txn, &error), STORE_OK);
    free(view);
}

static inline struct kv_bytes damage_key(const char *name)
{
    return kv_bytes_of(name, strlen(name));
}

#endif
