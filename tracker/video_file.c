#include "tracker/video_file.h"

#include <libavcodec/avcodec.h>
#include <libavformat/avformat.h>
#include <libavutil/imgutils.h>
#include <libavutil/opt.h>
#include <libavutil/pixdesc.h>
#include <math.h>
#include <string.h>

#include "tracker/frame_clock.h"
#include "tracker/frame_index.h"
#include "tracker/nal.h"
#include "tracker/rgb.h"

/* All that differs between FFmpeg 5.1 and 7: fields of a frame became flags (libavutil 58.7). */
#if LIBAVUTIL_VERSION_INT >= AV_VERSION_INT(58, 7, 100)
#define FRAME_IS_INTERLACED(frame) (((frame)->flags & AV_FRAME_FLAG_INTERLACED) != 0)
#define FRAME_IS_TOP_FIRST(frame) (((frame)->flags & AV_FRAME_FLAG_TOP_FIELD_FIRST) != 0)
#define FRAME_SET_INTERLACED(frame, top_first)                                                               \
    ((frame)->flags |= AV_FRAME_FLAG_INTERLACED | ((top_first) ? AV_FRAME_FLAG_TOP_FIELD_FIRST : 0))
#else
#define FRAME_IS_INTERLACED(frame) ((frame)->interlaced_frame != 0)
#define FRAME_IS_TOP_FIRST(frame) ((frame)->top_field_first != 0)
#define FRAME_SET_INTERLACED(frame, top_first)                                                               \
    ((frame)->interlaced_frame = 1, (frame)->top_field_first = (top_first))
#endif

/* Containers that hold all of their own data. A positive list: what isn't here (concat scripts, playlists, image
 * patterns, session descriptions, devices) can't be opened however it is named or disguised. */
#define CONTAINERS                                                                                           \
    "matroska,webm,mov,mp4,3gp,avi,mpeg,mpegts,mpegvideo,m4v,h264,hevc,obu,ivf,mjpeg,yuv4mpegpipe,nut,flv,"  \
    "ogg,dv,"                                                                                                \
    "asf,mxf,cine,gif,apng"
#define LARGEST_STILL_BYTES (INT64_C(1) << 30)
#define LARGEST_SCAN_PACKETS 100000000u /* 2.4 GB of notes: 19 days at 60 frames/s */
#define PREFLIGHT_FRAMES 3

G_DEFINE_QUARK(rf - video - error - quark, rf_video_error)

static void close_container(AVFormatContext *format)
{
    avformat_close_input(&format);
}
static void close_codec(AVCodecContext *codec)
{
    avcodec_free_context(&codec);
}
static void free_packet(AVPacket *packet)
{
    av_packet_free(&packet);
}
static void free_frame(AVFrame *frame)
{
    av_frame_free(&frame);
}
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVFormatContext, close_container)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVCodecContext, close_codec)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVPacket, free_packet)
G_DEFINE_AUTOPTR_CLEANUP_FUNC(AVFrame, free_frame)

/* ---- what libav says ---- */

/* libav's log callback gets no pointer of ours, so its last line waits in storage of the thread that called it. */
static char *last_words(void)
{
    static _Thread_local char line[200];
    return line;
}

/* Decoders of ours carry a counter in `opaque` (copied to libav's own threads): some of them report damage nowhere
 * but in the log. */
static void listen(void *context, int level, const char *format, va_list arguments)
{
    if (level > AV_LOG_ERROR) return;
    int with_prefix = 1;
    char line[200];
    av_log_format_line2(context, level, format, arguments, line, sizeof line, &with_prefix);
    g_strstrip(line);
    if (*line != '\0') memcpy(last_words(), line, sizeof line);
    const AVClass *class = context != NULL ? *(AVClass **)context : NULL;
    if (class == NULL || class != avcodec_get_class()) return;
    int *complaints = ((AVCodecContext *)context)->opaque;
    if (complaints != NULL) g_atomic_int_inc(complaints);
}

static void start_listening(void)
{
    static gsize is_listening = 0;
    if (g_once_init_enter(&is_listening)) {
        av_log_set_callback(listen);
        g_once_init_leave(&is_listening, 1);
    }
    *last_words() = '\0';
}

/* "clip.mkv: TEXT: Invalid data found when processing input ([mov] moov atom not found)" */
static bool fail(GError **error, RfVideoError code, const char *path, int status, const char *text)
{
    GString *message = g_string_new(NULL);
    g_string_printf(message, "%s: %s", path, text);
    char words[AV_ERROR_MAX_STRING_SIZE];
    if (status < 0 && av_strerror(status, words, sizeof words) == 0)
        g_string_append_printf(message, ": %s", words);
    if (status < 0 && *last_words() != '\0') g_string_append_printf(message, " (%s)", last_words());
    g_set_error_literal(error, RF_VIDEO_ERROR, (int)code, message->str);
    g_string_free(message, TRUE);
    return false;
}

/* ---- pixels: libav's frame to luma rows ---- */

typedef struct {
    void *rows;     /* scratch plane, tight rows; NULL while frames are lent in place */
    uint16_t *work; /* three rows */
    int width, height, bytes;
} Scratch;

static void scratch_clear(Scratch *scratch)
{
    g_free(scratch->rows);
    g_free(scratch->work);
    *scratch = (Scratch){0};
}

static bool is_grey_of_rgb(const AVPixFmtDescriptor *layout)
{
    return (layout->flags & (AV_PIX_FMT_FLAG_RGB | AV_PIX_FMT_FLAG_PAL)) != 0;
}

static bool is_usable(const AVPixFmtDescriptor *layout)
{
    uint64_t strange = AV_PIX_FMT_FLAG_HWACCEL | AV_PIX_FMT_FLAG_FLOAT | AV_PIX_FMT_FLAG_BAYER;
    return layout != NULL && layout->nb_components > 0 && !(layout->flags & strange) &&
           !g_str_has_prefix(layout->name, "xyz") && !g_str_equal(layout->name, "monow") &&
           layout->comp[0].depth <= 16;
}

static int luma_depth(const AVPixFmtDescriptor *layout)
{
    return MAX(8, layout->comp[0].depth);
}

/* A plane of luma that can be lent as it lies in memory. */
static bool is_plain(const AVPixFmtDescriptor *layout)
{
    const AVComponentDescriptor *luma = &layout->comp[0];
    bool is_wide = luma->depth > 8;
    if (is_grey_of_rgb(layout) || (layout->flags & AV_PIX_FMT_FLAG_BITSTREAM) || luma->depth < 8)
        return false;
    if (is_wide && ((layout->flags & AV_PIX_FMT_FLAG_BE) != 0) != (G_BYTE_ORDER == G_BIG_ENDIAN))
        return false;
    return luma->shift == 0 && luma->offset == 0 && luma->step == (is_wide ? 2 : 1);
}

