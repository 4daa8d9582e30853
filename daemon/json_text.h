/*
 * json_text: JSON written as it is made, without a tree in between: for the one answer that is
 * asked for thousands of times a second. Everything else goes through jansson, which is slower: of
 * the 530,000 instructions of such an answer its tree and its text took 230,000, most of them for
 * seventeen digits of numbers of which seven mean something.
 *
 * Zero-initialised is empty. Want of memory shows in the end, in json_text_take.
 */
#ifndef UNDERTAG_JSON_TEXT_H
#define UNDERTAG_JSON_TEXT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct json_text {
    char *bytes;
    size_t used;
    size_t capacity;
    bool failed; /* no memory */
};

/* JSON as it is: brackets, commas, names, or what was written before. */
void json_text_plain(struct json_text *text, const char *json);

/* A string with its quotation marks; `bytes` of UTF-8. */
void json_text_string(struct json_text *text, const char *string, size_t bytes);

/* A finite number with a point or an exponent, so that readers take it for a real one. What is next
 * to nothing, or a thousand and more, has all its digits. Others have twelve places; the rest is
 * cut off, so that shares still sum to one at most, and a floor that is a chance as shown shows it.
 */
void json_text_real(struct json_text *text, double value);

void json_text_whole(struct json_text *text, uint64_t value);

/* The text, for free(), with its end; NULL: no memory. What the writer holds is gone either way. */
char *json_text_take(struct json_text *text) __attribute__((warn_unused_result));

#endif
