/* Between colour and luma, ITU-R BT.601: Y' = 0.299 R' + 0.587 G' + 0.114 B'. Pure.
 * For footage and stills without a luma plane of their own, and for the clips that the program draws. */
#pragma once

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Full-scale luma of n pixels, to the nearest level; grey stays what it is. In the bit depth of the colours, <= 16.
 * `luma` may be any of the three. */
void rf_rgb_to_luma(const uint16_t *red, const uint16_t *green, const uint16_t *blue, size_t n,
                    uint16_t *luma);

/* RGB24 to 8-bit YUV 4:2:0; chroma is the mean of 2 x 2 pixels. width and height even. */
void rf_rgb_to_yuv420(const uint8_t *rgb, ptrdiff_t stride_bytes, int width, int height, bool is_full_range,
                      uint8_t *const planes[3], const int strides_bytes[3]);
