/* All droplets of one recording: timeline, common drift, memory of the noise, fits, steps; each helped by the others.
 * Not for the common inputs' uncertainty (the budget), nor for the unit. */
#pragma once

#include <glib.h>

#include "physics/charge_step.h"
#include "physics/droplet_swap.h"
#include "physics/evaporation.h"
#include "physics/for_each.h"

typedef struct {
    const RfMedium *medium;    /* (borrowed) */
    const RfFieldSheet *sheet; /* (borrowed) */
    RfSideBySide side_by_side; /* all 0: one after another */
} RfDropletSetSettings;

typedef struct {
    RfDropletFit fit;
    GArray *steps; /* RfChargeStep */
    bool
        is_swapped; /* one of the steps is rather another droplet: the fit, which takes it for the same one, won't do */
    RfDropletSwap swap; /* the surest one, where it is */
} RfDropletResult;

typedef struct {
    RfFieldTimeline *timeline;
    RfCommonDrift *drift;
    RfNoiseMemory fall_memory, across_memory;
    RfEvaporation evaporation; /* found in the paths; where it is plain, the fits are of paths without it */
    size_t n;
    RfDropletResult *droplets; /* n, in the order of the trails */
} RfDropletSet;

/*   trails       n > 0, each numbered
 *   returns new, or NULL with error (a log that can't be matched) */
RfDropletSet *rf_droplet_set_measure(const RfTrail *trails, size_t n, const RfDropletSetSettings *settings,
                                     GError **error);
void rf_droplet_set_free(RfDropletSet *set);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfDropletSet, rf_droplet_set_free)
