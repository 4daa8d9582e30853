#include "tests/integration/snapshots.h"

#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <dirent.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "tests/integration/logbook.h"

enum {
    NAMES_BYTES = 2048,
    ASK_EVERY_MS = 5,
    ENTRIES = 1500, /* with some 30 words each that no other has */
    WORDS = 60
};

const char *snapshots_path(const struct service *service, const char *name)
{
    static char path[SNAPSHOTS_PATH_BYTES];
    (void)snprintf(path, sizeof path, "%s/exports/%s", service->daemon.home, name);
    return path;
}

bool snapshots_have(const struct service *service, const char *name)
{
    struct stat status;
    return lstat(snapshots_path(service, name), &status) == 0;
}

static void add_name(char names[NAMES_BYTES], const char *name)
{
    size_t used = strlen(names);
    int length = snprintf(names + used, NAMES_BYTES - used, "%s%s", used > 0 ? " " : "", name);
    assert_in_range(length, 1, NAMES_BYTES - used - 1);
}

static int is_own(const struct dirent *entry)
{
    return strcmp(entry->d_name, ".") != 0 && strcmp(entry->d_name, "..") != 0;
}

const char *snapshots_names(struct service *service, const char *snapshot)
{
    char names[NAMES_BYTES] = "";
    struct dirent **entries = NULL;
    int count = scandir(snapshots_path(service, snapshot), &entries, is_own, alphasort);
    for (int i = 0; i < count; i++) {
        add_name(names, entries[i]->d_name);
        free(entries[i]);
    }
    free(entries);
    return keep_text(&service->peer, names);
}

const char *snapshots_listed(struct service *service)
{
    char names[NAMES_BYTES] = "";
    size_t i;
    json_t *snapshot;
    const json_t *list = ask(&service->peer, "snapshot.list", "{}");
    json_array_foreach(json_object_get(list, "snapshots"), i, snapshot)
    {
        add_name(names, string(snapshot, "name"));
    }
    return keep_text(&service->peer, names);
}

const char *snapshots_latest(struct service *service)
{
    char target[SNAPSHOTS_PATH_BYTES];
    ssize_t length = readlink(snapshots_path(service, "latest"), target, sizeof target - 1);
    target[length > 0 ? length : 0] = '\0';
    return keep_text(&service->peer, target);
}

static json_t *kept(struct service *service, json_t *json)
{
    assert_non_null(json);
    assert_int_equal(json_array_append_new(service->peer.kept, json), 0);
    return json;
}

json_t *snapshots_read(struct service *service, const char *name)
{
    return kept(service,
                json_load_file(snapshots_path(service, name), JSON_REJECT_DUPLICATES, NULL));
}

json_t *snapshots_read_lines(struct service *service, const char *name)
{
    char *line = NULL;
    size_t room = 0;
    ssize_t length = 0;
    json_t *list = json_array();
    FILE *file = fopen(snapshots_path(service, name), "re");
    assert_non_null(file);
    while ((length = getline(&line, &room, file)) > 0) {
        assert_int_equal(line[length - 1], '\n');
        json_t *entry = json_loadb(line, (size_t)length, JSON_REJECT_DUPLICATES, NULL);
        assert_int_equal(json_array_append_new(list, entry), 0);
    }
    free(line);
    assert_int_equal(fclose(file), 0);
    return kept(service, list);
}

void snapshots_fill(struct service *service)
{
    logbook_file(&service->peer, 0, ENTRIES, WORDS);
    wait_until_learned(&service->peer);
}

json_t *snapshots_state(struct peer *peer)
{
    return json_object_get(ask(peer, "daemon.state", "{}"), "snapshot");
}

static bool is_running(const json_t *snapshot)
{
    return json_is_true(json_object_get(snapshot, "running"));
}

unsigned snapshots_begin_slow(const struct service *service, struct peer *writer, const char *name)
{
    struct peer watcher;
    peer_open(writer, service->daemon.socket);
    peer_open(&watcher, service->daemon.socket);
    unsigned id = peer_request(writer, "snapshot.write", "{'name': '%s', 'rate': 1048576}", name);
    const json_t *snapshot = snapshots_state(&watcher);
    for (int waited_ms = 0; !is_running(snapshot) || whole(snapshot, "bytes") == 0;
         waited_ms += ASK_EVERY_MS) {
        assert_true(waited_ms < PATIENCE_MS);
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions */
        snapshot = snapshots_state(&watcher);
    }
    peer_close(&watcher);
    return id;
}

void snapshots_wait(struct peer *peer)
{
    for (int waited_ms = 0; is_running(snapshots_state(peer)); waited_ms += ASK_EVERY_MS) {
        assert_true(waited_ms < PATIENCE_MS);
        (void)poll(NULL, 0, ASK_EVERY_MS); /* between two questions */
    }
}
