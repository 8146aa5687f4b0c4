#include "tracker/video_file.h"

#include <glib/gstdio.h>
#include <math.h>
#include <string.h>

#include "tests/support/clip.h"

static RfVideoFile *open_with(const char *path, const RfVideoOptions *options)
{
    GError *error = NULL;
    RfVideoFile *file = rf_video_file_open((const char *const[]){path, NULL}, options, &error);
    g_assert_no_error(error);
    return file;
}

static char *written(const char *name, const RfVideoWriterOptions *options, int frames)
{
    char *path = rf_clip_path(name);
    rf_clip_write(path, options, 0, frames, NULL);
    return path;
}

static RfVideoReader *reader_of(const RfVideoFile *file, int threads)
{
    GError *error = NULL;
    RfVideoReader *reader = rf_video_file_reader_new(file, threads, &error);
    g_assert_no_error(error);
    return reader;
}

static bool next(RfVideoReader *reader, RfFrame *frame)
{
    GError *error = NULL;
    RfVideoStep step = rf_video_file_next(reader, frame, &error);
    g_assert_no_error(error);
    return step == RF_VIDEO_FRAME;
}

/* ---- pixels ---- */

static void check_exact(const char *name, const RfVideoWriterOptions *options)
{
    g_autofree char *path = written(name, options, 20);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 2);
    RfFrame frame;
    int64_t n = 0;
    for (; next(reader, &frame); n++) {
        g_assert_cmpint(frame.index, ==, n);
        g_assert_cmpint(frame.bit_depth, ==, options->bit_depth);
        g_assert_cmpint(frame.width, ==, options->width);
        g_assert_cmpint(frame.height, ==, options->height);
        g_assert_cmpint(rf_clip_differences(&frame, n), ==, 0);
        g_assert_cmpfloat_with_epsilon(frame.time_s, (double)n / options->frame_rate_hz, 1e-12);
        g_assert_false(frame.is_damaged);
        g_assert_cmpint(frame.is_limited_range, ==, !options->is_full_range);
    }
    g_assert_cmpint(n, ==, 20);
    g_assert_cmpint(rf_video_file_info(file)->frames, ==, 20);
    g_assert_false(rf_video_file_info(file)->is_converted);
    g_assert_cmpint(rf_video_file_faults(reader).lost, ==, 0);
}

