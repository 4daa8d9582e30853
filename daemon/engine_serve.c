/* What the methods, and who copies, stand on. */
#include "daemon/engine_private.h"

#include <errno.h>

#include "daemon/clock.h"
#include "daemon/model_base.h"

void engine_push(struct engine *engine, struct change *change)
{
    writer_push(engine->writer, change);
}

struct change *engine_take_done(struct engine *engine)
{
    return writer_take_done(engine->writer);
}

int engine_take_moment(struct engine *engine, struct moment *ret_moment, struct store_error *error)
{
    moments_want(engine->moments);
    backlog_nudge(engine->backlog);
    return moments_take(engine->moments, ret_moment, error);
}

void engine_give_back(struct engine *engine, struct moment *moment)
{
    moments_give_back(engine->moments, moment);
}

void engine_stop_moments(struct engine *engine)
{
    moments_stop(engine->moments);
}

int engine_rebuild(struct engine *engine, const struct options *wanted, uint64_t *ret_seq,
                   struct store_error *error)
{
    return rebuild_begin(engine->rebuild, wanted, ret_seq, error);
}

void engine_read_rebuild(struct engine *engine, struct rebuild_state *ret_state)
{
    rebuild_read(engine->rebuild, ret_state);
}

struct backup *engine_backup(struct engine *engine)
{
    return engine->backup;
}

void engine_lay_over(struct engine *engine, struct options *options)
{
    rebuild_lay_over(engine->rebuild, options);
}

struct store *engine_store(struct engine *engine)
{
    return engine->store;
}

struct workspaces *engine_workspaces(struct engine *engine)
{
    return &engine->workspaces;
}

struct heartbeat *engine_heartbeat(struct engine *engine)
{
    return backlog_heartbeat(engine->backlog);
}

struct troubles *engine_troubles(struct engine *engine)
{
    return &engine->troubles;
}

int engine_ask(struct engine *engine, const struct model_question *question,
               struct workspace *workspace, struct model_answer *ret_answer, uint64_t *ret_learned)
{
    backlog_wait_for_promise(engine->backlog, clock_steady_ms());
    shared_model_read(&engine->shared);
    struct model_base base;
    model_base_enter(&base, engine->shared.store);
    model_scratch_read(workspace->scratch, &base.base);
    int code = -ESTALE;
    if (workspace->version == engine->shared.version) {
        code = engine->shared.broken
                   ? engine->shared.broken
                   : model_ask(engine->shared.model, question, workspace->scratch, ret_answer);
    }
    *ret_learned = engine->shared.learned;
    model_scratch_read(workspace->scratch, NULL);
    model_base_leave(&base);
    shared_model_unlock(&engine->shared);
    atomic_fetch_add_explicit(&engine->questions, 1, memory_order_relaxed);
    return code;
}

int engine_read_model(struct engine *engine,
                      void (*read)(void *user, const struct model *model, const struct base *base,
                                   uint64_t learned),
                      void *user)
{
    backlog_wait_for_promise(engine->backlog, clock_steady_ms());
    shared_model_read(&engine->shared);
    int code = engine->shared.broken;
    struct model_base base;
    model_base_enter(&base, engine->shared.store);
    if (code == 0) {
        read(user, engine->shared.model, &base.base, engine->shared.learned);
    }
    model_base_leave(&base);
    shared_model_unlock(&engine->shared);
    return code;
}

struct engine_counts engine_count(struct engine *engine)
{
    return (struct engine_counts){
        .progress = backlog_read(engine->backlog),
        .questions = atomic_load_explicit(&engine->questions, memory_order_relaxed)};
}

void engine_measure(struct engine *engine, struct engine_size *ret_size)
{
    shared_model_read(&engine->shared);
    model_measure(engine->shared.model, &ret_size->model);
    ret_size->rehearsal = model_rehearsal(engine->shared.model);
    ret_size->rehearsals_due = model_rehearsals_due(engine->shared.model);
    ret_size->model_bytes = model_store_file_bytes(engine->shared.store);
    shared_model_unlock(&engine->shared);
    ret_size->store_bytes = store_file_bytes(engine->store);
    ret_size->asking_bytes = workspaces_bytes(&engine->workspaces);
    ret_size->budget_bytes = engine->options.memory_budget_bytes;
}
