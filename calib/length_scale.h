/* Stored pixels per metre, from a picture of a ruled reticle: every line is located below a pixel in many short pieces, and
 * one weighted least-squares fit gives period, phase, angle and, with lines enough, the lens's radial distortion.
 * Not for making that picture: the caller hands over a still or the recording's own fixed background.
 *
 * Model, in square pixels about the picture's centre: a seen point p undistorts to u = p (1 + k1 |p|^2/h^2), h half the
 * picture's diagonal (division-free one-term form of Brown's radial polynomial, D. C. Brown, Close-range camera calibration,
 * Photogrammetric Engineering 37 (1971) 855); line i lies at u . n = b + i P. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"

typedef enum {
    RF_PIXEL_U8,
    RF_PIXEL_U16,   /* native byte order */
    RF_PIXEL_FLOAT, /* any range, finite */
} RfPixelKind;

typedef struct {
    const void *pixels;     /* (borrowed) row 0, left to right */
    ptrdiff_t stride_bytes; /* from one row to the next; may be negative */
    int width, height;      /* stored pixels; at least 32 each */
    RfPixelKind kind;
} RfPicture;

typedef enum {
    RF_RETICLE_GRID,
    RF_RETICLE_HORIZONTAL, /* lines within 15 degrees of the picture's x */
    RF_RETICLE_VERTICAL,   /* lines within 15 degrees of the picture's y */
} RfReticleLines;

typedef struct {
    RfReticleLines lines;
    RfValue spacing_m;   /* between neighbouring lines, > 0 */
    double pixel_aspect; /* width of a stored pixel over its height, > 0 */
    RfValue
        plane_ratio; /* unitless, > 0: scale in the droplets' plane over scale in the reticle's plane; {1, 0} if the same */
} RfLengthScaleOptions;

typedef struct {
    bool is_horizontal; /* which family */
    int index;          /* whole spacings from the family's first line; missing lines keep their number */
    RfPixel from, to;   /* ends of the part seen, stored pixels */
    double residual_px; /* mean distance from where the fit puts it, square pixels */
    unsigned pieces;    /* short pieces that located it */
} RfReticleLine;

typedef struct {
    RfValue px_per_m_x,
        px_per_m_y; /* stored pixels per metre in the droplets' plane, along stored x and y, at the picture's
                                     * centre; sigma of everything. Spacing and plane ratio are common to both */
    RfValue px_per_spacing_x, px_per_spacing_y; /* the picture's part alone: stored pixels per line spacing */
    RfValue rotation_rad; /* from picture x to the horizontal lines, towards +y, in square pixels */
    RfValue
        squareness; /* scale y over scale x in square pixels: 1 unless pixel_aspect is wrong; {1, 0} without a grid */
    RfValue k1;   /* unitless; see above. sigma 0: too few lines to tell */
    bool uses_k1; /* k1 is more than 3 sigma from 0, and the scale was fitted together with it */
    unsigned lines_found;
    double residual_px;   /* rms of the pieces kept, square pixels */
    double line_width_px; /* full width at half depth, across the line, square pixels */
    bool is_dark;         /* lines darker than what is between them */
    GArray *lines;        /* RfReticleLine: horizontal family first, each in order of index */
} RfLengthScale;

typedef enum {
    RF_LENGTH_SCALE_ERROR_PICTURE,   /* too small, or not finite */
    RF_LENGTH_SCALE_ERROR_NO_LINES,  /* nothing in it looks like a ruled line */
    RF_LENGTH_SCALE_ERROR_FEW_LINES, /* lines, but no two whose distance could be the spacing */
} RfLengthScaleError;

#define RF_LENGTH_SCALE_ERROR (rf_length_scale_error_quark())
GQuark rf_length_scale_error_quark(void);

/* (returns new), or NULL with the reason. Pure; safe from any thread; the same picture gives the same bits. */
RfLengthScale *rf_length_scale_measure(const RfPicture *picture, const RfLengthScaleOptions *options,
                                       GError **error);
void rf_length_scale_free(RfLengthScale *scale);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfLengthScale, rf_length_scale_free)
