/* Every spot of one frame: position with its uncertainty, nothing remembered from frame to frame. A finder is
 * learned once from frames of the whole recording and then only read, by as many threads as there are. What a
 * frame shows depends on that frame and the finder alone, so frames may be looked at in any order.
 * Not for linking: which spot is which droplet is decided elsewhere. */
#pragma once

#include "tracker/background.h"
#include "tracker/frame.h"
#include "tracker/sightings.h"

#include <glib.h>
#include <stdbool.h>

typedef struct RfSpotFinder RfSpotFinder;   /* the model; immutable, shared by threads */
typedef struct RfSpotScratch RfSpotScratch; /* a worker's own memory; one thread at a time */

typedef enum {
    RF_POLARITY_FIND,   /* decided from the recording */
    RF_POLARITY_BRIGHT, /* droplets brighter than the background */
    RF_POLARITY_DARK,
} RfPolarity;

typedef struct {
    double false_per_exposure; /* (0, 1]: false spots that noise alone may give in one exposure */
    RfPolarity polarity;
    int threads; /* 0: one per core; they don't alter what is learned */
} RfSpotFinderOptions;

#define RF_SPOT_FINDER_DEFAULTS                                                                              \
    {                                                                                                        \
        .false_per_exposure = 0.02, .polarity = RF_POLARITY_FIND, .threads = 1                               \
    }

/* (returns new) NULL with an error where the sample is too small. Deterministic.
 *   sample   8 frames or more, spread over the recording; not needed afterwards
 *   options  NULL for the defaults */
RfSpotFinder *rf_spot_finder_learn(const RfPictureSample *sample, const RfSpotFinderOptions *options,
                                   GError **error);
void rf_spot_finder_free(RfSpotFinder *finder);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotFinder, rf_spot_finder_free)

RfSpotScratch *rf_spot_scratch_new(const RfSpotFinder *finder);
void rf_spot_scratch_free(RfSpotScratch *scratch);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotScratch, rf_spot_scratch_free)

/* A few hundred pixels of an exposure, for telling a repeated picture from a new one. */
#define RF_FINGERPRINT_PIXELS 1024
typedef struct {
    uint16_t pixels[RF_FINGERPRINT_PIXELS];
} RfFingerprint;

/* What one frame shows: one exposure, or two (the fields in order of time) where it is interlaced. */
typedef struct {
    unsigned exposures;     /* 1 or 2 */
    RfExposure exposure[2]; /* first_spot counts from 0 within `spots` */
    RfFingerprint fingerprint[2];
    double gain[2]; /* brightness of the lamp over that of the background; unitless, about 1 */
    GArray *spots;  /* of RfSpot; sorted by y_px, then x_px, within each exposure */
} RfLook;

void rf_look_init(RfLook *look);  /* before its first use */
void rf_look_clear(RfLook *look); /* frees what it owns */

/* Fills `look` anew (its memory is used again).
 *   field_interval_s  from the first field to the second; half a frame; not used where the frame isn't
 * interlaced False where the frame's size or bit depth isn't the model's. */
bool rf_spot_finder_look(const RfSpotFinder *finder, RfSpotScratch *scratch, const RfFrame *frame,
                         double field_interval_s, RfLook *look, GError **error);

/* For an ordered pass: does `look` show the very picture that `previous` shows? Sets RF_EXPOSURE_REPEATED on
 * the exposures of `look` that only repeat. `previous` may be NULL (first frame). */
void rf_spot_finder_mark_repeats(const RfSpotFinder *finder, const RfLook *previous, RfLook *look);

/* Adds a frame's exposures and spots behind those already there; first_spot is moved accordingly. */
void rf_look_append(const RfLook *look, RfSightings *sightings);

/* What was learned, for the scale finder, the report and `check`. (borrowed from the finder) */
const RfBackground *rf_spot_finder_background(const RfSpotFinder *finder);

typedef struct {
    bool is_dark;         /* droplets are darker than the background */
    double spot_width_px; /* typical standard deviation of a droplet's spot along x; 0 where none was seen */
    double spots_per_exposure; /* seen in the sample, on average */
    double noise_sd;           /* of one pixel at the background's mean level, grey levels */
    double
        noise_correlation; /* of neighbouring pixels; near 0 unless the recording is compressed or denoised */
    double mean_level;     /* of the background, grey levels */
    double gain_sd;        /* spread of the lamp's brightness, unitless */
    double saturated_spot_share; /* of the spots of the sample, 0..1 */
    double median_snr;           /* of the spots of the sample */
    double movement_rms_px;      /* of the camera over the sample */
} RfSpotFinderFindings;
const RfSpotFinderFindings *rf_spot_finder_findings(const RfSpotFinder *finder);
