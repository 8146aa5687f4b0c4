/* Inner loops of learning the background: one row of the picture as many frames show it, and each pixel's robust level.
 * Values are 16-bit whole numbers, a fraction of a grey level each, so that eight pixels fit a vector. */
#pragma once

#include "tracker/frame.h"

#include <stdint.h>

enum { RF_LEVEL_STACK_UNSEEN = INT16_MAX }; /* a frame doesn't show this pixel */

/* How many units a grey level has: 64 at 8 bit. */
double rf_level_stack_units(int bit_depth);

/* Row y as it is, less or more bright: value * scale + offset grey levels. */
void rf_level_stack_copy_row(const RfFrame *frame, int y, float scale, float offset, int16_t *out);

/* The row along a straight line through the frame, by cubic interpolation: pixel x is taken from
 * (x_px + x * step_x, y_px + x * step_y). Unseen where that lies outside the frame or within 1 px of its border. */
typedef struct {
    double x_px, y_px, step_x, step_y;
} RfRowLine;
void rf_level_stack_resample_row(const RfFrame *frame, const RfRowLine *line, float scale, float offset,
                                 int16_t *out);

/* Median of what the frames show at each pixel, made finer by the mean of what lies within `reach` of it, and the
 * variance of that.
 *   rows    n rows of `width`, one behind the other, and 64 values of no meaning behind the last; n up to 32000
 *   whole   values are whole grey levels (saves looking at fractions)
 *   reach   grey levels
 *   level, variance  in grey levels; untouched where fewer than 3 frames show the pixel
 *   kept    how many frames show the pixel */
typedef struct {
    const int16_t *rows;
    int n, width, bit_depth;
    bool is_whole;
    float reach;
} RfLevelStack;
void rf_level_stack_reduce(const RfLevelStack *stack, float *level, float *variance, int16_t *kept);
