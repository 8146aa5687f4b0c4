#include "tracker/libav.h"

#include <libavcodec/avcodec.h>
#include <libavformat/avformat.h>
#include <libavutil/opt.h>
#include <libavutil/pixdesc.h>
#include <math.h>
#include <string.h>

#include "tracker/video_error.h"

#define LONGEST_WORDS 200

/* Containers that hold all of their own data. A positive list: what isn't here (concat scripts, playlists, image
 * patterns, session descriptions, devices) can't be opened however it is named or disguised. The last line's hold sound: let
 * in to be told that there is no video stream in them. */
#define CONTAINERS                                                                                           \
    "matroska,webm,mov,mp4,3gp,avi,mpeg,mpegts,mpegvideo,m4v,h264,hevc,obu,ivf,mjpeg,yuv4mpegpipe,nut,"      \
    "flv,ogg,dv,asf,mxf,cine,gif,apng,"                                                                      \
    "wav,w64,aiff,au,mp3,flac,aac"

/* All that differs between FFmpeg 5.1 and 7: two fields of a frame became flags (libavutil 58.7). */
#if LIBAVUTIL_VERSION_INT >= AV_VERSION_INT(58, 7, 100)
#define IS_INTERLACED(frame) (((frame)->flags & AV_FRAME_FLAG_INTERLACED) != 0)
#define IS_TOP_FIRST(frame) (((frame)->flags & AV_FRAME_FLAG_TOP_FIELD_FIRST) != 0)
#else
#define IS_INTERLACED(frame) ((frame)->interlaced_frame != 0)
#define IS_TOP_FIRST(frame) ((frame)->top_field_first != 0)
#endif

_Static_assert(RF_NO_TICKS == AV_NOPTS_VALUE, "timestamps that aren't there");

/* ---- what libav says ---- */

typedef struct {    /* counted atomically, from any thread of libav's */
    int complaints; /* errors */
    int remarks;    /* also what it says in passing: that it conceals damage, for one */
} Heard;

/* libav's log callback gets no pointer of ours, so its last line waits in storage of the thread that called it. */
static char *last_words(void)
{
    static _Thread_local char line[LONGEST_WORDS];
    return line;
}

/* "[concat @ 0x55d0c0ffee00] Format not on whitelist 'matroska,...'" becomes "concat: Format not on whitelist": the same
 * words in every run, and no lists. */
static void remember(char *line)
{
    char *at = *line == '[' ? strstr(line, " @ 0x") : NULL, *end = at != NULL ? strchr(at, ']') : NULL;
    char *list = strstr(line, "whitelist '");
    if (list != NULL) list[strlen("whitelist")] = '\0';
    if (end != NULL) *at = '\0';
    g_snprintf(last_words(), LONGEST_WORDS, "%s%s%s", end != NULL ? line + 1 : line, end != NULL ? ":" : "",
               end != NULL ? end + 1 : "");
}

/* Decoders of ours carry a counter in `opaque` (copied to libav's own threads): some of them report damage nowhere
 * but in the log. */
static void count(void *context, int level)
{
    const AVClass *class = context != NULL ? *(AVClass **)context : NULL;
    if (class == NULL || class != avcodec_get_class()) return;
    Heard *heard = ((AVCodecContext *)context)->opaque;
    if (heard == NULL) return;
    g_atomic_int_inc(&heard->remarks);
    if (level <= AV_LOG_ERROR) g_atomic_int_inc(&heard->complaints);
}

static void hear(void *context, int level, const char *format, va_list arguments)
{
    if (level > AV_LOG_INFO) return;
    count(context, level);
    if (level > AV_LOG_ERROR) return;
    int with_prefix = 1;
    char line[LONGEST_WORDS];
    av_log_format_line2(context, level, format, arguments, line, sizeof line, &with_prefix);
    g_strstrip(line);
    if (*line != '\0') remember(line);
}

void rf_libav_listen(void)
{
    static gsize is_listening = 0;
    if (g_once_init_enter(&is_listening)) {
        av_log_set_callback(hear);
        g_once_init_leave(&is_listening, 1);
    }
    *last_words() = '\0';
}

/* "clip.mkv: TEXT: Invalid data found when processing input (mov: moov atom not found)" */
bool rf_libav_fail(GError **error, RfVideoError code, const char *path, int status, const char *text)
{
    char words[AV_ERROR_MAX_STRING_SIZE] = "";
    av_strerror(status, words, sizeof words);
    bool has_more = *last_words() != '\0';
    g_autofree char *whole =
        g_strdup_printf("%s: %s%s%s%s", text, words, has_more ? " (" : "", last_words(), has_more ? ")" : "");
    return rf_video_fail(error, code, path, whole);
}

