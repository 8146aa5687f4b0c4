#include <string.h>

#include "tracker/libav.h"
#include "tracker/video_error.h"
#include "tracker/video_file.h"
#include "tracker/video_luma.h"

#define LARGEST_STILL_BYTES (INT64_C(1) << 30)

static const char *still_codec(const uint8_t *bytes, size_t size)
{
    if (size < 8) return NULL;
    if (memcmp(bytes, "\x89PNG", 4) == 0) return "png";
    if (memcmp(bytes, "\xff\xd8\xff", 3) == 0) return "mjpeg";
    if (memcmp(bytes, "II*\0", 4) == 0 || memcmp(bytes, "MM\0*", 4) == 0) return "tiff";
    if (memcmp(bytes, "BM", 2) == 0) return "bmp";
    if (bytes[0] != 'P' || !g_ascii_isspace(bytes[2])) return NULL;
    if (bytes[1] == '2' || bytes[1] == '5') return "pgm";
    return bytes[1] == '3' || bytes[1] == '6' ? "ppm" : NULL;
}

static RfDecoder *decode(const char *path, RfPicture *picture, GError **error)
{
    if (!rf_video_check_file(path, error)) return NULL;
    g_autoptr(GMappedFile) file = g_mapped_file_new(path, FALSE, NULL);
    if (file == NULL) {
        rf_video_fail(error, RF_VIDEO_ERROR_ABSENT, path, "can't be read");
        return NULL;
    }
    size_t size = g_mapped_file_get_length(file);
    if (size > LARGEST_STILL_BYTES) {
        rf_video_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, "larger than a still may be, 1 GiB");
        return NULL;
    }
    const void *bytes = g_mapped_file_get_contents(file);
    const char *codec = still_codec(bytes, size);
    if (codec == NULL) {
        rf_video_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path,
                      "not a picture; need PNG, JPEG, TIFF, BMP or PGM");
        return NULL;
    }
    return rf_decoder_still(path, codec, bytes, size, picture, error);
}

static RfStill *still_copy(const RfFrame *lent, double pixel_aspect)
{
    size_t row_bytes = (size_t)lent->width * (lent->bit_depth > 8 ? 2 : 1);
    RfStill *still = g_new0(RfStill, 1);
    *still = (RfStill){lent->width,
                       lent->height,
                       lent->bit_depth,
                       pixel_aspect > 0 ? pixel_aspect : 1,
                       lent->is_limited_range,
                       g_malloc_n((size_t)lent->height, row_bytes)};
    for (int y = 0; y < lent->height; y++) {
        memcpy((uint8_t *)still->pixels + (size_t)y * row_bytes,
               (const uint8_t *)lent->luma + y * lent->stride_bytes, row_bytes);
    }
    return still;
}

RfStill *rf_video_file_read_still(const char *path, GError **error)
{
    RfPicture picture;
    g_autoptr(RfDecoder) decoder = decode(path, &picture, error);
    if (decoder == NULL || !rf_video_check_size(path, picture.width, picture.height, error)) return NULL;
    RfLumaRows scratch = {0};
    RfFrame lent;
    RfStill *still = NULL;
    if (picture.is_readable && rf_video_luma_lend(&scratch, decoder, &picture, &lent))
        still = still_copy(&lent, picture.pixel_aspect);
    else
        rf_video_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path,
                      "pixels of a kind that isn't read; need grey or RGB");
    rf_video_luma_clear(&scratch);
    return still;
}

void rf_still_free(RfStill *still)
{
    if (still == NULL) return;
    g_free(still->pixels);
    g_free(still);
}

/* As PNG has them. */
static uint8_t *big_endian_rows(const void *pixels, ptrdiff_t stride_bytes, int width, int height)
{
    uint8_t *rows = g_malloc_n((size_t)width * (size_t)height, 2), *to = rows;
    for (int y = 0; y < height; y++) {
        const uint16_t *from = (const void *)((const uint8_t *)pixels + y * stride_bytes);
        for (int x = 0; x < width; x++, to += 2) to[0] = (uint8_t)(from[x] >> 8), to[1] = (uint8_t)from[x];
    }
    return rows;
}

GBytes *rf_video_file_encode_png(const void *pixels, ptrdiff_t stride_bytes, int width, int height,
                                 int channels, int bit_depth, GError **error)
{
    if (!rf_video_check_size("PNG in memory", width, height, error)) return NULL;
    if (bit_depth == 8) return rf_libav_encode_png(pixels, stride_bytes, width, height, channels, 8, error);
    g_autofree uint8_t *rows = big_endian_rows(pixels, stride_bytes, width, height);
    return rf_libav_encode_png(rows, 2 * (ptrdiff_t)width, width, height, channels, bit_depth, error);
}
