/* Reads whatever calls itself a video to its end and asks that it makes sense: for tests with files that don't. */
#pragma once

#include <stdbool.h>
#include <stdint.h>

typedef struct {
    bool is_refused; /* in words that name the file: not opened, or given up on midway */
    bool is_opened;
    int64_t frames; /* delivered */
} RfAnyVideo;

/* Indices ascend without end, times too, sizes are those announced, every pixel lent can be read: or the process is aborted.
 *   most_frames   that these bytes could become */
RfAnyVideo rf_any_video_read(const char *path, int threads, int64_t most_frames);