bool rf_libav_fail_damaged(GError **error, const char *path, const char *text)
{
    return rf_libav_fail(error, RF_VIDEO_ERROR_DAMAGED, path, AVERROR_INVALIDDATA, text);
}

/* ---- containers ---- */

struct RfDemuxer {
    AVFormatContext *format;
    AVCodecParameters *parameters; /* as they were at the first packet */
    AVPacket *packet;
    int number; /* of the video stream */
    RfStream stream;
};

static void find_streams(AVFormatContext *format)
{
    unsigned known = format->nb_streams;
    AVDictionary **limits = g_new0(AVDictionary *, known + 1);
    for (unsigned i = 0; i < known; i++) av_dict_set_int(&limits[i], "max_pixels", RF_VIDEO_MAX_PIXELS, 0);
    avformat_find_stream_info(format, known > 0 ? limits : NULL); /* what it couldn't find out shows later */
    for (unsigned i = 0; i < known; i++) av_dict_free(&limits[i]);
    g_free(limits);
}

static AVFormatContext *open_container(const char *path, GError **error)
{
    AVDictionary *options = NULL;
    av_dict_set(&options, "protocol_whitelist", "file", 0);
    av_dict_set(&options, "format_whitelist", CONTAINERS, 0);
    av_dict_set_int(&options, "probesize", 1 << 23, 0);
    g_autofree char *address = g_strconcat("file:", path, NULL);
    AVFormatContext *format = NULL;
    int status = avformat_open_input(&format, address, NULL, &options);
    av_dict_free(&options);
    if (status >= 0) return format;
    bool is_denied = status == AVERROR(EACCES) || status == AVERROR(EPERM);
    rf_libav_fail(error, is_denied ? RF_VIDEO_ERROR_ABSENT : RF_VIDEO_ERROR_NOT_VIDEO, path, status,
                  is_denied ? "can't be read" : "not a video file of a known, self-contained format");
    return NULL;
}

static double ratio_or_zero(AVRational ratio)
{
    return ratio.num > 0 && ratio.den > 0 ? av_q2d(ratio) : 0;
}

/* What libav guesses from size and bit rate where a header says nothing doesn't count. */
static double promised_s(const AVFormatContext *format)
{
    bool is_stated = format->duration > 0 && format->duration_estimation_method == AVFMT_DURATION_FROM_STREAM;
    return is_stated ? (double)format->duration / AV_TIME_BASE : 0;
}

static void describe(RfDemuxer *demuxer)
{
    AVStream *video = demuxer->format->streams[demuxer->number];
    const AVCodecParameters *parameters = demuxer->parameters;
    enum AVCodecID codec = parameters->codec_id;
    const AVCodecDescriptor *about = avcodec_descriptor_get(codec);
    const char *container = demuxer->format->iformat->name;
    bool is_nal = codec == AV_CODEC_ID_H264 || codec == AV_CODEC_ID_HEVC;
    bool is_mpeg = codec == AV_CODEC_ID_MPEG1VIDEO || codec == AV_CODEC_ID_MPEG2VIDEO;
    bool is_intra = about != NULL && (about->props & AV_CODEC_PROP_INTRA_ONLY);
    demuxer->stream =
        (RfStream){.width = parameters->width,
                   .height = parameters->height,
                   .pixel_aspect = ratio_or_zero(av_guess_sample_aspect_ratio(demuxer->format, video, NULL)),
                   .tick_s = {video->time_base.num, video->time_base.den},
                   .promised_s = promised_s(demuxer->format),
                   .rates_hz = {{video->avg_frame_rate.num, video->avg_frame_rate.den},
                                {video->r_frame_rate.num, video->r_frame_rate.den}},
                   .container = g_intern_string(container),
                   .codec = about != NULL ? about->name : NULL,
                   .is_lossless = about != NULL && !(about->props & AV_CODEC_PROP_LOSSY),
                   .is_indexable = is_nal || is_mpeg || is_intra || codec == AV_CODEC_ID_FFV1,
                   .is_nal = is_nal,
                   .is_hevc = codec == AV_CODEC_ID_HEVC,
                   .may_lead = is_mpeg || codec == AV_CODEC_ID_HEVC,
                   .is_seekable = strstr(container, "matroska") != NULL || strstr(container, "mp4") != NULL,
                   .setup = parameters->extradata,
                   .setup_size = (size_t)parameters->extradata_size};
}

