#include "daemon/snapshot/snapshot_words.h"

#include <stdlib.h>

#include "daemon/grow.h"
#include "daemon/text/tfidf.h"

struct writing {
    struct snapshot_file file;
    struct snapshot_columns *columns;
    double documents;
    uint64_t next_word; /* numbers are below it */
};

void snapshot_columns_deinit(struct snapshot_columns *columns)
{
    free(columns->words);
    *columns = (struct snapshot_columns){0};
}

static int add_word(void *user, const struct model_store_word *word)
{
    struct writing *writing = user;
    struct snapshot_columns *columns = writing->columns;
    if (word->number >= writing->next_word) {
        return store_fail(writing->file.error, STORE_CORRUPT,
                          "a stored word of the model is damaged");
    }
    if (GROW(&columns->words, &columns->capacity, columns->count + 1) < 0) {
        return store_fail(writing->file.error, STORE_NO_MEMORY,
                          "there is no memory for a snapshot");
    }
    columns->words[columns->count++] = word->number;
    return snapshot_file_add(&writing->file,
                             json_pack("{s:o, s:I, s:f}", "word",
                                       json_stringn(word->term, word->term_bytes), "documents",
                                       (json_int_t)word->count, "idf",
                                       tfidf_idf(writing->documents, (double)word->count)));
}

int snapshot_words_write(struct export_part *part, struct model_view *view, uint64_t documents,
                         struct pace *pace, struct snapshot_columns *columns,
                         struct store_error *error)
{
    struct writing writing = {.columns = columns, .documents = (double)documents};
    struct model_store_head head;
    int code = model_view_head(view, &head, error);
    if (code == STORE_OK) {
        writing.next_word = head.next_word;
        code = snapshot_file_create(part, "words.jsonl", pace, error, &writing.file);
    }
    if (code != STORE_OK) {
        return code;
    }
    code = model_view_each_word(view, add_word, &writing, error);
    return snapshot_file_close(&writing.file, code);
}
