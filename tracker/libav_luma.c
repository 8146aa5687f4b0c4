#include "tracker/libav_luma.h"

#include <string.h>

#include "tracker/rgb.h"

void rf_luma_clear(RfLumaScratch *scratch)
{
    g_free(scratch->rows);
    g_free(scratch->work);
    *scratch = (RfLumaScratch){0};
}

static bool is_grey_of_rgb(const AVPixFmtDescriptor *layout)
{
    return (layout->flags & (AV_PIX_FMT_FLAG_RGB | AV_PIX_FMT_FLAG_PAL)) != 0;
}

bool rf_luma_is_readable(const AVPixFmtDescriptor *layout)
{
    uint64_t strange = AV_PIX_FMT_FLAG_HWACCEL | AV_PIX_FMT_FLAG_FLOAT | AV_PIX_FMT_FLAG_BAYER;
    return layout != NULL && layout->nb_components > 0 && !(layout->flags & strange) &&
           !g_str_has_prefix(layout->name, "xyz") && !g_str_equal(layout->name, "monow") &&
           layout->comp[0].depth <= 16;
}

int rf_luma_depth(const AVPixFmtDescriptor *layout)
{
    return MAX(8, layout->comp[0].depth);
}

/* A plane of luma that can be lent as it lies in memory. */
bool rf_luma_is_plain(const AVPixFmtDescriptor *layout)
{
    const AVComponentDescriptor *luma = &layout->comp[0];
    bool is_wide = luma->depth > 8;
    if (is_grey_of_rgb(layout) || (layout->flags & AV_PIX_FMT_FLAG_BITSTREAM) || luma->depth < 8)
        return false;
    if (is_wide && ((layout->flags & AV_PIX_FMT_FLAG_BE) != 0) != (G_BYTE_ORDER == G_BIG_ENDIAN))
        return false;
    return luma->shift == 0 && luma->offset == 0 && luma->step == (is_wide ? 2 : 1);
}

/* Unspecified range: RGB and grey are full by nature, YUV is limited unless it says otherwise. */
static bool is_limited(const AVFrame *frame, const AVPixFmtDescriptor *layout)
{
    if (is_grey_of_rgb(layout) || frame->color_range == AVCOL_RANGE_JPEG) return false;
    if (frame->color_range == AVCOL_RANGE_MPEG) return true;
    return layout->nb_components >= 3 && !g_str_has_prefix(layout->name, "yuvj");
}

static void palette_row(const AVFrame *frame, int y, uint16_t *work)
{
    const uint8_t *row = frame->data[0] + (ptrdiff_t)y * frame->linesize[0];
    const uint32_t *palette = (const uint32_t *)(const void *)frame->data[1]; /* ARGB in native order */
    for (int x = 0; x < frame->width; x++) {
        for (int c = 0; c < 3; c++) work[c * frame->width + x] = palette[row[x]] >> (16 - 8 * c) & 0xff;
    }
}

/* Any layout at all, component by component; slow, for sources that a microscope camera rarely has. */
static void convert_row(const AVFrame *frame, const AVPixFmtDescriptor *layout, int y, RfLumaScratch *scratch,
                        void *out)
{
    int width = frame->width, components = is_grey_of_rgb(layout) ? 3 : 1;
    uint16_t *work = scratch->work;
    if (layout->flags & AV_PIX_FMT_FLAG_PAL) {
        palette_row(frame, y, work);
    } else {
        for (int c = 0; c < components; c++) {
            av_read_image_line2(work + c * width, (const uint8_t **)(void *)frame->data, frame->linesize,
                                layout, 0, y, c, width, 0, sizeof *work);
            int depth = layout->comp[c].depth, full = (1 << depth) - 1;
            for (int x = 0; x < width && depth < 8; x++) {
                work[c * width + x] = (uint16_t)((work[c * width + x] * 255 + full / 2) / full);
            }
        }
    }
    if (components == 3) rf_rgb_to_luma(work, work + width, work + 2 * width, (size_t)width, work);
    if (scratch->bytes == 2) memcpy(out, work, (size_t)width * 2);
    for (int x = 0; x < width && scratch->bytes == 1; x++) ((uint8_t *)out)[x] = (uint8_t)work[x];
}

static bool scratch_fit(RfLumaScratch *scratch, int width, int height, int bytes)
{
    if (scratch->rows != NULL && scratch->width == width && scratch->height == height &&
        scratch->bytes == bytes) {
        return true;
    }
    rf_luma_clear(scratch);
    scratch->rows = g_try_malloc_n((size_t)width * (size_t)height, (size_t)bytes);
    scratch->work = g_try_malloc_n((size_t)width * 3, sizeof *scratch->work);
    scratch->width = width, scratch->height = height, scratch->bytes = bytes;
    return scratch->rows != NULL && scratch->work != NULL;
}

/* Sources with a luma plane are lent where they lie. Packed, big-endian, shifted (P010) and RGB ones are converted into
 * a plane of our own; RGB becomes BT.601 luma. */
bool rf_luma_lend(const AVFrame *frame, RfLumaScratch *scratch, RfFrame *lent)
{
    const AVPixFmtDescriptor *layout = av_pix_fmt_desc_get(frame->format);
    *lent = (RfFrame){.luma = frame->data[0],
                      .stride_bytes = frame->linesize[0],
                      .width = frame->width,
                      .height = frame->height,
                      .bit_depth = rf_luma_depth(layout),
                      .is_limited_range = is_limited(frame, layout),
                      .is_interlaced = RF_LIBAV_IS_INTERLACED(frame),
                      .is_top_field_first = RF_LIBAV_IS_TOP_FIRST(frame)};
    if (rf_luma_is_plain(layout)) return true;
    int bytes = lent->bit_depth > 8 ? 2 : 1;
    if (!scratch_fit(scratch, frame->width, frame->height, bytes)) return false;
    lent->stride_bytes = (ptrdiff_t)frame->width * bytes;
    lent->luma = scratch->rows;
    for (int y = 0; y < frame->height; y++) {
        convert_row(frame, layout, y, scratch, (uint8_t *)scratch->rows + y * lent->stride_bytes);
    }
    return true;
}