static bool choose_stream(RfDemuxer *demuxer, const char *path, GError **error)
{
    AVFormatContext *format = demuxer->format;
    int number = demuxer->number = av_find_best_stream(format, AVMEDIA_TYPE_VIDEO, -1, -1, NULL, 0);
    if (number < 0 || (format->streams[number]->disposition & AV_DISPOSITION_ATTACHED_PIC)) {
        return rf_video_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, "no video stream in it");
    }
    for (unsigned i = 0; i < format->nb_streams; i++) {
        if ((int)i != number) format->streams[i]->discard = AVDISCARD_ALL;
    }
    demuxer->parameters = avcodec_parameters_alloc();
    avcodec_parameters_copy(demuxer->parameters, format->streams[number]->codecpar);
    describe(demuxer);
    return true;
}

RfDemuxer *rf_demuxer_open(const char *path, GError **error)
{
    rf_libav_listen();
    if (!rf_video_check_file(path, error)) return NULL;
    g_autoptr(RfDemuxer) demuxer = g_new0(RfDemuxer, 1);
    demuxer->packet = av_packet_alloc();
    demuxer->format = open_container(path, error);
    if (demuxer->format == NULL) return NULL;
    find_streams(demuxer->format);
    return choose_stream(demuxer, path, error) ? g_steal_pointer(&demuxer) : NULL;
}

void rf_demuxer_free(RfDemuxer *demuxer)
{
    if (demuxer == NULL) return;
    av_packet_free(&demuxer->packet);
    avcodec_parameters_free(&demuxer->parameters);
    avformat_close_input(&demuxer->format);
    g_free(demuxer);
}

const RfStream *rf_demuxer_stream(const RfDemuxer *demuxer)
{
    return &demuxer->stream;
}

bool rf_demuxer_next(RfDemuxer *demuxer, RfPacket *packet)
{
    AVPacket *held = demuxer->packet;
    do {
        av_packet_unref(held);
        if (av_read_frame(demuxer->format, held) < 0) return false;
    } while (held->stream_index != demuxer->number);
    *packet = (RfPacket){.pts = held->pts,
                         .dts = held->dts,
                         .duration = held->duration,
                         .is_key = held->flags & AV_PKT_FLAG_KEY,
                         .is_hidden = held->flags & AV_PKT_FLAG_DISCARD,
                         .is_broken = held->flags & AV_PKT_FLAG_CORRUPT,
                         .bytes = held->data,
                         .size = (size_t)held->size};
    return true;
}

bool rf_demuxer_seek(RfDemuxer *demuxer, int64_t pts)
{
    return avformat_seek_file(demuxer->format, demuxer->number, INT64_MIN, pts, pts, 0) >= 0;
}

/* ---- decoders ---- */

struct RfDecoder {
    AVCodecContext *codec;
    AVFrame *frame;
    const AVPixFmtDescriptor *layout; /* of the frame */
    Heard heard;
    int complaints_seen;
};

static RfDecoder *decoder_for(const AVCodec *codec)
{
    RfDecoder *decoder = g_new0(RfDecoder, 1);
    decoder->frame = av_frame_alloc();
    decoder->codec = avcodec_alloc_context3(codec);
    decoder->codec->max_pixels = RF_VIDEO_MAX_PIXELS;
    decoder->codec->opaque = &decoder->heard;
    decoder->codec->thread_count = 1;
    return decoder;
}

RfDecoder *rf_decoder_new(const char *path, const RfDemuxer *demuxer, int threads, int reorder,
                          GError **error)
{
    rf_libav_listen();
    const AVCodec *codec = avcodec_find_decoder(demuxer->parameters->codec_id);
    if (codec == NULL) {
        rf_video_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path,
                      "no decoder for this kind of video is built in");
        return NULL;
    }
    g_autoptr(RfDecoder) decoder = decoder_for(codec);
    avcodec_parameters_to_context(decoder->codec, demuxer->parameters);
    decoder->codec->thread_count = MAX(1, threads);
    /* FFV1 passes its state from frame to frame, so only its slices gain. */
    bool by_frame = (codec->capabilities & AV_CODEC_CAP_FRAME_THREADS) && codec->id != AV_CODEC_ID_FFV1;
    decoder->codec->thread_type = by_frame ? FF_THREAD_FRAME : FF_THREAD_SLICE;
    if (demuxer->stream.is_nal) decoder->codec->has_b_frames = MAX(decoder->codec->has_b_frames, reorder);
    int status = avcodec_open2(decoder->codec, codec, NULL);
    if (status < 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, status, "the decoder refuses it");
        return NULL;
    }
    decoder->heard = (Heard){0};
    return g_steal_pointer(&decoder);
}

