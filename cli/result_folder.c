#include "cli/result_folder.h"

#include <errno.h>
#include <fcntl.h>
#include <glib/gstdio.h>
#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#include "cli/command.h"
#include "cli/folder_tree.h"

G_DEFINE_QUARK(rf - result - folder - error - quark, rf_result_folder_error)

/* The list of what this program wrote, in the folder itself: whatever is not on it belongs to somebody else. */
static const char MARKER[] = ".risefall-files";

struct RfResultFolder {
    char *target, *parent, *name;
    char *path;        /* the temporary folder */
    char *made_parent; /* topmost parent that open made, or NULL */
    int lock;          /* holds a lock on the temporary folder as long as this run lives */
    bool is_committed;
};

static bool fail(GError **error, int code, const char *format, ...) G_GNUC_PRINTF(3, 4);
static bool fail(GError **error, int code, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *text = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    g_set_error_literal(error, RF_RESULT_FOLDER_ERROR, code, text);
    return false;
}

static bool fail_write(GError **error, const char *path, int failure)
{
    const char *hint = "";
    if (failure == ENOSPC || failure == EDQUOT) hint = "; free some space or choose another --out";
    if (failure == EACCES || failure == EPERM || failure == EROFS)
        hint = "; choose an --out that you may write to";
    return fail(error, RF_RESULT_FOLDER_ERROR_WRITE,
                "%s: can't be written: %s%s; earlier results are untouched", path, g_strerror(failure), hint);
}

/* ---- what people keep in it ---- */

/* A review is saved from the report, often right beside it, and browsers call the next one `review (1).csv`. No file of
 * ours is called like that. */
static bool is_kept(const char *name)
{
    return g_str_has_prefix(name, "review") && g_str_has_suffix(name, ".csv") && !strchr(name, '/');
}

/* Another name for the same file where the file system can do that, else a copy. */
static bool keep_one(RfResultFolder *folder, const char *name, GError **error)
{
    g_autofree char *from = g_build_filename(folder->target, name, NULL);
    g_autofree char *to = g_build_filename(folder->path, name, NULL);
    g_autofree char *bytes = NULL;
    g_autoptr(GError) why = NULL;
    size_t length;
    if (link(from, to) == 0) return true;
    if (!g_file_get_contents(from, &bytes, &length, &why))
        return fail(error, RF_RESULT_FOLDER_ERROR_WRITE,
                    "%s: can't be taken over into the new result: %s; move it away", from, why->message);
    return rf_result_folder_add(folder, name, bytes, length, error);
}

static bool keep_reviews(RfResultFolder *folder, GError **error)
{
    g_autoptr(GPtrArray) present = rf_folder_tree_files(folder->target);
    for (guint i = 0; i < present->len; i++)
        if (is_kept(present->pdata[i]) && !keep_one(folder, present->pdata[i], error)) return false;
    return true;
}

/* What was saved while the swap was made ready: as it stands in the earlier folder is how it stays. */
static void rescue_reviews(const char *earlier, const char *target)
{
    g_autoptr(GPtrArray) present = rf_folder_tree_files(earlier);
    for (guint i = 0; i < present->len; i++) {
        if (!is_kept(present->pdata[i])) continue;
        g_autofree char *from = g_build_filename(earlier, present->pdata[i], NULL);
        g_autofree char *to = g_build_filename(target, present->pdata[i], NULL);
        rename(from, to); /* of two names for one file, nothing happens */
    }
}

/* ---- what may be replaced ---- */

/* Name of an entry that is neither on the marker's list nor taken over (returns new), or NULL when there is none. */
static char *foreign_entry(const char *folder)
{
    g_autofree char *marker = g_build_filename(folder, MARKER, NULL);
    g_autofree char *text = NULL;
    g_autoptr(GHashTable) ours = g_hash_table_new(g_str_hash, g_str_equal);
    g_auto(GStrv) lines = NULL;
    if (g_file_get_contents(marker, &text, NULL, NULL)) {
        lines = g_strsplit(text, "\n", -1);
        for (char **line = lines; *line; line++) g_hash_table_add(ours, *line);
        g_hash_table_add(ours, (char *)MARKER);
    }
    g_autoptr(GPtrArray) present = rf_folder_tree_files(folder);
    for (guint i = 0; i < present->len; i++)
        if (!g_hash_table_contains(ours, present->pdata[i]) && !is_kept(present->pdata[i]))
            return g_strdup(present->pdata[i]);
    return NULL;
}

