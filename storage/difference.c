#include "storage/difference.h"

#include <stdint.h>
#include <string.h>

enum {
    NUMBER_BYTES = 4,
    HEAD_BYTES = 2,
    RUN_BYTES = 2,
    MOST_RUN = UINT8_MAX,
    MOST_NUMBERS = UINT16_MAX
};

static bool is_list(struct kv_bytes bytes)
{
    return bytes.size % NUMBER_BYTES == 0 && bytes.size / NUMBER_BYTES <= MOST_NUMBERS;
}

static const unsigned char *number_at(struct kv_bytes list, size_t at)
{
    return (const unsigned char *)list.data + at * NUMBER_BYTES;
}

/* Whether number `at` of a list is the same in the one before it. */
static bool is_kept(struct kv_bytes before, struct kv_bytes after, size_t at)
{
    return (at + 1) * NUMBER_BYTES <= before.size &&
           memcmp(number_at(before, at), number_at(after, at), NUMBER_BYTES) == 0;
}

/* The numbers from `at` on, MOST_RUN at most, that are kept, or are not. */
static size_t stretch(struct kv_bytes before, struct kv_bytes after, size_t at, bool kept)
{
    size_t end = after.size / NUMBER_BYTES;
    size_t count = 0;
    while (at + count < end && count < MOST_RUN && is_kept(before, after, at + count) == kept) {
        count++;
    }
    return count;
}

bool difference_make(struct kv_bytes before, struct kv_bytes after, unsigned char *into,
                     size_t most, size_t *ret_bytes)
{
    size_t count = after.size / NUMBER_BYTES;
    size_t used = HEAD_BYTES;
    if (!is_list(before) || !is_list(after) || most < HEAD_BYTES) {
        return false;
    }
    into[0] = (unsigned char)(count & UINT8_MAX);
    into[1] = (unsigned char)(count >> 8U);
    for (size_t at = 0; at < count;) {
        size_t kept = stretch(before, after, at, true);
        at += kept;
        size_t changed = stretch(before, after, at, false);
        if (changed == 0 && at == count) {
            break; /* the rest is as it was */
        }
        if (used + RUN_BYTES + changed * NUMBER_BYTES > most) {
            return false;
        }
        into[used] = (unsigned char)kept;
        into[used + 1] = (unsigned char)changed;
        memcpy(into + used + RUN_BYTES, number_at(after, at), changed * NUMBER_BYTES);
        used += RUN_BYTES + changed * NUMBER_BYTES;
        at += changed;
    }
    *ret_bytes = used;
    return true;
}

bool difference_apply(struct kv_bytes before, struct kv_bytes difference, unsigned char *into,
                      size_t most, size_t *ret_bytes)
{
    const unsigned char *bytes = difference.data;
    if (!is_list(before) || difference.size < HEAD_BYTES) {
        return false;
    }
    size_t count = (size_t)bytes[0] | (size_t)bytes[1] << 8U;
    size_t size = count * NUMBER_BYTES;
    if (size > most) {
        return false;
    }
    size_t common = before.size < size ? before.size : size;
    size_t known = common; /* a list that has grown is known as far as runs have come */
    if (common > 0) {
        memcpy(into, before.data, common);
    }
    size_t at = 0;
    for (size_t used = HEAD_BYTES; used < difference.size;) {
        if (difference.size - used < RUN_BYTES) {
            return false;
        }
        size_t from = at + bytes[used] * (size_t)NUMBER_BYTES;
        size_t changed = bytes[used + 1] * (size_t)NUMBER_BYTES;
        used += RUN_BYTES;
        if (difference.size - used < changed || from > known || from + changed > size) {
            return false;
        }
        memcpy(into + from, bytes + used, changed);
        used += changed;
        at = from + changed;
        known = at > known ? at : known;
    }
    if (known < size) {
        return false;
    }
    *ret_bytes = size;
    return true;
}
