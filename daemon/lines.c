#include "daemon/lines.h"

#include <assert.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

void lines_init(struct lines *lines, size_t limit_bytes)
{
    *lines = (struct lines){.limit_bytes = limit_bytes};
}

void lines_deinit(struct lines *lines)
{
    free(lines->bytes);
    *lines = (struct lines){0};
}

void lines_shrink(struct lines *lines, size_t most_bytes)
{
    if (lines->start == lines->end && lines->capacity > most_bytes) {
        free(lines->bytes);
        *lines = (struct lines){.limit_bytes = lines->limit_bytes, .skipping = lines->skipping};
    }
}

size_t lines_bytes(const struct lines *lines)
{
    return lines->capacity;
}

bool lines_is_within(const struct lines *lines)
{
    return lines->end > lines->start || lines->skipping;
}

char *lines_room(struct lines *lines, size_t room)
{
    if (lines->start > 0 && (lines->start == lines->end || lines->start > lines->capacity / 2)) {
        memmove(lines->bytes, lines->bytes + lines->start, lines->end - lines->start);
        lines->end -= lines->start;
        lines->scanned -= lines->start;
        lines->start = 0;
    }
    /* One byte more than asked, for the NUL behind a last line. */
    if (room >= SIZE_MAX / 2 || lines->end >= SIZE_MAX / 2 - room) {
        return NULL;
    }
    size_t needed = lines->end + room + 1;
    if (needed > lines->capacity) {
        size_t capacity = needed > 2 * lines->capacity ? needed : 2 * lines->capacity;
        char *bytes = realloc(lines->bytes, capacity);
        if (!bytes) {
            return NULL;
        }
        lines->bytes = bytes;
        lines->capacity = capacity;
    }
    return lines->bytes + lines->end;
}

void lines_added(struct lines *lines, size_t count)
{
    assert(lines->end + count < lines->capacity);
    lines->end += count;
}

/* Hands out the bytes from start to `stop`; `taken` of them are then gone. */
static enum lines_found take(struct lines *lines, size_t stop, size_t taken, char **ret_line,
                             size_t *ret_length, size_t *ret_taken)
{
    size_t start = lines->start;
    size_t length = stop - start;
    bool was_skipping = lines->skipping;
    lines->start += taken;
    lines->scanned = lines->start;
    lines->skipping = false;
    *ret_taken = taken;
    if (was_skipping || length > lines->limit_bytes) {
        return LINES_LONG; /* there may be no bytes at all */
    }
    char *line = lines->bytes + start;
    if (length > 0 && line[length - 1] == '\r') {
        length--;
    }
    line[length] = '\0';
    *ret_line = line;
    *ret_length = length;
    return LINES_LINE;
}

enum lines_found lines_next(struct lines *lines, char **ret_line, size_t *ret_length,
                            size_t *ret_taken)
{
    if (lines->scanned < lines->end) {
        char *found = memchr(lines->bytes + lines->scanned, '\n', lines->end - lines->scanned);
        if (found) {
            size_t stop = (size_t)(found - lines->bytes);
            return take(lines, stop, stop + 1 - lines->start, ret_line, ret_length, ret_taken);
        }
    }
    lines->scanned = lines->end;
    if (lines->skipping || lines->end - lines->start > lines->limit_bytes) {
        lines->skipping = true;
        lines->start = lines->end;
    }
    return LINES_NONE;
}

enum lines_found lines_last(struct lines *lines, char **ret_line, size_t *ret_length,
                            size_t *ret_taken)
{
    if (lines->start == lines->end && !lines->skipping) {
        return LINES_NONE;
    }
    return take(lines, lines->end, lines->end - lines->start, ret_line, ret_length, ret_taken);
}
