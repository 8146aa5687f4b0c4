/* A frame as libav decoded it, lent as rows of luma. */
#pragma once

#include <stdbool.h>
#include <stdint.h>

#include "tracker/frame.h"
#include "tracker/libav.h"

typedef struct {    /* zero to begin with; for sources that have no luma plane of their own */
    void *rows;     /* tight rows */
    uint16_t *work; /* three rows */
    int width, height, bytes;
} RfLumaScratch;

void rf_luma_clear(RfLumaScratch *scratch);

bool rf_luma_is_readable(
    const AVPixFmtDescriptor *layout); /* grey, YUV, RGB or palette, whole numbers, <= 16 bit */
bool rf_luma_is_plain(const AVPixFmtDescriptor *layout); /* lent as it lies in memory */
int rf_luma_depth(const AVPixFmtDescriptor *layout);

/* Sources with a luma plane are lent where they lie. Packed, big-endian, shifted (P010) and RGB ones are converted into
 * the scratch plane; RGB becomes ITU-R BT.601 luma. Index, time and damage are left for the caller to fill in. False:
 * no memory for the scratch plane. */
bool rf_luma_lend(const AVFrame *frame, RfLumaScratch *scratch, RfFrame *lent);
