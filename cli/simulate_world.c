#include "cli/simulate_world.h"

#include "physics/air.h"

#include <gsl/gsl_randist.h>
#include <math.h>

/* One step of splitmix64 (Steele, Lea and Flood 2014) keeps streams of neighbouring seeds apart. */
static unsigned long stream_seed(int seed, RfStream purpose)
{
    uint64_t z = (uint64_t)seed * 64 + (uint64_t)purpose + UINT64_C(0x9e3779b97f4a7c15);
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return (unsigned long)((z ^ (z >> 31)) & 0xffffffff);
}

gsl_rng *rf_simulate_world_stream(const RfScene *scene, RfStream purpose)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, stream_seed(scene->seed, purpose));
    return random;
}

double rf_simulate_world_draw(RfRange range, gsl_rng *random)
{
    return range.low + (range.high - range.low) * gsl_rng_uniform(random);
}

static double around(RfValue stated, gsl_rng *random)
{
    return stated.value + gsl_ran_gaussian(random, 1) * stated.sigma;
}

static void draw_inputs(RfWorld *world, const RfScene *scene)
{
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_INPUTS);
    world->spacing_m = around(scene->spacing_m, random);
    world->medium.plate_gap_m = around(scene->plate_gap_m, random);
    world->medium.gravity_m_s2 = around(scene->gravity_m_s2, random);
    world->medium.oil_density_kg_m3 = around(scene->density_kg_m3, random);
    world->medium.temperature_kelvin = around(scene->temperature_kelvin, random);
    world->pressure_pa = around(scene->pressure_pa, random);
    world->humidity = CLAMP(around(scene->humidity, random), 0, 1);
    world->voltage_v = around(scene->voltage_v, random);
    gsl_rng_free(random);
}

static void derive(RfWorld *world)
{
    RfMedium *medium = &world->medium;
    medium->viscosity_pa_s = rf_air_viscosity_pa_s(RF_VISCOSITY_ISO_15900, medium->temperature_kelvin);
    medium->air_density_kg_m3 =
        rf_air_density_kg_m3(medium->temperature_kelvin, world->pressure_pa, world->humidity);
    rf_drag_choose_slip(medium, RF_SLIP_KIM_2005, 0, world->pressure_pa);
}

static double signed_voltage(const RfWorld *world, RfFieldState state)
{
    return state == RF_FIELD_OFF ? 0 : state == RF_FIELD_TOP_PLUS ? world->voltage_v : -world->voltage_v;
}

static void add_field(RfWorld *world, double time_s, RfFieldState state)
{
    RfFieldFrom from = {.time_s = time_s, .voltage_v = signed_voltage(world, state), .state = state};
    g_array_append_val(world->field, from);
}

static void given_schedule(RfWorld *world, const RfScene *scene)
{
    add_field(world, -HUGE_VAL, g_array_index(scene->states, RfFieldState, 0));
    for (unsigned i = 0; i < scene->switches->len; i++) {
        const RfSceneSwitch *one = &g_array_index(scene->switches, RfSceneSwitch, i);
        add_field(world, one->time_s, one->state);
    }
}

/* States follow one another in the order of the sheet, over and over; to 0.1 ms, as an experimenter's log has it. */
static void drawn_schedule(RfWorld *world, const RfScene *scene)
{
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_SCHEDULE);
    double time_s = -HUGE_VAL;
    for (unsigned i = 0;; i++) {
        RfFieldState state = g_array_index(scene->states, RfFieldState, i % scene->states->len);
        add_field(world, time_s, state);
        RfRange stay_s = state == RF_FIELD_OFF ? scene->off_s : scene->on_s;
        time_s = (i == 0 ? 0 : time_s) + rf_simulate_world_draw(stay_s, random);
        time_s = round(time_s * 1e4) / 1e4;
        if (scene->states->len < 2 || time_s >= scene->duration_s) break;
    }
    gsl_rng_free(random);
}

/* Ornstein-Uhlenbeck of the stated rms, seen every twentieth of its time. */
static void draw_drift(RfWorld *world, const RfScene *scene)
{
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_DRIFT);
    world->drift_step_s = MAX(scene->drift_time_s / 20, 1e-3);
    size_t n = (size_t)ceil((scene->duration_s + 10) / world->drift_step_s) + 2;
    double keep = exp(-world->drift_step_s / scene->drift_time_s), fresh = sqrt(1 - keep * keep);
    double drift_m_s = gsl_ran_gaussian(random, 1) * scene->drift_m_s;
    for (size_t i = 0; i < n; i++) {
        g_array_append_val(world->drift_m_s, drift_m_s);
        drift_m_s = keep * drift_m_s + fresh * gsl_ran_gaussian(random, 1) * scene->drift_m_s;
    }
    gsl_rng_free(random);
}

RfWorld *rf_simulate_world_new(const RfScene *scene)
{
    RfWorld *world = g_new0(RfWorld, 1);
    world->field = g_array_new(FALSE, FALSE, sizeof(RfFieldFrom));
    world->drift_m_s = g_array_new(FALSE, FALSE, sizeof(double));
    world->tilt_rad = scene->tilt_rad;
    draw_inputs(world, scene);
    derive(world);
    if (scene->switches->len > 0)
        given_schedule(world, scene);
    else
        drawn_schedule(world, scene);
    draw_drift(world, scene);
    return world;
}

void rf_simulate_world_free(RfWorld *world)
{
    if (!world) return;
    g_array_unref(world->field);
    g_array_unref(world->drift_m_s);
    g_free(world);
}

const RfFieldFrom *rf_simulate_world_field_at(const RfWorld *world, double time_s)
{
    unsigned i = world->field->len;
    while (i > 1 && g_array_index(world->field, RfFieldFrom, i - 1).time_s > time_s) i--;
    return &g_array_index(world->field, RfFieldFrom, i - 1);
}

double rf_simulate_world_drift_m_s(const RfWorld *world, double time_s)
{
    double place = MAX(time_s, 0) / world->drift_step_s;
    unsigned i = MIN((unsigned)place, world->drift_m_s->len - 2);
    const double *drift = &g_array_index(world->drift_m_s, double, i);
    return drift[0] + (drift[1] - drift[0]) * MIN(place - i, 1);
}

double rf_simulate_world_on_s(const RfWorld *world, double from_s, double to_s)
{
    double on_s = 0;
    for (unsigned i = 0; i < world->field->len; i++) {
        const RfFieldFrom *field = &g_array_index(world->field, RfFieldFrom, i);
        double end_s = i + 1 < world->field->len ? field[1].time_s : HUGE_VAL;
        if (field->state != RF_FIELD_OFF) on_s += MAX(0, MIN(end_s, to_s) - MAX(field->time_s, from_s));
    }
    return on_s;
}
