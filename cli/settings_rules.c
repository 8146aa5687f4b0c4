#include "cli/settings_rules.h"

#include <math.h>
#include <string.h>

#include "calib/quantity.h"
#include "calib/table.h"
#include "calib/thermistor.h"
#include "physics/local_gravity.h"

/* About a key that the sheet may or may not hold. */
static bool refuse(const RfSheetText *sheet, const char *group, const char *key, int code, GError **error,
                   const char *format, ...) G_GNUC_PRINTF(6, 7);
static bool refuse(const RfSheetText *sheet, const char *group, const char *key, int code, GError **error,
                   const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *what = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    const RfSheetEntry *entry = rf_sheet_text_find(sheet, group, key);
    if (entry)
        g_set_error(error, RF_SETTINGS_ERROR, code, "%s: line %u: [%s] %s: %s", sheet->path, entry->line,
                    group, key, what);
    else
        g_set_error(error, RF_SETTINGS_ERROR, code, "%s: [%s] %s: %s", sheet->path, group, key, what);
    return false;
}

static bool has(const RfSheetText *sheet, const char *group, const char *key)
{
    return rf_sheet_text_find(sheet, group, key) != NULL;
}

static bool apply_recording(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    RfSettings *s = &v->settings;
    s->finds_gravity = v->gravity_word == 4;
    s->gravity = s->finds_gravity ? RF_GRAVITY_DOWN : (RfGravityDirection)v->gravity_word;
    s->lines = (RfReticleLines)v->lines_word;
    double start_s = s->start_s.is_set ? s->start_s.v.value : 0.0;
    if (s->stop_s.is_set && s->stop_s.v.value <= start_s)
        return refuse(sheet, "recording", "stop", RF_SETTINGS_ERROR_VALUE, error,
                      "seen %g s, which isn't after the start at %g s; a later time is needed",
                      s->stop_s.v.value, start_s);
    return true;
}

static void use_gravity(RfSettings *s, const char *remark)
{
    g_autofree char *text = rf_quantity_format(s->gravity_m_s2, "m/s^2");
    rf_settings_add_used(s->used, "cell", "gravity", text, remark);
}

static bool apply_gravity(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    RfSettings *s = &v->settings;
    g_autoptr(GError) why = NULL;
    if (v->gravity_m_s2.is_set && (v->latitude_deg.is_set || v->height_m.is_set))
        return refuse(sheet, "cell", "gravity", RF_SETTINGS_ERROR_VALUE, error,
                      "stands beside latitude or height; one or the other would do");
    if (v->height_m.is_set && !v->latitude_deg.is_set)
        return refuse(sheet, "cell", "height", RF_SETTINGS_ERROR_MISSING, error,
                      "stands without latitude; gravity needs both, or a value of its own");
    if (v->gravity_m_s2.is_set) {
        s->gravity_m_s2 = v->gravity_m_s2.v;
    } else if (!v->latitude_deg.is_set) {
        s->gravity_m_s2 = rf_local_gravity_unknown();
        use_gravity(s, "no place stated: the standard value, uncertain by what it is anywhere people live");
    } else {
        double height_m = v->height_m.is_set ? v->height_m.v.value : 0.0;
        if (!rf_local_gravity_estimate(v->latitude_deg.v.value, height_m, &s->gravity_m_s2, &why))
            return refuse(sheet, "cell", "latitude", RF_SETTINGS_ERROR_VALUE, error, "%s", why->message);
        use_gravity(s, v->height_m.is_set
                           ? "normal gravity at the sheet's latitude and height"
                           : "normal gravity at the sheet's latitude; height not stated, taken as 0 m");
    }
    return true;
}

static bool apply_oil(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    const RfSettings *s = &v->settings;
    if (s->density_at_kelvin.is_set == s->density_slope_kg_m3_kelvin.is_set) return true;
    bool lacks_slope = s->density_at_kelvin.is_set;
    return refuse(sheet, "oil", lacks_slope ? "density_at" : "density_slope", RF_SETTINGS_ERROR_MISSING,
                  error, "stands without %s; both or neither would do",
                  lacks_slope ? "density_slope" : "density_at");
}

