#include "tracker/rgb.h"

/* 65536 times the coefficients; they add up to 65536, so that grey stays exactly what it is. */
#define RED 19595u
#define GREEN 38470u
#define BLUE 7471u

void rf_rgb_to_luma(const uint16_t *red, const uint16_t *green, const uint16_t *blue, size_t n,
                    uint16_t *luma)
{
    for (size_t i = 0; i < n; i++) {
        luma[i] = (uint16_t)((red[i] * RED + green[i] * GREEN + blue[i] * BLUE + 32768u) >> 16);
    }
}

static uint8_t level(double value)
{
    return value <= 0 ? 0 : value >= 255 ? 255 : (uint8_t)(value + 0.5);
}

static void luma_row(const uint8_t *rgb, int width, double offset, double gain, uint8_t *row)
{
    for (int x = 0; x < width; x++, rgb += 3) {
        row[x] = level(offset + gain * (0.299 * rgb[0] + 0.587 * rgb[1] + 0.114 * rgb[2]));
    }
}

/* Cb = (B - Y)/1.772 + 128, Cr = (R - Y)/1.402 + 128 (BT.601, JFIF); 224/255 of that in limited range. */
static void chroma_row(const uint8_t *upper, const uint8_t *lower, int width, double gain, uint8_t *blue,
                       uint8_t *red)
{
    for (int x = 0; x + 1 < width; x += 2, upper += 6, lower += 6) {
        double mean[3];
        for (int c = 0; c < 3; c++) mean[c] = (upper[c] + upper[c + 3] + lower[c] + lower[c + 3]) / 4.0;
        double luma = 0.299 * mean[0] + 0.587 * mean[1] + 0.114 * mean[2];
        blue[x / 2] = level(128 + gain * (mean[2] - luma) / 1.772);
        red[x / 2] = level(128 + gain * (mean[0] - luma) / 1.402);
    }
}

void rf_rgb_to_yuv420(const uint8_t *rgb, ptrdiff_t stride_bytes, int width, int height, bool is_full_range,
                      uint8_t *const planes[3], const int strides_bytes[3])
{
    double offset = is_full_range ? 0 : 16, gain = is_full_range ? 1 : 219 / 255.0;
    for (int y = 0; y < height; y++) {
        luma_row(rgb + y * stride_bytes, width, offset, gain, planes[0] + (ptrdiff_t)y * strides_bytes[0]);
    }
    for (int y = 0; y + 1 < height; y += 2) {
        const uint8_t *upper = rgb + y * stride_bytes;
        ptrdiff_t half = y / 2;
        chroma_row(upper, upper + stride_bytes, width, is_full_range ? 1 : 224 / 255.0,
                   planes[1] + half * strides_bytes[1], planes[2] + half * strides_bytes[2]);
    }
}
