#include "tests/support/clip.h"

#include <glib/gstdio.h>
#include <math.h>
#include <unistd.h>

RfVideoWriterOptions *rf_clip_usual(RfVideoWriterOptions *options)
{
    if (options->width == 0) options->width = 64;
    if (options->height == 0) options->height = 48;
    if (options->bit_depth == 0) options->bit_depth = 8;
    if (options->frame_rate_hz <= 0) options->frame_rate_hz = 30;
    return options;
}

unsigned rf_clip_level(int64_t frame, int x, int y, int bit_depth)
{
    uint32_t grain =
        ((uint32_t)x * 2654435761u ^ (uint32_t)y * 40503u ^ (uint32_t)frame * 974711u) * 2246822519u;
    double dx = x - 10 - 0.7 * (double)(frame % 60), dy = y - 12 - 0.4 * (double)(frame % 40);
    double part = 0.15 + 0.002 * x + (grain >> 24) / 6400.0 + 0.4 * exp(-(dx * dx + dy * dy) / 18);
    return (unsigned)(part * ((1 << bit_depth) - 1));
}

static void draw(void *pixels, const RfVideoWriterOptions *options, int64_t frame)
{
    for (int y = 0; y < options->height; y++) {
        for (int x = 0; x < options->width; x++) {
            unsigned level = rf_clip_level(frame, x, y, options->bit_depth);
            ptrdiff_t at = (ptrdiff_t)y * options->width + x;
            if (options->bit_depth > 8)
                ((uint16_t *)pixels)[at] = (uint16_t)level;
            else
                ((uint8_t *)pixels)[at] = (uint8_t)level;
        }
    }
}

void rf_clip_write(const char *path, const RfVideoWriterOptions *options, int64_t first_frame, int frames,
                   const double *times_s)
{
    GError *error = NULL;
    g_autoptr(RfVideoWriter) writer = rf_video_file_create(path, options, &error);
    g_assert_no_error(error);
    ptrdiff_t stride_bytes = options->width * (options->bit_depth > 8 ? 2 : 1);
    g_autofree void *pixels = g_malloc((size_t)(stride_bytes * options->height));
    for (int n = 0; n < frames; n++) {
        draw(pixels, options, first_frame + n);
        rf_video_file_write(writer, pixels, stride_bytes,
                            times_s != NULL ? times_s[n] : n / options->frame_rate_hz, &error);
        g_assert_no_error(error);
    }
    rf_video_file_finish(writer, &error);
    g_assert_no_error(error);
}

static unsigned level_at(const RfFrame *frame, int x, int y)
{
    const uint8_t *row = (const uint8_t *)frame->luma + y * frame->stride_bytes;
    return frame->bit_depth > 8 ? ((const uint16_t *)(const void *)row)[x] : row[x];
}

int64_t rf_clip_differences(const RfFrame *frame, int64_t picture)
{
    int64_t differences = 0;
    for (int y = 0; y < frame->height; y++) {
        for (int x = 0; x < frame->width; x++) {
            if (level_at(frame, x, y) != rf_clip_level(picture, x, y, frame->bit_depth)) differences++;
        }
    }
    return differences;
}

uint64_t rf_clip_hash(const RfFrame *frame)
{
    uint64_t hash = 14695981039346656037u; /* FNV-1a */
    for (int y = 0; y < frame->height; y++) {
        for (int x = 0; x < frame->width; x++) hash = (hash ^ level_at(frame, x, y)) * 1099511628211u;
    }
    return hash;
}

static char *folder(void)
{
    return g_strdup_printf("%s/risefall-clips-%d", g_get_tmp_dir(), (int)getpid());
}

char *rf_clip_path(const char *name)
{
    g_autofree char *place = folder();
    g_assert_cmpint(g_mkdir_with_parents(place, 0700), ==, 0);
    return g_build_filename(place, name, NULL);
}

void rf_clip_clean(void)
{
    g_autofree char *place = folder();
    g_autoptr(GDir) entries = g_dir_open(place, 0, NULL);
    const char *name;
    while (entries != NULL && (name = g_dir_read_name(entries)) != NULL) {
        g_autofree char *path = g_build_filename(place, name, NULL);
        g_remove(path);
    }
    g_rmdir(place);
}
