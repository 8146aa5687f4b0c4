#include "cli/preview_film.h"

#include <math.h>
#include <string.h>

#include "tests/support/clip.h"

/* A recording of 12 s at 30 frames/s in which one droplet is there all the time; a switch at 6 s. */
enum { FRAMES = 360 };

typedef struct {
    RfSettings settings;
    RfResults *results;
    char *video, *scratch;
} Bench;

static Bench bench_new(const RfVideoWriterOptions *options)
{
    Bench bench = {.results = rf_results_new(),
                   .video = rf_clip_path("bench.mkv"),
                   .scratch = rf_clip_path("film.webm")};
    rf_clip_write(bench.video, options, 0, FRAMES, NULL);
    bench.settings.videos = g_ptr_array_new();
    g_ptr_array_add(bench.settings.videos, bench.video);
    for (int i = 0; i < FRAMES; i++) {
        const RfPathRow row = {
            .droplet = 1, .frame = i, .time_s = i / 30.0, .x_px = 20, .y_px = 10, .seen = true};
        g_array_append_val(bench.results->paths, row);
    }
    const RfSwitchRow row = {.number = 1, .time_s = {6.001, 0.002}};
    g_array_append_val(bench.results->switches, row);
    return bench;
}

static void bench_clear(Bench *bench)
{
    g_ptr_array_unref(bench->settings.videos);
    rf_results_free(bench->results);
    g_free(bench->video);
    g_free(bench->scratch);
}

static RfPreview *film(const Bench *bench, int threads)
{
    const RfFilmHooks hooks = {.threads = threads};
    GError *error = NULL;
    RfPreview *preview = rf_preview_film(&bench->settings, bench->results, &hooks, bench->scratch, &error);
    g_assert_no_error(error);
    g_assert_false(g_file_test(bench->scratch, G_FILE_TEST_EXISTS));
    return preview;
}

static void frames_are_the_recordings(void)
{
    Bench bench = bench_new(RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 30));
    g_autoptr(RfPreview) preview = film(&bench, 1);
    g_assert_cmpint(preview->width, ==, 64);
    g_assert_cmpint(preview->height, ==, 48);
    for (guint i = 0; i < preview->frames->len; i++) {
        const RfPreviewFrame *shot = &g_array_index(preview->frames, RfPreviewFrame, i);
        g_assert_cmpfloat(fabs(shot->time_s - (double)shot->frame / 30), <, 1e-9);
        if (i) g_assert_cmpuint(shot->film_ms, >=, (shot - 1)->film_ms + 4);
    }
    bench_clear(&bench);
}

static void moments_have_every_frame(void)
{
    Bench bench = bench_new(RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 30));
    g_autoptr(RfPreview) preview = film(&bench, 1);
    g_assert_cmpuint(preview->moments->len, ==, 1);
    const RfMoment *moment = &g_array_index(preview->moments, RfMoment, 0);
    const RfPreviewFrame *shots = (const RfPreviewFrame *)(const void *)preview->frames->data;
    g_assert_true(moment->is_filmed);
    g_assert_cmpint(shots[moment->at].frame, ==, 180);
    g_assert_cmpint(shots[moment->first].frame, ==, 172);
    g_assert_cmpint(shots[moment->last].frame, ==, 188);
    g_assert_cmpuint(moment->last - moment->first, ==, 16);
    bench_clear(&bench);
}

/* What the browser steps through is the very picture that the page says: the spot of the clip moves from frame to frame,
 * so that the nearest picture of the recording can be told. */
static double distance(const RfFrame *shot, int64_t picture)
{
    double sum = 0;
    for (int y = 0; y < shot->height; y++)
        for (int x = 0; x < shot->width; x++) {
            const double seen = ((const uint8_t *)shot->luma)[y * shot->stride_bytes + x];
            sum += pow(seen - rf_clip_level(picture, x, y, 8), 2);
        }
    return sum;
}

static void the_film_shows_them(void)
{
    Bench bench = bench_new(RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 30));
    g_autoptr(RfPreview) preview = film(&bench, 1);
    g_autofree char *copy = rf_clip_path("copy.webm");
    gsize length;
    const void *bytes = g_bytes_get_data(preview->film, &length);
    g_assert_true(g_file_set_contents(copy, bytes, (gssize)length, NULL));
    g_autoptr(RfVideoFile) file = rf_video_file_open((const char *const[]){copy, NULL}, NULL, NULL);
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, 1, NULL);
    RfFrame shot;
    guint n = 0, right = 0;
    for (; rf_video_file_next(reader, &shot, NULL) == RF_VIDEO_FRAME; n++) {
        const RfPreviewFrame *said = &g_array_index(preview->frames, RfPreviewFrame, n);
        g_assert_cmpfloat(fabs(shot.time_s - said->film_ms / 1000.0), <, 1e-6);
        const double here = distance(&shot, said->frame);
        right += here < distance(&shot, said->frame - 4) && here < distance(&shot, said->frame + 4);
    }
    g_assert_cmpuint(n, ==, preview->frames->len);
    g_assert_cmpuint(right, ==, n);
    bench_clear(&bench);
}

static void threads_change_nothing(void)
{
    Bench bench = bench_new(RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 60, .b_frames = 2));
    g_autoptr(RfPreview) one = film(&bench, 1);
    g_autoptr(RfPreview) four = film(&bench, 4);
    g_assert_true(g_bytes_equal(one->film, four->film));
    bench_clear(&bench);
}

static int yes(void)
{
    return true;
}

static void stops_on_request(void)
{
    Bench bench = bench_new(RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1));
    const RfFilmHooks hooks = {.is_cancelled = yes};
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_preview_film(&bench.settings, bench.results, &hooks, bench.scratch, &error));
    g_assert_error(error, RF_VIDEO_ERROR, (int)RF_VIDEO_ERROR_CANCELLED);
    g_assert_false(g_file_test(bench.scratch, G_FILE_TEST_EXISTS));
    bench_clear(&bench);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/preview_film/frames/are-the-recordings", frames_are_the_recordings);
    g_test_add_func("/preview_film/frames/the-film-shows-them", the_film_shows_them);
    g_test_add_func("/preview_film/moments/have-every-frame", moments_have_every_frame);
    g_test_add_func("/preview_film/bytes/threads-change-nothing", threads_change_nothing);
    g_test_add_func("/preview_film/stops-on-request", stops_on_request);
    const int status = g_test_run();
    rf_clip_clean();
    return status;
}
