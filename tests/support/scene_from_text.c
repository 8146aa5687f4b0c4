#include "scene_from_text.h"

#include <glib/gstdio.h>

RfScene *scene_from_text(const char *more)
{
    g_autoptr(GError) error = NULL;
    g_autofree char *path = NULL;
    int file = g_file_open_tmp("scene-XXXXXX", &path, NULL);
    g_assert_cmpint(file, >=, 0);
    g_close(file, NULL);
    g_autofree char *text = g_strconcat("[picture]\nduration=2 s\npx_per_mm=400\nseed=5\n", more, NULL);
    g_assert_true(g_file_set_contents(path, text, -1, NULL));
    RfScene *scene = rf_simulate_scene_load(path, &error);
    g_assert_no_error(error);
    g_assert_cmpint(g_unlink(path), ==, 0);
    return scene;
}
