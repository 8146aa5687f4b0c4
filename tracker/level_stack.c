#include "tracker/level_stack.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"
#include "tracker/wide.h"

#include <glib.h>
#include <math.h>
#include <string.h>

enum { UNSEEN = RF_LEVEL_STACK_UNSEEN, BLOCK = 64, RUN = 16, FULL_BITS = 14 };

double rf_level_stack_units(int bit_depth)
{
    return ldexp(1, FULL_BITS - bit_depth);
}

/* A value in units, rounded; what an undone lamp drives out of range stays at its ends. */
static RF_WITHIN int16_t in_units(float value)
{
    float bounded = value < 0 ? 0 : value > UNSEEN - 1 ? UNSEEN - 1 : value;
    return (int16_t)(bounded + 0.5f);
}

RF_WIDE void rf_level_stack_copy_row(const RfFrame *frame, int y, float scale, float offset, int16_t *out)
{
    float units = (float)rf_level_stack_units(frame->bit_depth), by = scale * units, plus = offset * units;
    const uint8_t *row = rf_luma_row(frame, y);
    const uint16_t *wide = (const uint16_t *)(const void *)row;
    if (frame->bit_depth == 8)
        for (int x = 0; x < frame->width; x++) out[x] = in_units((float)row[x] * by + plus);
    else
        for (int x = 0; x < frame->width; x++) out[x] = in_units((float)wide[x] * by + plus);
}

/* Pixels column .. column + RUN + 2 of four rows, as floats. */
static RF_WITHIN void fetch(const RfFrame *frame, int column, int row, float taps[4][RUN + 3])
{
    for (int j = 0; j < 4; j++) {
        const uint8_t *bytes = rf_luma_row(frame, row + j);
        const uint16_t *wide = (const uint16_t *)(const void *)bytes;
        if (frame->bit_depth == 8)
            for (int i = 0; i < RUN + 3; i++) taps[j][i] = (float)bytes[column + i];
        else
            for (int i = 0; i < RUN + 3; i++) taps[j][i] = (float)wide[column + i];
    }
}

/* RUN pixels whose taps lie side by side: only the fractions change along the line. */
static RF_WITHIN void resample_run(float taps[4][RUN + 3], float part_x, float step_x, float part_y,
                                   float step_y, float *out)
{
    float across[4][RUN], down[4][RUN];
    for (int i = 0; i < RUN; i++) {
        float wx[4], wy[4];
        rf_interpolate_cubic_weights(part_x + (float)i * step_x, wx);
        rf_interpolate_cubic_weights(part_y + (float)i * step_y, wy);
        for (int k = 0; k < 4; k++) across[k][i] = wx[k], down[k][i] = wy[k];
    }
    for (int i = 0; i < RUN; i++) out[i] = 0;
    for (int j = 0; j < 4; j++)
        for (int i = 0; i < RUN; i++)
            out[i] += down[j][i] * (across[0][i] * taps[j][i] + across[1][i] * taps[j][i + 1] +
                                    across[2][i] * taps[j][i + 2] + across[3][i] * taps[j][i + 3]);
}

/* The pixel by itself, where the taps of its neighbours don't follow on its own. */
static bool resample_one(const RfFrame *frame, double x, double y, float *value)
{
    if (!(x >= 1 && y >= 1 && x < frame->width - 2 && y < frame->height - 2)) return false;
    int column = (int)x, row = (int)y;
    float across[4], down[4], sum = 0;
    rf_interpolate_cubic_weights((float)(x - column), across);
    rf_interpolate_cubic_weights((float)(y - row), down);
    for (int j = 0; j < 4; j++) {
        float line = 0;
        for (int i = 0; i < 4; i++) line += across[i] * rf_luma_at(frame, column - 1 + i, row - 1 + j);
        sum += down[j] * line;
    }
    *value = sum;
    return true;
}

static bool is_one_run(const RfFrame *frame, const RfRowLine *line, int x)
{
    double x0 = line->x_px + x * line->step_x, y0 = line->y_px + x * line->step_y;
    double x1 = x0 + (RUN - 1) * line->step_x, y1 = y0 + (RUN - 1) * line->step_y;
    return x + RUN <= frame->width && x0 >= 1 && x1 < frame->width - 3 && fmin(y0, y1) >= 1 &&
           fmax(y0, y1) < frame->height - 2 && (int)x1 - (int)x0 == RUN - 1 && (int)y0 == (int)y1;
}