/* Unspecified range: RGB and grey are full by nature, YUV is limited unless it says otherwise. */
static bool is_limited(const AVFrame *frame, const AVPixFmtDescriptor *layout)
{
    if (is_grey_of_rgb(layout) || frame->color_range == AVCOL_RANGE_JPEG) return false;
    if (frame->color_range == AVCOL_RANGE_MPEG) return true;
    return layout->nb_components >= 3 && !g_str_has_prefix(layout->name, "yuvj");
}

static void palette_row(const AVFrame *frame, int y, uint16_t *work)
{
    const uint8_t *row = frame->data[0] + (ptrdiff_t)y * frame->linesize[0];
    const uint32_t *palette = (const uint32_t *)(const void *)frame->data[1]; /* ARGB in native order */
    for (int x = 0; x < frame->width; x++) {
        for (int c = 0; c < 3; c++) work[c * frame->width + x] = palette[row[x]] >> (16 - 8 * c) & 0xff;
    }
}

/* Any layout at all, component by component; slow, for sources that a microscope camera rarely has. */
static void convert_row(const AVFrame *frame, const AVPixFmtDescriptor *layout, int y, Scratch *scratch,
                        void *out)
{
    int width = frame->width, components = is_grey_of_rgb(layout) ? 3 : 1;
    uint16_t *work = scratch->work;
    if (layout->flags & AV_PIX_FMT_FLAG_PAL) {
        palette_row(frame, y, work);
    } else {
        for (int c = 0; c < components; c++) {
            av_read_image_line2(work + c * width, (const uint8_t **)(void *)frame->data, frame->linesize,
                                layout, 0, y, c, width, 0, sizeof *work);
            int depth = layout->comp[c].depth, full = (1 << depth) - 1;
            for (int x = 0; x < width && depth < 8; x++) {
                work[c * width + x] = (uint16_t)((work[c * width + x] * 255 + full / 2) / full);
            }
        }
    }
    if (components == 3) rf_rgb_to_luma(work, work + width, work + 2 * width, (size_t)width, work);
    if (scratch->bytes == 2) memcpy(out, work, (size_t)width * 2);
    for (int x = 0; x < width && scratch->bytes == 1; x++) ((uint8_t *)out)[x] = (uint8_t)work[x];
}

static bool scratch_fit(Scratch *scratch, int width, int height, int bytes)
{
    if (scratch->rows != NULL && scratch->width == width && scratch->height == height &&
        scratch->bytes == bytes) {
        return true;
    }
    scratch_clear(scratch);
    scratch->rows = g_try_malloc_n((size_t)width * (size_t)height, (size_t)bytes);
    scratch->work = g_try_malloc_n((size_t)width * 3, sizeof *scratch->work);
    scratch->width = width, scratch->height = height, scratch->bytes = bytes;
    return scratch->rows != NULL && scratch->work != NULL;
}

/* Sources with a luma plane are lent where they lie. Packed, big-endian, shifted (P010) and RGB ones are converted into
 * a plane of our own; RGB becomes BT.601 luma. */
static bool lend(const AVFrame *frame, Scratch *scratch, RfFrame *lent)
{
    const AVPixFmtDescriptor *layout = av_pix_fmt_desc_get(frame->format);
    *lent = (RfFrame){.luma = frame->data[0],
                      .stride_bytes = frame->linesize[0],
                      .width = frame->width,
                      .height = frame->height,
                      .bit_depth = luma_depth(layout),
                      .is_limited_range = is_limited(frame, layout),
                      .is_interlaced = FRAME_IS_INTERLACED(frame),
                      .is_top_field_first = FRAME_IS_TOP_FIRST(frame)};
    if (is_plain(layout)) return true;
    int bytes = lent->bit_depth > 8 ? 2 : 1;
    if (!scratch_fit(scratch, frame->width, frame->height, bytes)) return false;
    lent->stride_bytes = (ptrdiff_t)frame->width * bytes;
    lent->luma = scratch->rows;
    for (int y = 0; y < frame->height; y++) {
        convert_row(frame, layout, y, scratch, (uint8_t *)scratch->rows + y * lent->stride_bytes);
    }
    return true;
}

/* ---- opening ---- */

typedef struct { /* one file of a recording */
    char *path;
    AVCodecParameters *parameters;
    RfFrameIndex *index;
    RfFrameClock clock;
    int64_t first_frame; /* of this file, in the recording */
    double offset_s;
    double last_duration_s;
    bool is_seekable; /* the container's own index leads to any keyframe */
} Part;

typedef struct {
    int part;
    int entry;          /* -1: begin at the file's first packet */
    int64_t first, end; /* frames delivered: [first, end) */
} Stretch;

typedef struct {
    int part, entry;
    int64_t frame;
} Keyframe;

struct RfVideoFile {
    GPtrArray *parts; /* of Part */
    RfVideoInfo info;
    RfVideoOptions options;
    GArray *stretches; /* of Stretch */
    GArray *keyframes; /* of Keyframe: every entry, whether in use or not */
    int first_used;    /* keyframes in [start_s, stop_s) */
    int keyframes_used;
    int64_t first, end; /* frames in use */
};

static void part_free(void *data)
{
    Part *part = data;
    avcodec_parameters_free(&part->parameters);
    rf_frame_index_free(part->index);
    g_free(part->path);
    g_free(part);
}

static Part *part_at(const RfVideoFile *file, int number)
{
    return g_ptr_array_index(file->parts, number);
}

static bool is_regular_file(const char *path, GError **error)
{
    if (!g_file_test(path, G_FILE_TEST_EXISTS)) {
        return fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "no such file");
    }
    if (!g_file_test(path, G_FILE_TEST_IS_REGULAR)) {
        return fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "not a regular file");
    }
    return true;
}

static bool find_streams(AVFormatContext *format)
{
    unsigned known = format->nb_streams;
    AVDictionary **limits = g_new0(AVDictionary *, known + 1);
    for (unsigned i = 0; i < known; i++) av_dict_set_int(&limits[i], "max_pixels", RF_VIDEO_MAX_PIXELS, 0);
    int status = avformat_find_stream_info(format, known > 0 ? limits : NULL);
    for (unsigned i = 0; i < known; i++) av_dict_free(&limits[i]);
    g_free(limits);
    return status >= 0;
}

