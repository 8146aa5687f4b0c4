#include "tracker/frame_feed.h"

#include <string.h>

#include "tests/support/clip.h"

typedef struct { /* what look() finds in a frame */
    uint64_t hash;
} Found;

typedef struct {
    GArray *rows; /* of Row, in the order of delivery */
    int64_t progressed, stop_at;
    int *alive; /* results made and not yet freed; atomic */
} Log;

typedef struct {
    int64_t index;
    double time_s;
    uint64_t hash;
    bool is_damaged;
} Row;

static void *look(const RfFrame *frame, void *worker, void *user)
{
    Log *log = user;
    Found *found = g_new(Found, 1);
    found->hash = rf_clip_hash(frame);
    g_atomic_int_inc(log->alive);
    g_assert_nonnull(worker);
    g_atomic_int_inc((int *)worker);
    return found;
}

static bool consume(const RfFrame *frame, void *result, void *user, GError **error)
{
    Log *log = user;
    Found *found = result;
    g_assert_null(frame->luma);
    Row row = {frame->index, frame->time_s, found->hash, frame->is_damaged};
    g_free(found);
    g_atomic_int_add(log->alive, -1);
    g_array_append_val(log->rows, row);
    if (log->stop_at <= 0 || (int64_t)log->rows->len < log->stop_at) return true;
    g_set_error_literal(error, g_quark_from_static_string("test"), 7, "enough");
    return false;
}

static int *count_of_living(void)
{
    static int alive;
    return &alive;
}

static void free_found(void *result)
{
    g_free(result);
    g_atomic_int_add(count_of_living(), -1);
}

static void *worker_new(void *user)
{
    (void)user;
    return g_new0(int, 1);
}

static void progress(int64_t done, int64_t total, void *user)
{
    Log *log = user;
    g_assert_cmpint(done, ==, log->progressed + 1);
    g_assert_cmpint(total, >, 0);
    log->progressed = done;
}

static RfFrameLook usual_look(Log *log)
{
    *log = (Log){g_array_new(FALSE, TRUE, sizeof(Row)), 0, 0, count_of_living()};
    return (RfFrameLook){.look = look,
                         .consume = consume,
                         .result_free = free_found,
                         .worker_new = worker_new,
                         .worker_free = g_free,
                         .progress = progress,
                         .user = log};
}

static RfVideoFile *open_clip(const char *path)
{
    GError *error = NULL;
    RfVideoFile *file = rf_video_file_open((const char *const[]){path, NULL}, NULL, &error);
    g_assert_no_error(error);
    return file;
}

static GArray *rows_with(const RfVideoFile *file, int threads, int in_flight, RfVideoFaults *faults)
{
    Log log;
    RfFrameLook what = usual_look(&log);
    GError *error = NULL;
    RfFrameFeedOptions options = {threads, in_flight};
    g_assert_true(rf_frame_feed_run(file, &what, &options, faults, &error));
    g_assert_no_error(error);
    g_assert_cmpint(*count_of_living(), ==, 0);
    g_assert_cmpint(log.progressed, ==, (int64_t)log.rows->len);
    return log.rows;
}

static void check_same(const char *name, const GArray *rows, const GArray *others)
{
    g_assert_cmpuint(rows->len, ==, others->len);
    for (unsigned i = 0; i < rows->len; i++) {
        const Row *one = &g_array_index(rows, Row, i), *other = &g_array_index(others, Row, i);
        if (one->index != other->index || one->hash != other->hash || one->is_damaged != other->is_damaged ||
            memcmp(&one->time_s, &other->time_s, sizeof one->time_s) != 0) {
            g_error("%s: frame %d differs", name, (int)one->index);
        }
    }
}

static void check_threads(const RfVideoFile *file, const char *name)
{
    RfVideoFaults faults, other_faults;
    g_autoptr(GArray) one = rows_with(file, 1, 0, &faults);
    for (int threads = 2; threads <= 8; threads *= 2) {
        g_autoptr(GArray) many = rows_with(file, threads, threads == 4 ? 3 : 0, &other_faults);
        check_same(name, one, many);
        g_assert_cmpint(faults.damaged, ==, other_faults.damaged);
        g_assert_cmpint(faults.lost, ==, other_faults.lost);
        g_assert_cmpfloat(faults.first_fault_s, ==, other_faults.first_fault_s);
    }
    g_test_message("%s: %u rows, %d stretches, %d damaged, %d lost", name, one->len,
                   rf_video_file_stretches(file), (int)faults.damaged, (int)faults.lost);
}

