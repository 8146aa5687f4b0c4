#include "cli/ruler.h"

RfPicture rf_ruler_still(const RfStill *still)
{
    size_t bytes = still->bit_depth > 8 ? 2 : 1;
    return (RfPicture){
        .pixels = still->pixels,
        .stride_bytes = (ptrdiff_t)(bytes * (size_t)still->width),
        .width = still->width,
        .height = still->height,
        .kind = bytes == 2 ? RF_PIXEL_U16 : RF_PIXEL_U8,
    };
}

RfPicture rf_ruler_background(const RfBackground *background)
{
    return (RfPicture){
        .pixels = background->level,
        .stride_bytes = (ptrdiff_t)(sizeof(float) * (size_t)background->width),
        .width = background->width,
        .height = background->height,
        .kind = RF_PIXEL_FLOAT,
    };
}

static RfLengthScale *measure_still(const char *path, const RfLengthScaleOptions *options, GError **error)
{
    g_autoptr(RfStill) still = rf_video_file_read_still(path, error);
    if (!still)
        return NULL;
    RfPicture picture = rf_ruler_still(still);
    RfLengthScale *scale = rf_length_scale_measure(&picture, options, error);
    if (!scale)
        g_prefix_error(error, "%s: ", path);
    return scale;
}

RfLengthScale *rf_ruler_measure(const RfSettings *settings, const RfBackground *background, GError **error)
{
    RfLengthScaleOptions options = {
        .lines = settings->lines,
        .spacing_m = settings->spacing_m,
        .pixel_aspect = background ? background->pixel_aspect : 1,
        .plane_ratio = settings->plane_ratio,
    };
    if (settings->reticle_image)
        return measure_still(settings->reticle_image, &options, error);
    g_return_val_if_fail(background, NULL);
    RfPicture picture = rf_ruler_background(background);
    RfLengthScale *scale = rf_length_scale_measure(&picture, &options, error);
    if (!scale)
        g_prefix_error(error, "no scale from %s (a still can be named as [reticle] image=): ",
                       rf_ruler_source(settings));
    return scale;
}

const char *rf_ruler_source(const RfSettings *settings)
{
    return settings->reticle_image ? settings->reticle_image : "the recording's own fixed background";
}

void rf_ruler_describe(const RfLengthScale *scale, const char *source, RfScaleRow *row)
{
    *row = (RfScaleRow){
        .found = true,
        .px_per_mm_x = scale->px_per_m_x.value / 1e3,
        .px_per_mm_y = scale->px_per_m_y.value / 1e3,
        .u_px_per_mm_x = scale->px_per_m_x.sigma / 1e3,
        .u_px_per_mm_y = scale->px_per_m_y.sigma / 1e3,
        .rotation_deg = scale->rotation_rad.value * 180 / G_PI,
        .lines_found = scale->lines_found,
        .residual_px = scale->residual_px,
        .source = g_strdup(source),
    };
}
