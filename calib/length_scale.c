#include "calib/length_scale.h"

#include <math.h>
#include <stdint.h>
#include <string.h>

#include "calib/line_family.h"
#include "calib/line_fit.h"
#include "calib/line_pieces.h"

GQuark rf_length_scale_error_quark(void)
{
    return g_quark_from_static_string("rf-length-scale-error-quark");
}

static const int least_size_px = 32;
static const double steepest = 0.27; /* tan 15 degrees, in square pixels */

/* A lens's distortion shows as lines that bend, or lie unevenly: it takes five to tell either from noise. */
static const int least_lines_for_k1 = 5;

void rf_length_scale_free(RfLengthScale *scale)
{
    if (!scale) return;
    g_array_unref(scale->lines);
    g_free(scale);
}

static double level_at(const RfPicture *picture, int x, int y)
{
    const char *row = (const char *)picture->pixels + y * picture->stride_bytes;
    switch (picture->kind) {
    case RF_PIXEL_U8:
        return ((const uint8_t *)(const void *)row)[x];
    case RF_PIXEL_U16:
        return ((const uint16_t *)(const void *)row)[x];
    case RF_PIXEL_FLOAT:
        return (double)((const float *)(const void *)row)[x];
    }
    return 0.0;
}

static bool check_picture(const RfPicture *picture, GError **error)
{
    if (picture->width < least_size_px || picture->height < least_size_px) {
        g_set_error(error, RF_LENGTH_SCALE_ERROR, RF_LENGTH_SCALE_ERROR_PICTURE,
                    "the reticle's picture is %d x %d pixels; at least %d x %d are needed", picture->width,
                    picture->height, least_size_px, least_size_px);
        return false;
    }
    if (picture->kind != RF_PIXEL_FLOAT) return true;
    for (int y = 0; y < picture->height; y++)
        for (int x = 0; x < picture->width; x++)
            if (!isfinite(level_at(picture, x, y))) {
                g_set_error(error, RF_LENGTH_SCALE_ERROR, RF_LENGTH_SCALE_ERROR_PICTURE,
                            "the reticle's picture isn't finite at pixel (%d, %d)", x, y);
                return false;
            }
    return true;
}

/* Turned so that the family's lines run along the plane's first axis. */
static RfLinePlane turn_plane(const RfPicture *picture, bool is_horizontal)
{
    RfLinePlane plane = {is_horizontal ? picture->width : picture->height,
                         is_horizontal ? picture->height : picture->width, NULL};
    plane.v = g_new(float, (size_t)plane.along *(size_t)plane.across);
    for (int y = 0; y < picture->height; y++)
        for (int x = 0; x < picture->width; x++) {
            size_t at = is_horizontal ? (size_t)x * (size_t)plane.across + (size_t)y
                                      : (size_t)y * (size_t)plane.across + (size_t)x;
            plane.v[at] = (float)level_at(picture, x, y);
        }
    return plane;
}

/* Everything known about one family. */
typedef struct {
    bool is_horizontal;
    RfLineComb comb;
    GArray *pieces; /* RfLinePiece */
    int lines;
    int first_index, last_index;
    double width_px;
} Family;

static void count_lines(Family *family)
{
    family->lines = 0;
    for (unsigned i = 0; i < family->pieces->len; i++) {
        int index = g_array_index(family->pieces, RfLinePiece, i).index;
        if (i == 0) family->first_index = index;
        if (i == 0 || index != family->last_index) family->lines++;
        family->last_index = index;
    }
}

static const char *name_of(const Family *family)
{
    return family->is_horizontal ? "horizontal" : "vertical";
}

static bool refuse_lines(const Family *family, int code, GError **error, const char *what)
{
    g_set_error(error, RF_LENGTH_SCALE_ERROR, code, "%s reticle lines: %s", name_of(family), what);
    return false;
}

/* Two lines tell the spacing only if there's no room for a third that would have been seen. */
static bool are_neighbours(const RfLinePlane *plane, const Family *family)
{
    double margin_px = 0.1 * family->comb.period_px;
    double before_px = family->comb.first_px + (family->first_index - 1) * family->comb.period_px;
    double behind_px = family->comb.first_px + (family->last_index + 1) * family->comb.period_px;
    return before_px < margin_px && behind_px > plane->across - 1 - margin_px;
}

static bool check_lines(const RfLinePlane *plane, const Family *family, GError **error)
{
    int teeth = family->last_index - family->first_index + 1;
    if (family->lines == 0)
        return refuse_lines(
            family, RF_LENGTH_SCALE_ERROR_NO_LINES, error,
            "none found in the picture; is the reticle in focus and in the picture, or is it empty?");
    if (family->lines == 1)
        return refuse_lines(family, RF_LENGTH_SCALE_ERROR_FEW_LINES, error,
                            "only one found in the picture; at least two, one spacing apart, are needed");
    if (family->lines == 2 && !are_neighbours(plane, family))
        return refuse_lines(
            family, RF_LENGTH_SCALE_ERROR_FEW_LINES, error,
            "only two found, with room for more beside them, so that they needn't be neighbours; "
            "three or more are needed");
    if (3 * family->lines < teeth)
        return refuse_lines(family, RF_LENGTH_SCALE_ERROR_FEW_LINES, error,
                            "those found don't lie at regular distances; are they a ruled scale?");
    return true;
}

