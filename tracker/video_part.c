#include "tracker/nal.h"
#include "tracker/video_error.h"
#include "tracker/video_recording.h"

#define LARGEST_SCAN_PACKETS 100000000u /* 2.4 GB of notes: 19 days at 60 frames/s */

void rf_video_part_free(RfVideoPart *part)
{
    if (part == NULL) return;
    rf_frame_index_free(part->index);
    g_free(part->path);
    g_free(part);
}

static bool is_entry(const RfPacket *packet, const RfStream *stream)
{
    if (!packet->is_key || !stream->is_indexable) return false;
    return !stream->is_nal ||
           rf_nal_is_refresh(packet->bytes, packet->size, stream->setup, stream->setup_size, stream->is_hevc);
}

static void scan_packets(RfVideoPart *part, RfVideoInfo *info, RfDemuxer *demuxer)
{
    const RfStream *stream = rf_demuxer_stream(demuxer);
    g_autoptr(GArray) notes = g_array_new(FALSE, FALSE, sizeof(RfPacketNote));
    int64_t last_pts = INT64_MIN, last_duration = 0;
    double tick_s = (double)stream->tick_s.num / stream->tick_s.den;
    RfPacket packet;
    while (notes->len < LARGEST_SCAN_PACKETS && rf_demuxer_next(demuxer, &packet)) {
        RfPacketNote note = {.pts = packet.pts,
                             .has_pts = packet.pts != RF_NO_TICKS,
                             .is_entry = is_entry(&packet, stream),
                             .is_hidden = packet.is_hidden};
        if (note.has_pts && note.pts >= last_pts) last_pts = note.pts, last_duration = packet.duration;
        if (packet.is_broken) info->packets_damaged++;
        g_array_append_val(notes, note);
    }
    part->index = rf_frame_index_new((const RfPacketNote *)(const void *)notes->data, notes->len, tick_s,
                                     stream->may_lead);
    part->packets = notes->len;
    part->clock = rf_frame_clock_fit(part->index->pts, part->index->frames, stream->tick_s, stream->rates_hz,
                                     G_N_ELEMENTS(stream->rates_hz));
    part->last_duration_s = part->clock.mean_interval_s;
    if (!part->clock.is_snapped && last_duration > 0 && (double)last_duration * tick_s < 10) {
        part->last_duration_s = (double)last_duration * tick_s;
    }
}

RfVideoPart *rf_video_part_open(const char *path, RfVideoInfo *info, GError **error)
{
    g_autoptr(RfDemuxer) demuxer = rf_demuxer_open(path, error);
    if (demuxer == NULL) return NULL;
    const RfStream *stream = rf_demuxer_stream(demuxer);
    if (!rf_video_check_size(path, stream->width, stream->height, error)) return NULL;
    if (stream->tick_s.num <= 0 || stream->tick_s.den <= 0) {
        rf_video_fail(error, RF_VIDEO_ERROR_NOT_VIDEO, path, "its clock has no rate");
        return NULL;
    }
    RfVideoPart *part = g_new0(RfVideoPart, 1);
    part->path = g_strdup(path);
    part->promised_s = stream->promised_s;
    info->container = stream->container;
    info->tick_s = MAX(info->tick_s, (double)stream->tick_s.num / stream->tick_s.den);
    if (info->pixel_aspect <= 0) info->pixel_aspect = stream->pixel_aspect;
    scan_packets(part, info, demuxer);
    return part;
}
