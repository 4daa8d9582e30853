#include "tests/integration/logbook.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum {
    SUBJECTS = 8,
    WORDS = 4,
    BESIDE = 200000 /* other words, of no subject */
};

static const struct {
    const char *tag;
    const char *words[WORDS];
} LOGBOOK[SUBJECTS] = {
    {"fog", {"fog", "haze", "horn", "dense"}},
    {"lamp", {"wick", "lens", "oil", "mantle"}},
    {"wreck", {"wreck", "reef", "hull", "salvage"}},
    {"birds", {"gulls", "terns", "nest", "flock"}},
    {"supply", {"boat", "crate", "flour", "landing"}},
    {"weather", {"gale", "swell", "rain", "glass"}},
    {"visitor", {"guest", "inspector", "parson", "tea"}},
    {"harbour", {"quay", "pilot", "buoy", "ferry"}},
};

/* Evenly spread (SplitMix64; Steele, Lea, Flood 2014; constants from memory). */
static uint64_t spread(uint64_t value)
{
    value += 0x9E3779B97F4A7C15U;
    value = (value ^ (value >> 30)) * 0xBF58476D1CE4E5B9U;
    value = (value ^ (value >> 27)) * 0x94D049BB133111EBU;
    return value ^ (value >> 31);
}

static unsigned subject_of(unsigned number)
{
    return (unsigned)(spread(number) % SUBJECTS);
}

/* A second subject, of which the tag is forgotten every third time. */
static unsigned beside(unsigned number)
{
    return (subject_of(number) + 1 + (unsigned)(spread(number + 1000000U) % 3)) % SUBJECTS;
}

void logbook_tags(unsigned number, char tags[LOGBOOK_TAGS_BYTES])
{
    const char *first = LOGBOOK[subject_of(number)].tag;
    if (number % 3 == 0) {
        (void)snprintf(tags, LOGBOOK_TAGS_BYTES, "['%s']", first);
    } else {
        (void)snprintf(tags, LOGBOOK_TAGS_BYTES, "['%s', '%s']", first,
                       LOGBOOK[beside(number)].tag);
    }
}

void logbook_text(unsigned number, size_t words, char *text, size_t size)
{
    size_t used = 0;
    text[0] = '\0';
    for (size_t i = 0; i < words; i++) {
        uint64_t draw = spread((uint64_t)number * 1000003U + i);
        unsigned subject = i % 2 ? beside(number) : subject_of(number);
        int length =
            i < (size_t)2 * WORDS || draw % 4 == 0
                ? snprintf(text + used, size - used, "%s ",
                           LOGBOOK[subject].words[draw / 4 % WORDS])
                : snprintf(text + used, size - used, "entry%u ", (unsigned)(draw / 4 % BESIDE));
        assert_in_range(length, 1, size - used - 1);
        used += (size_t)length;
    }
}

static unsigned request(struct peer *peer, unsigned number, size_t words, char *text, size_t size)
{
    char tags[LOGBOOK_TAGS_BYTES];
    logbook_tags(number, tags);
    logbook_text(number, words, text, size);
    return peer_request(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}", number,
                        text, tags);
}

void logbook_file(struct peer *peer, unsigned first, unsigned count, size_t words)
{
    enum {
        WINDOW = 64 /* requests under way */
    };
    size_t size = 12 * words + 1;
    char *text = malloc(size);
    unsigned ids[WINDOW];
    assert_non_null(text);
    for (unsigned i = 0; i < count + WINDOW; i++) {
        if (i >= WINDOW && i - WINDOW < count) {
            (void)peer_result(peer, ids[i % WINDOW]);
        }
        if (i < count) {
            ids[i % WINDOW] = request(peer, first + i, words, text, size);
        }
    }
    free(text);
}
