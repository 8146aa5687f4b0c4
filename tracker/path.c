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

const char *rf_path_birth_to_string(RfPathBirth birth)
{
    switch (birth) {
    case RF_PATH_BIRTH_RECORDING:
        return "there when the recording begins";
    case RF_PATH_BIRTH_EDGE:
        return "came in over the edge";
    case RF_PATH_BIRTH_FOCUS:
        return "came into sight inside the picture";
    case RF_PATH_BIRTH_AMBIGUOUS:
        return "cut: which droplet it was before can't be decided";
    }
    g_assert_not_reached();
}

const char *rf_path_death_to_string(RfPathDeath death)
{
    switch (death) {
    case RF_PATH_DEATH_RECORDING:
        return "still there when the recording ends";
    case RF_PATH_DEATH_EDGE:
        return "left over the edge";
    case RF_PATH_DEATH_FOCUS:
        return "lost from sight inside the picture";
    case RF_PATH_DEATH_AMBIGUOUS:
        return "cut: which droplet it became can't be decided";
    }
    g_assert_not_reached();
}
