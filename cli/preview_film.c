#include "cli/preview_film.h"

#include <glib/gstdio.h>
#include <math.h>

#include "cli/preview_plan.h"
#include "cli/watch.h"
#include "tracker/video_file.h"

/* Browsers step by decoding from the keyframe before: that many frames at most. */
enum { KEYFRAME_EVERY = 40 };

/* Droplets stay sharp; what it takes away is the grain between them. */
enum { FILM_CRF = 40 };

/* The film's clock has a container's ticks of a millisecond: its frames stay apart by more than a browser rounds. */
enum { LEAST_APART_MS = 4 };

typedef struct {
    const RfPreviewPlan *plan;
    const RfFilmHooks *hooks;
    RfVideoFile *video;
    RfVideoReader *reader;
    RfVideoWriter *writer;
    RfFilmPicture *picture;
    RfPreview *preview;
} Set;

/* ---- one frame ---- */

static unsigned film_time_ms(const Set *set, double time_s)
{
    const GArray *frames = set->preview->frames;
    if (frames->len == 0) return 0;
    const RfPreviewFrame *last = &g_array_index(frames, RfPreviewFrame, frames->len - 1);
    const double longest_s = 1.5 / set->plan->stretch_hz, apart_s = time_s - last->time_s;
    const double shown_s = apart_s > longest_s ? 1 / set->plan->stretch_hz : apart_s;
    return last->film_ms + (unsigned)MAX(LEAST_APART_MS, lround(1000 * shown_s));
}

static bool shoot(Set *set, const RfFrame *frame, GError **error)
{
    const RfPreviewFrame shot = {frame->index, frame->time_s, film_time_ms(set, frame->time_s)};
    const uint8_t *grey = rf_film_picture_of(set->picture, frame);
    g_array_append_val(set->preview->frames, shot);
    return rf_video_file_write(set->writer, grey, set->preview->width, shot.film_ms / 1000.0, error);
}

/* ---- the way through the recording ---- */

