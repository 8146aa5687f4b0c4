#include "tracker/picture_sample.h"

#include "tracker/luma.h"

#include <string.h>

enum { LEAST_FRAMES = 8, MOST_FRAMES = 60 };
static const size_t MOST_BYTES = (size_t)96 << 20;

struct RfPictureSample {
    double pixel_aspect;
    GArray *frames;       /* of RfFrame, each owning its luma */
    GMutex lock;          /* guards the slots */
    GArray *slots;        /* of RfFrame likewise; all 0 where nothing was put */
    size_t lacking_bytes; /* of a slot that there was no memory for */
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
    sample->slots = g_array_new(false, true, sizeof(RfFrame));
    g_mutex_init(&sample->lock);
    return sample;
}

static void free_frames(GArray *frames)
{
    for (unsigned i = 0; i < frames->len; i++)
        g_free((void *)(uintptr_t)g_array_index(frames, RfFrame, i).luma);
    g_array_unref(frames);
}

void rf_picture_sample_free(RfPictureSample *sample)
{
    if (!sample) return;
    free_frames(sample->frames);
    free_frames(sample->slots);
    g_mutex_clear(&sample->lock);
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

static bool fits(const RfPictureSample *sample, const RfFrame *frame, GError **error)
{
    const RfFrame *first = sample->frames->len ? rf_picture_sample_frame(sample, 0) : frame;
    if (is_alike(frame, first)) return true;
    g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_INVAL,
                "frame %" G_GINT64_FORMAT " is %dx%d of %d bit%s; need %dx%d of %d bit%s as at the start",
                frame->index, frame->width, frame->height, frame->bit_depth,
                frame->is_interlaced ? ", interlaced" : "", first->width, first->height, first->bit_depth,
                first->is_interlaced ? ", interlaced" : "");
    return false;
}

/* Its luma is NULL where there is no memory. */
static RfFrame copy_of(const RfFrame *frame)
{
    RfFrame kept = *frame;
    size_t row = row_bytes(frame);
    uint8_t *copy = g_try_malloc(row * (size_t)frame->height);
    for (int y = 0; copy && y < frame->height; y++)
        memcpy(copy + row * (size_t)y, rf_luma_row(frame, y), row);
    kept.luma = copy;
    kept.stride_bytes = (ptrdiff_t)row;
    return kept;
}

static bool set_no_memory(size_t bytes, GError **error)
{
    g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_NOMEM, "no memory for a picture of %zu bytes", bytes);
    return false;
}

bool rf_picture_sample_add(RfPictureSample *sample, const RfFrame *frame, GError **error)
{
    if (!fits(sample, frame, error)) return false;
    RfFrame kept = copy_of(frame);
    if (!kept.luma) return set_no_memory(row_bytes(frame) * (size_t)frame->height, error);
    g_array_append_val(sample->frames, kept);
    return true;
}

void rf_picture_sample_put(RfPictureSample *sample, unsigned slot, const RfFrame *frame)
{
    RfFrame kept = copy_of(frame);
    g_mutex_lock(&sample->lock);
    if (sample->slots->len <= slot) g_array_set_size(sample->slots, slot + 1);
    if (!kept.luma) sample->lacking_bytes = row_bytes(frame) * (size_t)frame->height;
    g_array_index(sample->slots, RfFrame, slot) = kept;
    g_mutex_unlock(&sample->lock);
}

bool rf_picture_sample_settle(RfPictureSample *sample, GError **error)
{
    if (sample->lacking_bytes) return set_no_memory(sample->lacking_bytes, error);
    for (unsigned i = 0; i < sample->slots->len; i++) {
        RfFrame *frame = &g_array_index(sample->slots, RfFrame, i);
        if (!frame->luma) continue;
        if (sample->frames->len == rf_picture_sample_capacity(frame)) break;
        if (!fits(sample, frame, error)) return false;
        g_array_append_val(sample->frames, *frame);
        frame->luma = NULL;
    }
    for (unsigned i = 0; i < sample->slots->len; i++)
        g_free((void *)(uintptr_t)g_array_index(sample->slots, RfFrame, i).luma);
    g_array_set_size(sample->slots, 0);
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
