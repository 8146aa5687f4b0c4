#include "tests/support/sample_results.h"

#include <math.h>

enum { FRAMES_PER_S = 30, SECONDS = 60, DROPLETS = 7 };
static const double E_C = 1.602176634e-19, PX_PER_MM = 198.4, GAP_M = 6.0e-3, VOLTAGE_V = 500.0;

typedef struct {
    double radius_um;
    int units, units_later; /* later differs: a step at 41 s */
    double x_px, y_px;
    bool accepted;
} Invented;

static const Invented INVENTED[DROPLETS] = {
    {0.52, -4, -4, 120, 300, true},  {0.61, -7, -7, 250, 250, true}, {0.43, 2, 2, 330, 200, true},
    {0.78, -11, -9, 415, 310, true}, {0.35, 1, 1, 505, 180, false},  {0.66, 5, 5, 560, 330, true},
    {0.57, -3, -3, 60, 120, true},
};

/* A small hash in place of noise: the same everywhere. */
static double wobble(unsigned a, unsigned b)
{
    uint32_t h = a * 2654435761u ^ b * 2246822519u;
    h ^= h >> 15;
    h *= 2654435761u;
    h ^= h >> 13;
    return (double)h / 4294967296.0 - 0.5;
}

static RfFieldState field_at(double time_s)
{
    const int part = (int)(time_s / 12);
    return part % 2 == 0 ? RF_FIELD_OFF : (part == 1 ? RF_FIELD_TOP_PLUS : RF_FIELD_TOP_MINUS);
}

static double voltage_at(double time_s)
{
    const RfFieldState field = field_at(time_s);
    return field == RF_FIELD_OFF ? 0 : field == RF_FIELD_TOP_PLUS ? VOLTAGE_V : -VOLTAGE_V;
}

static double fall_mm_s(const Invented *drop, double time_s)
{
    const double off = 0.1085 * drop->radius_um * drop->radius_um + 0.009 * drop->radius_um;
    const int units = time_s < 41 ? drop->units : drop->units_later;
    const double drag = 2.95e-10 * drop->radius_um;
    return off + 1e3 * units * E_C * voltage_at(time_s) / (drag * GAP_M);
}

static void add_path(RfResults *results, unsigned number)
{
    const Invented *drop = &INVENTED[number - 1];
    double x = drop->x_px, y = drop->y_px;
    for (int frame = 0; frame < FRAMES_PER_S * SECONDS; frame++) {
        const double time_s = (double)frame / FRAMES_PER_S;
        y += 0.35 * fall_mm_s(drop, time_s) / FRAMES_PER_S * PX_PER_MM;
        x += 0.5 * wobble(number, (unsigned)frame);
        const bool seen = frame % 97 != 50;
        const RfPathRow row = {.droplet = number,
                               .frame = frame,
                               .seen = seen,
                               .time_s = time_s,
                               .x_px = x + 0.3 * wobble((unsigned)frame, number),
                               .y_px = y,
                               .u_x_px = seen ? 0.09 : 0.4,
                               .u_y_px = seen ? 0.11 : 0.5,
                               .x_mm = x / PX_PER_MM,
                               .y_mm = y / PX_PER_MM,
                               .smooth_x_px = x,
                               .smooth_y_px = y,
                               .u_smooth_x_px = 0.04,
                               .u_smooth_y_px = 0.05,
                               .snr = seen ? 14.25 : 0};
        g_array_append_val(results->paths, row);
    }
}

static void add_segments(RfResults *results, unsigned number)
{
    for (unsigned part = 0; part < 5; part++) {
        const double start_s = 12.0 * part + 0.05, end_s = 12.0 * part + 11.95, middle_s = 12.0 * part + 6;
        const RfSegmentRow row = {
            .droplet = number,
            .segment = part + 1,
            .start_s = start_s,
            .end_s = end_s,
            .field = field_at(middle_s),
            .voltage_V = voltage_at(middle_s),
            .fall_mm_s = {fall_mm_s(&INVENTED[number - 1], middle_s) + 2e-4 * wobble(part, number), 1.8e-4},
            .drift_mm_s = {4e-4 * wobble(number, part), 1.6e-4},
            .frames = 357};
        g_array_append_val(results->segments, row);
    }
}

