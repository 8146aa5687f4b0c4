/* Files that were cut, spoilt or made up: whatever they claim, reading them ends, in frames that make sense or in words. */
#include <string.h>
#include <sys/resource.h>

#include "tests/support/any_video.h"
#include "tests/support/clip.h"
#include "tracker/video_file.h"

#define FRAMES 40
#define MOST_FRAMES 3000 /* what 40 frames' bytes could become at most */

typedef struct {
    int refused, ended_early, read;
} Outcome;

static void try_bytes(const char *name, const void *bytes, size_t size, int threads, Outcome *outcome)
{
    g_autofree char *path = rf_clip_path(name);
    g_assert_true(g_file_set_contents(path, bytes, (gssize)size, NULL));
    RfAnyVideo seen = rf_any_video_read(path, threads, MOST_FRAMES);
    outcome->refused += seen.is_refused;
    outcome->read += seen.is_opened;
    outcome->ended_early += seen.is_opened && seen.frames < FRAMES;
}

static const char *const names[] = {"whole.mkv", "whole.mp4", "whole.avi", "whole.mpg"};

static char *clip_bytes(int number, size_t *size)
{
    const RfVideoWriterOptions options[] = {
        *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 8),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 12, .b_frames = 2),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG),
        *RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2, .keyframe_every = 12, .b_frames = 2, .frame_rate_hz = 25),
    };
    g_autofree char *path = rf_clip_path(names[number]);
    rf_clip_write(path, &options[number], 0, FRAMES, NULL);
    char *bytes = NULL;
    g_assert_true(g_file_get_contents(path, &bytes, size, NULL));
    return bytes;
}

static int rounds(void)
{
    const char *wanted = g_getenv("RISEFALL_HOSTILE_ROUNDS");
    return wanted != NULL ? (int)g_ascii_strtoll(wanted, NULL, 10) : 12;
}

static void test_cut(void)
{
    for (int i = 0; i < (int)G_N_ELEMENTS(names); i++) {
        size_t size = 0;
        g_autofree char *bytes = clip_bytes(i, &size);
        Outcome outcome = {0, 0, 0};
        for (int k = 0; k <= rounds(); k++) {
            try_bytes(names[i], bytes, size * (size_t)k / (size_t)rounds(), 1 + k % 2, &outcome);
        }
        g_test_message("%s: %d refused, %d read, %d of these short", names[i], outcome.refused, outcome.read,
                       outcome.ended_early);
        g_assert_cmpint(outcome.refused, >, 0); /* nothing at all is no video */
        g_assert_cmpint(outcome.read, >, 0);    /* all of it is */
    }
}

/* A few bits anywhere, or, every third time, many within the first kilobyte, where the claims are. */
static void spoil(char *bytes, size_t size, GRand *dice, int round)
{
    size_t reach = round % 3 == 0 ? MIN(size, 1024) : size;
    int flips = round % 3 == 0 ? 1 + round % 9 : 1 + round % 40;
    for (int i = 0; i < flips; i++) {
        size_t at = (size_t)g_rand_int_range(dice, 0, (int)reach);
        bytes[at] =
            (char)(i % 4 == 3 ? g_rand_int(dice) : (unsigned)bytes[at] ^ 1u << g_rand_int_range(dice, 0, 8));
    }
}

static void test_flipped(void)
{
    g_autoptr(GRand) dice = g_rand_new_with_seed(1913);
    for (int i = 0; i < (int)G_N_ELEMENTS(names); i++) {
        size_t size = 0;
        g_autofree char *bytes = clip_bytes(i, &size), *spoilt = g_malloc(size);
        Outcome outcome = {0, 0, 0};
        for (int k = 0; k < 4 * rounds(); k++) {
            memcpy(spoilt, bytes, size);
            spoil(spoilt, size, dice, k);
            try_bytes(names[i], spoilt, size, 1 + k % 2, &outcome);
        }
        g_test_message("%s: %d refused, %d read, %d of these short", names[i], outcome.refused, outcome.read,
                       outcome.ended_early);
        g_assert_cmpint(outcome.read, >, 0);
    }
}

/* ---- sizes ---- */

static void try_size(int width, int height, bool is_taken)
{
    g_autoptr(GString) film = g_string_new(NULL);
    g_string_printf(film, "YUV4MPEG2 W%d H%d F25:1 Ip Cmono\n", width, height);
    for (int n = 0; n < FRAMES && is_taken; n++) {
        g_string_append(film, "FRAME\n");
        for (int i = 0; i < width * height; i++) g_string_append_c(film, (char)(i * 7 + n));
    }
    if (!is_taken) g_string_append(film, "FRAME\nfew pixels");
    Outcome outcome = {0, 0, 0};
    try_bytes("size.y4m", film->str, film->len, 1, &outcome);
    g_assert_cmpint(outcome.refused, ==, is_taken ? 0 : 1);
    g_assert_cmpint(outcome.ended_early, ==, 0);
}

static void test_sizes(void)
{
    try_size(1, 1, true);
    try_size(16384, 16, true);
    try_size(3, 1000, true);
    try_size(16385, 16, false);
    try_size(0, 16, false);
    try_size(-5, 16, false);
    try_size(2000000000, 2000000000, false);
}

/* Headers that promise the largest picture allowed, and nothing behind them: nobody takes their word for it. */
static void test_promises(void)
{
    struct rusage before, after;
    getrusage(RUSAGE_SELF, &before);
    try_size(16384, 16384, false);
    static const char pgm[] = "P5\n16384 16384\n65535\nfew pixels";
    g_autofree char *path = rf_clip_path("large.pgm");
    g_assert_true(g_file_set_contents(path, pgm, sizeof pgm - 1, NULL));
    GError *error = NULL;
    RfStill *still = rf_video_file_read_still(path, &error);
    g_assert_null(still);
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_DAMAGED);
    g_error_free(error);
    getrusage(RUSAGE_SELF, &after);
    long grown_mib = (after.ru_maxrss - before.ru_maxrss) / 1024;
    g_test_message("%ld MiB more", grown_mib);
    g_assert_cmpint(grown_mib, <, 64);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/video-hostile/promises", test_promises);
    g_test_add_func("/video-hostile/sizes", test_sizes);
    g_test_add_func("/video-hostile/cut", test_cut);
    g_test_add_func("/video-hostile/flipped", test_flipped);
    int status = g_test_run();
    rf_clip_clean();
    return status;
}
