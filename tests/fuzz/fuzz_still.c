/* Stills: any bytes that call themselves a picture. */
#include <stdlib.h>

#include "tests/fuzz/target.h"
#include "tracker/video_file.h"

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    g_autofree char *path = rf_target_file("still", bytes, size);
    GError *error = NULL;
    g_autoptr(RfStill) still = rf_video_file_read_still(path, &error);
    if (still == NULL)
        rf_target_check_words(error);
    else if (still->width < 1 || still->height < 1 || still->bit_depth < 8 || still->bit_depth > 16)
        abort();
    return 0;
}
