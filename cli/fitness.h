/* Whether a recording is fit for measuring: what was found out about it becomes a table with one plain verdict per
 * matter. Pure; not for finding out: examine.h does that. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "calib/units.h"

/* What is known of a recording. Lengths in stored pixels of its frames; levels in grey levels of its bit depth. */
typedef struct {
    /* the file */
    char codec[32], container[64];
    int width_px, height_px, bit_depth;
    double pixel_aspect; /* width of a stored pixel over its height */
    bool is_limited_range, is_interlaced, is_lossless;
    double bits_per_pixel; /* what the file spends on a stored pixel of a frame; 0: unknown */
    double frame_rate_hz;  /* mean */
    bool is_rate_constant;
    double tick_s, duration_s;
    int64_t frames, times_missing, times_backwards, gaps;

    /* the part looked at; an exposure is a frame, or one field of an interlaced one */
    double part_start_s, part_stop_s;
    int64_t part_frames, part_exposures;
    double interval_shortest_s, interval_longest_s; /* between exposures */
    int64_t frames_damaged, frames_lost;            /* concealed by the decoder; not there at all */
    int64_t exposures_repeated;                     /* the picture before, shown once more */

    /* light */
    double mean_level, noise_sd;
    double noise_correlation;   /* of neighbouring pixels' noise; near 0 unless compressed or denoised */
    double black_clipped_share; /* of the picture: background at the lowest level */
    double flicker_relative_sd; /* of the lamp's brightness, from exposure to exposure */

    /* droplets followed for a moment at least */
    unsigned droplets;
    double droplets_per_exposure, snr_median, snr_lower_quartile;
    double followed_mean_s; /* how long one was followed */
    double spot_width_px;   /* standard deviation of a typical droplet's spot */
    double saturated_share; /* of the measurements */

    /* camera */
    double movement_rms_px, movement_longest_px; /* of the reticle about its mean place */
    double rotation_rms_deg;
    double unposed_share; /* of the exposures: the reticle was not found in them */

    /* errors of position */
    RfValue
        excess_scatter; /* over what the picture's noise explains; 1: as it should be; sigma 0: not determined */
    RfValue error_correlation; /* from one exposure to the next; sigma 0: not determined */
    double
        standstill_share; /* of the steps of moving droplets: the picture before was copied to the last digit */
    RfValue
        keyframe_jump_px; /* onwards along the motion where the encoder starts afresh; sigma 0: not determined */
    RfValue combing;      /* of footage said to be progressive: 0 as it should be, +-0.5 where two fields
                                        are woven into one frame; sigma 0: not determined */
    bool is_combing_untested; /* nobody looked for it */
} RfFitnessFigures;

typedef enum {
    RF_FITNESS_FIT,
    RF_FITNESS_CARE, /* usable with care */
    RF_FITNESS_UNFIT,
} RfFitnessVerdict;

const char *rf_fitness_verdict_to_string(RfFitnessVerdict verdict); /* "usable with care" */

typedef struct {
    const char *key; /* "timestamps": stable */
    char *figure;    /* "30 frames/s, constant" */
    RfFitnessVerdict verdict;
    char *advice; /* what it means and what to do next time; NULL where fit */
} RfFitnessLine;

/* (returns new) RfFitnessLine, always the same keys in the same order. */
GArray *rf_fitness_judge(const RfFitnessFigures *figures);

/* The worst of the lines. */
RfFitnessVerdict rf_fitness_overall(const GArray *lines);
