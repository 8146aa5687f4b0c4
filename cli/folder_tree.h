/* A folder with all that is in it: list, flush, remove, lock. Links are never followed. */
#pragma once

#include <glib.h>
#include <stdbool.h>

/* Names of everything that is not a folder, relative, sorted; folders that are empty appear as "name/". (returns new) */
GPtrArray *rf_folder_tree_files(const char *path);

/* Every file and folder to disk. False with errno set. */
bool rf_folder_tree_flush(const char *path);

/* Goes as far as it can; a second process removing the same tree does no harm. */
void rf_folder_tree_remove(const char *path);

/* True when nobody else holds the folder; the lock lasts until `fd` is closed or the process ends. Where the file
 * system knows no locks the answer is true. */
bool rf_folder_tree_lock(int fd);