static AVFormatContext *open_container(const char *path, int *stream, GError **error)
{
    start_listening();
    if (!is_regular_file(path, error)) return NULL;
    AVDictionary *options = NULL;
    av_dict_set(&options, "protocol_whitelist", "file", 0);
    av_dict_set(&options, "format_whitelist", CONTAINERS, 0);
    av_dict_set_int(&options, "probesize", 1 << 23, 0);
    g_autofree char *address = g_strconcat("file:", path, NULL);
    AVFormatContext *opened = NULL;
    int status = avformat_open_input(&opened, address, NULL, &options);
    av_dict_free(&options);
    g_autoptr(AVFormatContext) format = opened;
    if (status < 0) {
        bool is_denied = status == AVERROR(EACCES) || status == AVERROR(EPERM);
        fail(error, is_denied ? RF_VIDEO_ERROR_ABSENT : RF_VIDEO_ERROR_NOT_VIDEO, path, status,
             is_denied ? "can't be read" : "not a video file of a known, self-contained format");
        return NULL;
    }
    find_streams(format); /* what it couldn't find out is checked below */
    *stream = av_find_best_stream(format, AVMEDIA_TYPE_VIDEO, -1, -1, NULL, 0);
    if (*stream < 0 || (format->streams[*stream]->disposition & AV_DISPOSITION_ATTACHED_PIC)) {
        fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0, "no video stream in it");
        return NULL;
    }
    for (unsigned i = 0; i < format->nb_streams; i++) {
        if ((int)i != *stream) format->streams[i]->discard = AVDISCARD_ALL;
    }
    return g_steal_pointer(&format);
}

static bool check_size(const char *path, int width, int height, GError **error)
{
    if (width >= 1 && height >= 1 && width <= RF_VIDEO_MAX_SIDE_PX && height <= RF_VIDEO_MAX_SIDE_PX &&
        (int64_t)width * height <= RF_VIDEO_MAX_PIXELS) {
        return true;
    }
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                "%s: a picture of %d x %d pixels; need 1 to %d on each side", path, width, height,
                RF_VIDEO_MAX_SIDE_PX);
    return false;
}

/* One packet, one frame, and a key flag that means what it says (for H.264 and HEVC: see nal.h). */
static bool is_indexable(enum AVCodecID codec)
{
    const AVCodecDescriptor *about = avcodec_descriptor_get(codec);
    return codec == AV_CODEC_ID_H264 || codec == AV_CODEC_ID_HEVC || codec == AV_CODEC_ID_MPEG1VIDEO ||
           codec == AV_CODEC_ID_MPEG2VIDEO || codec == AV_CODEC_ID_FFV1 ||
           (about != NULL && (about->props & AV_CODEC_PROP_INTRA_ONLY));
}

static bool is_entry(const AVPacket *packet, const AVCodecParameters *about)
{
    if (!(packet->flags & AV_PKT_FLAG_KEY) || !is_indexable(about->codec_id)) return false;
    bool is_hevc = about->codec_id == AV_CODEC_ID_HEVC;
    if (about->codec_id != AV_CODEC_ID_H264 && !is_hevc) return true;
    return rf_nal_is_refresh(packet->data, (size_t)packet->size, about->extradata,
                             (size_t)about->extradata_size, is_hevc);
}

static bool may_lead(enum AVCodecID codec)
{
    return codec == AV_CODEC_ID_MPEG1VIDEO || codec == AV_CODEC_ID_MPEG2VIDEO || codec == AV_CODEC_ID_HEVC;
}

/* The next packet of that stream; false at the end, or where the file can't be read on. */
static bool read_packet(AVFormatContext *format, int stream, AVPacket *packet)
{
    while (av_read_frame(format, packet) >= 0) {
        if (packet->stream_index == stream) return true;
        av_packet_unref(packet);
    }
    return false;
}

static void scan_packets(Part *part, RfVideoInfo *info, AVFormatContext *format, int stream)
{
    AVStream *video = format->streams[stream];
    g_autoptr(GArray) notes = g_array_new(FALSE, FALSE, sizeof(RfPacketNote));
    g_autoptr(AVPacket) packet = av_packet_alloc();
    int64_t last_pts = INT64_MIN, last_duration = 0;
    double tick_s = av_q2d(video->time_base);
    while (notes->len < LARGEST_SCAN_PACKETS && read_packet(format, stream, packet)) {
        RfPacketNote note = {.pts = packet->pts,
                             .has_pts = packet->pts != AV_NOPTS_VALUE,
                             .is_entry = is_entry(packet, part->parameters),
                             .is_hidden = (packet->flags & AV_PKT_FLAG_DISCARD) != 0};
        if (note.has_pts && note.pts >= last_pts) last_pts = note.pts, last_duration = packet->duration;
        if (packet->flags & AV_PKT_FLAG_CORRUPT) info->packets_damaged++;
        g_array_append_val(notes, note);
        av_packet_unref(packet);
    }
    part->index = rf_frame_index_new((const RfPacketNote *)(const void *)notes->data, notes->len, tick_s,
                                     may_lead(part->parameters->codec_id));
    if (part->index->obstacle != NULL) info->frames += notes->len; /* what may come out */
    RfRatio rates[2] = {{video->avg_frame_rate.num, video->avg_frame_rate.den},
                        {video->r_frame_rate.num, video->r_frame_rate.den}};
    part->clock = rf_frame_clock_fit(part->index->pts, part->index->frames,
                                     (RfRatio){video->time_base.num, video->time_base.den}, rates, 2);
    part->last_duration_s = part->clock.mean_interval_s;
    if (!part->clock.is_snapped && last_duration > 0 && last_duration * tick_s < 10) {
        part->last_duration_s = (double)last_duration * tick_s;
    }
}

static AVCodecContext *open_decoder(const Part *part, int threads, int *complaints, GError **error)
{
    const AVCodec *codec = avcodec_find_decoder(part->parameters->codec_id);
    if (codec == NULL) {
        fail(error, RF_VIDEO_ERROR_UNSUPPORTED, part->path, 0,
             "no decoder for this kind of video is built in");
        return NULL;
    }
    g_autoptr(AVCodecContext) decoder = avcodec_alloc_context3(codec);
    avcodec_parameters_to_context(decoder, part->parameters);
    decoder->max_pixels = RF_VIDEO_MAX_PIXELS;
    decoder->opaque = complaints;
    decoder->thread_count = MAX(1, threads);
    /* FFV1 passes its state from frame to frame, so only its slices gain. */
    bool by_frame = (codec->capabilities & AV_CODEC_CAP_FRAME_THREADS) && codec->id != AV_CODEC_ID_FFV1;
    decoder->thread_type = by_frame ? FF_THREAD_FRAME : FF_THREAD_SLICE;
    /* A decoder that starts afresh must hold back as many frames as one that has seen the whole file. */
    if (part->index != NULL && part->index->obstacle == NULL &&
        (codec->id == AV_CODEC_ID_H264 || codec->id == AV_CODEC_ID_HEVC)) {
        decoder->has_b_frames = MAX(decoder->has_b_frames, part->index->reorder);
    }
    int status = avcodec_open2(decoder, codec, NULL);
    if (status < 0) {
        fail(error, RF_VIDEO_ERROR_UNSUPPORTED, part->path, status, "the decoder refuses it");
        return NULL;
    }
    return g_steal_pointer(&decoder);
}

