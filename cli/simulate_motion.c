#include "cli/simulate_motion.h"

#include "physics/constants.h"

#include <gsl/gsl_randist.h>
#include <math.h>

RfBody *rf_simulate_motion_body_new(double birth_s, double radius_m, double brightness, const GArray *spells)
{
    RfBody *body = g_new0(RfBody, 1);
    *body = (RfBody){.birth_s = birth_s, .radius_m = radius_m, .brightness = brightness};
    body->spells = g_array_new(FALSE, FALSE, sizeof(RfSpell));
    g_array_append_vals(body->spells, spells->data, spells->len);
    return body;
}

void rf_simulate_motion_body_free(RfBody *body)
{
    if (!body) return;
    g_array_unref(body->spells);
    g_free(body);
}

int rf_simulate_motion_units_at(const RfBody *body, double time_s)
{
    unsigned i = body->spells->len;
    while (i > 1 && g_array_index(body->spells, RfSpell, i - 1).time_s > time_s) i--;
    return g_array_index(body->spells, RfSpell, i - 1).units;
}

double rf_simulate_motion_radius_m(const RfBody *body, double time_s)
{
    double square_m2 = body->radius_m * body->radius_m - body->evaporation_m2_s * (time_s - body->birth_s);
    return square_m2 > 2.5e-15 ? sqrt(square_m2) : 5e-8;
}

/* Integral of units over the part of [from, to] in which the voltage stays the same. */
static double unit_seconds(const RfBody *body, double from_s, double to_s)
{
    double sum = 0;
    for (unsigned i = 0; i < body->spells->len; i++) {
        const RfSpell *spell = &g_array_index(body->spells, RfSpell, i);
        double end_s = i + 1 < body->spells->len ? spell[1].time_s : HUGE_VAL;
        sum += spell->units * MAX(0, MIN(end_s, to_s) - MAX(spell->time_s, from_s));
    }
    return sum;
}

double rf_simulate_motion_mean_push(const RfBody *body, const RfWorld *world, double from_s, double to_s)
{
    double sum = 0;
    for (unsigned i = 0; i < world->field->len; i++) {
        const RfFieldFrom *field = &g_array_index(world->field, RfFieldFrom, i);
        double end_s = i + 1 < world->field->len ? field[1].time_s : HUGE_VAL;
        double a_s = MAX(field->time_s, from_s), b_s = MIN(end_s, to_s);
        if (b_s > a_s && field->voltage_v != 0) sum += field->voltage_v * unit_seconds(body, a_s, b_s);
    }
    return sum * RF_ELEMENTARY_CHARGE_COULOMB / (to_s - from_s);
}

static double reflect(double x, double wall)
{
    double period = 4 * wall, y = fmod(x + wall, period);
    if (y < 0) y += period;
    return (y > 2 * wall ? period - y : y) - wall;
}

void rf_simulate_motion_advance(RfBody *body, const RfWorld *world, double from_s, double to_s,
                                gsl_rng *random)
{
    double step_s = to_s - from_s, middle_s = 0.5 * (from_s + to_s);
    double radius_m = rf_simulate_motion_radius_m(body, middle_s);
    double drag_kg_s = rf_drag_coefficient_kg_s(&world->medium, radius_m);
    double spread_m = sqrt(2 * rf_drag_diffusion_m2_s(&world->medium, radius_m) * step_s);
    double push_m_s =
        rf_simulate_motion_mean_push(body, world, from_s, to_s) / (drag_kg_s * world->medium.plate_gap_m);
    double settle_m_s = rf_drag_settling_speed_m_s(&world->medium, radius_m);
    double drift_m_s = rf_simulate_world_drift_m_s(world, middle_s);
    body->place.fall_m +=
        (settle_m_s + push_m_s * cos(world->tilt_rad)) * step_s + gsl_ran_gaussian_ziggurat(random, spread_m);
    body->place.drift_m +=
        (drift_m_s + push_m_s * sin(world->tilt_rad)) * step_s + gsl_ran_gaussian_ziggurat(random, spread_m);
    double depth_m = body->place.depth_m + gsl_ran_gaussian_ziggurat(random, spread_m);
    if (body->depth_range_m > 0) body->place.depth_m = reflect(depth_m, body->depth_range_m);
}

static int changed_units(int units, gsl_rng *random)
{
    int change = 1 + (int)gsl_rng_uniform_int(random, 2);
    if (gsl_rng_uniform(random) < 0.5) change = -change;
    return units + change == 0 ? units - change : units + change;
}

void rf_simulate_motion_add_steps(RfBody *body, const RfWorld *world, double steps_hz, double end_s,
                                  gsl_rng *random)
{
    if (steps_hz <= 0) return;
    double time_s = body->birth_s;
    for (;;) {
        time_s += gsl_ran_exponential(random, 1 / steps_hz);
        if (time_s >= end_s) return;
        if (rf_simulate_world_field_at(world, time_s)->state == RF_FIELD_OFF) continue;
        RfSpell spell = {.time_s = round(time_s * 1e4) / 1e4,
                         .units = changed_units(rf_simulate_motion_units_at(body, time_s), random)};
        g_array_append_val(body->spells, spell);
    }
}
