#include "tests/integration/backup_desk.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/stat.h>

#include "tests/integration/logbook.h"

enum {
    WINDOW = 32, /* changes under way */
    WORDS = 60,
    TEXT_BYTES = 12 * WORDS + 1,
    SLOW = 1 << 20 /* bytes a second: it takes seconds */
};

struct program_run desk_run;

int desk_set_up(void **state)
{
    struct desk *desk = calloc(1, sizeof *desk);
    assert_non_null(desk);
    desk->service = service_new("rehearsal_share=0", "flush_every_ms=30", NULL);
    peer_open(&desk->operator, desk->service->daemon.socket);
    undertagd_make(&desk->restored);
    desk->restored.settings[0] = "rehearsal_share=0";
    *state = desk;
    return 0;
}

int desk_tear_down(void **state)
{
    struct desk *desk = *state;
    if (desk->is_reading) {
        peer_close(&desk->reader);
    }
    peer_close(&desk->operator);
    int result = undertagd_remove(&desk->restored);
    void *service = desk->service;
    result |= service_tear_down(&service);
    free(desk);
    return result;
}

const char *desk_path(const struct desk *desk, const char *name)
{
    static char path[DESK_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/exports/%s", desk->service->daemon.home, name);
    return path;
}

bool desk_has(const struct desk *desk, const char *name)
{
    struct stat status;
    return lstat(desk_path(desk, name), &status) == 0;
}

/* --- changes -----------------------------------------------------------------------------------
 */

/* Change k gets seq k. Of eight, one withdraws the entry filed before it, one revises an older one.
 */
static void send_change(struct peer *peer, unsigned k)
{
    char text[TEXT_BYTES];
    char tags[LOGBOOK_TAGS_BYTES];
    if (k % 8 == 4) {
        (void)peer_request(peer, "item.withdraw", "{'id': 'entry %u'}", k - 1);
        return;
    }
    logbook_text(k, WORDS, text, sizeof text);
    logbook_tags(k, tags);
    (void)peer_request(peer, "item.file", "{'id': 'entry %u', 'text': '%s', 'tags': %s}",
                       k % 8 == 0 ? k / 2 : k, text, tags);
}

void desk_change(struct peer *peer, unsigned k)
{
    send_change(peer, k);
    assert_int_equal(whole(peer_result(peer, peer->last_id), "seq"), k);
}

void desk_feed(struct peer *peer, unsigned count)
{
    unsigned first_id = peer->last_id + 1;
    unsigned sent = 0;
    for (unsigned k = 1; k <= count; k++) {
        while (sent < count && sent < k + WINDOW) {
            send_change(peer, ++sent);
        }
        assert_int_equal(whole(peer_result(peer, first_id + k - 1), "seq"), k);
    }
}

/* --- steps -------------------------------------------------------------------------------------
 */

void desk_restore(const struct desk *desk, const char *backup, int expected)
{
    program_run("undertagd",
                (const char *const[]){"--home", desk->restored.home, "--restore",
                                      desk_path(desk, backup), NULL},
                "", &desk_run);
    if (desk_run.exit_code != expected) {
        fail_msg("%d instead of %d: %s", desk_run.exit_code, expected, desk_run.error);
    }
}

void desk_start_restored(struct desk *desk)
{
    undertagd_start(&desk->restored);
    peer_open(&desk->reader, desk->restored.socket);
    desk->is_reading = true;
}

/* Asks for a slow one, and waits until some of it is written. */
unsigned desk_begin_slowly(struct desk *desk, const char *name)
{
    unsigned id =
        peer_request(&desk->operator, "backup.write", "{'name': '%s', 'rate': %d}", name, SLOW);
    for (;;) {
        const json_t *state = ask(&desk->service->peer, "daemon.state", "{}");
        const json_t *backup = json_object_get(state, "backup");
        if (json_is_object(backup) && whole(backup, "bytes") > 0) {
            return id;
        }
        assert_false(peer_has_something(&desk->operator)); /* that would be its end */
    }
}
