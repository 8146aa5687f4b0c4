#include "cli/plan_text.h"

#include <gsl/gsl_errno.h>
#include <json-glib/json-glib.h>
#include <math.h>
#include <string.h>

#include "physics/constants.h"
#include "physics/drag.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

/* Air at 23 degC and 101.3 kPa, oil of 886 kg/m^3, 500 V over 6 mm, 20 s off and 20 s on, 0.5 um, 30 frames/s with an open
 * shutter. */
static RfPlanConditions usual(void)
{
    RfPlanConditions conditions = {
        .medium = {1.83245e-5, 0.0, {0, 0, 1}, 886.0, 1.187, 296.15, 9.80665, 6e-3},
        .observation = {20.0, 20.0, 500.0, 30.0, 0.5e-6, 1.0 / 6, 2e-3},
    };
    rf_drag_choose_slip(&conditions.medium, RF_SLIP_KIM_2005, 0.0, 101300.0);
    return conditions;
}

/* Words of the table's row for a radius, split at blanks. (returns new) */
static GPtrArray *words_of(const char *text, const char *radius)
{
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    for (char **line = lines; *line; line++) {
        g_auto(GStrv) raw = g_strsplit(*line, " ", -1);
        GPtrArray *words = g_ptr_array_new_with_free_func(g_free);
        for (char **word = raw; *word; word++)
            if (**word) g_ptr_array_add(words, g_strdup(*word));
        if (words->len > 8 && g_str_equal(words->pdata[0], radius)) return words;
        g_ptr_array_unref(words);
    }
    g_error("no row for %s um in\n%s", radius, text);
}

/* For q V > 0, bounds computed apart from this program, from the covariance of the displacements, in e: radius 0.3 um 0.37 from the
 * fall alone and 0.13 with the spread; 0.5 um 0.083 and 0.070; 1 um 0.029 both. */
static void known_bounds(void)
{
    static const struct {
        const char *radius;
        double fall, joint, half_digit;
    } known[] = {{"0.30", 0.37, 0.13, 0.005}, {"0.50", 0.083, 0.070, 0.0005}, {"1.00", 0.029, 0.029, 0.0005}};
    const RfPlanConditions conditions = usual();
    g_autoptr(GArray) rows = rf_plan_rows(&conditions);
    g_autofree char *text = rf_plan_text(&conditions, rows, NULL);
    g_test_message("%s", text);
    for (size_t i = 0; i < G_N_ELEMENTS(known); i++) {
        g_autoptr(GPtrArray) words = words_of(text, known[i].radius);
        g_auto(GStrv) pair = g_strsplit(words->pdata[5], "/", 2);
        g_assert_cmpfloat_with_epsilon(g_ascii_strtod(pair[0], NULL), known[i].fall, known[i].half_digit);
        g_assert_cmpfloat_with_epsilon(g_ascii_strtod(pair[1], NULL), known[i].joint, known[i].half_digit);
        const RfPlanRow row = rf_plan_row(&conditions, g_ascii_strtod(known[i].radius, NULL) * 1e-6, 3);
        g_assert_cmpfloat_with_epsilon(row.down.u_charge_fall_coulomb / E, known[i].fall,
                                       known[i].half_digit);
        g_assert_cmpfloat_with_epsilon(row.down.u_charge_joint_coulomb / E, known[i].joint,
                                       known[i].half_digit);
    }
}

static void signs_mirror_about_the_fall(void)
{
    const RfPlanConditions conditions = usual();
    const RfPlanRow row = rf_plan_row(&conditions, 0.5e-6, 2);
    g_assert_cmpfloat(row.down.fall_m_s, >, row.fall_off_m_s);
    g_assert_cmpfloat(row.up.fall_m_s, <, 0);
    g_assert_cmpfloat_with_epsilon(0.5 * (row.down.fall_m_s + row.up.fall_m_s) / row.fall_off_m_s, 1, 1e-12);
    const double force_m_s = 2 * E * 500 / 6e-3 / rf_drag_coefficient_kg_s(&conditions.medium, 0.5e-6);
    g_assert_cmpfloat_with_epsilon((row.down.fall_m_s - row.fall_off_m_s) / force_m_s, 1, 1e-12);
    g_assert_cmpfloat_with_epsilon(row.in_view_off_s * row.fall_off_m_s, 2e-3, 1e-12);
}

/* Watched for as long as the plan says, the droplet is known as well as it says. */
static void watching_that_long_suffices(void)
{
    static const struct {
        double radius_m;
        int units;
    } cases[] = {{0.3e-6, 3}, {0.5e-6, 1}, {0.5e-6, 8}, {0.8e-6, 3}};
    for (size_t i = 0; i < G_N_ELEMENTS(cases); i++) {
        RfPlanConditions conditions = usual();
        const double watch_s = rf_plan_row(&conditions, cases[i].radius_m, cases[i].units).watch_s;
        conditions.observation.off_s = conditions.observation.on_s = watch_s / 2;
        const RfPlanRow row = rf_plan_row(&conditions, cases[i].radius_m, cases[i].units);
        const double worse = fmax(row.down.u_charge_joint_coulomb, row.up.u_charge_joint_coulomb) / E;
        g_test_message("%.1f um, %d e: %.1f s give %.4f e", cases[i].radius_m * 1e6, cases[i].units, watch_s,
                       worse);
        g_assert_cmpfloat_with_epsilon(worse, RF_PLAN_GOOD_U_E, 0.02 * RF_PLAN_GOOD_U_E);
    }
}

