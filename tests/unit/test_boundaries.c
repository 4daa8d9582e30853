/* The short rules for ASCII give what the full rules give, on all that they can tell apart. */
#include "daemon/text/boundaries.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

#include <cmocka.h>

enum {
    LONGEST = 5
};

/* One or two characters of each Word_Break class that ASCII has. */
static const char alphabet[] = "aZ1_:,;.'\" \r\n\t-";

static void assert_pieces_agree(const char *text, size_t bytes)
{
    char is_boundary[LONGEST + 1];
    boundaries_find(text, bytes, is_boundary);
    size_t piece_end = boundaries_ascii_end(text, bytes, 0);
    for (size_t i = 1; i < bytes; i++) {
        bool is_end = i == piece_end;
        if (is_end != (is_boundary[i] != 0)) {
            fail_msg("byte %zu of \"%.*s\"", i, (int)bytes, text);
        }
        if (is_end) {
            piece_end = boundaries_ascii_end(text, bytes, i);
        }
    }
    assert_int_equal(piece_end, bytes);
}

static void every_short_text_of_every_class_is_cut_alike(void **state)
{
    (void)state;
    const size_t letters = sizeof alphabet - 1;
    size_t texts = letters;
    for (size_t length = 1; length <= LONGEST; length++, texts *= letters) {
        for (size_t number = 0; number < texts; number++) {
            char text[LONGEST];
            size_t rest = number;
            for (size_t i = 0; i < length; i++, rest /= letters) {
                text[i] = alphabet[rest % letters];
            }
            assert_pieces_agree(text, length);
        }
    }
}

static void every_ascii_character_is_cut_alike_between_all_classes(void **state)
{
    (void)state;
    for (int middle = 0; middle < 0x80; middle++) {
        for (const char *before = alphabet; *before; before++) {
            for (const char *after = alphabet; *after; after++) {
                const char text[] = {*before, (char)middle, *after};
                assert_pieces_agree(text, sizeof text);
            }
        }
    }
}

static void a_piece_ends_where_the_text_does(void **state)
{
    (void)state;
    assert_int_equal(boundaries_ascii_end("lamp", 4, 0), 4);
    assert_int_equal(boundaries_ascii_end("lamp.", 5, 0), 4);
    assert_int_equal(boundaries_ascii_end("lamp.", 5, 4), 5);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_short_text_of_every_class_is_cut_alike),
        cmocka_unit_test(every_ascii_character_is_cut_alike_between_all_classes),
        cmocka_unit_test(a_piece_ends_where_the_text_does),
    };
    return cmocka_run_group_tests_name("boundaries", tests, NULL, NULL);
}