static int send_bytes(RfDecoder *decoder, const void *bytes, size_t size)
{
    AVPacket *packet = av_packet_alloc();
    int status = av_new_packet(packet, (int)size);
    if (status >= 0) memcpy(packet->data, bytes, size);
    if (status >= 0) status = avcodec_send_packet(decoder->codec, packet);
    if (status >= 0) status = avcodec_send_packet(decoder->codec, NULL);
    av_packet_free(&packet);
    return status;
}

RfDecoder *rf_decoder_still(const char *path, const char *codec_name, const void *bytes, size_t size,
                            RfPicture *picture, GError **error)
{
    rf_libav_listen();
    const AVCodec *codec = avcodec_find_decoder_by_name(codec_name);
    g_autoptr(RfDecoder) decoder = codec != NULL ? decoder_for(codec) : NULL;
    if (decoder == NULL || avcodec_open2(decoder->codec, codec, NULL) < 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, AVERROR_DECODER_NOT_FOUND, "can't be decoded");
        return NULL;
    }
    int status = send_bytes(decoder, bytes, size);
    if (status >= 0 && rf_decoder_receive(decoder, picture) == RF_DECODER_PICTURE)
        return g_steal_pointer(&decoder);
    rf_libav_fail_damaged(error, path, "the picture can't be decoded");
    return NULL;
}

void rf_decoder_free(RfDecoder *decoder)
{
    if (decoder == NULL) return;
    avcodec_free_context(&decoder->codec);
    av_frame_free(&decoder->frame);
    g_free(decoder);
}

bool rf_decoder_send(RfDecoder *decoder, const RfDemuxer *demuxer)
{
    return avcodec_send_packet(decoder->codec, demuxer != NULL ? demuxer->packet : NULL) >= 0;
}

static bool says_it_is_damaged(const AVFrame *frame)
{
    return (frame->flags & AV_FRAME_FLAG_CORRUPT) || frame->decode_error_flags != 0;
}

/* Frames that say so themselves; for decoders that neither reorder nor run ahead, also those during which they
 * complained (FFV1's checksums, JPEG's broken runs are reported nowhere else). */
static bool is_damaged(RfDecoder *decoder)
{
    int complaints = g_atomic_int_get(&decoder->heard.complaints);
    bool is_direct =
        decoder->codec->has_b_frames == 0 && !(decoder->codec->active_thread_type & FF_THREAD_FRAME);
    bool complained = is_direct && complaints != decoder->complaints_seen;
    decoder->complaints_seen = complaints;
    return complained || says_it_is_damaged(decoder->frame);
}

/* Threads patch a broken picture with as much of itself and its neighbours as happens to be ready; only FFV1's slices
 * have nothing to do with each other. A picture that is shown before the broken one that it was predicted from carries
 * no mark: that the decoder said in passing that it conceals something is all there is. */
bool rf_decoder_is_luck_involved(const RfDecoder *decoder)
{
    if (decoder->codec->active_thread_type == 0 || decoder->codec->codec_id == AV_CODEC_ID_FFV1) return false;
    return g_atomic_int_get(&decoder->heard.remarks) != 0 || says_it_is_damaged(decoder->frame);
}

static bool is_grey_of_rgb(const AVPixFmtDescriptor *layout)
{
    return (layout->flags & (AV_PIX_FMT_FLAG_RGB | AV_PIX_FMT_FLAG_PAL)) != 0;
}

static bool is_readable(const AVPixFmtDescriptor *layout)
{
    uint64_t strange = AV_PIX_FMT_FLAG_HWACCEL | AV_PIX_FMT_FLAG_FLOAT | AV_PIX_FMT_FLAG_BAYER;
    return layout != NULL && layout->nb_components > 0 && !(layout->flags & strange) &&
           !g_str_has_prefix(layout->name, "xyz") && !g_str_equal(layout->name, "monow") &&
           layout->comp[0].depth <= 16;
}

static int depth_of(const AVPixFmtDescriptor *layout)
{
    return MAX(8, layout->comp[0].depth);
}

