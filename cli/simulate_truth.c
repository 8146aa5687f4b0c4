#include "cli/simulate_truth.h"

#include "physics/constants.h"

#include <math.h>
#include <stdlib.h>

static const char *const state_name[] = {"off", "top+", "top-"};
static const double whole_e = RF_ELEMENTARY_CHARGE_COULOMB;

char *rf_simulate_truth_paths(const RfRecord *record)
{
    GString *out = g_string_new("droplet,frame,time_s,x_px,y_px,visible,snr,field,duplicate,bound_px\n");
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        const GArray *seen = rf_simulate_record_life(record, droplet)->seen;
        for (unsigned i = droplet->first; i <= droplet->last; i++) {
            const RfSeenAt *at = &g_array_index(seen, RfSeenAt, i);
            double bound_px = isfinite(at->bound_px) ? MIN(at->bound_px, 99) : 99;
            g_string_append_printf(out, "%u,%" G_GINT64_FORMAT ",%.6f,%.4f,%.4f,%d,%.2f,%d,%d,%.4f\n",
                                   droplet->number, at->frame, at->time_s, at->px.x, at->px.y,
                                   at->is_visible && !at->is_repeated, at->snr, at->field, at->is_repeated,
                                   bound_px);
        }
    }
    return g_string_free(out, FALSE);
}

static void append_bound(GString *out, double bound)
{
    if (bound >= 0) g_string_append_printf(out, "%.4e", bound);
    g_string_append_c(out, ',');
}

static void append_spell(GString *out, const RfTrueDroplet *droplet, const RfDropletBounds *bounds,
                         unsigned number, const RfWorld *world, const RfBody *body)
{
    const RfBoundSpell *spell = &g_array_index(bounds->spells, RfBoundSpell, number);
    double middle_m = rf_simulate_motion_radius_m(body, 0.5 * (spell->start_s + spell->end_s));
    double fall_m_s = rf_drag_settling_speed_m_s(&world->medium, middle_m);
    double diffusion_m2_s = rf_drag_diffusion_m2_s(&world->medium, middle_m);
    g_string_append_printf(out, "%u,%u,%.4f,%.4f,%.6f,%d,%.8e,%.7f,", droplet->number, number + 1,
                           spell->start_s, spell->end_s, middle_m * 1e6, spell->units, spell->units * whole_e,
                           fall_m_s * 1e3);
    append_bound(out, spell->bound_charge_coulomb);
    append_bound(out, bounds->bound_fall_m_s < 0 ? -1 : bounds->bound_fall_m_s * 1e3);
    g_string_append_printf(
        out, "%u,%.2f,%.2f,%u,%.6f,%.6f,%.4f,%.2f,", spell->frames, spell->off_s, spell->on_s, droplet->life,
        rf_simulate_motion_radius_m(body, spell->start_s) * 1e6,
        rf_simulate_motion_radius_m(body, spell->end_s) * 1e6, diffusion_m2_s * 1e12, spell->median_snr);
    if (spell->bound_joint_charge_coulomb >= 0)
        g_string_append_printf(out, "%.4e", spell->bound_joint_charge_coulomb);
    g_string_append_c(out, '\n');
}

char *rf_simulate_truth_droplets(const RfRecord *record, const RfWorld *world)
{
    GString *out =
        g_string_new("droplet,spell,start_s,end_s,radius_um,units,charge_C,fall_mm_s,bound_charge_C,"
                     "bound_fall_mm_s,frames,off_s,on_s,body,radius_start_um,radius_end_um,"
                     "diffusion_um2_s,median_snr,bound_joint_charge_C\n");
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        g_autoptr(RfDropletBounds) bounds = rf_simulate_bounds_of(record, world, droplet);
        for (unsigned s = 0; s < bounds->spells->len; s++)
            append_spell(out, droplet, bounds, s, world, rf_simulate_record_life(record, droplet)->body);
    }
    return g_string_free(out, FALSE);
}

