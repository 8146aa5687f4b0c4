/* Every frame of a recording past a caller's function, on as many threads as wanted, and the results in
 * order. Stretches of the recording are decoded side by side, one thread each, and each frame is looked at
 * while it is in cache; where a file has too few stretches, libav's own threads decode beside the workers.
 * Results don't depend on the number of threads as long as `look` sees nothing but the frame and constant
 * data: it must not remember the frame before (compare neighbours in `consume`). */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "tracker/frame.h"
#include "tracker/video_file.h"

typedef struct {
    /* On a worker's thread. The frame is lent for this call only. Returns a result (owned by the feed until
     * it is consumed); NULL is a result like any other. */
    void *(*look)(const RfFrame *frame, void *worker, void *user);

    /* On the caller's thread, strictly in the order of frames. (takes result.) The frame has no luma any
     * more. false stops the feed with that error. */
    bool (*consume)(const RfFrame *frame, void *result, void *user, GError **error);

    void (*result_free)(void *result); /* for results that were never consumed; NULL: nothing to free */
    void *(*worker_new)(void *user);   /* scratch space of one worker; on the caller's thread. NULL: none */
    void (*worker_free)(void *worker);
    void (*progress)(int64_t done, int64_t total, void *user); /* on the caller's thread; may be NULL */
    int (*is_cancelled)(void); /* polled for every frame from any thread; may be NULL */
    void *user;
} RfFrameLook;

typedef struct {
    int threads;           /* 0: as many as the machine has cores */
    int results_in_flight; /* limit on results that wait for their turn; 0: 8192 */
} RfFrameFeedOptions;

/* `faults` (may be NULL) sums what all readers met. Errors: RF_VIDEO_ERROR (CANCELLED among them), or
 * consume's own. */
bool rf_frame_feed_run(const RfVideoFile *file, const RfFrameLook *look, const RfFrameFeedOptions *options,
                       RfVideoFaults *faults, GError **error);

typedef struct {
    int frames;         /* >= 1: about as many are taken */
    int spacing_frames; /* >= 1: between samples from the same keyframe on */
    int threads; /* 0: as many as the machine has cores. With 1 on the caller's thread, in the order of slots */
    /* Any thread. The frame is lent for this call only. `slot` counts samples in the order of frames from 0 on, with gaps
     * where a group of frames was short, and goes a little beyond `frames`. false: stop early (not an error). */
    bool (*take)(const RfFrame *frame, int slot, void *user);
    void *user;
} RfSampling;

/* Frames spread evenly over the part in use, for learning the background. Where keyframes suffice, only these are decoded.
 * Where they don't, every keyframe is followed by further samples `spacing_frames` apart, as far as its group reaches.
 * Where frames can't be reached on their own (not indexed, or no keyframe in the part), samples are `spacing_frames` apart
 * from the start on. Deterministic: which frame has which slot depends on the file alone. */
bool rf_frame_feed_sample(const RfVideoFile *file, const RfSampling *how, GError **error);
