#include "daemon/workspace.h"

#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "daemon/sync.h"

/* The copy has a language of its own. */
static void copy_settings(struct workspaces *workspaces, const struct features_settings *settings)
{
    const char *language = settings->words.language ? settings->words.language : "";
    workspaces->settings = *settings;
    (void)snprintf(workspaces->language, sizeof workspaces->language, "%s", language); /* it fits */
    workspaces->settings.words.language = workspaces->language;
}

int workspaces_init(struct workspaces *workspaces, const struct features_settings *settings)
{
    workspaces->free = NULL;
    workspaces->bytes = 0;
    workspaces->version = 0;
    copy_settings(workspaces, settings);
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

static void free_all(struct workspace *workspace)
{
    while (workspace) {
        struct workspace *next = workspace->next;
        free_workspace(workspace);
        workspace = next;
    }
}

void workspaces_use(struct workspaces *workspaces, const struct features_settings *settings)
{
    sync_lock(&workspaces->mutex);
    struct workspace *outdated = workspaces->free;
    workspaces->free = NULL;
    workspaces->version++;
    for (const struct workspace *at = outdated; at; at = at->next) {
        workspaces->bytes -= at->bytes;
    }
    copy_settings(workspaces, settings);
    sync_unlock(&workspaces->mutex);
    free_all(outdated);
}

void workspaces_deinit(struct workspaces *workspaces)
{
    free_all(workspaces->free);
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
    struct features_settings settings = workspaces->settings;
    uint64_t version = workspaces->version;
    char language[WORKSPACE_LANGUAGE_BYTES];
    memcpy(language, workspaces->language, sizeof language);
    if (workspace) {
        workspaces->free = workspace->next;
    }
    sync_unlock(&workspaces->mutex);
    if (workspace) {
        return workspace;
    }
    settings.words.language = language;
    workspace = make_workspace(&settings);
    if (workspace) {
        workspace->version = version;
    }
    return workspace;
}

void workspaces_return(struct workspaces *workspaces, struct workspace *workspace)
{
    uint64_t bytes = model_scratch_bytes(workspace->scratch);
    sync_lock(&workspaces->mutex);
    bool is_outdated = workspace->version != workspaces->version;
    workspaces->bytes += (is_outdated ? 0 : bytes) - workspace->bytes;
    if (!is_outdated) {
        workspace->bytes = bytes;
        workspace->next = workspaces->free;
        workspaces->free = workspace;
    }
    sync_unlock(&workspaces->mutex);
    if (is_outdated) {
        free_workspace(workspace);
    }
}

uint64_t workspaces_bytes(struct workspaces *workspaces)
{
    sync_lock(&workspaces->mutex);
    uint64_t bytes = workspaces->bytes;
    sync_unlock(&workspaces->mutex);
    return bytes;
}