static Part *part_open(const char *path, RfVideoInfo *info, GError **error)
{
    int stream = -1;
    g_autoptr(AVFormatContext) format = open_container(path, &stream, error);
    if (format == NULL) return NULL;
    AVStream *video = format->streams[stream];
    if (!check_size(path, video->codecpar->width, video->codecpar->height, error)) return NULL;
    if (video->time_base.num <= 0 || video->time_base.den <= 0) {
        fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0, "its clock has no rate");
        return NULL;
    }
    Part *part = g_new0(Part, 1);
    part->path = g_strdup(path);
    part->parameters = avcodec_parameters_alloc();
    avcodec_parameters_copy(part->parameters, video->codecpar);
    const char *container = format->iformat->name;
    part->is_seekable = strstr(container, "matroska") != NULL || strstr(container, "mp4") != NULL;
    info->container = g_intern_string(container);
    info->tick_s = MAX(info->tick_s, av_q2d(video->time_base));
    AVRational aspect = av_guess_sample_aspect_ratio(format, video, NULL);
    if (info->pixel_aspect <= 0 && aspect.num > 0 && aspect.den > 0) info->pixel_aspect = av_q2d(aspect);
    scan_packets(part, info, format, stream);
    return part;
}

/* ---- reading ---- */

struct RfVideoReader {
    const RfVideoFile *file;
    AVFormatContext *format; /* of `part` */
    AVCodecContext *decoder;
    AVPacket *packet;
    AVFrame *frame;
    int part, stream, threads;
    int64_t
        next_packet; /* number of the packet that comes out of the container next, `packet` included if held */
    int64_t stop_packet; /* none is sent from here on */
    bool has_packet, is_draining;
    int64_t next, end; /* index of the frame to come, and of the first one not to deliver */
    int64_t skip_to;   /* frames before this index are decoded and dropped */
    RfFrameTimer timer;
    int complaints, complaints_seen;
    Scratch scratch;
    RfVideoFaults faults;
};

static bool enter_part(RfVideoReader *reader, int part, GError **error)
{
    av_packet_unref(reader->packet);
    avformat_close_input(&reader->format);
    reader->format = open_container(part_at(reader->file, part)->path, &reader->stream, error);
    reader->part = part;
    reader->next_packet = 0;
    reader->has_packet = false;
    return reader->format != NULL;
}

static void drop_packet(RfVideoReader *reader)
{
    av_packet_unref(reader->packet);
    reader->has_packet = false;
    reader->next_packet++;
}

/* By the container's own index; believed only when the very keyframe turns up. */
static bool seek_entry(RfVideoReader *reader, const RfFrameEntry *entry)
{
    if (!part_at(reader->file, reader->part)->is_seekable) return false;
    if (reader->has_packet) drop_packet(reader);
    reader->next_packet = INT64_MAX; /* from here on nobody knows where the container stands */
    if (avformat_seek_file(reader->format, reader->stream, INT64_MIN, entry->pts, entry->pts, 0) < 0)
        return false;
    while (read_packet(reader->format, reader->stream, reader->packet)) {
        bool is_beyond = reader->packet->dts != AV_NOPTS_VALUE && reader->packet->dts > entry->pts;
        if (reader->packet->pts == entry->pts && (reader->packet->flags & AV_PKT_FLAG_KEY)) {
            reader->has_packet = true;
            reader->next_packet = entry->packet;
            return true;
        }
        av_packet_unref(reader->packet);
        if (is_beyond) break;
    }
    return false;
}

/* Brings the container to a packet: it stands there, it can seek there, or the packets before it are passed over, which
 * costs little beside decoding and works with every container. */
static bool reach_packet(RfVideoReader *reader, int part, const RfFrameEntry *entry, GError **error)
{
    int64_t wanted = entry == NULL ? 0 : entry->packet;
    if ((reader->format == NULL || reader->part != part) && !enter_part(reader, part, error)) return false;
    if (reader->next_packet == wanted || (entry != NULL && seek_entry(reader, entry))) return true;
    if (reader->next_packet > wanted && !enter_part(reader, part, error)) return false;
    while (reader->next_packet < wanted) {
        if (!reader->has_packet && !read_packet(reader->format, reader->stream, reader->packet)) {
            return fail(error, RF_VIDEO_ERROR_CHANGED, part_at(reader->file, part)->path, 0,
                        "shorter than when it was opened");
        }
        drop_packet(reader);
    }
    return true;
}

static int64_t stop_packet(const Part *part, int64_t end)
{
    if (part->index->obstacle != NULL) return INT64_MAX;
    for (unsigned i = 0; i < part->index->entries->len; i++) {
        const RfFrameEntry *entry = &g_array_index(part->index->entries, RfFrameEntry, i);
        if (part->first_frame + entry->frame >= end) return entry->settled;
    }
    return INT64_MAX;
}

static bool begin(RfVideoReader *reader, const Stretch *stretch, int threads, GError **error)
{
    start_listening();
    const Part *part = part_at(reader->file, stretch->part);
    const RfFrameEntry *entry =
        stretch->entry < 0 ? NULL : &g_array_index(part->index->entries, RfFrameEntry, stretch->entry);
    bool is_same_decoder =
        reader->decoder != NULL && reader->part == stretch->part && reader->threads == threads;
    if (!reach_packet(reader, stretch->part, entry, error)) return false;
    if (is_same_decoder) avcodec_flush_buffers(reader->decoder);
    if (!is_same_decoder) avcodec_free_context(&reader->decoder);
    if (!is_same_decoder) reader->decoder = open_decoder(part, threads, &reader->complaints, error);
    reader->threads = threads;
    reader->next = entry == NULL ? 0 : part->first_frame + entry->frame;
    reader->skip_to = stretch->first;
    reader->end = stretch->end;
    reader->stop_packet = stop_packet(part, stretch->end);
    reader->is_draining = false;
    if (entry == NULL) reader->timer = rf_frame_timer_new(&part->clock, 0);
    return reader->decoder != NULL;
}