static void advice_names_the_obstacle(void)
{
    RfPlanConditions conditions = usual();
    g_assert_cmpint(rf_plan_row(&conditions, 0.5e-6, 2).advice, ==, RF_PLAN_PICK);
    g_assert_cmpint(rf_plan_row(&conditions, 0.2e-6, 10).advice, ==, RF_PLAN_TOO_FAST);
    conditions.observation.off_s = conditions.observation.on_s = 1;
    g_assert_cmpint(rf_plan_row(&conditions, 0.4e-6, 3).advice, ==, RF_PLAN_TOO_UNCERTAIN);
    conditions = usual();
    conditions.observation.voltage_V = 100; /* the weight of 1.5 um is 46 e at that field */
    g_assert_cmpint(rf_plan_row(&conditions, 1.5e-6, 1).advice, ==, RF_PLAN_TOO_HEAVY);
}

static void best_voltage_has_the_most_picks(void)
{
    RfPlanConditions conditions = usual();
    const RfPlanVoltages voltages = rf_plan_voltages(&conditions);
    for (unsigned i = 0; i < RF_PLAN_VOLTAGES; i++) {
        g_assert_cmpuint(voltages.picks[i], <=, voltages.picks[voltages.best]);
        if (i < voltages.best) g_assert_cmpuint(voltages.picks[i], <, voltages.picks[voltages.best]);
    }
    conditions.observation.voltage_V = voltages.voltage_V[voltages.best];
    g_autoptr(GArray) rows = rf_plan_rows(&conditions);
    g_assert_cmpuint(rf_plan_picks(rows), ==, voltages.picks[voltages.best]);
    g_assert_cmpuint(rf_plan_picks(rows), >, 0);
}

static void table_fits_the_terminal(void)
{
    RfPlanConditions conditions = usual();
    const RfPlanCommon common = {0.0061, "plate gap"};
    static const double times_s[] = {20, 0.2, 900};
    for (size_t i = 0; i < G_N_ELEMENTS(times_s); i++) {
        conditions.observation.off_s = conditions.observation.on_s = times_s[i];
        g_autoptr(GArray) rows = rf_plan_rows(&conditions);
        g_autofree char *text = rf_plan_text(&conditions, rows, &common);
        g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
        g_assert_cmpuint(g_strv_length(lines), <=, 24);
        for (char **line = lines; *line; line++)
            if (g_utf8_strlen(*line, -1) > 80) g_error("too wide: %s", *line);
    }
}

static void csv_has_a_row_for_each(void)
{
    const RfPlanConditions conditions = usual();
    g_autoptr(GArray) rows = rf_plan_rows(&conditions);
    g_autofree char *csv = rf_plan_csv(rows);
    g_auto(GStrv) lines = g_strsplit(csv, "\n", -1);
    g_assert_cmpuint(g_strv_length(lines), ==, rows->len + 2);
    g_auto(GStrv) head = g_strsplit(lines[0], ",", -1);
    g_assert_cmpstr(head[0], ==, "radius_um");
    for (guint i = 1; i <= rows->len; i++) {
        g_auto(GStrv) cells = g_strsplit(lines[i], ",", -1);
        g_assert_cmpuint(g_strv_length(cells), ==, g_strv_length(head));
    }
}

static void json_holds_the_table(void)
{
    const RfPlanConditions conditions = usual();
    const RfPlanCommon common = {0.0123, "plate gap"};
    g_autoptr(GArray) rows = rf_plan_rows(&conditions);
    g_autofree char *text = rf_plan_json(&conditions, rows, &common);
    g_autoptr(JsonParser) parser = json_parser_new();
    g_autoptr(GError) error = NULL;
    json_parser_load_from_data(parser, text, -1, &error);
    g_assert_no_error(error);
    JsonObject *plan = json_node_get_object(json_parser_get_root(parser));
    JsonObject *shared = json_object_get_object_member(plan, "conditions");
    g_assert_cmpfloat(json_object_get_double_member(shared, "voltage_V"), ==, 500);
    g_assert_cmpfloat(json_object_get_double_member(shared, "common_relative_u"), ==, 0.0123);
    g_assert_cmpstr(json_object_get_string_member(shared, "common_largest"), ==, "plate gap");
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(plan, "droplets")), ==, rows->len);
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(plan, "voltages")), ==, RF_PLAN_VOLTAGES);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/plan/row/known-bounds", known_bounds);
    g_test_add_func("/plan/row/signs-mirror-about-the-fall", signs_mirror_about_the_fall);
    g_test_add_func("/plan/row/watching-that-long-suffices", watching_that_long_suffices);
    g_test_add_func("/plan/row/advice-names-the-obstacle", advice_names_the_obstacle);
    g_test_add_func("/plan/voltages/best-has-the-most-picks", best_voltage_has_the_most_picks);
    g_test_add_func("/plan/text/table-fits-the-terminal", table_fits_the_terminal);
    g_test_add_func("/plan/json/holds-the-table", json_holds_the_table);
    g_test_add_func("/plan/csv/has-a-row-for-each", csv_has_a_row_for_each);
    return g_test_run();
}