static void add_spell(RfResults *results, unsigned number, unsigned spell, double start_s, double end_s,
                      int units)
{
    const Invented *drop = &INVENTED[number - 1];
    const double charge = units * E_C * (1 + 0.012 * wobble(number, spell));
    const RfDropletRow row = {
        .droplet = number,
        .spell = spell,
        .start_s = start_s,
        .end_s = end_s,
        .frames = (unsigned)((end_s - start_s) * FRAMES_PER_S),
        .fall_mm_s = {fall_mm_s(drop, 0), 1.3e-4},
        .radius_um = {drop->radius_um, 0.0031},
        .charge_C = {charge, 0.011 * fabs(charge) + 4e-22},
        .u_random_C = 0.007 * fabs(charge) + 4e-22,
        .has_charge = true,
        .radius_fall_um = {drop->radius_um, 0.0033},
        .radius_spread_um = {drop->radius_um * (1 + 0.05 * wobble(number, 99)), 0.021},
        .radius_agreement_p = 0.41,
        .units = units,
        .has_units = drop->accepted,
        .units_probability = drop->accepted ? 0.9993 : 0.62,
        .accepted = drop->accepted,
        .median_snr = 14.2,
        .reason =
            g_strdup(drop->accepted ? "" : "seen in one field state only, 3.2 s; needs two of at least 4 s")};
    g_array_append_val(results->droplets, row);
}

static void add_droplets(RfResults *results)
{
    for (unsigned number = 1; number <= DROPLETS; number++) {
        const Invented *drop = &INVENTED[number - 1];
        add_path(results, number);
        add_segments(results, number);
        const bool has_step = drop->units != drop->units_later;
        add_spell(results, number, 1, 0, has_step ? 41 : 60, drop->units);
        if (!has_step) continue;
        add_spell(results, number, 2, 41, 60, drop->units_later);
        const RfStepRow step = {.droplet = number,
                                .time_s = {41.0123, 0.018},
                                .before_C = {drop->units * E_C, 1.9e-20},
                                .after_C = {drop->units_later * E_C, 1.6e-20},
                                .whole_multiples_p = 0.73};
        g_array_append_val(results->steps, step);
    }
}

static void add_switches(RfResults *results)
{
    for (unsigned i = 1; i <= 4; i++) {
        const RfSwitchRow row = {.number = i,
                                 .time_s = {12.0 * i + 0.002, 0.0061},
                                 .from = field_at(12.0 * i - 1),
                                 .to = field_at(12.0 * i + 1),
                                 .droplets = 6,
                                 .log_time_s = 1000.25 + 12.0 * i,
                                 .has_log_time = i != 3};
        g_array_append_val(results->switches, row);
    }
}

static void add_budget(RfResults *results)
{
    const struct {
        const char *input, *stated;
        double relative_u, charge_u;
        bool is_common;
    } lines[] = {
        {"scale", "198.4(4) px/mm", 2.0e-3, 3.1e-3, true},
        {"plate gap", "6.000(10) mm", 1.7e-3, 1.7e-3, true},
        {"voltage", "500.0(5) V", 1.0e-3, 1.0e-3, true},
        {"oil density", "886.0(10) kg/m^3", 1.1e-3, 5.7e-4, true},
        {"viscosity law", "iso-15900", 4.0e-3, 6.1e-3, true},
        {"air temperature", "23.0(2) degC", 6.8e-4, 8.0e-4, true},
        {"air pressure", "101.30(5) kPa", 4.9e-4, 6e-5, true},
        {"this droplet's motion", "", 7.4e-3, 7.4e-3, false},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(lines); i++) {
        const RfBudgetRow row = {g_strdup(lines[i].input),
                                 g_strdup(lines[i].stated),
                                 lines[i].relative_u,
                                 lines[i].charge_u,
                                 i == 6 ? -1 : lines[i].charge_u * 1.02,
                                 lines[i].is_common};
        g_array_append_val(results->budget, row);
    }
}

