/* Everything a run finds out, ready to be written down: what the CSV and JSON writers, the report, the audit and the
 * screen summary read. Not for computing: pipeline.c fills it, nothing else changes it.
 * Times in seconds since the recording's first frame; arrays are GArray of the struct named beside them. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "calib/units.h"
#include "cli/fitness.h"
#include "cli/preview.h"
#include "physics/agreement.h"
#include "physics/charge_budget.h"
#include "physics/trail.h"

typedef struct { /* one row of paths.csv */
    unsigned droplet;
    int64_t frame;
    uint8_t field;       /* interlaced: 0 first, 1 second field in time */
    bool seen;           /* measured, not bridged */
    double time_s;
    double x_px, y_px;   /* stored pixels; the measurement itself where seen */
    double u_x_px, u_y_px;
    double x_mm, y_mm;   /* x across gravity, y along it */
    double u_x_mm, u_y_mm;
    double smooth_x_px, smooth_y_px, u_smooth_x_px, u_smooth_y_px; /* fixed-interval smoother */
    double snr;
} RfPathRow;

typedef struct { /* one row of segments.csv: a droplet in one field state without interruption */
    unsigned droplet, segment;
    double start_s, end_s;
    RfFieldState field;
    double voltage_V;      /* signed: top against bottom */
    RfValue fall_mm_s, drift_mm_s;
    unsigned frames;
} RfSegmentRow;

typedef struct { /* one row of switches.csv */
    unsigned number;
    RfValue time_s;
    RfFieldState from, to;
    unsigned droplets;     /* how many tell of it */
    double log_time_s;     /* on the log's own clock */
    bool has_log_time;
} RfSwitchRow;

typedef struct { /* one row of steps.csv */
    unsigned droplet;
    RfValue time_s;
    RfValue before_C, after_C;
    RfValue change_C;         /* sigma with the correlation of before and after */
    double whole_multiples_p; /* chance of a step this far from whole multiples of the unit; -1: not tested */
} RfStepRow;

typedef struct { /* one row of droplets.csv: one spell of constant charge */
    unsigned recording;      /* in a pool: index of its recording; there `droplet` counts through all of them ... */
    unsigned droplet_there;  /* ... and this is its number in its recording */
    unsigned droplet, spell;
    double start_s, end_s;
    unsigned frames;
    RfValue fall_mm_s;       /* field-off speed v_g, random part */
    RfValue radius_um;
    RfValue charge_C;        /* sigma: everything */
    double u_random_C;       /* the part that is this droplet's own */
    bool has_charge;         /* false: no field was ever on */
    RfValue radius_fall_um, radius_spread_um; /* the radius seen twice; sigma 0: not available */
    double radius_agreement_p;
    int units;
    bool has_units;          /* probability >= 0.95 */
    double units_probability;
    bool accepted;
    char *reason;            /* why set aside; "" if accepted by the program, who restored it and why if by a person */
    double median_snr;
    bool is_overruled;       /* a person decided otherwise than the program did */
} RfDropletRow;

typedef struct {
    bool found;
    double px_per_mm_x, px_per_mm_y, u_px_per_mm_x, u_px_per_mm_y;
    double u_relative_along_gravity; /* of the scale: what charges hang on; 0: take that of px_per_mm_y */
    double rotation_deg;
    unsigned lines_found;
    double residual_px;
    char *source;            /* "reticle.png" or "the recording's own background" */
    bool has_lines;          /* lines across gravity were found: line i lies at y_mm = offset + i step + slope x_mm */
    double line_offset_mm, line_step_mm, line_slope; /* step > 0: i counts the way things fall */
} RfScaleRow;

typedef struct { /* one line of the uncertainty budget of the charge, for a typical accepted droplet */
    char *input;             /* "plate gap" */
    char *stated;            /* "6.000(10) mm" */
    double relative_u;       /* of the input */
    double charge_relative_u;     /* JCGM 100 */
    double charge_relative_u_mc;  /* JCGM 101; negative: not computed */
    bool is_common;          /* shared by all droplets */
} RfBudgetRow;

typedef struct {
    bool resolved;
    RfValue unit_C;          /* valid if resolved; sigma with the common part */
    double u_random_C;
    char *reason;            /* why not resolved, or what supports it */
    double chance;           /* that charges without a common unit would look as good */
    GArray *curve_unit_C;    /* double: trial units */
    GArray *curve_log_likelihood; /* double: relative to the best */
} RfUnitResult;

