#include "daemon/peer_identity.h"

#include <errno.h>
#include <stdlib.h>
#include <sys/socket.h>

/* The other groups into `gids`, of which there is room for `*count`; says how many there are. */
static int read_groups(int fd, uint32_t *gids, size_t *count)
{
    socklen_t bytes = (socklen_t)(*count * sizeof *gids);
    int code = getsockopt(fd, SOL_SOCKET, SO_PEERGROUPS, gids, &bytes);
    *count = bytes / sizeof *gids;
    return code < 0 ? -errno : 0;
}

/* His groups, the own one in front, on the heap. NULL: no memory, or they cannot be read. */
static uint32_t *groups_of(int fd, uint32_t own, size_t *ret_count)
{
    uint32_t none = 0;
    size_t others = 0;
    int code = read_groups(fd, &none, &others); /* asks how many */
    if (code != 0 && code != -ERANGE) {
        others = 0;
    }
    uint32_t *gids = calloc(others + 1, sizeof *gids);
    if (!gids || (others > 0 && read_groups(fd, gids + 1, &others) < 0)) {
        free(gids);
        return NULL;
    }
    gids[0] = own;
    *ret_count = others + 1;
    return gids;
}

int peer_identity_read(int fd, struct rights_peer *ret_peer)
{
    struct ucred credentials;
    socklen_t size = sizeof credentials;
    *ret_peer = (struct rights_peer){.uid = RIGHTS_NO_ID};
    if (getsockopt(fd, SOL_SOCKET, SO_PEERCRED, &credentials, &size) < 0) {
        return 0;
    }
    size_t count = 0;
    errno = 0;
    uint32_t *gids = groups_of(fd, credentials.gid, &count);
    if (gids) {
        rights_sort(gids, count);
        *ret_peer = (struct rights_peer){.uid = credentials.uid, .gids = gids, .gid_count = count};
        return 0;
    }
    return errno == ENOMEM ? -ENOMEM : 0;
}

void peer_identity_deinit(struct rights_peer *peer)
{
    free((uint32_t *)peer->gids); /* made above */
    *peer = (struct rights_peer){.uid = RIGHTS_NO_ID};
}
