#include "tracker/nal.h"

/* ISO/IEC 14496-15: avcC holds lengthSizeMinusOne in byte 4, hvcC in byte 21; both begin with version 1. */
static size_t length_bytes(const uint8_t *setup, size_t setup_size, bool is_hevc)
{
    size_t place = is_hevc ? 21 : 4;
    if (setup_size <= place || setup[0] != 1) return 0;
    return (setup[place] & 3u) + 1u;
}

static const uint8_t *after_start_code(const uint8_t *at, const uint8_t *end)
{
    for (; end - at > 3; at++) {
        if (at[0] == 0 && at[1] == 0 && at[2] == 1) return at + 3;
    }
    return NULL;
}

/* First byte of the next unit, and `at` moved behind what has been read; NULL: none left, or a length that lies. */
static const uint8_t *next_unit(const uint8_t **at, const uint8_t *end, size_t length)
{
    if (length == 0) return *at = after_start_code(*at, end);
    size_t size = 0;
    if ((size_t)(end - *at) <= length) return NULL;
    for (size_t i = 0; i < length; i++) size = size << 8 | (*at)[i];
    const uint8_t *unit = *at + length;
    if (size == 0 || size > (size_t)(end - unit)) return NULL;
    *at = unit + size;
    return unit;
}

bool rf_nal_is_refresh(const uint8_t *packet, size_t size, const uint8_t *setup, size_t setup_size,
                       bool is_hevc)
{
    if (packet == NULL || size == 0) return false;
    size_t length = length_bytes(setup, setup_size, is_hevc);
    const uint8_t *at = packet, *unit;
    while ((unit = next_unit(&at, packet + size, length)) != NULL) {
        int type = is_hevc ? *unit >> 1 & 0x3f : *unit & 0x1f;
        bool is_slice = is_hevc ? type < 32 : type >= 1 && type <= 5;
        if (is_slice) return is_hevc ? type >= 16 && type <= 21 : type == 5;
    }
    return false;
}
