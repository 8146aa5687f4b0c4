#include <float.h>
#include <math.h>

#include "cli/figure_script.h"
#include "cli/figure_text.h"

/* Trial units this much less likely than the best (as a logarithm) are beyond discussion. */
enum { DEEPEST_SHOWN = 40 };

static bool is_drawable(double trial_C, double level)
{
    return isfinite(trial_C) && trial_C > 0 && isfinite(level);
}

/* The curve itself. False where it has less than two points. */
static bool curve(const RfUnitResult *unit, GString *data, GString *script)
{
    const GArray *trial = unit->curve_unit_C, *level = unit->curve_log_likelihood;
    double best = -DBL_MAX, deepest = 0, low_C = DBL_MAX, high_C = 0;
    unsigned points = 0;
    const guint n = MIN(trial->len, level->len);
    for (guint i = 0; i < n; i++)
        if (isfinite(g_array_index(level, double, i))) best = fmax(best, g_array_index(level, double, i));
    g_string_append(data, "# trial_unit_1e-19_C log_likelihood_below_best\n");
    for (guint i = 0; i < n; i++) {
        const double trial_C = g_array_index(trial, double, i),
                     below = g_array_index(level, double, i) - best;
        if (!is_drawable(trial_C, below)) continue;
        rf_figure_text_row(data, (double[]){trial_C * 1e19, below}, 2);
        low_C = fmin(low_C, trial_C), high_C = fmax(high_C, trial_C), deepest = fmin(deepest, below);
        points++;
    }
    if (points < 2 || !(high_C > low_C)) return false;
    g_string_append(script, "set xrange [");
    rf_figure_text_number(script, low_C * 1e19);
    g_string_append_c(script, ':');
    rf_figure_text_number(script, high_C * 1e19);
    g_string_append(script, "]\nset yrange [");
    rf_figure_text_number(script, fmax(deepest - 1, -DEEPEST_SHOWN));
    g_string_append(script, ":1]\n");
    return true;
}

static void found(const RfUnitResult *unit, GString *script)
{
    g_string_append(script, "set arrow from ");
    rf_figure_text_number(script, unit->unit_C.value * 1e19);
    g_string_append(script, ", graph 0 to ");
    rf_figure_text_number(script, unit->unit_C.value * 1e19);
    g_string_append_printf(script, ", graph 1 nohead lw 1.6 lc rgb '#%s'\nset label 'unit found' at ",
                           rf_figure_hue[1]);
    rf_figure_text_number(script, unit->unit_C.value * 1e19);
    g_string_append_printf(script, ", graph 0.06 offset 0.6,0 tc rgb '#%s'\n", rf_figure_hue[1]);
}

bool rf_figure_unit_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    g_string_append(
        script,
        "set xlabel 'trial unit, 10^{-19} C'\nset ylabel 'log-likelihood below the best'\nset logscale x\n"
        "set xtics (0.1, 0.2, 0.3, 0.5, 0.7, 1, 1.5, 2, 3, 5, 7, 10, 15, 20, 30, 50)\n");
    if (!curve(&results->unit, data, script)) return false;
    if (results->unit.resolved) found(&results->unit, script);
    g_string_append_printf(script,
                           "plot 'unit.dat' using 1:2 with lines lw 1.8 lc rgb '#%s' title 'likelihood'\n",
                           rf_figure_hue[0]);
    g_string_append(alt, "How well each trial unit explains the charges: log-likelihood below the best "
                         "against the trial unit.");
    return true;
}
