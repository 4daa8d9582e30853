/* The tags by number and by name. */
#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/unit/store_fixture.h"

static uint32_t open_tag(struct fixture *fixture, const char *name, uint64_t opened_seq)
{
    struct store_error error = {0};
    uint32_t number = UINT32_MAX;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_open(view, name, strlen(name), opened_seq, &number, &error),
                     STORE_OK);
    fixture_commit(view);
    return number;
}

static void numbers_are_given_out_in_the_order_of_opening(void **state)
{
    struct fixture *fixture = *state;
    assert_int_equal(open_tag(fixture, "wreck", 1), 0);
    assert_int_equal(open_tag(fixture, "fog", 2), 1);
    assert_int_equal(fixture_totals(fixture).tags, 2);
    fixture_close(fixture);
    fixture_open(fixture);
    assert_int_equal(open_tag(fixture, "gale", 3), 2);
}

static void a_new_tag_is_open_and_counts_nothing(void **state)
{
    struct fixture *fixture = *state;
    uint32_t number = open_tag(fixture, "brume d'\xC3\xA9t\xC3\xA9", 17);
    struct vocabulary_tag tag = fixture_tag(fixture, "brume d'\xC3\xA9t\xC3\xA9");
    assert_int_equal(tag.number, number);
    assert_string_equal(tag.name, "brume d'\xC3\xA9t\xC3\xA9");
    assert_int_equal(tag.counts.count, 0);
    assert_int_equal(tag.counts.unprompted, 0);
    assert_int_equal(tag.opened_seq, 17);
    assert_int_equal(tag.state, VOCABULARY_OPEN);
}

static void counts_and_state_are_stored_anew(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    (void)open_tag(fixture, "fog", 1);
    struct vocabulary_tag tag = fixture_tag(fixture, "fog");
    tag.counts.count = UINT32_MAX;
    tag.counts.unprompted = 5;
    tag.state = VOCABULARY_RETIRED;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_put(view, &tag, &error), STORE_OK);
    fixture_commit(view);
    struct vocabulary_tag again = {0};
    view = fixture_read(fixture);
    assert_int_equal(vocabulary_get(view, tag.number, &again, &error), STORE_OK);
    store_end(view);
    assert_string_equal(again.name, "fog");
    assert_int_equal(again.counts.count, UINT32_MAX);
    assert_int_equal(again.counts.unprompted, 5);
    assert_int_equal(again.state, VOCABULARY_RETIRED);
}

static void an_unknown_name_or_number_is_an_answer_without_a_sentence(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct vocabulary_tag tag = {.number = 77};
    (void)open_tag(fixture, "fog", 1);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(vocabulary_find(view, "fo", 2, &tag, &error), STORE_NOT_FOUND);
    assert_int_equal(vocabulary_find(view, "fogs", 4, &tag, &error), STORE_NOT_FOUND);
    assert_int_equal(vocabulary_get(view, 1, &tag, &error), STORE_NOT_FOUND);
    store_end(view);
    assert_int_equal(error.code, STORE_OK);
    assert_int_equal(tag.number, 77);
}

static void a_name_has_one_to_255_bytes(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    char name[VOCABULARY_NAME_BYTES + 2];
    uint32_t number = 9;
    memset(name, 'x', sizeof name);
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_open(view, name, 255, 1, &number, &error), STORE_OK);
    assert_int_equal(number, 0);
    assert_int_equal(vocabulary_open(view, name, 256, 1, &number, &error), STORE_REFUSED);
    assert_string_equal(error.text, "a tag has 1 to 255 bytes");
    assert_int_equal(vocabulary_open(view, name, 0, 1, &number, &error), STORE_REFUSED);
    fixture_commit(view);
    assert_int_equal(fixture_totals(fixture).tags, 1);
    name[255] = '\0';
    assert_string_equal(fixture_tag(fixture, name).name, name);
}

/* --- walks --- */

struct listing {
    char names[64];
    const char *stop_at;
};