/* Renaming the folder that a shell stands in would leave that shell in a folder that is gone. */
static bool holds_working_folder(const char *target)
{
    g_autofree char *here = g_get_current_dir();
    const size_t length = strlen(target);
    return strncmp(here, target, length) == 0 && (here[length] == '\0' || here[length] == '/' || length == 1);
}

static bool may_replace(const char *target, GError **error)
{
    struct stat info;
    if (stat(target, &info) != 0) {
        if (errno == ENOENT) return true;
        return fail(error, RF_RESULT_FOLDER_ERROR_PLACE, "%s: can't be looked at: %s", target,
                    g_strerror(errno));
    }
    if (!S_ISDIR(info.st_mode))
        return fail(error, RF_RESULT_FOLDER_ERROR_PLACE,
                    "%s: is a file; results need a folder: name another --out", target);
    if (holds_working_folder(target))
        return fail(error, RF_RESULT_FOLDER_ERROR_PLACE,
                    "%s: is the folder you are in, or one above it, and can't be replaced as a whole; "
                    "name a folder inside it",
                    target);
    g_autofree char *foreign = foreign_entry(target);
    if (foreign)
        return fail(error, RF_RESULT_FOLDER_ERROR_FOREIGN,
                    "%s: holds %s, which is not part of an earlier result, and would be lost; "
                    "move it away or name another --out",
                    target, foreign);
    return true;
}

/* Absolute, without "..", without a slash at the end, with links followed where the target exists. */
static char *resolve(const char *target)
{
    char *real = realpath(target, NULL);
    g_autofree char *found = real ? g_strdup(real) : g_canonicalize_filename(target, NULL);
    free(real);
    return g_steal_pointer(&found);
}

/* ---- leftovers of runs that died ---- */

/* Opens and locks a folder; -1 when somebody else holds it. Process numbers would not do: they are used again, and differ
 * between containers. */
static int hold(const char *path)
{
    const int fd = open(path, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd >= 0 && rf_folder_tree_lock(fd)) return fd;
    if (fd >= 0) close(fd);
    return -1;
}

/* `.NAME.earlier-PID` without a target beside it: a run died between the two plain renames. Its result goes back. */
static void clear_leftovers(const char *parent, const char *name, const char *target)
{
    g_autoptr(GDir) dir = g_dir_open(parent, 0, NULL);
    if (!dir) return;
    g_autofree char *part = g_strdup_printf(".%s.part-", name);
    g_autofree char *earlier = g_strdup_printf(".%s.earlier-", name);
    const char *entry;
    while ((entry = g_dir_read_name(dir))) {
        const bool is_earlier = g_str_has_prefix(entry, earlier);
        if (!is_earlier && !g_str_has_prefix(entry, part)) continue;
        g_autofree char *path = g_build_filename(parent, entry, NULL);
        const int held = hold(path); /* until it is gone, or its maker could take it for his own */
        if (held < 0) continue;
        const bool goes_back = is_earlier && !g_file_test(target, G_FILE_TEST_EXISTS);
        if (!goes_back || rename(path, target) != 0) rf_folder_tree_remove(path);
        close(held);
    }
}

/* ---- open ---- */

static bool make_parents(RfResultFolder *folder, GError **error)
{
    g_autofree char *at = g_strdup(folder->parent);
    while (!g_file_test(at, G_FILE_TEST_EXISTS)) {
        g_free(folder->made_parent);
        folder->made_parent = g_strdup(at);
        char *above = g_path_get_dirname(at);
        g_free(at);
        at = above;
    }
    if (g_mkdir_with_parents(folder->parent, 0777) == 0) return true;
    return fail_write(error, folder->parent, errno);
}