static double instant_per_s2(const RfRecord *record, const RfWorld *world, const RfTrueDroplet *droplet,
                             double time_s, double push_change)
{
    const RfSeenAt *at = rf_simulate_record_at(record, droplet, time_s);
    const RfBody *body = rf_simulate_record_life(record, droplet)->body;
    if (!at || push_change == 0) return 0;
    return rf_simulate_bounds_instant_per_s2(record, world, rf_simulate_motion_radius_m(body, time_s),
                                             at->bound_px / record->scale_px_m, push_change);
}

static void append_switch(GString *out, const RfRecord *record, const RfWorld *world, const RfScene *scene,
                          unsigned number)
{
    const RfFieldFrom *to = &g_array_index(world->field, RfFieldFrom, number), *from = to - 1;
    double sum = 0;
    int droplets = 0;
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        const RfBody *body = rf_simulate_record_life(record, droplet)->body;
        double change =
            rf_simulate_motion_units_at(body, to->time_s) * whole_e * (to->voltage_v - from->voltage_v);
        double per_s2 = instant_per_s2(record, world, droplet, to->time_s, change);
        sum += per_s2;
        droplets += per_s2 > 0;
    }
    g_string_append_printf(out, "%u,%.6f,%s,%s,%d,", number, to->time_s, state_name[from->state],
                           state_name[to->state], droplets);
    if (sum > 0) g_string_append_printf(out, "%.5f", 1 / sqrt(sum));
    g_string_append_c(out, ',');
    if (scene->log_interval_s > 0) g_string_append_printf(out, "%.4f", to->time_s + scene->log_offset_s);
    g_string_append_c(out, '\n');
}

char *rf_simulate_truth_switches(const RfRecord *record, const RfWorld *world, const RfScene *scene)
{
    GString *out = g_string_new("switch,time_s,from,to,droplets,bound_time_s,log_time_s\n");
    for (unsigned i = 1; i < world->field->len; i++)
        if (g_array_index(world->field, RfFieldFrom, i).time_s > 0 &&
            g_array_index(world->field, RfFieldFrom, i).time_s < record->last_s)
            append_switch(out, record, world, scene, i);
    return g_string_free(out, FALSE);
}

static void append_steps(GString *out, const RfRecord *record, const RfWorld *world,
                         const RfTrueDroplet *droplet)
{
    const RfBody *body = rf_simulate_record_life(record, droplet)->body;
    for (unsigned i = 1; i < body->spells->len; i++) {
        const RfSpell *to = &g_array_index(body->spells, RfSpell, i), *from = to - 1;
        const RfFieldFrom *field = rf_simulate_world_field_at(world, to->time_s);
        double change = (to->units - from->units) * whole_e * field->voltage_v;
        double per_s2 = instant_per_s2(record, world, droplet, to->time_s, change);
        if (!rf_simulate_record_at(record, droplet, to->time_s)) continue;
        g_string_append_printf(out, "%u,%.6f,%.8e,%.8e,%d,%d,%s,", droplet->number, to->time_s,
                               from->units * whole_e, to->units * whole_e, from->units, to->units,
                               state_name[field->state]);
        if (per_s2 > 0) g_string_append_printf(out, "%.5f", 1 / sqrt(per_s2));
        g_string_append_c(out, '\n');
    }
}

char *rf_simulate_truth_steps(const RfRecord *record, const RfWorld *world)
{
    GString *out = g_string_new(
        "droplet,time_s,charge_before_C,charge_after_C,units_before,units_after,field,bound_time_s\n");
    for (unsigned d = 0; d < record->droplets->len; d++)
        append_steps(out, record, world, &g_array_index(record->droplets, RfTrueDroplet, d));
    return g_string_free(out, FALSE);
}

