/* When, within a frame, one switch happened: the likelihood of the paths of all droplets around it, over a grid of
 * instants. Not for whether it happened (field_states.c). */
#pragma once

#include "physics/field_timeline.h"

/* Moves switch number (from 0) and the intervals on either side to the mean of the likelihood; sigma is its spread.
 * droplets becomes the number of witnesses that tell. */
void rf_switch_instant_refine(RfFieldTimeline *timeline, unsigned number, const RfSwitchWitness *witnesses,
                              size_t n);
