/* What is stored is looked through: what is whole, and each kind of damage by its name. */
#include "storage/verify.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "storage/kv.h"
#include "tests/unit/store_fixture.h"

/* --- a store of three entries, one of them revised and one withdrawn --- */

enum {
    SAID_BYTES = 2048
};

/* As store.c names them. */
enum {
    IDS,
    RECORDS,
    SUPERSEDED,
    TAGS,
    TAG_NAMES,
    TABLES
};
static const char *const names[] = {"ids", "records", "superseded", "tags", "tag_names"};

static int set_up(void **state)
{
    (void)fixture_setup(state);
    struct fixture *fixture = *state;
    const struct names fog = {.tags = {"fog", "wreck"}};
    const struct names lamp = {.tags = {"lamp"}};
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/1")}, fog);
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/2")}, lamp);
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/3")}, lamp);
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/2")}, fog); /* 4 */
    (void)fixture_withdraw(fixture, "log/3");                                          /* 5 */
    return 0;
}

static void note_fault(void *user, const char *sentence)
{
    char *said = user;
    size_t used = strlen(said);
    (void)snprintf(said + used, SAID_BYTES - used, "%s; ", sentence);
}

static struct verify_store_sums look(struct fixture *fixture, char said[SAID_BYTES])
{
    struct store_error error = {0};
    struct verify_store_sums sums;
    const struct verify_sink sink = {.user = said, .fault = note_fault};
    said[0] = '\0';
    fixture_close(fixture);
    fixture->settings.read_only = true;
    fixture_open(fixture);
    assert_int_equal(verify_store(fixture->store, &sink, &sums, &error), STORE_OK);
    fixture_close(fixture);
    fixture->settings.read_only = false;
    fixture_open(fixture);
    return sums;
}

static void assert_faults(struct fixture *fixture, const char *expected)
{
    char said[SAID_BYTES];
    struct verify_store_sums sums = look(fixture, said);
    assert_string_equal(said, expected);
    assert_true((sums.faults > 0) == (said[0] != '\0'));
}

/* --- damage, in one of the closed store's tables --- */

static struct kv *open_tables(struct fixture *fixture)
{
    static char directory[FIXTURE_PATH_BYTES + 8];
    struct store_error error = {0};
    struct kv *kv = NULL;
    fixture_close(fixture);
    (void)snprintf(directory, sizeof directory, "%s/store", fixture->home);
    const struct kv_settings settings = {.directory = directory,
                                         .map_bytes = FIXTURE_MAP_BYTES,
                                         .tables = names,
                                         .table_count = TABLES};
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    return kv;
}

/* Changes the last byte of a value, or takes the entry out. */
static void damage(struct fixture *fixture, unsigned table, struct kv_bytes key, bool take_out)
{
    struct store_error error = {0};
    struct kv *kv = open_tables(fixture);
    struct kv_txn *txn = NULL;
    struct kv_bytes value = {0};
    unsigned char changed[512] = {0};
    assert_int_equal(kv_begin(kv, true, &txn, &error), STORE_OK);
    assert_int_equal(kv_get(txn, table, key, &value, &error), STORE_OK);
    assert_true(value.size > 0 && value.size <= sizeof changed);
    memcpy(changed, value.data, value.size);
    changed[value.size - 1] ^= 1;
    assert_int_equal(take_out ? kv_delete(txn, table, key, &error)
                              : kv_put(txn, table, key, kv_bytes_of(changed, value.size), &error),
                     STORE_OK);
    assert_int_equal(kv_commit(txn, &error), STORE_OK);
    kv_close(kv);
    fixture_open(fixture);
}

static void damage_numbered(struct fixture *fixture, unsigned table, uint64_t number,
                            size_t key_bytes, bool take_out)
{
    unsigned char key[10] = {0}; /* big-endian; a record's first piece has two zeros behind */
    for (size_t i = 0; i < (table == RECORDS ? 8 : key_bytes); i++) {
        size_t shift = 8 * ((table == RECORDS ? 8 : key_bytes) - 1 - i);
        key[i] = (unsigned char)(number >> shift);
    }
    damage(fixture, table, kv_bytes_of(key, key_bytes), take_out);
}

static void damage_record(struct fixture *fixture, uint64_t seq, bool take_out)
{
    damage_numbered(fixture, RECORDS, seq, 10, take_out);
}

static struct kv_bytes bytes_of(const char *text)
{
    return kv_bytes_of(text, strlen(text));
}

/* --- tests --- */

static void a_sound_store_has_no_fault(void **state)
{
    char said[SAID_BYTES];
    struct verify_store_sums sums = look(*state, said);
    assert_string_equal(said, "");
    assert_int_equal(sums.faults, 0);
    assert_int_equal(sums.records, 5); /* two are superseded */
    assert_int_equal(sums.totals.items, 2);
    assert_int_equal(sums.totals.tags, 3);
}

