/* Pictures of a reticle, any picture: five bytes say which kind and size, the others are its pixels, over and over. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "calib/length_scale.h"
#include "tests/fuzz/target.h"

enum { HEAD_BYTES = 5, LEAST_SIDE_PX = 24 };

static void check(const RfLengthScale *scale)
{
    const RfValue *values[] = {&scale->px_per_m_x, &scale->px_per_m_y, &scale->px_per_spacing_x,
                               &scale->px_per_spacing_y};
    for (size_t i = 0; i < G_N_ELEMENTS(values); i++)
        if (!isfinite(values[i]->value) || !(values[i]->value > 0) || !isfinite(values[i]->sigma)) abort();
    if (!isfinite(scale->rotation_rad.value) || !isfinite(scale->k1.value)) abort();
    if (!isfinite(scale->residual_px) || scale->lines->len != scale->lines_found) abort();
}

static void *fill(size_t bytes_needed, const uint8_t *bytes, size_t size)
{
    uint8_t *pixels = g_malloc0(bytes_needed);
    for (size_t at = 0; at < bytes_needed && size > 0; at += size)
        memcpy(pixels + at, bytes, MIN(size, bytes_needed - at));
    return pixels;
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    static const size_t pixel_bytes[] = {1, 2, 4};
    if (size < HEAD_BYTES) return 0;
    int width = LEAST_SIDE_PX + bytes[0], height = LEAST_SIDE_PX + bytes[1];
    RfPixelKind kind = bytes[2] % 3;
    ptrdiff_t stride_bytes = (ptrdiff_t)(pixel_bytes[kind] * (size_t)width);
    g_autofree void *pixels =
        fill((size_t)stride_bytes * (size_t)height, bytes + HEAD_BYTES, size - HEAD_BYTES);
    RfPicture picture = {pixels, stride_bytes, width, height, kind};
    RfLengthScaleOptions options = {.lines = bytes[3] % 3,
                                    .spacing_m = {1e-4, 2e-7},
                                    .pixel_aspect = (1 + bytes[4]) / 64.0,
                                    .plane_ratio = {1, 0}};
    GError *error = NULL;
    g_autoptr(RfLengthScale) scale = rf_length_scale_measure(&picture, &options, &error);
    if (scale != NULL)
        check(scale);
    else
        rf_target_check_words(error);
    return 0;
}
