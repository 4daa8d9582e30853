/* What a backup says of itself. */
#include "daemon/backup_note.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdlib.h>
#include <string.h>

static const struct backup_note WRITTEN = {
    .made = "2026-12-02T10:15:00Z",
    .seq = 3000,
    .learned = 2990,
    .files = {{8192, "68b4bd2eb5d8dc96154b8356f87b654147984827fbcacf24012b9c5937d20bdd"},
              {4096, "542638873e77e1f1bf7d7993b8269c402d7eae71e695d8b648972ba91310dbeb"}}};

static int set_up(void **state)
{
    *state = backup_note_write(&WRITTEN);
    return *state ? 0 : -1;
}

static int tear_down(void **state)
{
    free(*state);
    return 0;
}

static int read_text(const char *text, struct backup_note *note, struct store_error *error)
{
    *error = (struct store_error){0};
    return backup_note_read(text, strlen(text), note, error);
}

static void what_is_written_is_read(void **state)
{
    struct backup_note note;
    struct store_error error;
    assert_int_equal(read_text(*state, &note, &error), STORE_OK);
    assert_string_equal(note.made, WRITTEN.made);
    assert_int_equal(note.seq, 3000);
    assert_int_equal(note.learned, 2990);
    for (size_t i = 0; i < BACKUP_FILES; i++) {
        assert_int_equal(note.files[i].bytes, WRITTEN.files[i].bytes);
        assert_string_equal(note.files[i].sha256, WRITTEN.files[i].sha256);
    }
}

/* Between two members JSON allows other spaces: then it says the same. */
static void a_bit_that_is_another_is_damage_or_makes_no_difference(void **state)
{
    char *text = *state;
    size_t refused = 0;
    size_t size = strlen(text);
    for (size_t i = 0; i < size; i++) {
        for (unsigned bit = 0; bit < 8; bit++) {
            struct backup_note note = {0};
            struct store_error error = {0};
            text[i] = (char)(text[i] ^ (1 << bit));
            int code = backup_note_read(text, size, &note, &error);
            text[i] = (char)(text[i] ^ (1 << bit));
            if (code == STORE_OK) {
                assert_string_equal(note.made, WRITTEN.made);
                assert_int_equal(note.seq, 3000);
                assert_string_equal(note.files[1].sha256, WRITTEN.files[1].sha256);
                continue;
            }
            assert_true(code == STORE_CORRUPT || code == STORE_NEWER);
            assert_int_not_equal(error.text[0], '\0');
            refused++;
        }
    }
    assert_true(refused > size * 7); /* of 8 each */
}

static void a_note_that_is_cut_is_damage(void **state)
{
    const char *text = *state;
    for (size_t size = 0; size + 2 < strlen(text); size++) { /* the last byte ends the line */
        struct backup_note note;
        struct store_error error = {0};
        assert_int_equal(backup_note_read(text, size, &note, &error), STORE_CORRUPT);
    }
}

static void a_newer_format_is_told_as_one(void **state)
{
    (void)state;
    struct backup_note note = {.seq = 7};
    struct store_error error;
    assert_int_equal(read_text("{\"format\": 2, \"lamps\": []}", &note, &error), STORE_NEWER);
    assert_non_null(strstr(error.text, "format 2, this version reads up to 1"));
    assert_int_equal(note.seq, 7);
}

static void what_is_no_note_is_damage(void **state)
{
    (void)state;
    static const char *const texts[] = {"",
                                        "[]",
                                        "7",
                                        "{}",
                                        "{\"format\": \"1\"}",
                                        "{\"format\": -1}",
                                        "{\"format\": 0}",
                                        "{\"format\": 1}",
                                        "{\"format\": 1, \"sha256\": 5}",
                                        "{\"format\": 1, \"format\": 1}"};
    for (size_t i = 0; i < sizeof texts / sizeof texts[0]; i++) {
        struct backup_note note;
        struct store_error error;
        assert_int_equal(read_text(texts[i], &note, &error), STORE_CORRUPT);
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(what_is_written_is_read),
        TEST(a_bit_that_is_another_is_damage_or_makes_no_difference),
        TEST(a_note_that_is_cut_is_damage),
        TEST(a_newer_format_is_told_as_one),
        TEST(what_is_no_note_is_damage),
    };
    return cmocka_run_group_tests_name("backup_note", tests, NULL, NULL);
}
