#include <math.h>
#include <string.h>

#include "tracker/libav.h"
#include "tracker/rgb.h"
#include "tracker/video_file.h"

struct RfVideoWriter {
    RfVideoWriterOptions options;
    char *path;
    AVFormatContext *format;
    AVCodecContext *encoder;
    AVFrame *frame;
    AVPacket *packet;
    int64_t last_pts;
    bool is_finished;
};

static enum AVPixelFormat stored_layout(const RfVideoWriterOptions *options)
{
    bool is_deep = options->bit_depth > 8;
    switch (options->codec) {
    case RF_VIDEO_CODEC_FFV1:
        if (options->is_colour) return AV_PIX_FMT_YUV420P;
        if (options->bit_depth > 12) return AV_PIX_FMT_GRAY16;
        if (options->bit_depth > 10) return AV_PIX_FMT_GRAY12;
        return is_deep ? AV_PIX_FMT_GRAY10 : AV_PIX_FMT_GRAY8;
    case RF_VIDEO_CODEC_H264:
        return is_deep ? AV_PIX_FMT_YUV420P10 : AV_PIX_FMT_YUV420P;
    case RF_VIDEO_CODEC_MJPEG:
        return AV_PIX_FMT_YUVJ420P;
    case RF_VIDEO_CODEC_MPEG2:
        return AV_PIX_FMT_YUV420P;
    }
    return AV_PIX_FMT_NONE;
}

static const char *encoder_name(RfVideoCodec codec)
{
    static const char *const names[] = {"ffv1", "libx264", "mjpeg", "mpeg2video"};
    return names[codec];
}

/* A rate that MPEG-2 and AVI can hold: 30000/1001, not 29.97. */
static AVRational nominal_rate(double rate_hz)
{
    double ntsc = rate_hz * 1.001;
    if (fabs(ntsc - round(ntsc)) < 1e-3 && fabs(rate_hz - round(rate_hz)) > 1e-3) {
        return (AVRational){(int)round(ntsc) * 1000, 1001};
    }
    return av_d2q(rate_hz, 100000);
}

static void set_rate_control(AVCodecContext *encoder, const RfVideoWriterOptions *options)
{
    double quality = options->quality;
    if (options->codec == RF_VIDEO_CODEC_H264) {
        /* crf 0 isn't lossless beyond 8 bit; a quantiser of 0 is, in every depth. */
        if (options->is_lossless)
            av_opt_set_int(encoder->priv_data, "qp", 0, 0);
        else
            av_opt_set_double(encoder->priv_data, "crf", quality > 0 ? quality : 18, 0);
        av_opt_set(encoder->priv_data, "preset", options->preset != NULL ? options->preset : "medium", 0);
        if (options->is_open_gop) av_opt_set(encoder->priv_data, "x264-params", "open-gop=1", 0);
    } else if (options->codec != RF_VIDEO_CODEC_FFV1) {
        encoder->flags |= AV_CODEC_FLAG_QSCALE;
        encoder->global_quality = (int)(FF_QP2LAMBDA * (quality > 0 ? quality : 3));
    } else {
        encoder->level = 3;
        encoder->slices = options->slices > 0 ? options->slices : 4;
        av_opt_set_int(encoder->priv_data, "slicecrc", 1, 0);
    }
}

static void set_interlacing(AVCodecContext *encoder, const RfVideoWriterOptions *options)
{
    if (!options->is_interlaced) return;
    encoder->flags |= AV_CODEC_FLAG_INTERLACED_DCT | AV_CODEC_FLAG_INTERLACED_ME;
    encoder->field_order = options->is_top_field_first ? AV_FIELD_TT : AV_FIELD_BB;
}

