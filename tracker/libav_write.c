#include <libavcodec/avcodec.h>
#include <libavformat/avformat.h>
#include <libavutil/opt.h>
#include <math.h>

#include "tracker/libav.h"
#include "tracker/video_error.h"

/* Between FFmpeg 5.1 and 7 two fields of a frame became flags (libavutil 58.7). */
#if LIBAVUTIL_VERSION_INT >= AV_VERSION_INT(58, 7, 100)
#define SET_INTERLACED(frame, top_first)                                                                     \
    ((frame)->flags |= AV_FRAME_FLAG_INTERLACED | ((top_first) ? AV_FRAME_FLAG_TOP_FIELD_FIRST : 0))
#else
#define SET_INTERLACED(frame, top_first)                                                                     \
    ((frame)->interlaced_frame = 1, (frame)->top_field_first = (top_first))
#endif

/* ---- encoders ---- */

struct RfEncoder {
    char *path;
    AVFormatContext *format;
    AVCodecContext *codec;
    AVFrame *frame;
    AVPacket *packet;
    RfVideoWriterOptions options;
};

static enum AVPixelFormat stored_layout(const RfVideoWriterOptions *options)
{
    int depth = options->bit_depth;
    if (options->codec == RF_VIDEO_CODEC_MJPEG) return AV_PIX_FMT_YUVJ420P;
    if (options->codec != RF_VIDEO_CODEC_FFV1 || options->is_colour)
        return depth > 8 ? AV_PIX_FMT_YUV420P10 : AV_PIX_FMT_YUV420P;
    if (depth > 12) return AV_PIX_FMT_GRAY16;
    if (depth > 10) return AV_PIX_FMT_GRAY12;
    return depth > 8 ? AV_PIX_FMT_GRAY10 : AV_PIX_FMT_GRAY8;
}

/* A rate that MPEG-2 and AVI can hold: 30000/1001, not 29.97. */
static AVRational nominal_rate(double rate_hz)
{
    double ntsc = rate_hz * 1.001;
    bool is_ntsc = fabs(ntsc - round(ntsc)) < 1e-3 && fabs(rate_hz - round(rate_hz)) > 1e-3;
    return is_ntsc ? (AVRational){(int)round(ntsc) * 1000, 1001} : av_d2q(rate_hz, 100000);
}

/* cpu-independent: x264 weighs blocks with approximate reciprocals on newer processors, and what comes out then depends
 * on the processor, and now and then on where its buffers happen to lie. */
static void set_x264(AVCodecContext *codec, const RfVideoWriterOptions *options)
{
    /* crf 0 isn't lossless beyond 8 bit; a quantiser of 0 is, in every depth. */
    if (options->is_lossless)
        av_opt_set_int(codec->priv_data, "qp", 0, 0);
    else
        av_opt_set_double(codec->priv_data, "crf", options->quality > 0 ? options->quality : 18, 0);
    av_opt_set(codec->priv_data, "preset", options->preset != NULL ? options->preset : "medium", 0);
    av_opt_set(codec->priv_data, "x264-params",
               options->is_open_gop ? "cpu-independent=1:open-gop=1" : "cpu-independent=1", 0);
}

/* Speed 8 of "realtime" is a fixed choice of tools: nothing in VP9 follows the clock, so that the same pictures give the
 * same bytes. */
static void set_vp9(AVCodecContext *codec, const RfVideoWriterOptions *options)
{
    av_opt_set_int(codec->priv_data, "crf", options->quality > 0 ? (int)options->quality : 32, 0);
    codec->bit_rate = 0; /* by crf alone */
    av_opt_set(codec->priv_data, "deadline", "realtime", 0);
    av_opt_set_int(codec->priv_data, "cpu-used", 8, 0);
    av_opt_set_int(codec->priv_data, "lag-in-frames", 0, 0);
}

static void set_rate_control(AVCodecContext *codec, const RfVideoWriterOptions *options)
{
    if (options->codec == RF_VIDEO_CODEC_H264) {
        set_x264(codec, options);
    } else if (options->codec == RF_VIDEO_CODEC_VP9) {
        set_vp9(codec, options);
    } else if (options->codec != RF_VIDEO_CODEC_FFV1) {
        codec->flags |= AV_CODEC_FLAG_QSCALE;
        codec->global_quality = (int)(FF_QP2LAMBDA * (options->quality > 0 ? options->quality : 3));
    } else {
        codec->level = 3;
        codec->slices = options->slices > 0 ? options->slices : 4;
        av_opt_set_int(codec->priv_data, "slicecrc", 1, 0);
    }
}