static void add_audit(RfResults *results)
{
    const RfAuditRow rows[] = {
        {1,
         g_strdup("A1"),
         1,
         {10.42, 0.2},
         {10.39, 0.02},
         true,
         0.03,
         0.07,
         "agrees",
         g_strdup("frames 30 to 342: 5 divisions"),
         0.99,
         1.0},
        {2,
         g_strdup("<script>alert(\"x\")</script> & co"),
         2,
         {11.54, 0.2},
         {14.55, 0.02},
         true,
         -3.01,
         7.5,
         "digit slip",
         g_strdup("14.54 s with two digits exchanged; frames 400 to 836"),
         0.97,
         13.3},
        {3,
         g_strdup("C, \"third\""),
         0,
         {7.3, 0.2},
         {0, 0},
         false,
         0,
         0,
         "unmatched",
         g_strdup("no droplet crosses 5 divisions in 6.5 s to 8.1 s"),
         0,
         0},
    };
    g_array_append_vals(results->audit, rows, G_N_ELEMENTS(rows));
}

static void add_unit(RfUnitResult *unit)
{
    unit->resolved = true;
    unit->unit_C = (RfValue){1.6049e-19, 1.3e-22};
    unit->u_random_C = 5.2e-23;
    unit->chance = 3.1e-5;
    unit->reason = g_strdup(
        "largest unit that seven charges support; charges without one look this good in 3 of 100000 draws");
    for (int i = 0; i < 400; i++) {
        const double trial = 0.5e-19 * pow(8, i / 399.0), phase = E_C / trial;
        const double level = -24 * pow(sin(G_PI * phase), 2) - 3 * fabs(log(phase));
        g_array_append_val(unit->curve_unit_C, trial);
        g_array_append_val(unit->curve_log_likelihood, level);
    }
}

static void setting(GArray *rows, const char *group, const char *key, const char *value, const char *remark)
{
    const RfUsedSetting row = {g_strdup(group), g_strdup(key), g_strdup(value), remark != NULL,
                               g_strdup(remark ? remark : "")};
    g_array_append_val(rows, row);
}

static void add_sheet(RfResults *results)
{
    setting(results->settings, "cell", "plate_gap", "6.000(10) mm", NULL);
    setting(results->settings, "cell", "gravity", "9.80665(3000) m/s^2",
            "neither a value nor latitude and height given");
    setting(results->settings, "oil", "density", "886.0(10) kg/m^3", NULL);
    setting(results->settings, "air", "temperature", "23.0(2) degC", NULL);
    setting(results->settings, "air", "pressure", "101.30(5) kPa", NULL);
    setting(results->settings, "supply", "voltage", "500.0(5) V", NULL);
    setting(results->settings, "supply", "states", "off,top+,top-", NULL);
    setting(results->settings, "analysis", "slip", "kim-2005", "the program's default");
    setting(results->settings, "analysis", "viscosity", "iso-15900", "the program's default");
    setting(results->notes, "notes", "operator", "A. Example <b>bold</b>", NULL);
    setting(results->notes, "notes", "certificate", "reticle 17-4, \"valid\" to 2027", NULL);
    const char *digest = "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08";
    const RfInputFile files[] = {{g_strdup("sheet"), g_strdup("run.sheet"), g_strdup(digest)},
                                 {g_strdup("video"), g_strdup("cell & view.mkv"), g_strdup(digest)}};
    g_array_append_vals(results->inputs, files, 2);
    results->sheet_path = g_strdup("run.sheet");
}

/* A good recording, but lossy and with every fiftieth droplet's picture saturated. */
static GArray *fitness(void)
{
    const RfFitnessFigures figures = {
        .codec = "h264",
        .container = "matroska",
        .width_px = 640,
        .height_px = 480,
        .bit_depth = 8,
        .pixel_aspect = 1,
        .bits_per_pixel = 0.25,
        .frame_rate_hz = FRAMES_PER_S,
        .is_rate_constant = true,
        .duration_s = SECONDS,
        .frames = FRAMES_PER_S * SECONDS,
        .part_frames = FRAMES_PER_S * SECONDS,
        .part_exposures = FRAMES_PER_S * SECONDS,
        .noise_sd = 1.4,
        .noise_correlation = 0.08,
        .droplets = DROPLETS,
        .droplets_per_exposure = DROPLETS,
        .snr_median = 14.2,
        .followed_mean_s = SECONDS,
        .spot_width_px = 1.4,
        .saturated_share = 0.021,
        .excess_scatter = {1.1, 0.05},
        .is_combing_untested = true,
    };
    return rf_fitness_judge(&figures);
}

