#include "client/failure.h"

#include <stdarg.h>
#include <stdio.h>

int failure_set(struct failure *failure, enum failure_code code, const char *format, ...)
{
    if (failure->code != 0) {
        return failure->code;
    }
    failure->code = code;
    va_list arguments;
    va_start(arguments, format);
    int written = vsnprintf(failure->message, sizeof failure->message, format, arguments);
    va_end(arguments);
    if (written < 0) {
        failure->message[0] = '\0';
    }
    return failure->code;
}

int failure_memory(struct failure *failure)
{
    return failure_set(failure, FAILURE_MEMORY, "there is not enough memory");
}
