#include "tracker/frame_feed.h"

#define DEFAULT_RESULTS_IN_FLIGHT 8192
#define OWN_RESULTS_WAITING 64

typedef struct {
    RfFrame frame; /* without luma */
    void *result;
} Seen;

typedef struct { /* what has been found in one stretch and not yet been consumed */
    GArray *seen;
    bool is_done;
    GError *error;
} Yield;

typedef struct {
    const RfVideoFile *file;
    const RfFrameLook *look;
    int threads, workers, stretches;
    int64_t in_flight_limit;
    int64_t done;
    GMutex lock; /* guards all below */
    GCond changed;
    Yield *yields; /* one per stretch */
    int next_stretch, consuming;
    int64_t waiting; /* results in all yields */
    bool is_stopped;
    RfVideoFaults faults;
} Feed;

typedef struct {
    Feed *feed;
    void *scratch;
} Worker;

static void add_faults(RfVideoFaults *sum, const RfVideoFaults *more)
{
    sum->frames += more->frames;
    sum->damaged += more->damaged;
    sum->lost += more->lost;
    sum->missing += more->missing;
    sum->backwards += more->backwards;
    bool is_first =
        more->first_fault_s >= 0 && (sum->first_fault_s < 0 || more->first_fault_s < sum->first_fault_s);
    if (is_first) sum->first_fault_s = more->first_fault_s;
}

/* Where stretches are fewer than threads, libav's own threads take the rest; so also for the last ones, during which
 * other workers run out of work. */
static int decoder_threads(const Feed *feed, int stretch)
{
    int left = feed->stretches - stretch;
    int beside = MIN(left, feed->workers);
    return MAX(1, feed->threads / beside);
}

static bool is_cancelled(const Feed *feed, GError **error)
{
    if (feed->look->is_cancelled == NULL || !feed->look->is_cancelled()) return false;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CANCELLED,
                "stopped on request after %" G_GINT64_FORMAT " frames", feed->done);
    return true;
}

static void free_result(const Feed *feed, void *result)
{
    if (feed->look->result_free != NULL && result != NULL) feed->look->result_free(result);
}

static RfVideoStep see_next(const Feed *feed, RfVideoReader *reader, void *scratch, Seen *seen,
                            GError **error)
{
    if (is_cancelled(feed, error)) return RF_VIDEO_FAILED;
    RfVideoStep step = rf_video_file_next(reader, &seen->frame, error);
    if (step != RF_VIDEO_FRAME) return step;
    seen->result = feed->look->look(&seen->frame, scratch, feed->look->user);
    seen->frame.luma = NULL;
    return step;
}

static bool consume(Feed *feed, const Seen *seen, GError **error)
{
    feed->done++;
    if (!feed->look->consume(&seen->frame, seen->result, feed->look->user, error)) {
        g_prefix_error(error, "frame %" G_GINT64_FORMAT ": ", seen->frame.index);
        return false;
    }
    if (feed->look->progress != NULL) {
        feed->look->progress(feed->done, rf_video_file_info(feed->file)->frames_used, feed->look->user);
    }
    return true;
}

/* ---- one thread: no queue at all ---- */

static bool run_stretch_here(Feed *feed, RfVideoReader *reader, int stretch, void *scratch, GError **error)
{
    if (!rf_video_file_enter_stretch(reader, stretch, 1, error)) return false;
    Seen seen;
    RfVideoStep step;
    while ((step = see_next(feed, reader, scratch, &seen, error)) == RF_VIDEO_FRAME) {
        if (!consume(feed, &seen, error)) return false;
    }
    return step == RF_VIDEO_END;
}

static bool run_here(Feed *feed, void *scratch, GError **error)
{
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(feed->file, 1, error);
    bool is_fine = reader != NULL;
    for (int s = 0; is_fine && s < feed->stretches; s++)
        is_fine = run_stretch_here(feed, reader, s, scratch, error);
    if (reader != NULL) {
        RfVideoFaults met = rf_video_file_faults(reader);
        add_faults(&feed->faults, &met);
    }
    return is_fine;
}

