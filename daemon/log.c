#include "daemon/log.h"

#include <stdarg.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

/*
 * Whether standard error is the journal: the variable names the device and inode of the journal's
 * stream (systemd.exec(5)) and is inherited by programs whose standard error is another one.
 */
static bool goes_to_journal(void)
{
    const char *stream = getenv("JOURNAL_STREAM");
    struct stat status;
    char own[64];
    if (!stream || fstat(STDERR_FILENO, &status) < 0) {
        return false;
    }
    (void)snprintf(own, sizeof own, "%llu:%llu", (unsigned long long)status.st_dev,
                   (unsigned long long)status.st_ino);
    return strcmp(stream, own) == 0;
}

void log_line(enum log_priority priority, const char *format, ...)
{
    char line[1024];
    int used = goes_to_journal() ? snprintf(line, sizeof line, "<%d>", (int)priority)
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
    for (size_t i = 0; i < length; i++) {
        if ((unsigned char)line[i] < ' ' || line[i] == 0x7F) {
            line[i] = ' '; /* what a peer sends makes no lines of its own */
        }
    }
    line[length] = '\n';
    if (write(STDERR_FILENO, line, length + 1) < 0) {
        return; /* there is nobody left to tell */
    }
}