typedef struct { /* one row of audit.csv */
    unsigned entry;
    char *label;
    unsigned droplet;        /* 0: none matched */
    RfValue hand_time_s, tracked_time_s;
    bool has_tracked;
    double difference_s, en_number;
    const char *finding;     /* static: as in the contract */
    char *evidence;          /* in words, with the frames to look at */
    double match_confidence;
    double start_s;          /* where in the recording to look */
} RfAuditRow;

typedef struct { /* the person behind the timings, from the entries that are sound */
    bool is_known;           /* false: too few entries to say anything */
    unsigned entries, sound, unreadable;
    RfValue bias_s, spread_s; /* of timed intervals: by hand less recording */
    bool has_clock;
    RfValue clock_offset_s;  /* the person's clock less the recording's */
    RfValue start_spread_s, stop_spread_s; /* where the clocks are tied */
    RfValue trend_s_per_min; /* of the difference, over the recording */
    RfAgreement agreement;   /* limits of agreement of by hand less recording, s; n = 0: too few */
    double verdict_level_s;  /* a sound entry's difference less bias is beyond it once in a hundred */
    RfValue velocity_effect; /* relative, median over entries: what the bias does */
    RfValue charge_effect;
    bool has_charge_effect;
} RfPersonRow;

typedef struct { /* a droplet's charge from hand timings alone, over one spell of constant charge */
    unsigned droplet, spell;
    char *label;
    unsigned falls, rises;
    RfValue raw_C, corrected_C; /* corrected: the person's bias taken off */
    RfValue tracked_C;
} RfHandChargeRow;

typedef struct { /* an effect on the droplets that isn't in the charge's formula */
    char *effect, *size, *done; /* "evaporation", how large, what was done about it */
} RfEffectRow;

typedef struct { /* spheres of known size: what was found against their certificate */
    const char *quantity, *unit; /* static */
    RfValue certified, found;    /* sigma of found: common parts too */
    double en_number;            /* |E_n| <= 1: they agree */
    unsigned droplets;           /* that found is the mean of; 0: of none in particular */
} RfCertificateRow;

typedef struct { /* one measured input that all droplets of the recording share: a part of a line of the budget */
    const char *input;       /* static: the sheet's key, or "air_drift" */
    RfChargeLine line;
    double line_share;       /* of the line's variance, 0..1 */
    RfValue value;           /* in `unit`; of a law and of what has no value of its own: 1, or 0, with its sigma */
    const char *unit;        /* static, SI */
    char *shared;            /* name of the one measurement, from [shared]; or of the law; NULL: this recording's own */
    bool is_law;             /* the same for all recordings that use it */
} RfCommonRow;

typedef struct { /* what one standard uncertainty of each line does to one spell's charge, signed */
    unsigned droplet, spell;
    double charge_C[RF_CHARGE_LINES];
} RfInfluenceRow;

typedef enum {
    RF_RECORDING_POOLED,
    RF_RECORDING_SILENT, /* measured, but it tells nothing of the unit */
    RF_RECORDING_EMPTY,  /* ran, but nothing could be measured */
    RF_RECORDING_FAILED, /* no result */
} RfRecordingState;

typedef struct { /* one recording of a pool */
    char *name, *sheet;
    RfRecordingState state;
    char *reason;            /* why it isn't pooled; "" if it is */
    unsigned droplets_accepted, droplets_set_aside;
    bool stands_alone;       /* its own charges settle its unit */
    RfValue unit_C;          /* its own; sigma with its common part */
    double u_random_C, weight;
    RfValue offset;          /* relative: its unit less what the others let expect; sigma 0: no others */
    double deviate, deviate_p;
    RfValue without_C;       /* pooled unit without it; sigma 0: no others */
} RfRecordingRow;

typedef struct { /* one measurement in the pooled unit; or what is each recording's own, together */
    char *input, *name;      /* name NULL: not shared */
    unsigned recordings;
    double unit_relative_u;
} RfMeasurementRow;

typedef struct { /* do the recordings of a pool agree? */
    unsigned used;           /* recordings that tell something of the unit */
    double chi_squared, p;   /* used - 1 degrees of freedom */
    unsigned most_off;       /* index of the recording with the largest deviate */
    double most_off_p;       /* for as many looks as recordings */
} RfAgreementOfRecordings;

typedef enum {
    RF_REVIEW_SET_ASIDE,
    RF_REVIEW_RESTORE,
    RF_REVIEW_CUT,
    RF_REVIEW_JOIN,
} RfReviewAction;

