/*
 * Our stems against Snowball's published vocabularies: voc.txt and output.txt of each language, as
 * the Snowball project publishes them (Debian package snowball-data). Every word of a vocabulary
 * goes the way of a text: cut, folded, stemmed. A few lines are no word by UAX #29 (an apostrophe
 * at the end) and are passed over.
 */
#include "daemon/text/words.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#include <cmocka.h>

#include "tests/reference/data_file.h"

struct vocabulary {
    const char *name; /* of its folder */
    const char *language;
    size_t fewest; /* words that must have been compared */
};

struct found {
    size_t count;
    size_t surface_bytes;
    char term[WORDS_TERM_BYTES + 1];
};

static int collect(void *user, const struct word *word)
{
    struct found *found = user;
    memcpy(found->term, word->term, word->term_bytes);
    found->term[word->term_bytes] = '\0';
    found->surface_bytes = word->surface_bytes;
    found->count++;
    return 0;
}

static bool open_vocabulary(const char *name, const char *file_name, struct data_file *file)
{
    char path[256];
    (void)snprintf(path, sizeof path, "/usr/share/snowball/data/%s/%s", name, file_name);
    return data_open(file, path, "snowball-data");
}

static void check_vocabulary(const struct vocabulary *vocabulary)
{
    const struct words_settings settings = {.stemming = true, .language = vocabulary->language};
    struct data_file words_file;
    struct data_file stems_file;
    struct words *words = NULL;
    char word[DATA_LINE_BYTES];
    char stem[DATA_LINE_BYTES];
    size_t agreed = 0;
    size_t differ = 0;
    size_t not_one_word = 0;
    if (!open_vocabulary(vocabulary->name, "voc.txt", &words_file)) {
        skip();
    }
    assert_true(open_vocabulary(vocabulary->name, "output.txt", &stems_file));
    assert_int_equal(words_new(&settings, &words), 0);
    while (data_line(&words_file, word)) {
        struct found found = {0};
        assert_true(data_line(&stems_file, stem));
        assert_int_equal(words_scan(words, word, strlen(word), NULL, collect, &found), 0);
        bool is_one_word = found.count == 1 && found.surface_bytes == strlen(word);
        bool agrees = is_one_word && strcmp(found.term, stem) == 0;
        agreed += agrees;
        not_one_word += !is_one_word;
        if (is_one_word && !agrees && differ++ < 20) {
            print_error("%s: %s, not %s\n", word, found.term, stem);
        }
    }
    words_free(words);
    assert_true(data_close(&words_file));
    assert_true(data_close(&stems_file));
    print_message("%s: %zu stems agree, %zu differ, %zu lines are not one word\n", vocabulary->name,
                  agreed, differ, not_one_word);
    assert_int_equal(differ, 0);
    assert_true(agreed >= vocabulary->fewest);
}

static void english_words_get_the_published_stems(void **state)
{
    (void)state;
    check_vocabulary(&(struct vocabulary){"english", "en", 29000});
}

static void german_words_get_the_published_stems(void **state)
{
    (void)state;
    check_vocabulary(&(struct vocabulary){"german", "de", 35000});
}

static void french_words_get_the_published_stems(void **state)
{
    (void)state;
    check_vocabulary(&(struct vocabulary){"french", "fr", 20000});
}

static void russian_words_get_the_published_stems(void **state)
{
    (void)state;
    check_vocabulary(&(struct vocabulary){"russian", "ru", 49000});
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(english_words_get_the_published_stems),
        cmocka_unit_test(german_words_get_the_published_stems),
        cmocka_unit_test(french_words_get_the_published_stems),
        cmocka_unit_test(russian_words_get_the_published_stems),
    };
    return cmocka_run_group_tests_name("stems against Snowball", tests, NULL, NULL);
}
