/* The one place that lets libav in, for the files of this room that read or write video and for nothing else.
 * Its versions' differences, its memory under g_autoptr, its log and its error codes end here. */
#pragma once

#include <glib.h>
#include <libavcodec/avcodec.h>
#include <libavformat/avformat.h>
#include <libavutil/opt.h>
#include <libavutil/pixdesc.h>
#include <stdbool.h>

#include "tracker/video_file.h"

/* All that differs between FFmpeg 5.1 and 7: two fields of a frame became flags (libavutil 58.7). */
#if LIBAVUTIL_VERSION_INT >= AV_VERSION_INT(58, 7, 100)
#define RF_LIBAV_IS_INTERLACED(frame) (((frame)->flags & AV_FRAME_FLAG_INTERLACED) != 0)
#define RF_LIBAV_IS_TOP_FIRST(frame) (((frame)->flags & AV_FRAME_FLAG_TOP_FIELD_FIRST) != 0)
#define RF_LIBAV_SET_INTERLACED(frame, top_first)                                                            \
    ((frame)->flags |= AV_FRAME_FLAG_INTERLACED | ((top_first) ? AV_FRAME_FLAG_TOP_FIELD_FIRST : 0))
#else
#define RF_LIBAV_IS_INTERLACED(frame) ((frame)->interlaced_frame != 0)
#define RF_LIBAV_IS_TOP_FIRST(frame) ((frame)->top_field_first != 0)
#define RF_LIBAV_SET_INTERLACED(frame, top_first)                                                            \
    ((frame)->interlaced_frame = 1, (frame)->top_field_first = (top_first))
#endif

static inline void rf_libav_close_container(AVFormatContext *format)
{
    avformat_close_input(&format);
}
static inline void rf_libav_close_codec(AVCodecContext *codec)
{
    avcodec_free_context(&codec);
}
static inline void rf_libav_free_packet(AVPacket *packet)
{
    av_packet_free(&packet);
}
static inline void rf_libav_free_frame(AVFrame *frame)
{
    av_frame_free(&frame);
}
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVFormatContext, rf_libav_close_container)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVCodecContext, rf_libav_close_codec)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVPacket, rf_libav_free_packet)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVFrame, rf_libav_free_frame)

/* Call before libav on every thread: from here on its log is kept, not printed, and what it said before is forgotten. A
 * decoder whose `opaque` points to an int has its complaints counted there (atomically, from any thread). */
void rf_libav_listen(void);

/* Sets "PATH: TEXT: what the status means (libav's last line)", the latter two if status < 0. Returns false. */
bool rf_libav_fail(GError **error, RfVideoError code, const char *path, int status, const char *text);

/* There, and a regular file: a pipe or device could block for ever. */
bool rf_libav_check_file(const char *path, GError **error);

/* Within RF_VIDEO_MAX_SIDE_PX and RF_VIDEO_MAX_PIXELS: before anything is allocated. */
bool rf_libav_check_size(const char *path, int width, int height, GError **error);