/* ---- many threads ---- */

/* The stretch that is being consumed may always go on, or nothing would ever be consumed. */
static bool may_put(const Feed *feed, int stretch)
{
    if (feed->is_stopped || feed->waiting < feed->in_flight_limit) return true;
    return stretch == feed->consuming && feed->yields[stretch].seen->len < OWN_RESULTS_WAITING;
}

static bool put(Feed *feed, int stretch, const Seen *seen)
{
    g_mutex_lock(&feed->lock);
    while (!may_put(feed, stretch)) g_cond_wait(&feed->changed, &feed->lock);
    bool is_wanted = !feed->is_stopped;
    if (is_wanted) {
        g_array_append_val(feed->yields[stretch].seen, *seen);
        feed->waiting++;
        if (stretch == feed->consuming) g_cond_broadcast(&feed->changed);
    }
    g_mutex_unlock(&feed->lock);
    if (!is_wanted) free_result(feed, seen->result);
    return is_wanted;
}

static void close_yield(Feed *feed, int stretch, GError *error)
{
    g_mutex_lock(&feed->lock);
    feed->yields[stretch].is_done = true;
    feed->yields[stretch].error = error;
    g_cond_broadcast(&feed->changed);
    g_mutex_unlock(&feed->lock);
}

static int take_stretch(Feed *feed)
{
    g_mutex_lock(&feed->lock);
    int stretch = feed->is_stopped || feed->next_stretch >= feed->stretches ? -1 : feed->next_stretch++;
    g_mutex_unlock(&feed->lock);
    return stretch;
}

static void run_stretch(Feed *feed, RfVideoReader **reader, int stretch, void *scratch)
{
    GError *error = NULL;
    if (*reader == NULL)
        *reader = rf_video_file_reader_new(feed->file, decoder_threads(feed, stretch), &error);
    if (*reader != NULL &&
        rf_video_file_enter_stretch(*reader, stretch, decoder_threads(feed, stretch), &error)) {
        Seen seen;
        while (see_next(feed, *reader, scratch, &seen, &error) == RF_VIDEO_FRAME && put(feed, stretch, &seen))
            continue;
    }
    close_yield(feed, stretch, error);
}

static void *work(void *data)
{
    Worker *worker = data;
    Feed *feed = worker->feed;
    RfVideoReader *reader = NULL;
    int stretch;
    while ((stretch = take_stretch(feed)) >= 0) run_stretch(feed, &reader, stretch, worker->scratch);
    if (reader != NULL) {
        RfVideoFaults met = rf_video_file_faults(reader);
        g_mutex_lock(&feed->lock);
        add_faults(&feed->faults, &met);
        g_mutex_unlock(&feed->lock);
        rf_video_reader_free(reader);
    }
    return NULL;
}

static bool consume_batch(Feed *feed, GArray *batch, GError **error)
{
    bool is_fine = true;
    for (unsigned i = 0; i < batch->len; i++) {
        const Seen *seen = &g_array_index(batch, Seen, i);
        if (is_fine)
            is_fine = consume(feed, seen, error);
        else
            free_result(feed, seen->result);
    }
    return is_fine;
}

/* All that waits in the stretch being consumed; empty only when the stretch is done. */
static GArray *take_batch(Feed *feed)
{
    GArray *fresh = g_array_new(FALSE, FALSE, sizeof(Seen));
    g_mutex_lock(&feed->lock);
    Yield *yield = &feed->yields[feed->consuming];
    while (yield->seen->len == 0 && !yield->is_done) g_cond_wait(&feed->changed, &feed->lock);
    GArray *batch = yield->seen;
    yield->seen = fresh;
    feed->waiting -= batch->len;
    g_cond_broadcast(&feed->changed);
    g_mutex_unlock(&feed->lock);
    return batch;
}

