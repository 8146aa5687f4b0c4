/* Reading a frame's luma as numbers, whatever its bit depth. Header only; for inner loops. */
#pragma once

#include "tracker/frame.h"

/* (borrowed) row y of the frame, as bytes */
static inline const uint8_t *rf_luma_row(const RfFrame *frame, int y)
{
    return (const uint8_t *)frame->luma + (ptrdiff_t)y * frame->stride_bytes;
}

/* Grey level at a stored pixel inside the picture. */
static inline float rf_luma_at(const RfFrame *frame, int x, int y)
{
    const uint8_t *row = rf_luma_row(frame, y);
    return frame->bit_depth == 8 ? (float)row[x] : (float)((const uint16_t *)(const void *)row)[x];
}

/* Copies row y, `width` numbers. */
static inline void rf_luma_copy_row(const RfFrame *frame, int y, float *out)
{
    const uint8_t *row = rf_luma_row(frame, y);
    if (frame->bit_depth == 8) {
        for (int x = 0; x < frame->width; x++) out[x] = (float)row[x];
    } else {
        const uint16_t *wide = (const uint16_t *)(const void *)row;
        for (int x = 0; x < frame->width; x++) out[x] = (float)wide[x];
    }
}

/* Grey level of the video's black: 16/256 of full scale in limited range, else 0. */
static inline double rf_luma_black_level(const RfFrame *frame)
{
    return frame->is_limited_range ? (double)(1 << frame->bit_depth) / 16.0 : 0.0;
}
