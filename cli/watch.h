/* A recording watched once from end to end: every spot of every exposure, and the picture's fixed part. The picture
 * work is stateless per frame and runs on all threads; only the comparison with the frame before is done in order.
 * Not for linking spots into paths: follow.h does that. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "cli/settings.h"
#include "tracker/sightings.h"
#include "tracker/spot_finder.h"
#include "tracker/video_file.h"

typedef struct {
    RfVideoFile *video;
    RfSpotFinder *finder; /* holds the background */
    RfSightings *sightings;
    RfVideoFaults faults;
    int64_t repeated; /* exposures that only show the picture before once more */
    double coding_noise; /* what compression multiplied the uncertainties of places by */
} RfWatch;

typedef struct {
    int threads; /* 0: one per core */
    void (*progress)(const char *label, int64_t done, int64_t total); /* may be NULL */
} RfWatchHooks;

/* Opens the sheet's recording. (returns new) */
RfVideoFile *rf_watch_open(const RfSettings *settings, GError **error);

/* (returns new) Opens, learns the background, looks at every frame. */
RfWatch *rf_watch_recording(const RfSettings *settings, const RfWatchHooks *hooks, GError **error);
void rf_watch_free(RfWatch *watch);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfWatch, rf_watch_free)

/* Learns the finder from frames spread over the recording, the same with any number of threads. (returns new) */
RfSpotFinder *rf_watch_learn(const RfVideoFile *video, int threads, GError **error);
