#include "daemon/rights.h"

#include <stdlib.h>

static const struct {
    const char *option;
    const char *purpose;
} RIGHTS[RIGHT_KINDS] = {
    [RIGHT_READ] = {"may_read", "to read and to ask for proposals"},
    [RIGHT_FILE] = {"may_file", "to file and withdraw"},
    [RIGHT_RULE] = {"may_rule", "to rule and check"},
    [RIGHT_VOCABULARY] = {"may_vocabulary", "to change the vocabulary"},
    [RIGHT_OPERATE] = {"may_operate", "to operate the daemon"},
};

const char *rights_option(enum right right)
{
    return RIGHTS[right].option;
}

const char *rights_purpose(enum right right)
{
    return RIGHTS[right].purpose;
}

/* --- lists --------------------------------------------------------------------------------------
 */

bool rights_add(struct rights_list *list, enum rights_kind kind, uint32_t id)
{
    for (uint32_t i = 0; i < list->count; i++) {
        if (list->kinds[i] == (uint32_t)kind && list->ids[i] == id) {
            return true;
        }
    }
    if (list->count == RIGHTS_ENTRIES) {
        return false;
    }
    list->kinds[list->count] = (uint32_t)kind;
    list->ids[list->count] = id;
    list->count++;
    return true;
}

/* --- peers --------------------------------------------------------------------------------------
 */

static int compare_ids(const void *left, const void *right)
{
    uint32_t one = *(const uint32_t *)left;
    uint32_t other = *(const uint32_t *)right;
    return (one > other) - (one < other);
}

void rights_sort(uint32_t *gids, size_t count)
{
    if (count > 0) {
        qsort(gids, count, sizeof *gids, compare_ids);
    }
}

static bool is_in_group(const struct rights_peer *peer, uint32_t gid)
{
    return gid != RIGHTS_NO_ID && peer->gid_count > 0 &&
           bsearch(&gid, peer->gids, peer->gid_count, sizeof gid, compare_ids) != NULL;
}

static bool is_meant(const struct rights_list *list, uint32_t at, const struct rights_house *house,
                     const struct rights_peer *peer)
{
    switch ((enum rights_kind)list->kinds[at]) {
    case RIGHTS_USER:
        return list->ids[at] == peer->uid;
    case RIGHTS_GROUP:
        return is_in_group(peer, list->ids[at]);
    case RIGHTS_SOCKET_GROUP:
        return is_in_group(peer, house->socket_group);
    }
    return false;
}

bool rights_allow(const struct rights_list *list, const struct rights_house *house,
                  const struct rights_peer *peer)
{
    if (peer->uid == RIGHTS_NO_ID) {
        return false;
    }
    if (peer->uid == 0 || peer->uid == house->owner) {
        return true;
    }
    for (uint32_t i = 0; i < list->count; i++) {
        if (is_meant(list, i, house, peer)) {
            return true;
        }
    }
    return false;
}