static bool read_table(const RfTable *table, double *resistance_ohm, double *temperature_kelvin,
                       GError **error)
{
    double scale, offset = 0.0;
    size_t resistance, temperature;
    int found = rf_table_find_quantity(table, "resistance", "ohm", &scale),
        kelvin = rf_table_find(table, "temperature_k");
    if (found < 0 && !rf_table_require(table, "resistance_ohm", &resistance, error)) return false;
    if (kelvin < 0) {
        if (!rf_table_require(table, "temperature_degC", &temperature, error)) return false;
        offset = 273.15;
    } else {
        temperature = (size_t)kelvin;
    }
    for (size_t i = 0; i < rf_table_rows(table); i++) {
        if (!rf_table_number(table, i, (size_t)found, &resistance_ohm[i], error) ||
            !rf_table_number(table, i, temperature, &temperature_kelvin[i], error))
            return false;
        resistance_ohm[i] *= scale;
        temperature_kelvin[i] += offset;
    }
    return true;
}

static bool kelvin_from_table(const char *path, RfThermistor law, RfValue resistance_ohm, RfValue *kelvin,
                              GError **error)
{
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table) return false;
    law.law = RF_THERMISTOR_TABLE;
    law.n = rf_table_rows(table);
    g_autofree double *r = g_new(double, law.n + 1), *t = g_new(double, law.n + 1);
    law.resistance_ohm = r;
    law.temperature_kelvin = t;
    return read_table(table, r, t, error) && rf_thermistor_kelvin(&law, resistance_ohm, kelvin, error);
}

static bool is_law_complete(const RfSheetText *sheet, const RfSheetValues *v, GError **error)
{
    const RfMaybeValue *c = v->thermistor_per_kelvin;
    bool has_any =
        c[0].is_set || c[1].is_set || c[2].is_set || c[3].is_set || v->thermistor_reference_ohm.is_set;
    if (v->thermistor_table && has_any)
        return refuse(sheet, "thermistor", "table", RF_SETTINGS_ERROR_VALUE, error,
                      "stands beside coefficients; one or the other would do");
    if (v->thermistor_table) return true;
    if (!c[0].is_set || !c[1].is_set || !c[2].is_set)
        return refuse(
            sheet, "air", "resistance", RF_SETTINGS_ERROR_MISSING, error,
            "needs a [thermistor] group with a, b and c (and d with reference), or with table=FILE");
    if (c[3].is_set != v->thermistor_reference_ohm.is_set)
        return refuse(sheet, "thermistor", c[3].is_set ? "d" : "reference", RF_SETTINGS_ERROR_MISSING, error,
                      "stands without %s; both or neither would do", c[3].is_set ? "reference" : "d");
    return true;
}

static bool apply_thermistor(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    RfSettings *s = &v->settings;
    g_autoptr(GError) why = NULL;
    if (!is_law_complete(sheet, v, error)) return false;
    RfThermistor law = {.law = v->thermistor_per_kelvin[3].is_set ? RF_THERMISTOR_FOUR_TERM
                                                                  : RF_THERMISTOR_STEINHART_HART,
                        .reference_ohm = v->thermistor_reference_ohm.v.value,
                        .u_law_kelvin = v->thermistor_u_kelvin.is_set ? v->thermistor_u_kelvin.v.value : 0.0};
    for (int i = 0; i < 4; i++) law.coefficient_per_kelvin[i] = v->thermistor_per_kelvin[i].v.value;
    bool is_done =
        v->thermistor_table
            ? kelvin_from_table(v->thermistor_table, law, s->resistance_ohm.v, &s->temperature_kelvin, &why)
            : rf_thermistor_kelvin(&law, s->resistance_ohm.v, &s->temperature_kelvin, &why);
    if (!is_done)
        return refuse(sheet, v->thermistor_table ? "thermistor" : "air",
                      v->thermistor_table ? "table" : "resistance", RF_SETTINGS_ERROR_VALUE, error, "%s",
                      why->message);
    s->thermistor_u_kelvin = law.u_law_kelvin;
    RfValue celsius = {s->temperature_kelvin.value - 273.15, s->temperature_kelvin.sigma};
    g_autofree char *text = rf_quantity_format(celsius, "degC");
    rf_settings_add_used(s->used, "air", "temperature", text, "from the thermistor's resistance");
    return true;
}