static AVCodecContext *configure_encoder(const RfVideoWriterOptions *options, const char *path,
                                         bool fixed_rate, bool global_header, GError **error)
{
    const AVCodec *codec = avcodec_find_encoder_by_name(encoder_name(options->codec));
    if (codec == NULL) {
        rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, path, 0,
                      "this build of libavcodec lacks the encoder asked for");
        return NULL;
    }
    AVCodecContext *encoder = avcodec_alloc_context3(codec);
    encoder->width = options->width;
    encoder->height = options->height;
    encoder->pix_fmt = stored_layout(options);
    encoder->framerate = nominal_rate(options->frame_rate_hz > 0 ? options->frame_rate_hz : 30);
    int ticks = options->ticks_per_s > 0 ? options->ticks_per_s : 90000;
    encoder->time_base = fixed_rate ? av_inv_q(encoder->framerate) : (AVRational){1, ticks};
    encoder->sample_aspect_ratio =
        options->pixel_aspect > 0 ? av_d2q(options->pixel_aspect, 1000) : (AVRational){1, 1};
    bool is_full = options->is_full_range || options->codec == RF_VIDEO_CODEC_MJPEG;
    encoder->color_range = is_full ? AVCOL_RANGE_JPEG : AVCOL_RANGE_MPEG;
    /* A fixed number: x264's output depends on it, and the same input must give the same bytes on every machine. */
    encoder->thread_count =
        options->codec == RF_VIDEO_CODEC_MPEG2 || options->codec == RF_VIDEO_CODEC_MJPEG ? 1 : 4;
    encoder->flags |= AV_CODEC_FLAG_BITEXACT | (global_header ? AV_CODEC_FLAG_GLOBAL_HEADER : 0);
    if (options->keyframe_every > 0) encoder->gop_size = options->keyframe_every;
    if (options->codec == RF_VIDEO_CODEC_H264 || options->codec == RF_VIDEO_CODEC_MPEG2) {
        encoder->max_b_frames = options->b_frames;
        if (!options->is_open_gop) encoder->flags |= AV_CODEC_FLAG_CLOSED_GOP;
    }
    if (options->codec == RF_VIDEO_CODEC_MPEG2)
        av_opt_set_int(encoder, "sc_threshold", 1000000000, AV_OPT_SEARCH_CHILDREN);
    set_rate_control(encoder, options);
    set_interlacing(encoder, options);
    int status = avcodec_open2(encoder, codec, NULL);
    if (status >= 0) return encoder;
    rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, path, status, "the encoder refuses these settings");
    avcodec_free_context(&encoder);
    return NULL;
}

static AVFrame *blank_frame(const AVCodecContext *encoder, int depth)
{
    AVFrame *frame = av_frame_alloc();
    frame->format = encoder->pix_fmt;
    frame->width = encoder->width;
    frame->height = encoder->height;
    frame->color_range = encoder->color_range;
    frame->sample_aspect_ratio = encoder->sample_aspect_ratio;
    if (av_frame_get_buffer(frame, 0) < 0) av_frame_free(&frame);
    for (int plane = 1; frame != NULL && plane < 3 && frame->data[plane] != NULL; plane++) {
        size_t rows = ((size_t)frame->height + 1) / 2;
        size_t samples = rows * (size_t)frame->linesize[plane] / (depth > 8 ? 2 : 1);
        for (size_t i = 0; i < samples && depth == 8; i++) frame->data[plane][i] = 128;
        for (size_t i = 0; i < samples && depth > 8; i++) {
            ((uint16_t *)(void *)frame->data[plane])[i] = (uint16_t)(1 << (depth - 1));
        }
    }
    return frame;
}

static bool check_writer_options(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    bool is_grey_ffv1 = options->codec == RF_VIDEO_CODEC_FFV1 && !options->is_colour;
    int deepest = is_grey_ffv1 ? 16 : options->codec == RF_VIDEO_CODEC_H264 && !options->is_colour ? 10 : 8;
    if (!rf_libav_check_size(path, options->width, options->height, error)) return false;
    if (!is_grey_ffv1 && (options->width % 2 || options->height % 2)) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER,
                    "%s: %d x %d pixels; this codec needs even numbers", path, options->width,
                    options->height);
        return false;
    }
    bool is_depth = options->bit_depth == 8 || options->bit_depth == 10 || options->bit_depth == 12 ||
                    options->bit_depth == 16;
    if (is_depth && options->bit_depth <= deepest) return true;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER, "%s: %d bit; this codec takes up to %d", path,
                options->bit_depth, deepest);
    return false;
}

static bool open_output(RfVideoWriter *writer, GError **error)
{
    const char *kind =
        g_str_has_suffix(writer->path, ".mpg") ? "vob" : NULL; /* MPEG-2 wants the newer pack headers */
    avformat_alloc_output_context2(&writer->format, NULL, kind, writer->path);
    if (writer->format == NULL) {
        return rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, writer->path, 0,
                             "name ends in no known container; use .mkv or .mp4");
    }
    writer->format->flags |= AVFMT_FLAG_BITEXACT;
    bool fixed_rate =
        writer->options.codec == RF_VIDEO_CODEC_MPEG2 || g_str_equal(writer->format->oformat->name, "avi");
    writer->encoder = configure_encoder(&writer->options, writer->path, fixed_rate,
                                        writer->format->oformat->flags & AVFMT_GLOBALHEADER, error);
    if (writer->encoder == NULL) return false;
    AVStream *stream = avformat_new_stream(writer->format, NULL);
    avcodec_parameters_from_context(stream->codecpar, writer->encoder);
    stream->time_base = writer->encoder->time_base;
    stream->avg_frame_rate = writer->encoder->framerate;
    stream->sample_aspect_ratio = writer->encoder->sample_aspect_ratio;
    g_autofree char *address = g_strconcat("file:", writer->path, NULL);
    int status = avio_open(&writer->format->pb, address, AVIO_FLAG_WRITE);
    if (status >= 0) status = avformat_write_header(writer->format, NULL);
    return status >= 0 ||
           rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be written");
}

