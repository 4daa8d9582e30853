/*
 * logbook: an invented stream of entries, the same in every run: entry n has always the same words
 * and the same tags. Each of its subjects has a tag and four words of its own.
 */
#ifndef UNDERTAG_TESTS_LOGBOOK_H
#define UNDERTAG_TESTS_LOGBOOK_H

#include <stddef.h>

#include "tests/integration/peer.h"

enum {
    LOGBOOK_TAGS_BYTES = 64
};

/* Writes the tags of an entry as a JSON array, with ' for ". */
void logbook_tags(unsigned number, char tags[LOGBOOK_TAGS_BYTES]);

/* Writes a text of that many words; `size` has room for 12 bytes a word. */
void logbook_text(unsigned number, size_t words, char *text, size_t size);

/* Files the entries from `first` on, with texts of `words` words and ids "entry N". */
void logbook_file(struct peer *peer, unsigned first, unsigned count, size_t words);

#endif