/* Makes and locks the temporary folder. Another run that clears leftovers may catch it between the two: then again. */
static bool make_part(RfResultFolder *folder, GError **error)
{
    for (int attempt = 0; attempt < 100; attempt++) {
        g_free(folder->path);
        folder->path = g_strdup_printf("%s/.%s.part-%ld%s%.0d", folder->parent, folder->name, (long)getpid(),
                                       attempt ? "-" : "", attempt);
        if (mkdir(folder->path, 0777) != 0) {
            if (errno == EEXIST) continue;
            return fail_write(error, folder->parent, errno);
        }
        folder->lock = hold(folder->path);
        if (folder->lock >= 0 && g_file_test(folder->path, G_FILE_TEST_IS_DIR)) return true;
        if (folder->lock >= 0) close(folder->lock);
        folder->lock = -1;
    }
    return fail(error, RF_RESULT_FOLDER_ERROR_WRITE, "%s: no temporary folder could be made beside it",
                folder->target);
}

RfResultFolder *rf_result_folder_open(const char *target, GError **error)
{
    rf_command_hold_signals();
    g_autoptr(RfResultFolder) folder = g_new0(RfResultFolder, 1);
    folder->lock = -1;
    folder->target = resolve(target);
    folder->parent = g_path_get_dirname(folder->target);
    folder->name = g_path_get_basename(folder->target);
    clear_leftovers(folder->parent, folder->name, folder->target);
    if (!may_replace(folder->target, error) || !make_parents(folder, error) || !make_part(folder, error))
        return NULL;
    return g_steal_pointer(&folder);
}

bool rf_result_folder_may_replace(const char *target, GError **error)
{
    g_autoptr(RfResultFolder) trial = rf_result_folder_open(target, error);
    return trial != NULL;
}

const char *rf_result_folder_path(const RfResultFolder *folder)
{
    return folder->path;
}

/* ---- add ---- */

static bool write_all(int fd, const char *bytes, size_t length)
{
    while (length > 0) {
        const ssize_t wrote = write(fd, bytes, length);
        if (wrote < 0 && errno == EINTR) continue;
        if (wrote < 0) return false;
        bytes += wrote;
        length -= (size_t)wrote;
    }
    return true;
}

bool rf_result_folder_add(RfResultFolder *folder, const char *name, const void *bytes, size_t length,
                          GError **error)
{
    if (rf_command_is_cancelled())
        return fail(error, RF_RESULT_FOLDER_ERROR_WRITE, "%s: stopped on request", folder->target);
    g_autofree char *path = g_build_filename(folder->path, name, NULL);
    g_autofree char *shown = g_build_filename(folder->target, name, NULL);
    g_autofree char *inside = g_path_get_dirname(path);
    if (mkdir(inside, 0777) != 0 && errno != EEXIST) return fail_write(error, shown, errno);
    const int fd = open(path, O_WRONLY | O_CREAT | O_TRUNC | O_CLOEXEC, 0666);
    if (fd < 0) return fail_write(error, shown, errno);
    const int failure = write_all(fd, bytes, length) ? 0 : errno;
    if (close(fd) != 0 || failure) return fail_write(error, shown, failure ? failure : errno);
    return true;
}

bool rf_result_folder_add_text(RfResultFolder *folder, const char *name, const char *text, GError **error)
{
    return rf_result_folder_add(folder, name, text, strlen(text), error);
}

/* ---- commit ---- */

/* The marker lists what is in the folder now, so that files which another program wrote into it count as ours. */
static bool add_marker(RfResultFolder *folder, GError **error)
{
    g_autoptr(GPtrArray) present = rf_folder_tree_files(folder->path);
    g_autoptr(GString) text = g_string_new(NULL);
    for (guint i = 0; i < present->len; i++)
        if (!is_kept(present->pdata[i])) g_string_append_printf(text, "%s\n", (char *)present->pdata[i]);
    return rf_result_folder_add(folder, MARKER, text->str, text->len, error);
}

