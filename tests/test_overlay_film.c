#include "cli/overlay_film.h"

#include <string.h>

#include "cli/overlay_picture.h"
#include "tests/support/clip.h"

/* A recording of 2 s at 30 frames/s; a droplet at rest in it from frame 10 to frame 39. */
enum { FRAMES = 60, FIRST = 10, LAST = 39, X = 30, Y = 24 };

typedef struct {
    RfSettings settings;
    RfResults *results;
    char *video, *film;
} Bench;

static Bench bench_new(void)
{
    Bench bench = {
        .results = rf_results_new(), .video = rf_clip_path("bench.mkv"), .film = rf_clip_path("overlay.mp4")};
    rf_clip_write(bench.video, RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), 0, FRAMES, NULL);
    bench.settings.videos = g_ptr_array_new();
    g_ptr_array_add(bench.settings.videos, bench.video);
    for (int i = FIRST; i <= LAST; i++) {
        const RfPathRow row = {
            .droplet = 1, .frame = i, .time_s = i / 30.0, .x_px = X, .y_px = Y, .seen = true};
        g_array_append_val(bench.results->paths, row);
    }
    return bench;
}

static void bench_clear(Bench *bench)
{
    g_ptr_array_unref(bench->settings.videos);
    rf_results_free(bench->results);
    g_free(bench->video);
    g_free(bench->film);
}

static void film(const Bench *bench, int threads)
{
    const RfFilmHooks hooks = {.threads = threads};
    GError *error = NULL;
    g_assert_true(rf_overlay_film(&bench->settings, bench->results, &hooks, bench->film, &error));
    g_assert_no_error(error);
}

static int luma(const RfFrame *frame, int x, int y)
{
    return ((const uint8_t *)frame->luma)[y * frame->stride_bytes + x];
}

/* What the film brightens at the ring, more than 8 levels brighter than a few pixels farther out on average. */
static bool has_ring(const RfFrame *frame)
{
    static const int around[4][2] = {{-6, 0}, {0, -6}, {0, 6}, {-4, 4}};
    int ring = 0, beyond = 0;
    for (int i = 0; i < 4; i++) {
        ring += luma(frame, X + around[i][0], Y + around[i][1]);
        beyond += luma(frame, X + 2 * around[i][0], Y + 2 * around[i][1]);
    }
    return ring - beyond > 4 * 40;
}

static void every_frame_is_there_at_its_time(void)
{
    Bench bench = bench_new();
    film(&bench, 1);
    GError *error = NULL;
    const char *const paths[] = {bench.film, NULL};
    g_autoptr(RfVideoFile) video = rf_video_file_open(paths, NULL, &error);
    g_assert_no_error(error);
    const RfVideoInfo *info = rf_video_file_info(video);
    g_assert_cmpint(info->frames, ==, FRAMES);
    g_assert_cmpint(info->width, ==, 64);
    g_assert_cmpint(info->height, >, 48);
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(video, 1, &error);
    for (int i = 0; i < FRAMES; i++) {
        RfFrame frame;
        g_assert_cmpint(rf_video_file_next(reader, &frame, &error), ==, RF_VIDEO_FRAME);
        g_assert_cmpfloat_with_epsilon(frame.time_s, i / 30.0, 1e-4);
        /* the gradient and the clip's own moving spot are no rings */
        if (i == FIRST - 2 || i == LAST + 2) g_assert_false(has_ring(&frame));
        if (i == FIRST || i == (FIRST + LAST) / 2 || i == LAST) g_assert_true(has_ring(&frame));
    }
    bench_clear(&bench);
}

static void threads_change_nothing(void)
{
    Bench bench = bench_new();
    g_autofree char *one = NULL, *four = NULL;
    gsize one_length, four_length;
    film(&bench, 1);
    g_assert_true(g_file_get_contents(bench.film, &one, &one_length, NULL));
    film(&bench, 4);
    g_assert_true(g_file_get_contents(bench.film, &four, &four_length, NULL));
    g_assert_cmpmem(one, one_length, four, four_length);
    bench_clear(&bench);
}

static int yes(void)
{
    return true;
}

static void stops_on_request(void)
{
    Bench bench = bench_new();
    const RfFilmHooks hooks = {.is_cancelled = yes};
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_overlay_film(&bench.settings, bench.results, &hooks, bench.film, &error));
    g_assert_error(error, RF_VIDEO_ERROR, (int)RF_VIDEO_ERROR_CANCELLED);
    bench_clear(&bench);
}

static bool is_coloured(const uint8_t *rgb, int x, int y)
{
    const uint8_t *pixel = rgb + 3 * (y * 64 + x);
    return pixel[0] != pixel[1] || pixel[1] != pixel[2];
}

static void lines_stay_until_wiped(void)
{
    g_autoptr(RfOverlayPicture) picture = rf_overlay_picture_new(64, 48);
    g_autoptr(GArray) nobody = g_array_new(FALSE, FALSE, sizeof(RfOverlayMark));
    const RfOverlayMark from = {1, 5, 20, true}, to = {1, 50, 20, true};
    char *words[RF_OVERLAY_WORDS] = {NULL};
    uint8_t grey[64 * 48];
    memset(grey, 126, sizeof grey);
    rf_overlay_picture_add_line(picture, &from, &to);
    rf_overlay_picture_of(picture, grey, nobody, words);
    const uint8_t *rgb = rf_overlay_picture_of(picture, grey, nobody, words);
    g_assert_true(is_coloured(rgb, 30, 20));
    g_assert_false(is_coloured(rgb, 30, 30));
    g_assert_cmpint(rgb[3 * (30 * 64 + 30)], ==, 128); /* (126 - 16) 255/219 */
    rf_overlay_picture_wipe_lines(picture);
    g_assert_false(is_coloured(rf_overlay_picture_of(picture, grey, nobody, words), 30, 20));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/overlay_film/frames/every-one-at-its-time", every_frame_is_there_at_its_time);
    g_test_add_func("/overlay_film/bytes/threads-change-nothing", threads_change_nothing);
    g_test_add_func("/overlay_film/stops-on-request", stops_on_request);
    g_test_add_func("/overlay_film/lines/stay-until-wiped", lines_stay_until_wiped);
    const int status = g_test_run();
    rf_clip_clean();
    return status;
}
