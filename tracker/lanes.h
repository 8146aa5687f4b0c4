/* Sums over columns of floats, four at a time in a fixed order: vector instructions where the machine has them, the same
 * bytes on every machine. Header only; for inner loops. */
#pragma once

typedef float RfLanes __attribute__((vector_size(16), may_alias));

enum { RF_LANES_STEP = 8 }; /* columns are aligned to 16 bytes and filled up to a multiple of this */

static inline RfLanes rf_lanes_dot(const float *a, const float *b, int n)
{
    RfLanes even = {0, 0, 0, 0}, odd = {0, 0, 0, 0};
    for (int j = 0; j < n; j += RF_LANES_STEP) {
        even += *(const RfLanes *)(a + j) * *(const RfLanes *)(b + j);
        odd += *(const RfLanes *)(a + j + 4) * *(const RfLanes *)(b + j + 4);
    }
    return even + odd;
}

static inline double rf_lanes_total(RfLanes lanes)
{
    return ((double)lanes[0] + (double)lanes[1]) + ((double)lanes[2] + (double)lanes[3]);
}