static bool is_plain(const AVPixFmtDescriptor *layout)
{
    const AVComponentDescriptor *luma = &layout->comp[0];
    bool is_wide = luma->depth > 8,
         is_packed_or_rgb = (layout->flags & AV_PIX_FMT_FLAG_BITSTREAM) || is_grey_of_rgb(layout);
    bool is_native = ((layout->flags & AV_PIX_FMT_FLAG_BE) != 0) == (G_BYTE_ORDER == G_BIG_ENDIAN);
    return !is_packed_or_rgb && luma->depth >= 8 && (is_native || !is_wide) && luma->shift == 0 &&
           luma->offset == 0 && luma->step == (is_wide ? 2 : 1);
}

RfDecoderStep rf_decoder_receive(RfDecoder *decoder, RfPicture *picture)
{
    AVFrame *frame = decoder->frame;
    int status = avcodec_receive_frame(decoder->codec, frame);
    if (status == AVERROR(EAGAIN)) return RF_DECODER_HUNGRY;
    if (status == AVERROR_EOF) return RF_DECODER_DONE;
    if (status < 0) return RF_DECODER_REFUSES;
    const AVPixFmtDescriptor *layout = decoder->layout = av_pix_fmt_desc_get(frame->format);
    *picture = (RfPicture){.pts = frame->pts,
                           .guess = frame->best_effort_timestamp,
                           .width = frame->width,
                           .height = frame->height,
                           .bit_depth = layout != NULL ? depth_of(layout) : 0,
                           .pixel_aspect = ratio_or_zero(frame->sample_aspect_ratio),
                           .components = layout != NULL && is_grey_of_rgb(layout) ? 3 : 1,
                           .is_readable = is_readable(layout),
                           .is_plain = layout != NULL && is_plain(layout),
                           .is_damaged = is_damaged(decoder),
                           .layout = layout != NULL ? layout->name : "nothing known"};
    return RF_DECODER_PICTURE;
}

/* Unspecified range: RGB and grey are full by nature, YUV is limited unless it says otherwise. */
static bool is_limited(const AVFrame *frame, const AVPixFmtDescriptor *layout)
{
    if (is_grey_of_rgb(layout) || frame->color_range == AVCOL_RANGE_JPEG) return false;
    if (frame->color_range == AVCOL_RANGE_MPEG) return true;
    return layout->nb_components >= 3 && !g_str_has_prefix(layout->name, "yuvj");
}

static RfCoding coding_of(const AVFrame *frame)
{
    switch (frame->pict_type) {
    case AV_PICTURE_TYPE_I:
        return RF_CODING_ALONE;
    case AV_PICTURE_TYPE_P:
        return RF_CODING_PAST;
    case AV_PICTURE_TYPE_B:
        return RF_CODING_BOTH;
    default:
        return RF_CODING_UNKNOWN;
    }
}

void rf_decoder_lend(const RfDecoder *decoder, RfFrame *lent)
{
    const AVFrame *frame = decoder->frame;
    *lent = (RfFrame){.luma = frame->data[0],
                      .stride_bytes = frame->linesize[0],
                      .width = frame->width,
                      .height = frame->height,
                      .bit_depth = depth_of(decoder->layout),
                      .is_limited_range = is_limited(frame, decoder->layout),
                      .is_interlaced = IS_INTERLACED(frame),
                      .is_top_field_first = IS_TOP_FIRST(frame),
                      .coding = coding_of(frame)};
}

static void palette_levels(const AVFrame *frame, int component, int y, uint16_t *levels)
{
    const uint8_t *row = frame->data[0] + (ptrdiff_t)y * frame->linesize[0];
    const uint32_t *palette = (const uint32_t *)(const void *)frame->data[1]; /* ARGB in native order */
    for (int x = 0; x < frame->width; x++) levels[x] = palette[row[x]] >> (16 - 8 * component) & 0xff;
}

void rf_decoder_levels(const RfDecoder *decoder, int component, int y, uint16_t *levels)
{
    const AVFrame *frame = decoder->frame;
    const AVPixFmtDescriptor *layout = decoder->layout;
    if (layout->flags & AV_PIX_FMT_FLAG_PAL) {
        palette_levels(frame, component, y, levels);
        return;
    }
    av_read_image_line2(levels, (const uint8_t **)(void *)frame->data, frame->linesize, layout, 0, y,
                        component, frame->width, 0, sizeof *levels);
    int depth = layout->comp[component].depth, full = (1 << depth) - 1;
    for (int x = 0; x < frame->width && depth < 8; x++) {
        levels[x] = (uint16_t)((levels[x] * 255 + full / 2) / full);
    }
}
