#include "tracker/picture_sample.h"

#include "tracker/luma.h"

#include <string.h>

enum { LEAST_FRAMES = 8, MOST_FRAMES = 60 };
static const size_t MOST_BYTES = (size_t)96 << 20;

struct RfPictureSample {
    double pixel_aspect;
    GArray *frames; /* of RfFrame, each owning its luma */
};

static size_t row_bytes(const RfFrame *frame)
{
    return (size_t)frame->width * (frame->bit_depth == 8 ? 1 : 2);
}

RfPictureSample *rf_picture_sample_new(double pixel_aspect)
{
    g_assert(pixel_aspect > 0);
    RfPictureSample *sample = g_new0(RfPictureSample, 1);
    sample->pixel_aspect = pixel_aspect;
    sample->frames = g_array_new(false, false, sizeof(RfFrame));
    return sample;
}

void rf_picture_sample_free(RfPictureSample *sample)
{
    if (!sample) return;
    for (unsigned i = 0; i < sample->frames->len; i++)
        g_free((void *)(uintptr_t)g_array_index(sample->frames, RfFrame, i).luma);
    g_array_unref(sample->frames);
    g_free(sample);
}

unsigned rf_picture_sample_capacity(const RfFrame *frame)
{
    size_t fits = MOST_BYTES / (row_bytes(frame) * (size_t)frame->height);
    return (unsigned)CLAMP(fits, LEAST_FRAMES, MOST_FRAMES);
}

static bool is_alike(const RfFrame *a, const RfFrame *b)
{
    return a->width == b->width && a->height == b->height && a->bit_depth == b->bit_depth &&
           a->is_interlaced == b->is_interlaced;
}

bool rf_picture_sample_add(RfPictureSample *sample, const RfFrame *frame, GError **error)
{
    const RfFrame *first = sample->frames->len ? rf_picture_sample_frame(sample, 0) : frame;
    if (!is_alike(frame, first)) {
        g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_INVAL,
                    "frame %" G_GINT64_FORMAT " is %dx%d of %d bit%s; need %dx%d of %d bit%s as at the start",
                    frame->index, frame->width, frame->height, frame->bit_depth,
                    frame->is_interlaced ? ", interlaced" : "", first->width, first->height, first->bit_depth,
                    first->is_interlaced ? ", interlaced" : "");
        return false;
    }
    size_t row = row_bytes(frame), bytes = row * (size_t)frame->height;
    uint8_t *copy = g_try_malloc(bytes);
    if (!copy) {
        g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_NOMEM, "no memory for a picture of %dx%d", frame->width,
                    frame->height);
        return false;
    }
    for (int y = 0; y < frame->height; y++) memcpy(copy + row * (size_t)y, rf_luma_row(frame, y), row);
    RfFrame kept = *frame;
    kept.luma = copy;
    kept.stride_bytes = (ptrdiff_t)row;
    g_array_append_val(sample->frames, kept);
    return true;
}

unsigned rf_picture_sample_frames(const RfPictureSample *sample)
{
    return sample->frames->len;
}

const RfFrame *rf_picture_sample_frame(const RfPictureSample *sample, unsigned i)
{
    g_assert(i < sample->frames->len);
    return &g_array_index(sample->frames, RfFrame, i);
}

double rf_picture_sample_pixel_aspect(const RfPictureSample *sample)
{
    return sample->pixel_aspect;
}
