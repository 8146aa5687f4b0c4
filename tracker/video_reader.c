#include "tracker/video_error.h"
#include "tracker/video_recording.h"

static bool enter_part(RfVideoReader *reader, int part, GError **error)
{
    rf_demuxer_free(reader->demuxer);
    reader->demuxer = rf_demuxer_open(rf_video_file_part(reader->file, part)->path, error);
    reader->part = part;
    reader->next_packet = 0;
    reader->has_packet = false;
    return reader->demuxer != NULL;
}

static void drop_packet(RfVideoReader *reader)
{
    reader->has_packet = false;
    reader->next_packet++;
}

/* By the container's own index; believed only when the very keyframe turns up. */
static bool seek_entry(RfVideoReader *reader, const RfFrameEntry *entry)
{
    if (!rf_demuxer_stream(reader->demuxer)->is_seekable) return false;
    reader->has_packet = false;
    reader->next_packet = INT64_MAX; /* from here on nobody knows where the container stands */
    if (!rf_demuxer_seek(reader->demuxer, entry->pts)) return false;
    RfPacket *packet = &reader->packet;
    while (rf_demuxer_next(reader->demuxer, packet)) {
        if (packet->pts == entry->pts && packet->is_key) {
            reader->has_packet = true;
            reader->next_packet = entry->packet;
            return true;
        }
        if (packet->dts != RF_NO_TICKS && packet->dts > entry->pts) break;
    }
    return false;
}

/* Brings the container to a packet: it stands there, it can seek there, or the packets before it are passed over, which
 * costs little beside decoding and works with every container. */
static bool reach_packet(RfVideoReader *reader, int part, const RfFrameEntry *entry, GError **error)
{
    int64_t wanted = entry == NULL ? 0 : entry->packet;
    if ((reader->demuxer == NULL || reader->part != part) && !enter_part(reader, part, error)) return false;
    if (reader->next_packet == wanted || (entry != NULL && seek_entry(reader, entry))) return true;
    if (reader->next_packet > wanted && !enter_part(reader, part, error)) return false;
    while (reader->next_packet < wanted) {
        if (!reader->has_packet && !rf_demuxer_next(reader->demuxer, &reader->packet)) {
            return rf_video_fail(error, RF_VIDEO_ERROR_CHANGED, rf_video_file_part(reader->file, part)->path,
                                 "shorter than when it was opened");
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
    const RfVideoPart *part = rf_video_file_part(reader->file, stretch->part);
    const RfFrameEntry *entry =
        stretch->entry < 0 ? NULL : &g_array_index(part->index->entries, RfFrameEntry, stretch->entry);
    if (!reach_packet(reader, stretch->part, entry, error)) return false;
    /* A new decoder, not a flushed one: FFV1's keeps the last picture through a flush, and patches broken slices with
     * it, so that a damaged frame would depend on what this reader decoded before. */
    rf_decoder_free(reader->decoder);
    int reorder = part->index->obstacle == NULL ? part->index->reorder : 0;
    reader->decoder = rf_decoder_new(part->path, reader->demuxer, threads, reorder, error);
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
    bool is_wanted = reader->next_packet < reader->stop_packet;
    if (!reader->has_packet && is_wanted) {
        reader->has_packet = rf_demuxer_next(reader->demuxer, &reader->packet);
    }
    if (!reader->has_packet || !is_wanted) {
        rf_decoder_send(reader->decoder, NULL);
        return;
    }
    bool is_taken = rf_decoder_send(reader->decoder, reader->demuxer);
    if (!is_taken && !reader->file->info.is_indexed) reader->faults.lost++;
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
    const RfPicture *picture = &reader->picture;
    int64_t pts = picture->pts != RF_NO_TICKS ? picture->pts : picture->guess;
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
    int64_t ticks = reader->picture.guess;
    double time_s = rf_frame_timer_next(&reader->timer, ticks != RF_NO_TICKS, ticks);
    lent->index = reader->next++;
    lent->time_s = rf_video_file_own_time_s(reader->file, lent->index, time_s);
    reader->faults.missing = reader->timer.missing;
    reader->faults.backwards = reader->timer.backwards;
    if (options->stop_s > 0 && lent->time_s >= options->stop_s) return STOP;
    return lent->index < reader->skip_to || lent->time_s < options->start_s ? SKIP : SHOW;
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

static bool check_picture(const RfVideoReader *reader, double time_s, GError **error)
{
    const RfVideoInfo *info = &reader->file->info;
    const RfPicture *picture = &reader->picture;
    const char *path = rf_video_file_part(reader->file, reader->part)->path;
    if (!rf_video_check_size(path, picture->width, picture->height, error)) return false;
    if (!picture->is_readable) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                    "%s: pixels stored as %s; need grey, YUV or RGB of up to 16 bit", path, picture->layout);
        return false;
    }
    if (info->width == 0 || (picture->width == info->width && picture->height == info->height &&
                             picture->bit_depth == info->bit_depth))
        return true;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CHANGED,
                "%s: at %.3f s the picture changes from %d x %d with %d bit to %d x %d with %d bit; cut the "
                "recording there, or set stop",
                path, time_s, info->width, info->height, info->bit_depth, picture->width, picture->height,
                picture->bit_depth);
    return false;
}

static RfVideoStep show(RfVideoReader *reader, RfFrame *lent, GError **error)
{
    RfFrame placed = *lent;
    if (!check_picture(reader, placed.time_s, error)) return RF_VIDEO_FAILED;
    if (!rf_video_luma_lend(&reader->scratch, reader->decoder, &reader->picture, lent)) {
        rf_video_fail(error, RF_VIDEO_ERROR_UNSUPPORTED, rf_video_file_part(reader->file, reader->part)->path,
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
        RfDecoderStep step = rf_decoder_receive(reader->decoder, &reader->picture);
        if (step == RF_DECODER_HUNGRY) {
            send_packet(reader);
        } else if (rf_decoder_is_luck_involved(reader->decoder)) {
            if (!restart_alone(reader, error)) return RF_VIDEO_FAILED;
        } else if (step == RF_DECODER_DONE) {
            if (!has_next_part(reader)) break;
            if (!begin_next_part(reader, error)) return RF_VIDEO_FAILED;
        } else if (step == RF_DECODER_REFUSES) {
            if (!is_indexed) reader->faults.lost++;
        } else {
            *lent = (RfFrame){.is_damaged = reader->picture.is_damaged};
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
    rf_decoder_free(reader->decoder);
    rf_demuxer_free(reader->demuxer);
    rf_video_luma_clear(&reader->scratch);
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
