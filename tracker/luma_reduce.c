#include "tracker/luma_reduce.h"

#include "tracker/luma.h"
#include "tracker/wide.h"

#include <glib.h>
#include <math.h>
#include <string.h>

enum { STRIP = 512, TAPS = RF_BLUR_TAPS, REACH = RF_BLUR_REACH };

/* Column sums of `reduction` rows over a strip of the picture. */
static RF_WITHIN void sum_columns(const RfFrame *frame, int first_row, int rows, int left, int columns,
                                  uint32_t *sums)
{
    memset(sums, 0, (size_t)columns * sizeof *sums);
    if (frame->bit_depth == 8) {
        uint16_t narrow[STRIP] = {0}; /* sixteen bytes fit */
        for (int j = 0; j < rows; j++) {
            const uint8_t *row = rf_luma_row(frame, first_row + j) + left;
            for (int x = 0; x < columns; x++) narrow[x] = (uint16_t)(narrow[x] + row[x]);
        }
        for (int x = 0; x < columns; x++) sums[x] = narrow[x];
        return;
    }
    for (int j = 0; j < rows; j++) {
        const uint16_t *row = (const uint16_t *)(const void *)rf_luma_row(frame, first_row + j) + left;
        for (int x = 0; x < columns; x++) sums[x] += row[x];
    }
}

RF_WIDE void rf_luma_reduce(const RfFrame *frame, int reduction, float *out)
{
    g_assert(reduction >= 2 && reduction <= 16);
    int width = frame->width / reduction, height = frame->height / reduction, per_strip = STRIP / reduction;
    float scale = 1.0f / (float)(reduction * reduction);
    uint32_t sums[STRIP];
    for (int y = 0; y < height; y++)
        for (int first = 0; first < width; first += per_strip) {
            int cells = MIN(per_strip, width - first);
            sum_columns(frame, y * reduction, reduction, first * reduction, cells * reduction, sums);
            for (int i = 0; i < cells; i++) {
                uint32_t sum = 0;
                for (int k = 0; k < reduction; k++) sum += sums[i * reduction + k];
                out[(size_t)y * (size_t)width + (size_t)(first + i)] = (float)sum * scale;
            }
        }
}

void rf_blur_prepare(RfBlur *blur)
{
    memset(blur, 0, sizeof *blur);
    for (int phase = 0; phase < RF_BLUR_PHASES + 2; phase++) {
        double place = (double)phase / RF_BLUR_PHASES - 0.5, total = 0;
        for (int i = 0; i <= 2 * REACH; i++) total += exp(-0.5 * (i - REACH - place) * (i - REACH - place));
        for (int i = 0; i <= 2 * REACH; i++)
            blur->weights[phase][i] = (float)(exp(-0.5 * (i - REACH - place) * (i - REACH - place)) / total);
    }
}

static RF_WITHIN void weigh(const RfBlur *blur, float place, float weights[TAPS])
{
    float phase = (place + 0.5f) * RF_BLUR_PHASES;
    int below = CLAMP((int)phase, 0, RF_BLUR_PHASES);
    float part = phase - (float)below;
    const float *a = blur->weights[below], *b = blur->weights[below + 1];
    for (int i = 0; i < TAPS; i++) weights[i] = a[i] + part * (b[i] - a[i]);
}

RF_WIDE bool rf_blur_sample(const RfBlur *blur, const RfFrame *frame, float x_px, float y_px, float *value)
{
    if (!(x_px > REACH && y_px > REACH && x_px < (float)(frame->width - TAPS / 2 - 1) &&
          y_px < (float)(frame->height - TAPS / 2 - 1)))
        return false;
    int column = (int)(x_px + 0.5f), row = (int)(y_px + 0.5f);
    float across[TAPS], down[TAPS], lines[TAPS] = {0};
    weigh(blur, x_px - (float)column, across);
    weigh(blur, y_px - (float)row, down);
    for (int j = 0; j <= 2 * REACH; j++) {
        const uint8_t *bytes = rf_luma_row(frame, row + j - REACH);
        const uint16_t *wide = (const uint16_t *)(const void *)bytes + column - REACH;
        if (frame->bit_depth == 8)
            for (int i = 0; i < TAPS; i++) lines[i] += down[j] * (float)bytes[column - REACH + i];
        else
            for (int i = 0; i < TAPS; i++) lines[i] += down[j] * (float)wide[i];
    }
    float even = 0, odd = 0;
    for (int i = 0; i < TAPS; i += 2) even += across[i] * lines[i], odd += across[i + 1] * lines[i + 1];
    *value = even + odd;
    return true;
}
