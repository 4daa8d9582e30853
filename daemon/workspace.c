#include "daemon/workspace.h"

#include <stdlib.h>

int workspaces_init(struct workspaces *workspaces, const struct features_settings *settings)
{
    workspaces->free = NULL;
    workspaces->settings = settings;
    return -pthread_mutex_init(&workspaces->mutex, NULL);
}

static void free_workspace(struct workspace *workspace)
{
    features_free(workspace->features);
    model_scratch_free(workspace->scratch);
    item_buffer_deinit(&workspace->buffer);
    item_source_deinit(&workspace->source);
    field_list_deinit(&workspace->fields);
    free(workspace);
}

void workspaces_deinit(struct workspaces *workspaces)
{
    while (workspaces->free) {
        struct workspace *workspace = workspaces->free;
        workspaces->free = workspace->next;
        free_workspace(workspace);
    }
    (void)pthread_mutex_destroy(&workspaces->mutex); /* nobody holds it any more */
}

/* Errors of these are errors of ours alone. */
static void lock(struct workspaces *workspaces)
{
    if (pthread_mutex_lock(&workspaces->mutex) != 0) {
        abort();
    }
}

static void unlock(struct workspaces *workspaces)
{
    if (pthread_mutex_unlock(&workspaces->mutex) != 0) {
        abort();
    }
}

static struct workspace *make_workspace(const struct features_settings *settings)
{
    struct workspace *workspace = calloc(1, sizeof *workspace);
    if (!workspace) {
        return NULL;
    }
    if (features_new(settings, &workspace->features) < 0 ||
        model_scratch_new(&workspace->scratch) < 0) {
        free_workspace(workspace);
        return NULL;
    }
    return workspace;
}

struct workspace *workspaces_borrow(struct workspaces *workspaces)
{
    lock(workspaces);
    struct workspace *workspace = workspaces->free;
    if (workspace) {
        workspaces->free = workspace->next;
    }
    unlock(workspaces);
    return workspace ? workspace : make_workspace(workspaces->settings);
}

void workspaces_return(struct workspaces *workspaces, struct workspace *workspace)
{
    lock(workspaces);
    workspace->next = workspaces->free;
    workspaces->free = workspace;
    unlock(workspaces);
}
