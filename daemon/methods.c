#include "daemon/methods.h"

#include <assert.h>
#include <stdlib.h>
#include <unistd.h>

#include "daemon/clock.h"
#include "daemon/methods_private.h"

enum {
    SAMPLE_EVERY_MS = 1000
};

static const struct method METHODS[] = {
    {"item.file", METHOD_CHANGE, RIGHT_FILE, item_file},
    {"item.withdraw", METHOD_CHANGE, RIGHT_FILE, item_withdraw},
    {"item.rule", METHOD_CHANGE, RIGHT_RULE, item_rule},
    {"item.check", METHOD_CHANGE, RIGHT_RULE, item_check},
    {"item.gaps", METHOD_READ, RIGHT_READ, item_gaps},
    {"item.show", METHOD_READ, RIGHT_READ, item_show},
    {"item.list", METHOD_READ, RIGHT_READ, item_list},
    {"tag.show", METHOD_READ, RIGHT_READ, tag_show},
    {"tag.list", METHOD_READ, RIGHT_READ, tag_list},
    {"desk.sample", METHOD_READ, RIGHT_READ, desk_sample},
    {"desk.worklist", METHOD_READ, RIGHT_READ, desk_worklist},
    {"desk.completeness", METHOD_READ, RIGHT_READ, desk_completeness},
    {"desk.standing", METHOD_READ, RIGHT_READ, desk_standing},
    {"daemon.state", METHOD_READ, RIGHT_READ, daemon_state},
    /* a read, so that it comes after all that was filed before it */
    {"daemon.rebuild", METHOD_READ, RIGHT_OPERATE, daemon_rebuild},
    {"snapshot.write", METHOD_READ, RIGHT_OPERATE, snapshot_write_call},
    {"snapshot.list", METHOD_READ, RIGHT_OPERATE, snapshot_list_call},
    {"backup.write", METHOD_READ, RIGHT_OPERATE, daemon_backup},
};

static int check_right(void *context, const struct method *method, const struct rights_peer *peer,
                       struct fault *fault)
{
    struct methods *methods = context;
    return gate_check(&methods->gate, method, peer, clock_steady_ms(), fault);
}

static void on_changes_done(uv_async_t *async)
{
    struct methods *methods = async->data;
    if (methods->engine) {
        item_changes_done(engine_take_done(methods->engine));
        daemon_backup_done(methods);
    }
}

static void on_sample(uv_timer_t *timer)
{
    struct methods *methods = timer->data;
    if (!methods->engine) {
        return;
    }
    struct engine_counts counts = engine_count(methods->engine);
    uint64_t now_ms = clock_steady_ms();
    gate_tell(&methods->gate, now_ms);
    meter_sample(&methods->filed, counts.progress.committed, now_ms);
    meter_sample(&methods->learned, counts.progress.learned, now_ms);
    meter_sample(&methods->scored, counts.questions, now_ms);
    snapshots_tick(methods->snapshots, methods->options, counts.progress.committed);
}

static void on_handle_closed(uv_handle_t *handle)
{
    struct methods *methods = handle->data;
    if (--methods->open_handles > 0) {
        return;
    }
    void (*closed)(void *) = methods->closed;
    void *user = methods->closed_user;
    free(methods);
    if (closed) {
        closed(user);
    }
}

void methods_close(struct methods *methods, void (*done)(void *user), void *user)
{
    methods->closed = done;
    methods->closed_user = user;
    uv_close((uv_handle_t *)&methods->changes_done, on_handle_closed);
    uv_close((uv_handle_t *)&methods->sampling, on_handle_closed);
}

int methods_new(uv_loop_t *loop, const struct options *options, struct methods **ret_methods)
{
    struct methods *methods = calloc(1, sizeof *methods);
    if (!methods) {
        return UV_ENOMEM;
    }
    methods->loop = loop;
    methods->options = options;
    methods->gate = (struct gate){.options = options,
                                  .house = {.owner = geteuid(), .socket_group = RIGHTS_NO_ID}};
    methods->table = (struct method_table){.methods = METHODS,
                                           .count = sizeof METHODS / sizeof METHODS[0],
                                           .context = methods,
                                           .check = check_right};
    methods->started_ms = clock_steady_ms();
    int code = uv_async_init(loop, &methods->changes_done, on_changes_done);
    if (code < 0) {
        free(methods);
        return code;
    }
    code = uv_timer_init(loop, &methods->sampling);
    assert(code == 0); /* libuv documents no failure */
    methods->changes_done.data = methods;
    methods->sampling.data = methods;
    methods->open_handles = 2;
    code = uv_timer_start(&methods->sampling, on_sample, SAMPLE_EVERY_MS, SAMPLE_EVERY_MS);
    assert(code == 0); /* fails only without a callback */
    *ret_methods = methods;
    return 0;
}

void methods_wake(void *user)
{
    struct methods *methods = user;
    int code = uv_async_send(&methods->changes_done);
    assert(code == 0); /* libuv documents no failure for an open handle */
}

void methods_use(struct methods *methods, struct engine *engine, struct snapshots *snapshots)
{
    methods->engine = engine;
    methods->snapshots = snapshots;
    on_sample(&methods->sampling); /* rates count from here */
}

void methods_watch(struct methods *methods, const struct server *server)
{
    methods->server = server;
    if (server) {
        methods->gate.house.socket_group = server_socket_group(server);
    }
}

const struct method_table *methods_table(const struct methods *methods)
{
    return &methods->table;
}
