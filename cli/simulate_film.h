/* Plays a scene from the first exposure to the last: moves the bodies, lets new ones in, draws each frame and hands it
 * over. Not for files: the caller says what happens to a frame. */
#pragma once

#include "cli/simulate_record.h"
#include "cli/simulate_render.h"

/* One finished frame, valid during the call. false with `error` set ends the film. */
typedef bool (*RfFilmFrame)(const void *pixels, ptrdiff_t stride_bytes, double time_s, int64_t frame,
                            void *user, GError **error);

typedef struct {
    const RfScene *scene;
    const RfWorld *world;
    const RfView *view;
    RfRenderer *renderer;
} RfFilm;

/* When each frame is taken; GArray of RfFilmTime. (returns new) */
typedef struct {
    double time_s;
    bool is_repeated; /* the picture before is delivered once more */
} RfFilmTime;
GArray *rf_simulate_film_times(const RfScene *scene);

/* Fills `record` and cuts it into droplets. */
bool rf_simulate_film_play(const RfFilm *film, RfRecord *record, RfFilmFrame on_frame, void *user,
                           GError **error);
