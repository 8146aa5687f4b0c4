#include "tracker/path.h"

void rf_path_free(RfPath *path)
{
    if (!path) return;
    g_array_unref(path->points);
    g_free(path);
}

void rf_paths_free(RfPaths *paths)
{
    if (!paths) return;
    g_ptr_array_unref(paths->paths);
    g_free(paths);
}
