#include "cli/ruler.h"

#include <gsl/gsl_multifit.h>
#include <math.h>

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

/* Which family crosses gravity: its lines run across the picture's y where gravity does so. */
static bool is_across(const RfReticleLine *line, double gravity_rad)
{
    return line->is_horizontal == (fabs(cos(gravity_rad)) > fabs(sin(gravity_rad)));
}

static void add_end(gsl_matrix *design, gsl_vector *seen, size_t row, int index, RfMetre at)
{
    gsl_matrix_set(design, row, 0, 1);
    gsl_matrix_set(design, row, 1, index);
    gsl_matrix_set(design, row, 2, at.x * 1e3);
    gsl_vector_set(seen, row, at.y * 1e3);
}

/* y = offset + index step + slope x, least squares over both ends of every line. */
static bool fit_ends(const gsl_matrix *design, const gsl_vector *seen, double fitted[3])
{
    gsl_multifit_linear_workspace *work = gsl_multifit_linear_alloc(design->size1, 3);
    gsl_vector_view answer = gsl_vector_view_array(fitted, 3);
    gsl_matrix *covariance = gsl_matrix_alloc(3, 3);
    double chi_squared;
    int status = gsl_multifit_linear(design, seen, &answer.vector, covariance, &chi_squared, work);
    gsl_matrix_free(covariance);
    gsl_multifit_linear_free(work);
    return status == 0 && fabs(fitted[1]) > 0;
}

void rf_ruler_lines(const RfLengthScale *scale, const RfPictureFrame *frame, RfScaleRow *row)
{
    size_t lines = 0, filled = 0;
    for (guint i = 0; i < scale->lines->len; i++)
        lines += is_across(&g_array_index(scale->lines, RfReticleLine, i), frame->gravity_rad);
    row->has_lines = false;
    if (lines < 2)
        return;
    gsl_matrix *design = gsl_matrix_alloc(2 * lines, 3);
    gsl_vector *seen = gsl_vector_alloc(2 * lines);
    for (guint i = 0; i < scale->lines->len; i++) {
        const RfReticleLine *line = &g_array_index(scale->lines, RfReticleLine, i);
        if (!is_across(line, frame->gravity_rad))
            continue;
        add_end(design, seen, filled++, line->index, rf_picture_frame_to_cell(frame, line->from));
        add_end(design, seen, filled++, line->index, rf_picture_frame_to_cell(frame, line->to));
    }
    double fitted[3];
    row->has_lines = fit_ends(design, seen, fitted);
    row->line_offset_mm = row->has_lines ? fitted[0] : 0;
    row->line_step_mm = row->has_lines ? fabs(fitted[1]) : 0;
    row->line_slope = row->has_lines ? fitted[2] : 0;
    gsl_vector_free(seen);
    gsl_matrix_free(design);
}
