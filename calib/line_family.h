/* One family of nearly parallel ruled lines in a picture: angle, period and phase to about a pixel. Not for locating lines
 * (line_pieces.h), nor for metres.
 *
 * Everything is in a plane turned so that lines run along its first axis: `along` and `across` are stored pixels, x and y of the
 * picture for horizontal lines, y and x for vertical ones. */
#pragma once

#include <glib.h>
#include <stdbool.h>

typedef struct {
    int along, across; /* size */
    float *v;          /* v[a * across + c] */
} RfLinePlane;

/* Where the lines are expected once the family is known: across = first + index * period + slope * (along - middle). */
typedef struct {
    double first_px, period_px, slope, middle_px;
    bool is_dark;
} RfLineComb;

/* Angle, period and phase from sums along the lines; slopes up to `steepest`. Returns the number of lines seen: with fewer than 2
 * the comb has no period. */
unsigned rf_line_family_find(const RfLinePlane *plane, double steepest, RfLineComb *comb);
