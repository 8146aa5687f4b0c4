#include "tests/support/droplet_walk.h"

#include <gsl/gsl_randist.h>
#include <math.h>

#include "physics/drag.h"

enum { SUBSTEPS = 20 };

const RfMedium WALK_MEDIUM = {.viscosity_pa_s = 1.83245e-5,
                              .mean_free_path_m = 67.3e-9,
                              .slip = {1.165, 0.483, 0.997},
                              .oil_density_kg_m3 = 886,
                              .air_density_kg_m3 = 1.19,
                              .temperature_kelvin = 296.15,
                              .gravity_m_s2 = 9.80665,
                              .plate_gap_m = 6e-3};

typedef struct {
    double fall_m, across_m;
} Place;

/* One substep, the field as it is at its middle. */
static void advance(const Walk *w, Place *place, double from_s, double to_s, double drag, double fall_m_s,
                    double diffusion, gsl_rng *random)
{
    double dt = to_s - from_s, wander = sqrt(2 * diffusion * dt);
    bool is_after = w->step_s > w->start_s && 0.5 * (from_s + to_s) >= w->step_s;
    double charge = is_after ? w->charge_after_coulomb : w->charge_coulomb;
    double impulse = w->timeline ? rf_field_timeline_impulse_v_s(w->timeline, to_s) -
                                       rf_field_timeline_impulse_v_s(w->timeline, from_s)
                                 : 0;
    place->fall_m += fall_m_s * dt + charge * impulse / (drag * w->medium->plate_gap_m);
    place->fall_m += gsl_ran_gaussian(random, wander);
    place->across_m += w->across_m_s * dt + gsl_ran_gaussian(random, wander);
}

typedef struct {
    double fall, across;
} Noise;

static void next_noise(const Walk *w, Noise *noise, gsl_rng *random)
{
    double fresh = w->noise_m * sqrt(1 - w->noise_memory * w->noise_memory);
    noise->fall = w->noise_memory * noise->fall + gsl_ran_gaussian(random, fresh);
    noise->across = w->noise_memory * noise->across + gsl_ran_gaussian(random, fresh);
}

RfTrail walk_trail_new(const Walk *w, unsigned droplet, gsl_rng *random)
{
    size_t frames = (size_t)floor((w->end_s - w->start_s) / w->frame_s + 1e-9) + 1, n = 0;
    double drag = rf_drag_coefficient_kg_s(w->medium, w->radius_m);
    double fall = rf_drag_settling_speed_m_s(w->medium, w->radius_m);
    double diffusion = rf_drag_diffusion_m2_s(w->medium, w->radius_m);
    RfSample *samples = g_new(RfSample, frames);
    Place place = {0, 0};
    Noise noise = {gsl_ran_gaussian(random, w->noise_m), gsl_ran_gaussian(random, w->noise_m)};
    int open = (int)lround(w->exposure * SUBSTEPS);
    for (size_t i = 0; i < frames; i++) {
        /* The frame's time is the middle of its exposure; the droplet is followed through the whole frame about it. */
        double middle_s = w->start_s + (double)i * w->frame_s;
        Place sum = {0, 0};
        int counted = 0;
        for (int s = 0; s < SUBSTEPS; s++) {
            double from_s = middle_s + ((double)s / SUBSTEPS - 0.5) * w->frame_s;
            advance(w, &place, from_s, from_s + w->frame_s / SUBSTEPS, drag, fall, diffusion, random);
            bool is_open = open > 1 ? abs(2 * s - SUBSTEPS + 1) < open : s == SUBSTEPS / 2 - 1;
            if (!is_open) continue;
            sum.fall_m += place.fall_m;
            sum.across_m += place.across_m;
            counted++;
        }
        next_noise(w, &noise, random);
        if (gsl_rng_uniform(random) < w->missing) continue;
        double jump = w->jump_m != 0 && middle_s >= w->jump_at_s ? w->jump_m : 0;
        samples[n++] = (RfSample){middle_s, sum.fall_m / counted + noise.fall + jump,
                                  sum.across_m / counted + noise.across, w->noise_m, w->noise_m};
    }
    return (RfTrail){droplet, n, samples};
}

void walk_trail_clear(RfTrail *trail)
{
    g_free((void *)trail->samples);
    *trail = (RfTrail){0};
}

RfFieldTimeline *walk_timeline_new(const double *switch_s, size_t n, RfFieldState on, double voltage_v,
                                   double end_s)
{
    RfFieldTimeline *timeline = rf_field_timeline_new();
    for (size_t k = 0; k <= n; k++) {
        RfFieldState state = k % 2 ? on : RF_FIELD_OFF;
        RfFieldInterval interval = {k == 0 ? 0 : switch_s[k - 1], k == n ? end_s : switch_s[k], state,
                                    k % 2 ? voltage_v : 0};
        g_array_append_val(timeline->intervals, interval);
        if (k == 0) continue;
        RfFieldSwitch s = {.time_s = {switch_s[k - 1], 0}, .from = k % 2 ? RF_FIELD_OFF : on, .to = state};
        g_array_append_val(timeline->switches, s);
    }
    return timeline;
}
