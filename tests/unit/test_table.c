#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "client/facts.h"
#include "client/screen.h"
#include "client/table.h"
#include "client/text.h"

/* A screen that writes into memory. */
struct page {
    struct screen screen;
    char *text;
    size_t length;
};

static void page_open(struct page *page, unsigned width)
{
    *page = (struct page){.screen = {.width = width, .unicode = true, .terminal = width > 0}};
    page->screen.stream = open_memstream(&page->text, &page->length);
    assert_non_null(page->screen.stream);
}

static void page_close(struct page *page)
{
    assert_int_equal(fclose(page->screen.stream), 0);
}

static const struct table_column COLUMNS[] = {
    {.heading = "tag", .shortens = true},
    {.heading = "chance", .right = true},
    {.heading = "", .gives_way = true, .style = SCREEN_BAR},
};

/* Prints a table of up to four rows of three cells, ended by NULL. */
static char *print(struct page *page, const char *const cells[][3])
{
    struct table *table = table_new(COLUMNS, 3);
    assert_non_null(table);
    for (size_t i = 0; cells[i][0]; i++) {
        assert_int_equal(table_add(table, cells[i]), 0);
    }
    assert_int_equal(table_print(table, &page->screen), 0);
    table_free(table);
    page_close(page);
    return page->text;
}

static void columns_are_as_wide_as_their_widest_cell(void **state)
{
    (void)state;
    const char *const cells[][3] = {{"fog signal", "0.84", "████"}, {"灯台", "0.3", ""}, {NULL}};
    struct page page;
    page_open(&page, 0);
    char *text = print(&page, cells);
    assert_string_equal(text, "tag         chance\n"
                              "fog signal    0.84  ████\n"
                              "灯台           0.3\n");
    free(text);
}

static void long_cells_end_in_an_ellipsis_at_the_edge_of_a_character(void **state)
{
    (void)state;
    const char *const cells[][3] = {{"灯台灯台灯台灯台灯台灯台", "0.84", ""}, {NULL}};
    struct page page;
    page_open(&page, 20);
    char *text = print(&page, cells);
    assert_string_equal(text, "tag           chance\n"
                              "灯台灯台灯…     0.84\n");
    free(text);
}

static void no_line_is_wider_than_the_terminal(void **state)
{
    (void)state;
    const char *const cells[][3] = {
        {"harbour master's correspondence with the trust", "0.84", "████████████████████"},
        {"fog", "0.31", "██"},
        {NULL}};
    for (unsigned width = 14; width < 90; width++) {
        struct page page;
        page_open(&page, width);
        char *text = print(&page, cells);
        for (const char *line = text; *line;) {
            size_t length = strcspn(line, "\n");
            size_t columns = 0;
            assert_int_equal(text_fit(line, length, SIZE_MAX, &columns), length);
            assert_true(columns <= width);
            line += length + 1;
        }
        free(text);
    }
}

static void bars_give_way_before_names_become_too_short(void **state)
{
    (void)state;
    const char *const cells[][3] = {
        {"harbour master's correspondence", "0.84", "████████████████████"}, {NULL}};
    struct page page;
    page_open(&page, 48);
    char *text = print(&page, cells);
    assert_non_null(strstr(text, "harbour master's …    0.84  ████████████████████\n"));
    free(text);
    page_open(&page, 40);
    text = print(&page, cells);
    assert_non_null(strstr(text, "harbour master's correspondence    0.84\n"));
    free(text);
}

static void no_control_character_of_a_cell_reaches_the_terminal(void **state)
{
    (void)state;
    const char *const cells[][3] = {{"a\033[2Jb\nc", NULL, NULL}, {NULL}};
    struct page page;
    page_open(&page, 80);
    char *text = print(&page, cells);
    assert_null(strchr(text, '\033'));
    assert_non_null(strstr(text, "a\uFFFD[2Jb c\n"));
    free(text);
}

static void colour_is_written_only_where_the_screen_has_it(void **state)
{
    (void)state;
    const char *const cells[][3] = {{"fog", "0.84", "██"}, {NULL}};
    struct page page;
    page_open(&page, 80);
    page.screen.colour = true;
    char *text = print(&page, cells);
    assert_non_null(strstr(text, "\033[36m██\033[0m\n"));
    free(text);
    page_open(&page, 80);
    text = print(&page, cells);
    assert_null(strchr(text, '\033'));
    free(text);
}

static void colour_needs_a_terminal_that_is_not_dumb_and_no_word_against_it(void **state)
{
    (void)state;
    assert_true(screen_wants_colour(true, NULL, "xterm"));
    assert_true(screen_wants_colour(true, "", "xterm")); /* no-color.org: "not an empty string" */
    assert_false(screen_wants_colour(true, "1", "xterm"));
    assert_false(screen_wants_colour(false, NULL, "xterm"));
    assert_false(screen_wants_colour(true, NULL, "dumb"));
    assert_false(screen_wants_colour(true, NULL, NULL));
}

static void the_first_locale_variable_that_is_set_decides_about_unicode(void **state)
{
    (void)state;
    assert_true(screen_wants_unicode(NULL, NULL, NULL));
    assert_true(screen_wants_unicode(NULL, NULL, "de_DE.UTF-8"));
    assert_true(screen_wants_unicode("", "C.utf8", "C"));
    assert_false(screen_wants_unicode("C", NULL, "de_DE.UTF-8"));
    assert_false(screen_wants_unicode(NULL, NULL, "de_DE.ISO-8859-1"));
}

static void facts_are_wrapped_beside_their_names(void **state)
{
    (void)state;
    struct page page;
    page_open(&page, 32);
    assert_int_equal(facts_print(&page.screen, 10, "title", "The supply boat came late again"), 0);
    assert_int_equal(facts_printf(&page.screen, 10, "", "%d of %d", 2, 3), 0);
    page_close(&page);
    assert_string_equal(page.text, "title     The supply boat came\n"
                                   "          late again\n"
                                   "          2 of 3\n");
    free(page.text);
}

static void running_text_keeps_its_empty_lines(void **state)
{
    (void)state;
    struct page page;
    page_open(&page, 18);
    assert_int_equal(facts_text(&page.screen, "Fog until noon.\n\nThen clear, wind west.", 2), 0);
    page_close(&page);
    assert_string_equal(page.text, "  Fog until noon.\n\n  Then clear, wind\n  west.\n");
    free(page.text);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(columns_are_as_wide_as_their_widest_cell),
        cmocka_unit_test(long_cells_end_in_an_ellipsis_at_the_edge_of_a_character),
        cmocka_unit_test(no_line_is_wider_than_the_terminal),
        cmocka_unit_test(bars_give_way_before_names_become_too_short),
        cmocka_unit_test(no_control_character_of_a_cell_reaches_the_terminal),
        cmocka_unit_test(colour_is_written_only_where_the_screen_has_it),
        cmocka_unit_test(colour_needs_a_terminal_that_is_not_dumb_and_no_word_against_it),
        cmocka_unit_test(the_first_locale_variable_that_is_set_decides_about_unicode),
        cmocka_unit_test(facts_are_wrapped_beside_their_names),
        cmocka_unit_test(running_text_keeps_its_empty_lines),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
