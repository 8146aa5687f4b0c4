/* Does a packet of H.264 or HEVC begin with a picture from which decoding may start afresh? Containers flag recovery
 * points and intra refresh as keyframes too; only the picture's own type tells. Pure.
 * H.264: an IDR slice, type 5 (ITU-T H.264 table 7-1). HEVC: IRAP, types 16 to 21 (ITU-T H.265 table 7-1). */
#pragma once

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* setup: the stream's global header, which tells whether units carry lengths (avcC, hvcC) or start codes. */
bool rf_nal_is_refresh(const uint8_t *packet, size_t size, const uint8_t *setup, size_t setup_size,
                       bool is_hevc);
