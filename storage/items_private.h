/*
 * items_private: the form of stored items and the steps of a change, for the files that are the
 * items together: items (filing), items_examine (rulings, checks, second taggings), items_read,
 * item_evidence, item_tally.
 */
#ifndef UNDERTAG_ITEMS_PRIVATE_H
#define UNDERTAG_ITEMS_PRIVATE_H

#include "storage/items.h"
#include "storage/vocabulary.h"

/*
 * A record is
 *   kind u8 · replaced u64 · stored_at u64 · uid u32 · id blob          every change
 *   tagger blob · filed_at blob · content blob                           items
 *   evidence                                                             items that have any
 * where the content is what makes two filings the same: title, text, fields, language blobs, then
 * the numbers of tags, prompted and declined, each with their count in front. The form of the
 * evidence stands in item_evidence.c; a record that ends before it is a filing that nobody has
 * looked at yet.
 *
 * The entry of an id is: seq u64 · withdrawn u8 · proof.
 */
enum record_kind {
    RECORD_ITEM = 1,
    RECORD_WITHDRAWAL = 2
};

enum {
    ID_BYTES = 255,
    ID_ENTRY_BYTES = 9 /* the proof not counted */
};

struct id_entry {
    uint64_t seq;
    bool withdrawn;
};

/* The entry of an id, also of a withdrawn one. STORE_NOT_FOUND where there never was one. */
int items_entry(struct store_view *view, struct store_text id, struct id_entry *ret_entry,
                struct store_error *error) __attribute__((warn_unused_result));

/* The content of a stored item, for comparing it with a new one; points into the record. */
struct store_text items_stored_content(const struct codec_writer *record);

static inline int items_no_memory(struct store_error *error)
{
    (void)store_fail(error, STORE_NO_MEMORY, "out of memory");
    return STORE_NO_MEMORY;
}

/* --- texts and numbers in a record --- */

void item_put_text(struct codec_writer *writer, struct store_text text);
struct store_text item_get_text(struct codec_reader *reader);
void item_put_numbers(struct codec_writer *writer, struct numbers numbers);

/* Reads a list into the buffer's numbers, from *used on; more than the record or the buffer can
 * hold is a failed read. */
struct numbers item_get_numbers(struct codec_reader *reader, struct item_buffer *buffer,
                                size_t *used);

/* --- item_evidence: what was said of an item since it was filed --- */

/* Puts what belongs behind the content; nothing where a plain filing has no evidence. */
void item_evidence_put(struct codec_writer *writer, const struct item_record *record);

/* Reads it into the record and the buffer, and adds what follows from it. The buffer's numbers are
 * in use below `used`, and have room (items_read sees to both). */
int item_evidence_get(struct codec_reader *reader, struct item_buffer *buffer, size_t used,
                      struct item_record *record, struct store_error *error)
    __attribute__((warn_unused_result));

/* How many numbers need room, the lists that follow included, where so many are stored. */
size_t item_evidence_room(size_t stored_numbers);

/* Fills the lists that follow from the others; `room` is that of all their numbers. */
void item_evidence_follow(struct item_record *record, uint32_t *room);

/* --- item_tally: the counts of tags and of the store --- */

/* Moves the counts from what an item was to what it is; NULL: nothing. */
int item_tally_move(struct store_view *view, const struct item_record *from,
                    const struct item_record *to, struct store_error *error)
    __attribute__((warn_unused_result));

/* Adds what an item counts to the counts of its tags, which are by number. STORE_CORRUPT, with
 * those of the others added, where it holds a tag that is none of them. */
int item_tally_add(struct vocabulary_counts *counts, uint64_t tag_count,
                   const struct item_record *item) __attribute__((warn_unused_result));

/* Adds what it counts to the store's totals. */
void item_tally_totals(struct store_totals *totals, const struct item_record *item);

/* --- the steps of a change --- */

/* What stands under an id. */
struct standing_item {
    struct id_entry entry; /* seq 0: the id is new */
    struct item_buffer buffer;
    struct item_record record; /* where it is not withdrawn */
};

static inline bool item_stands(const struct standing_item *standing)
{
    return standing->entry.seq != 0 && !standing->entry.withdrawn;
}

/* Reads it, if it is there. */
int items_standing(struct store_view *view, struct store_text id, struct standing_item *standing,
                   struct store_error *error) __attribute__((warn_unused_result));

/* The number of a tag, NO_NUMBER where there is none. */
#define NO_NUMBER UINT32_MAX
int items_look_up(struct store_view *view, struct store_text name, uint32_t *ret_number,
                  bool *ret_retired, struct store_error *error) __attribute__((warn_unused_result));

/*
 * Stores `record` under the next seq, in the place of `standing`, with `content` as its content,
 * and moves all counts. What follows from the record's lists, its seq and what it replaced are
 * filled here; the lists that follow are gone when this returns.
 */
int items_put(struct store_view *view, const struct standing_item *standing,
              struct item_record *record, struct store_text content, struct codec_writer *buffer,
              struct store_error *error) __attribute__((warn_unused_result));

#endif