static void what_is_superseded_need_not_be_there_once_it_is_erased(void **state)
{
    char said[SAID_BYTES];
    assert_int_equal(fixture_erase(*state, 5), 2);
    assert_int_equal(look(*state, said).records, 3);
    assert_string_equal(said, "");
}

/* log/1 had fog and wreck. */
static void a_damaged_item_is_named_and_missing_from_the_counts(void **state)
{
    damage_record(*state, 1, false);
    assert_faults(*state, "item log/1: the record of change 1 is damaged; "
                          "tag fog (number 0): its counts are not those of the items; "
                          "tag wreck (number 1): its counts are not those of the items; "
                          "there are 1 items, and 2 on record; ");
}

static void a_missing_item_is_named(void **state)
{
    char said[SAID_BYTES];
    damage_record(*state, 1, true);
    assert_true(look(*state, said).faults > 1);
    assert_non_null(strstr(said, "item log/1: the record of change 1 is missing; "));
    assert_non_null(strstr(said, "there are 4 records, and 5 are known by their items or changes"));
}

static void a_damaged_withdrawal_is_named(void **state)
{
    damage_record(*state, 5, false);
    assert_faults(*state, "item log/3: the record of change 5 is damaged; ");
}

static void a_damaged_record_that_was_superseded_is_named_by_its_successor(void **state)
{
    damage_record(*state, 2, false);
    assert_faults(*state, "change 4: the record that it took the place of is damaged; ");
}

static void a_damaged_entry_of_an_id_is_named(void **state)
{
    char said[SAID_BYTES];
    damage(*state, IDS, bytes_of("log/1"), false);
    assert_true(look(*state, said).faults > 0);
    assert_non_null(strstr(said, "item log/1: its entry is damaged; "));
}

static void a_lost_id_is_missed_by_the_counts(void **state)
{
    char said[SAID_BYTES];
    damage(*state, IDS, bytes_of("log/1"), true);
    assert_true(look(*state, said).faults > 0);
    assert_non_null(strstr(said, "there are 1 items, and 2 on record; "));
    assert_non_null(strstr(said, "there are 5 records, and 4 are known by their items or changes"));
}

static void a_lost_note_of_what_was_superseded_is_missed(void **state)
{
    damage_numbered(*state, SUPERSEDED, 4, 8, true);
    assert_faults(*state, "there are 5 records, and 4 are known by their items or changes; ");
}

static void a_damaged_note_of_what_was_superseded_is_told(void **state)
{
    damage_numbered(*state, SUPERSEDED, 4, 8, false);
    assert_faults(*state, "what change 4 replaced is damaged; ");
}

static void a_damaged_tag_is_named_by_its_number(void **state)
{
    damage_numbered(*state, TAGS, 1, 4, false);
    assert_faults(*state, "the record of tag number 1 is damaged; ");
}

static void a_name_that_leads_to_another_tag_is_told(void **state)
{
    damage(*state, TAG_NAMES, bytes_of("fog"), false);
    assert_faults(*state, "tag fog (number 0): its name does not lead to it; ");
}

static void a_lost_name_is_told(void **state)
{
    damage(*state, TAG_NAMES, bytes_of("fog"), true);
    assert_faults(*state, "tag fog (number 0): its name does not lead to it; "
                          "there are 2 names of tags, and 3 tags; ");
}

static void a_store_that_is_not_there_is_not_made(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct store *store = NULL;
    char home[FIXTURE_PATH_BYTES + 8];
    (void)snprintf(home, sizeof home, "%s/none", fixture->home);
    const struct store_settings settings = {
        .home = home, .map_bytes = FIXTURE_MAP_BYTES, .read_only = true};
    assert_int_equal(store_open(&settings, &store, &error), STORE_DENIED);
    assert_int_equal(store_open(&settings, &store, &error), STORE_DENIED);
}

int main(void)
{
#define verify_test(name) cmocka_unit_test_setup_teardown(name, set_up, fixture_teardown)
    const struct CMUnitTest tests[] = {
        verify_test(a_sound_store_has_no_fault),
        verify_test(what_is_superseded_need_not_be_there_once_it_is_erased),
        verify_test(a_damaged_item_is_named_and_missing_from_the_counts),
        verify_test(a_missing_item_is_named),
        verify_test(a_damaged_withdrawal_is_named),
        verify_test(a_damaged_record_that_was_superseded_is_named_by_its_successor),
        verify_test(a_damaged_entry_of_an_id_is_named),
        verify_test(a_lost_id_is_missed_by_the_counts),
        verify_test(a_lost_note_of_what_was_superseded_is_missed),
        verify_test(a_damaged_note_of_what_was_superseded_is_told),
        verify_test(a_damaged_tag_is_named_by_its_number),
        verify_test(a_name_that_leads_to_another_tag_is_told),
        verify_test(a_lost_name_is_told),
        verify_test(a_store_that_is_not_there_is_not_made),
    };
    return cmocka_run_group_tests_name("verifying a store", tests, NULL, NULL);
}
