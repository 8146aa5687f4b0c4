/* An exposure at half size, background taken away, in units of the noise: what the spot detector searches.
 * One number per cell of 2 x 2 stored pixels (of a field: 2 x 1); cell (0, 0) covers stored pixels 0 and 1. Cells with a
 * bad pixel are zero. */
#pragma once

#include "tracker/exposure_view.h"

typedef struct RfContrast RfContrast; /* prepared background; immutable, shared by threads */

/* `background` must outlive it. */
RfContrast *rf_contrast_new(const RfBackground *background);
void rf_contrast_free(RfContrast *contrast);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfContrast, rf_contrast_free)

int rf_contrast_width(const RfContrast *contrast);
int rf_contrast_height(const RfContrast *contrast);

/* Fills rf_contrast_width * rf_contrast_height numbers, of unit variance where there is only white noise.
 *   sign  +1, or -1 to make dark spots positive */
void rf_contrast_fill(const RfContrast *contrast, const RfExposureView *view, double sign, float *picture);
