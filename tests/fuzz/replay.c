/* Feeds a target the inputs kept for it: replay FOLDER; speaks TAP. Inputs that once broke something stay mended. */
#include <glib.h>
#include <stdio.h>
#include <stdlib.h>

#include "tests/fuzz/target.h"

static int by_name(const void *a, const void *b)
{
    return g_strcmp0(*(char *const *)a, *(char *const *)b);
}

static GPtrArray *names_in(const char *folder)
{
    GPtrArray *names = g_ptr_array_new_with_free_func(g_free);
    g_autoptr(GDir) dir = g_dir_open(folder, 0, NULL);
    const char *name;
    while (dir != NULL && (name = g_dir_read_name(dir)) != NULL) g_ptr_array_add(names, g_strdup(name));
    g_ptr_array_sort(names, by_name);
    return names;
}

int main(int argc, char **argv)
{
    if (argc != 2) return EXIT_FAILURE;
    LLVMFuzzerInitialize(&argc, &argv);
    g_autoptr(GPtrArray) names = names_in(argv[1]);
    printf("1..%u\n", names->len);
    for (guint i = 0; i < names->len; i++) {
        g_autofree char *path = g_build_filename(argv[1], g_ptr_array_index(names, i), NULL);
        g_autofree char *bytes = NULL;
        size_t size = 0;
        if (!g_file_get_contents(path, &bytes, &size, NULL)) return EXIT_FAILURE;
        printf("# %s\n", path);
        fflush(stdout); /* before a signal could come */
        LLVMFuzzerTestOneInput((const uint8_t *)bytes, size);
        printf("ok %u - %s\n", i + 1, (const char *)g_ptr_array_index(names, i));
    }
    return names->len > 0 ? EXIT_SUCCESS : EXIT_FAILURE;
}
