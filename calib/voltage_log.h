/* A supply's log: its own levels and switches, on its own clock. Not for lining that clock up with the recording.
 * Noise is read from neighbouring samples, so ripple and drifting levels don't pass for switches; the samples of a ramp belong to no
 * spell. Safe from any thread. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/table.h"
#include "calib/units.h"

typedef struct {           /* a stretch at one level */
    double start_s, end_s; /* first and last sample at this level, the log's clock */
    int sign;              /* top plate against bottom: +1, -1, or 0 = off */
    RfValue voltage_V;     /* signed mean; sigma of the mean, from the samples alone */
    double ripple_V;       /* standard deviation of the samples */
    unsigned samples;
} RfLogSpell;

typedef struct {    /* between spells i and i + 1 */
    RfValue time_s; /* where the voltage passes halfway; sigma from the samples' distance */
    double ramp_s;  /* time from the last sample of one level to the first of the next */
} RfLogSwitch;

typedef struct {
    GArray *spells;    /* RfLogSpell, in time; at least one */
    GArray *switches;  /* RfLogSwitch: one fewer than spells */
    double noise_V;    /* from neighbouring samples */
    double interval_s; /* median distance of samples */
} RfVoltageLog;

#define RF_VOLTAGE_LOG_ERROR (rf_voltage_log_error_quark())
GQuark rf_voltage_log_error_quark(void);

typedef enum {
    RF_VOLTAGE_LOG_ERROR_TIME,  /* doesn't rise */
    RF_VOLTAGE_LOG_ERROR_SHORT, /* too few samples, or never at rest */
} RfVoltageLogError;

/* Columns time and voltage in any unit of theirs (`time_s,voltage_V`; `Time (ms); U`'s unit is read from its header).
 * (returns new) */
RfVoltageLog *rf_voltage_log_read(const char *path, GError **error);
/* The same from numbers. `name` begins the errors. */
RfVoltageLog *rf_voltage_log_from_samples(const double *time_s, const double *voltage_V, size_t n,
                                          const char *name, GError **error);
void rf_voltage_log_free(RfVoltageLog *log);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfVoltageLog, rf_voltage_log_free)