static void append_inputs(GString *out, const RfWorld *world)
{
    g_string_append_printf(
        out,
        " \"true_inputs\": {\n  \"spacing_mm\": %.12g,\n  \"gap_mm\": %.12g,\n"
        "  \"gravity\": %.12g,\n  \"density\": %.12g,\n  \"T_C\": %.12g,\n  \"p_kPa\": %.12g,\n"
        "  \"rh\": %.12g,\n  \"voltage\": %.12g\n },\n",
        world->spacing_m * 1e3, world->medium.plate_gap_m * 1e3, world->medium.gravity_m_s2,
        world->medium.oil_density_kg_m3, world->medium.temperature_kelvin - RF_ZERO_CELSIUS_KELVIN,
        world->pressure_pa * 1e-3, world->humidity * 100, world->voltage_v);
    g_string_append_printf(out,
                           " \"air\": {\n  \"viscosity_Pa_s\": %.12g,\n  \"mean_free_path_m\": %.12g,\n"
                           "  \"density\": %.12g\n },\n",
                           world->medium.viscosity_pa_s, world->medium.mean_free_path_m,
                           world->medium.air_density_kg_m3);
}

/* Could the charges of a scene tell e at all? Not when no droplet carries few enough of them. */
static bool is_unit_resolvable(const RfRecord *record, const RfWorld *world)
{
    int good = 0;
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        g_autoptr(RfDropletBounds) bounds = rf_simulate_bounds_of(record, world, droplet);
        for (unsigned s = 0; s < bounds->spells->len; s++) {
            const RfBoundSpell *spell = &g_array_index(bounds->spells, RfBoundSpell, s);
            good += spell->units != 0 && abs(spell->units) <= 10 && spell->bound_joint_charge_coulomb >= 0 &&
                    spell->bound_joint_charge_coulomb < 0.15 * whole_e;
        }
    }
    return good >= 3;
}

char *rf_simulate_truth_scale(const RfRecord *record, const RfWorld *world, const RfScene *scene,
                              const RfView *view, const RfReticle *reticle)
{
    static const char *const lines[] = {"none", "grid", "horizontal", "vertical"};
    static const char *const gravity[] = {"down", "left", "up", "right"};
    bool has_sign = world->field->len > 1; /* states are named in the sheet, in order */
    GString *out = g_string_new("{\n");
    g_string_append_printf(
        out,
        " \"width\": %d,\n \"height\": %d,\n \"px_per_mm_x\": %.12g,\n \"px_per_mm_y\": %.12g,\n"
        " \"rotation_deg\": %.12g,\n \"lines\": \"%s\",\n \"lines_drawn\": %d,\n"
        " \"gravity\": \"%s\",\n \"roll_deg\": %.12g,\n",
        view->width, view->height, scene->px_per_mm / view->pixel_aspect, scene->px_per_mm,
        view->rotation_rad * 180 / G_PI, lines[scene->lines], rf_simulate_reticle_lines(reticle),
        gravity[scene->gravity], scene->roll_rad * 180 / G_PI);
    append_inputs(out, world);
    g_string_append_printf(out, " \"unit_resolvable\": %s,\n \"interlaced\": %s,\n \"log_offset_s\": ",
                           is_unit_resolvable(record, world) ? "true" : "false",
                           scene->is_interlaced ? "true" : "false");
    if (scene->log_interval_s > 0)
        g_string_append_printf(out, "%.12g", scene->log_offset_s);
    else
        g_string_append(out, "null");
    if (scene->entries > 0)
        g_string_append_printf(
            out, ",\n \"hand_bias_s\": %.12g,\n \"hand_spread_s\": %.12g,\n \"hand_clock_s\": %.12g",
            scene->hand_bias_s, scene->hand_spread_s, scene->hand_clock_s);
    g_string_append_printf(out,
                           ",\n \"sign_known\": %s,\n \"frames\": %" G_GINT64_FORMAT
                           ",\n \"duration_s\": %.12g,\n \"unit_charge_C\": 1.602176634e-19\n}\n",
                           has_sign ? "true" : "false", record->frames, record->last_s);
    return g_string_free(out, FALSE);
}

