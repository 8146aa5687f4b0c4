#include "cli/plan_write.h"

#include <math.h>

#include "cli/figure_text.h"
#include "cli/plotter.h"
#include "cli/result_folder.h"
#include "physics/constants.h"

/* ---- u(q) against radius ---- */

enum { POINTS = 60 };
static const int drawn_units[] = {1, 3, 10};

static void append_curve(GString *data, const RfPlanConditions *conditions, int units)
{
    const double first_m = rf_plan_radii_m[0], last_m = rf_plan_radii_m[rf_plan_radii - 1];
    g_string_append_printf(data, "# charge %d e: radius_um u_fall_e u_joint_e crossing_off_s crossing_up_s\n",
                           units);
    for (int i = 0; i < POINTS; i++) {
        const double radius_m = first_m * pow(last_m / first_m, i / (POINTS - 1.0));
        const RfExpectation expected = rf_expectation_find(&conditions->medium, &conditions->observation,
                                                           radius_m, -units * RF_ELEMENTARY_CHARGE_COULOMB);
        rf_figure_text_row(data,
                           (double[]){radius_m * 1e6,
                                      expected.u_charge_fall_coulomb / RF_ELEMENTARY_CHARGE_COULOMB,
                                      expected.u_charge_joint_coulomb / RF_ELEMENTARY_CHARGE_COULOMB,
                                      expected.in_view_off_s, expected.in_view_on_s},
                           5);
    }
    g_string_append(data, "\n\n");
}

void rf_plan_figure(const RfPlanConditions *conditions, GString *data, GString *script)
{
    for (size_t i = 0; i < G_N_ELEMENTS(drawn_units); i++) append_curve(data, conditions, drawn_units[i]);
    g_string_append(
        script,
        "set key top right reverse Left samplen 2\nset logscale xy\nset xlabel 'radius, µm'\n"
        "set ylabel 'attainable u(q), units of e (q V < 0)'\nset xrange [0.2:2]\nset yrange [0.01:10]\n"
        "set xtics (0.2, 0.3, 0.5, 0.7, 1, 1.5, 2)\nset ytics (0.01, 0.03, 0.1, 0.3, 1, 3, 10)\nplot ");
    rf_figure_text_number(script, RF_PLAN_GOOD_U_E);
    g_string_append(script, " with lines lc rgb '#808080' lw 1.5 title 'an integer can be named below'");
    for (unsigned i = 0; i < G_N_ELEMENTS(drawn_units); i++)
        g_string_append_printf(script,
                               ", \\\n  'plan.dat' index %u using 1:3 with lines lw 2 lc rgb '#%s' title 'q "
                               "= %d e, fall and spread'"
                               ", \\\n  'plan.dat' index %u using 1:2 with lines lw 1.5 dt 2 lc rgb '#%s' "
                               "title 'q = %d e, fall alone'",
                               i, rf_figure_hue[i], drawn_units[i], i, rf_figure_hue[i], drawn_units[i]);
    g_string_append_c(script, '\n');
}

/* ---- the folder ---- */

static void draw(const RfResultFolder *folder, char **warning)
{
    g_autofree char *program = g_find_program_in_path("gnuplot");
    if (!program) {
        *warning =
            g_strdup("gnuplot is not installed, so there is no picture; its data and script are in figures/");
        return;
    }
    g_autofree char *inside = g_build_filename(rf_result_folder_path(folder), "figures", NULL);
    g_autofree char *complaint = NULL;
    if (!rf_plotter_run(program, inside, (const char *const[]){"plan.gp", NULL}, &complaint))
        *warning = g_strdup_printf("gnuplot failed on %s; data and script are in figures/", complaint);
}

bool rf_plan_write(const char *target, const RfPlanConditions *conditions, const GArray *rows,
                   const char *text, char **warning, GError **error)
{
    *warning = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(target, error);
    if (!folder) return false;
    const RfPlotterSize size = {"860,480", "17cm,9.5cm"};
    g_autoptr(GString) data = g_string_new(NULL), body = g_string_new(NULL);
    rf_plan_figure(conditions, data, body);
    g_autofree char *script =
        rf_plotter_script("plan", "Attainable uncertainty of the charge", &size, body->str);
    g_autofree char *csv = rf_plan_csv(rows);
    if (!rf_result_folder_add_text(folder, "plan.txt", text, error) ||
        !rf_result_folder_add_text(folder, "plan.csv", csv, error) ||
        !rf_result_folder_add_text(folder, "figures/plan.dat", data->str, error) ||
        !rf_result_folder_add_text(folder, "figures/plan.gp", script, error))
        return false;
    draw(folder, warning);
    return rf_result_folder_commit(folder, error);
}
