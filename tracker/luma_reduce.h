/* A frame made smaller, and a frame seen through a slight blur: what registration looks at in every frame, so both are
 * inner loops. */
#pragma once

#include "tracker/frame.h"

#include <stdbool.h>

/* Means of reduction x reduction pixels (2..16); what doesn't fill a cell at the right and bottom is left out.
 *   out  (width / reduction) * (height / reduction) numbers */
void rf_luma_reduce(const RfFrame *frame, int reduction, float *out);

/* Gaussian blur of 1 px sampled anywhere: no interpolation can tell a shift to a hundredth of a pixel from thin lines that
 * the pixels undersample, but of the blurred picture it is exact to 1e-4. */
enum { RF_BLUR_REACH = 3, RF_BLUR_TAPS = 8, RF_BLUR_PHASES = 128 };
typedef struct {
    float weights[RF_BLUR_PHASES + 2]
                 [RF_BLUR_TAPS]; /* by the place within a pixel, -1/2 to 1/2; the last tap is 0 */
} RfBlur;

void rf_blur_prepare(RfBlur *blur);
/* False, and no value, nearer than 4 px to the border. */
bool rf_blur_sample(const RfBlur *blur, const RfFrame *frame, float x_px, float y_px, float *value);