/* The first frame at or after time_s, by the file's index. */
static int64_t frame_at(const RfVideoFile *video, double time_s)
{
    int64_t low = 0, high = rf_video_file_info(video)->frames;
    while (low < high) {
        const int64_t middle = low + (high - low) / 2;
        if (rf_video_file_time_s(video, middle) < time_s)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

/* Going there pays only where a keyframe lies between: else decoding on is as near. */
static bool skip_ahead(Set *set, int64_t here, double wanted_s, GError **error)
{
    const RfVideoInfo *info = rf_video_file_info(set->video);
    if (!info->is_indexed) return true;
    const int64_t wanted = frame_at(set->video, wanted_s);
    if (wanted >= info->frames) return true;
    for (int i = rf_video_file_keyframes(set->video) - 1; i >= 0; i--) {
        const int64_t keyframe = rf_video_file_keyframe(set->video, i);
        if (keyframe <= here + 1) break;
        if (keyframe <= wanted) return rf_video_file_go_to(set->reader, wanted, error);
    }
    return true;
}

static double last_filmed_s(const Set *set)
{
    const GArray *frames = set->preview->frames;
    return frames->len ? g_array_index(frames, RfPreviewFrame, frames->len - 1).time_s : -HUGE_VAL;
}

static void tell_progress(const Set *set, double time_s)
{
    const double duration_s = rf_video_file_info(set->video)->duration_s;
    if (set->hooks->progress)
        set->hooks->progress("filming", (int64_t)(1000 * time_s), (int64_t)(1000 * duration_s));
}

static bool shoot_all(Set *set, GError **error)
{
    const double first_s = rf_preview_plan_next_s(set->plan, 0);
    if (!skip_ahead(set, -1, first_s, error)) return false;
    for (;;) {
        RfFrame frame;
        const RfVideoStep step = rf_video_file_next(set->reader, &frame, error);
        if (step != RF_VIDEO_FRAME) return step == RF_VIDEO_END;
        const double time_s = frame.time_s;
        const int64_t here = frame.index;
        if (rf_film_hooks_are_cancelled(set->hooks, error)) return false;
        if (rf_preview_plan_wants(set->plan, time_s, last_filmed_s(set)) && !shoot(set, &frame, error))
            return false;
        tell_progress(set, time_s);
        const double next_s = rf_preview_plan_next_s(set->plan, nextafter(time_s, HUGE_VAL));
        if (!isfinite(next_s)) return true;
        if (next_s > time_s + 0.5 && !skip_ahead(set, here, next_s, error)) return false;
    }
}

/* ---- moments ---- */

static void find_moment(const RfPreview *preview, RfMoment *moment, double frame_rate_hz)
{
    const double reach_s = (RF_PREVIEW_MOMENT_FRAMES / 2 + 0.5) / frame_rate_hz;
    double nearest_s = HUGE_VAL;
    for (guint i = 0; i < preview->frames->len; i++) {
        const double off_s = fabs(g_array_index(preview->frames, RfPreviewFrame, i).time_s - moment->time_s);
        if (off_s > reach_s) continue;
        if (!isfinite(nearest_s)) moment->first = i;
        moment->last = i;
        if (off_s < nearest_s) moment->at = i, nearest_s = off_s;
    }
    moment->is_filmed = nearest_s <= 1 / frame_rate_hz;
    if (!moment->is_filmed) moment->first = moment->at = moment->last = 0;
}

static void find_moments(RfPreview *preview, const GArray *planned, double frame_rate_hz)
{
    g_array_append_vals(preview->moments, planned->data, planned->len);
    for (guint i = 0; i < planned->len; i++)
        find_moment(preview, &g_array_index(preview->moments, RfMoment, i), frame_rate_hz);
}

/* ---- the film ---- */

static bool open_set(Set *set, const char *scratch, GError **error)
{
    const RfVideoInfo *info = rf_video_file_info(set->video);
    const int threads = set->hooks->threads > 0 ? set->hooks->threads : (int)g_get_num_processors();
    set->picture = rf_film_picture_new(info, RF_PREVIEW_LONGEST_PX);
    set->preview->width = rf_film_picture_width(set->picture);
    set->preview->height = rf_film_picture_height(set->picture);
    const RfVideoWriterOptions options = {
        .codec = RF_VIDEO_CODEC_VP9,
        .width = set->preview->width,
        .height = set->preview->height,
        .frame_rate_hz = set->plan->stretch_hz,
        .ticks_per_s = 1000,
        .keyframe_every = KEYFRAME_EVERY,
        .quality = FILM_CRF,
    };
    set->reader = rf_video_file_reader_new(set->video, threads, error);
    set->writer = set->reader ? rf_video_file_create(scratch, &options, error) : NULL;
    return set->writer != NULL;
}

static bool develop(Set *set, const char *scratch, GError **error)
{
    char *bytes;
    gsize length;
    if (!rf_video_file_finish(set->writer, error) || !g_file_get_contents(scratch, &bytes, &length, error))
        return false;
    set->preview->film = g_bytes_new_take(bytes, length);
    return true;
}

static void close_set(Set *set, const char *scratch)
{
    rf_video_writer_free(set->writer);
    rf_video_reader_free(set->reader);
    rf_film_picture_free(set->picture);
    g_remove(scratch);
}

RfPreview *rf_preview_film(const RfSettings *settings, const RfResults *results, const RfFilmHooks *hooks,
                           const char *scratch, GError **error)
{
    if (results->paths->len == 0) return NULL;
    g_autoptr(RfVideoFile) video = rf_watch_open(settings, error);
    if (!video) return NULL;
    const double frame_rate_hz = rf_video_file_info(video)->frame_rate_hz;
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, frame_rate_hz);
    g_autoptr(RfPreview) preview = rf_preview_new();
    Set set = {.plan = plan, .hooks = hooks, .video = video, .preview = preview};
    const bool is_done =
        open_set(&set, scratch, error) && shoot_all(&set, error) && develop(&set, scratch, error);
    close_set(&set, scratch);
    if (!is_done) return NULL;
    find_moments(preview, plan->moments, frame_rate_hz);
    return g_steal_pointer(&preview);
}
