/* The store as a whole: opening, views, running out of room, damage. */
#include <fcntl.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <unistd.h>

#include <cmocka.h>

#include "storage/kv.h"
#include "storage/proof.h"
#include "tests/unit/store_fixture.h"

static const char entry[] = "lamp lit at dusk, fog from the west after midnight";

/* --- opening --- */

static void a_new_store_is_empty(void **state)
{
    struct fixture *fixture = *state;
    struct store_totals totals = fixture_totals(fixture);
    assert_int_equal(totals.seq, 0);
    assert_int_equal(totals.items, 0);
    assert_int_equal(totals.tags, 0);
    assert_true(store_file_bytes(fixture->store) > 0);
}

static void opening_it_again_keeps_what_was_there(void **state)
{
    struct fixture *fixture = *state;
    unsigned char uuid[STORE_UUID_BYTES];
    struct store_text tag = text_of("fog");
    memcpy(uuid, store_uuid(fixture->store), sizeof uuid);
    (void)fixture_file(
        fixture, (struct item_filing){
                     .id = text_of("log/1"), .text = text_of(entry), .tags = &tag, .tag_count = 1});
    fixture_close(fixture);
    fixture_open(fixture);
    struct store_totals totals = fixture_totals(fixture);
    assert_memory_equal(store_uuid(fixture->store), uuid, sizeof uuid);
    assert_int_equal(totals.seq, 1);
    assert_int_equal(totals.items, 1);
    assert_int_equal(totals.tags, 1);
    assert_true(is_text(fixture_record(fixture, 1).text, entry));
}

/* RFC 9562: version 4 in the high half of byte 6, variant 10 in the high bits of byte 8. */
static void each_store_has_a_random_uuid_of_its_own(void **state)
{
    struct fixture *first = *state;
    void *other = NULL;
    assert_int_equal(fixture_setup(&other), 0);
    struct fixture *second = other;
    bool is_same =
        memcmp(store_uuid(first->store), store_uuid(second->store), STORE_UUID_BYTES) == 0;
    assert_int_equal(fixture_teardown(&other), 0);
    assert_false(is_same);
    assert_int_equal(store_uuid(first->store)[6] >> 4, 4);
    assert_int_equal(store_uuid(first->store)[8] >> 6, 2);
}

/* Puts a format into the first record, as a later version would. */
static void write_format(struct fixture *fixture, const void *record, size_t size)
{
    static const char *const tables[] = {"meta"};
    char directory[FIXTURE_PATH_BYTES + 8];
    (void)snprintf(directory, sizeof directory, "%s/store", fixture->home);
    struct kv_settings settings = {
        .directory = directory, .map_bytes = FIXTURE_MAP_BYTES, .tables = tables, .table_count = 1};
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, true, &txn, &error), STORE_OK);
    assert_int_equal(kv_put(txn, 0, kv_bytes_of("store", 5), kv_bytes_of(record, size), &error),
                     STORE_OK);
    assert_int_equal(kv_commit(txn, &error), STORE_OK);
    kv_close(kv);
}

static void a_store_of_a_newer_version_is_refused_with_a_sentence(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    const unsigned char newer[] = {STORE_FORMAT + 1, 0, 0, 0};
    fixture_close(fixture);
    write_format(fixture, newer, sizeof newer);
    assert_int_equal(store_open(&fixture->settings, &fixture->store, &error), STORE_NEWER);
    assert_null(fixture->store);
    assert_string_equal(error.text, "the store was written by a newer version of undertag (format "
                                    "4, this version reads up to 3)");
}

static void a_store_of_an_early_version_is_refused_with_a_sentence(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    unsigned char early[4 + STORE_UUID_BYTES + 24] = {1, 0, 0, 0};
    fixture_close(fixture);
    write_format(fixture, early, sizeof early);
    assert_int_equal(store_open(&fixture->settings, &fixture->store, &error), STORE_DENIED);
    assert_string_equal(error.text, "the store has format 1, of an early version whose items "
                                    "cannot be taken over: file them again into a new home");
}

