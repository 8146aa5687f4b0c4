/* Instants at which one droplet's charge changed, while the field was on or across an off state.
 * Not for switches of the field (field_timeline.h). Likelihood ratio over all instants, one step at a time, the best
 * kept while it beats a threshold that lets chance pass in fewer than 1 in 1000 droplets. */
#pragma once

#include <glib.h>

#include "physics/droplet_fit.h"

typedef struct {
    RfValue time_s;
    bool across_off; /* somewhere in an off state: time_s its middle, sigma its length over sqrt(12) */
    RfValue before_coulomb, after_coulomb;
    RfValue change_coulomb; /* sigma with the correlation of before and after */
    double log_likelihood_gain;
} RfChargeStep;

/* model->steps is ignored; fit is the droplet's fit without steps.
 *   returns new array of RfChargeStep, by time; empty where nothing stands out. Charges and sigmas are those of the
 *   final fit with these steps */
GArray *rf_charge_step_find(const RfTrail *trail, const RfDropletModel *model, const RfDropletFit *fit);

/* Chance that a step of whole multiples of unit would be found at least this far from the nearest multiple (the nearest
 * one other than 0); 1 where sigma exceeds a third of the unit and nothing can be said. */
double rf_charge_step_whole_multiples_p(const RfChargeStep *step, double unit_coulomb);
