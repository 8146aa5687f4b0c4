/* A result folder that appears whole or not at all. Everything is written aside, in one temporary folder of the same
 * parent (`.NAME.part-PID`), flushed to disk, and swapped in with one rename; only then is the earlier folder removed.
 * Review files that people saved into the earlier folder (`review*.csv`) are taken over into the new one.
 * A run that dies leaves at most that temporary folder behind, and the next run on the same target clears it.
 * Ctrl-C while the temporary folder exists takes it away and ends the program.
 * Not for deciding what is written: see write_results.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#define RF_RESULT_FOLDER_ERROR rf_result_folder_error_quark()
GQuark rf_result_folder_error_quark(void);
typedef enum {
    RF_RESULT_FOLDER_ERROR_FOREIGN, /* the target holds something that this program did not write */
    RF_RESULT_FOLDER_ERROR_PLACE, /* the target can't be a result folder: a file, the working folder, no parent */
    RF_RESULT_FOLDER_ERROR_WRITE, /* read-only, full, no permission */
} RfResultFolderError;

typedef struct RfResultFolder RfResultFolder;

/* Checks that `target` may be replaced (missing, empty, or holding nothing but an earlier result and reviews), clears what dead
 * runs left beside it and makes the temporary folder. Missing parents are made. Nothing at `target` changes yet.
 * A target that is the working folder or one above it is refused. */
RfResultFolder *rf_result_folder_open(const char *target, GError **error);

/* Opens it and gives up again, which shows what no look at permissions does (/proc, a full or read-only disk): for a command
 * that wants to refuse before hours of work. */
bool rf_result_folder_may_replace(const char *target, GError **error);

/* Where the files are before commit, absolute; for programs that write a file themselves. (borrowed) */
const char *rf_result_folder_path(const RfResultFolder *folder);

/* `name` is relative and may have one folder before it ("figures/charges.svg"), which is made when missing. */
bool rf_result_folder_add(RfResultFolder *folder, const char *name, const void *bytes, size_t length,
                          GError **error);
bool rf_result_folder_add_text(RfResultFolder *folder, const char *name, const char *text, GError **error);

/* Flushes, swaps in, removes the earlier result. On failure the earlier result is still at the target, and free
 * removes what was written. Call once. */
bool rf_result_folder_commit(RfResultFolder *folder, GError **error);

/* Without a commit before it: removes the temporary folder and any parent that open made. */
void rf_result_folder_free(RfResultFolder *folder);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfResultFolder, rf_result_folder_free)

/* As commit, but with the two plain renames that file systems without an exchange need. For tests. */
bool rf_result_folder_commit_plain(RfResultFolder *folder, GError **error);
