/*
 * filed_line: a line of items into the requests that it stands for.
 *
 * Most lines are the params of one item.file, and are sent as they stand. One may hold a member
 * `then`, as the lines of a snapshot's items.jsonl do: a list of {"method", "params"}, which are
 * made of the same item in that order, behind its filing. Methods: item.file, item.rule,
 * item.check; the params are without the id. Pure.
 */
#ifndef UNDERTAG_CLIENT_FILED_LINE_H
#define UNDERTAG_CLIENT_FILED_LINE_H

#include <stddef.h>

enum {
    FILED_LINE_REASON_BYTES = 512
};

struct filed_request {
    const char *method; /* a literal */
    char *params;       /* one JSON text without a line end */
    size_t length;
};

/* All zero is empty. */
struct filed_line {
    struct filed_request *requests; /* the first is item.file */
    size_t count;
};

void filed_line_deinit(struct filed_line *line);

enum filed_line_found {
    FILED_LINE_GOOD,
    FILED_LINE_BAD,      /* with the reason, without a full stop */
    FILED_LINE_NO_MEMORY /* *ret_line is empty then, and where it is bad */
};

/* Reads `length` bytes. What the daemon can judge by itself is left to it. */
enum filed_line_found filed_line_read(const char *text, size_t length, struct filed_line *ret_line,
                                      char reason[FILED_LINE_REASON_BYTES])
    __attribute__((warn_unused_result));

#endif
