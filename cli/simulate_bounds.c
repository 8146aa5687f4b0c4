#include "cli/simulate_bounds.h"

#include "physics/constants.h"

#include <math.h>

double rf_simulate_bounds_spread_information(double diffusion_m2_s, double step_s, double blur, double s_m)
{
    enum { POINTS = 256 };
    double alpha = 2 * diffusion_m2_s * step_s, beta = s_m * s_m / alpha - blur; /* in units of alpha */
    double aa = 0, ab = 0, bb = 0;
    for (int i = 0; i < POINTS; i++) {
        double c = 2 - 2 * cos(G_PI * (i + 0.5) / POINTS), f = 1 + beta * c;
        aa += 0.5 / (f * f) / POINTS;
        ab += 0.5 * c / (f * f) / POINTS;
        bb += 0.5 * c * c / (f * f) / POINTS;
    }
    return aa - ab * ab / bb;
}

typedef struct { /* of one spell, about radius and charge */
    double aa, aq, qq;
} Information;

typedef struct { /* frames seen in one go: same charge, same field, no gap */
    unsigned first, last;
    unsigned spell;
    double voltage_v;
    bool is_off;
} Stretch;

typedef struct {
    const RfRecord *record;
    const RfWorld *world;
    const GArray *seen;
    double radius_m, drag_kg_s, drag_slope, diffusion_m2_s, s_m, blur;
} Setting;

static const RfSeenAt *row(const Setting *set, unsigned i)
{
    return &g_array_index(set->seen, RfSeenAt, i);
}

static double velocity_variance(const Setting *set, double span_s)
{
    double q = 2 * set->diffusion_m2_s * set->record->exposure_interval_s;
    double p = 0.5 * (-q + sqrt(q * q + 4 * q * set->s_m * set->s_m));
    return (2 * set->diffusion_m2_s * span_s + 2 * p) / (span_s * span_s);
}

static void add_velocity(const Setting *set, const Stretch *stretch, int units, Information *sum)
{
    double span_s = row(set, stretch->last)->time_s - row(set, stretch->first)->time_s;
    if (span_s <= 0) return;
    double gap_m = set->world->medium.plate_gap_m, weight = 1 / velocity_variance(set, span_s);
    double charge = units * RF_ELEMENTARY_CHARGE_COULOMB;
    double by_charge = stretch->voltage_v / (set->drag_kg_s * gap_m);
    double by_radius = rf_drag_settling_slope_per_s(&set->world->medium, set->radius_m) -
                       charge * by_charge * set->drag_slope / set->drag_kg_s;
    sum->aa += weight * by_radius * by_radius;
    sum->aq += weight * by_radius * by_charge;
    sum->qq += weight * by_charge * by_charge;
}

static double spread_information(const Setting *set, unsigned increments)
{
    double per_log = rf_simulate_bounds_spread_information(
        set->diffusion_m2_s, set->record->exposure_interval_s, set->blur, set->s_m);
    double log_slope = set->drag_slope / set->drag_kg_s; /* d ln D/da = -d ln k/da */
    return 2 * increments * per_log * log_slope * log_slope;
}

/* Standard deviation of each spell's charge when one radius, of which `extra` is known besides, serves all. */
static double charge_bound(const GArray *informations, unsigned number, double extra)
{
    double radius = extra;
    for (unsigned i = 0; i < informations->len; i++) {
        const Information *one = &g_array_index(informations, Information, i);
        radius += one->aa - (one->qq > 0 ? one->aq * one->aq / one->qq : 0);
    }
    const Information *own = &g_array_index(informations, Information, number);
    if (own->qq <= 0 || radius <= own->aa * 1e-9) return -1;
    double lean = own->aq / own->qq;
    return sqrt(1 / own->qq + lean * lean / radius);
}

static unsigned spell_at(const RfBody *body, double time_s)
{
    unsigned i = body->spells->len;
    while (i > 1 && g_array_index(body->spells, RfSpell, i - 1).time_s > time_s) i--;
    return i - 1;
}

static GArray *find_stretches(const Setting *set, const RfTrueDroplet *droplet, const RfBody *body)
{
    GArray *stretches = g_array_new(FALSE, FALSE, sizeof(Stretch));
    double last_s = -HUGE_VAL;
    for (unsigned i = droplet->first; i <= droplet->last; i++) {
        const RfSeenAt *at = row(set, i);
        if (!at->is_visible || at->is_repeated) continue;
        const RfFieldFrom *field = rf_simulate_world_field_at(set->world, at->time_s);
        unsigned spell = spell_at(body, at->time_s);
        Stretch *open = stretches->len > 0 ? &g_array_index(stretches, Stretch, stretches->len - 1) : NULL;
        bool goes_on = open && open->spell == spell && open->voltage_v == field->voltage_v &&
                       at->time_s - last_s < 2.5 * set->record->exposure_interval_s;
        if (goes_on) {
            open->last = i;
        } else {
            Stretch fresh = {.first = i,
                             .last = i,
                             .spell = spell,
                             .voltage_v = field->voltage_v,
                             .is_off = field->state == RF_FIELD_OFF};
            g_array_append_val(stretches, fresh);
        }
        last_s = at->time_s;
    }
    return stretches;
}

static int by_value(const void *a, const void *b)
{
    double left = *(const double *)a, right = *(const double *)b;
    return left < right ? -1 : left > right;
}

static double median(GArray *numbers)
{
    if (numbers->len == 0) return 0;
    g_array_sort(numbers, by_value);
    return g_array_index(numbers, double, numbers->len / 2);
}

