/* One droplet's measured path in the cell, as physics sees it: metres along and across gravity.
 * Not for pictures: scale, pixel aspect, rotation and camera motion are already applied. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

typedef struct {
    double time_s;
    double fall_m;   /* along gravity, positive downward */
    double drift_m;  /* across gravity, positive right when gravity points down */
    double u_fall_m; /* one standard uncertainty of this measurement, localisation only */
    double u_drift_m;
} RfSample;

typedef struct {
    unsigned droplet;        /* number from 1 */
    size_t n;
    const RfSample *samples; /* (borrowed) measured positions only, in time order, never bridged ones */
} RfTrail;

/* State of the supply: top plate against bottom plate. */
typedef enum {
    RF_FIELD_OFF,       /* plates at the same potential */
    RF_FIELD_TOP_PLUS,  /* top plate positive: a positive charge falls faster */
    RF_FIELD_TOP_MINUS, /* top plate negative */
} RfFieldState;
