/*
 * As many peers at once as there may be, most of them a nuisance: others are served, the memory
 * stays within bounds, and nothing is left of them once they have gone.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>

#include "tests/integration/logbook.h"
#include "tests/integration/service.h"

enum {
    PEERS = 1000,
    KINDS = 4,
    HALF_LINE_BYTES = 128 * 1024,
    REQUESTS = 400, /* that nobody reads the answers of */
    ENTRIES = 50,
    ENTRY_WORDS = 20,
    LIMIT = -32003,
    MIB = 1 << 20,
    WIRE_MIB = 64
};

struct crowd {
    struct service *service;
    struct peer *peers;
};

/* Both ends are ours to open files for. */
static bool may_open_so_many(void)
{
    struct rlimit limit;
    if (getrlimit(RLIMIT_NOFILE, &limit) < 0 || limit.rlim_max < 2 * PEERS) {
        return false;
    }
    limit.rlim_cur = limit.rlim_cur < 2 * PEERS ? 2 * PEERS : limit.rlim_cur;
    return setrlimit(RLIMIT_NOFILE, &limit) == 0;
}

static int set_up(void **state)
{
    struct crowd *crowd = calloc(1, sizeof *crowd);
    assert_non_null(crowd);
    crowd->service = service_new("wire_limit=64MiB", "connections=1001", "rehearsal_share=0");
    crowd->peers = calloc(PEERS, sizeof *crowd->peers);
    assert_non_null(crowd->peers);
    for (int i = 0; i < PEERS; i++) {
        crowd->peers[i].fd = -1;
    }
    logbook_file(&crowd->service->peer, 0, ENTRIES, ENTRY_WORDS);
    wait_until_learned(&crowd->service->peer);
    *state = crowd;
    return 0;
}

static void crowd_leaves(struct crowd *crowd)
{
    for (int i = 0; i < PEERS; i++) {
        peer_close(&crowd->peers[i]);
    }
}

static int tear_down(void **state)
{
    struct crowd *crowd = *state;
    void *service = crowd->service;
    crowd_leaves(crowd);
    free(crowd->peers);
    free(crowd);
    return service_tear_down(&service);
}

/* --- what the daemon takes ----------------------------------------------------------------------
 */

static size_t open_files(const struct crowd *crowd)
{
    char path[64];
    size_t count = 0;
    (void)snprintf(path, sizeof path, "/proc/%d/fd", (int)crowd->service->daemon.child.pid);
    DIR *folder = opendir(path);
    assert_non_null(folder);
    while (readdir(folder)) {
        count++;
    }
    assert_int_equal(closedir(folder), 0);
    return count;
}

static size_t anonymous_bytes(const struct crowd *crowd)
{
    char path[64];
    char line[256];
    unsigned long kib = 0;
    (void)snprintf(path, sizeof path, "/proc/%d/status", (int)crowd->service->daemon.child.pid);
    FILE *file = fopen(path, "r");
    assert_non_null(file);
    while (fgets(line, sizeof line, file)) {
        if (strncmp(line, "RssAnon:", 8) == 0) {
            kib = strtoul(line + 8, NULL, 10);
        }
    }
    assert_int_equal(fclose(file), 0);
    assert_true(kib > 0);
    return kib * 1024;
}

static void assert_others_are_served(struct crowd *crowd, unsigned entry)
{
    struct peer *peer = &crowd->service->peer;
    logbook_file(peer, entry, entry + 1, ENTRY_WORDS);
    assert_non_null(json_object_get(ask(peer, "item.gaps", "{'id': 'entry %u'}", entry), "gaps"));
    assert_non_null(json_object_get(ask(peer, "desk.worklist", "{'most': 5}"), "items"));
}

/* --- nuisances ----------------------------------------------------------------------------------
 */

static void be_a_nuisance(struct peer *peer, int kind)
{
    static char blanks[HALF_LINE_BYTES];
    peer->may_be_cut = true;
    if (kind == 1) { /* a line that does not end */
        memset(blanks, ' ', sizeof blanks);
        (void)peer_offer(peer, blanks, sizeof blanks);
    } else if (kind == 2) { /* no answer is read */
        static const char REQUEST[] =
            "{\"jsonrpc\":\"2.0\",\"id\":1,\"method\":\"daemon.state\"}\n";
        size_t sent = sizeof REQUEST - 1;
        for (int i = 0; i < REQUESTS && sent == sizeof REQUEST - 1; i++) {
            sent = peer_offer(peer, REQUEST, sizeof REQUEST - 1);
        }
    } else if (kind == 3) { /* half open */
        peer_end_saying(peer);
    } /* 0: silent */
}

static void a_thousand_nuisances_hold_nobody_up(void **state)
{
    struct crowd *crowd = *state;
    size_t bytes_before = anonymous_bytes(crowd);
    size_t files_before = open_files(crowd);
    for (int i = 0; i < PEERS; i++) {
        peer_open(&crowd->peers[i], crowd->service->daemon.socket);
        be_a_nuisance(&crowd->peers[i], i % KINDS);
        if (i % 100 == 0) {
            assert_others_are_served(crowd, ENTRIES + (unsigned)i);
        }
    }
    assert_others_are_served(crowd, ENTRIES + PEERS);
    size_t bytes = anonymous_bytes(crowd);
    print_message("with %d peers: %zu MiB more, %zu files more\n", PEERS,
                  (bytes - bytes_before) / MIB, open_files(crowd) - files_before);
    /* Each has a buffer of 64 KiB to read into; what they hold beyond is bounded twice. A sanitizer
     * holds back what was given back. */
    assert_true(undertagd_is_sanitized() ||
                bytes < bytes_before + 2 * WIRE_MIB * (size_t)MIB + PEERS * (size_t)(64 * 1024));
    crowd_leaves(crowd);
    wait_until_state(&crowd->service->peer, "connections", 1);
    assert_int_equal(open_files(crowd), files_before);
    assert_others_are_served(crowd, 2 * PEERS);
}

static void one_more_is_refused_with_a_sentence(void **state)
{
    struct crowd *crowd = *state;
    struct peer late;
    for (int i = 0; i < PEERS; i++) {
        peer_open(&crowd->peers[i], crowd->service->daemon.socket);
    }
    wait_until_state(&crowd->service->peer, "connections", PEERS + 1);
    peer_open(&late, crowd->service->daemon.socket);
    const json_t *error = json_object_get(peer_answer(&late), "error");
    assert_int_equal(whole(error, "code"), LIMIT);
    assert_non_null(strstr(string(error, "message"), "1001 connections open already"));
    assert_null(peer_line(&late));
    peer_close(&late);
    assert_others_are_served(crowd, ENTRIES);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test_setup_teardown(a_thousand_nuisances_hold_nobody_up, set_up, tear_down),
        cmocka_unit_test_setup_teardown(one_more_is_refused_with_a_sentence, set_up, tear_down),
    };
    if (!may_open_so_many()) {
        (void)puts("skipped: the system does not allow 2,000 open files");
        return 0;
    }
    return cmocka_run_group_tests_name("load", tests, NULL, NULL);
}
