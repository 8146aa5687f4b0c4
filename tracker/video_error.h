/* What can be told about a video file without looking inside, and how failures with one are worded. Codes: video_file.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "tracker/video_file.h"

/* Sets "PATH: TEXT". Returns false. */
bool rf_video_fail(GError **error, RfVideoError code, const char *path, const char *text);

/* There, and a regular file: a pipe or device could block for ever. */
bool rf_video_check_file(const char *path, GError **error);

/* Within RF_VIDEO_MAX_SIDE_PX and RF_VIDEO_MAX_PIXELS: before anything is allocated. */
bool rf_video_check_size(const char *path, int width, int height, GError **error);