RF_WIDE void rf_level_stack_resample_row(const RfFrame *frame, const RfRowLine *line, float scale,
                                         float offset, int16_t *out)
{
    float units = (float)rf_level_stack_units(frame->bit_depth), by = scale * units, plus = offset * units;
    for (int x = 0; x < frame->width;) {
        double at_x = line->x_px + x * line->step_x, at_y = line->y_px + x * line->step_y;
        if (is_one_run(frame, line, x)) {
            float taps[4][RUN + 3], values[RUN];
            int column = (int)at_x, row = (int)at_y;
            fetch(frame, column - 1, row - 1, taps);
            resample_run(taps, (float)(at_x - column), (float)(line->step_x - 1), (float)(at_y - row),
                         (float)line->step_y, values);
            for (int i = 0; i < RUN; i++) out[x + i] = in_units(values[i] * by + plus);
            x += RUN;
        } else {
            float value;
            out[x] = resample_one(frame, at_x, at_y, &value) ? in_units(value * by + plus) : UNSEEN;
            x++;
        }
    }
}

/* One block of pixels, all frames. */
typedef struct {
    const int16_t *first; /* of the first frame's row */
    int n, stride, lowest_bit;
} Column;

static RF_WITHIN void count_seen(const Column *column, int16_t *kept)
{
    memset(kept, 0, BLOCK * sizeof *kept);
    for (int i = 0; i < column->n; i++) {
        const int16_t *row = column->first + (size_t)i * (size_t)column->stride;
        for (int x = 0; x < BLOCK; x++) kept[x] = (int16_t)(kept[x] + (row[x] < UNSEEN));
    }
}

/* The (kept/2)-th smallest value, bit by bit from the highest: the largest that no more values lie below. */
static RF_WITHIN void find_medians(const Column *column, const int16_t *kept, int16_t *median)
{
    memset(median, 0, BLOCK * sizeof *median);
    for (int bit = 1 << FULL_BITS; bit >= column->lowest_bit; bit >>= 1) {
        int16_t tried[BLOCK], below[BLOCK] = {0};
        for (int x = 0; x < BLOCK; x++) tried[x] = (int16_t)(median[x] | bit);
        for (int i = 0; i < column->n; i++) {
            const int16_t *row = column->first + (size_t)i * (size_t)column->stride;
            for (int x = 0; x < BLOCK; x++) below[x] = (int16_t)(below[x] + (row[x] < tried[x]));
        }
        for (int x = 0; x < BLOCK; x++) median[x] = below[x] <= kept[x] / 2 ? tried[x] : median[x];
    }
}

typedef struct {
    float sum[BLOCK], square[BLOCK], n[BLOCK]; /* of the values near the median, from there */
} Near;

static RF_WITHIN void sum_near(const Column *column, const int16_t *median, int reach, Near *near)
{
    memset(near, 0, sizeof *near);
    for (int i = 0; i < column->n; i++) {
        const int16_t *row = column->first + (size_t)i * (size_t)column->stride;
        for (int x = 0; x < BLOCK; x++) {
            int off = row[x] - median[x];
            float weight = off <= reach && off >= -reach ? 1.0f : 0.0f, kept = weight * (float)off;
            near->sum[x] += kept, near->square[x] += kept * kept, near->n[x] += weight;
        }
    }
}

static RF_WITHIN void reduce_block(const RfLevelStack *stack, const Column *column, int pixels, float *level,
                                   float *variance, int16_t *kept)
{
    int16_t seen[BLOCK], median[BLOCK];
    Near near;
    float units = (float)rf_level_stack_units(stack->bit_depth);
    count_seen(column, seen);
    find_medians(column, seen, median);
    sum_near(column, median, (int)fminf(stack->reach * units, UNSEEN / 4), &near);
    for (int x = 0; x < pixels; x++) {
        kept[x] = seen[x];
        if (seen[x] < 3) continue;
        float mean = near.sum[x] / near.n[x], rest = near.square[x] - near.sum[x] * mean;
        level[x] = ((float)median[x] + mean) / units;
        variance[x] = near.n[x] > 1 ? fmaxf(0, rest) / (near.n[x] - 1) / (units * units) : 0;
    }
}

RF_WIDE void rf_level_stack_reduce(const RfLevelStack *stack, float *level, float *variance, int16_t *kept)
{
    int lowest_bit = stack->is_whole ? MAX(1, (int)rf_level_stack_units(stack->bit_depth)) : 1;
    for (int x = 0; x < stack->width; x += BLOCK) {
        int first = MAX(0, MIN(x, stack->width - BLOCK)); /* the last block may do some pixels again */
        Column column = {stack->rows + first, stack->n, stack->width, lowest_bit};
        reduce_block(stack, &column, MIN(BLOCK, stack->width), level + first, variance + first, kept + first);
    }
}
