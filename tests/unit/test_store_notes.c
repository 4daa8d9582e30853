/* Notes beside the items: kept as they were put, under a name each. */
#include "storage/store_notes.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static void put_note(struct fixture *fixture, const char *name, const char *text)
{
    struct store_error error = {0};
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(store_put_note(view, name, text, strlen(text), &error), STORE_OK);
    fixture_commit(view);
}

static void assert_note(struct fixture *fixture, const char *name, const char *text)
{
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    int result = store_get_note(view, name, &fixture->buffer, &error);
    store_end(view);
    assert_int_equal(result, STORE_OK);
    assert_int_equal(fixture->buffer.size, strlen(text));
    assert_memory_equal(fixture->buffer.data, text, strlen(text));
}

static void a_note_is_there_when_the_store_is_opened_again(void **state)
{
    struct fixture *fixture = *state;
    put_note(fixture, "weather", "fog on the bar");
    put_note(fixture, "oil", "two casks");
    fixture_close(fixture);
    fixture_open(fixture);
    assert_note(fixture, "weather", "fog on the bar");
    assert_note(fixture, "oil", "two casks");
}

static void a_later_note_takes_the_place_of_an_earlier_one(void **state)
{
    struct fixture *fixture = *state;
    put_note(fixture, "oil", "two casks");
    put_note(fixture, "oil", "one");
    assert_note(fixture, "oil", "one");
}

static void a_note_that_was_never_put_is_not_found(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(store_get_note(view, "oil", &fixture->buffer, &error), STORE_NOT_FOUND);
    assert_int_equal(error.code, STORE_OK); /* it is an answer */
    store_end(view);
}

static void a_note_is_no_change(void **state)
{
    struct fixture *fixture = *state;
    (void)fixture_file_text(fixture, "log/1", "fog");
    put_note(fixture, "oil", "two casks");
    struct store_totals totals = fixture_totals(fixture);
    assert_int_equal(totals.seq, 1);
    assert_int_equal(totals.items, 1);
}

static void a_note_or_a_name_that_is_too_long_is_refused(void **state)
{
    static char text[STORE_NOTE_BYTES + 1];
    char name[STORE_NOTE_NAME_BYTES + 2] = "";
    struct fixture *fixture = *state;
    struct store_error error = {0};
    memset(name, 'n', sizeof name - 1);
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(store_put_note(view, "oil", text, sizeof text, &error), STORE_DENIED);
    error = (struct store_error){0};
    assert_int_equal(store_put_note(view, name, text, 1, &error), STORE_DENIED);
    error = (struct store_error){0};
    assert_int_equal(store_put_note(view, "oil", text, STORE_NOTE_BYTES, &error), STORE_OK);
    store_end(view);
}

static void a_byte_that_went_wrong_is_damage(void **state)
{
    static const char TEXT[] = "a-note-found-nowhere-else";
    struct fixture *fixture = *state;
    struct store_error error = {0};
    char path[FIXTURE_PATH_BYTES + 32];
    static char bytes[1 << 20];
    put_note(fixture, "oil", TEXT);
    (void)snprintf(path, sizeof path, "%s/store/data.mdb", fixture->home);
    FILE *file = fopen(path, "r+b");
    assert_non_null(file);
    size_t size = fread(bytes, 1, sizeof bytes, file);
    const char *found = memmem(bytes, size, TEXT, strlen(TEXT));
    assert_non_null(found);
    assert_int_equal(fseek(file, found - bytes, SEEK_SET), 0);
    assert_int_equal(fputc('A', file), 'A');
    assert_int_equal(fclose(file), 0);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(store_get_note(view, "oil", &fixture->buffer, &error), STORE_CORRUPT);
    assert_string_equal(error.text, "the store's note 'oil' is damaged");
    store_end(view);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(a_note_is_there_when_the_store_is_opened_again),
        TEST(a_later_note_takes_the_place_of_an_earlier_one),
        TEST(a_note_that_was_never_put_is_not_found),
        TEST(a_note_is_no_change),
        TEST(a_note_or_a_name_that_is_too_long_is_refused),
        TEST(a_byte_that_went_wrong_is_damage),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
