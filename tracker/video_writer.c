#include <math.h>
#include <string.h>

#include "tracker/libav.h"
#include "tracker/rgb.h"
#include "tracker/video_error.h"
#include "tracker/video_file.h"

struct RfVideoWriter {
    RfVideoWriterOptions options;
    char *path;
    RfEncoder *encoder;
    int64_t last_ticks;
    bool is_finished;
};

static bool check_options(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    bool is_grey_ffv1 = options->codec == RF_VIDEO_CODEC_FFV1 && !options->is_colour;
    int deepest = is_grey_ffv1 ? 16 : options->codec == RF_VIDEO_CODEC_H264 && !options->is_colour ? 10 : 8;
    if (!rf_video_check_size(path, options->width, options->height, error)) return false;
    if (!is_grey_ffv1 && (options->width % 2 || options->height % 2)) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER,
                    "%s: %d x %d pixels; this codec needs even numbers", path, options->width,
                    options->height);
        return false;
    }
    bool is_depth = options->bit_depth == 8 || options->bit_depth == 10 || options->bit_depth == 12 ||
                    options->bit_depth == 16;
    if (is_depth && options->bit_depth <= deepest) return true;
    g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER, "%s: %d bit; this codec takes up to %d", path,
                options->bit_depth, deepest);
    return false;
}

static RfVideoWriterOptions with_defaults(const RfVideoWriterOptions *given)
{
    RfVideoWriterOptions options = *given;
    if (options.bit_depth == 0) options.bit_depth = 8;
    if (!(options.frame_rate_hz > 0)) options.frame_rate_hz = 30;
    if (options.ticks_per_s <= 0) options.ticks_per_s = 90000;
    if (!(options.pixel_aspect > 0)) options.pixel_aspect = 1;
    if (options.codec == RF_VIDEO_CODEC_MJPEG) options.is_full_range = true;
    return options;
}

/* Grey frames leave the chroma at this for good. */
static bool paint_neutral(RfVideoWriter *writer, GError **error)
{
    RfCanvas canvas;
    if (!rf_encoder_canvas(writer->encoder, &canvas, error)) return false;
    int depth = writer->options.bit_depth, rows = (writer->options.height + 1) / 2;
    for (int plane = 1; plane < 3 && canvas.planes[plane] != NULL; plane++) {
        size_t bytes = (size_t)rows * (size_t)canvas.strides_bytes[plane];
        if (depth == 8) memset(canvas.planes[plane], 128, bytes);
        uint16_t *levels = (void *)canvas.planes[plane];
        for (size_t i = 0; i < bytes / 2 && depth > 8; i++) levels[i] = (uint16_t)(1 << (depth - 1));
    }
    return true;
}

RfVideoWriter *rf_video_file_create(const char *path, const RfVideoWriterOptions *options, GError **error)
{
    g_autoptr(RfVideoWriter) writer = g_new0(RfVideoWriter, 1);
    writer->options = with_defaults(options);
    writer->path = g_strdup(path);
    writer->last_ticks = INT64_MIN;
    if (!check_options(path, &writer->options, error)) return NULL;
    writer->encoder = rf_encoder_create(path, &writer->options, error);
    if (writer->encoder == NULL || !paint_neutral(writer, error)) return NULL;
    return g_steal_pointer(&writer);
}

static void paint(const RfVideoWriter *writer, const RfCanvas *canvas, const void *pixels,
                  ptrdiff_t stride_bytes)
{
    const RfVideoWriterOptions *options = &writer->options;
    if (options->is_colour) {
        rf_rgb_to_yuv420(pixels, stride_bytes, options->width, options->height, canvas->is_full_range,
                         canvas->planes, canvas->strides_bytes);
        return;
    }
    size_t row_bytes = (size_t)options->width * (options->bit_depth > 8 ? 2 : 1);
    for (int y = 0; y < options->height; y++) {
        memcpy(canvas->planes[0] + (ptrdiff_t)y * canvas->strides_bytes[0],
               (const uint8_t *)pixels + y * stride_bytes, row_bytes);
    }
}

bool rf_video_file_write(RfVideoWriter *writer, const void *pixels, ptrdiff_t stride_bytes, double time_s,
                         GError **error)
{
    int64_t ticks = llround(time_s / rf_encoder_tick_s(writer->encoder));
    if (ticks <= writer->last_ticks) {
        g_set_error(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_ENCODER,
                    "%s: a frame at %.6f s, less than a tick after the one before", writer->path, time_s);
        return false;
    }
    RfCanvas canvas;
    if (!rf_encoder_canvas(writer->encoder, &canvas, error)) return false;
    paint(writer, &canvas, pixels, stride_bytes);
    writer->last_ticks = ticks;
    return rf_encoder_write(writer->encoder, ticks, error);
}

bool rf_video_file_finish(RfVideoWriter *writer, GError **error)
{
    bool was_finished = writer->is_finished;
    writer->is_finished = true;
    return was_finished || rf_encoder_finish(writer->encoder, error);
}

void rf_video_writer_free(RfVideoWriter *writer)
{
    if (writer == NULL) return;
    rf_encoder_free(writer->encoder);
    g_free(writer->path);
    g_free(writer);
}
