/* Frames of a recording kept for learning: copies, so that the reader may go on. Not for measuring. */
#pragma once

#include "tracker/frame.h"

#include <glib.h>

typedef struct RfPictureSample RfPictureSample;

/*  pixel_aspect  > 0: width of a stored pixel over its height */
RfPictureSample *rf_picture_sample_new(double pixel_aspect);
void rf_picture_sample_free(RfPictureSample *sample);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPictureSample, rf_picture_sample_free)

/* How many frames of this size are worth keeping: 8 to 60, at most 96 MB in all. Spread them evenly. */
unsigned rf_picture_sample_capacity(const RfFrame *frame);
/* Copies the frame. Fails where its size, bit depth or interlacing differs from the first one's. */
bool rf_picture_sample_add(RfPictureSample *sample, const RfFrame *frame, GError **error);

/* Copies a frame from any thread; rf_picture_sample_settle() then adds what was put, in the order of slots, as far as the
 * capacity goes. */
void rf_picture_sample_put(RfPictureSample *sample, unsigned slot, const RfFrame *frame);
bool rf_picture_sample_settle(RfPictureSample *sample, GError **error);

unsigned rf_picture_sample_frames(const RfPictureSample *sample);
/* (borrowed until the sample is freed) frame `i` in the order of adding */
const RfFrame *rf_picture_sample_frame(const RfPictureSample *sample, unsigned i);
double rf_picture_sample_pixel_aspect(const RfPictureSample *sample);
