/*
 * The pages of a file are looked through: sound ones are, whatever was done to the tables, and each
 * kind of damage is told, also where LMDB would read on and give something else.
 */
#include "storage/kv.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <fcntl.h>
#include <unistd.h>

#include "storage/kv_page.h"
#include "tests/unit/repeatable.h"
#include "tests/unit/store_fixture.h"

/* --- fixture: a table with the lamps "lamp 0000" to "lamp 0999", some of them with long words ---
 */

enum {
    LAMPS,
    SHIPS,
    TABLES
};

static const char *const names[] = {"lamps", "ships"};

enum {
    PAGE_BYTES = 4096,
    LAMP_COUNT = 1000,
    LAMP_BYTES = 1200,
    KEY_BYTES = 16,
    SAID_BYTES = 1024
};

struct pages {
    char home[FIXTURE_PATH_BYTES];
    char directory[FIXTURE_PATH_BYTES + 8];
    char path[FIXTURE_PATH_BYTES + 24];
    struct kv *kv;
    char said[SAID_BYTES];
    struct store_error error;
};

static void open_tables(struct pages *pages)
{
    const struct kv_settings settings = {.directory = pages->directory,
                                         .map_bytes = 64 << 20,
                                         .tables = names,
                                         .table_count = TABLES};
    assert_int_equal(kv_open(&settings, &pages->kv, &pages->error), STORE_OK);
}

static struct kv_bytes lamp(unsigned number, char key[KEY_BYTES])
{
    return kv_bytes_of(key, (size_t)snprintf(key, KEY_BYTES, "lamp %04u", number));
}

static void put_lamp(struct pages *pages, struct kv_txn *txn, unsigned number, size_t bytes)
{
    static char value[KV_VALUE_BYTES];
    char key[KEY_BYTES];
    memset(value, 'w', sizeof value);
    assert_int_equal(
        kv_put(txn, LAMPS, lamp(number, key), kv_bytes_of(value, bytes), &pages->error), STORE_OK);
}

static int set_up(void **state)
{
    struct pages *pages = calloc(1, sizeof *pages);
    struct kv_txn *txn = NULL;
    assert_non_null(pages);
    home_make(pages->home);
    (void)snprintf(pages->directory, sizeof pages->directory, "%s/kv", pages->home);
    (void)snprintf(pages->path, sizeof pages->path, "%s/data.mdb", pages->directory);
    open_tables(pages);
    assert_int_equal(kv_begin(pages->kv, true, &txn, &pages->error), STORE_OK);
    for (unsigned i = 0; i < LAMP_COUNT; i++) {
        put_lamp(pages, txn, i, LAMP_BYTES);
    }
    assert_int_equal(kv_commit(txn, &pages->error), STORE_OK);
    *state = pages;
    return 0;
}

static int tear_down(void **state)
{
    struct pages *pages = *state;
    kv_close(pages->kv);
    home_remove(pages->home);
    free(pages);
    return 0;
}

static void note(void *user, const char *sentence)
{
    struct pages *pages = user;
    size_t used = strlen(pages->said);
    (void)snprintf(pages->said + used, SAID_BYTES - used, "%s; ", sentence);
}

static const char *look(struct pages *pages)
{
    pages->said[0] = '\0';
    assert_int_equal(kv_check_pages(pages->kv, note, pages, &pages->error), STORE_OK);
    return pages->said;
}

/* --- damage ------------------------------------------------------------------------------------
 */

struct page {
    uint64_t number;
    struct kv_page_header header;
    unsigned char bytes[PAGE_BYTES];
};

static bool read_page(int file, uint64_t number, struct page *page)
{
    page->number = number;
    ssize_t got = pread(file, page->bytes, PAGE_BYTES, (off_t)(number * PAGE_BYTES));
    memcpy(&page->header, page->bytes, sizeof page->header);
    return got == PAGE_BYTES;
}

static struct kv_node_header node_of(const struct page *page, size_t index, size_t *ret_at)
{
    struct kv_node_header node;
    uint16_t at = 0;
    memcpy(&at, page->bytes + sizeof page->header + index * sizeof at, sizeof at);
    memcpy(&node, page->bytes + at, sizeof node);
    *ret_at = at;
    return node;
}

/* The first page of a kind whose second entry has a key of so many bytes; the tables were written
 * in one transaction, so there are no earlier versions of their pages. */
static void find_page(struct pages *pages, uint16_t flags, size_t key_bytes, struct page *page)
{
    int file = open(pages->path, O_RDONLY | O_CLOEXEC);
    size_t at = 0;
    assert_true(file >= 0);
    for (uint64_t number = KV_FIRST_PAGE; read_page(file, number, page); number++) {
        if (page->header.number == number && page->header.flags == flags &&
            page->header.size.gap.lower > sizeof page->header + 2 &&
            node_of(page, 1, &at).key_bytes == key_bytes) {
            (void)close(file);
            return;
        }
    }
    fail();
}

static void write_page(struct pages *pages, const struct page *page, uint64_t number)
{
    int file = open(pages->path, O_WRONLY | O_CLOEXEC);
    assert_true(file >= 0);
    assert_int_equal(pwrite(file, page->bytes, PAGE_BYTES, (off_t)(number * PAGE_BYTES)),
                     PAGE_BYTES);
    assert_int_equal(close(file), 0);
}

/* --- sound pages ------------------------------------------------------------------------------ */

