/*
 * peer_identity: who is at the other end of a Unix socket, as the kernel noted it when the peer
 * connected (SO_PEERCRED, SO_PEERGROUPS; unix(7), socket(7)): what becomes of his process later
 * makes no difference.
 */
#ifndef UNDERTAG_PEER_IDENTITY_H
#define UNDERTAG_PEER_IDENTITY_H

#include "daemon/rights.h"

/*
 * Fills the peer; his groups are on the heap, for peer_identity_deinit. Where the kernel does not
 * say who he is he is RIGHTS_NO_ID without groups; where it does not know of other groups (before
 * Linux 4.13) he has his own alone. -ENOMEM: he is RIGHTS_NO_ID, too, but nobody may be told so.
 */
int peer_identity_read(int fd, struct rights_peer *ret_peer);

void peer_identity_deinit(struct rights_peer *peer);

#endif
