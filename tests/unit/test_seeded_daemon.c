/* The daemon seeds the hash of JSON's objects, at random and before anything is read: whoever sends
 * it names cannot choose them so that all collide. */
#include <stddef.h>

/* The program itself, whose main function has another name here. */
#define main undertagd_main
#include "daemon/main.c" /* NOLINT(bugprone-suspicious-include) */
#undef main

#include <setjmp.h>
#include <stdarg.h>
#include <stdint.h>

#include <cmocka.h>

static size_t calls;
static size_t given;

/* In the place of jansson's. */
void json_object_seed(size_t seed)
{
    calls++;
    given = seed;
}

/* 0 has jansson take a seed from the system's randomness (its documentation of json_object_seed).
 * --version makes no object, which would seed the hash by itself. */
static void the_hash_of_objects_is_seeded_at_random(void **state)
{
    (void)state;
    char *arguments[] = {"undertagd", "--version", NULL};
    given = 77;
    assert_int_equal(undertagd_main(2, arguments), 0);
    assert_int_equal(calls, 1);
    assert_int_equal(given, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_hash_of_objects_is_seeded_at_random),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
