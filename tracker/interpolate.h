/* Values of an image between its pixels. Header only; for inner loops. */
#pragma once

#include <stdbool.h>

/* Catmull and Rom 1974 (cubic convolution with a = -1/2): exact for quadratics. `t` in [0, 1) between tap 1 and 2. */
static inline void rf_interpolate_cubic_weights(float t, float weights[4])
{
    float t2 = t * t, t3 = t2 * t;
    weights[0] = 0.5f * (-t3 + 2 * t2 - t);
    weights[1] = 0.5f * (3 * t3 - 5 * t2 + 2);
    weights[2] = 0.5f * (-3 * t3 + 4 * t2 + t);
    weights[3] = 0.5f * (t3 - t2);
}

/* Cubic value at (x, y) of a float image; false (and no value) within 1 px of its border or outside. */
static inline bool rf_interpolate_cubic(const float *image, int width, int height, float x, float y,
                                        float *value)
{
    if (!(x >= 1 && y >= 1 && x < (float)(width - 2) && y < (float)(height - 2))) return false;
    int column = (int)x, row = (int)y;
    float across[4], down[4], sum = 0;
    rf_interpolate_cubic_weights(x - (float)column, across);
    rf_interpolate_cubic_weights(y - (float)row, down);
    const float *tap = image + (long)(row - 1) * width + column - 1;
    for (int i = 0; i < 4; i++, tap += width)
        sum += down[i] * (across[0] * tap[0] + across[1] * tap[1] + across[2] * tap[2] + across[3] * tap[3]);
    *value = sum;
    return true;
}

/* Linear value at (x, y); outside, that of the nearest place inside. */
static inline float rf_interpolate_linear(const float *image, int width, int height, float x, float y)
{
    x = x < 0 ? 0 : x > (float)(width - 1) ? (float)(width - 1) : x;
    y = y < 0 ? 0 : y > (float)(height - 1) ? (float)(height - 1) : y;
    int column = (int)x, row = (int)y;
    column -= column > width - 2 && width > 1;
    row -= row > height - 2 && height > 1;
    float tx = x - (float)column, ty = y - (float)row;
    const float *tap = image + (long)row * width + column;
    float upper = tap[0] + tx * (tap[1] - tap[0]), lower = tap[width] + tx * (tap[width + 1] - tap[width]);
    return upper + ty * (lower - upper);
}