RfVideoWriter *rf_video_file_create(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    rf_libav_listen();
    g_autoptr(RfVideoWriter) writer = g_new0(RfVideoWriter, 1);
    writer->options = *options;
    writer->path = g_strdup(path);
    writer->last_pts = INT64_MIN;
    if (writer->options.bit_depth == 0) writer->options.bit_depth = 8;
    if (!check_writer_options(path, &writer->options, error) || !open_output(writer, error)) return NULL;
    writer->packet = av_packet_alloc();
    writer->frame = blank_frame(writer->encoder, writer->options.bit_depth);
    if (writer->frame == NULL) {
        rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, path, 0, "not enough memory for one picture");
        return NULL;
    }
    return g_steal_pointer(&writer);
}

static bool write_packets(RfVideoWriter *writer, GError **error)
{
    const AVStream *stream = writer->format->streams[0];
    int status;
    while ((status = avcodec_receive_packet(writer->encoder, writer->packet)) >= 0) {
        if (writer->packet->duration == 0) {
            writer->packet->duration =
                av_rescale_q(1, av_inv_q(writer->encoder->framerate), writer->encoder->time_base);
        }
        av_packet_rescale_ts(writer->packet, writer->encoder->time_base, stream->time_base);
        status = av_interleaved_write_frame(writer->format, writer->packet);
        if (status < 0) break;
    }
    if (status == AVERROR(EAGAIN) || status == AVERROR_EOF) return true;
    return rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be written on");
}

static void fill(RfVideoWriter *writer, const void *pixels, ptrdiff_t stride_bytes)
{
    const RfVideoWriterOptions *options = &writer->options;
    AVFrame *frame = writer->frame;
    if (options->is_colour) {
        rf_rgb_to_yuv420(pixels, stride_bytes, options->width, options->height,
                         frame->color_range == AVCOL_RANGE_JPEG, frame->data, frame->linesize);
        return;
    }
    size_t row_bytes = (size_t)options->width * (options->bit_depth > 8 ? 2 : 1);
    for (int y = 0; y < options->height; y++) {
        memcpy(frame->data[0] + (ptrdiff_t)y * frame->linesize[0], (const uint8_t *)pixels + y * stride_bytes,
               row_bytes);
    }
}

bool rf_video_file_write(RfVideoWriter *writer, const void *pixels, ptrdiff_t stride_bytes, double time_s,
                         GError **error)
{
    rf_libav_listen();
    int64_t pts = llround(time_s / av_q2d(writer->encoder->time_base));
    if (pts <= writer->last_pts) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER,
                    "%s: a frame at %.6f s, less than a tick after the one before", writer->path, time_s);
        return false;
    }
    int status = av_frame_make_writable(writer->frame);
    if (status < 0)
        return rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status,
                             "no memory for the next picture");
    fill(writer, pixels, stride_bytes);
    writer->frame->pts = writer->last_pts = pts;
    writer->frame->quality = writer->encoder->global_quality;
    if (writer->options.is_interlaced)
        RF_LIBAV_SET_INTERLACED(writer->frame, writer->options.is_top_field_first);
    status = avcodec_send_frame(writer->encoder, writer->frame);
    if (status < 0)
        return rf_libav_fail(error, RF_VIDEO_ERROR_ENCODER, writer->path, status,
                             "the encoder refuses a frame");
    return write_packets(writer, error);
}

bool rf_video_file_finish(RfVideoWriter *writer, GError **error)
{
    rf_libav_listen();
    if (writer->is_finished) return true;
    avcodec_send_frame(writer->encoder, NULL);
    if (!write_packets(writer, error)) return false;
    int status = av_write_trailer(writer->format);
    if (status >= 0) status = avio_closep(&writer->format->pb);
    writer->is_finished = true;
    return status >= 0 ||
           rf_libav_fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be finished");
}

void rf_video_writer_free(RfVideoWriter *writer)
{
    if (writer == NULL) return;
    avcodec_free_context(&writer->encoder);
    if (writer->format != NULL) avio_closep(&writer->format->pb);
    avformat_free_context(writer->format);
    av_frame_free(&writer->frame);
    av_packet_free(&writer->packet);
    g_free(writer->path);
    g_free(writer);
}
