#include "daemon/snapshot/snapshot_words.h"

#include "daemon/text/tfidf.h"

struct writing {
    struct snapshot_file file;
    struct snapshot_columns *columns;
    double documents;
};

void snapshot_columns_deinit(struct snapshot_columns *columns)
{
    snapshot_room_free(&columns->room);
    *columns = (struct snapshot_columns){0};
}

static int add_word(void *user, const struct model_store_word *word)
{
    struct writing *writing = user;
    struct snapshot_columns *columns = writing->columns;
    if (word->number >= columns->most || columns->count >= columns->most) {
        return store_fail(writing->file.error, STORE_CORRUPT,
                          "a stored word of the model is damaged");
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
        columns->most = (size_t)head.next_word; /* numbers are below it */
        code = snapshot_room_make(part, (columns->most + 1) * sizeof *columns->words,
                                  &columns->room, error);
        columns->words = columns->room.data;
    }
    if (code == STORE_OK) {
        code = snapshot_file_create(part, "words.jsonl", pace, error, &writing.file);
    }
    if (code != STORE_OK) {
        return code;
    }
    code = model_view_each_word(view, add_word, &writing, error);
    return snapshot_file_close(&writing.file, code);
}
