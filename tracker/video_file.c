#include <math.h>

#include "tracker/video_error.h"
#include "tracker/video_recording.h"

#define PREFLIGHT_FRAMES 3

static void describe(RfVideoInfo *info, const RfVideoReader *reader, const RfFrame *frame)
{
    const RfStream *stream = rf_demuxer_stream(reader->demuxer);
    info->width = frame->width;
    info->height = frame->height;
    info->bit_depth = frame->bit_depth;
    info->is_limited_range = frame->is_limited_range;
    info->is_converted = !reader->picture.is_plain;
    info->is_lossless = stream->is_lossless;
    info->codec = stream->codec != NULL ? stream->codec : "unknown";
    double aspect = reader->picture.pixel_aspect;
    if (info->pixel_aspect <= 0) info->pixel_aspect = aspect > 0 ? aspect : 1;
}

/* Decodes the first frames of a file: what the picture is, and whether frames come out as its packets promise. */
static bool preflight(RfVideoFile *file, int number, bool *is_as_promised, GError **error)
{
    const RfVideoPart *part = rf_video_file_part(file, number);
    RfVideoStretch start = {number, file->info.is_indexed ? 0 : -1,
                            file->info.is_indexed ? part->first_frame : 0, INT64_MAX};
    g_autoptr(RfVideoReader) reader = rf_video_reader_at(file, &start, 1, error);
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
        return rf_libav_fail_damaged(error, part->path, "not one frame can be decoded");
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
        file->info.frames = 0;
        for (unsigned i = 0; i < file->parts->len; i++) {
            file->info.frames += rf_video_file_part(file, (int)i)->packets;
            rf_video_file_part(file, (int)i)->index->obstacle =
                "frames don't come out as the packets promise";
        }
        p = -1;
    }
    return true;
}

/* A sound track may run on a little after the picture; a file cut short lacks more. */
static const double missing_s_that_counts = 0.5;

/* Where each file begins on the recording's clock. */
static void join_parts(RfVideoFile *file)
{
    RfVideoInfo *info = &file->info;
    int64_t frames = 0, packets = 0;
    double end_s = 0;
    info->is_indexed = info->is_rate_constant = true;
    for (int p = 0; p < (int)file->parts->len; p++) {
        RfVideoPart *part = rf_video_file_part(file, p);
        int64_t count = (int64_t)part->index->frames;
        part->first_frame = frames;
        part->offset_s = end_s;
        double length_s =
            count > 0 ? rf_frame_clock_time_s(&part->clock, part->index->pts[count - 1]) + part->last_duration_s : 0;
        end_s += length_s;
        if (part->promised_s > length_s + missing_s_that_counts) info->missing_s += part->promised_s - length_s;
        frames += count;
        packets += part->packets;
        info->times_missing += part->index->missing;
        info->times_backwards += part->index->backwards;
        info->gaps += part->clock.gaps;
        info->is_indexed = info->is_indexed && part->index->obstacle == NULL;
        info->is_rate_constant = info->is_rate_constant && part->clock.is_constant;
    }
    info->frames = info->is_indexed ? frames : packets; /* what may come out at most */
    info->duration_s = end_s;
}

static void settle_rate(RfVideoFile *file)
{
    RfVideoInfo *info = &file->info;
    double rate_hz = file->options.frame_rate_hz.value;
    if (rate_hz > 0) info->duration_s = (double)info->frames / rate_hz;
    if (rate_hz > 0) info->is_rate_constant = true;
    const RfVideoPart *first = rf_video_file_part(file, 0);
    if (rate_hz <= 0 && first->clock.is_snapped)
        rate_hz = (double)first->clock.rate_hz.num / first->clock.rate_hz.den;
    if (rate_hz <= 0 && info->duration_s > 0) rate_hz = (double)info->frames / info->duration_s;
    info->frame_rate_hz = rate_hz;
}

static void list_keyframes(RfVideoFile *file)
{
    for (int p = 0; p < (int)file->parts->len && file->info.is_indexed; p++) {
        const RfVideoPart *part = rf_video_file_part(file, p);
        for (int e = 0; e < (int)part->index->entries->len; e++) {
            int64_t frame = g_array_index(part->index->entries, RfFrameEntry, e).frame + part->first_frame;
            g_array_append_val(file->keyframes, ((RfVideoKeyframe){p, e, frame}));
            if (frame < file->first) file->keyframes_before++;
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
    RfVideoStretch now = {0, -1, 0, INT64_MAX};
    bool is_open = false;
    for (unsigned i = 0; i < file->keyframes->len; i++) {
        const RfVideoKeyframe *keyframe = &g_array_index(file->keyframes, RfVideoKeyframe, i);
        if (keyframe->frame >= file->end) break;
        bool is_due = keyframe->part != now.part || keyframe->frame - now.first >= stretch_length(file);
        if (is_open && keyframe->frame > file->first && !is_due) continue;
        now.end = keyframe->frame;
        if (is_open && keyframe->frame > file->first) g_array_append_val(file->stretches, now);
        now = (RfVideoStretch){keyframe->part, keyframe->entry, MAX(keyframe->frame, file->first), file->end};
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
                rf_video_file_part(file, 0)->path, start_s, file->options.stop_s, info->duration_s);
    return false;
}

static bool open_parts(RfVideoFile *file, const char *const *paths, GError **error)
{
    for (int i = 0; paths[i] != NULL; i++) {
        RfVideoPart *part = rf_video_part_open(paths[i], &file->info, error);
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
    file->parts = g_ptr_array_new_with_free_func((GDestroyNotify)rf_video_part_free);
    file->stretches = g_array_new(FALSE, FALSE, sizeof(RfVideoStretch));
    file->keyframes = g_array_new(FALSE, FALSE, sizeof(RfVideoKeyframe));
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
    if (!file->info.is_indexed) return (double)index / MAX(file->info.frame_rate_hz, 1e-9);
    int p = (int)file->parts->len - 1;
    while (p > 0 && rf_video_file_part(file, p)->first_frame > index) p--;
    const RfVideoPart *part = rf_video_file_part(file, p);
    int64_t ticks = part->index->pts[index - part->first_frame];
    return rf_video_file_own_time_s(file, index, part->offset_s + rf_frame_clock_time_s(&part->clock, ticks));
}

int rf_video_file_stretches(const RfVideoFile *file)
{
    return (int)file->stretches->len;
}

int64_t rf_video_file_stretch_frames(const RfVideoFile *file, int stretch)
{
    const RfVideoStretch *one = &g_array_index(file->stretches, RfVideoStretch, stretch);
    return file->info.is_indexed ? one->end - one->first : file->info.frames_used;
}

int rf_video_file_keyframes(const RfVideoFile *file)
{
    return file->keyframes_used;
}

int64_t rf_video_file_keyframe(const RfVideoFile *file, int number)
{
    return g_array_index(file->keyframes, RfVideoKeyframe, file->keyframes_before + number).frame;
}
