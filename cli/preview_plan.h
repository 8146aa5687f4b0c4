/* Which parts of a recording the report shows: around every switch, charge step and hand timing that needs a look,
 * every frame; of every droplet a stretch at a rate that still reads as motion. Short recordings are shown whole. How
 * much there is of it is bounded however long the recording and however many its droplets. Pure. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/preview.h"
#include "cli/results.h"

enum {
    RF_PREVIEW_MOMENT_FRAMES = 17, /* every frame around a moment: 8 before, 8 behind */
    RF_PREVIEW_MOST_FRAMES = 4000, /* in all */
};

typedef struct {
    double start_s, stop_s;
} RfPreviewSpan;

typedef struct {
    GArray *every;     /* RfPreviewSpan, ascending and apart: every frame in them */
    GArray *stretches; /* the same: frames at stretch_hz */
    double stretch_hz;
    GArray *
        moments; /* RfMoment: kind, number, droplet, time; what the budget leaves no room for is in no span */
} RfPreviewPlan;

/* Reads paths, droplets, switches, steps and audit. frame_rate_hz > 0: of the recording. (returns new) */
RfPreviewPlan *rf_preview_plan_new(const RfResults *results, double frame_rate_hz);
void rf_preview_plan_free(RfPreviewPlan *plan);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPreviewPlan, rf_preview_plan_free)

/* The frame at time_s belongs in the film; previous_s: the time of the one before it there (-INFINITY: none). */
bool rf_preview_plan_wants(const RfPreviewPlan *plan, double time_s, double previous_s);

/* The first instant from time_s on that lies in a span; INFINITY: there are no more. */
double rf_preview_plan_next_s(const RfPreviewPlan *plan, double time_s);
