/* A stored item as the source of its features. */
#include "daemon/item_source.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <errno.h>
#include <string.h>

static struct store_text text_of(const char *text)
{
    return (struct store_text){.data = text, .size = strlen(text)};
}

static int tear_down(void **state)
{
    item_source_deinit(*state);
    return 0;
}

static int set_up(void **state)
{
    static struct item_source source;
    source = (struct item_source){0};
    *state = &source;
    return 0;
}

static void assert_pair(const struct item_source *source, size_t at, const char *name,
                        const char *value)
{
    assert_true(at < source->source.field_count);
    assert_string_equal(source->source.fields[at].name, name);
    assert_string_equal(source->source.fields[at].value, value);
}

static void title_text_and_language_are_the_records(void **state)
{
    struct item_source *source = *state;
    const struct item_record record = {.title = text_of("Fog at the bar"),
                                       .text = text_of("The bell rang all night."),
                                       .language = text_of("de-CH")};
    assert_int_equal(item_source_fill(source, &record), 0);
    assert_ptr_equal(source->source.title, record.title.data);
    assert_int_equal(source->source.title_bytes, 14);
    assert_ptr_equal(source->source.text, record.text.data);
    assert_int_equal(source->source.text_bytes, 24);
    assert_string_equal(source->source.language, "de-CH");
    assert_int_equal(source->source.field_count, 0);
}

/* A record's texts are not ended by NUL. */
static void a_language_ends_where_it_is_said_to_end(void **state)
{
    struct item_source *source = *state;
    const struct item_record record = {.language = {.data = "enough", .size = 2}};
    assert_int_equal(item_source_fill(source, &record), 0);
    assert_string_equal(source->source.language, "en");
}

static void no_language_is_the_default(void **state)
{
    struct item_source *source = *state;
    const struct item_record record = {.text = text_of("Calm.")};
    assert_int_equal(item_source_fill(source, &record), 0);
    assert_null(source->source.language);
}

static void fields_come_as_pairs(void **state)
{
    struct item_source *source = *state;
    const struct item_record record = {
        .fields = text_of("{\"desk\":\"harbour\",\"ports\":[\"quay\",\"pier\"],\"year\":1911}")};
    assert_int_equal(item_source_fill(source, &record), 0);
    assert_int_equal(source->source.field_count, 4);
    assert_pair(source, 0, "desk", "harbour");
    assert_pair(source, 1, "ports", "quay");
    assert_pair(source, 2, "ports", "pier");
    assert_pair(source, 3, "year", "1911");
}

static void nothing_of_the_item_before_is_left(void **state)
{
    struct item_source *source = *state;
    const struct item_record first = {.text = text_of("Gale."),
                                      .language = text_of("en"),
                                      .fields = text_of("{\"desk\":\"harbour\"}")};
    const struct item_record second = {.title = text_of("Calm")};
    assert_int_equal(item_source_fill(source, &first), 0);
    assert_int_equal(item_source_fill(source, &second), 0);
    assert_int_equal(source->source.text_bytes, 0);
    assert_int_equal(source->source.field_count, 0);
    assert_null(source->source.language);
}

static void what_is_stored_as_fields_and_is_none_is_refused(void **state)
{
    struct item_source *source = *state;
    static const char *const TEXTS[] = {"{\"desk\":", "[\"desk\"]", "{\"desk\":null}",
                                        "{\"ports\":[1]}"};
    for (size_t i = 0; i < sizeof TEXTS / sizeof TEXTS[0]; i++) {
        const struct item_record record = {.fields = text_of(TEXTS[i])};
        assert_int_equal(item_source_fill(source, &record), -EINVAL);
    }
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

static void the_member_with_the_most_bytes_is_the_longest(void **state)
{
    (void)state;
    const struct features_field fields[] = {{"desk", "harbour"}, {"desk", "lamp"}}; /* 19 bytes */
    struct features_source source = {.title_bytes = 20, .text_bytes = 21, .fields = fields};
    source.field_count = 2;
    assert_string_equal(item_source_longest(&source), "/text");
    source.text_bytes = 18;
    assert_string_equal(item_source_longest(&source), "/title");
    source.title_bytes = 18;
    assert_string_equal(item_source_longest(&source), "/fields");
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(title_text_and_language_are_the_records),
        TEST(a_language_ends_where_it_is_said_to_end),
        TEST(no_language_is_the_default),
        TEST(fields_come_as_pairs),
        TEST(nothing_of_the_item_before_is_left),
        TEST(what_is_stored_as_fields_and_is_none_is_refused),
        TEST(the_member_with_the_most_bytes_is_the_longest),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
