/* Where the fixed part of the picture (reticle, dust in the eyepiece) lies in a frame: shift and rotation against a
 * reference picture, by Gauss-Newton on its steepest pixels (Lucas and Kanade 1981; template gradients as in Baker and
 * Matthews 2004), from coarse to fine. Robust to droplets and to the lamp's brightness; no memory between frames.
 * Not for zoom or perspective: the camera's distance is taken as constant. */
#pragma once

#include "tracker/frame.h"
#include "tracker/sightings.h"

#include <stdbool.h>

typedef struct RfRegistration RfRegistration;               /* immutable, shared by threads */
typedef struct RfRegistrationScratch RfRegistrationScratch; /* one per worker */

/* (returns new) for a reference picture of width * height grey levels, not kept. `noise_sd` in grey levels, of one pixel. */
RfRegistration *rf_registration_new(const float *level, int width, int height, double pixel_aspect,
                                    double noise_sd);
void rf_registration_free(RfRegistration *registration);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfRegistration, rf_registration_free)

RfRegistrationScratch *rf_registration_scratch_new(const RfRegistration *registration);
void rf_registration_scratch_free(RfRegistrationScratch *scratch);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfRegistrationScratch, rf_registration_scratch_free)

/* Lines run one way only: the picture is free to slide along them, and nobody would notice. */
bool rf_registration_is_one_way(const RfRegistration *registration);

/* Where lines run one way only, the shift is the one across them.
 * False where the picture has too little structure, or where the frame doesn't match it (another scene, a cut): the
 * pose is zero then. The frame's size is the reference picture's.
 *   u_px  one standard uncertainty of the shift, from the fit's own scatter; NULL if not wanted */
bool rf_registration_find(const RfRegistration *registration, RfRegistrationScratch *scratch,
                          const RfFrame *frame, RfPose *pose, double *u_px);
