/* What every stage of linking looks at: the spots in square pixels of the reference picture, the motion model read from
 * them, the options. Internal to linking; not for spots of another recording. */
#pragma once

#include <glib.h>

#include "tracker/linker.h"
#include "tracker/motion.h"

/* A spot that belongs to somebody. */
typedef struct {
    unsigned exposure;
    int spot;
} RfHit;

typedef struct {
    const RfSightings *sightings; /* (borrowed) */
    const RfFieldCourse *field;   /* (borrowed) may be NULL */
    RfLinkerOptions options;
    RfSight *sights;  /* one per spot; within an exposure in the sightings' order */
    int *by_height;   /* spots of each exposure in rising at_px[1] */
    bool *is_usable;  /* per exposure: a new picture, well posed */
    bool *is_claimed; /* per spot: belongs to a path */
    RfMotionModel model;
    double newcomers_px2; /* spots of no known droplet, per square pixel and exposure */
    double merge_px;      /* two spots nearer than this may be seen as one */
    double area_px2;
    double exposure_s; /* typical time between usable exposures */
} RfLinkScene;

/* (returns new) Borrows all arguments for the scene's life. */
RfLinkScene *rf_link_scene_new(const RfSightings *sightings, const RfFieldCourse *field,
                               const RfLinkerOptions *options);
void rf_link_scene_free(RfLinkScene *scene);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfLinkScene, rf_link_scene_free)

static inline const RfExposure *rf_link_scene_exposure(const RfLinkScene *scene, unsigned i)
{
    return &g_array_index(scene->sightings->exposures, RfExposure, i);
}

static inline const RfSpot *rf_link_scene_spot(const RfLinkScene *scene, int i)
{
    return &g_array_index(scene->sightings->spots, RfSpot, i);
}

/* First entry of by_height in that exposure whose spot lies at or below height_px. */
unsigned rf_link_scene_first_from(const RfLinkScene *scene, unsigned exposure, double height_px);