static const char *const clip_names[] = {"feed.mkv", "feed.mp4",       "feed.mpg",
                                         "feed.avi", "feed-whole.mkv", "feed-whole.mp4"};

static char *clip(int number, int frames)
{
    const RfVideoWriterOptions options[] = {
        *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 10),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 30, .b_frames = 2),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2, .width = 320, .height = 240, .quality = 2,
                 .keyframe_every = 12, .b_frames = 2, .is_open_gop = true),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 1000),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 1000, .b_frames = 2),
    };
    char *path = rf_clip_path(clip_names[number]);
    rf_clip_write(path, &options[number], 0, frames, NULL);
    return path;
}

static void test_threads(void)
{
    for (int i = 0; i < (int)G_N_ELEMENTS(clip_names); i++) {
        g_autofree char *path = clip(i, 240);
        g_autoptr(RfVideoFile) file = open_clip(path);
        check_threads(file, clip_names[i]);
        g_autoptr(GArray) rows = rows_with(file, 2, 0, NULL);
        g_assert_cmpuint(rows->len, ==, 240);
        for (unsigned n = 0; n < rows->len; n++) g_assert_cmpint(g_array_index(rows, Row, n).index, ==, n);
    }
}

/* Also in what the decoder makes of a broken file, threads mustn't show. */
static void test_threads_on_damage(void)
{
    for (int i = 0; i < (int)G_N_ELEMENTS(clip_names); i++) {
        g_autofree char *path = clip(i, 240), *bytes = NULL;
        size_t size = 0;
        g_assert_true(g_file_get_contents(path, &bytes, &size, NULL));
        for (size_t at = size / 3; at < size / 2; at += 1777) bytes[at] ^= 0x21;
        g_assert_true(g_file_set_contents(path, bytes, (gssize)size, NULL));
        g_autoptr(RfVideoFile) file = open_clip(path);
        check_threads(file, clip_names[i]);
    }
}

static int cancelled_after_50(void)
{
    static int polls;
    return g_atomic_int_add(&polls, 1) >= 50;
}

static void test_cancel(void)
{
    g_autofree char *path = clip(0, 240);
    g_autoptr(RfVideoFile) file = open_clip(path);
    Log log;
    RfFrameLook what = usual_look(&log);
    what.is_cancelled = cancelled_after_50;
    GError *error = NULL;
    g_assert_false(rf_frame_feed_run(file, &what, &(RfFrameFeedOptions){.threads = 2}, NULL, &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CANCELLED);
    g_assert_cmpuint(log.rows->len, <=, 50);
    g_assert_cmpint(*count_of_living(), ==, 0);
    g_clear_error(&error);
    g_array_unref(log.rows);
}

static void test_consumer_stops(void)
{
    for (int threads = 1; threads <= 2; threads++) {
        g_autofree char *path = clip(0, 240);
        g_autoptr(RfVideoFile) file = open_clip(path);
        Log log;
        RfFrameLook what = usual_look(&log);
        log.stop_at = 100;
        GError *error = NULL;
        g_assert_false(rf_frame_feed_run(file, &what, &(RfFrameFeedOptions){threads, 0}, NULL, &error));
        g_assert_error(error, g_quark_from_static_string("test"), 7);
        g_assert_cmpstr(error->message, ==, "frame 99: enough");
        g_assert_cmpuint(log.rows->len, ==, 100);
        g_assert_cmpint(*count_of_living(), ==, 0);
        g_clear_error(&error);
        g_array_unref(log.rows);
    }
}

/* Everything before the change is delivered, then the error says where. */
static void test_error_comes_in_order(void)
{
    g_autofree char *one = rf_clip_path("first.mkv"), *two = rf_clip_path("second.mkv");
    rf_clip_write(one, RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 0, 60, NULL);
    rf_clip_write(two, RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 60, 60, NULL);
    for (int threads = 1; threads <= 2; threads++) {
        GError *error = NULL;
        g_autoptr(RfVideoFile) file = rf_video_file_open((const char *const[]){one, two, NULL}, NULL, &error);
        g_assert_no_error(error);
        g_assert_true(g_file_set_contents(two, "gone", -1, NULL));
        Log log;
        RfFrameLook what = usual_look(&log);
        g_assert_false(rf_frame_feed_run(file, &what, &(RfFrameFeedOptions){threads, 0}, NULL, &error));
        g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_NOT_VIDEO);
        g_assert_nonnull(strstr(error->message, "second.mkv"));
        g_assert_cmpuint(log.rows->len, ==, 60);
        g_clear_error(&error);
        g_array_unref(log.rows);
        rf_clip_write(two, RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 60, 60, NULL);
    }
}

