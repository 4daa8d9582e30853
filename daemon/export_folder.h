/*
 * export_folder: folders that are written beside and take their name when they are whole, so that
 * whoever finds NAME finds all of it, whatever has happened meanwhile. What is being written, or
 * removed, is called `.NAME.part`; a crash may leave such a folder, and the next start sweeps it.
 *
 * Everything happens inside one folder, which is held open: names are checked (no `/`, no leading
 * dot), and no link is ever followed there. Errors are a negative errno and one sentence with the
 * path, in `error` (EXPORT_ERROR_BYTES). Any thread, but not two at one part. May block: not on the
 * loop.
 */
#ifndef UNDERTAG_EXPORT_FOLDER_H
#define UNDERTAG_EXPORT_FOLDER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct export_folder;
struct export_part;

enum {
    EXPORT_NAME_BYTES = 65, /* the longest name, and its end */
    EXPORT_ERROR_BYTES = 512
};

/* The link that export_folder_point sets. */
#define EXPORT_LATEST "latest"

/* --- the folder --- */

/* Where the folder of the option export_dir is: in the home, unless it begins with a slash. Returns
 * -ENAMETOOLONG where it does not fit into `size`. */
int export_folder_place(const char *home, const char *export_dir, char *path, size_t size,
                        char *error) __attribute__((warn_unused_result));

/*
 * Opens the folder, after making it (mode 0750; not those above it) where it is not there. Refused:
 * what is no folder (a link to one neither), belongs to others than the daemon's user and root, or
 * can be written to by others than its owner.
 */
int export_folder_open(const char *path, struct export_folder **ret_folder, char *error)
    __attribute__((warn_unused_result));

/* The same, but makes nothing: -ENOENT where it is not there. */
int export_folder_open_there(const char *path, struct export_folder **ret_folder, char *error)
    __attribute__((warn_unused_result));

void export_folder_close(struct export_folder *folder);

/* The path it was opened by, without slashes at its end. */
const char *export_folder_path(const struct export_folder *folder);

/* The folder itself, for openat and its like, to read what is there; the folder's. */
int export_folder_fd(const struct export_folder *folder);

/* Whether the path, links followed, is this folder. */
bool export_folder_is(const struct export_folder *folder, const char *path);

/* 1 to 64 letters, digits, `-`, `_` and `.` of ASCII, of which a letter, a digit or `_` comes first
 * (a dash would be taken for an option); not EXPORT_LATEST. */
bool export_name_is_valid(const char *name);

/* --- writing one --- */

/*
 * Makes `.NAME.part`. Refused with -EEXIST: a NAME that is there, or is being written. The part is
 * ended by export_part_commit_take or export_part_abort_take, before the folder is closed.
 */
int export_folder_begin(struct export_folder *folder, const char *name,
                        struct export_part **ret_part, char *error)
    __attribute__((warn_unused_result));

/* Where the part is until it has its name, as `.NAME.part`: -ENAMETOOLONG where it does not fit. */
int export_part_path(const struct export_part *part, char *path, size_t size)
    __attribute__((warn_unused_result));

/* The part's folder, for openat and its like, without O_CREAT; the part's. */
int export_part_fd(const struct export_part *part);

/* Makes a folder (mode 0750) in the part. `path` is a name, or several with slashes between them,
 * each as export_name_is_valid has it. */
int export_part_add_folder(struct export_part *part, const char *path, char *error)
    __attribute__((warn_unused_result));

/* Makes a file (mode 0640) in the part and opens it for reading and writing; the descriptor is the
 * caller's. */
int export_part_add_file(struct export_part *part, const char *path, int *ret_fd, char *error)
    __attribute__((warn_unused_result));

/*
 * Has everything in the part reach the disk, gives the part its name, which nobody else may have
 * taken meanwhile, and has that reach the disk, too. On failure it is as after
 * export_part_abort_take; only where the last step alone failed, NAME is there, and whole, but a
 * loss of power may take it.
 */
int export_part_commit_take(struct export_part *part, char *error)
    __attribute__((warn_unused_result));

/* Removes what was written. What cannot be removed is left for export_folder_sweep. */
void export_part_abort_take(struct export_part *part);

/* --- those that are there --- */

/* Removes what a crash has left: each folder called `.NAME.part`. Nobody may be writing. *ret_count
 * says how many were removed, also on failure (the first one's sentence is kept). */
int export_folder_sweep(struct export_folder *folder, size_t *ret_count, char *error)
    __attribute__((warn_unused_result));

/* Removes the folder NAME, and the link to it, if EXPORT_LATEST is one. -ENOENT where it is not
 * there. A failure later leaves `.NAME.part`. */
int export_folder_remove(struct export_folder *folder, const char *name, char *error)
    __attribute__((warn_unused_result));

/* Has EXPORT_LATEST be a link to NAME, which is there; it is at no moment without a target. */
int export_folder_point(struct export_folder *folder, const char *name, char *error)
    __attribute__((warn_unused_result));

#endif
