#include "cli/watch.h"

#include "tracker/coding_noise.h"
#include "tracker/frame_feed.h"

enum { SAMPLE_FRAMES = 60, SAMPLE_SPACING_FRAMES = 8 };

RfVideoFile *rf_watch_open(const RfSettings *settings, GError **error)
{
    g_autoptr(GPtrArray) paths = g_ptr_array_new();
    for (guint i = 0; i < settings->videos->len; i++)
        g_ptr_array_add(paths, g_ptr_array_index(settings->videos, i));
    g_ptr_array_add(paths, NULL);
    RfVideoOptions options = {
        .start_s = settings->start_s.is_set ? settings->start_s.v.value : 0,
        .stop_s = settings->stop_s.is_set ? settings->stop_s.v.value : 0,
        .frame_rate_hz = settings->frame_rate_hz.is_set ? settings->frame_rate_hz.v : (RfValue){0},
    };
    return rf_video_file_open((const char *const *)paths->pdata, &options, error);
}

static bool take_sample(const RfFrame *frame, int slot, void *user)
{
    rf_picture_sample_put(user, (unsigned)slot, frame);
    return true;
}

RfSpotFinder *rf_watch_learn(const RfVideoFile *video, int threads, GError **error)
{
    const RfVideoInfo *info = rf_video_file_info(video);
    const RfFrame like = {.width = info->width, .height = info->height, .bit_depth = info->bit_depth};
    g_autoptr(RfPictureSample) sample = rf_picture_sample_new(info->pixel_aspect);
    RfSampling how = {.frames = MIN(SAMPLE_FRAMES, (int)rf_picture_sample_capacity(&like)),
                      .spacing_frames = SAMPLE_SPACING_FRAMES,
                      .threads = threads,
                      .take = take_sample,
                      .user = sample};
    if (!rf_frame_feed_sample(video, &how, error) || !rf_picture_sample_settle(sample, error)) return NULL;
    RfSpotFinderOptions options = RF_SPOT_FINDER_DEFAULTS;
    options.threads = threads;
    return rf_spot_finder_learn(sample, &options, error);
}

/* One pass: what the workers share, and what the ordered consumer keeps. */
typedef struct {
    RfWatch *watch;
    const RfWatchHooks *hooks;
    double field_interval_s;
    RfLook *previous;
} Pass;

typedef struct {
    RfSpotScratch *scratch;
} Worker;

typedef struct {
    RfLook look;
    GError *error;
} Result;

static void *worker_new(void *user)
{
    Worker *worker = g_new0(Worker, 1);
    worker->scratch = rf_spot_scratch_new(((Pass *)user)->watch->finder);
    return worker;
}

static void worker_free(void *data)
{
    Worker *worker = data;
    rf_spot_scratch_free(worker->scratch);
    g_free(worker);
}

static void result_free(void *data)
{
    Result *result = data;
    rf_look_clear(&result->look);
    g_clear_error(&result->error);
    g_free(result);
}

static void *look_at(const RfFrame *frame, void *worker, void *user)
{
    const Pass *pass = user;
    Result *result = g_new0(Result, 1);
    rf_look_init(&result->look);
    rf_spot_finder_look(pass->watch->finder, ((Worker *)worker)->scratch, frame, pass->field_interval_s,
                        &result->look, &result->error);
    return result;
}

static void keep_as_previous(Pass *pass, Result *result)
{
    if (pass->previous)
        rf_look_clear(pass->previous);
    else
        pass->previous = g_new0(RfLook, 1);
    *pass->previous = result->look;
    g_free(result);
}

static bool consume(const RfFrame *frame, void *data, void *user, GError **error)
{
    Pass *pass = user;
    Result *result = data;
    if (result->error) {
        g_propagate_prefixed_error(error, g_steal_pointer(&result->error), "frame %" G_GINT64_FORMAT ": ",
                                   frame->index);
        result_free(result);
        return false;
    }
    rf_spot_finder_mark_repeats(pass->watch->finder, pass->previous, &result->look);
    for (unsigned i = 0; i < result->look.exposures; i++)
        pass->watch->repeated += (result->look.exposure[i].flags & RF_EXPOSURE_REPEATED) != 0;
    rf_look_append(&result->look, pass->watch->sightings);
    keep_as_previous(pass, result);
    return true;
}

static void on_progress(int64_t done, int64_t total, void *user)
{
    const Pass *pass = user;
    if (pass->hooks->progress) pass->hooks->progress("watching", done, total);
}

static bool look_at_all(RfWatch *watch, const RfWatchHooks *hooks, GError **error)
{
    const RfVideoInfo *info = rf_video_file_info(watch->video);
    Pass pass = {.watch = watch, .hooks = hooks, .field_interval_s = 0.5 / info->frame_rate_hz};
    RfFrameLook how = {
        .look = look_at,
        .consume = consume,
        .result_free = result_free,
        .worker_new = worker_new,
        .worker_free = worker_free,
        .progress = on_progress,
        .user = &pass,
    };
    RfFrameFeedOptions options = {.threads = hooks->threads};
    bool is_done = rf_frame_feed_run(watch->video, &how, &options, &watch->faults, error);
    if (pass.previous) rf_look_clear(pass.previous);
    g_free(pass.previous);
    return is_done;
}

/* All codecs in use since H.264 but MPEG-4's first visual part; those before have no filter in the loop. */
static bool predicts_from_smoothed(const char *codec)
{
    return codec && !g_str_has_prefix(codec, "mpeg") && !g_str_has_prefix(codec, "h263") &&
           g_strcmp0(codec, "dvvideo") != 0;
}

RfWatch *rf_watch_recording(const RfSettings *settings, const RfWatchHooks *hooks, GError **error)
{
    g_autoptr(RfWatch) watch = g_new0(RfWatch, 1);
    watch->video = rf_watch_open(settings, error);
    if (!watch->video) return NULL;
    const RfVideoInfo *info = rf_video_file_info(watch->video);
    watch->sightings = rf_sightings_new(info->width, info->height, info->pixel_aspect);
    watch->finder = rf_watch_learn(watch->video, hooks->threads, error);
    if (!watch->finder || !look_at_all(watch, hooks, error)) {
        g_prefix_error(error, "%s: ", (const char *)g_ptr_array_index(settings->videos, 0));
        return NULL;
    }
    watch->coding_noise = rf_coding_noise_apply(watch->sightings, predicts_from_smoothed(info->codec));
    return g_steal_pointer(&watch);
}

void rf_watch_free(RfWatch *watch)
{
    if (!watch) return;
    rf_sightings_free(watch->sightings);
    rf_spot_finder_free(watch->finder);
    rf_video_file_free(watch->video);
    g_free(watch);
}