static void test_lossless(void)
{
    check_exact("grey8.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1));
    check_exact("grey8-full.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .is_full_range = true));
    check_exact("odd.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .width = 61, .height = 47));
    check_exact("grey10.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .bit_depth = 10));
    check_exact("grey12.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .bit_depth = 12));
    check_exact("grey16.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .bit_depth = 16));
    check_exact("h264.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .is_lossless = true, .b_frames = 2));
    check_exact("h264.mp4", RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .is_lossless = true, .b_frames = 2,
                                    .is_full_range = true));
    check_exact("h264-10.mp4", RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .is_lossless = true, .bit_depth = 10));
}

static void test_colour(void)
{
    g_autofree char *path = rf_clip_path("colour.mkv");
    GError *error = NULL;
    g_autoptr(RfVideoWriter) writer = rf_video_file_create(
        path, RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .is_colour = true, .is_full_range = true), &error);
    g_assert_no_error(error);
    uint8_t rgb[48][64][3];
    memset(rgb, 0, sizeof rgb);
    for (int y = 0; y < 48; y++) {
        for (int x = 0; x < 64; x++) rgb[y][x][x / 16 % 3] = 200; /* red, green, blue, red */
    }
    g_assert_true(rf_video_file_write(writer, rgb, 64 * 3, 0, &error));
    g_assert_true(rf_video_file_finish(writer, &error));
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    RfFrame frame;
    g_assert_true(next(reader, &frame));
    const uint8_t *row = frame.luma;
    g_assert_cmpint(row[0], ==, 60);   /* 0.299 * 200 = 59.8, ITU-R BT.601 */
    g_assert_cmpint(row[16], ==, 117); /* 0.587 * 200 = 117.4 */
    g_assert_cmpint(row[32], ==, 23);  /* 0.114 * 200 = 22.8 */
}

/* ---- times ---- */

static void test_constant_rate(void)
{
    double rate_hz = 30000 / 1001.0;
    g_autofree char *path = written("ntsc.mkv", RF_CLIP(.frame_rate_hz = rate_hz), 100);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    const RfVideoInfo *info = rf_video_file_info(file);
    g_assert_true(info->is_rate_constant);
    g_assert_cmpint(info->gaps, ==, 0);
    g_assert_cmpfloat_with_epsilon(info->tick_s, 1e-3, 1e-12); /* far too coarse for what follows */
    g_assert_cmpfloat_with_epsilon(info->frame_rate_hz, rate_hz, 1e-9);
    for (int64_t n = 0; n < 100; n++) {
        g_assert_cmpfloat_with_epsilon(rf_video_file_time_s(file, n), (double)n / rate_hz, 1e-12);
    }
}

static void test_variable_rate(void)
{
    double times_s[40];
    for (int n = 0; n < 40; n++) times_s[n] = n / 31.0 + 0.011 * sin(n) * (n > 0);
    const char *const names[] = {"variable.mkv", "variable.mp4"};
    const double ticks_s[] = {1e-3, 1 / 90000.0};
    for (int i = 0; i < 2; i++) {
        g_autofree char *path = rf_clip_path(names[i]);
        rf_clip_write(path, RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .b_frames = 2), 0, 40, times_s);
        g_autoptr(RfVideoFile) file = open_with(path, NULL);
        g_assert_false(rf_video_file_info(file)->is_rate_constant);
        g_autoptr(RfVideoReader) reader = reader_of(file, 1);
        RfFrame frame;
        int64_t n = 0;
        for (; next(reader, &frame); n++) {
            g_assert_cmpfloat_with_epsilon(frame.time_s, times_s[n], ticks_s[i]);
            g_assert_true(frame.time_s == rf_video_file_time_s(file, n));
        }
        g_assert_cmpint(n, ==, 40);
    }
}

static void test_gap(void)
{
    double times_s[50];
    for (int n = 0; n < 50; n++) times_s[n] = (n < 20 ? n : n + 3) / 30.0;
    g_autofree char *path = rf_clip_path("gap.mkv");
    rf_clip_write(path, RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 0, 50, times_s);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_assert_false(rf_video_file_info(file)->is_rate_constant);
    for (int64_t n = 0; n < 50; n++) {
        g_assert_cmpfloat_with_epsilon(rf_video_file_time_s(file, n), times_s[n], 1.001e-3);
    }
}

static void test_given_rate(void)
{
    RfVideoOptions options = {.frame_rate_hz = {25, 0.001}};
    g_autofree char *path = written("forced.mkv", RF_CLIP(.frame_rate_hz = 30), 10);
    g_autoptr(RfVideoFile) file = open_with(path, &options);
    g_assert_cmpfloat(rf_video_file_time_s(file, 7), ==, 7 / 25.0);
    g_assert_cmpfloat(rf_video_file_info(file)->duration_s, ==, 10 / 25.0);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    RfFrame frame;
    for (int64_t n = 0; next(reader, &frame); n++) g_assert_cmpfloat(frame.time_s, ==, (double)n / 25);
}

static void test_interlaced(void)
{
    for (int top = 0; top < 2; top++) {
        g_autofree char *path =
            written("tape.mpg",
                    RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2, .width = 720, .height = 576, .frame_rate_hz = 25,
                            .is_interlaced = true, .is_top_field_first = top, .pixel_aspect = 16 / 15.0),
                    12);
        g_autoptr(RfVideoFile) file = open_with(path, NULL);
        const RfVideoInfo *info = rf_video_file_info(file);
        g_assert_true(info->is_interlaced);
        g_assert_cmpint(info->is_top_field_first, ==, top);
        g_assert_cmpfloat_with_epsilon(info->pixel_aspect, 16 / 15.0, 1e-9);
        g_assert_cmpfloat_with_epsilon(rf_video_file_time_s(file, 11), 11 / 25.0, 1e-12);
        g_autoptr(RfVideoReader) reader = reader_of(file, 1);
        RfFrame frame;
        g_assert_true(next(reader, &frame));
        g_assert_true(frame.is_interlaced);
        g_assert_cmpint(frame.is_top_field_first, ==, top);
    }
}

/* ---- parts, files, stretches ---- */

static void test_part_in_use(void)
{
    g_autofree char *path =
        written("part.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 12), 100);
    RfVideoOptions options = {.start_s = 1.0, .stop_s = 2.0};
    g_autoptr(RfVideoFile) file = open_with(path, &options);
    g_assert_cmpint(rf_video_file_info(file)->frames, ==, 100);
    g_assert_cmpint(rf_video_file_info(file)->frames_used, ==, 30);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    RfFrame frame;
    int64_t n = 30;
    for (; next(reader, &frame); n++) {
        g_assert_cmpint(frame.index, ==, n);
        g_assert_cmpint(rf_clip_differences(&frame, n), ==, 0);
    }
    g_assert_cmpint(n, ==, 60);
    g_assert_cmpint(rf_video_file_faults(reader).lost, ==, 0);
}

static void test_several_files(void)
{
    g_autofree char *one = rf_clip_path("one.mkv"), *two = rf_clip_path("two.mp4");
    rf_clip_write(one, RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), 0, 17, NULL);
    rf_clip_write(two, RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .is_lossless = true), 17, 30, NULL);
    GError *error = NULL;
    g_autoptr(RfVideoFile) file = rf_video_file_open((const char *const[]){one, two, NULL}, NULL, &error);
    g_assert_no_error(error);
    g_autoptr(RfVideoReader) reader = reader_of(file, 2);
    RfFrame frame;
    int64_t n = 0;
    for (; next(reader, &frame); n++) {
        g_assert_cmpint(frame.index, ==, n);
        g_assert_cmpint(rf_clip_differences(&frame, n), ==, 0);
        g_assert_cmpfloat_with_epsilon(frame.time_s, (double)n / 30, 1e-9);
    }
    g_assert_cmpint(n, ==, 47);
    g_assert_cmpfloat_with_epsilon(rf_video_file_info(file)->duration_s, 47 / 30.0, 1e-9);
}

typedef struct {
    const char *name;
    RfVideoWriterOptions options;
    bool is_cut; /* has more than one stretch */
} Cut;

static void check_stretches(const Cut *clip)
{
    enum { FRAMES = 200 };
    g_autofree char *path = written(clip->name, &clip->options, FRAMES);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    uint64_t hashes[FRAMES] = {0};
    g_autoptr(RfVideoReader) whole = reader_of(file, 2);
    RfFrame frame;
    while (next(whole, &frame)) hashes[frame.index] = rf_clip_hash(&frame);
    g_assert_cmpint(rf_video_file_faults(whole).frames, ==, FRAMES);
    g_assert_cmpint(rf_video_file_stretches(file) > 1, ==, clip->is_cut);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    GError *error = NULL;
    int64_t seen = 0;
    for (int s = rf_video_file_stretches(file) - 1; s >= 0;
         s--) { /* backwards: nothing can leak from one to the next */
        g_assert_true(rf_video_file_enter_stretch(reader, s, 1, &error));
        int64_t count = 0;
        for (; next(reader, &frame); count++) g_assert_cmpuint(rf_clip_hash(&frame), ==, hashes[frame.index]);
        g_assert_cmpint(count, ==, rf_video_file_stretch_frames(file, s));
        seen += count;
    }
    g_assert_cmpint(seen, ==, FRAMES);
    g_assert_cmpint(rf_video_file_faults(reader).lost, ==, 0);
    g_test_message("%s: %d stretches", clip->name, rf_video_file_stretches(file));
}

static void test_stretches(void)
{
    const Cut clips[] = {
        {"cut-h264.mkv", *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 25, .b_frames = 3), true},
        {"cut-h264.mp4", *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 25, .b_frames = 3), true},
        {"open-h264.mkv",
         *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 25, .b_frames = 3, .is_open_gop = true),
         false},
        {"cut-mpeg2.mpg",
         *RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2, .width = 320, .height = 240, .quality = 2,
                  .keyframe_every = 12, .b_frames = 2),
         true},
        {"open-mpeg2.mpg",
         *RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2, .width = 320, .height = 240, .quality = 2,
                  .keyframe_every = 12, .b_frames = 2, .is_open_gop = true),
         true},
        {"cut-mjpeg.avi", *RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), true},
        {"cut-ffv1.mkv", *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 10), true},
        {"whole-ffv1.mkv", *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 300), false},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(clips); i++) check_stretches(&clips[i]);
}

