/* The picture a decoder holds, lent as rows of luma, whatever its layout. */
#pragma once

#include <stdbool.h>
#include <stdint.h>

#include "tracker/frame.h"
#include "tracker/libav.h"

typedef struct {    /* zero to begin with; for sources that have no luma plane of their own */
    void *rows;     /* tight rows */
    uint16_t *work; /* three rows */
} RfLumaRows;

void rf_video_luma_clear(RfLumaRows *scratch);

/* Sources with a luma plane are lent where they lie. Packed, big-endian, shifted (P010) and RGB ones are converted;
 * RGB becomes ITU-R BT.601 luma. Lent until the next call on the decoder or the scratch. Index, time and damage are left
 * at zero. False: not enough memory. */
bool rf_video_luma_lend(RfLumaRows *scratch, const RfDecoder *decoder, const RfPicture *picture,
                        RfFrame *lent);
