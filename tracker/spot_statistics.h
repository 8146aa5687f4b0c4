/* What the sampled exposures say of noise, polarity and the droplets' size, for setting up the finder. */
#pragma once

#include "tracker/spot_finder.h"

typedef struct RfSpotStatistics RfSpotStatistics;

RfSpotStatistics *rf_spot_statistics_new(void);
void rf_spot_statistics_free(RfSpotStatistics *statistics);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSpotStatistics, rf_spot_statistics_free)

/* One exposure's filtered picture of n cells at one size, and (size 0) the picture itself, `width` cells a row. */
void rf_spot_statistics_add(RfSpotStatistics *statistics, int size, const float *filtered, int n, int width,
                            const float *picture);
void rf_spot_statistics_add_lamp(RfSpotStatistics *statistics, double gain);
/* Adds what other exposures gave, so that these may be gathered side by side. */
void rf_spot_statistics_join(RfSpotStatistics *statistics, const RfSpotStatistics *others);

/* Robust sd of the filtered pictures (1.4826 times the median absolute value); 0 where nothing was added. */
double rf_spot_statistics_noise_sd(const RfSpotStatistics *statistics, int size);
/* More is far below the background than above it. */
bool rf_spot_statistics_is_dark(const RfSpotStatistics *statistics);

typedef struct {
    unsigned n;                     /* spots clear enough to tell; 0: the rest means nothing */
    double sharpest_px, typical_px; /* standard deviations, in units of a pixel's height */
} RfSpotWidths;
RfSpotWidths rf_spot_statistics_widths(const GArray *spots, double pixel_aspect);

void rf_spot_statistics_describe_noise(const RfSpotStatistics *statistics, const RfBackground *background,
                                       RfSpotFinderFindings *findings);
void rf_spot_statistics_describe(const GArray *spots, unsigned exposures, RfSpotFinderFindings *findings);
