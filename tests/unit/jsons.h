/*
 * jsons: JSON in tests, with ' in place of " so that it can be read. Static functions, since each
 * test is one file. Include cmocka.h first.
 */
#ifndef UNDERTAG_TESTS_JSONS_H
#define UNDERTAG_TESTS_JSONS_H

#include <jansson.h>
#include <stdlib.h>
#include <string.h>

/* The text with " for each '; for free(). */
static inline char *quoted(const char *text)
{
    char *copy = strdup(text);
    assert_non_null(copy);
    for (char *at = copy; *at != '\0'; at++) {
        *at = *at == '\'' ? '"' : *at;
    }
    return copy;
}

/* What the text says; for json_decref. */
static inline json_t *json_of(const char *text)
{
    char *copy = quoted(text);
    json_t *value = json_loads(copy, JSON_DECODE_ANY, NULL);
    free(copy);
    assert_non_null(value);
    return value;
}

/* Whether a text is the JSON that `expected` says, whatever the order of members. */
static inline void assert_json(const char *text, const char *expected)
{
    json_t *found = json_loads(text, JSON_DECODE_ANY, NULL);
    json_t *wanted = json_of(expected);
    if (!json_equal(found, wanted)) {
        print_error("%s\nis not %s\n", text, expected);
    }
    assert_true(json_equal(found, wanted));
    json_decref(found);
    json_decref(wanted);
}

#endif
