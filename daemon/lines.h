/*
 * lines: bytes as they come, taken out line by line, whatever the pieces they came in.
 *
 * A line ends with "\n"; a "\r" before it is dropped. A line longer than the limit is not held: its
 * beginning is dropped, its rest passed over, and it is told once as LINES_LONG.
 */
#ifndef UNDERTAG_LINES_H
#define UNDERTAG_LINES_H

#include <stdbool.h>
#include <stddef.h>

/* All members are private. */
struct lines {
    char *bytes;
    size_t start; /* of the first byte not yet taken */
    size_t end;   /* one past the last byte */
    size_t capacity;
    size_t scanned; /* bytes from start to here hold no line end */
    size_t limit_bytes;
    bool skipping; /* within the rest of a line that is too long */
};

/* Bytes of memory that it takes. */
size_t lines_bytes(const struct lines *lines);

/* Whether a line has begun and not ended, after lines_next said LINES_NONE. */
bool lines_is_within(const struct lines *lines);

enum lines_found {
    LINES_NONE, /* no whole line yet */
    LINES_LINE,
    LINES_LONG
};

void lines_init(struct lines *lines, size_t limit_bytes);
void lines_deinit(struct lines *lines);

/* Where up to `room` bytes may be put, before lines_added says how many were. NULL: no memory. */
char *lines_room(struct lines *lines, size_t room);
void lines_added(struct lines *lines, size_t count);

/* Gives memory beyond `most_bytes` back where nothing is held. */
void lines_shrink(struct lines *lines, size_t most_bytes);

/*
 * Takes the next line; *ret_line is ended by NUL (and may hold others) and is valid until the next
 * lines_room or lines_deinit; *ret_length is without the line end, *ret_taken with it.
 */
enum lines_found lines_next(struct lines *lines, char **ret_line, size_t *ret_length,
                            size_t *ret_taken);

/* The same at the end of the input, for a last line that no line end follows. */
enum lines_found lines_last(struct lines *lines, char **ret_line, size_t *ret_length,
                            size_t *ret_taken);

#endif
