/*
 * store_notes: a few short texts of bytes that the daemon keeps in the store beside the items,
 * under a name each: they survive as the items do, and what they mean is not the store's affair.
 */
#ifndef UNDERTAG_STORE_NOTES_H
#define UNDERTAG_STORE_NOTES_H

#include <stddef.h>

#include "storage/codec.h"
#include "storage/store.h"

enum {
    STORE_NOTE_BYTES = 1900,    /* at most */
    STORE_NOTE_NAME_BYTES = 64, /* of its name, at most */
};

/* Copies a note out, into what `into` held before. STORE_NOT_FOUND where there is none,
 * STORE_CORRUPT where it is damaged. */
int store_get_note(struct store_view *view, const char *name, struct codec_writer *into,
                   struct store_error *error) __attribute__((warn_unused_result));

/* Puts a note in the place of what is there under the name. A writing view. */
int store_put_note(struct store_view *view, const char *name, const void *data, size_t size,
                   struct store_error *error) __attribute__((warn_unused_result));

#endif