static void test_go_to(void)
{
    g_autofree char *path =
        written("goto.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 12), 60);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    GError *error = NULL;
    const int64_t wanted[] = {40, 3, 59, 12, 11};
    for (size_t i = 0; i < G_N_ELEMENTS(wanted); i++) {
        RfFrame frame;
        g_assert_true(rf_video_file_go_to(reader, wanted[i], &error));
        g_assert_true(next(reader, &frame));
        g_assert_cmpint(frame.index, ==, wanted[i]);
        g_assert_cmpint(rf_clip_differences(&frame, wanted[i]), ==, 0);
    }
}

/* ---- damage ---- */

static void spoil(const char *path, double from, double to, size_t every)
{
    g_autofree char *bytes = NULL;
    size_t size = 0;
    g_assert_true(g_file_get_contents(path, &bytes, &size, NULL));
    for (size_t i = (size_t)(from * (double)size); i < (size_t)(to * (double)size); i += every)
        bytes[i] ^= 0x10;
    g_assert_true(g_file_set_contents(path, bytes, (gssize)size, NULL));
}

static void shorten(const char *path, double part)
{
    g_autofree char *bytes = NULL;
    size_t size = 0;
    g_assert_true(g_file_get_contents(path, &bytes, &size, NULL));
    g_assert_true(g_file_set_contents(path, bytes, (gssize)(part * (double)size), NULL));
}

static void test_flipped_bits(void)
{
    const Cut clips[] = {{"spoilt.mkv", *RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1, .keyframe_every = 10), true},
                         {"spoilt.mp4", *RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .keyframe_every = 20), true},
                         {"spoilt.avi", *RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), true}};
    for (size_t i = 0; i < G_N_ELEMENTS(clips); i++) {
        g_autofree char *path = written(clips[i].name, &clips[i].options, 100);
        spoil(path, 0.5, 0.6, 301);
        g_autoptr(RfVideoFile) file = open_with(path, NULL);
        g_autoptr(RfVideoReader) reader = reader_of(file, 1);
        RfFrame frame;
        while (next(reader, &frame)) continue;
        RfVideoFaults faults = rf_video_file_faults(reader);
        g_test_message("%s: %d of 100 frames, %d damaged, %d lost, first at %.2f s", clips[i].name,
                       (int)faults.frames, (int)faults.damaged, (int)faults.lost, faults.first_fault_s);
        g_assert_cmpint(faults.damaged + faults.lost, >, 0);
        g_assert_cmpint(faults.frames, >, 50);
        g_assert_cmpfloat(faults.first_fault_s, >, 1.0);
        g_assert_cmpfloat(faults.first_fault_s, <, 2.3);
    }
}