static void consume_next_stretch(Feed *feed)
{
    g_mutex_lock(&feed->lock);
    feed->consuming++;
    g_cond_broadcast(&feed->changed);
    g_mutex_unlock(&feed->lock);
}

static bool consume_all(Feed *feed, GError **error)
{
    while (feed->consuming < feed->stretches) {
        g_autoptr(GArray) batch = take_batch(feed);
        Yield *yield = &feed->yields[feed->consuming];
        if (batch->len > 0) {
            if (!consume_batch(feed, batch, error)) return false;
        } else if (yield->error != NULL) {
            g_propagate_error(error, g_steal_pointer(&yield->error));
            return false;
        } else {
            consume_next_stretch(feed);
        }
    }
    return true;
}

static void clear_yields(Feed *feed)
{
    for (int s = 0; s < feed->stretches; s++) {
        Yield *yield = &feed->yields[s];
        for (unsigned i = 0; i < yield->seen->len; i++)
            free_result(feed, g_array_index(yield->seen, Seen, i).result);
        g_array_unref(yield->seen);
        g_clear_error(&yield->error);
    }
    g_free(feed->yields);
}

static bool run_side_by_side(Feed *feed, Worker *workers, GError **error)
{
    g_mutex_init(&feed->lock);
    g_cond_init(&feed->changed);
    feed->yields = g_new0(Yield, feed->stretches);
    for (int s = 0; s < feed->stretches; s++) feed->yields[s].seen = g_array_new(FALSE, FALSE, sizeof(Seen));
    GThread **threads = g_new(GThread *, feed->workers);
    for (int w = 0; w < feed->workers; w++) threads[w] = g_thread_new("rf-look", work, &workers[w]);
    bool is_fine = consume_all(feed, error);
    g_mutex_lock(&feed->lock);
    feed->is_stopped = true;
    g_cond_broadcast(&feed->changed);
    g_mutex_unlock(&feed->lock);
    for (int w = 0; w < feed->workers; w++) g_thread_join(threads[w]);
    g_free(threads);
    clear_yields(feed);
    g_cond_clear(&feed->changed);
    g_mutex_clear(&feed->lock);
    return is_fine;
}

static Worker *workers_new(Feed *feed)
{
    Worker *workers = g_new0(Worker, feed->workers);
    for (int w = 0; w < feed->workers; w++) {
        workers[w].feed = feed;
        if (feed->look->worker_new != NULL) workers[w].scratch = feed->look->worker_new(feed->look->user);
    }
    return workers;
}

static void workers_free(Feed *feed, Worker *workers)
{
    for (int w = 0; w < feed->workers; w++) {
        if (feed->look->worker_free != NULL) feed->look->worker_free(workers[w].scratch);
    }
    g_free(workers);
}

bool rf_frame_feed_run(const RfVideoFile *file, const RfFrameLook *look, const RfFrameFeedOptions *options,
                       RfVideoFaults *faults, GError **error)
{
    Feed feed = {
        .file = file, .look = look, .stretches = rf_video_file_stretches(file), .faults.first_fault_s = -1};
    int threads = options != NULL ? options->threads : 0;
    int limit = options != NULL ? options->results_in_flight : 0;
    feed.threads = threads > 0 ? threads : (int)g_get_num_processors();
    feed.in_flight_limit = limit > 0 ? limit : DEFAULT_RESULTS_IN_FLIGHT;
    feed.workers = MIN(feed.threads, feed.stretches);
    Worker *workers = workers_new(&feed);
    bool is_fine = feed.threads == 1 ? run_here(&feed, workers[0].scratch, error)
                                     : run_side_by_side(&feed, workers, error);
    workers_free(&feed, workers);
    if (faults != NULL) *faults = feed.faults;
    return is_fine;
}

/* ---- samples ---- */

typedef struct {
    const RfVideoFile *file;
    const RfSampling *how;
    int groups, each; /* keyframes taken, and samples from each on */
    int next;         /* group; atomic */
    int is_enough;    /* atomic */
    GMutex lock;      /* guards the two below */
    int failed_group;
    GError *error; /* of the first group that failed, whoever met it first */
} Sampling;

