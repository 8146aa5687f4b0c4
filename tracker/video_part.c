#include "tracker/video_recording.h"

#include <string.h>

#include "tracker/nal.h"

/* Containers that hold all of their own data. A positive list: what isn't here (concat scripts, playlists, image
 * patterns, session descriptions, devices) can't be opened however it is named or disguised. */
#define CONTAINERS                                                                                           \
    "matroska,webm,mov,mp4,3gp,avi,mpeg,mpegts,mpegvideo,m4v,h264,hevc,obu,ivf,mjpeg,yuv4mpegpipe,nut,"      \
    "flv,ogg,dv,asf,mxf,cine,gif,apng"
#define LARGEST_SCAN_PACKETS 100000000u /* 2.4 GB of notes: 19 days at 60 frames/s */

void rf_video_part_free(RfVideoPart *part)
{
    if (part == NULL) return;
    avcodec_parameters_free(&part->parameters);
    rf_frame_index_free(part->index);
    g_free(part->path);
    g_free(part);
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

AVFormatContext *rf_video_part_container(const char *path, int *stream, GError **error)
{
    rf_libav_listen();
    if (!rf_libav_check_file(path, error)) return NULL;
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
        rf_libav_fail(error, is_denied ? RF_VIDEO_ERROR_ABSENT : RF_VIDEO_ERROR_NOT_VIDEO, path, status,
                      is_denied ? "can't be read" : "not a video file of a known, self-contained format");
        return NULL;
    }
    find_streams(format); /* what it couldn't find out is checked below */
    *stream = av_find_best_stream(format, AVMEDIA_TYPE_VIDEO, -1, -1, NULL, 0);
    if (*stream < 0 || (format->streams[*stream]->disposition & AV_DISPOSITION_ATTACHED_PIC)) {
        rf_libav_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0, "no video stream in it");
        return NULL;
    }
    for (unsigned i = 0; i < format->nb_streams; i++) {
        if ((int)i != *stream) format->streams[i]->discard = AVDISCARD_ALL;
    }
    return g_steal_pointer(&format);
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
bool rf_video_part_read(AVFormatContext *format, int stream, AVPacket *packet)
{
    while (av_read_frame(format, packet) >= 0) {
        if (packet->stream_index == stream) return true;
        av_packet_unref(packet);
    }
    return false;
}

static void scan_packets(RfVideoPart *part, RfVideoInfo *info, AVFormatContext *format, int stream)
{
    AVStream *video = format->streams[stream];
    g_autoptr(GArray) notes = g_array_new(FALSE, FALSE, sizeof(RfPacketNote));
    g_autoptr(AVPacket) packet = av_packet_alloc();
    int64_t last_pts = INT64_MIN, last_duration = 0;
    double tick_s = av_q2d(video->time_base);
    while (notes->len < LARGEST_SCAN_PACKETS && rf_video_part_read(format, stream, packet)) {
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
    part->packets = notes->len;
    RfRatio rates[2] = {{video->avg_frame_rate.num, video->avg_frame_rate.den},
                        {video->r_frame_rate.num, video->r_frame_rate.den}};
    part->clock = rf_frame_clock_fit(part->index->pts, part->index->frames,
                                     (RfRatio){video->time_base.num, video->time_base.den}, rates, 2);
    part->last_duration_s = part->clock.mean_interval_s;
    if (!part->clock.is_snapped && last_duration > 0 && last_duration * tick_s < 10) {
        part->last_duration_s = (double)last_duration * tick_s;
    }
}

AVCodecContext *rf_video_part_decoder(const RfVideoPart *part, int threads, int *complaints, GError **error)
{
    const AVCodec *codec = avcodec_find_decoder(part->parameters->codec_id);
    if (codec == NULL) {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, part->path, 0,
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
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, part->path, status, "the decoder refuses it");
        return NULL;
    }
    return g_steal_pointer(&decoder);
}

RfVideoPart *rf_video_part_open(const char *path, RfVideoInfo *info, GError **error)
{
    int stream = -1;
    g_autoptr(AVFormatContext) format = rf_video_part_container(path, &stream, error);
    if (format == NULL) return NULL;
    AVStream *video = format->streams[stream];
    if (!rf_libav_check_size(path, video->codecpar->width, video->codecpar->height, error)) return NULL;
    if (video->time_base.num <= 0 || video->time_base.den <= 0) {
        rf_libav_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, 0, "its clock has no rate");
        return NULL;
    }
    RfVideoPart *part = g_new0(RfVideoPart, 1);
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
