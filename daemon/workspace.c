#include "daemon/workspace.h"

#include <stdlib.h>

#include "daemon/sync.h"

int workspaces_init(struct workspaces *workspaces, const struct features_settings *settings)
{
    workspaces->free = NULL;
    workspaces->bytes = 0;
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
    sync_lock(&workspaces->mutex);
    struct workspace *workspace = workspaces->free;
    if (workspace) {
        workspaces->free = workspace->next;
    }
    sync_unlock(&workspaces->mutex);
    return workspace ? workspace : make_workspace(workspaces->settings);
}

void workspaces_return(struct workspaces *workspaces, struct workspace *workspace)
{
    uint64_t bytes = model_scratch_bytes(workspace->scratch);
    sync_lock(&workspaces->mutex);
    workspaces->bytes += bytes - workspace->bytes;
    workspace->bytes = bytes;
    workspace->next = workspaces->free;
    workspaces->free = workspace;
    sync_unlock(&workspaces->mutex);
}

uint64_t workspaces_bytes(struct workspaces *workspaces)
{
    sync_lock(&workspaces->mutex);
    uint64_t bytes = workspaces->bytes;
    sync_unlock(&workspaces->mutex);
    return bytes;
}