/* Up to `samples` frames, `spacing` apart, from where the reader stands, into slots from `slot` on; none at or after
 * frame `end`. */
static bool sample_run(Sampling *sampling, RfVideoReader *reader, int slot, int samples, int64_t end,
                       GError **error)
{
    int taken = 0;
    for (int64_t n = 0; taken < samples && !g_atomic_int_get(&sampling->is_enough); n++) {
        RfFrame frame;
        RfVideoStep step = rf_video_file_next(reader, &frame, error);
        if (step != RF_VIDEO_FRAME) return step == RF_VIDEO_END;
        if (frame.index >= end) return true;
        if (n % sampling->how->spacing_frames != 0) continue;
        if (!sampling->how->take(&frame, slot + taken, sampling->how->user))
            g_atomic_int_set(&sampling->is_enough, 1);
        taken++;
    }
    return true;
}

static bool sample_group(Sampling *sampling, RfVideoReader *reader, int group, GError **error)
{
    const RfVideoFile *file = sampling->file;
    int keyframes = rf_video_file_keyframes(file);
    int k = (int)((2 * (int64_t)group + 1) * keyframes / (2 * (int64_t)sampling->groups));
    int64_t end = k + 1 < keyframes ? rf_video_file_keyframe(file, k + 1) : INT64_MAX;
    return rf_video_file_go_to(reader, rf_video_file_keyframe(file, k), error) &&
           sample_run(sampling, reader, group * sampling->each, sampling->each, end, error);
}

static void keep_error(Sampling *sampling, int group, GError *error)
{
    g_mutex_lock(&sampling->lock);
    if (!sampling->error || group < sampling->failed_group) {
        g_clear_error(&sampling->error);
        sampling->error = g_steal_pointer(&error);
        sampling->failed_group = group;
    }
    g_mutex_unlock(&sampling->lock);
    g_clear_error(&error);
}

static void *sample_groups(void *data)
{
    Sampling *sampling = data;
    g_autoptr(RfVideoReader) reader = NULL;
    int group;
    while ((group = g_atomic_int_add(&sampling->next, 1)) < sampling->groups &&
           !g_atomic_int_get(&sampling->is_enough)) {
        GError *error = NULL;
        if (!reader) reader = rf_video_file_reader_new(sampling->file, 1, &error);
        if (!reader || !sample_group(sampling, reader, group, &error)) keep_error(sampling, group, error);
    }
    return NULL;
}

static bool sample_side_by_side(Sampling *sampling, GError **error)
{
    enum { MOST_HELPERS = 63 };
    GThread *helpers[MOST_HELPERS];
    int threads = sampling->how->threads > 0 ? sampling->how->threads : (int)g_get_num_processors();
    int n = CLAMP(MIN(threads, sampling->groups) - 1, 0, MOST_HELPERS);
    g_mutex_init(&sampling->lock);
    for (int i = 0; i < n; i++) helpers[i] = g_thread_new("rf-sample", sample_groups, sampling);
    sample_groups(sampling);
    for (int i = 0; i < n; i++) g_thread_join(helpers[i]);
    g_mutex_clear(&sampling->lock);
    if (!sampling->error) return true;
    g_propagate_error(error, sampling->error);
    return false;
}

bool rf_frame_feed_sample(const RfVideoFile *file, const RfSampling *how, GError **error)
{
    g_return_val_if_fail(how->frames >= 1 && how->spacing_frames >= 1, false);
    Sampling sampling = {.file = file, .how = how, .groups = MIN(how->frames, rf_video_file_keyframes(file))};
    if (sampling.groups > 0) {
        sampling.each = (how->frames + sampling.groups - 1) / sampling.groups;
        return sample_side_by_side(&sampling, error);
    }
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, 1, error);
    return reader && sample_run(&sampling, reader, 0, how->frames, INT64_MAX, error);
}