/* The format in the first record, which becomes another one unless that is 0. */
static unsigned char exchange_format(struct fixture *fixture, unsigned char other)
{
    static const char *const tables[] = {"meta"};
    char directory[FIXTURE_PATH_BYTES + 8];
    (void)snprintf(directory, sizeof directory, "%s/store", fixture->home);
    struct kv_settings settings = {
        .directory = directory, .map_bytes = FIXTURE_MAP_BYTES, .tables = tables, .table_count = 1};
    struct store_error error = {0};
    struct kv *kv = NULL;
    struct kv_txn *txn = NULL;
    struct kv_bytes first = {0};
    unsigned char record[512];
    assert_int_equal(kv_open(&settings, &kv, &error), STORE_OK);
    assert_int_equal(kv_begin(kv, false, &txn, &error), STORE_OK);
    assert_int_equal(kv_get(txn, 0, kv_bytes_of("store", 5), &first, &error), STORE_OK);
    size_t size = first.size;
    assert_in_range(size, 1, sizeof record);
    memcpy(record, first.data, size);
    kv_abort(txn);
    kv_close(kv);
    unsigned char format = record[0];
    record[0] = other;
    if (other != 0) {
        write_format(fixture, record, other < STORE_FORMAT ? size - PROOF_BYTES : size);
    }
    return format;
}

/* Format 2 came before users were noted, and before its first record had a proof (proof.h). */
static void a_store_of_format_2_is_opened_and_becomes_one_of_today(void **state)
{
    struct fixture *fixture = *state;
    const struct names fog = {.tags = {"fog"}};
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/1")}, fog);
    fixture_close(fixture);
    assert_int_equal(exchange_format(fixture, 2), STORE_FORMAT);
    fixture_open(fixture);
    assert_int_equal(fixture_item(fixture, "log/1").seq, 1);
    (void)fixture_file_as(fixture, (struct item_filing){.id = text_of("log/2")}, fog);
    fixture_close(fixture);
    assert_int_equal(exchange_format(fixture, 0), STORE_FORMAT);
    fixture_open(fixture);
}

static void a_first_record_that_is_cut_short_is_damage(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    const unsigned char cut[] = {STORE_FORMAT, 0, 0, 0, 7, 7};
    fixture_close(fixture);
    write_format(fixture, cut, sizeof cut);
    assert_int_equal(store_open(&fixture->settings, &fixture->store, &error), STORE_CORRUPT);
    assert_string_equal(error.text, "the store's first record is damaged");
}

