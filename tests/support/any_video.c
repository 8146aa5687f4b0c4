#include "tests/support/any_video.h"

#include <math.h>
#include <string.h>

#include "tests/support/clip.h"
#include "tracker/video_file.h"

static bool check_words(GError *error, const char *path)
{
    g_assert_nonnull(error);
    g_assert_true(error->domain == RF_VIDEO_ERROR);
    g_assert_nonnull(strstr(error->message, path));
    g_error_free(error);
    return true;
}

static void read_through(RfVideoFile *file, const char *path, int threads, int64_t most_frames,
                         RfAnyVideo *seen)
{
    GError *error = NULL;
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, threads, &error);
    if (reader == NULL) {
        seen->is_refused = check_words(error, path);
        return;
    }
    const RfVideoInfo *info = rf_video_file_info(file);
    RfFrame frame;
    RfVideoStep step;
    int64_t last = -1;
    double last_s = -1;
    while ((step = rf_video_file_next(reader, &frame, &error)) == RF_VIDEO_FRAME) {
        g_assert_cmpint(frame.index, >, last);
        g_assert_true(isfinite(frame.time_s));
        g_assert_cmpfloat(frame.time_s, >, last_s);
        g_assert_cmpint(frame.width, ==, info->width);
        g_assert_cmpint(frame.height, ==, info->height);
        rf_clip_hash(&frame);
        last = frame.index, last_s = frame.time_s;
        g_assert_cmpint(++seen->frames, <, most_frames);
    }
    seen->is_opened = true;
    if (step == RF_VIDEO_FAILED) seen->is_refused = check_words(error, path);
}

RfAnyVideo rf_any_video_read(const char *path, int threads, int64_t most_frames)
{
    RfAnyVideo seen = {false, false, 0};
    GError *error = NULL;
    g_autoptr(RfVideoFile) file = rf_video_file_open((const char *const[]){path, NULL}, NULL, &error);
    if (file == NULL)
        seen.is_refused = check_words(error, path);
    else
        read_through(file, path, threads, most_frames, &seen);
    return seen;
}
