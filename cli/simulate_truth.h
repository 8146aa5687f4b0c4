/* The truth beside a synthetic recording, as text: one function per file. Not for writing: the caller puts them into
 * the result folder. All return new strings; numbers of droplets, spells and switches count from 1.
 *   paths     every droplet in every exposure between its first and last sight; `visible` says whether it counts,
 *             `duplicate` that the picture was a repeat and so counts for nothing, bound_px what the best estimator could do
 *   droplets  one row per spell; bounds from simulate_bounds.h, empty where nothing can be known */
#pragma once

#include "cli/simulate_bounds.h"
#include "cli/simulate_reticle.h"

char *rf_simulate_truth_paths(const RfRecord *record);
char *rf_simulate_truth_droplets(const RfRecord *record, const RfWorld *world);
char *rf_simulate_truth_switches(const RfRecord *record, const RfWorld *world, const RfScene *scene);
char *rf_simulate_truth_steps(const RfRecord *record, const RfWorld *world);
char *rf_simulate_truth_scale(const RfRecord *record, const RfWorld *world, const RfScene *scene,
                              const RfView *view, const RfReticle *reticle);
char *rf_simulate_truth_model(const RfRecord *record, const RfWorld *world);
