#include <string.h>

#include "tracker/libav_luma.h"
#include "tracker/video_file.h"

#define LARGEST_STILL_BYTES (INT64_C(1) << 30)

static enum AVCodecID still_codec(const uint8_t *bytes, size_t size)
{
    if (size < 8) return AV_CODEC_ID_NONE;
    if (memcmp(bytes, "\x89PNG", 4) == 0) return AV_CODEC_ID_PNG;
    if (memcmp(bytes, "\xff\xd8\xff", 3) == 0) return AV_CODEC_ID_MJPEG;
    if (memcmp(bytes, "II*\0", 4) == 0 || memcmp(bytes, "MM\0*", 4) == 0) return AV_CODEC_ID_TIFF;
    if (memcmp(bytes, "BM", 2) == 0) return AV_CODEC_ID_BMP;
    if (bytes[0] != 'P' || !g_ascii_isspace(bytes[2])) return AV_CODEC_ID_NONE;
    if (strchr("25", bytes[1]) != NULL) return AV_CODEC_ID_PGM;
    return strchr("36", bytes[1]) != NULL ? AV_CODEC_ID_PPM : AV_CODEC_ID_NONE;
}

static bool read_bytes(const char *path, AVPacket *packet, GError **error)
{
    rf_libav_listen();
    if (!rf_libav_check_file(path, error)) return false;
    g_autoptr(GMappedFile) file = g_mapped_file_new(path, FALSE, NULL);
    if (file == NULL) return rf_libav_fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "can't be read");
    size_t size = g_mapped_file_get_length(file);
    if (size > LARGEST_STILL_BYTES || av_new_packet(packet, (int)size) < 0) {
        return rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, 0, "larger than a still may be, 1 GiB");
    }
    if (size > 0) memcpy(packet->data, g_mapped_file_get_contents(file), size);
    return true;
}

static AVCodecContext *open_still_decoder(const char *path, const AVPacket *packet, GError **error)
{
    const AVCodec *codec = avcodec_find_decoder(still_codec(packet->data, (size_t)packet->size));
    g_autoptr(AVCodecContext) decoder = codec != NULL ? avcodec_alloc_context3(codec) : NULL;
    if (decoder == NULL) {
        rf_libav_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0,
                      "not a picture; need PNG, JPEG, TIFF, BMP or PGM");
        return NULL;
    }
    decoder->max_pixels = RF_VIDEO_MAX_PIXELS;
    decoder->thread_count = 1;
    if (avcodec_open2(decoder, codec, NULL) < 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, AVERROR_DECODER_NOT_FOUND, "can't be decoded");
        return NULL;
    }
    return g_steal_pointer(&decoder);
}

static RfStill *still_copy(const RfFrame *lent, AVRational aspect)
{
    size_t row_bytes = (size_t)lent->width * (lent->bit_depth > 8 ? 2 : 1);
    RfStill *still = g_new0(RfStill, 1);
    *still = (RfStill){lent->width,
                       lent->height,
                       lent->bit_depth,
                       aspect.num > 0 && aspect.den > 0 ? av_q2d(aspect) : 1,
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
    g_autoptr(AVPacket) packet = av_packet_alloc();
    g_autoptr(AVFrame) frame = av_frame_alloc();
    if (!read_bytes(path, packet, error)) return NULL;
    g_autoptr(AVCodecContext) decoder = open_still_decoder(path, packet, error);
    if (decoder == NULL) return NULL;
    int status = avcodec_send_packet(decoder, packet);
    if (status >= 0) status = avcodec_send_packet(decoder, NULL);
    if (status >= 0) status = avcodec_receive_frame(decoder, frame);
    if (status < 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_DAMAGED, path, status, "the picture can't be decoded");
        return NULL;
    }
    if (!rf_libav_check_size(path, frame->width, frame->height, error)) return NULL;
    RfLumaScratch scratch = {0};
    RfFrame lent;
    RfStill *still = NULL;
    if (rf_luma_is_readable(av_pix_fmt_desc_get(frame->format)) && rf_luma_lend(frame, &scratch, &lent)) {
        still = still_copy(&lent, frame->sample_aspect_ratio);
    } else {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, 0,
                      "pixels of a kind that isn't read; need grey or RGB");
    }
    rf_luma_clear(&scratch);
    return still;
}

void rf_still_free(RfStill *still)
{
    if (still == NULL) return;
    g_free(still->pixels);
    g_free(still);
}

static void fill_png(AVFrame *frame, const void *pixels, ptrdiff_t stride_bytes, int channels, int bit_depth)
{
    for (int y = 0; y < frame->height; y++) {
        const uint8_t *from = (const uint8_t *)pixels + y * stride_bytes;
        uint8_t *to = frame->data[0] + (ptrdiff_t)y * frame->linesize[0];
        if (bit_depth == 8) memcpy(to, from, (size_t)frame->width * (size_t)channels);
        for (int x = 0; x < frame->width && bit_depth > 8; x++) { /* PNG is big-endian */
            uint16_t level = ((const uint16_t *)(const void *)from)[x];
            to[2 * x] = (uint8_t)(level >> 8), to[2 * x + 1] = (uint8_t)level;
        }
    }
}

GBytes *rf_video_file_encode_png(const void *pixels, ptrdiff_t stride_bytes, int width, int height,
                                 int channels, int bit_depth, GError **error)
{
    rf_libav_listen();
    const char *what = "PNG in memory";
    if (!rf_libav_check_size(what, width, height, error)) return NULL;
    g_autoptr(AVCodecContext) encoder = avcodec_alloc_context3(avcodec_find_encoder(AV_CODEC_ID_PNG));
    g_autoptr(AVFrame) frame = av_frame_alloc();
    g_autoptr(AVPacket) packet = av_packet_alloc();
    frame->width = width, frame->height = height;
    frame->format = channels == 3 ? AV_PIX_FMT_RGB24 : bit_depth > 8 ? AV_PIX_FMT_GRAY16BE : AV_PIX_FMT_GRAY8;
    encoder->width = width, encoder->height = height, encoder->pix_fmt = frame->format;
    encoder->time_base = (AVRational){1, 1};
    encoder->thread_count = 1;
    encoder->flags |= AV_CODEC_FLAG_BITEXACT;
    int status = av_frame_get_buffer(frame, 0);
    if (status >= 0) status = avcodec_open2(encoder, NULL, NULL);
    if (status >= 0) fill_png(frame, pixels, stride_bytes, channels, bit_depth);
    if (status >= 0) status = avcodec_send_frame(encoder, frame);
    if (status >= 0) status = avcodec_receive_packet(encoder, packet);
    if (status < 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, what, status, "can't be encoded");
        return NULL;
    }
    return g_bytes_new(packet->data, (size_t)packet->size);
}
