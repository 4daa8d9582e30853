#include "daemon/log.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

void log_line(enum log_priority priority, const char *format, ...)
{
    char line[1024];
    int used = getenv("JOURNAL_STREAM") ? snprintf(line, sizeof line, "<%d>", (int)priority)
                                        : snprintf(line, sizeof line, "undertagd: ");
    if (used < 0) {
        return;
    }
    va_list arguments;
    va_start(arguments, format);
    int more = vsnprintf(line + used, sizeof line - (size_t)used - 1, format, arguments);
    va_end(arguments);
    if (more < 0) {
        return;
    }
    size_t length = strlen(line);
    line[length] = '\n';
    if (write(STDERR_FILENO, line, length + 1) < 0) {
        return; /* there is nobody left to tell */
    }
}
