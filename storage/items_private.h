/*
 * items_private: the form of stored items, for the two files that are the items together: items
 * (filing) and items_read.
 */
#ifndef UNDERTAG_ITEMS_PRIVATE_H
#define UNDERTAG_ITEMS_PRIVATE_H

#include "storage/items.h"

/*
 * A record is
 *   kind u8 · replaced u64 · stored_at u64 · uid u32 · id blob          every change
 *   tagger blob · filed_at blob · content blob                           filings
 * where the content is what makes two filings the same: title, text, fields, language blobs, then
 * the numbers of tags, prompted and declined, each with their count in front.
 *
 * The entry of an id is: seq u64 · withdrawn u8.
 */
enum record_kind {
    RECORD_FILING = 1,
    RECORD_WITHDRAWAL = 2
};

struct id_entry {
    uint64_t seq;
    bool withdrawn;
};

/* The entry of an id, also of a withdrawn one. STORE_NOT_FOUND where there never was one. */
int items_entry(struct store_view *view, struct store_text id, struct id_entry *ret_entry,
                struct store_error *error) __attribute__((warn_unused_result));

/* The content of a stored filing, for comparing it with a new one; points into the record. */
struct store_text items_stored_content(const struct codec_writer *record);

#endif
