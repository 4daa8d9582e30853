#include "storage/store_error.h"

#include <stdarg.h>
#include <stdio.h>

const char *store_code_sentence(enum store_code code)
{
    switch (code) {
#define STORE_SENTENCE(name, value, sentence)                                                      \
    case name:                                                                                     \
        return sentence;
        STORE_ERRORS(STORE_SENTENCE)
#undef STORE_SENTENCE
    }
    return "unknown error";
}

enum store_code store_fail(struct store_error *error, enum store_code code, const char *format, ...)
{
    if (error->code != STORE_OK) {
        return error->code;
    }
    error->code = code;
    va_list arguments;
    va_start(arguments, format);
    if (vsnprintf(error->text, sizeof error->text, format, arguments) < 0) {
        error->text[0] = '\0';
    }
    va_end(arguments);
    return code;
}
