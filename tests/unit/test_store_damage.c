/* A bit that is turned over in what is stored is told, and never leads to another item, tag or
 * change; tests/fuzz/fuzz_records.c does the same with all that there is. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/items_latest.h"
#include "storage/items_private.h"
#include "storage/proof.h"
#include "tests/unit/damage.h"

static void an_id_does_not_lead_to_another_item(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    uint64_t seq = 77;
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    (void)fixture_file_text(fixture, "log/2", "a quiet night");
    (void)fixture_file_text(fixture, "log/3", "oil delivered");
    damage_value(fixture, TABLE_IDS, damage_key("log/2"), 0); /* 2 becomes 3 */
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(items_find(view, text_of("log/2"), &seq, &error), STORE_CORRUPT);
    assert_string_equal(error.text, "the entry of the id 'log/2' is damaged");
    assert_int_equal(seq, 77);
    assert_int_equal(items_find(view, text_of("log/3"), &seq, &error), STORE_OK);
    store_end(view);
}

static void a_withdrawn_item_does_not_come_back(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    uint64_t seq = 0;
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    (void)fixture_withdraw(fixture, "log/1");
    damage_value(fixture, TABLE_IDS, damage_key("log/1"), 8);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(items_find(view, text_of("log/1"), &seq, &error), STORE_CORRUPT);
    store_end(view);
}

static void a_name_does_not_lead_to_another_tag(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct vocabulary_tag tag = {.number = 77};
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/1")},
                          (struct names){.tags = {"fog", "bell"}});
    damage_value(fixture, TABLE_TAG_NAMES, damage_key("fog"), 3); /* 0 becomes 1 */
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(vocabulary_find(view, "fog", 3, &tag, &error), STORE_CORRUPT);
    store_end(view);
    assert_string_equal(error.text, "the entry of the tag 'fog' is damaged");
    assert_int_equal(tag.number, 77);
}

static void what_is_current_is_not_erased_for_what_was_superseded(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    size_t erased = 77;
    unsigned char key[8];
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    (void)fixture_file_text(fixture, "log/2", "a quiet night");
    (void)fixture_file_text(fixture, "log/2", "a quiet night, wind S.W.");
    codec_key_u64(key, 3);
    damage_value(fixture, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key), 7); /* 2 becomes 3 */
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(store_erase_passed(view, 3, 100, &erased, &error), STORE_CORRUPT);
    assert_string_equal(error.text, "what change 3 replaced is damaged");
    assert_int_equal(erased, 77);
    fixture_commit(view);
    assert_true(is_text(fixture_item(fixture, "log/2").text, "a quiet night, wind S.W."));
}

static void what_comes_before_the_damage_is_erased(void **state)
{
    struct fixture *fixture = *state;
    unsigned char key[8];
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    (void)fixture_file_text(fixture, "log/1", "fog");
    (void)fixture_file_text(fixture, "log/1", "no fog");
    codec_key_u64(key, 3);
    damage_value(fixture, TABLE_SUPERSEDED, kv_bytes_of(key, sizeof key), 0);
    assert_int_equal(fixture_erase(fixture, 3), 1);
}

static void the_totals_are_not_others(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    damage_value(fixture, TABLE_META, damage_key("store"), 4 + STORE_UUID_BYTES); /* the seq */
    fixture_close(fixture);
    assert_int_equal(store_open(&fixture->settings, &fixture->store, &error), STORE_CORRUPT);
    assert_string_equal(error.text, "the store's first record is damaged");
}

/* A record whose checksum is right, but which no version of ours has written. */
static void craft_record(struct fixture *fixture, const char *id, uint64_t replaced)
{
    struct store_error error = {0};
    struct codec_writer *record = &fixture->buffer;
    unsigned char value[ID_ENTRY_BYTES + PROOF_BYTES];
    struct codec_writer entry = {.data = value, .capacity = sizeof value};
    struct store_view *view = fixture_write(fixture);
    codec_reset(record);
    codec_put_u8(record, RECORD_WITHDRAWAL);
    codec_put_u64(record, replaced);
    codec_put_u64(record, 0);
    codec_put_u32(record, 0);
    codec_put_blob(record, id, strlen(id));
    view->totals.seq++;
    assert_int_equal(records_put(view, view->totals.seq, record, &error), STORE_OK);
    codec_put_u64(&entry, view->totals.seq);
    codec_put_u8(&entry, 1);
    proof_put(&entry, damage_key("log/1"));
    assert_int_equal(
        kv_put(view->txn, TABLE_IDS, damage_key("log/1"), kv_bytes_of(value, sizeof value), &error),
        STORE_OK);
    fixture_commit(view);
}

static void a_record_without_an_id_is_damage(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct item_record record;
    craft_record(fixture, "", 0);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(items_read(view, 1, &fixture->reading, &record, &error), STORE_CORRUPT);
    store_end(view);
    assert_string_equal(error.text, "the record of change 1 is damaged");
}

static void a_record_that_replaces_itself_is_not_followed_for_ever(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    bool was = false;
    (void)fixture_file_text(fixture, "log/1", "fog from the west");
    craft_record(fixture, "log/1", 2);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(
        items_was_latest(view, text_of("log/1"), 1, 1, &fixture->reading, &was, &error),
        STORE_CORRUPT);
    store_end(view);
    assert_string_equal(error.text, "the record of change 2 is damaged");
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(an_id_does_not_lead_to_another_item),
        TEST(a_withdrawn_item_does_not_come_back),
        TEST(a_name_does_not_lead_to_another_tag),
        TEST(what_is_current_is_not_erased_for_what_was_superseded),
        TEST(what_comes_before_the_damage_is_erased),
        TEST(the_totals_are_not_others),
        TEST(a_record_without_an_id_is_damage),
        TEST(a_record_that_replaces_itself_is_not_followed_for_ever),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
