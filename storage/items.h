/*
 * items: filing, withdrawing and reading items in a view of the store.
 */
#ifndef UNDERTAG_ITEMS_H
#define UNDERTAG_ITEMS_H

#include "storage/codec.h"
#include "storage/store.h"

/* Bytes that belong to somebody else; not ended by NUL. */
struct store_text {
    const char *data;
    size_t size;
};

/* What an editor filed, in words; all borrowed. An absent text is empty. */
struct item_filing {
    struct store_text id; /* 1 to 255 bytes */
    struct store_text title;
    struct store_text text;
    struct store_text fields; /* JSON, in one form for one meaning; empty for none */
    struct store_text language;
    struct store_text tagger;
    struct store_text filed_at;
    const struct store_text *tags; /* none twice; likewise the others */
    size_t tag_count;
    const struct store_text *prompted; /* a part of tags */
    size_t prompted_count;
    const struct store_text *declined; /* no part of tags */
    size_t declined_count;
    int64_t stored_at_ms; /* since 1970, UTC */
    uint32_t uid;         /* who filed it */
    bool open_unknown;    /* open a tag that is not there; otherwise it is refused */
};

enum item_was {
    ITEM_NEW,
    ITEM_REVISED,
    ITEM_SAME
};

struct item_filed {
    uint64_t seq;
    enum item_was was;
};

/* What a filing was refused for: which list, and which of its entries. */
struct item_refusal {
    enum {
        REFUSED_TAG,
        REFUSED_DECLINED
    } list;
    size_t at;
    bool retired; /* otherwise unknown */
};

/*
 * Files an item under the next seq, or finds that it is there already (ITEM_SAME: nothing changes).
 * `buffer` is workspace. STORE_REFUSED with *ret_refusal where the vocabulary refuses a tag;
 * nothing is changed then.
 */
int items_file(struct store_view *view, const struct item_filing *filing,
               struct codec_writer *buffer, struct item_filed *ret_filed,
               struct item_refusal *ret_refusal, struct store_error *error)
    __attribute__((warn_unused_result));

/* Withdraws an item under the next seq. STORE_NOT_FOUND where there is none. */
int items_withdraw(struct store_view *view, struct store_text id, int64_t stored_at_ms,
                   uint32_t uid, struct codec_writer *buffer, uint64_t *ret_seq,
                   struct store_error *error) __attribute__((warn_unused_result));

/* One change as stored. Texts and numbers point into the buffer that it was read into. */
struct item_record {
    uint64_t seq;
    uint64_t replaced; /* the seq of the record it took the place of; 0: none */
    bool withdrawn;    /* then only id, stored_at_ms and uid are there */
    struct store_text id;
    struct store_text title;
    struct store_text text;
    struct store_text fields;
    struct store_text language;
    struct store_text tagger;
    struct store_text filed_at;
    const uint32_t *tags; /* numbers, rising */
    size_t tag_count;
    const uint32_t *prompted;
    size_t prompted_count;
    const uint32_t *declined;
    size_t declined_count;
    int64_t stored_at_ms;
    uint32_t uid;
};

/* What one record is read into; zero-initialised is empty. */
struct item_buffer {
    struct codec_writer record;
    uint32_t *numbers;
    size_t number_capacity;
};

void item_buffer_deinit(struct item_buffer *buffer);

/* Reads the record of a change. STORE_NOT_FOUND where it was erased or never was. */
int items_read(struct store_view *view, uint64_t seq, struct item_buffer *buffer,
               struct item_record *ret_record, struct store_error *error)
    __attribute__((warn_unused_result));

/* The seq of an item as it is now. STORE_NOT_FOUND where there is none or it was withdrawn. */
int items_find(struct store_view *view, struct store_text id, uint64_t *ret_seq,
               struct store_error *error) __attribute__((warn_unused_result));

/*
 * Calls `each` for the newest change of every item changed after `since`, by seq, at most `most`
 * times. *ret_next is what to go on from: the seq of the last one given, or, when none is left, the
 * store's last seq.
 */
int items_changed(struct store_view *view, uint64_t since, size_t most,
                  int (*each)(void *user, const struct item_record *record), void *user,
                  struct item_buffer *buffer, uint64_t *ret_next, struct store_error *error)
    __attribute__((warn_unused_result));

#endif