static int note_tag(void *user, const struct vocabulary_tag *tag)
{
    struct listing *listing = user;
    size_t used = strlen(listing->names);
    (void)snprintf(listing->names + used, sizeof listing->names - used, "%s ", tag->name);
    return listing->stop_at && strcmp(tag->name, listing->stop_at) == 0 ? STORE_STOPPED : STORE_OK;
}

static void open_four(struct fixture *fixture)
{
    (void)open_tag(fixture, "wreck", 1);
    (void)open_tag(fixture, "fog", 2);
    (void)open_tag(fixture, "fog signal", 3);
    (void)open_tag(fixture, "Gale", 4);
}

static int by_name(struct fixture *fixture, const char *after, struct listing *listing)
{
    struct store_error error = {0};
    struct store_view *view = fixture_read(fixture);
    int result = vocabulary_by_name(view, after, strlen(after), note_tag, listing, &error);
    store_end(view);
    return result;
}

static void by_name_they_come_in_the_order_of_bytes(void **state)
{
    struct fixture *fixture = *state;
    struct listing listing = {0};
    open_four(fixture);
    assert_int_equal(by_name(fixture, "", &listing), STORE_OK);
    assert_string_equal(listing.names, "Gale fog fog signal wreck ");
}

static void by_name_they_come_from_behind_a_name(void **state)
{
    struct fixture *fixture = *state;
    struct listing present = {0};
    struct listing absent = {0};
    struct listing last = {0};
    open_four(fixture);
    assert_int_equal(by_name(fixture, "fog", &present), STORE_OK);
    assert_int_equal(by_name(fixture, "fo", &absent), STORE_OK);
    assert_int_equal(by_name(fixture, "wreck", &last), STORE_OK);
    assert_string_equal(present.names, "fog signal wreck ");
    assert_string_equal(absent.names, "fog fog signal wreck ");
    assert_string_equal(last.names, "");
}

static void by_number_they_come_as_they_were_opened(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct listing listing = {0};
    open_four(fixture);
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(vocabulary_by_number(view, note_tag, &listing, &error), STORE_OK);
    store_end(view);
    assert_string_equal(listing.names, "wreck fog fog signal Gale ");
}

static void a_walk_stops_when_it_is_told_to(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct listing names = {.stop_at = "fog"};
    struct listing numbers = {.stop_at = "fog"};
    open_four(fixture);
    assert_int_equal(by_name(fixture, "", &names), STORE_STOPPED);
    assert_string_equal(names.names, "Gale fog ");
    struct store_view *view = fixture_read(fixture);
    assert_int_equal(vocabulary_by_number(view, note_tag, &numbers, &error), STORE_STOPPED);
    store_end(view);
    assert_string_equal(numbers.names, "wreck fog ");
}

static void a_tag_opened_in_a_view_is_found_in_it(void **state)
{
    struct fixture *fixture = *state;
    struct store_error error = {0};
    struct vocabulary_tag tag = {0};
    uint32_t number = 0;
    struct store_view *view = fixture_write(fixture);
    assert_int_equal(vocabulary_open(view, "fog", 3, 1, &number, &error), STORE_OK);
    assert_int_equal(vocabulary_find(view, "fog", 3, &tag, &error), STORE_OK);
    store_end(view);
    view = fixture_read(fixture);
    assert_int_equal(vocabulary_find(view, "fog", 3, &tag, &error), STORE_NOT_FOUND);
    store_end(view);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, fixture_setup, fixture_teardown)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(numbers_are_given_out_in_the_order_of_opening),
        TEST(a_new_tag_is_open_and_counts_nothing),
        TEST(counts_and_state_are_stored_anew),
        TEST(an_unknown_name_or_number_is_an_answer_without_a_sentence),
        TEST(a_name_has_one_to_255_bytes),
        TEST(by_name_they_come_in_the_order_of_bytes),
        TEST(by_name_they_come_from_behind_a_name),
        TEST(by_number_they_come_as_they_were_opened),
        TEST(a_walk_stops_when_it_is_told_to),
        TEST(a_tag_opened_in_a_view_is_found_in_it),
    };
    return cmocka_run_group_tests_name("vocabulary", tests, NULL, NULL);
}
