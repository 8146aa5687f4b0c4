/* What really happened, kept while the pictures are drawn: every body in every exposure, then cut into droplets as an
 * observer counts them (out of the view for more than a second: a new droplet). Not for files (simulate_truth.h). */
#pragma once

#include "cli/simulate_motion.h"
#include "cli/simulate_view.h"

typedef struct {
    int64_t frame;
    double time_s;
    RfPixel px;           /* stored pixels of its exposure: mean over the time it was open */
    RfPixel reference_px; /* the same for a camera at rest */
    double snr, bound_px;
    uint8_t field;    /* interlaced: 1 for the second in time */
    bool is_visible;  /* well inside the picture and bright enough to count */
    bool is_in_view;  /* its middle is inside the picture and it is bright enough to be made out at all */
    bool is_repeated; /* the picture before was shown once more */
} RfSeenAt;

typedef struct {
    RfBody *body;
    GArray *seen; /* RfSeenAt, one per exposure of its life */
} RfLife;

typedef struct { /* a droplet as an observer counts them */
    unsigned number, life;
    unsigned first, last; /* in the life's `seen`: first and last visible */
    unsigned frames;      /* visible exposures between them */
} RfTrueDroplet;

typedef struct {
    GPtrArray *lives; /* RfLife */
    GArray *droplets; /* RfTrueDroplet, after rf_simulate_record_cut */
    double exposure_interval_s, exposure_s;
    double scale_px_m; /* rows per metre */
    int64_t frames;
    double last_s; /* time of the last exposure */
} RfRecord;

RfRecord *rf_simulate_record_new(void);
void rf_simulate_record_free(RfRecord *record);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfRecord, rf_simulate_record_free)

/* (takes body) */
RfLife *rf_simulate_record_add(RfRecord *record, RfBody *body);

/* Fills `droplets`, in order of first sight. */
void rf_simulate_record_cut(RfRecord *record);

const RfLife *rf_simulate_record_life(const RfRecord *record, const RfTrueDroplet *droplet);

/* The droplet's row nearest in time, if it was visible within one and a half exposures of time_s; else NULL. */
const RfSeenAt *rf_simulate_record_at(const RfRecord *record, const RfTrueDroplet *droplet, double time_s);