RfResults *sample_results_new(void)
{
    RfResults *results = rf_results_new();
    results->width = 640;
    results->height = 480;
    results->frames = FRAMES_PER_S * SECONDS;
    results->duration_s = SECONDS;
    results->recording_summary = g_strdup("640 x 480, H.264, 30 frames/s, 60.0 s");
    results->gravity_axis_deg = 0.7;
    results->fitness = fitness();
    results->measured = true;
    results->verdict =
        g_strdup("Six of seven droplets carry whole multiples of one unit of charge, 1.6049(13)e-19 C");
    results->scale = (RfScaleRow){.found = true,
                                  .px_per_mm_x = 198.41,
                                  .px_per_mm_y = 198.37,
                                  .u_px_per_mm_x = 0.21,
                                  .u_px_per_mm_y = 0.23,
                                  .rotation_deg = 1.204,
                                  .lines_found = 18,
                                  .residual_px = 0.061,
                                  .source = g_strdup("the recording's own background")};
    g_ptr_array_add(results->warnings,
                    g_strdup("gravity: no value in the sheet; 9.80665 m/s^2 taken, with 0.3 % uncertainty"));
    add_droplets(results);
    add_switches(results);
    add_budget(results);
    add_audit(results);
    add_unit(&results->unit);
    add_sheet(results);
    return results;
}

static void add_decision(RfResults *results, RfReviewRow row, const char *reason, const char *name,
                         const char *date, const char *detail)
{
    row.line = results->review->len + 2;
    row.reason = g_strdup(reason);
    row.name = g_strdup(name);
    row.date = g_strdup(date);
    row.detail = g_strdup(detail);
    g_array_append_val(results->review, row);
}

static void overrule(RfDropletRow *row)
{
    row->accepted = false;
    row->is_overruled = true;
    g_free(row->reason);
    row->reason = g_strdup("set aside by B. Example: touched its neighbour");
}

RfResults *sample_results_reviewed_new(void)
{
    RfResults *results = sample_results_new();
    results->without = sample_results_new();
    overrule(&g_array_index(results->droplets, RfDropletRow, 1));
    add_decision(results,
                 (RfReviewRow){.action = RF_REVIEW_SET_ASIDE,
                               .place = {2, 30.2, 250.5, 260.25},
                               .outcome = RF_REVIEW_HONOURED,
                               .found = 2,
                               .now = 2},
                 "touched its neighbour", "B. Example", "2026-05-04 10:12 UTC", "droplet 2 was set aside");
    add_decision(results,
                 (RfReviewRow){.action = RF_REVIEW_CUT,
                               .place = {4, 3.25, 415.1, 300.5},
                               .cut_s = 41.033333,
                               .outcome = RF_REVIEW_HONOURED,
                               .found = 4,
                               .now = 4},
                 "\"><img src=x onerror=alert(1)>", "<script>alert(1)</script>", "",
                 "droplet 4 was cut at 41.03 s; from then on it is droplet 8");
    add_decision(results, (RfReviewRow){.action = RF_REVIEW_RESTORE, .place = {9, 3, 1, 1}}, "it is round",
                 "B. Example", "today", "no droplet was within 3 px of x = 1.0, y = 1.0 px at 3.00 s");
    const RfInputFile file = {g_strdup("review"), g_strdup("lab/by-hand.csv"), g_strdup("00ff")};
    g_array_append_val(results->inputs, file);
    return results;
}

RfResults *sample_results_empty_new(void)
{
    RfResults *results = rf_results_new();
    results->verdict = g_strdup("No droplet could be followed, so nothing was measured");
    results->unit.reason = g_strdup("no charges");
    return results;
}