static double median_bound_m(const RfRecord *record, const RfTrueDroplet *droplet, double scale_px_m)
{
    g_autoptr(GArray) bounds = g_array_new(FALSE, FALSE, sizeof(double));
    const GArray *seen = rf_simulate_record_life(record, droplet)->seen;
    for (unsigned i = droplet->first; i <= droplet->last; i++) {
        const RfSeenAt *at = &g_array_index(seen, RfSeenAt, i);
        if (at->is_visible) g_array_append_val(bounds, at->bound_px);
    }
    return median(bounds) / scale_px_m;
}

static Setting setting_of(const RfRecord *record, const RfWorld *world, const RfTrueDroplet *droplet)
{
    const RfLife *life = rf_simulate_record_life(record, droplet);
    Setting set = {.record = record, .world = world, .seen = life->seen};
    double middle_s = 0.5 * (row(&set, droplet->first)->time_s + row(&set, droplet->last)->time_s);
    set.radius_m = rf_simulate_motion_radius_m(life->body, middle_s);
    set.drag_kg_s = rf_drag_coefficient_kg_s(&world->medium, set.radius_m);
    set.drag_slope = rf_drag_coefficient_slope_kg_s_m(&world->medium, set.radius_m);
    set.diffusion_m2_s = rf_drag_diffusion_m2_s(&world->medium, set.radius_m);
    set.s_m = median_bound_m(record, droplet, record->scale_px_m);
    set.blur = record->exposure_s / record->exposure_interval_s / 6;
    return set;
}

static RfBoundSpell describe_spell(const Setting *set, const RfTrueDroplet *droplet, const RfBody *body,
                                   unsigned number)
{
    RfBoundSpell spell = {.units = g_array_index(body->spells, RfSpell, number).units};
    g_autoptr(GArray) snr = g_array_new(FALSE, FALSE, sizeof(double));
    for (unsigned i = droplet->first; i <= droplet->last; i++) {
        const RfSeenAt *at = row(set, i);
        if (!at->is_visible || spell_at(body, at->time_s) != number) continue;
        if (spell.frames++ == 0) spell.start_s = at->time_s;
        spell.end_s = at->time_s;
        bool is_off = rf_simulate_world_field_at(set->world, at->time_s)->state == RF_FIELD_OFF;
        *(is_off ? &spell.off_s : &spell.on_s) += set->record->exposure_interval_s;
        g_array_append_val(snr, at->snr);
    }
    spell.median_snr = median(snr);
    return spell;
}

static double fall_bound(const Setting *set, const GArray *stretches)
{
    double weight = 0;
    for (unsigned i = 0; i < stretches->len; i++) {
        const Stretch *stretch = &g_array_index(stretches, Stretch, i);
        double span_s = row(set, stretch->last)->time_s - row(set, stretch->first)->time_s;
        if (stretch->is_off && span_s > 0) weight += 1 / velocity_variance(set, span_s);
    }
    return weight > 0 ? 1 / sqrt(weight) : -1;
}

static void fill_spells(const Setting *set, const RfTrueDroplet *droplet, const GArray *stretches,
                        GArray *spells)
{
    const RfBody *body = rf_simulate_record_life(set->record, droplet)->body;
    g_autoptr(GArray) informations = g_array_new(FALSE, TRUE, sizeof(Information));
    g_array_set_size(informations, body->spells->len);
    unsigned increments = 0;
    for (unsigned i = 0; i < stretches->len; i++) {
        const Stretch *stretch = &g_array_index(stretches, Stretch, i);
        add_velocity(set, stretch, g_array_index(body->spells, RfSpell, stretch->spell).units,
                     &g_array_index(informations, Information, stretch->spell));
        increments += stretch->last - stretch->first;
    }
    for (unsigned i = 0; i < body->spells->len; i++) {
        RfBoundSpell spell = describe_spell(set, droplet, body, i);
        spell.bound_charge_coulomb = charge_bound(informations, i, 0);
        spell.bound_joint_charge_coulomb = charge_bound(informations, i, spread_information(set, increments));
        if (spell.frames > 0) g_array_append_val(spells, spell);
    }
}

RfDropletBounds *rf_simulate_bounds_of(const RfRecord *record, const RfWorld *world,
                                       const RfTrueDroplet *droplet)
{
    RfDropletBounds *bounds = g_new0(RfDropletBounds, 1);
    bounds->spells = g_array_new(FALSE, FALSE, sizeof(RfBoundSpell));
    Setting set = setting_of(record, world, droplet);
    g_autoptr(GArray) stretches =
        find_stretches(&set, droplet, rf_simulate_record_life(record, droplet)->body);
    bounds->radius_m = set.radius_m;
    bounds->bound_fall_m_s = fall_bound(&set, stretches);
    fill_spells(&set, droplet, stretches, bounds->spells);
    return bounds;
}

void rf_simulate_bounds_free(RfDropletBounds *bounds)
{
    if (!bounds) return;
    g_array_unref(bounds->spells);
    g_free(bounds);
}

double rf_simulate_bounds_instant_per_s2(const RfRecord *record, const RfWorld *world, double radius_m,
                                         double s_m, double push_change)
{
    double drag_kg_s = rf_drag_coefficient_kg_s(&world->medium, radius_m);
    double diffusion_m2_s = rf_drag_diffusion_m2_s(&world->medium, radius_m);
    double blur = record->exposure_s / record->exposure_interval_s / 6;
    double variance_m2 = 2 * diffusion_m2_s * record->exposure_interval_s * (1 - 2 * blur) + 2 * s_m * s_m;
    double change_m_s = push_change / (drag_kg_s * world->medium.plate_gap_m);
    return change_m_s * change_m_s / variance_m2;
}