static void set_order(AVCodecContext *codec, const RfVideoWriterOptions *options)
{
    if (options->keyframe_every > 0) codec->gop_size = options->keyframe_every;
    if (options->codec == RF_VIDEO_CODEC_H264 || options->codec == RF_VIDEO_CODEC_MPEG2) {
        codec->max_b_frames = options->b_frames;
        if (!options->is_open_gop) codec->flags |= AV_CODEC_FLAG_CLOSED_GOP;
    }
    if (options->codec == RF_VIDEO_CODEC_MPEG2)
        av_opt_set_int(codec, "sc_threshold", 1000000000, AV_OPT_SEARCH_CHILDREN);
    if (!options->is_interlaced) return;
    codec->flags |= AV_CODEC_FLAG_INTERLACED_DCT | AV_CODEC_FLAG_INTERLACED_ME;
    codec->field_order = options->is_top_field_first ? AV_FIELD_TT : AV_FIELD_BB;
}

static bool open_codec(RfEncoder *encoder, GError **error)
{
    const RfVideoWriterOptions *options = &encoder->options;
    const AVOutputFormat *container = encoder->format->oformat;
    static const char *const names[] = {"ffv1", "libx264", "mjpeg", "mpeg2video",
                                        "libvpx-vp9"}; /* by RfVideoCodec */
    const AVCodec *kind = avcodec_find_encoder_by_name(names[options->codec]);
    if (kind == NULL) {
        return rf_video_fail(error, RF_VIDEO_ERROR_ENCODER, encoder->path,
                             "this build of libavcodec lacks the encoder asked for");
    }
    AVCodecContext *codec = encoder->codec = avcodec_alloc_context3(kind);
    codec->width = options->width;
    codec->height = options->height;
    codec->pix_fmt = stored_layout(options);
    codec->framerate = nominal_rate(options->frame_rate_hz);
    bool has_fixed_rate = options->codec == RF_VIDEO_CODEC_MPEG2 || g_str_equal(container->name, "avi");
    codec->time_base = has_fixed_rate ? av_inv_q(codec->framerate) : (AVRational){1, options->ticks_per_s};
    codec->sample_aspect_ratio = av_d2q(options->pixel_aspect, 1000);
    codec->color_range = options->is_full_range ? AVCOL_RANGE_JPEG : AVCOL_RANGE_MPEG;
    /* A fixed number: x264's output depends on it, and the same input must give the same bytes on every machine. */
    codec->thread_count =
        options->codec == RF_VIDEO_CODEC_FFV1 || options->codec == RF_VIDEO_CODEC_H264 ? 4 : 1;
    codec->flags |= AV_CODEC_FLAG_BITEXACT;
    if (container->flags & AVFMT_GLOBALHEADER) codec->flags |= AV_CODEC_FLAG_GLOBAL_HEADER;
    set_order(codec, options);
    set_rate_control(codec, options);
    int status = avcodec_open2(codec, kind, NULL);
    return status >= 0 || rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, encoder->path, status,
                                        "the encoder refuses these settings");
}

static bool open_file(RfEncoder *encoder, GError **error)
{
    const char *path = encoder->path;
    const char *kind =
        g_str_has_suffix(path, ".mpg") ? "vob" : NULL; /* MPEG-2 wants the newer pack headers */
    avformat_alloc_output_context2(&encoder->format, NULL, kind, path);
    if (encoder->format == NULL) {
        return rf_video_fail(error, RF_VIDEO_ERROR_ENCODER, path,
                             "name ends in no known container; use .mkv or .mp4");
    }
    encoder->format->flags |= AVFMT_FLAG_BITEXACT;
    if (!open_codec(encoder, error)) return false;
    AVStream *stream = avformat_new_stream(encoder->format, NULL);
    avcodec_parameters_from_context(stream->codecpar, encoder->codec);
    stream->time_base = encoder->codec->time_base;
    stream->avg_frame_rate = encoder->codec->framerate;
    stream->sample_aspect_ratio = encoder->codec->sample_aspect_ratio;
    g_autofree char *address = g_strconcat("file:", path, NULL);
    int status = avio_open(&encoder->format->pb, address, AVIO_FLAG_WRITE);
    if (status >= 0) status = avformat_write_header(encoder->format, NULL);
    return status >= 0 || rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, path, status, "can't be written");
}

static AVFrame *blank_frame(const AVCodecContext *codec)
{
    AVFrame *frame = av_frame_alloc();
    frame->format = codec->pix_fmt;
    frame->width = codec->width;
    frame->height = codec->height;
    frame->color_range = codec->color_range;
    frame->sample_aspect_ratio = codec->sample_aspect_ratio;
    if (av_frame_get_buffer(frame, 0) < 0) av_frame_free(&frame);
    return frame;
}

