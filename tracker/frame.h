/* One decoded picture, lent by the video reader: the only thing that decoder and detector share.
 * Not for keeping: the pixels are valid until the next call on the reader that lent them. */
#pragma once

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* What a picture of the recording was coded from: its errors depend on it. */
typedef enum {
    RF_CODING_UNKNOWN,
    RF_CODING_ALONE, /* from nothing else */
    RF_CODING_PAST,  /* from pictures before */
    RF_CODING_BOTH,  /* from pictures before and after */
    RF_CODINGS
} RfCoding;

typedef struct {
    const void *luma;         /* row 0, left to right; uint8_t if bit_depth == 8, else uint16_t (native order) */
    ptrdiff_t stride_bytes;   /* from one row to the next; may be negative */
    int width, height;        /* stored pixels */
    int bit_depth;            /* 8..16: levels run from 0 to 2^bit_depth - 1 */
    bool is_limited_range;    /* luma black is at 16/256 and white at 235/256 of full scale */
    bool is_interlaced;       /* two fields taken at different instants */
    bool is_top_field_first;  /* meaningful if interlaced */
    bool is_damaged;          /* the decoder reported or concealed errors */
    RfCoding coding;
    int64_t index;            /* of this frame in the recording (files in order), from 0 */
    double time_s;            /* presentation time since the recording's first frame: middle of the exposure */
} RfFrame;
