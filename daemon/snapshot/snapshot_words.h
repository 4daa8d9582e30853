/*
 * snapshot_words: words.jsonl, the columns of the matrix: a line a word, in the order of their
 * bytes.
 */
#ifndef UNDERTAG_SNAPSHOT_WORDS_H
#define UNDERTAG_SNAPSHOT_WORDS_H

#include "daemon/snapshot/snapshot_file.h"
#include "daemon/snapshot/snapshot_room.h"
#include "storage/model_view.h"

/* The words' numbers, by column. Zero-initialised is empty. */
struct snapshot_columns {
    struct snapshot_room room;
    uint32_t *words;
    size_t count;
    size_t most;
};

void snapshot_columns_deinit(struct snapshot_columns *columns);

/* Writes a stored model's words; `documents` is the number of items that it knows. */
int snapshot_words_write(struct export_part *part, struct model_view *view, uint64_t documents,
                         struct pace *pace, struct snapshot_columns *columns,
                         struct store_error *error) __attribute__((warn_unused_result));

#endif