static bool flush_parent(const RfResultFolder *folder)
{
    const int fd = open(folder->parent, O_RDONLY | O_DIRECTORY | O_CLOEXEC);
    if (fd < 0) return false;
    const bool is_done = fsync(fd) == 0;
    close(fd);
    return is_done;
}

/* Puts the earlier result back where the second rename fails. */
static bool move_in(RfResultFolder *folder, const char *aside, GError **error)
{
    const bool has_earlier = rename(folder->target, aside) == 0;
    if (!has_earlier && errno != ENOENT) return fail_write(error, folder->target, errno);
    if (rename(folder->path, folder->target) != 0) {
        const int failure = errno;
        if (has_earlier && rename(aside, folder->target) != 0)
            return fail(error, RF_RESULT_FOLDER_ERROR_WRITE,
                        "%s: can't be written: %s; the earlier results are in %s", folder->target,
                        g_strerror(failure), aside);
        return fail_write(error, folder->target, failure);
    }
    folder->is_committed = true;
    if (has_earlier) rescue_reviews(aside, folder->target);
    flush_parent(folder);
    if (has_earlier) rf_folder_tree_remove(aside);
    return true;
}

/* The earlier folder is held meanwhile, so that no other run takes it for a leftover. */
static bool swap_plain(RfResultFolder *folder, GError **error)
{
    g_autofree char *aside =
        g_strdup_printf("%s/.%s.earlier-%ld", folder->parent, folder->name, (long)getpid());
    const int held = hold(folder->target);
    const bool is_done = move_in(folder, aside, error);
    if (held >= 0) close(held);
    return is_done;
}

static bool swap(RfResultFolder *folder, GError **error)
{
    /* NOREPLACE first: of two runs that start on nothing, the second finds a result and exchanges. */
    if (renameat2(AT_FDCWD, folder->path, AT_FDCWD, folder->target, RENAME_NOREPLACE) == 0) {
        folder->is_committed = true;
        flush_parent(folder);
        return true;
    }
    if (errno == EEXIST &&
        renameat2(AT_FDCWD, folder->path, AT_FDCWD, folder->target, RENAME_EXCHANGE) == 0) {
        folder->is_committed = true;
        rescue_reviews(folder->path, folder->target);
        flush_parent(folder);
        rf_folder_tree_remove(folder->path);
        return true;
    }
    if (errno == EINVAL || errno == ENOSYS || errno == ENOENT) return swap_plain(folder, error);
    return fail_write(error, folder->target, errno);
}

static bool prepare(RfResultFolder *folder, GError **error)
{
    g_return_val_if_fail(!folder->is_committed, false);
    if (!add_marker(folder, error) || !keep_reviews(folder, error)) return false;
    if (!rf_folder_tree_flush(folder->path)) return fail_write(error, folder->target, errno);
    return may_replace(folder->target, error); /* again: the run may have taken hours */
}

bool rf_result_folder_commit(RfResultFolder *folder, GError **error)
{
    return prepare(folder, error) && swap(folder, error);
}

bool rf_result_folder_commit_plain(RfResultFolder *folder, GError **error)
{
    return prepare(folder, error) && swap_plain(folder, error);
}

static void remove_made_parents(const RfResultFolder *folder)
{
    if (!folder->made_parent) return;
    g_autofree char *at = g_strdup(folder->parent);
    while (strlen(at) >= strlen(folder->made_parent) && rmdir(at) == 0) {
        char *above = g_path_get_dirname(at);
        g_free(at);
        at = above;
    }
}

void rf_result_folder_free(RfResultFolder *folder)
{
    if (!folder) return;
    if (!folder->is_committed) {
        if (folder->path && folder->lock >= 0) rf_folder_tree_remove(folder->path);
        remove_made_parents(folder);
    }
    if (folder->lock >= 0) close(folder->lock);
    g_free(folder->made_parent);
    g_free(folder->path);
    g_free(folder->target);
    g_free(folder->parent);
    g_free(folder->name);
    g_free(folder);
    rf_command_release_signals();
}
