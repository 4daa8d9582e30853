/*
 * items: filing, withdrawing and reading items in a view of the store.
 */
#ifndef UNDERTAG_ITEMS_H
#define UNDERTAG_ITEMS_H

#include "storage/codec.h"
#include "storage/numbers.h"
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

/* What a stored filing is to the one that comes. */
enum item_was {
    ITEM_NEW,
    ITEM_REVISED,
    ITEM_SAME
};

struct item_filed {
    uint64_t seq;
    enum item_was was;
    size_t text_bytes; /* of title and text, and tags: what learning the change will take */
    size_t tag_count;
};

/* What a change was refused for: which list, and which of its entries. */
struct item_refusal {
    enum {
        REFUSED_TAG,
        REFUSED_DECLINED,
        REFUSED_BELONGS,
        REFUSED_NOT,
        REFUSED_TAGGER /* no list: a second tagging by the one who filed the item */
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

/* Why a record was written. */
enum item_change {
    ITEM_FILED,
    ITEM_RULED,
    ITEM_CHECKED,
    ITEM_TAGGED_AGAIN,
    ITEM_WITHDRAWN
};

/* Who was not noted: a store of format 2 kept the user of an item's latest change only. */
#define ITEM_NO_UID UINT32_MAX

/* An editor's word on one tag of an item; the latest one only. */
struct item_ruling {
    uint32_t tag;
    uint32_t uid; /* who said so; likewise below */
    bool belongs;
    int64_t at_ms;
    struct store_text editor;
};

/* Somebody went through the whole vocabulary. */
struct item_check {
    bool is_there;
    bool is_random; /* the item was drawn at random */
    uint32_t uid;
    int64_t at_ms;
    struct store_text checker;
    uint32_t vocabulary;   /* tags below this number were there to be gone through */
    uint32_t seen;         /* tags on the item before */
    struct numbers tags;   /* the complete list */
    struct numbers given;  /* of those nobody had examined before: on the item */
    struct numbers hidden; /* likewise: missing */
    struct numbers extra;  /* taken off */
};

/* The same item as another tagger tagged it, without knowing of the first. */
struct item_second {
    struct store_text tagger;
    struct store_text filed_at;
    uint32_t uid;
    int64_t at_ms;
    struct numbers tags;
};

/*
 * An item as of one change, or a withdrawal, of which only seq, replaced, change, id, stored_at_ms
 * and uid are there. Texts and numbers point into the buffer that it was read into.
 */
struct item_record {
    uint64_t seq;
    uint64_t replaced; /* the seq of the record it took the place of; 0: none */
    enum item_change change;
    int64_t stored_at_ms; /* of this change */
    uint32_t uid;
    struct store_text id;

    uint64_t filed_seq; /* of the filing */
    uint32_t filed_uid;
    int64_t filed_stored_at_ms;
    struct store_text title;
    struct store_text text;
    struct store_text fields;
    struct store_text language;
    struct store_text tagger;
    struct store_text filed_at;
    struct numbers filed; /* as filed; prompted is a part of it, declined is not */
    struct numbers prompted;
    struct numbers declined;

    bool filed_after_check;
    struct item_check check;
    const struct item_ruling *rulings; /* by tag; at most one each */
    size_t ruling_count;
    const struct item_second *seconds; /* at most one a tagger */
    size_t second_count;

    /* What follows from all that. */
    struct numbers tags;       /* on the item now */
    struct numbers unprompted; /* of those, given in the filing without a proposal */
    struct numbers examined;   /* the others of them */
    struct numbers belongs;    /* ruled so */
    struct numbers denied;     /* ruled not to belong */
    struct numbers known_not;  /* ruled or declined: never to be proposed */
};

static inline bool item_is_withdrawn(const struct item_record *record)
{
    return record->change == ITEM_WITHDRAWN;
}

/* What one record is read into; zero-initialised is empty. */
struct item_buffer {
    struct codec_writer record;
    uint32_t *numbers;
    size_t number_capacity;
    struct item_ruling *rulings;
    size_t ruling_capacity;
    struct item_second *seconds;
    size_t second_capacity;
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