RfEncoder *rf_encoder_create(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    rf_libav_listen();
    g_autoptr(RfEncoder) encoder = g_new0(RfEncoder, 1);
    encoder->options = *options;
    encoder->path = g_strdup(path);
    encoder->packet = av_packet_alloc();
    if (!open_file(encoder, error)) return NULL;
    encoder->frame = blank_frame(encoder->codec);
    if (encoder->frame != NULL) return g_steal_pointer(&encoder);
    rf_video_fail(error, RF_VIDEO_ERROR_WRITE, path, "not enough memory for one picture");
    return NULL;
}

void rf_encoder_free(RfEncoder *encoder)
{
    if (encoder == NULL) return;
    avcodec_free_context(&encoder->codec);
    if (encoder->format != NULL) avio_closep(&encoder->format->pb);
    avformat_free_context(encoder->format);
    av_frame_free(&encoder->frame);
    av_packet_free(&encoder->packet);
    g_free(encoder->path);
    g_free(encoder);
}

double rf_encoder_tick_s(const RfEncoder *encoder)
{
    return av_q2d(encoder->codec->time_base);
}

bool rf_encoder_canvas(RfEncoder *encoder, RfCanvas *canvas, GError **error)
{
    rf_libav_listen();
    AVFrame *frame = encoder->frame;
    int status = av_frame_make_writable(frame);
    if (status < 0)
        return rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, encoder->path, status,
                             "no memory for the next picture");
    *canvas = (RfCanvas){{frame->data[0], frame->data[1], frame->data[2]},
                         {frame->linesize[0], frame->linesize[1], frame->linesize[2]},
                         frame->color_range == AVCOL_RANGE_JPEG};
    return true;
}

static bool write_packets(RfEncoder *encoder, GError **error)
{
    const AVStream *stream = encoder->format->streams[0];
    const AVCodecContext *codec = encoder->codec;
    int status;
    while ((status = avcodec_receive_packet(encoder->codec, encoder->packet)) >= 0) {
        if (encoder->packet->duration == 0) {
            encoder->packet->duration = av_rescale_q(1, av_inv_q(codec->framerate), codec->time_base);
        }
        av_packet_rescale_ts(encoder->packet, codec->time_base, stream->time_base);
        status = av_interleaved_write_frame(encoder->format, encoder->packet);
        if (status < 0) break;
    }
    if (status == AVERROR(EAGAIN) || status == AVERROR_EOF) return true;
    return rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, encoder->path, status, "can't be written on");
}

bool rf_encoder_write(RfEncoder *encoder, int64_t ticks, GError **error)
{
    encoder->frame->pts = ticks;
    encoder->frame->quality = encoder->codec->global_quality;
    if (encoder->options.is_interlaced) SET_INTERLACED(encoder->frame, encoder->options.is_top_field_first);
    int status = avcodec_send_frame(encoder->codec, encoder->frame);
    if (status < 0)
        return rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, encoder->path, status,
                             "the encoder refuses a frame");
    return write_packets(encoder, error);
}

bool rf_encoder_finish(RfEncoder *encoder, GError **error)
{
    rf_libav_listen();
    avcodec_send_frame(encoder->codec, NULL);
    if (!write_packets(encoder, error)) return false;
    int status = av_write_trailer(encoder->format);
    if (status >= 0) status = avio_closep(&encoder->format->pb);
    return status >= 0 ||
           rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, encoder->path, status, "can't be finished");
}

/* ---- PNG ---- */

GBytes *rf_libav_encode_png(const void *rows, ptrdiff_t stride_bytes, int width, int height, int channels,
                            int bit_depth, GError **error)
{
    rf_libav_listen();
    AVFrame *frame = av_frame_alloc();
    AVPacket *packet = av_packet_alloc();
    AVCodecContext *codec = avcodec_alloc_context3(avcodec_find_encoder(AV_CODEC_ID_PNG));
    frame->format = channels == 3 ? AV_PIX_FMT_RGB24 : bit_depth > 8 ? AV_PIX_FMT_GRAY16BE : AV_PIX_FMT_GRAY8;
    frame->width = codec->width = width, frame->height = codec->height = height;
    frame->data[0] = (uint8_t *)(uintptr_t)rows; /* libav makes a copy of what isn't its own */
    frame->linesize[0] = (int)stride_bytes;
    codec->pix_fmt = frame->format;
    codec->time_base = (AVRational){1, 1};
    codec->thread_count = 1;
    codec->flags |= AV_CODEC_FLAG_BITEXACT;
    int status = avcodec_open2(codec, NULL, NULL);
    if (status >= 0) status = avcodec_send_frame(codec, frame);
    if (status >= 0) status = avcodec_receive_packet(codec, packet);
    GBytes *png = status >= 0 ? g_bytes_new(packet->data, (size_t)packet->size) : NULL;
    if (png == NULL)
        rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, "PNG in memory", status, "can't be encoded");
    avcodec_free_context(&codec);
    av_packet_free(&packet);
    av_frame_free(&frame);
    return png;
}
