/* Scenes to be filmed. */
#include "cli/simulate_scene.h"
#include "tests/fuzz/target.h"

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    g_autofree char *path = rf_target_file("a.scene", bytes, size);
    GError *error = NULL;
    g_autoptr(RfScene) scene = rf_simulate_scene_load(path, &error);
    if (scene == NULL) rf_target_check_words(error);
    return 0;
}