static void a_home_that_is_not_there_is_refused_with_a_sentence(void **state)
{
    (void)state;
    struct store_error error = {0};
    struct store *store = NULL;
    struct store_settings settings = {.home = "/nowhere/at/all", .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(store_open(&settings, &store, &error), STORE_DENIED);
    assert_null(store);
    assert_string_equal(error.text,
                        "/nowhere/at/all/store cannot be opened: No such file or directory");
}

static void a_file_where_the_store_should_be_is_refused(void **state)
{
    (void)state;
    struct store_error error = {0};
    char home[FIXTURE_PATH_BYTES];
    char path[FIXTURE_PATH_BYTES + 8];
    struct store *store = NULL;
    home_make(home);
    (void)snprintf(path, sizeof path, "%s/store", home);
    int file = open(path, O_CREAT | O_WRONLY | O_CLOEXEC, 0600);
    assert_true(file >= 0);
    assert_int_equal(close(file), 0);
    struct store_settings settings = {.home = home, .map_bytes = FIXTURE_MAP_BYTES};
    int result = store_open(&settings, &store, &error);
    home_remove(home);
    assert_int_equal(result, STORE_DENIED);
    assert_non_null(strstr(error.text, "cannot be opened"));
}

static void a_file_that_is_no_environment_is_damage(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    char path[FIXTURE_PATH_BYTES + 32];
    fixture_close(fixture);
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", fixture->home);
    FILE *stream = fopen(path, "wb");
    assert_non_null(stream);
    for (int i = 0; i < 1000; i++) {
        assert_true(fputs("not a database, a page of a logbook. ", stream) >= 0);
    }
    assert_int_equal(fclose(stream), 0);
    assert_int_equal(store_open(&fixture->settings, &fixture->store, &error), STORE_CORRUPT);
    assert_non_null(strstr(error.text, "is damaged"));
}

static void a_path_that_is_too_long_is_refused(void **state)
{
    (void)state;
    char home[6000];
    struct store_error error = {0};
    struct store *store = NULL;
    memset(home, 'x', sizeof home);
    home[sizeof home - 1] = '\0';
    struct store_settings settings = {.home = home, .map_bytes = FIXTURE_MAP_BYTES};
    assert_int_equal(store_open(&settings, &store, &error), STORE_DENIED);
    assert_string_equal(error.text, "the path of the home is too long");
}

/* --- views --- */

static int file_in(struct fixture *fixture, struct store_view *view, const char *id,
                   struct store_text text, struct store_error *error)
{
    struct item_refusal refusal = {0};
    struct item_filed filed = {0};
    struct item_filing filing = {.id = text_of(id), .text = text, .open_unknown = true};
    return items_file(view, &filing, &fixture->buffer, &filed, &refusal, error);
}

static void a_view_that_ends_without_a_commit_leaves_nothing(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(file_in(fixture, view, "log/1", text_of(entry), &error), STORE_OK);
    assert_int_equal(store_view_totals(view).items, 1);
    store_end(view);
    assert_int_equal(fixture_totals(fixture).items, 0);
    assert_int_equal(fixture_totals(fixture).seq, 0);
    view = fixture_read(fixture);
    uint64_t seq = 0;
    assert_int_equal(items_find(view, text_of("log/1"), &seq, &error), STORE_NOT_FOUND);
    store_end(view);
    store_end(NULL);
}

static void a_reading_view_stays_as_it_was_when_it_began(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", entry);
    struct store_view *view = fixture_read(fixture);
    (void)fixture_file_text(fixture, "log/2", entry);
    (void)fixture_withdraw(fixture, "log/1");
    struct store_error error = {0};
    uint64_t seq = 0;
    assert_int_equal(store_view_totals(view).seq, 1);
    assert_int_equal(items_find(view, text_of("log/1"), &seq, &error), STORE_OK);
    assert_int_equal(items_find(view, text_of("log/2"), &seq, &error), STORE_NOT_FOUND);
    store_end(view);
}

/* --- no room --- */

static void below_the_reserve_nothing_is_written(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", entry);
    fixture_close(fixture);
    fixture->settings.reserve_bytes = SIZE_MAX; /* no disk has that much left */
    fixture_open(fixture);
    struct store_error error = {0};
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(file_in(fixture, view, "log/2", text_of(entry), &error), STORE_OK);
    assert_int_equal(store_commit(view, &error), STORE_FULL);
    assert_non_null(strstr(error.text, "the reserve (option disk_reserve) is"));
    assert_int_equal(fixture_totals(fixture).seq, 1);
    assert_true(is_text(fixture_record(fixture, 1).text, entry));
    fixture_close(fixture);
    fixture->settings.reserve_bytes = 0;
    fixture_open(fixture);
    assert_int_equal(fixture_file_text(fixture, "log/2", entry).seq, 2);
}

static void a_full_map_changes_nothing_and_later_writes_work(void **state)
{
    struct fixture *fixture = *state;
    enum {
        MAP_BYTES = 1 << 20
    };
    fixture_close(fixture);
    fixture->settings.map_bytes = MAP_BYTES;
    fixture_open(fixture);
    (void)fixture_file_text(fixture, "log/1", entry);
    char *letters = malloc(MAP_BYTES);
    assert_non_null(letters);
    memset(letters, 'x', MAP_BYTES);
    struct store_error error = {0};
    struct store_view *view = fixture_write(fixture);
    int result = file_in(fixture, view, "log/2", (struct store_text){letters, MAP_BYTES}, &error);
    store_end(view);
    free(letters);
    assert_int_equal(result, STORE_FULL);
    assert_non_null(strstr(error.text, "raise map_size"));
    assert_int_equal(fixture_totals(fixture).seq, 1);
    assert_int_equal(fixture_file_text(fixture, "log/2", entry).seq, 2);
    assert_true(is_text(fixture_record(fixture, 2).text, entry));
}

static void a_map_that_was_full_takes_more_when_it_is_larger(void **state)
{
    struct fixture *fixture = *state;
    fixture_close(fixture);
    fixture->settings.map_bytes = 256 << 10;
    fixture_open(fixture);
    int result = STORE_OK;
    uint64_t filed = 0;
    while (result == STORE_OK) {
        char id[32];
        (void)snprintf(id, sizeof id, "log/%llu", (unsigned long long)filed);
        struct store_error error = {0};
        struct store_view *view = fixture_write(fixture);
        result = file_in(fixture, view, id, text_of(entry), &error);
        if (result == STORE_OK) {
            result = store_commit(view, &error);
        } else {
            store_end(view);
        }
        filed += result == STORE_OK ? 1 : 0;
        assert_true(filed < 100000);
    }
    assert_int_equal(result, STORE_FULL);
    assert_int_equal(fixture_totals(fixture).seq, filed);
    fixture_close(fixture);
    fixture->settings.map_bytes = FIXTURE_MAP_BYTES;
    fixture_open(fixture);
    assert_int_equal(fixture_file_text(fixture, "one more", entry).seq, filed + 1);
}

/* A record of more than 65,536 pieces of 1,900 bytes has no keys. */
static void a_record_larger_than_the_store_takes_is_refused(void **state)
{
    struct fixture *fixture = *state;
    enum {
        BYTES = 1900 * 65536
    };
    char *letters = calloc(1, BYTES);
    assert_non_null(letters);
    struct store_error error = {0};
    struct store_view *view = fixture_write(fixture);
    int result = file_in(fixture, view, "log/1", (struct store_text){letters, BYTES}, &error);
    store_end(view);
    free(letters);
    assert_int_equal(result, STORE_FULL);
    assert_non_null(strstr(error.text, "is larger than the store takes"));
}

/* --- damage --- */

/* Changes one byte of a text in the closed store's file, wherever it stands there. */
static void damage_text(struct fixture *fixture, const char *text)
{
    char path[FIXTURE_PATH_BYTES + 32];
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", fixture->home);
    FILE *stream = fopen(path, "r+b");
    assert_non_null(stream);
    static char bytes[1 << 20];
    size_t size = fread(bytes, 1, sizeof bytes, stream);
    int damaged = 0;
    for (char *at = bytes; (at = memmem(at, size - (size_t)(at - bytes), text, strlen(text)));
         at++) {
        assert_int_equal(fseek(stream, at - bytes, SEEK_SET), 0);
        assert_int_not_equal(fputc(*at ^ 1, stream), EOF);
        damaged++;
    }
    assert_int_equal(fclose(stream), 0);
    assert_true(damaged > 0);
}

static void a_damaged_record_is_told_and_never_read(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", entry);
    (void)fixture_file_text(fixture, "log/2", "a quiet night");
    fixture_close(fixture);
    damage_text(fixture, "fog from the west");
    fixture_open(fixture);
    struct store_error error = {0};
    struct item_record record = {.seq = 77};
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(items_read(view, 1, &fixture->reading, &record, &error), STORE_CORRUPT);
    store_end(view);
    assert_string_equal(error.text, "the record of change 1 is damaged");
    assert_int_equal(record.seq, 77);
    assert_true(is_text(fixture_record(fixture, 2).text, "a quiet night"));
}

/* --- erasing by portions --- */

static void erasing_takes_at_most_as_many_as_asked_for(void **state)
{
    struct fixture *fixture = *state;
    for (int i = 0; i < 5; i++) {
        char text[32];
        (void)snprintf(text, sizeof text, "reading %d", i);
        (void)fixture_file_text(fixture, "log/1", text);
    }
    /* Five filings of one item: four took the place of another. */
    struct store_error error = {0};
    size_t erased = 0;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(store_erase_passed(view, 5, 3, &erased, &error), STORE_OK);
    assert_int_equal(erased, 3);
    fixture_commit(view);
    assert_int_equal(fixture_erase(fixture, 5), 1);
    assert_int_equal(fixture_erase(fixture, 5), 0);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_new_store_is_empty),
        TEST(opening_it_again_keeps_what_was_there),
        TEST(each_store_has_a_random_uuid_of_its_own),
        TEST(a_store_of_a_newer_version_is_refused_with_a_sentence),
        TEST(a_store_of_an_early_version_is_refused_with_a_sentence),
        TEST(a_store_of_format_2_is_opened_and_becomes_one_of_today),
        TEST(a_first_record_that_is_cut_short_is_damage),
        TEST(a_home_that_is_not_there_is_refused_with_a_sentence),
        TEST(a_file_where_the_store_should_be_is_refused),
        TEST(a_file_that_is_no_environment_is_damage),
        TEST(a_path_that_is_too_long_is_refused),
        TEST(a_view_that_ends_without_a_commit_leaves_nothing),
        TEST(a_reading_view_stays_as_it_was_when_it_began),
        TEST(below_the_reserve_nothing_is_written),
        TEST(a_full_map_changes_nothing_and_later_writes_work),
        TEST(a_map_that_was_full_takes_more_when_it_is_larger),
        TEST(a_record_larger_than_the_store_takes_is_refused),
        TEST(a_damaged_record_is_told_and_never_read),
        TEST(erasing_takes_at_most_as_many_as_asked_for),
    };
    return cmocka_run_group_tests_name("store", tests, NULL, NULL);
}
