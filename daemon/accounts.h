/*
 * accounts: lists of users and groups, as the configuration writes them, into numbers and back. The
 * names are looked up when the configuration is read, by the system's own means (getpwnam_r(3),
 * getgrnam_r(3)), which may take a moment; never for a request.
 *
 * A list is words between spaces or commas: a user by name or number, a group by name or number
 * behind @, or @socket for the group that the socket's file belongs to. (A group whose name is
 * socket is given by its number.)
 */
#ifndef UNDERTAG_ACCOUNTS_H
#define UNDERTAG_ACCOUNTS_H

#include "daemon/rights.h"

enum {
    ACCOUNTS_WORD_BYTES = 64,
    ACCOUNTS_TEXT_BYTES = RIGHTS_ENTRIES * 12 + 1 /* "@4294967294 " each */
};

/*
 * Returns 0, or -1 with the reason in `reason` (ACCOUNTS_REASON_BYTES), a part of a sentence such
 * as "there is no group 'harbour'"; *ret_list is then untouched.
 */
enum {
    ACCOUNTS_REASON_BYTES = ACCOUNTS_WORD_BYTES + 64
};
int accounts_read(const char *text, struct rights_list *ret_list, char *reason)
    __attribute__((warn_unused_result));

/* The list as numbers, in the form that accounts_read takes. */
void accounts_write(const struct rights_list *list, char text[ACCOUNTS_TEXT_BYTES]);

#endif
