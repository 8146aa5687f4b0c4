/* The bench over months: what the ledger's entries say of each figure, as control charts, and when one moved. Not for the
 * statistics (physics/control_chart.h), nor for files and screen (bench_write.h). */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/ledger_entry.h"
#include "physics/control_chart.h"

typedef struct {
    int64_t entry; /* in the ledger */
    char *measured_on;
    RfValue value;    /* in the chart's unit */
    unsigned signals; /* RfControlSignal */
} RfBenchPoint;

typedef enum {
    RF_BENCH_TOO_FEW,        /* no limits can be set */
    RF_BENCH_STEADY,         /* nothing beyond chance */
    RF_BENCH_STANDS_OUT,     /* single points do */
    RF_BENCH_MAY_HAVE_MOVED, /* a signal of something lasting that chance could well give */
    RF_BENCH_MOVED,          /* it changed and stayed so up to the signal */
} RfBenchState;

typedef struct {
    char *name;              /* of the figure, timing_bias_s; one chart per operator for what is a person's */
    char *of_whom;           /* the operator, or NULL */
    char *title;             /* "timing bias, s: A. Example" */
    GArray *points;          /* RfBenchPoint, in order of time */
    size_t baseline;         /* points that the limits come from */
    size_t baseline_signals; /* how many of them have a signal: limits to be doubted */
    RfControlLimits limits;
    RfBenchState state;
    size_t signal;        /* the first judged point with a signal; meaningful where state says so */
    RfControlShift shift; /* the same */
    char *verdict;        /* one sentence, with the evidence */
} RfBenchChart;

/* A chart for each figure that occurs, in the order: unit, scale, noise, drift, temperature, timing bias. `entries`: RfLedgerEntry
 * in the order of time. A recording that was run several times counts once, with its latest entry. `baseline`: points that set the
 * limits, RF_CONTROL_CHART_BASELINE at least; 0: the first 20, or all where there are fewer. RfBenchChart* (returns new) */
GPtrArray *rf_bench_charts(const GPtrArray *entries, unsigned baseline);

/* "beyond the limits, 7 in a row on one side"; "" for none. (returns new) */
char *rf_bench_signals_to_string(unsigned signals);
