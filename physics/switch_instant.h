/* When, within a frame, one switch happened: the likelihood of the paths of all droplets around it, over a grid of
 * instants. Not for whether it happened (field_states.c). */
#pragma once

#include "physics/field_timeline.h"

/* Moves switch number (from 0) and the intervals on either side to the mean of the likelihood; sigma is its spread.
 * droplets becomes the number of witnesses that tell. */
void rf_switch_instant_refine(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                              size_t n);

typedef struct {
    double bounded; /* no droplet has a part of more than 7: was there a switch? */
    double open;    /* nor of less than -7: which one? */
} RfSwitchGain;

/* How much likelier the paths are with the first (last) switch at its best instant within half a second of the
 * recording's start (end) than with it at the very start (end), that is, without it. Natural logarithms, >= 0. */
RfSwitchGain rf_switch_instant_gain(const RfFieldTimeline *timeline, unsigned number,
                                    const RfSwitchWitness *witnesses, size_t n, bool is_first);
