#include "client/command.h"

#include <errno.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "client/text.h"

enum {
    COMPLAINT_BYTES = 2048,
    READ_BYTES = 64 * 1024
};

void command_complain(const struct client *client, const char *format, ...)
{
    char sentence[COMPLAINT_BYTES];
    va_list arguments;
    va_start(arguments, format);
    int written = vsnprintf(sentence, sizeof sentence, format, arguments);
    va_end(arguments);
    char *clean = written < 0 ? NULL : text_clean(sentence, TEXT_ONE_LINE);
    /* Nothing is left to tell it to where standard error cannot be written. */
    (void)fprintf(client->err.stream, "undertag: %s\n", clean ? clean : "there is no memory");
    free(clean);
}

int command_ask_take(const struct client *client, const char *method, json_t *params,
                     struct wire_answer *ret_answer, struct failure *failure)
{
    struct wire *wire = NULL;
    int code = wire_open(client->socket_path, &wire, failure);
    if (code) {
        json_decref(params);
        return code;
    }
    code = wire_call_take(wire, method, params, ret_answer, failure);
    wire_free(wire);
    return code;
}

int command_show_take(const struct client *client, const struct command_question *question,
                      json_t *params, const struct args *args, struct failure *failure)
{
    struct wire_answer answer = {0};
    int code = command_ask_take(client, question->method, params, &answer, failure);
    if (code) {
        return code;
    }
    if (client->json) {
        command_print_json(client, &answer);
    } else {
        code = reply_check(answer.result, question->shape, failure);
    }
    if (!code && !client->json && question->print(client, answer.result, args)) {
        code = failure_memory(failure);
    }
    wire_answer_deinit(&answer);
    return code;
}

void command_print_json(const struct client *client, const struct wire_answer *answer)
{
    FILE *stream = client->out.stream;
    const char *text = answer->result_text;
    size_t length = answer->result_text_length;
    size_t from = 0; /* errors stay on the stream */
    for (size_t at = 0; at < length; at++) {
        unsigned char byte = (unsigned char)text[at];
        size_t bytes = 0;
        unsigned character = 0;
        if (byte == 0x7F) {
            bytes = 1;
            character = byte;
        } else if (byte == 0xC2 && at + 1 < length && (unsigned char)text[at + 1] < 0xA0) {
            bytes = 2;
            character = (unsigned char)text[at + 1];
        }
        if (bytes > 0) {
            (void)fwrite(text + from, 1, at - from, stream);
            (void)fprintf(stream, "\\u%04x", character);
            at += bytes - 1;
            from = at + 1;
        }
    }
    (void)fwrite(text + from, 1, length - from, stream);
    (void)fputc('\n', stream);
}

int command_string(const char *text, const char *what, json_t **ret_string, struct failure *failure)
{
    size_t bad = 0;
    if (!text_is_utf8(text, strlen(text), &bad)) {
        return failure_set(failure, FAILURE_USAGE, "%s is not UTF-8 (byte %zu)", what, bad + 1);
    }
    json_t *string = json_string(text);
    if (!string) {
        return failure_memory(failure);
    }
    *ret_string = string;
    return 0;
}

/* Reads up to one byte more than the limit, so that too much is seen. */
static int read_all(size_t limit_bytes, char **ret_text, size_t *ret_length,
                    struct failure *failure)
{
    char *text = NULL;
    size_t length = 0;
    for (;;) {
        char *longer = realloc(text, length + READ_BYTES + 1);
        if (!longer) {
            free(text);
            return failure_memory(failure);
        }
        text = longer;
        ssize_t count = read(STDIN_FILENO, text + length, READ_BYTES);
        if (count < 0 && errno != EINTR) {
            free(text);
            return failure_set(failure, FAILURE_IO, "standard input cannot be read: %s",
                               strerror(errno));
        }
        length += count > 0 ? (size_t)count : 0;
        if (count == 0 || length > limit_bytes) {
            text[length] = '\0';
            *ret_text = text;
            *ret_length = length;
            return 0;
        }
    }
}

int command_read_input(const struct client *client, const char *what, size_t limit_bytes,
                       char **ret_text, size_t *ret_length, struct failure *failure)
{
    if (isatty(STDIN_FILENO) == 1 && client->err.terminal) {
        (void)fprintf(client->err.stream, "Reading %s; end it with Ctrl-D on a new line.\n", what);
    }
    char *text = NULL;
    size_t length = 0;
    size_t bad = 0;
    int code = read_all(limit_bytes, &text, &length, failure);
    if (code || !text) {
        return code;
    }
    if (length > limit_bytes) {
        code = failure_set(failure, FAILURE_DATA, "%s is longer than %zu bytes", what, limit_bytes);
    } else if (strlen(text) < length) {
        code = failure_set(failure, FAILURE_DATA, "%s holds a NUL character (byte %zu)", what,
                           strlen(text) + 1);
    } else if (!text_is_utf8(text, length, &bad)) {
        code = failure_set(failure, FAILURE_DATA, "%s is not UTF-8 (byte %zu)", what, bad + 1);
    }
    if (code) {
        free(text);
        return code;
    }
    *ret_text = text;
    *ret_length = length;
    return 0;
}

int command_flush(struct failure *failure)
{
    if (fflush(stdout) || ferror(stdout)) {
        return failure_set(failure, FAILURE_IO, "the output cannot be written: %s",
                           errno ? strerror(errno) : "an earlier write failed");
    }
    return 0;
}

const char *command_text(const json_t *object, const char *name)
{
    const char *text = json_string_value(json_object_get(object, name));
    return text ? text : "";
}

int64_t command_whole(const json_t *object, const char *name)
{
    return json_integer_value(json_object_get(object, name));
}

double command_number(const json_t *object, const char *name)
{
    return json_number_value(json_object_get(object, name));
}
