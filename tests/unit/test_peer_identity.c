/* Who is at the other end of a socket, against what the system says of this process. */
#include "daemon/peer_identity.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
#include <sys/socket.h>
#include <unistd.h>

#include <cmocka.h>

static void both_ends_of_a_pair_are_this_process(void **state)
{
    (void)state;
    int ends[2];
    struct rights_peer peer;
    assert_int_equal(socketpair(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0, ends), 0);
    peer_identity_read(ends[0], &peer);
    assert_int_equal(peer.uid, geteuid());
    peer_identity_deinit(&peer);
    assert_int_equal(close(ends[0]) | close(ends[1]), 0);
}

/* getgroups(2): the others; getegid(2): his own. */
static void all_groups_of_a_peer_are_known_in_order(void **state)
{
    (void)state;
    int ends[2];
    struct rights_peer peer;
    int others = getgroups(0, NULL);
    assert_true(others >= 0);
    gid_t *gids = calloc((size_t)others + 1, sizeof *gids);
    assert_non_null(gids);
    assert_int_equal(getgroups(others, gids), others);
    gids[others] = getegid();
    rights_sort(gids, (size_t)others + 1);
    assert_int_equal(socketpair(AF_UNIX, SOCK_STREAM | SOCK_CLOEXEC, 0, ends), 0);
    peer_identity_read(ends[1], &peer);
    assert_int_equal(peer.gid_count, others + 1);
    assert_memory_equal(peer.gids, gids, peer.gid_count * sizeof *gids);
    peer_identity_deinit(&peer);
    free(gids);
    assert_int_equal(close(ends[0]) | close(ends[1]), 0);
}

static void whoever_is_behind_no_socket_is_nobody(void **state)
{
    (void)state;
    struct rights_peer peer = {.uid = 0};
    peer_identity_read(-1, &peer);
    assert_int_equal(peer.uid, RIGHTS_NO_ID);
    assert_int_equal(peer.gid_count, 0);
    peer_identity_deinit(&peer);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(both_ends_of_a_pair_are_this_process),
        cmocka_unit_test(all_groups_of_a_peer_are_known_in_order),
        cmocka_unit_test(whoever_is_behind_no_socket_is_nobody),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