static void append_model_droplet(GString *out, const RfRecord *record, const RfWorld *world,
                                 const RfTrueDroplet *droplet)
{
    const RfBody *body = rf_simulate_record_life(record, droplet)->body;
    g_autoptr(RfDropletBounds) bounds = rf_simulate_bounds_of(record, world, droplet);
    double drag_kg_s = rf_drag_coefficient_kg_s(&world->medium, bounds->radius_m);
    double fall_m_s = rf_drag_settling_speed_m_s(&world->medium, bounds->radius_m);
    g_string_append_printf(
        out, "  {\"droplet\": %u, \"body\": %u, \"radius_um\": %.12g, \"kappa_um2_s\": %.12g, \"spells\": [",
        droplet->number, droplet->life, bounds->radius_m * 1e6, body->evaporation_m2_s * 1e12);
    for (unsigned i = 0; i < body->spells->len; i++) {
        const RfSpell *spell = &g_array_index(body->spells, RfSpell, i);
        if (i == 0)
            g_string_append_printf(out, "[null, %d]", spell->units);
        else
            g_string_append_printf(out, ", [%.4f, %d]", spell->time_s, spell->units);
    }
    g_string_append_printf(out, "], \"fall_mm_s\": %.12g, \"slope_mm_s_V_per_unit\": %.12g}", fall_m_s * 1e3,
                           whole_e / (drag_kg_s * world->medium.plate_gap_m) * 1e3);
}

static void append_diffusion(GString *out, const RfRecord *record, const RfWorld *world)
{
    g_string_append(out, " \"diffusion_um2_s\": {");
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        g_autoptr(RfDropletBounds) bounds = rf_simulate_bounds_of(record, world, droplet);
        double diffusion_m2_s = rf_drag_diffusion_m2_s(&world->medium, bounds->radius_m);
        g_string_append_printf(out, "%s\"%u\": %.12g", d ? ", " : "", droplet->number, diffusion_m2_s * 1e12);
    }
    g_string_append(out, "}\n}\n");
}

/* The air's drift on 400 points of the recording: times, across gravity, along gravity (none is simulated). */
static void append_drift(GString *out, const RfRecord *record, const RfWorld *world)
{
    enum { POINTS = 400 };
    static const char *const names[] = {"drift_t", "drift_x_mm_s", "drift_y_mm_s"};
    for (int k = 0; k < 3; k++) {
        g_string_append_printf(out, " \"%s\": [", names[k]);
        for (int i = 0; i < POINTS; i++) {
            double time_s = record->last_s * i / (POINTS - 1);
            double drift_mm_s = rf_simulate_world_drift_m_s(world, time_s) * 1e3;
            g_string_append_printf(out, "%s%.8g", i ? ", " : "", k == 0 ? time_s : k == 1 ? drift_mm_s : 0);
        }
        g_string_append(out, "],\n");
    }
}

char *rf_simulate_truth_model(const RfRecord *record, const RfWorld *world)
{
    GString *out = g_string_new("{\n \"droplets\": [\n");
    for (unsigned d = 0; d < record->droplets->len; d++) {
        append_model_droplet(out, record, world, &g_array_index(record->droplets, RfTrueDroplet, d));
        g_string_append(out, d + 1 < record->droplets->len ? ",\n" : "\n");
    }
    g_string_append(out, " ],\n \"schedule\": [");
    for (unsigned i = 0; i < world->field->len; i++) {
        const RfFieldFrom *field = &g_array_index(world->field, RfFieldFrom, i);
        g_string_append_printf(out, "%s[%.4f, \"%s\"]", i ? ", " : "", i ? field->time_s : 0,
                               state_name[field->state]);
    }
    g_string_append_printf(out, "],\n \"voltage\": %.12g,\n", world->voltage_v);
    append_drift(out, record, world);
    append_diffusion(out, record, world);
    return g_string_free(out, FALSE);
}
