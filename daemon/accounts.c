#include "daemon/accounts.h"

#include <errno.h>
#include <grp.h>
#include <pwd.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/grow.h"

enum {
    ENTRY_BYTES_FIRST = 1024,
    ENTRY_BYTES_MOST = 16 * 1024 * 1024 /* a group may have very many members */
};

static const char SEPARATORS[] = " \t,";
static const char SOCKET_GROUP[] = "@socket";

/* --- names --------------------------------------------------------------------------------------
 */

/* Asks for one entry with the buffer. Returns 0 where it is found, ENOENT where it is not there. */
typedef int ask_entry(const char *name, char *buffer, size_t size, uint32_t *ret_id);

static int ask_user(const char *name, char *buffer, size_t size, uint32_t *ret_id)
{
    struct passwd entry;
    struct passwd *found = NULL;
    int code = getpwnam_r(name, &entry, buffer, size, &found);
    if (code == 0 && found) {
        *ret_id = found->pw_uid;
        return 0;
    }
    return code == 0 ? ENOENT : code;
}

static int ask_group(const char *name, char *buffer, size_t size, uint32_t *ret_id)
{
    struct group entry;
    struct group *found = NULL;
    int code = getgrnam_r(name, &entry, buffer, size, &found);
    if (code == 0 && found) {
        *ret_id = found->gr_gid;
        return 0;
    }
    return code == 0 ? ENOENT : code;
}

/* With more room each time, for as long as the entry does not fit. */
static int look_up(const char *name, ask_entry *ask, uint32_t *ret_id)
{
    char *buffer = NULL;
    size_t size = 0;
    int code = ERANGE;
    for (size_t wanted = ENTRY_BYTES_FIRST; code == ERANGE && wanted <= ENTRY_BYTES_MOST;
         wanted *= 4) {
        if (GROW(&buffer, &size, wanted) < 0) {
            code = ENOMEM;
            break;
        }
        code = ask(name, buffer, size, ret_id);
    }
    free(buffer);
    return code;
}

/* --- a word -------------------------------------------------------------------------------------
 */

/* A number that a user or a group may have: all bits set is none. */
static bool parse_id(const char *text, uint32_t *ret_id)
{
    uint64_t number = 0;
    for (const char *at = text; *at; at++) {
        number = number * 10 + (uint64_t)(*at - '0');
        if (number >= RIGHTS_NO_ID) {
            return false;
        }
    }
    *ret_id = (uint32_t)number;
    return true;
}

static int read_id(const char *name, bool is_group, uint32_t *ret_id, char *reason)
{
    const char *kind = is_group ? "group" : "user";
    if (*name && strspn(name, "0123456789") == strlen(name)) {
        if (parse_id(name, ret_id)) {
            return 0;
        }
        (void)snprintf(reason, ACCOUNTS_REASON_BYTES, "%s is no number of a %s", name, kind);
        return -1;
    }
    int code = *name ? look_up(name, is_group ? ask_group : ask_user, ret_id) : ENOENT;
    if (code == 0) {
        return 0;
    }
    /* Some sources of names say so where there is none (getpwnam(3)). */
    if (code == ENOENT || code == ESRCH || code == EBADF || code == EPERM) {
        (void)snprintf(reason, ACCOUNTS_REASON_BYTES, "there is no %s '%s'", kind, name);
    } else {
        (void)snprintf(reason, ACCOUNTS_REASON_BYTES, "the %s '%s' cannot be looked up", kind,
                       name);
    }
    return -1;
}

static int read_word(const char *word, struct rights_list *list, char *reason)
{
    uint32_t id = 0;
    bool is_group = word[0] == '@';
    enum rights_kind kind = is_group ? RIGHTS_GROUP : RIGHTS_USER;
    if (strcmp(word, SOCKET_GROUP) == 0) {
        kind = RIGHTS_SOCKET_GROUP;
    } else if (read_id(is_group ? word + 1 : word, is_group, &id, reason) < 0) {
        return -1;
    }
    if (!rights_add(list, kind, id)) {
        (void)snprintf(reason, ACCOUNTS_REASON_BYTES, "there are more than %d", RIGHTS_ENTRIES);
        return -1;
    }
    return 0;
}

/* --- lists --------------------------------------------------------------------------------------
 */

int accounts_read(const char *text, struct rights_list *ret_list, char *reason)
{
    struct rights_list list = {0};
    for (const char *at = text + strspn(text, SEPARATORS); *at; at += strspn(at, SEPARATORS)) {
        char word[ACCOUNTS_WORD_BYTES];
        size_t bytes = strcspn(at, SEPARATORS);
        if (bytes >= sizeof word) {
            (void)snprintf(reason, ACCOUNTS_REASON_BYTES, "'%.20s…' is too long for a name", at);
            return -1;
        }
        memcpy(word, at, bytes);
        word[bytes] = '\0';
        if (read_word(word, &list, reason) < 0) {
            return -1;
        }
        at += bytes;
    }
    *ret_list = list;
    return 0;
}

void accounts_write(const struct rights_list *list, char text[ACCOUNTS_TEXT_BYTES])
{
    size_t used = 0;
    text[0] = '\0';
    for (uint32_t i = 0; i < list->count; i++) {
        const char *space = i > 0 ? " " : "";
        int written = 0;
        if (list->kinds[i] == RIGHTS_SOCKET_GROUP) {
            written =
                snprintf(text + used, ACCOUNTS_TEXT_BYTES - used, "%s%s", space, SOCKET_GROUP);
        } else {
            written =
                snprintf(text + used, ACCOUNTS_TEXT_BYTES - used, "%s%s%lu", space,
                         list->kinds[i] == RIGHTS_GROUP ? "@" : "", (unsigned long)list->ids[i]);
        }
        used += written > 0 ? (size_t)written : 0; /* it always fits */
    }
}
