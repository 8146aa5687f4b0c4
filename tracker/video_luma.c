#include "tracker/video_luma.h"

#include <string.h>

#include "tracker/rgb.h"

void rf_video_luma_clear(RfLumaRows *scratch)
{
    g_free(scratch->rows);
    g_free(scratch->work);
    *scratch = (RfLumaRows){0};
}

static bool fit(RfLumaRows *scratch, size_t width, size_t height, size_t bytes)
{
    void *rows = g_try_realloc_n(scratch->rows, width * height, bytes);
    void *work = g_try_realloc_n(scratch->work, 3 * width, sizeof *scratch->work);
    if (rows != NULL) scratch->rows = rows;
    if (work != NULL) scratch->work = work;
    return rows != NULL && work != NULL;
}

/* Any layout at all, component by component; slow, for sources that a microscope camera rarely has. */
static void convert_row(const RfDecoder *decoder, const RfPicture *picture, int y, uint16_t *work, void *out)
{
    size_t width = (size_t)picture->width;
    for (int c = 0; c < picture->components; c++) {
        rf_decoder_levels(decoder, c, y, work + (size_t)c * width);
    }
    if (picture->components == 3) rf_rgb_to_luma(work, work + width, work + 2 * width, width, work);
    if (picture->bit_depth > 8)
        memcpy(out, work, width * 2);
    else
        for (size_t x = 0; x < width; x++) ((uint8_t *)out)[x] = (uint8_t)work[x];
}

bool rf_video_luma_lend(RfLumaRows *scratch, const RfDecoder *decoder, const RfPicture *picture,
                        RfFrame *lent)
{
    rf_decoder_lend(decoder, lent);
    if (picture->is_plain) return true;
    int bytes = picture->bit_depth > 8 ? 2 : 1;
    if (!fit(scratch, (size_t)picture->width, (size_t)picture->height, (size_t)bytes)) return false;
    lent->stride_bytes = (ptrdiff_t)picture->width * bytes;
    lent->luma = scratch->rows;
    for (int y = 0; y < picture->height; y++) {
        convert_row(decoder, picture, y, scratch->work, (uint8_t *)scratch->rows + y * lent->stride_bytes);
    }
    return true;
}
