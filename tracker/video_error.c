#include "tracker/video_error.h"

GQuark rf_video_error_quark(void)
{
    return g_quark_from_static_string("rf-video-error");
}

bool rf_video_fail(GError **error, RfVideoError code, const char *path, const char *text)
{
    g_set_error(error, RF_VIDEO_ERROR, (int)code, "%s: %s", path, text);
    return false;
}

bool rf_video_check_file(const char *path, GError **error)
{
    if (!g_file_test(path, G_FILE_TEST_EXISTS)) {
        return rf_video_fail(error, RF_VIDEO_ERROR_ABSENT, path, "no such file");
    }
    if (!g_file_test(path, G_FILE_TEST_IS_REGULAR)) {
        return rf_video_fail(error, RF_VIDEO_ERROR_ABSENT, path, "not a regular file");
    }
    return true;
}

bool rf_video_check_size(const char *path, int width, int height, GError **error)
{
    if (width >= 1 && height >= 1 && width <= RF_VIDEO_MAX_SIDE_PX && height <= RF_VIDEO_MAX_SIDE_PX &&
        (int64_t)width * height <= RF_VIDEO_MAX_PIXELS) {
        return true;
    }
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_UNSUPPORTED,
                "%s: a picture of %d x %d pixels; need 1 to %d on each side", path, width, height,
                RF_VIDEO_MAX_SIDE_PX);
    return false;
}
