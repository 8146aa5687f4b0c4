/* When a droplet crossed the reticle's lines: the tracked counterpart of what a person with a stopwatch does. A passage begins
 * where the path crosses a line and ends where it first reaches the level so many divisions on: first passage, since a
 * Brownian path may cross a line several times. Not for deciding who timed which.
 * Positions are the fixed-interval smoother's where there are any, straight between frames. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "cli/results.h"

typedef struct {
    unsigned droplet;
    unsigned course; /* index of the droplet, from 0 */
    int line;        /* where it began; counts the way things fall */
    double start_s, end_s;
    double sigma_s; /* of end - start: localisation, and what happens between frames */
    int64_t first_frame, last_frame;
    unsigned switches;   /* of the field between start and end */
    double switch_s;     /* the first of them */
    double voltage_sign; /* field at the start: 0 off, +1 top plate positive, -1; 2 unknown */
    bool is_first;       /* the start is a first passage too, not a crossing again */
} RfPassage;

typedef struct RfLineCrossings RfLineCrossings;

/* Reads results->paths, ->switches, ->scale (has_lines), ->gravity_axis_deg. NULL: the scale has no lines across gravity.
 * (returns new) */
RfLineCrossings *rf_line_crossings_new(const RfResults *results);
void rf_line_crossings_free(RfLineCrossings *crossings);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfLineCrossings, rf_line_crossings_free)

/* Every passage over `divisions` > 0 (whole or not), all droplets, by start, then droplet. RfPassage (returns new) */
GArray *rf_line_crossings_passages(const RfLineCrossings *crossings, double divisions, bool is_rise);

unsigned rf_line_crossings_courses(const RfLineCrossings *crossings);
unsigned rf_line_crossings_droplet(const RfLineCrossings *crossings, unsigned course);
/* First and last time at which it was followed. */
void rf_line_crossings_span(const RfLineCrossings *crossings, unsigned course, double *first_s,
                            double *last_s);
/* Of the whole recording, as far as droplets were followed. */
double rf_line_crossings_end_s(const RfLineCrossings *crossings);
double rf_line_crossings_step_mm(const RfLineCrossings *crossings);