static void test_cut_short(void)
{
    g_autofree char *path = written("short.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), 100);
    shorten(path, 0.6);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    RfFrame frame;
    int64_t good = 0;
    while (next(reader, &frame)) {
        if (rf_clip_differences(&frame, frame.index) == 0)
            good++;
        else
            g_assert_true(frame.is_damaged);
    }
    g_assert_cmpint(good, >, 50);
    g_assert_cmpint(good, <, 70);
}

/* ---- refusals ---- */

static void refuse_all(const char *const *paths, RfVideoError code, const char *says)
{
    GError *error = NULL;
    RfVideoFile *file = rf_video_file_open(paths, NULL, &error);
    g_assert_null(file);
    g_assert_error(error, RF_VIDEO_ERROR, (int)code);
    g_test_message("%s", error->message);
    g_assert_nonnull(strstr(error->message, says));
    g_assert_nonnull(strstr(error->message, paths[g_strv_length((char **)paths) - 1]));
    g_error_free(error);
}

static void refuse(const char *name, const char *bytes, gssize size, RfVideoError code, const char *says)
{
    g_autofree char *path = rf_clip_path(name);
    g_assert_true(g_file_set_contents(path, bytes, size, NULL));
    refuse_all((const char *const[]){path, NULL}, code, says);
}

static void test_refuses_what_is_no_video(void)
{
    static const char wav[] =
        "RIFF\x2c\0\0\0WAVEfmt \x10\0\0\0\1\0\1\0\x40\x1f\0\0\x40\x1f\0\0\1\0\x08\0data\x08\0\0\0"
        "\x80\x90\x80\x70\x80\x90\x80\x70";
    /* Matroska with one track, of sound */
    static const char sound[] =
        "\x1a\x45\xdf\xa3\x8b\x42\x82\x88matroska\x18S\x80g\xd1\x15I\xa9\x66\x87*\xd7\xb1\x83\x0f"
        "\x42@\x16T\xaek\xaa\xae\xa8\xd7\x81\x01s\xc5\x81\x01\x83\x81\x02\x86\x8d\x41_PCM/INT/L"
        "IT\xe1\x8d\xb5\x84\x45\xfa\x00\x00\x9f\x81\x01\x62\x64\x81\x10\x1f\x43\xb6u\x91\xe7\x81"
        "\x00\xa3\x8c\x81\x00\x00\x80\x00\x01\x00\x01\x00\x01\x00\x01";
    refuse("empty.mkv", "", 0, RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
    refuse("text.mkv", "Dear diary, today the droplets fell.\n", -1, RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
    refuse("sound.wav", wav, sizeof wav - 1, RF_VIDEO_ERROR_NOT_VIDEO, "no video stream");
    refuse("sound.mkv", sound, sizeof sound - 1, RF_VIDEO_ERROR_NOT_VIDEO, "no video stream");
    refuse("zeros.mp4", (const char[4096]){0}, 4096, RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
}

static void test_refuses_other_files_names(void)
{
    g_autofree char *clip = written("inner.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 3);
    g_autofree char *script = g_strdup_printf("ffconcat version 1.0\nfile '%s'\n", clip);
    g_autofree char *playlist =
        g_strdup_printf("#EXTM3U\n#EXT-X-TARGETDURATION:1\n#EXTINF:1,\nfile://%s\n#EXT-X-ENDLIST\n", clip);
    refuse("script.ffconcat", script, -1, RF_VIDEO_ERROR_NOT_VIDEO, "(concat: Format not on whitelist)");
    refuse("script.mkv", script, -1, RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
    refuse("list.m3u8", playlist, -1, RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
    refuse("session.sdp",
           "v=0\no=- 0 0 IN IP4 127.0.0.1\ns=x\nc=IN IP4 127.0.0.1\nt=0 0\nm=video 5004 RTP/AVP 96\n", -1,
           RF_VIDEO_ERROR_NOT_VIDEO, "not a video");
    refuse_all((const char *const[]){"http://127.0.0.1/clip.mkv", NULL}, RF_VIDEO_ERROR_ABSENT,
               "no such file");
    refuse_all((const char *const[]){"concat:a.mpg|b.mpg", NULL}, RF_VIDEO_ERROR_ABSENT, "no such file");
    refuse_all((const char *const[]){"/dev/zero", NULL}, RF_VIDEO_ERROR_ABSENT, "not a regular file");
    refuse_all((const char *const[]){g_get_tmp_dir(), NULL}, RF_VIDEO_ERROR_ABSENT, "not a regular file");
}

static void test_refuses_half_a_file(void)
{
    g_autofree char *path = written("half.mp4", RF_CLIP(.codec = RF_VIDEO_CODEC_H264), 30);
    shorten(path, 0.5);
    refuse_all((const char *const[]){path, NULL}, RF_VIDEO_ERROR_NOT_VIDEO, "moov");
}

static void test_refuses_changed_size(void)
{
    g_autofree char *one = written("small.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 3);
    g_autofree char *two = written("large.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG, .width = 80), 3);
    refuse_all((const char *const[]){one, two, NULL}, RF_VIDEO_ERROR_CHANGED, "80 x 48");
}

static void test_refuses_empty_part(void)
{
    g_autofree char *path = written("late.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 30);
    GError *error = NULL;
    RfVideoOptions options = {.start_s = 5, .stop_s = 6};
    g_assert_null(rf_video_file_open((const char *const[]){path, NULL}, &options, &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED);
    g_assert_nonnull(strstr(error->message, "lasts 1.000 s"));
    g_error_free(error);
}

/* A raw stream may change its size in mid-run: two clips of MJPEG laid end to end. */
static void test_size_changes_midway(void)
{
    static const int sides_px[] = {64, 80};
    g_autofree char *path = rf_clip_path("changing.mjpeg");
    g_autoptr(GString) all = g_string_new(NULL);
    for (int i = 0; i < 2; i++) {
        g_autofree char *part =
            written("part.mjpeg", RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG, .width = sides_px[i]), 10);
        g_autofree char *bytes = NULL;
        size_t size = 0;
        g_assert_true(g_file_get_contents(part, &bytes, &size, NULL));
        g_string_append_len(all, bytes, (gssize)size);
    }
    g_assert_true(g_file_set_contents(path, all->str, (gssize)all->len, NULL));
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    GError *error = NULL;
    RfFrame frame;
    int64_t n = 0;
    while (rf_video_file_next(reader, &frame, &error) == RF_VIDEO_FRAME) n++;
    g_assert_cmpint(n, ==, 10);
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CHANGED);
    g_test_message("%s", error->message);
    g_assert_nonnull(
        strstr(error->message, "at 0.400 s")); /* a raw stream has no clock: 25 frames/s are assumed */
    g_error_free(error);
}

/* ---- stills ---- */

static void check_png(int bit_depth, int channels)
{
    enum { WIDTH = 33, HEIGHT = 21 };
    uint16_t pixels[HEIGHT][WIDTH * 3];
    for (int y = 0; y < HEIGHT; y++) {
        for (int x = 0; x < WIDTH; x++) {
            unsigned level = rf_clip_level(0, x, y, bit_depth);
            uint8_t *row = (uint8_t *)pixels[y];
            if (bit_depth > 8)
                pixels[y][x] = (uint16_t)level;
            else
                for (int c = 0; c < channels; c++) row[x * channels + c] = (uint8_t)level;
        }
    }
    GError *error = NULL;
    g_autoptr(GBytes) png =
        rf_video_file_encode_png(pixels, sizeof pixels[0], WIDTH, HEIGHT, channels, bit_depth, &error);
    g_assert_no_error(error);
    g_autofree char *path = rf_clip_path("still.png");
    g_assert_true(
        g_file_set_contents(path, g_bytes_get_data(png, NULL), (gssize)g_bytes_get_size(png), NULL));
    g_autoptr(RfStill) still = rf_video_file_read_still(path, &error);
    g_assert_no_error(error);
    g_assert_cmpint(still->bit_depth, ==, bit_depth);
    ptrdiff_t stride_bytes = WIDTH * (bit_depth > 8 ? 2 : 1);
    RfFrame frame = {still->pixels, stride_bytes, still->width, still->height, .bit_depth = bit_depth};
    g_assert_cmpint(rf_clip_differences(&frame, 0), ==, 0);
}

static void test_still(void)
{
    check_png(8, 1);
    check_png(16, 1);
    check_png(8, 3); /* grey in RGB comes back as the very same grey */
}

static void test_pgm(void)
{
    GError *error = NULL;
    g_autofree char *path = rf_clip_path("still.pgm");
    g_assert_true(g_file_set_contents(path, "P5\n2 2\n255\n\x01\x02\x03\xff", -1, NULL));
    g_autoptr(RfStill) still = rf_video_file_read_still(path, &error);
    g_assert_no_error(error);
    g_assert_cmpmem(still->pixels, 4, "\x01\x02\x03\xff", 4);
}

static RfStill *still_of(const char *name, const void *bytes, size_t size)
{
    GError *error = NULL;
    g_autofree char *path = rf_clip_path(name);
    g_assert_true(g_file_set_contents(path, bytes, (gssize)size, NULL));
    RfStill *still = rf_video_file_read_still(path, &error);
    g_assert_no_error(error);
    return still;
}

/* 16 bit, the higher byte first: grey as it is, colour as its luma (ITU-R BT.601). */
static void test_deep_pgm_and_ppm(void)
{
    static const char grey[] = "P5\n2 1\n65535\n\x12\x34\xfe\xdc";
    static const char colour[] = "P6\n2 1\n65535\n\xff\xff\0\0\0\0\x12\x34\x12\x34\x12\x34";
    g_autoptr(RfStill) one = still_of("deep.pgm", grey, sizeof grey - 1);
    g_assert_cmpint(one->bit_depth, ==, 16);
    g_assert_cmpuint(((uint16_t *)one->pixels)[0], ==, 0x1234);
    g_assert_cmpuint(((uint16_t *)one->pixels)[1], ==, 0xfedc);
    g_autoptr(RfStill) two = still_of("deep.ppm", colour, sizeof colour - 1);
    g_assert_cmpint(two->bit_depth, ==, 16);
    g_assert_cmpuint(((uint16_t *)two->pixels)[0], ==, 19595); /* 0.299 * 65535 */
    g_assert_cmpuint(((uint16_t *)two->pixels)[1], ==, 0x1234);
}

/* Bitmaps have their rows from the bottom up, and blue first. */
static void test_bmp(void)
{
    static const uint8_t packed[] = {
        'B', 'M', 70,  0, 0, 0, 0, 0, 0, 0, 54, 0, 0, 0, 40,  0, 0,  0, /* to the sizes */
        2,   0,   0,   0, 2, 0, 0, 0, 1, 0, 24, 0, 0, 0, 0,   0, 16, 0, 0,   0, 0, 0,
        0,   0,   0,   0, 0, 0, 0, 0, 0, 0, 0,  0, 0, 0, 200, 0, 0,  0, 200, 0, 0, 0, /* blue, green */
        0,   0,   200, 7, 7, 7, 0, 0};                                                /* red, grey */
    g_autoptr(RfStill) still = still_of("packed.bmp", packed, sizeof packed);
    g_assert_cmpint(still->bit_depth, ==, 8);
    g_assert_false(still->is_limited_range);
    g_assert_cmpmem(still->pixels, 4, ((const uint8_t[]){60, 7, 23, 117}), 4);
    static const uint8_t indexed[] = {
        'B', 'M', 70, 0, 0, 0, 0, 0, 0, 0, 62, 0, 0, 0, 40, 0, 0, 0,   3, 0, 0,
        0,   2,   0,  0, 0, 1, 0, 8, 0, 0, 0,  0, 0, 8, 0,  0, 0, 0,   0, 0, 0,
        0,   0,   0,  0, 2, 0, 0, 0, 0, 0, 0,  0, 9, 9, 9,  0, 0, 200, 0, 0, /* grey 9; green */
        1,   1,   0,  0, 0, 1, 0, 0};
    g_autoptr(RfStill) palette = still_of("indexed.bmp", indexed, sizeof indexed);
    g_assert_cmpmem(palette->pixels, 6, ((const uint8_t[]){9, 117, 9, 117, 117, 9}), 6);
}

static void test_still_refusals(void)
{
    GError *error = NULL;
    g_autofree char *path = rf_clip_path("not-a-still.png");
    g_assert_true(g_file_set_contents(path, "hello, this is text", -1, NULL));
    g_assert_null(rf_video_file_read_still(path, &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_NOT_VIDEO);
    g_clear_error(&error);
    g_assert_true(g_file_set_contents(path, "\x89PNG\r\n\x1a\n rubbish", -1, NULL));
    g_assert_null(rf_video_file_read_still(path, &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_DAMAGED);
    g_clear_error(&error);
    g_assert_null(rf_video_file_read_still("/nowhere/at/all.png", &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ABSENT);
    g_clear_error(&error);
}

/* ---- writing ---- */

static void check_repeats(const RfVideoWriterOptions *options, int times)
{
    g_autofree char *first = NULL;
    size_t first_size = 0;
    for (int k = 0; k < times; k++) {
        g_autofree char *path = written("same.mkv", options, 15), *bytes = NULL;
        size_t size = 0;
        g_assert_true(g_file_get_contents(path, &bytes, &size, NULL));
        if (k > 0) g_assert_cmpmem(bytes, size, first, first_size);
        if (k == 0) first = g_steal_pointer(&bytes), first_size = size;
    }
}

static void test_writer_repeats_itself(void)
{
    check_repeats(RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), 2);
    check_repeats(RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG), 2);
    check_repeats(RF_CLIP(.codec = RF_VIDEO_CODEC_MPEG2), 2);
    check_repeats(RF_CLIP(.codec = RF_VIDEO_CODEC_VP9, .width = 96, .height = 96), 10);
    /* Left to itself, the encoder writes other bytes in one run out of 25 at this size. */
    check_repeats(RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .width = 96, .height = 96), 30);
}

/* Frames of a film for browsers come back in order, at the times they were given (to the container's millisecond). */
static void test_writes_for_browsers(void)
{
    g_autofree char *path =
        written("film.webm", RF_CLIP(.codec = RF_VIDEO_CODEC_VP9, .quality = 10, .keyframe_every = 7), 20);
    g_autoptr(RfVideoFile) file = open_with(path, NULL);
    g_autoptr(RfVideoReader) reader = reader_of(file, 1);
    RfFrame frame;
    int count = 0;
    for (; next(reader, &frame); count++) g_assert_cmpfloat(fabs(frame.time_s - count / 30.0), <=, 0.0006);
    g_assert_cmpint(count, ==, 20);
    g_assert_cmpstr(rf_video_file_info(file)->codec, ==, "vp9");
}

static void refuse_writing(const char *path, const RfVideoWriterOptions *options, RfVideoError code,
                           const char *says)
{
    GError *error = NULL;
    g_assert_null(rf_video_file_create(path, options, &error));
    g_assert_error(error, RF_VIDEO_ERROR, (int)code);
    g_test_message("%s", error->message);
    g_assert_nonnull(strstr(error->message, says));
    g_error_free(error);
}

static void test_writer_refusals(void)
{
    g_autofree char *path = rf_clip_path("refused.mkv");
    refuse_writing(path, RF_CLIP(.codec = RF_VIDEO_CODEC_H264, .width = 63), RF_VIDEO_ERROR_ENCODER,
                   "63 x 48");
    refuse_writing(path, RF_CLIP(.codec = RF_VIDEO_CODEC_MJPEG, .bit_depth = 16), RF_VIDEO_ERROR_ENCODER,
                   "16 bit");
    refuse_writing(path, RF_CLIP(.width = 20000), RF_VIDEO_ERROR_UNSUPPORTED, "20000");
    refuse_writing("/nowhere/at/all.mkv", RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), RF_VIDEO_ERROR_WRITE,
                   "No such file");
    GError *error = NULL;
    g_autoptr(RfVideoWriter) writer =
        rf_video_file_create(path, RF_CLIP(.codec = RF_VIDEO_CODEC_FFV1), &error);
    uint8_t pixels[48 * 64] = {0};
    g_assert_true(rf_video_file_write(writer, pixels, 64, 0.5, &error));
    g_assert_false(rf_video_file_write(writer, pixels, 64, 0.5, &error));
    g_assert_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER);
    g_clear_error(&error);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/video-file/pixels/lossless-is-bit-exact", test_lossless);
    g_test_add_func("/video-file/pixels/colour-is-bt601", test_colour);
    g_test_add_func("/video-file/times/constant-rate-beats-coarse-ticks", test_constant_rate);
    g_test_add_func("/video-file/times/variable-rate-within-a-tick", test_variable_rate);
    g_test_add_func("/video-file/times/gap-stays", test_gap);
    g_test_add_func("/video-file/times/given-rate-wins", test_given_rate);
    g_test_add_func("/video-file/interlaced", test_interlaced);
    g_test_add_func("/video-file/part-in-use-keeps-index-and-time", test_part_in_use);
    g_test_add_func("/video-file/several-files-are-one-recording", test_several_files);
    g_test_add_func("/video-file/stretches-equal-sequential", test_stretches);
    g_test_add_func("/video-file/go-to", test_go_to);
    g_test_add_func("/video-file/damage/flipped-bits-are-counted", test_flipped_bits);
    g_test_add_func("/video-file/damage/cut-short", test_cut_short);
    g_test_add_func("/video-file/damage/size-changes-midway", test_size_changes_midway);
    g_test_add_func("/video-file/refuses/what-is-no-video", test_refuses_what_is_no_video);
    g_test_add_func("/video-file/refuses/other-files-names", test_refuses_other_files_names);
    g_test_add_func("/video-file/refuses/half-a-file", test_refuses_half_a_file);
    g_test_add_func("/video-file/refuses/changed-size", test_refuses_changed_size);
    g_test_add_func("/video-file/refuses/empty-part", test_refuses_empty_part);
    g_test_add_func("/video-file/still/png-round-trip", test_still);
    g_test_add_func("/video-file/still/pgm", test_pgm);
    g_test_add_func("/video-file/still/deep-pgm-and-ppm", test_deep_pgm_and_ppm);
    g_test_add_func("/video-file/still/bmp-packed-and-indexed", test_bmp);
    g_test_add_func("/video-file/still/refusals", test_still_refusals);
    g_test_add_func("/video-file/writer/for-browsers", test_writes_for_browsers);
    g_test_add_func("/video-file/writer/same-input-same-bytes", test_writer_repeats_itself);
    g_test_add_func("/video-file/writer/refusals", test_writer_refusals);
    int status = g_test_run();
    rf_clip_clean();
    return status;
}