/* The last packet of a file is decoded: on to the next file of the recording, if this reading reaches that far. */
static bool begin_next_part(RfVideoReader *reader, GError **error)
{
    const Part *done = part_at(reader->file, reader->part), *part = part_at(reader->file, reader->part + 1);
    bool is_indexed = reader->file->info.is_indexed;
    Stretch rest = {reader->part + 1, is_indexed ? 0 : -1, reader->skip_to, reader->end};
    int64_t next = reader->next;
    RfFrameTimer timer = rf_frame_timer_new(&part->clock, reader->timer.last_s + done->last_duration_s);
    timer.missing = reader->timer.missing, timer.backwards = reader->timer.backwards;
    if (!begin(reader, &rest, reader->threads, error)) return false;
    reader->timer = timer;
    reader->next = next;
    return true;
}

static bool has_next_part(const RfVideoReader *reader)
{
    if (reader->part + 1 >= (int)reader->file->parts->len) return false;
    return !reader->file->info.is_indexed ||
           part_at(reader->file, reader->part + 1)->first_frame < reader->end;
}

static void send_packet(RfVideoReader *reader)
{
    if (!reader->has_packet && reader->next_packet < reader->stop_packet) {
        reader->has_packet = read_packet(reader->format, reader->stream, reader->packet);
    }
    if (!reader->has_packet || reader->next_packet >= reader->stop_packet) {
        avcodec_send_packet(reader->decoder, NULL);
        reader->is_draining = true;
        return;
    }
    int status = avcodec_send_packet(reader->decoder, reader->packet);
    if (status < 0 && !reader->file->info.is_indexed) reader->faults.lost++;
    drop_packet(reader);
}

static void note_fault(RfVideoReader *reader, double time_s)
{
    if (reader->faults.first_fault_s < 0) reader->faults.first_fault_s = time_s;
}

static void note_lost(RfVideoReader *reader, int64_t from, int64_t to)
{
    from = MAX(from, reader->skip_to);
    if (from >= to) return;
    reader->faults.lost += to - from;
    note_fault(reader, rf_video_file_time_s(reader->file, from));
}

static double own_time_s(const RfVideoFile *file, int64_t index, double by_timestamps_s)
{
    double rate_hz = file->options.frame_rate_hz.value;
    return rate_hz > 0 ? (double)index / rate_hz : by_timestamps_s;
}

typedef enum { SHOW, SKIP, STOP } Fate;

static Fate place_by_index(RfVideoReader *reader, RfFrame *lent)
{
    const Part *part = part_at(reader->file, reader->part);
    int64_t pts =
        reader->frame->pts != AV_NOPTS_VALUE ? reader->frame->pts : reader->frame->best_effort_timestamp;
    int64_t within = rf_frame_index_find(part->index, pts, reader->next - part->first_frame);
    lent->index = part->first_frame + within;
    if (within < 0 || lent->index < reader->next)
        return SKIP; /* leads an open group, or nobody promised it */
    note_lost(reader, reader->next, MIN(lent->index, reader->end));
    reader->next = lent->index + 1;
    if (lent->index >= reader->end) return STOP;
    lent->time_s = rf_video_file_time_s(reader->file, lent->index);
    return lent->index < reader->skip_to ? SKIP : SHOW;
}

static Fate place_by_count(RfVideoReader *reader, RfFrame *lent)
{
    const RfVideoOptions *options = &reader->file->options;
    int64_t ticks = reader->frame->best_effort_timestamp;
    double time_s = rf_frame_timer_next(&reader->timer, ticks != AV_NOPTS_VALUE, ticks);
    lent->index = reader->next++;
    lent->time_s = own_time_s(reader->file, lent->index, time_s);
    reader->faults.missing = reader->timer.missing;
    reader->faults.backwards = reader->timer.backwards;
    if (options->stop_s > 0 && lent->time_s >= options->stop_s) return STOP;
    return lent->index < reader->skip_to || lent->time_s < options->start_s ? SKIP : SHOW;
}

/* Frames that say so themselves; for decoders that neither reorder nor run ahead, also those during which they
 * complained (FFV1's checksums, JPEG's broken runs are reported nowhere else). */
static bool is_damaged(RfVideoReader *reader)
{
    int complaints = g_atomic_int_get(&reader->complaints);
    bool is_direct =
        reader->decoder->has_b_frames == 0 && !(reader->decoder->active_thread_type & FF_THREAD_FRAME);
    bool complained = is_direct && complaints != reader->complaints_seen;
    reader->complaints_seen = complaints;
    return complained || (reader->frame->flags & AV_FRAME_FLAG_CORRUPT) ||
           reader->frame->decode_error_flags != 0;
}

static bool check_frame(const RfVideoReader *reader, double time_s, GError **error)
{
    const RfVideoInfo *info = &reader->file->info;
    const AVFrame *frame = reader->frame;
    const char *path = part_at(reader->file, reader->part)->path;
    const AVPixFmtDescriptor *layout = av_pix_fmt_desc_get(frame->format);
    if (!check_size(path, frame->width, frame->height, error)) return false;
    if (!is_usable(layout)) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                    "%s: pixels stored as %s; need grey, YUV or RGB of up to 16 bit", path,
                    layout != NULL ? layout->name : "nothing known");
        return false;
    }
    int depth = luma_depth(layout);
    if (info->width == 0 ||
        (frame->width == info->width && frame->height == info->height && depth == info->bit_depth))
        return true;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CHANGED,
                "%s: at %.3f s the picture changes from %d x %d with %d bit to %d x %d with %d bit; cut the "
                "recording "
                "there, or set stop",
                path, time_s, info->width, info->height, info->bit_depth, frame->width, frame->height, depth);
    return false;
}

static RfVideoStep show(RfVideoReader *reader, RfFrame *lent, GError **error)
{
    RfFrame placed = *lent;
    if (!check_frame(reader, placed.time_s, error)) return RF_VIDEO_FAILED;
    if (!lend(reader->frame, &reader->scratch, lent)) {
        fail(error, RF_VIDEO_ERROR_UNSUPPORTED, part_at(reader->file, reader->part)->path, 0,
             "not enough memory for one picture");
        return RF_VIDEO_FAILED;
    }
    lent->index = placed.index;
    lent->time_s = placed.time_s;
    lent->is_damaged = placed.is_damaged;
    reader->faults.frames++;
    if (lent->is_damaged) reader->faults.damaged++;
    if (lent->is_damaged) note_fault(reader, lent->time_s);
    return RF_VIDEO_FRAME;
}