typedef enum {
    RF_REVIEW_NOT_FOUND,    /* no droplet, or more than one, where the entry points */
    RF_REVIEW_NOT_POSSIBLE, /* found, but what is asked for can't be done */
    RF_REVIEW_ALREADY,      /* as asked for without doing anything */
    RF_REVIEW_HONOURED,
} RfReviewOutcome;

typedef struct { /* a droplet as a person points at it: its number then, and one place where it was */
    unsigned droplet;
    double time_s, x_px, y_px;
} RfReviewPlace;

typedef struct { /* one entry of a review file, and what came of it */
    unsigned line;           /* of the file */
    RfReviewAction action;
    RfReviewPlace place;
    RfReviewPlace other;     /* the second droplet of a join */
    double cut_s;            /* when to cut */
    char *reason, *name, *date; /* as written; date may be "" */
    RfReviewOutcome outcome;
    char *detail;            /* what came of it, in words */
    unsigned found, other_found; /* the droplets there as they were followed; 0: none */
    unsigned now, other_now; /* the droplets that it is about now: of a cut, both parts; 0: none */
} RfReviewRow;

typedef struct { /* a setting as it was used, for report and summary.json */
    char *group, *key, *value;
    bool is_default;
    char *remark;            /* where a default comes from */
} RfUsedSetting;

typedef struct { /* an input file and its digest */
    char *role, *path, *sha256;
} RfInputFile;

typedef struct RfResults RfResults;
struct RfResults {
    char *sheet_path;
    GArray *inputs;          /* RfInputFile */
    GArray *settings;        /* RfUsedSetting */
    GArray *notes;           /* RfUsedSetting: the sheet's [notes], word for word */
    GPtrArray *warnings;     /* char* */

    int width, height;
    double pixel_aspect;
    int64_t frames;
    double duration_s;
    char *recording_summary; /* "640 x 480, H.264, 30 frames/s, 60.0 s" */
    RfValue air_temperature_kelvin; /* in the cell; value 0: not known */
    double gravity_axis_deg; /* from the picture's +y towards its -x: camera roll found */

    GArray *fitness;         /* RfFitnessLine: what the recording is like; NULL: it wasn't watched */
    GArray *paths;           /* RfPathRow, by droplet, then time */
    GArray *segments;        /* RfSegmentRow */
    GArray *switches;        /* RfSwitchRow */
    GArray *steps;           /* RfStepRow */
    GArray *droplets;        /* RfDropletRow */
    GArray *budget;          /* RfBudgetRow */
    GArray *common;          /* RfCommonRow */
    GArray *influences;      /* RfInfluenceRow: of spells with a charge, in the order of droplets */
    GArray *audit;           /* RfAuditRow; empty when no timings were given */
    RfScaleRow scale;
    RfUnitResult unit;
    GBytes *view_png;        /* the background with the paths drawn over it, or NULL */
    RfPreview *preview;      /* footage for the report; NULL: none was filmed */
    RfPersonRow person;
    GArray *hand_charges;    /* RfHandChargeRow */
    bool has_log_clock;      /* a voltage log was lined up with the recording */
    RfValue log_offset_s;    /* its clock less the recording's, in the middle */
    RfValue log_drift;       /* relative rate of its clock; 0: none beyond chance */
    GArray *recordings;      /* RfRecordingRow; empty but for a pool */
    GArray *measurements;    /* RfMeasurementRow, largest first; of a pool */
    RfAgreementOfRecordings agreement;
    GArray *effects;         /* RfEffectRow */
    GArray *certificate;     /* RfCertificateRow; empty without a certificate */
    bool measured;           /* false: ran, but nothing could be measured (exit 3) */
    char *verdict;           /* one sentence */
    GPtrArray *cuts;         /* char*: what is said of paths that passed to another droplet and were cut there */
    GArray *review;          /* RfReviewRow, in the order of the file; empty without a review */
    RfResults *without;      /* (owned) measured without the review, paths left out; NULL without one */
};

RfResults *rf_results_new(void);

/* Empty arrays of RfInputFile and of RfUsedSetting that free what their rows hold. (returns new) */
GArray *rf_results_inputs_new(void);
GArray *rf_results_settings_new(void);

/* Adds to results->warnings: what a reader should know before using the numbers. */
void rf_results_warn(RfResults *results, const char *format, ...) G_GNUC_PRINTF(2, 3);

void rf_results_free(RfResults *results);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfResults, rf_results_free)
