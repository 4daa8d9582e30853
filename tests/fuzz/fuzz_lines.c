/*
 * The line splitter, whatever the pieces that bytes come in.
 *
 * Input: the limit, the sizes of the pieces in turn (a byte each, up to a NUL), then the bytes of
 * the connection. What comes out is compared with a plain splitter that has all bytes at once.
 */
#include "daemon/lines.h"

#include "tests/fuzz/fuzz.h"

/* The lines that are due, from bytes that are all there. */
struct expected {
    struct fuzz_input rest;
    size_t limit;
};

/* What the next line is, by the contract in lines.h; LINES_NONE where no line end is left. */
static enum lines_found expect(struct expected *expected, bool at_end, struct fuzz_input *ret_line,
                               size_t *ret_taken)
{
    struct fuzz_input *rest = &expected->rest;
    const uint8_t *found = rest->size > 0 ? memchr(rest->data, '\n', rest->size) : NULL;
    if (!found && (!at_end || rest->size == 0)) {
        return LINES_NONE;
    }
    size_t length = found ? (size_t)(found - rest->data) : rest->size;
    *ret_taken = length + (found ? 1 : 0);
    *ret_line = fuzz_part(rest, length);
    (void)fuzz_part(rest, *ret_taken - length);
    if (length > expected->limit) {
        return LINES_LONG;
    }
    if (length > 0 && ret_line->data[length - 1] == '\r') {
        ret_line->size--;
    }
    return LINES_LINE;
}

/* Takes one line and compares. False: there is none (yet). */
static bool take_one(struct lines *lines, struct expected *expected, bool at_end)
{
    char *line = NULL;
    size_t length = 0;
    size_t taken = 0;
    enum lines_found found = at_end ? lines_last(lines, &line, &length, &taken)
                                    : lines_next(lines, &line, &length, &taken);
    if (found == LINES_NONE) {
        return false;
    }
    struct fuzz_input due = {0};
    size_t due_taken = 0;
    FUZZ_CHECK(expect(expected, at_end, &due, &due_taken) == found);
    if (found == LINES_LINE) {
        FUZZ_CHECK(taken == due_taken);
        FUZZ_CHECK(length == due.size);
        FUZZ_CHECK(length == 0 || memcmp(line, due.data, length) == 0);
        FUZZ_CHECK(line[length] == '\0');
    }
    return true;
}

/* Puts a piece in, as a connection does: room is asked for more than comes. */
static void put(struct lines *lines, struct fuzz_input piece)
{
    char *room = lines_room(lines, piece.size + 64);
    FUZZ_CHECK(room);
    if (piece.size > 0) {
        memcpy(room, piece.data, piece.size);
    }
    lines_added(lines, piece.size);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    struct fuzz_input input = {.data = data, .size = size};
    size_t limit = fuzz_u32(&input) % (1U << 24U);
    struct fuzz_input pieces = fuzz_until(&input, '\0');
    struct expected expected = {.rest = input, .limit = limit};
    struct lines lines;
    lines_init(&lines, limit);
    for (size_t i = 0; input.size > 0; i++) {
        uint8_t step = pieces.size > 0 ? pieces.data[i % pieces.size] : UINT8_MAX;
        /* Up to 64 KiB, as libuv reads: every eighth of the steps is large. */
        put(&lines, fuzz_part(&input, step >= 224 ? (size_t)(step - 223) * 2048 : step));
        while (take_one(&lines, &expected, false)) {
        }
        /* All that is held is part of a line within the limit. */
        FUZZ_CHECK(lines.end - lines.start <= limit);
        lines_shrink(&lines, step);
    }
    while (take_one(&lines, &expected, true)) {
    }
    FUZZ_CHECK(expected.rest.size == 0);
    lines_deinit(&lines);
    return 0;
}

/* A line of just 8 MiB, and one of a byte more, where that is the limit; then another line. */
uint8_t *fuzz_made(size_t number, size_t *ret_size)
{
    static const uint8_t HEAD[] = {0, 0, 0x80, 0, 0xFF, 0}; /* the limit; one size of piece */
    if (number > 1) {
        return NULL;
    }
    uint8_t *made = fuzz_repeated("......", "f", (8U << 20U) + number, "\nfog\n", ret_size);
    memcpy(made, HEAD, sizeof HEAD);
    return made;
}