RfVideoStep rf_video_file_next(RfVideoReader *reader, RfFrame *lent, GError **error)
{
    bool is_indexed = reader->file->info.is_indexed;
    while (reader->next < reader->end) {
        int status = avcodec_receive_frame(reader->decoder, reader->frame);
        if (status == AVERROR(EAGAIN)) {
            send_packet(reader);
        } else if (status == AVERROR_EOF) {
            if (!has_next_part(reader)) break;
            if (!begin_next_part(reader, error)) return RF_VIDEO_FAILED;
        } else if (status < 0) {
            if (!is_indexed) reader->faults.lost++;
        } else {
            *lent = (RfFrame){.is_damaged = is_damaged(reader)};
            Fate fate = is_indexed ? place_by_index(reader, lent) : place_by_count(reader, lent);
            if (fate == SHOW) return show(reader, lent, error);
            if (fate == STOP) reader->end = reader->next; /* and stay there */
        }
    }
    if (is_indexed) note_lost(reader, reader->next, reader->end);
    reader->next = reader->end;
    return RF_VIDEO_END;
}

RfVideoFaults rf_video_file_faults(const RfVideoReader *reader)
{
    return reader->faults;
}

static RfVideoReader *reader_at(const RfVideoFile *file, const Stretch *stretch, int threads, GError **error)
{
    g_autoptr(RfVideoReader) reader = g_new0(RfVideoReader, 1);
    reader->file = file;
    reader->packet = av_packet_alloc();
    reader->frame = av_frame_alloc();
    reader->faults.first_fault_s = -1;
    if (!begin(reader, stretch, threads, error)) return NULL;
    return g_steal_pointer(&reader);
}

static Stretch everything(const RfVideoFile *file)
{
    Stretch whole = g_array_index(file->stretches, Stretch, 0);
    whole.end = g_array_index(file->stretches, Stretch, file->stretches->len - 1).end;
    return whole;
}

RfVideoReader *rf_video_file_reader_new(const RfVideoFile *file, int threads, GError **error)
{
    Stretch whole = everything(file);
    return reader_at(file, &whole, threads, error);
}

void rf_video_reader_free(RfVideoReader *reader)
{
    if (reader == NULL) return;
    avcodec_free_context(&reader->decoder);
    avformat_close_input(&reader->format);
    av_packet_free(&reader->packet);
    av_frame_free(&reader->frame);
    scratch_clear(&reader->scratch);
    g_free(reader);
}

bool rf_video_file_enter_stretch(RfVideoReader *reader, int stretch, int threads, GError **error)
{
    return begin(reader, &g_array_index(reader->file->stretches, Stretch, stretch), threads, error);
}

bool rf_video_file_go_to(RfVideoReader *reader, int64_t index, GError **error)
{
    const RfVideoFile *file = reader->file;
    Stretch from = everything(file);
    for (unsigned i = 0; i < file->keyframes->len; i++) {
        const Keyframe *keyframe = &g_array_index(file->keyframes, Keyframe, i);
        if (keyframe->frame > index) break;
        from.part = keyframe->part, from.entry = keyframe->entry;
    }
    from.first = MAX(from.first, index);
    return begin(reader, &from, reader->threads, error);
}

/* ---- what a recording is, and how it can be cut ---- */

static void describe(RfVideoInfo *info, const RfVideoReader *reader, const RfFrame *frame)
{
    const AVCodecDescriptor *about = avcodec_descriptor_get(reader->decoder->codec_id);
    info->width = frame->width;
    info->height = frame->height;
    info->bit_depth = frame->bit_depth;
    info->is_limited_range = frame->is_limited_range;
    info->is_converted = !is_plain(av_pix_fmt_desc_get(reader->frame->format));
    info->is_lossless = about != NULL && !(about->props & AV_CODEC_PROP_LOSSY);
    info->codec = about != NULL ? about->name : "unknown";
    AVRational aspect = reader->frame->sample_aspect_ratio;
    if (info->pixel_aspect <= 0) info->pixel_aspect = aspect.num > 0 && aspect.den > 0 ? av_q2d(aspect) : 1;
}

/* Decodes the first frames of a file: what the picture is, and whether frames come out as its packets promise. */
static bool preflight(RfVideoFile *file, int number, bool *is_as_promised, GError **error)
{
    const Part *part = part_at(file, number);
    Stretch start = {number, file->info.is_indexed ? 0 : -1, file->info.is_indexed ? part->first_frame : 0,
                     INT64_MAX};
    g_autoptr(RfVideoReader) reader = reader_at(file, &start, 1, error);
    if (reader == NULL) return false;
    int64_t promised = MIN(PREFLIGHT_FRAMES, (int64_t)part->index->frames);
    RfFrame frame;
    RfVideoStep step = RF_VIDEO_FRAME;
    *is_as_promised = true;
    for (int64_t i = 0; i < (file->info.is_indexed ? promised : 1) && step == RF_VIDEO_FRAME; i++) {
        step = rf_video_file_next(reader, &frame, error);
        if (step != RF_VIDEO_FRAME) break;
        if (reader->part != number || frame.index != start.first + i) *is_as_promised = false;
        if (file->info.width == 0) describe(&file->info, reader, &frame);
        if (frame.is_interlaced)
            file->info.is_interlaced = true, file->info.is_top_field_first = frame.is_top_field_first;
    }
    if (step == RF_VIDEO_END) *is_as_promised = false;
    if (step == RF_VIDEO_END && !file->info.is_indexed && reader->faults.frames == 0) {
        return fail(error, RF_VIDEO_ERROR_DAMAGED, part->path, AVERROR_INVALIDDATA,
                    "not one frame can be decoded");
    }
    return step != RF_VIDEO_FAILED;
}

static bool preflight_all(RfVideoFile *file, GError **error)
{
    bool is_as_promised = true;
    for (int p = 0; p < (int)file->parts->len; p++) {
        if (!preflight(file, p, &is_as_promised, error)) return false;
        if (is_as_promised || !file->info.is_indexed) continue;
        file->info.is_indexed = false; /* count frames as they come, then; and look again from the start */
        for (unsigned i = 0; i < file->parts->len; i++) {
            file->info.frames += (int64_t)part_at(file, (int)i)->index->frames;
            part_at(file, (int)i)->index->obstacle = "frames don't come out as the packets promise";
        }
        p = -1;
    }
    return true;
}

