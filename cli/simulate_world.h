/* What the synthetic bench really is: inputs drawn around what the sheet states, air and drag that follow from them,
 * when the field switches, how the air drifts. Not for droplets (simulate_motion.h).
 * Every random thing has a stream of its own, made from the scene's seed and its purpose, so that adding dust or a
 * droplet doesn't change the schedule. */
#pragma once

#include <glib.h>
#include <gsl/gsl_rng.h>

#include "cli/simulate_scene.h"
#include "physics/drag.h"

typedef enum {
    RF_STREAM_INPUTS = 1,
    RF_STREAM_SCHEDULE,
    RF_STREAM_CLOCK,
    RF_STREAM_DRIFT,
    RF_STREAM_CAMERA,
    RF_STREAM_BODIES,
    RF_STREAM_MOTION,
    RF_STREAM_PICTURE, /* dust and hot pixels */
    RF_STREAM_NOISE,
    RF_STREAM_LOG,
    RF_STREAM_HAND,
} RfStream;

/* (returns new) Free with gsl_rng_free. */
gsl_rng *rf_simulate_world_stream(const RfScene *scene, RfStream purpose);

double rf_simulate_world_draw(RfRange range, gsl_rng *random);

typedef struct {              /* the field from time_s on */
    double time_s, voltage_v; /* signed: top against bottom */
    RfFieldState state;
} RfFieldFrom;

typedef struct {
    RfMedium medium; /* air, oil, gravity and gap */
    double spacing_m, pressure_pa, humidity;
    double voltage_v;    /* between the plates, either way */
    double tilt_rad;     /* of the field against gravity */
    GArray *field;       /* RfFieldFrom, the first at -infinity */
    double drift_step_s; /* across gravity, common to all droplets, linear between these points */
    GArray *drift_m_s;   /* double */
} RfWorld;

/* (returns new) ISO 15900 viscosity, Kim 2005 slip, CIPM-2007 air. */
RfWorld *rf_simulate_world_new(const RfScene *scene);
void rf_simulate_world_free(RfWorld *world);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfWorld, rf_simulate_world_free)

const RfFieldFrom *rf_simulate_world_field_at(const RfWorld *world, double time_s);
double rf_simulate_world_drift_m_s(const RfWorld *world, double time_s);

/* Time between the two instants for which the field is not off. */
double rf_simulate_world_on_s(const RfWorld *world, double from_s, double to_s);
