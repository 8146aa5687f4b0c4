/* Small value types that every room may use: a number with its uncertainty, and pairs that must not mix.
 * Header only; not for conversions (those live where the scale is known). Sigma is always one standard
 * uncertainty (JCGM 100, 2.3.1), in the same unit as the value. */
#pragma once

typedef struct {
    double value;
    double sigma; /* >= 0; 0 means exact */
} RfValue;

/* A place in the picture: stored pixels, x right, y down, (0, 0) the centre of the top-left stored pixel. */
typedef struct {
    double x, y;
} RfPixel;

/* A place in the cell: metres, x across gravity (positive right when gravity points down), y along gravity. */
typedef struct {
    double x, y;
} RfMetre;