static void a_file_is_sound_whatever_was_done_to_its_tables(void **state)
{
    struct pages *pages = *state;
    struct repeatable random = {11};
    for (int round = 0; round < 30; round++) {
        struct kv_txn *txn = NULL;
        assert_int_equal(kv_begin(pages->kv, true, &txn, &pages->error), STORE_OK);
        for (int i = 0; i < 60; i++) {
            unsigned number = repeatable_below(&random, LAMP_COUNT);
            char key[KEY_BYTES];
            if (repeatable_below(&random, 3) == 0) {
                put_lamp(pages, txn, number, 1 + repeatable_below(&random, LAMP_BYTES));
            } else {
                int code = kv_delete(txn, LAMPS, lamp(number, key), &pages->error);
                assert_true(code == STORE_OK || code == STORE_NOT_FOUND);
            }
        }
        assert_int_equal(kv_commit(txn, &pages->error), STORE_OK);
        assert_string_equal(look(pages), "");
    }
}

/* So many pages become free at once that their list takes pages of its own. */
static void a_file_is_sound_once_it_is_empty(void **state)
{
    struct pages *pages = *state;
    struct kv_txn *txn = NULL;
    assert_int_equal(kv_begin(pages->kv, true, &txn, &pages->error), STORE_OK);
    assert_int_equal(kv_clear(txn, LAMPS, &pages->error), STORE_OK);
    assert_int_equal(kv_commit(txn, &pages->error), STORE_OK);
    assert_string_equal(look(pages), "");
}

/* --- damaged ones ----------------------------------------------------------------------------- */

static void entries_out_of_order_are_told(void **state)
{
    struct pages *pages = *state;
    struct page page;
    size_t at = 0;
    char expected[64];
    find_page(pages, KV_PAGE_LEAF, 9, &page);
    (void)node_of(&page, 1, &at);
    page.bytes[at + sizeof(struct kv_node_header)] = 'a'; /* "lamp" becomes "aamp" */
    write_page(pages, &page, page.number);
    (void)snprintf(expected, sizeof expected, "table lamps: page %u is not in order; ",
                   (unsigned)page.number);
    assert_string_equal(look(pages), expected);
}

static void an_entry_that_is_left_out_is_told(void **state)
{
    struct pages *pages = *state;
    struct page page;
    find_page(pages, KV_PAGE_LEAF, 9, &page);
    page.header.size.gap.lower = (uint16_t)(page.header.size.gap.lower - 2);
    memcpy(page.bytes, &page.header, sizeof page.header);
    write_page(pages, &page, page.number);
    assert_non_null(strstr(look(pages), "table lamps: "));
    assert_non_null(strstr(pages->said, "has gaps between its entries; "));
}

static void a_page_in_the_place_of_another_is_told(void **state)
{
    struct pages *pages = *state;
    struct page branch;
    struct page leaf;
    size_t at = 0;
    find_page(pages, KV_PAGE_BRANCH, 9, &branch);
    find_page(pages, KV_PAGE_LEAF, 9, &leaf);
    uint32_t other = node_of(&branch, 2, &at).low;
    assert_true(other != leaf.number);
    write_page(pages, &leaf, other);
    assert_non_null(strstr(look(pages), "is not the page that it should be; "));
}

static void a_page_with_two_uses_is_told(void **state)
{
    struct pages *pages = *state;
    struct page branch;
    size_t first = 0;
    size_t second = 0;
    char expected[64];
    find_page(pages, KV_PAGE_BRANCH, 9, &branch);
    struct kv_node_header node = node_of(&branch, 1, &first);
    (void)node_of(&branch, 2, &second);
    memcpy(branch.bytes + second, branch.bytes + first, sizeof node);
    write_page(pages, &branch, branch.number);
    (void)snprintf(expected, sizeof expected, "table lamps: page %u has two uses; ", node.low);
    assert_string_equal(look(pages), expected);
}

/* Such a page would be written over by a later change. */
static void a_page_that_is_used_and_free_is_told(void **state)
{
    struct pages *pages = *state;
    struct page leaf;
    struct page list;
    struct kv_txn *txn = NULL;
    size_t at = 0;
    char expected[64];
    assert_int_equal(kv_begin(pages->kv, true, &txn, &pages->error), STORE_OK);
    put_lamp(pages, txn, LAMP_COUNT, 10); /* for a second entry of the list */
    assert_int_equal(kv_commit(txn, &pages->error), STORE_OK);
    find_page(pages, KV_PAGE_LEAF, 8, &list);
    find_page(pages, KV_PAGE_LEAF, 9, &leaf);
    struct kv_node_header node = node_of(&list, 1, &at);
    memcpy(list.bytes + at + sizeof node + node.key_bytes + sizeof(uint64_t), &leaf.number,
           sizeof leaf.number);
    write_page(pages, &list, list.number);
    (void)snprintf(expected, sizeof expected, "table of free pages: page %u has two uses; ",
                   (unsigned)leaf.number);
    assert_string_equal(look(pages), expected);
}

static void a_file_that_ends_too_early_is_told(void **state)
{
    struct pages *pages = *state;
    struct page page;
    find_page(pages, KV_PAGE_LEAF, 9, &page);
    assert_int_equal(truncate(pages->path, (off_t)(page.number * PAGE_BYTES + 100)), 0);
    assert_non_null(strstr(look(pages), "the file ends too early; "));
}

int main(void)
{
#define pages_test(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)
    const struct CMUnitTest tests[] = {
        pages_test(a_file_is_sound_whatever_was_done_to_its_tables),
        pages_test(a_file_is_sound_once_it_is_empty),
        pages_test(entries_out_of_order_are_told),
        pages_test(an_entry_that_is_left_out_is_told),
        pages_test(a_page_in_the_place_of_another_is_told),
        pages_test(a_page_with_two_uses_is_told),
        pages_test(a_page_that_is_used_and_free_is_told),
        pages_test(a_file_that_ends_too_early_is_told),
    };
    return cmocka_run_group_tests_name("pages", tests, NULL, NULL);
}