static bool find_family(const RfPicture *picture, bool is_horizontal, double pixel_aspect, Family *family,
                        GError **error)
{
    RfLinePlane plane = turn_plane(picture, is_horizontal);
    *family = (Family){.is_horizontal = is_horizontal};
    unsigned peaks = rf_line_family_find(
        &plane, is_horizontal ? steepest * pixel_aspect : steepest / pixel_aspect, &family->comb);
    if (peaks < 2) {
        family->pieces = g_array_new(false, false, sizeof(RfLinePiece));
        family->lines = (int)peaks;
    } else {
        family->pieces = rf_line_pieces_locate(&plane, &family->comb, &family->width_px);
        count_lines(family);
    }
    bool is_good = check_lines(&plane, family, error);
    g_free(plane.v);
    return is_good;
}

/* From the turned plane's stored pixels to square pixels about the picture's centre. */
static void add_pieces(const Family *family, const RfPicture *picture, double pixel_aspect, GArray *all)
{
    double middle_x = 0.5 * (picture->width - 1), middle_y = 0.5 * (picture->height - 1);
    for (unsigned i = 0; i < family->pieces->len; i++) {
        const RfLinePiece *piece = &g_array_index(family->pieces, RfLinePiece, i);
        double x = family->is_horizontal ? piece->along_px : piece->across_px;
        double y = family->is_horizontal ? piece->across_px : piece->along_px;
        RfFitPiece added = {family->is_horizontal,
                            piece->index - family->first_index,
                            (x - middle_x) * pixel_aspect,
                            y - middle_y,
                            piece->sigma_px * (family->is_horizontal ? 1.0 : pixel_aspect),
                            1.0,
                            0.0};
        g_array_append_val(all, added);
    }
}

static void begin_fit(const Family *family, const RfPicture *picture, double pixel_aspect, RfLineFit *fit)
{
    const RfLineComb *comb = &family->comb;
    double along = family->is_horizontal ? picture->width : picture->height;
    double across = family->is_horizontal ? picture->height : picture->width;
    double first_px = comb->first_px + family->first_index * comb->period_px +
                      comb->slope * (0.5 * (along - 1) - comb->middle_px) - 0.5 * (across - 1);
    if (family->is_horizontal) {
        double angle = atan(comb->slope / pixel_aspect);
        fit->rotation_rad.value = angle;
        fit->period_y_px.value = comb->period_px * cos(angle);
        fit->first_y_px = first_px * cos(angle);
    } else {
        double angle = -atan(comb->slope * pixel_aspect);
        fit->rotation_rad.value = angle;
        fit->period_x_px.value = comb->period_px * pixel_aspect * cos(angle);
        fit->first_x_px = first_px * pixel_aspect * cos(angle);
    }
}

static double half_diagonal_px(const RfPicture *picture, double pixel_aspect)
{
    return 0.5 * hypot(picture->width * pixel_aspect, picture->height);
}

/* k1 belongs to the scale only where it stands out; else its noise would make the scale's worse. */
static bool fit_lines(GArray *pieces, const RfPicture *picture, double pixel_aspect, bool can_tell_k1,
                      RfLineFit *fit, RfLengthScale *scale)
{
    RfLineFit bent = *fit;
    double h_px = half_diagonal_px(picture, pixel_aspect);
    if (!rf_line_fit(pieces, h_px, false, fit)) return false;
    if (!can_tell_k1) return true;
    if (!rf_line_fit(pieces, h_px, true, &bent)) return rf_line_fit(pieces, h_px, false, fit);
    scale->k1 = bent.k1;
    scale->uses_k1 = fabs(bent.k1.value) > 3.0 * bent.k1.sigma;
    if (!scale->uses_k1) return rf_line_fit(pieces, h_px, false, fit);
    *fit = bent;
    return true;
}

static RfPixel stored_pixel(const RfFitPiece *piece, const RfPicture *picture, double pixel_aspect)
{
    return (RfPixel){piece->x_px / pixel_aspect + 0.5 * (picture->width - 1),
                     piece->y_px + 0.5 * (picture->height - 1)};
}

static void list_lines(const GArray *pieces, const RfPicture *picture, double pixel_aspect,
                       RfLengthScale *scale)
{
    RfReticleLine line = {0};
    for (unsigned i = 0; i < pieces->len; i++) {
        const RfFitPiece *piece = &g_array_index(pieces, RfFitPiece, i);
        bool is_last = i + 1 == pieces->len || piece[1].index != piece->index ||
                       piece[1].is_horizontal != piece->is_horizontal;
        if (piece->weight > 0.0) {
            RfPixel at = stored_pixel(piece, picture, pixel_aspect);
            if (line.pieces++ == 0) line.from = at;
            line.to = at;
            line.residual_px += piece->residual_px;
        }
        if (!is_last) continue;
        line.is_horizontal = piece->is_horizontal;
        line.index = piece->index;
        if (line.pieces) {
            line.residual_px /= line.pieces;
            g_array_append_val(scale->lines, line);
        }
        line = (RfReticleLine){0};
    }
    scale->lines_found = scale->lines->len;
}

