/* Where a droplet's radius by its fall and by its spread disagree: what could cause it, and what this droplet and the
 * others say about each cause. Not for deciding whether they disagree (droplet_fit.h), nor what to do then. */
#pragma once

#include "physics/droplet_set.h"

typedef enum {
    RF_CAUSE_COMMON_MOTION, /* convection, camera: would move all droplets alike */
    RF_CAUSE_EVAPORATION,   /* would show as a trend of the speed */
    RF_CAUSE_DUST,          /* not a droplet: neither its density nor a charge */
    RF_CAUSE_TRACKING,      /* two droplets taken for one, errors that last: spread too large */
    RF_CAUSES
} RfCause;

const char *rf_cause_to_string(RfCause cause); /* "convection or camera motion" */

typedef struct {
    bool is_supported; /* the evidence speaks for it; else against it, or says nothing */
    char *evidence;    /* in words */
} RfCauseEvidence;

/* found: RF_CAUSES, filled; free each evidence. set in the order of trails; droplet: index of a fitted one. */
void rf_two_radii_examine(const RfTrail *trails, const RfDropletSet *set, const RfMedium *medium,
                          size_t droplet, RfCauseEvidence found[RF_CAUSES]);
