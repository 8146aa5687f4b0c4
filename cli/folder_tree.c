#include "cli/folder_tree.h"

#include <errno.h>
#include <fcntl.h>
#include <string.h>
#include <sys/file.h>
#include <sys/stat.h>
#include <unistd.h>

static bool is_folder(const char *path)
{
    struct stat info;
    return lstat(path, &info) == 0 && S_ISDIR(info.st_mode);
}

static void list(const char *path, const char *inside, GPtrArray *names)
{
    g_autoptr(GDir) dir = g_dir_open(path, 0, NULL);
    const char *entry;
    bool is_empty = true;
    while (dir && (entry = g_dir_read_name(dir))) {
        is_empty = false;
        g_autofree char *full = g_build_filename(path, entry, NULL);
        g_autofree char *name = inside ? g_strconcat(inside, "/", entry, NULL) : g_strdup(entry);
        if (is_folder(full))
            list(full, name, names);
        else
            g_ptr_array_add(names, g_steal_pointer(&name));
    }
    if (is_empty && inside) g_ptr_array_add(names, g_strconcat(inside, "/", NULL));
}

static int by_name(const void *left, const void *right)
{
    return strcmp(*(const char *const *)left, *(const char *const *)right);
}

GPtrArray *rf_folder_tree_files(const char *path)
{
    GPtrArray *names = g_ptr_array_new_with_free_func(g_free);
    list(path, NULL, names);
    g_ptr_array_sort(names, by_name);
    return names;
}

static bool flush_one(const char *path)
{
    const int fd = open(path, O_RDONLY | O_NOFOLLOW | O_CLOEXEC);
    if (fd < 0) return errno == ELOOP; /* a link has nothing of its own to flush */
    const int failure = fsync(fd) == 0 ? 0 : errno;
    close(fd);
    errno = failure;
    return failure == 0 || failure == EINVAL; /* EINVAL: a file system without fsync */
}

bool rf_folder_tree_flush(const char *path)
{
    g_autoptr(GDir) dir = is_folder(path) ? g_dir_open(path, 0, NULL) : NULL;
    const char *entry;
    while (dir && (entry = g_dir_read_name(dir))) {
        g_autofree char *full = g_build_filename(path, entry, NULL);
        if (!rf_folder_tree_flush(full)) return false;
    }
    return flush_one(path);
}

void rf_folder_tree_remove(const char *path)
{
    if (!is_folder(path)) {
        unlink(path);
        return;
    }
    g_autoptr(GDir) dir = g_dir_open(path, 0, NULL);
    const char *entry;
    while (dir && (entry = g_dir_read_name(dir))) {
        g_autofree char *full = g_build_filename(path, entry, NULL);
        rf_folder_tree_remove(full);
    }
    rmdir(path);
}

bool rf_folder_tree_lock(int fd)
{
    return flock(fd, LOCK_EX | LOCK_NB) == 0 || errno != EWOULDBLOCK;
}
