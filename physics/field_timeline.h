/* When the supply was switched, and which state each interval is in: read from the motion of all droplets together,
 * named by the sheet or by the voltage log. Not for changes of charge (charge_step.h): a switch moves every charged
 * droplet, a step moves one.
 *
 * Detection: the displacements of all droplets are cut into runs of constant velocity (optimal partition, R. Killick,
 * P. Fearnhead, I. A. Eckley, J. Am. Stat. Assoc. 107 (2012) 1590), runs are labelled with states such that each
 * droplet has one velocity per state, a droplet's vote per run being bounded so that a step of charge can't pass for
 * a switch. Instants are then refined within a frame by the likelihood of the paths. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"
#include "physics/medium.h"
#include "physics/path_likelihood.h"
#include "physics/trail.h"

enum { RF_FIELD_STATES = 3 };

typedef struct {
    double start_s, end_s; /* the first starts and the last ends with the recording's samples */
    RfFieldState state;
    double voltage_v; /* signed: top against bottom */
} RfFieldInterval;

typedef struct {
    RfValue time_s;
    RfFieldState from, to; /* the same where one level of a state gave way to another */
    double change_v;       /* of the voltage, signed */
    unsigned droplets;     /* how many tell of it */
    bool has_log_time;
    double log_time_s;   /* on the log's own clock */
    double u_log_time_s; /* its sampling interval over sqrt(12) */
} RfFieldSwitch;

typedef enum {
    RF_LOG_AGREES,        /* never listed */
    RF_LOG_MISSING,       /* tracks show a switch that the log doesn't */
    RF_LOG_EXTRA,         /* the log has a switch that tracks contradict */
    RF_LOG_UNSEEN,        /* the log has a switch while nothing charged was in view */
    RF_LOG_UNTIED,        /* no droplet moved with the field: the log's clock is taken as the recording's */
    RF_LOG_LATE,          /* both have it, apart by more than chance (4 sigma) */
    RF_LOG_VOLTAGE_MISFIT /* the voltage of an interval doesn't fit the motion (4 sigma) */
} RfLogFindingKind;

typedef struct {
    RfLogFindingKind kind;
    double time_s; /* on the recording's clock */
    RfValue
        difference; /* late: log less tracks, s; untied: offset taken, s; misfit: voltage by motion less log, V; else 0 */
} RfLogFinding;

/* A stretch whose state the motion can't settle. */
typedef struct {
    double start_s, end_s;
    double chance; /* that it is another state than stated */
} RfStateDoubt;

typedef struct {
    GArray *intervals; /* RfFieldInterval, contiguous, at least one */
    GArray *switches;  /* RfFieldSwitch, one between neighbouring intervals */
    GArray *findings;  /* RfLogFinding, by time */
    bool has_log;
    RfValue log_offset_s; /* log clock less recording clock, at the middle of the recording */
    RfValue log_drift;    /* relative rate of the log's clock; value 0 where not significant. Unitless */
    GArray *doubts;       /* RfStateDoubt, by time; chances below 1e-3 are not listed */
} RfFieldTimeline;

RfFieldTimeline *rf_field_timeline_new(void);
void rf_field_timeline_free(RfFieldTimeline *timeline);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFieldTimeline, rf_field_timeline_free)

/* A stretch of the voltage log at one level. */
typedef struct {
    double start_s, end_s; /* log clock; a span starts where the one before it ends */
    double u_start_s;      /* of its start, of a rectangular distribution; 0 for the first */
    RfFieldState state;
    double voltage_v; /* signed */
} RfLogSpan;

typedef struct {
    unsigned states;                     /* 1..3; how many of the next are used */
    RfFieldState state[RF_FIELD_STATES]; /* in the order in which they first occur */
    double top_plus_v, top_minus_v;      /* > 0 and < 0, of the supply; unused states may be 0 */
    const RfLogSpan *log;                /* (borrowed) in time order, or NULL */
    size_t log_spans;
    double log_clock_reach_s; /* largest offset searched; 0: any overlap */
    const RfMedium
        *medium; /* (borrowed) or NULL; with it, a droplet's wander tells how fast it falls without field */
} RfFieldSheet;

/* Does anything seen in [start, end] hang on a state in doubt? */
bool rf_field_timeline_is_doubtful(const RfFieldTimeline *timeline, double start_s, double end_s);

/* Trails may be whole paths or fragments. Needs at least one sample in all; no switch found is a result, not an error.
 *   returns new, or NULL with error (a log that can't be matched, states that can't be) */
RfFieldTimeline *rf_field_timeline_find(const RfTrail *trails, size_t n, const RfFieldSheet *sheet,
                                        GError **error);

/* What refining needs to know of one droplet: its speed under a field, straight from its fit. */
typedef struct {
    const RfTrail *trail;
    bool usable;
    RfPathNoise noise;                    /* of the fall axis */
    double fall_m_s;                      /* field off */
    size_t spells;                        /* of constant charge */
    const double *spell_end_s;            /* (borrowed) spells */
    const double *speed_per_volt_m_s_v;   /* (borrowed) spells; speed added per volt */
    const double *u_speed_per_volt_m_s_v; /* (borrowed) spells */
} RfSwitchWitness;

/* Moves each switch to the mean of its likelihood over all witnesses, and states its sigma; intervals follow. With a
 * log, its clock and the findings about late switches and misfitting voltages are drawn up anew. */
void rf_field_timeline_refine(RfFieldTimeline *timeline, const RfSwitchWitness *witnesses, size_t n);

/* Integral of the voltage from the first interval's start to a time, V s; outside the timeline the nearest state
 * goes on. Piecewise linear. */
double rf_field_timeline_impulse_v_s(const RfFieldTimeline *timeline, double time_s);
const RfFieldInterval *rf_field_timeline_at(const RfFieldTimeline *timeline, double time_s); /* (borrowed) */