/* Where each file begins on the recording's clock. */
static void join_parts(RfVideoFile *file)
{
    RfVideoInfo *info = &file->info;
    int64_t frames = 0;
    double end_s = 0;
    info->is_indexed = info->is_rate_constant = true;
    for (int p = 0; p < (int)file->parts->len; p++) {
        Part *part = part_at(file, p);
        int64_t count = (int64_t)part->index->frames;
        part->first_frame = frames;
        part->offset_s = end_s;
        if (count > 0)
            end_s += rf_frame_clock_time_s(&part->clock, part->index->pts[count - 1]) + part->last_duration_s;
        frames += count;
        info->times_missing += part->index->missing;
        info->times_backwards += part->index->backwards;
        info->gaps += part->clock.gaps;
        info->is_indexed = info->is_indexed && part->index->obstacle == NULL;
        info->is_rate_constant = info->is_rate_constant && part->clock.is_constant;
    }
    if (info->is_indexed) info->frames = frames;
    info->duration_s = end_s;
}

static void settle_rate(RfVideoFile *file)
{
    RfVideoInfo *info = &file->info;
    double rate_hz = file->options.frame_rate_hz.value;
    if (rate_hz > 0) info->duration_s = (double)info->frames / rate_hz;
    if (rate_hz > 0) info->is_rate_constant = true;
    const Part *first = part_at(file, 0);
    if (rate_hz <= 0 && first->clock.is_snapped)
        rate_hz = (double)first->clock.rate_hz.num / first->clock.rate_hz.den;
    if (rate_hz <= 0 && info->duration_s > 0) rate_hz = (double)info->frames / info->duration_s;
    info->frame_rate_hz = rate_hz;
}

static void list_keyframes(RfVideoFile *file)
{
    for (int p = 0; p < (int)file->parts->len && file->info.is_indexed; p++) {
        const Part *part = part_at(file, p);
        for (int e = 0; e < (int)part->index->entries->len; e++) {
            int64_t frame = g_array_index(part->index->entries, RfFrameEntry, e).frame + part->first_frame;
            g_array_append_val(file->keyframes, ((Keyframe){p, e, frame}));
            if (frame < file->first) file->first_used++;
            if (frame >= file->first && frame < file->end) file->keyframes_used++;
        }
    }
}

/* Long enough that starting a decoder doesn't show, short enough to share out. A function of the file alone: the number
 * of threads mustn't reach the results, not even through a damaged frame's concealment. */
static int64_t stretch_length(const RfVideoFile *file)
{
    return CLAMP((file->end - file->first) / 16, 24, 96);
}

static void cut(RfVideoFile *file)
{
    Stretch now = {0, -1, 0, INT64_MAX};
    bool is_open = false;
    for (unsigned i = 0; i < file->keyframes->len; i++) {
        const Keyframe *keyframe = &g_array_index(file->keyframes, Keyframe, i);
        if (keyframe->frame >= file->end) break;
        bool is_due = keyframe->part != now.part || keyframe->frame - now.first >= stretch_length(file);
        if (is_open && keyframe->frame > file->first && !is_due) continue;
        now.end = keyframe->frame;
        if (is_open && keyframe->frame > file->first) g_array_append_val(file->stretches, now);
        now = (Stretch){keyframe->part, keyframe->entry, MAX(keyframe->frame, file->first), file->end};
        is_open = true;
    }
    g_array_append_val(file->stretches, now);
}

static bool choose_part_in_use(RfVideoFile *file, GError **error)
{
    RfVideoInfo *info = &file->info;
    double start_s = file->options.start_s,
           stop_s = file->options.stop_s > 0 ? file->options.stop_s : HUGE_VAL;
    file->end = info->frames;
    if (info->is_indexed) {
        while (file->first < file->end && rf_video_file_time_s(file, file->first) < start_s) file->first++;
        while (file->end > file->first && rf_video_file_time_s(file, file->end - 1) >= stop_s) file->end--;
    }
    info->frames_used = file->end - file->first;
    if (!info->is_indexed && info->duration_s > 0) {
        double share = (MIN(stop_s, info->duration_s) - start_s) / info->duration_s;
        info->frames_used = (int64_t)(CLAMP(share, 0, 1) * (double)info->frames);
    }
    if (start_s < stop_s && (info->frames_used > 0 || !info->is_indexed)) return true;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                "%s: no frame from start %g s to stop %g s; the recording lasts %.3f s",
                part_at(file, 0)->path, start_s, file->options.stop_s, info->duration_s);
    return false;
}

static bool open_parts(RfVideoFile *file, const char *const *paths, GError **error)
{
    for (int i = 0; paths[i] != NULL; i++) {
        Part *part = part_open(paths[i], &file->info, error);
        if (part == NULL) return false;
        g_ptr_array_add(file->parts, part);
    }
    file->info.files = (int)file->parts->len;
    return true;
}

RfVideoFile *rf_video_file_open(const char *const *paths, const RfVideoOptions *options, GError **error)
{
    g_return_val_if_fail(paths != NULL && paths[0] != NULL, NULL);
    g_autoptr(RfVideoFile) file = g_new0(RfVideoFile, 1);
    file->parts = g_ptr_array_new_with_free_func(part_free);
    file->stretches = g_array_new(FALSE, FALSE, sizeof(Stretch));
    file->keyframes = g_array_new(FALSE, FALSE, sizeof(Keyframe));
    if (!open_parts(file, paths, error)) return NULL;
    join_parts(file);
    if (!preflight_all(file, error)) return NULL;
    if (options != NULL) file->options = *options;
    settle_rate(file);
    if (!choose_part_in_use(file, error)) return NULL;
    list_keyframes(file);
    cut(file);
    return g_steal_pointer(&file);
}

void rf_video_file_free(RfVideoFile *file)
{
    if (file == NULL) return;
    g_ptr_array_unref(file->parts);
    g_array_unref(file->stretches);
    g_array_unref(file->keyframes);
    g_free(file);
}

const RfVideoInfo *rf_video_file_info(const RfVideoFile *file)
{
    return &file->info;
}

char *rf_video_file_summary(const RfVideoFile *file)
{
    const RfVideoInfo *info = &file->info;
    return g_strdup_printf("%d x %d%s, %s, %d bit, %.6g frames/s%s, %.1f s, %s%" G_GINT64_FORMAT " frames",
                           info->width, info->height, info->is_interlaced ? " interlaced" : "", info->codec,
                           info->bit_depth, info->frame_rate_hz, info->is_rate_constant ? "" : " on average",
                           info->duration_s, info->is_indexed ? "" : "about ", info->frames);
}

