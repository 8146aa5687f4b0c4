/* `risefall simulate`: a scene file in, a folder out with the recording, the run sheet that goes with it, and the
 * truth. Only a plot: what happens is in simulate_*.c. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

typedef struct { /* what was made, for a summary; free with rf_simulate_summary_clear */
    char *sheet_path;
    int64_t frames;
    int droplets, bodies, switches;
    double duration_s;
} RfSimulateSummary;

void rf_simulate_summary_clear(RfSimulateSummary *summary);

/* May be NULL. false: stop, nothing is left behind. */
typedef bool (*RfSimulateProgress)(int64_t done, int64_t total, void *user);

/* The folder appears whole or not at all: recording, sheet.ini, truth_*.csv, truth_*.json and, where the scene has them,
 * reticle.png, timings.csv, volts.csv. The same scene gives the same bytes. `summary` may be NULL. */
bool rf_simulate(const char *scene_path, const char *out_dir, RfSimulateProgress progress, void *user,
                 RfSimulateSummary *summary, GError **error);
