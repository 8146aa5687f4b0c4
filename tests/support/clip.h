/* Small clips for tests: pictures that are a function of (frame, x, y), written with the program's own writer. */
#pragma once

#include <glib.h>
#include <stdint.h>

#include "tracker/video_file.h"

/* Options of a small clip, those not named filled in: 64 x 48 pixels, 8 bit, 30 frames/s. */
#define RF_CLIP(...) rf_clip_usual(&(RfVideoWriterOptions){__VA_ARGS__})
RfVideoWriterOptions *rf_clip_usual(RfVideoWriterOptions *options);

/* A bright spot that moves, over a gradient with grain of its own in every frame; levels span the bit depth. */
unsigned rf_clip_level(int64_t frame, int x, int y, int bit_depth);

/* Frame n at n/frame_rate_hz, or at times_s[n] if given. Aborts the test on failure. */
void rf_clip_write(const char *path, const RfVideoWriterOptions *options, int64_t first_frame, int frames,
                   const double *times_s);

/* Number of pixels of a frame that differ from rf_clip_level(). */
int64_t rf_clip_differences(const RfFrame *frame, int64_t picture);

uint64_t rf_clip_hash(const RfFrame *frame);

/* (returns new) A path in a folder of this process's own, removed by rf_clip_clean(). */
char *rf_clip_path(const char *name);
void rf_clip_clean(void);
