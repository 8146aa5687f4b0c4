/* Footage for the report, as the page carries it: a small film of the stretches and moments worth looking at, and which
 * frame of the recording each of its frames is. Not for choosing them (preview_plan.h) nor for filming
 * (preview_film.h). */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

typedef enum {
    RF_MOMENT_SWITCH,      /* a field switch; number: the switch */
    RF_MOMENT_STEP,        /* a charge step; number: its row in steps.csv, from 1 */
    RF_MOMENT_TIMED_START, /* where a hand timing that needs a look begins; number: the entry */
    RF_MOMENT_TIMED_STOP,  /* where it ends by the recording, or by hand where the recording doesn't tell */
    RF_MOMENTS
} RfMomentKind;

typedef struct {
    RfMomentKind kind;
    unsigned number;
    unsigned droplet;         /* 0: none in particular */
    double time_s;            /* in the recording */
    bool is_filmed;           /* every frame around it is in the film; else the rest is 0 */
    unsigned first, at, last; /* frames of the film; `at` is the one nearest to time_s */
} RfMoment;

typedef struct {
    int64_t frame;    /* of the recording */
    double time_s;    /* in the recording */
    unsigned film_ms; /* in the film: real time within a stretch, what lies between stretches left out */
} RfPreviewFrame;

typedef struct {
    GBytes *film;      /* VP9 in WebM */
    int width, height; /* of the film: square pixels */
    GArray *frames;    /* RfPreviewFrame, ascending */
    GArray *moments;   /* RfMoment */
} RfPreview;

/* (returns new) With empty arrays. */
RfPreview *rf_preview_new(void);
void rf_preview_free(RfPreview *preview);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPreview, rf_preview_free)