static bool take(const RfFrame *frame, int slot, void *user)
{
    (void)slot;
    GArray *taken = user;
    Row row = {frame->index, frame->time_s, rf_clip_hash(frame), false};
    g_array_append_val(taken, row);
    return taken->len < 30;
}

typedef struct {
    GMutex lock;
    uint64_t hash[256]; /* by slot; 0: none */
} Slots;

static bool take_slot(const RfFrame *frame, int slot, void *user)
{
    Slots *slots = user;
    g_assert_cmpint(slot, >=, 0);
    g_assert_cmpint(slot, <, (int)G_N_ELEMENTS(slots->hash));
    g_mutex_lock(&slots->lock);
    g_assert_cmpuint(slots->hash[slot], ==, 0);
    slots->hash[slot] = rf_clip_hash(frame);
    g_mutex_unlock(&slots->lock);
    return true;
}

/* Which frame goes where hangs on the file alone. */
static void check_slots(const RfVideoFile *file, int frames, int spacing)
{
    g_autofree Slots *one = g_new0(Slots, 1), *many = g_new0(Slots, 1);
    RfSampling how = {frames, spacing, .threads = 1, .take = take_slot, .user = one};
    g_mutex_init(&one->lock);
    g_mutex_init(&many->lock);
    g_assert_true(rf_frame_feed_sample(file, &how, NULL));
    how.threads = 3, how.user = many;
    g_assert_true(rf_frame_feed_sample(file, &how, NULL));
    g_assert_cmpmem(one->hash, sizeof one->hash, many->hash, sizeof many->hash);
    g_mutex_clear(&one->lock);
    g_mutex_clear(&many->lock);
}

static void check_samples(const RfVideoFile *file, int frames, int spacing, unsigned least, unsigned most,
                          int64_t reach)
{
    GError *error = NULL;
    g_autoptr(GArray) taken = g_array_new(FALSE, TRUE, sizeof(Row)),
                      again = g_array_new(FALSE, TRUE, sizeof(Row));
    g_autoptr(GArray) all = rows_with(file, 2, 0, NULL);
    RfSampling how = {frames, spacing, .threads = 1, .take = take, .user = taken};
    g_assert_true(rf_frame_feed_sample(file, &how, &error));
    how.user = again;
    g_assert_true(rf_frame_feed_sample(file, &how, &error));
    check_slots(file, frames, spacing);
    check_same("samples", taken, again);
    g_assert_cmpuint(taken->len, >=, least);
    g_assert_cmpuint(taken->len, <=, most);
    for (unsigned i = 0; i < taken->len; i++) {
        const Row *row = &g_array_index(taken, Row, i);
        g_assert_cmpuint(row->hash, ==, g_array_index(all, Row, row->index).hash);
        if (i > 0) g_assert_cmpint(row->index, >, g_array_index(taken, Row, i - 1).index);
    }
    g_assert_cmpint(g_array_index(taken, Row, taken->len - 1).index, >=, reach);
}

static void test_samples(void)
{
    g_autofree char *short_groups = clip(0, 240), *long_groups = clip(1, 240), *one_group = clip(5, 240);
    g_autoptr(RfVideoFile) many = open_clip(short_groups), few = open_clip(long_groups),
                           one = open_clip(one_group);
    check_samples(many, 12, 1, 12, 12, 200); /* 24 keyframes: every other one */
    check_samples(few, 24, 5, 24, 27, 220);  /* 8 or 9 groups: three from each, five frames apart */
    check_samples(one, 10, 20, 10, 10, 180); /* few groups: the rest of the ten 20 frames apart */
    check_samples(many, 240, 1, 30, 30, 29); /* take() has had enough after 30 */
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/frame-feed/run/threads-never-show", test_threads);
    g_test_add_func("/frame-feed/run/threads-never-show-on-damage", test_threads_on_damage);
    g_test_add_func("/frame-feed/run/cancel", test_cancel);
    g_test_add_func("/frame-feed/run/consumer-stops", test_consumer_stops);
    g_test_add_func("/frame-feed/run/error-comes-in-order", test_error_comes_in_order);
    g_test_add_func("/frame-feed/sample", test_samples);
    int status = g_test_run();
    rf_clip_clean();
    return status;
}
