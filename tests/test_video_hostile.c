/* Files that were cut, spoilt or made up: whatever they claim, reading them ends, in frames that make sense or in words. */
#include <math.h>
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

/* ---- claims ---- */

typedef struct {
    const char *atom; /* fourcc of the table that is spoilt */
    int word;         /* which of its 32-bit words after the fourcc, from 0, and what it says then */
    uint32_t says;
} Claim;

/* First place where the atom's name stands, or NULL. */
static char *find_atom(char *bytes, size_t size, const char *atom)
{
    return memmem(bytes, size, atom, 4);
}

static void write_word(char *at, uint32_t value, bool is_big_endian)
{
    value = is_big_endian ? GUINT32_TO_BE(value) : GUINT32_TO_LE(value);
    memcpy(at, &value, sizeof value);
}

/* Opened with one word of a table replaced; NULL: refused in words. */
static RfVideoFile *open_claiming(const char *name, const char *whole, size_t size, const Claim *claim)
{
    g_autofree char *bytes = g_memdup2(whole, size), *path = rf_clip_path(name);
    char *atom = find_atom(bytes, size, claim->atom);
    g_assert_nonnull(atom);
    write_word(atom + 4 + 4 * claim->word, claim->says, g_str_has_suffix(name, ".mp4"));
    g_assert_true(g_file_set_contents(path, bytes, (gssize)size, NULL));
    rf_any_video_read(path, 1, MOST_FRAMES);
    return rf_video_file_open((const char *const[]){path, NULL}, NULL, NULL);
}

static char *mp4_bytes(size_t *size)
{
    g_autofree char *path = rf_clip_path("claims.mp4");
    char *bytes = NULL;
    rf_clip_write(path, RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 12, .b_frames = 2), 0, FRAMES,
                  NULL);
    g_assert_true(g_file_get_contents(path, &bytes, size, NULL));
    return bytes;
}

/* Headers that promise a billion frames: what counts is what is there, and nothing is allocated for the promise. */
static void test_a_billion_frames(void)
{
    static const Claim mp4_claims[] = {
        {"stts", 2, 1000000000}, /* as many samples with the first duration */
        {"stts", 1, 1000000000}, /* entries of that table */
        {"stsz", 2, 1000000000}, /* samples, with a size of their own each */
        {"stsc", 1, 1000000000}, {"stsc", 3, 1000000000}, {"ctts", 1, 1000000000},
        {"mvhd", 4, 0xffffffff}, {"tkhd", 5, 0xffffffff}, {"mdhd", 4, 0xffffffff},
    };
    static const Claim avi_claims[] = {
        {"avih", 5, 1000000000}, {"strh", 9, 1000000000}, {"idx1", 0, 0x7fffffff}};
    struct rusage before, after;
    size_t mp4_size = 0, avi_size = 0;
    g_autofree char *mp4 = mp4_bytes(&mp4_size), *avi = clip_bytes(2, &avi_size);
    getrusage(RUSAGE_SELF, &before);
    for (size_t i = 0; i < G_N_ELEMENTS(mp4_claims) + G_N_ELEMENTS(avi_claims); i++) {
        bool is_mp4 = i < G_N_ELEMENTS(mp4_claims);
        const Claim *claim = is_mp4 ? &mp4_claims[i] : &avi_claims[i - G_N_ELEMENTS(mp4_claims)];
        g_autoptr(RfVideoFile) file = is_mp4 ? open_claiming("claim.mp4", mp4, mp4_size, claim)
                                             : open_claiming("claim.avi", avi, avi_size, claim);
        int64_t frames = file != NULL ? rf_video_file_info(file)->frames : 0;
        g_test_message("%s word %d: %d frames", claim->atom, claim->word, (int)frames);
        g_assert_cmpint(frames, <, 100);
    }
    getrusage(RUSAGE_SELF, &after);
    g_test_message("%ld MiB more", (after.ru_maxrss - before.ru_maxrss) / 1024);
    g_assert_cmpint((after.ru_maxrss - before.ru_maxrss) / 1024, <, 100);
}

/* Timestamps that stand still, leap by hours or run backwards: what is shown is in ascending times (see rf_any_video_read), and
 * repairs are counted, unless the container's own edit list hides frames that its tables put past its end. */
static void test_timestamps(void)
{
    static const Claim claims[] = {
        {"stts", 3, 0},          /* every frame at the same instant */
        {"stts", 3, 0x7fffffff}, /* hours between them */
        {"ctts", 3, 0x7fffffff}, /* the first one shown hours later */
        {"ctts", 5, 0x80000000}, /* another one hours earlier */
    };
    size_t size = 0;
    g_autofree char *mp4 = mp4_bytes(&size);
    for (size_t i = 0; i < G_N_ELEMENTS(claims); i++) {
        g_autoptr(RfVideoFile) file = open_claiming("times.mp4", mp4, size, &claims[i]);
        g_assert_nonnull(file);
        const RfVideoInfo *info = rf_video_file_info(file);
        g_test_message("%s word %d: %d frames, %d missing, %d backwards, %d gaps, %.6g frames/s, %.6g s",
                       claims[i].atom, claims[i].word, (int)info->frames, (int)info->times_missing,
                       (int)info->times_backwards, (int)info->gaps, info->frame_rate_hz, info->duration_s);
        g_assert_cmpint(info->frames, >=, 1);
        g_assert_true(isfinite(info->duration_s) && isfinite(info->frame_rate_hz));
        g_assert_true(info->times_missing + info->times_backwards > 0 || info->frames < FRAMES);
    }
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/video-hostile/promises", test_promises);
    g_test_add_func("/video-hostile/sizes", test_sizes);
    g_test_add_func("/video-hostile/a-billion-frames", test_a_billion_frames);
    g_test_add_func("/video-hostile/timestamps", test_timestamps);
    g_test_add_func("/video-hostile/cut", test_cut);
    g_test_add_func("/video-hostile/flipped", test_flipped);
    int status = g_test_run();
    rf_clip_clean();
    return status;
}
