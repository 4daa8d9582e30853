/*
 * export_tree: all that is in a folder, on its way to the disk or to its removal. Nothing is
 * reached but through a descriptor of the folder that holds it, and no link is followed.
 */
#ifndef UNDERTAG_EXPORT_TREE_H
#define UNDERTAG_EXPORT_TREE_H

enum {
    EXPORT_TREE_DEPTH = 16 /* folders in folders; what lies deeper is -ELOOP */
};

/* Removes `name` in the folder `parent`: a folder with all that is in it, or what is no folder.
 * Returns 0 or a negative errno. */
int export_tree_remove(int parent, const char *name) __attribute__((warn_unused_result));

/* Syncs all files and folders in the folder, and itself. What is neither file nor folder is
 * -EINVAL. Returns 0 or a negative errno. */
int export_tree_sync(int folder) __attribute__((warn_unused_result));

#endif