double rf_video_file_time_s(const RfVideoFile *file, int64_t index)
{
    int p = (int)file->parts->len - 1;
    while (p > 0 && part_at(file, p)->first_frame > index) p--;
    const Part *part = part_at(file, p);
    int64_t ticks = part->index->pts[index - part->first_frame];
    return own_time_s(file, index, part->offset_s + rf_frame_clock_time_s(&part->clock, ticks));
}

int rf_video_file_stretches(const RfVideoFile *file)
{
    return (int)file->stretches->len;
}

int64_t rf_video_file_stretch_frames(const RfVideoFile *file, int stretch)
{
    const Stretch *one = &g_array_index(file->stretches, Stretch, stretch);
    return file->info.is_indexed ? one->end - one->first : file->info.frames_used;
}

int rf_video_file_keyframes(const RfVideoFile *file)
{
    return file->keyframes_used;
}

int64_t rf_video_file_keyframe(const RfVideoFile *file, int number)
{
    return g_array_index(file->keyframes, Keyframe, file->first_used + number).frame;
}

/* ---- stills ---- */

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
    start_listening();
    if (!is_regular_file(path, error)) return false;
    g_autoptr(GMappedFile) file = g_mapped_file_new(path, FALSE, NULL);
    if (file == NULL) return fail(error, RF_VIDEO_ERROR_ABSENT, path, 0, "can't be read");
    size_t size = g_mapped_file_get_length(file);
    if (size > LARGEST_STILL_BYTES || av_new_packet(packet, (int)size) < 0) {
        return fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, 0, "larger than a still may be, 1 GiB");
    }
    if (size > 0) memcpy(packet->data, g_mapped_file_get_contents(file), size);
    return true;
}

static AVCodecContext *open_still_decoder(const char *path, const AVPacket *packet, GError **error)
{
    const AVCodec *codec = avcodec_find_decoder(still_codec(packet->data, (size_t)packet->size));
    g_autoptr(AVCodecContext) decoder = codec != NULL ? avcodec_alloc_context3(codec) : NULL;
    if (decoder == NULL) {
        fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0, "not a picture; need PNG, JPEG, TIFF, BMP or PGM");
        return NULL;
    }
    decoder->max_pixels = RF_VIDEO_MAX_PIXELS;
    decoder->thread_count = 1;
    if (avcodec_open2(decoder, codec, NULL) < 0) {
        fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, AVERROR_DECODER_NOT_FOUND, "can't be decoded");
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
        fail(error, RF_VIDEO_ERROR_DAMAGED, path, status, "the picture can't be decoded");
        return NULL;
    }
    if (!check_size(path, frame->width, frame->height, error)) return NULL;
    Scratch scratch = {0};
    RfFrame lent;
    RfStill *still = NULL;
    if (is_usable(av_pix_fmt_desc_get(frame->format)) && lend(frame, &scratch, &lent)) {
        still = still_copy(&lent, frame->sample_aspect_ratio);
    } else {
        fail(error, RF_VIDEO_ERROR_UNSUPPORTED, path, 0,
             "pixels of a kind that isn't read; need grey or RGB");
    }
    scratch_clear(&scratch);
    return still;
}

void rf_still_free(RfStill *still)
{
    if (still == NULL) return;
    g_free(still->pixels);
    g_free(still);
}

/* ---- writing ---- */

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
        av_opt_set_double(encoder->priv_data, "crf",
                          quality > 0            ? quality
                          : options->is_lossless ? 0
                                                 : 18,
                          0);
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
        fail(error, RF_VIDEO_ERROR_ENCODER, path, 0, "this build of libavcodec lacks the encoder asked for");
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
    fail(error, RF_VIDEO_ERROR_ENCODER, path, status, "the encoder refuses these settings");
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
        size_t samples =
            (size_t)frame->linesize[plane] / (depth > 8 ? 2 : 1) * ((size_t)frame->height + 1) / 2;
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
    if (!check_size(path, options->width, options->height, error)) return false;
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
        return fail(error, RF_VIDEO_ERROR_ENCODER, writer->path, 0,
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
    return status >= 0 || fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be written");
}

RfVideoWriter *rf_video_file_create(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    start_listening();
    g_autoptr(RfVideoWriter) writer = g_new0(RfVideoWriter, 1);
    writer->options = *options;
    writer->path = g_strdup(path);
    writer->last_pts = INT64_MIN;
    if (writer->options.bit_depth == 0) writer->options.bit_depth = 8;
    if (!check_writer_options(path, &writer->options, error) || !open_output(writer, error)) return NULL;
    writer->packet = av_packet_alloc();
    writer->frame = blank_frame(writer->encoder, writer->options.bit_depth);
    if (writer->frame == NULL) {
        fail(error, RF_VIDEO_ERROR_WRITE, path, 0, "not enough memory for one picture");
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
    return fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be written on");
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
    start_listening();
    int64_t pts = llround(time_s / av_q2d(writer->encoder->time_base));
    if (pts <= writer->last_pts) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER,
                    "%s: a frame at %.6f s, less than a tick after the one before", writer->path, time_s);
        return false;
    }
    int status = av_frame_make_writable(writer->frame);
    if (status < 0)
        return fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "no memory for the next picture");
    fill(writer, pixels, stride_bytes);
    writer->frame->pts = writer->last_pts = pts;
    writer->frame->quality = writer->encoder->global_quality;
    if (writer->options.is_interlaced)
        FRAME_SET_INTERLACED(writer->frame, writer->options.is_top_field_first);
    status = avcodec_send_frame(writer->encoder, writer->frame);
    if (status < 0)
        return fail(error, RF_VIDEO_ERROR_ENCODER, writer->path, status, "the encoder refuses a frame");
    return write_packets(writer, error);
}

bool rf_video_file_finish(RfVideoWriter *writer, GError **error)
{
    start_listening();
    if (writer->is_finished) return true;
    avcodec_send_frame(writer->encoder, NULL);
    if (!write_packets(writer, error)) return false;
    int status = av_write_trailer(writer->format);
    if (status >= 0) status = avio_closep(&writer->format->pb);
    writer->is_finished = true;
    return status >= 0 || fail(error, RF_VIDEO_ERROR_WRITE, writer->path, status, "can't be finished");
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
    start_listening();
    const char *what = "PNG in memory";
    if (!check_size(what, width, height, error)) return NULL;
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
        fail(error, RF_VIDEO_ERROR_ENCODER, what, status, "can't be encoded");
        return NULL;
    }
    return g_bytes_new(packet->data, (size_t)packet->size);
}