static bool apply_air(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    RfSettings *s = &v->settings;
    if (v->temperature_kelvin.is_set == s->resistance_ohm.is_set)
        return refuse(sheet, "air", "temperature",
                      s->resistance_ohm.is_set ? RF_SETTINGS_ERROR_VALUE : RF_SETTINGS_ERROR_MISSING, error,
                      "%s",
                      s->resistance_ohm.is_set
                          ? "stands beside resistance; one or the other would do"
                          : "missing, but needed: 23.0(2) degC, or resistance= and a [thermistor] group");
    if (s->resistance_ohm.is_set) return apply_thermistor(sheet, v, error);
    if (g_hash_table_contains(sheet->groups, "thermistor"))
        return refuse(
            sheet, "air", "resistance", RF_SETTINGS_ERROR_MISSING, error,
            "missing, but there is a [thermistor] group; resistance in place of temperature would do");
    s->temperature_kelvin = v->temperature_kelvin.v;
    return true;
}

static bool apply_supply(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    const RfSettings *s = &v->settings;
    static const char *const keys[] = {"", "voltage_top_plus", "voltage_top_minus"};
    RfValue voltage_V;
    if (s->log) return true;
    if (s->n_states == 0)
        return refuse(
            sheet, "supply", "states", RF_SETTINGS_ERROR_MISSING, error,
            "missing, but needed without a log, because pictures alone can't tell top+ from top-: off,top+");
    for (unsigned i = 0; i < s->n_states; i++)
        if (!rf_settings_voltage(s, s->states[i], &voltage_V))
            return refuse(sheet, "supply", "voltage", RF_SETTINGS_ERROR_MISSING, error,
                          "missing, but needed: as in 500.0(5) V; or %s=, or a log", keys[s->states[i]]);
    return true;
}

static bool apply_analysis(const RfSheetText *sheet, RfSheetValues *v, GError **error)
{
    RfSettings *s = &v->settings;
    s->slip = (RfSlipLaw)v->slip_word; /* the words stand in the order of the enum */
    if ((s->slip == RF_SLIP_ONE_TERM) == s->slip_b_pa_m.is_set) return true;
    return refuse(sheet, "analysis", "slip_b",
                  s->slip_b_pa_m.is_set ? RF_SETTINGS_ERROR_VALUE : RF_SETTINGS_ERROR_MISSING, error, "%s",
                  s->slip_b_pa_m.is_set ? "only slip=one-term takes it; without it the sheet would do"
                                        : "missing, but needed with slip=one-term: 8.226e-3 Pa m");
}

/* A name for a measurement that the sheet doesn't hold would share nothing. */
static bool apply_shared(const RfSheetText *sheet, GError **error)
{
    for (unsigned i = 0; i < sheet->entries->len; i++) {
        const RfSheetEntry *entry = sheet->entries->pdata[i];
        bool is_there = strcmp(entry->group, "shared") != 0;
        for (size_t k = 0; k < rf_settings_n_keys && !is_there; k++)
            is_there = strcmp(rf_settings_keys[k].key, entry->key) == 0 &&
                       has(sheet, rf_settings_keys[k].group, entry->key);
        if (!is_there)
            return refuse(sheet, "shared", entry->key, RF_SETTINGS_ERROR_VALUE, error,
                          "this sheet doesn't hold %s itself; only what it holds can be shared", entry->key);
    }
    return true;
}

bool rf_settings_rules_apply(const RfSheetText *sheet, RfSheetValues *values, GError **error)
{
    return apply_recording(sheet, values, error) && apply_gravity(sheet, values, error) &&
           apply_oil(sheet, values, error) && apply_air(sheet, values, error) &&
           apply_supply(sheet, values, error) && apply_analysis(sheet, values, error) &&
           apply_shared(sheet, error);
}
