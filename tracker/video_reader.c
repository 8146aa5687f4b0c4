#include "tracker/video_recording.h"

static bool enter_part(RfVideoReader *reader, int part, GError **error)
{
    av_packet_unref(reader->packet);
    avformat_close_input(&reader->format);
    reader->format =
        rf_video_part_container(rf_video_file_part(reader->file, part)->path, &reader->stream, error);
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
    if (!rf_video_file_part(reader->file, reader->part)->is_seekable) return false;
    if (reader->has_packet) drop_packet(reader);
    reader->next_packet = INT64_MAX; /* from here on nobody knows where the container stands */
    if (avformat_seek_file(reader->format, reader->stream, INT64_MIN, entry->pts, entry->pts, 0) < 0)
        return false;
    while (rf_video_part_read(reader->format, reader->stream, reader->packet)) {
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
        if (!reader->has_packet && !rf_video_part_read(reader->format, reader->stream, reader->packet)) {
            return rf_libav_fail(error, RF_VIDEO_ERROR_CHANGED, rf_video_file_part(reader->file, part)->path,
                                 0, "shorter than when it was opened");
        }
        drop_packet(reader);
    }
    return true;
}

static int64_t stop_packet(const RfVideoPart *part, int64_t end)
{
    if (part->index->obstacle != NULL) return INT64_MAX;
    for (unsigned i = 0; i < part->index->entries->len; i++) {
        const RfFrameEntry *entry = &g_array_index(part->index->entries, RfFrameEntry, i);
        if (part->first_frame + entry->frame >= end) return entry->settled;
    }
    return INT64_MAX;
}

static bool begin(RfVideoReader *reader, const RfVideoStretch *stretch, int threads, GError **error)
{
    rf_libav_listen();
    const RfVideoPart *part = rf_video_file_part(reader->file, stretch->part);
    const RfFrameEntry *entry =
        stretch->entry < 0 ? NULL : &g_array_index(part->index->entries, RfFrameEntry, stretch->entry);
    if (!reach_packet(reader, stretch->part, entry, error)) return false;
    /* A new decoder, not a flushed one: FFV1's keeps the last picture through a flush, and patches broken slices with
     * it, so that a damaged frame would depend on what this reader decoded before. */
    avcodec_free_context(&reader->decoder);
    reader->decoder = rf_video_part_decoder(part, threads, &reader->complaints, error);
    reader->complaints_seen = reader->complaints_at_start = g_atomic_int_get(&reader->complaints);
    reader->threads = threads;
    reader->next = entry == NULL ? 0 : part->first_frame + entry->frame;
    reader->skip_to = stretch->first;
    reader->end = stretch->end;
    reader->stop_packet = stop_packet(part, stretch->end);
    if (entry == NULL) reader->timer = rf_frame_timer_new(&part->clock, 0);
    reader->from = *stretch;
    reader->from_next = reader->next;
    reader->from_timer = reader->timer;
    return reader->decoder != NULL;
}

/* The last packet of a file is decoded: on to the next file of the recording, if this reading reaches that far. */
static bool begin_next_part(RfVideoReader *reader, GError **error)
{
    const RfVideoPart *done = rf_video_file_part(reader->file, reader->part),
                      *part = rf_video_file_part(reader->file, reader->part + 1);
    bool is_indexed = reader->file->info.is_indexed;
    RfVideoStretch rest = {reader->part + 1, is_indexed ? 0 : -1, reader->skip_to, reader->end};
    int64_t next = reader->next;
    RfFrameTimer timer = rf_frame_timer_new(&part->clock, reader->timer.last_s + done->last_duration_s);
    timer.missing = reader->timer.missing, timer.backwards = reader->timer.backwards;
    if (!begin(reader, &rest, reader->threads, error)) return false;
    reader->timer = reader->from_timer = timer;
    reader->next = reader->from_next = next;
    return true;
}

static bool has_next_part(const RfVideoReader *reader)
{
    if (reader->part + 1 >= (int)reader->file->parts->len) return false;
    return !reader->file->info.is_indexed ||
           rf_video_file_part(reader->file, reader->part + 1)->first_frame < reader->end;
}

