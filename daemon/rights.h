/*
 * rights: who may do what. Five rights, a list of users and groups for each, and whether a peer is
 * on one. Numbers only: no names and no system calls (accounts looks names up, peer_identity asks
 * the socket).
 *
 * Two may always do everything: root, and the user that the daemon runs as. Everybody else may do
 * what a list says, and nothing more; no right includes another.
 */
#ifndef UNDERTAG_RIGHTS_H
#define UNDERTAG_RIGHTS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum right {
    RIGHT_READ,       /* to read what is stored, and to ask for proposals */
    RIGHT_FILE,       /* to file and withdraw items */
    RIGHT_RULE,       /* to rule and to check */
    RIGHT_VOCABULARY, /* to change the vocabulary itself */
    RIGHT_OPERATE,    /* to have models learned anew and snapshots written */
    RIGHT_KINDS
};

/* The option that grants a right, such as "may_file". */
const char *rights_option(enum right right);

/* What it is a right to, such as "to file and withdraw". */
const char *rights_purpose(enum right right);

enum {
    RIGHTS_ENTRIES = 32
};

/* Neither a user nor a group (chown(2)). */
#define RIGHTS_NO_ID UINT32_MAX

enum rights_kind {
    RIGHTS_USER,
    RIGHTS_GROUP,
    RIGHTS_SOCKET_GROUP /* the group that the socket's file belongs to; its number is 0 */
};

/* The users and groups that have a right, in the order in which they were given. Without padding,
 * so that two are compared by their bytes: what lies behind `count` is zero. */
struct rights_list {
    uint32_t count;
    uint32_t kinds[RIGHTS_ENTRIES];
    uint32_t ids[RIGHTS_ENTRIES];
};

/* False where the list is full; an entry that is there already is not added again. */
bool rights_add(struct rights_list *list, enum rights_kind kind, uint32_t id)
    __attribute__((warn_unused_result));

/* Who asks. RIGHTS_NO_ID as the user: nobody knows who, and he may nothing. */
struct rights_peer {
    uint32_t uid;
    const uint32_t *gids; /* rising; his own and the others */
    size_t gid_count;
};

/* What is the same for all lists. */
struct rights_house {
    uint32_t owner;        /* the user that the daemon runs as */
    uint32_t socket_group; /* RIGHTS_NO_ID: the socket has none */
};

/* Puts a peer's groups in order. */
void rights_sort(uint32_t *gids, size_t count);

bool rights_allow(const struct rights_list *list, const struct rights_house *house,
                  const struct rights_peer *peer);

#endif
