#include "tests/fuzz/target.h"

#include <glib/gstdio.h>
#include <gsl/gsl_errno.h>
#include <stdbool.h>
#include <stdlib.h>
#include <string.h>

#include "cli/folder_tree.h"

/* abort(), not GLib's own way to make them fatal: libFuzzer doesn't look at SIGTRAP and would forget the input. */
static void on_log(const char *domain, GLogLevelFlags level, const char *message, void *user)
{
    g_log_default_handler(domain, level, message, user);
    if (level & (G_LOG_LEVEL_CRITICAL | G_LOG_LEVEL_WARNING)) abort();
}

/* As main.c has it; besides, what GLib complains of is a finding. */
int LLVMFuzzerInitialize(int *argc, char ***argv)
{
    (void)argc, (void)argv;
    gsl_set_error_handler_off();
    g_log_set_default_handler(on_log, NULL);
    return 0;
}

void rf_target_check_words(GError *error)
{
    if (error == NULL || error->message[0] == '\0' || !g_utf8_validate(error->message, -1, NULL)) abort();
    g_error_free(error);
}

static void remove_folder(void)
{
    rf_folder_tree_remove(rf_target_folder());
}

const char *rf_target_folder(void)
{
    static char *folder = NULL;
    if (folder == NULL) {
        folder = g_dir_make_tmp("risefall-target-XXXXXX", NULL);
        g_assert_nonnull(folder);
        atexit(remove_folder);
    }
    return folder;
}

char *rf_target_file(const char *name, const void *bytes, size_t size)
{
    char *path = g_build_filename(rf_target_folder(), name, NULL);
    /* Plainly, not by g_file_set_contents(): a campaign does this some thousand times a second. */
    FILE *file = fopen(path, "wb");
    g_assert_nonnull(file);
    g_assert_cmpuint(fwrite(bytes, 1, size, file), ==, size);
    g_assert_cmpint(fclose(file), ==, 0);
    return path;
}

void rf_target_files(const char *const *names, const uint8_t *bytes, size_t size)
{
    bool is_over = false;
    for (; *names != NULL; names++) {
        const uint8_t *end = is_over ? NULL : memchr(bytes, '\f', size);
        size_t part = end != NULL ? (size_t)(end - bytes) : size;
        g_autofree char *path = is_over ? g_build_filename(rf_target_folder(), *names, NULL)
                                        : rf_target_file(*names, bytes, part);
        if (is_over) g_remove(path);
        is_over = end == NULL;
        if (!is_over) bytes += part + 1, size -= part + 1;
    }
}