static void send_packet(RfVideoReader *reader)
{
    if (!reader->has_packet && reader->next_packet < reader->stop_packet) {
        reader->has_packet = rf_video_part_read(reader->format, reader->stream, reader->packet);
    }
    if (!reader->has_packet || reader->next_packet >= reader->stop_packet) {
        avcodec_send_packet(reader->decoder, NULL);
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

typedef enum { SHOW, SKIP, STOP } Fate;

static Fate place_by_index(RfVideoReader *reader, RfFrame *lent)
{
    const RfVideoPart *part = rf_video_file_part(reader->file, reader->part);
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
    lent->time_s = rf_video_file_own_time_s(reader->file, lent->index, time_s);
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

/* Threads patch a broken picture with as much of itself and its neighbours as happens to be ready; only FFV1's slices
 * have nothing to do with each other. */
static bool is_luck_involved(const RfVideoReader *reader)
{
    if (reader->decoder->active_thread_type == 0 || reader->decoder->codec_id == AV_CODEC_ID_FFV1)
        return false;
    return g_atomic_int_get(&reader->complaints) != reader->complaints_at_start ||
           (reader->frame->flags & AV_FRAME_FLAG_CORRUPT) || reader->frame->decode_error_flags != 0;
}

/* Once more from where the decoder was started, on one thread, up to the frame that comes next. */
static bool restart_alone(RfVideoReader *reader, GError **error)
{
    RfVideoStretch from = reader->from;
    RfFrameTimer timer = reader->from_timer;
    int64_t next = reader->from_next;
    from.first = MAX(from.first, reader->next);
    if (!begin(reader, &from, 1, error)) return false;
    reader->next = reader->from_next = next;
    reader->timer = reader->from_timer = timer;
    if (!reader->file->info.is_indexed) reader->faults.lost = 0; /* counted again on the way */
    return true;
}

static bool check_frame(const RfVideoReader *reader, double time_s, GError **error)
{
    const RfVideoInfo *info = &reader->file->info;
    const AVFrame *frame = reader->frame;
    const char *path = rf_video_file_part(reader->file, reader->part)->path;
    const AVPixFmtDescriptor *layout = av_pix_fmt_desc_get(frame->format);
    if (!rf_libav_check_size(path, frame->width, frame->height, error)) return false;
    if (!rf_luma_is_readable(layout)) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                    "%s: pixels stored as %s; need grey, YUV or RGB of up to 16 bit", path,
                    layout != NULL ? layout->name : "nothing known");
        return false;
    }
    int depth = rf_luma_depth(layout);
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
    if (!rf_luma_lend(reader->frame, &reader->scratch, lent)) {
        rf_libav_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, rf_video_file_part(reader->file, reader->part)->path,
                      0, "not enough memory for one picture");
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
        } else if (is_luck_involved(reader)) {
            if (!restart_alone(reader, error)) return RF_VIDEO_FAILED;
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

RfVideoReader *rf_video_reader_at(const RfVideoFile *file, const RfVideoStretch *stretch, int threads,
                                  GError **error)
{
    g_autoptr(RfVideoReader) reader = g_new0(RfVideoReader, 1);
    reader->file = file;
    reader->packet = av_packet_alloc();
    reader->frame = av_frame_alloc();
    reader->faults.first_fault_s = -1;
    if (!begin(reader, stretch, threads, error)) return NULL;
    return g_steal_pointer(&reader);
}

static RfVideoStretch everything(const RfVideoFile *file)
{
    RfVideoStretch whole = g_array_index(file->stretches, RfVideoStretch, 0);
    whole.end = g_array_index(file->stretches, RfVideoStretch, file->stretches->len - 1).end;
    return whole;
}

RfVideoReader *rf_video_file_reader_new(const RfVideoFile *file, int threads, GError **error)
{
    RfVideoStretch whole = everything(file);
    return rf_video_reader_at(file, &whole, threads, error);
}

void rf_video_reader_free(RfVideoReader *reader)
{
    if (reader == NULL) return;
    avcodec_free_context(&reader->decoder);
    avformat_close_input(&reader->format);
    av_packet_free(&reader->packet);
    av_frame_free(&reader->frame);
    rf_luma_clear(&reader->scratch);
    g_free(reader);
}

bool rf_video_file_enter_stretch(RfVideoReader *reader, int stretch, int threads, GError **error)
{
    return begin(reader, &g_array_index(reader->file->stretches, RfVideoStretch, stretch), threads, error);
}

bool rf_video_file_go_to(RfVideoReader *reader, int64_t index, GError **error)
{
    const RfVideoFile *file = reader->file;
    RfVideoStretch from = everything(file);
    for (unsigned i = 0; i < file->keyframes->len; i++) {
        const RfVideoKeyframe *keyframe = &g_array_index(file->keyframes, RfVideoKeyframe, i);
        if (keyframe->frame > index) break;
        from.part = keyframe->part, from.entry = keyframe->entry;
    }
    from.first = MAX(from.first, index);
    return begin(reader, &from, reader->threads, error);
}
