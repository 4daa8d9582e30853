#include "storage/model_store_next.h"

#include <errno.h>
#include <fcntl.h>
#include <limits.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

#include "storage/model_store_private.h"

static const char NEXT[] = "model.next";

static int sync_folder(const char *path, struct store_error *error)
{
    int folder = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    int code = folder < 0 || fsync(folder) < 0 ? errno : 0;
    if (folder >= 0) {
        (void)close(folder); /* nothing is written through it */
    }
    return code == 0 ? STORE_OK
                     : (int)store_fail(error, STORE_BROKEN, "%s cannot be synced: %s", path,
                                       strerror(code));
}

/* The names of its files are as durable as what will be in them: the folder is to be renamed. */
static int sync_next(const struct store_settings *settings, struct store_error *error)
{
    char path[PATH_MAX];
    int length = snprintf(path, sizeof path, "%s/%s", settings->home, NEXT);
    if (length < 0 || (size_t)length >= sizeof path) {
        return store_fail(error, STORE_DENIED, "the path of the home is too long");
    }
    return sync_folder(path, error);
}

int model_store_open_next(const struct store_settings *settings, struct model_store **ret_store,
                          struct store_error *error)
{
    struct model_store *store = NULL;
    int result = model_store_open_in(settings, NEXT, &store, error);
    if (result == STORE_OK) {
        result = sync_next(settings, error);
    }
    if (result != STORE_OK) {
        model_store_close(store);
        return result;
    }
    *ret_store = store;
    return STORE_OK;
}

int model_store_exchange(struct model_store *used, struct model_store *next,
                         struct store_error *error)
{
    return kv_exchange(used->kv, next->kv, error);
}

int model_store_settle(const struct store_settings *settings, struct store_error *error)
{
    return sync_folder(settings->home, error);
}

static int fail_to_remove(const char *path, struct store_error *error)
{
    int code = errno;
    return store_fail(error, STORE_BROKEN, "%s cannot be removed: %s", path, strerror(code));
}

int model_store_remove_next(const struct store_settings *settings, struct store_error *error)
{
    static const char *const FILES[] = {"/data.mdb", "/lock.mdb"};
    char path[PATH_MAX];
    for (size_t i = 0; i < sizeof FILES / sizeof FILES[0]; i++) {
        int length = snprintf(path, sizeof path, "%s/%s%s", settings->home, NEXT, FILES[i]);
        if (length < 0 || (size_t)length >= sizeof path) {
            return store_fail(error, STORE_DENIED, "the path of the home is too long");
        }
        if (unlink(path) < 0 && errno != ENOENT) {
            return fail_to_remove(path, error);
        }
    }
    (void)snprintf(path, sizeof path, "%s/%s", settings->home, NEXT); /* shorter than those above */
    return rmdir(path) < 0 && errno != ENOENT ? fail_to_remove(path, error) : STORE_OK;
}
