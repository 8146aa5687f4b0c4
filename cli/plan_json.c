#include "cli/json_rows.h"
#include "cli/plan_text.h"

static void number(GString *out, const char *key, double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_string_append_printf(out, "    \"%s\": %s,\n", key, g_ascii_formatd(text, sizeof text, "%.6g", value));
}

static void append_conditions(GString *out, const RfPlanConditions *conditions)
{
    const RfObservation *watched = &conditions->observation;
    number(out, "voltage_V", watched->voltage_V);
    number(out, "plate_gap_mm", 1e3 * conditions->medium.plate_gap_m);
    number(out, "off_s", watched->off_s);
    number(out, "on_s", watched->on_s);
    number(out, "frame_rate_hz", watched->frame_rate_hz);
    number(out, "view_mm", 1e3 * watched->view_m);
    number(out, "u_position_um", 1e6 * watched->localisation_m);
}

static void append_voltages(GString *out, const RfPlanConditions *conditions)
{
    const RfPlanVoltages voltages = rf_plan_voltages(conditions);
    g_string_append(out, "  \"voltages\": [");
    for (unsigned i = 0; i < RF_PLAN_VOLTAGES; i++) {
        char text[G_ASCII_DTOSTR_BUF_SIZE];
        g_ascii_formatd(text, sizeof text, "%.6g", voltages.voltage_V[i]);
        g_string_append_printf(out, "%s\n    {\"voltage_V\": %s, \"worth_picking\": %u}", i ? "," : "", text,
                               voltages.picks[i]);
    }
    g_string_append(out, "],\n");
}

char *rf_plan_json(const RfPlanConditions *conditions, const GArray *rows, const RfPlanCommon *common)
{
    GString *out = g_string_new("{\n  \"conditions\": {\n");
    append_conditions(out, conditions);
    number(out, "common_relative_u", common->relative_u);
    g_string_append(out, "    \"common_largest\": ");
    rf_json_rows_append_string(out, common->largest);
    g_string_append(out, "\n  },\n");
    append_voltages(out, conditions);
    g_string_append(out, "  \"droplets\": ");
    g_autofree char *csv = rf_plan_csv(rows);
    rf_json_rows_append(out, csv, 4);
    g_string_append(out, "\n}\n");
    return g_string_free(out, FALSE);
}