static RfValue divided(RfValue value, double by)
{
    return (RfValue){value.value / by, value.sigma / by};
}

/* Stored pixels per metre in the droplets' plane. */
static RfValue per_metre(RfValue px_per_spacing, const RfLengthScaleOptions *o)
{
    double scale = px_per_spacing.value / o->spacing_m.value * o->plane_ratio.value;
    double relative =
        hypot(px_per_spacing.sigma / px_per_spacing.value,
              hypot(o->spacing_m.sigma / o->spacing_m.value, o->plane_ratio.sigma / o->plane_ratio.value));
    return (RfValue){scale, scale * relative};
}

static void fill_scale(const RfLineFit *fit, const RfLengthScaleOptions *o, RfLengthScale *scale)
{
    bool has_x = fit->period_x_px.value > 0.0, has_y = fit->period_y_px.value > 0.0;
    RfValue x = has_x ? fit->period_x_px : fit->period_y_px, y = has_y ? fit->period_y_px : fit->period_x_px;
    scale->px_per_spacing_x = divided(x, o->pixel_aspect);
    scale->px_per_spacing_y = y;
    scale->px_per_m_x = per_metre(scale->px_per_spacing_x, o);
    scale->px_per_m_y = per_metre(scale->px_per_spacing_y, o);
    scale->rotation_rad = fit->rotation_rad;
    scale->squareness = (RfValue){y.value / x.value, fit->squareness_sigma};
    scale->residual_px = fit->residual_px;
}

/* A fit to what isn't lines can end anywhere: upright, inside out, at infinity. */
static bool is_sensible(const RfLineFit *fit, const Family families[2], int n, double pixel_aspect)
{
    double most_rad = atan(2.0 * steepest * fmax(pixel_aspect, 1.0 / pixel_aspect));
    bool is_good = fabs(fit->rotation_rad.value) <= most_rad && isfinite(fit->rotation_rad.sigma);
    for (int i = 0; i < n; i++) {
        RfValue period_px = families[i].is_horizontal ? fit->period_y_px : fit->period_x_px;
        is_good = is_good && period_px.value > 0.0 && isfinite(period_px.value) && isfinite(period_px.sigma);
    }
    return is_good;
}

static bool measure(const RfPicture *picture, const RfLengthScaleOptions *o, Family families[2], int n,
                    RfLengthScale *scale, GError **error)
{
    RfLineFit fit = {0};
    bool can_tell_k1 = true;
    g_autoptr(GArray) pieces = g_array_new(false, false, sizeof(RfFitPiece));
    for (int i = n - 1; i >= 0; i--) begin_fit(&families[i], picture, o->pixel_aspect, &fit);
    for (int i = 0; i < n; i++) {
        add_pieces(&families[i], picture, o->pixel_aspect, pieces);
        can_tell_k1 = can_tell_k1 && families[i].lines >= least_lines_for_k1;
    }
    if (!fit_lines(pieces, picture, o->pixel_aspect, can_tell_k1, &fit, scale) ||
        !is_sensible(&fit, families, n, o->pixel_aspect))
        return refuse_lines(
            &families[0], RF_LENGTH_SCALE_ERROR_FEW_LINES, error,
            "what was found doesn't determine angle and spacing; more or longer lines are needed");
    fill_scale(&fit, o, scale);
    list_lines(pieces, picture, o->pixel_aspect, scale);
    scale->line_width_px = families[0].width_px * (families[0].is_horizontal ? 1.0 : o->pixel_aspect);
    scale->is_dark = families[0].comb.is_dark;
    return true;
}

RfLengthScale *rf_length_scale_measure(const RfPicture *picture, const RfLengthScaleOptions *options,
                                       GError **error)
{
    Family families[2] = {{0}, {0}};
    int n = 0;
    bool is_found = check_picture(picture, error);
    g_autoptr(RfLengthScale) scale = g_new0(RfLengthScale, 1);
    scale->lines = g_array_new(false, false, sizeof(RfReticleLine));
    if (is_found && options->lines != RF_RETICLE_VERTICAL)
        is_found = find_family(picture, true, options->pixel_aspect, &families[n++], error);
    if (is_found && options->lines != RF_RETICLE_HORIZONTAL)
        is_found = find_family(picture, false, options->pixel_aspect, &families[n++], error);
    is_found = is_found && measure(picture, options, families, n, scale, error);
    for (int i = 0; i < n; i++) g_array_unref(families[i].pieces);
    return is_found ? g_steal_pointer(&scale) : NULL;
}
