/*
 * log: lines for the operator on standard error, one a line, with journald's <N> priorities where
 * systemd reads them. Any thread; a line is written in one call, cut at 1,023 bytes; control
 * characters in it become spaces.
 */
#ifndef UNDERTAG_LOG_H
#define UNDERTAG_LOG_H

enum log_priority {
    LOG_TROUBLE = 3,
    LOG_CAUTION = 4,
    LOG_NOTE = 6
};

void log_line(enum log_priority priority, const char *format, ...)
    __attribute__((format(printf, 2, 3)));

#endif
