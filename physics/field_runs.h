/* The recording cut into runs in each of which every droplet keeps one fall speed: by optimal partition over all
 * droplets together (B. Jackson et al., IEEE Signal Process. Lett. 12 (2005) 105, pruned as in R. Killick,
 * P. Fearnhead, I. A. Eckley, J. Am. Stat. Assoc. 107 (2012) 1590). Steps of charge are found too and tracking
 * mistakes as well: field_states.c sorts them out. Times are good to about a tenth of a second. Where the droplets in view
 * change and none but one at most was watched throughout, there is an edge too. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "physics/trail.h"

typedef struct {
    double time_s; /* watched in this run; 0: not at all */
    double speed_m_s;
    double variance_m2_s2;
} RfRunSpeed;

typedef struct
{ /* where a droplet was watched: in the runs from first to before end, whose speeds lie from `at` on */
    size_t first, end, at;
} RfRunSpan;

typedef struct {
    size_t droplets, runs;
    double bin_s;    /* edges are whole numbers of bins apart */
    double *edge_s;  /* runs + 1 */
    bool *is_blind;  /* runs + 1; edge where one droplet or none was in view: a switch may have gone unseen */
    RfRunSpan *span; /* droplets */
    RfRunSpeed *speed;          /* of all spans, one behind the other */
    double *diffusion_m2_s;     /* droplets; from the across axis, shrunk towards the common value */
    double *own_diffusion_m2_s; /* droplets; not shrunk, may be negative */
    size_t *samples;            /* droplets */
} RfFieldRuns;

RfFieldRuns *rf_field_runs_new(const RfTrail *trails, size_t n);
/* The same with neighbouring runs of one label as one, except across blind edges. part: runs of `runs`, filled with the
 * number of the new run that each is in. (returns new) */
RfFieldRuns *rf_field_runs_merge(const RfFieldRuns *runs, const unsigned *label, size_t *part);
/* A droplet's speed in a run; time_s 0 where it wasn't watched. (borrowed) */
const RfRunSpeed *rf_field_runs_speed(const RfFieldRuns *runs, size_t droplet, size_t run);
void rf_field_runs_free(RfFieldRuns *runs);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFieldRuns, rf_field_runs_free)
