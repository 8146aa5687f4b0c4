#include <float.h>
#include <math.h>

#include "cli/figure_script.h"
#include "cli/figure_text.h"

static const char RULE[] = "808080";

bool rf_figure_radius_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    unsigned n = 0;
    double low_um = DBL_MAX, high_um = 0;
    g_autoptr(GString) plots = g_string_new(NULL);
    g_string_append(
        data,
        "# droplet spell radius_fall_um u_radius_fall_um radius_spread_um u_radius_spread_um accepted\n");
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *spell = &g_array_index(results->droplets, RfDropletRow, i);
        const RfValue fall = spell->radius_fall_um, spread = spell->radius_spread_um;
        if (!(fall.sigma > 0) || !(spread.sigma > 0) || !isfinite(fall.value) || !isfinite(spread.value))
            continue;
        rf_figure_text_row(data,
                           (double[]){spell->droplet, spell->spell, fall.value, fall.sigma, spread.value,
                                      spread.sigma, spell->accepted},
                           7);
        g_string_append(data, "\n\n");
        g_string_append_printf(
            plots,
            ", \\\n  'radius.dat' index %u using 3:5:4:6 with xyerrorbars lw 1.4 ps 0.9 lc rgb '#%s' pt %d "
            "title 'droplet %u'",
            n++, spell->accepted ? rf_figure_hue[0] : rf_figure_hue[4], spell->accepted ? 7 : 4,
            spell->droplet);
        low_um = fmin(low_um, fmin(fall.value, spread.value - spread.sigma));
        high_um = fmax(high_um, fmax(fall.value, spread.value + spread.sigma));
    }
    if (n == 0) return false;
    const double edge_um = 0.06 * (high_um - low_um) + 1e-3;
    g_string_append(script,
                    "set xlabel 'radius from fall, µm'\nset ylabel 'radius from spread, µm'\nset xrange [");
    rf_figure_text_number(script, low_um - edge_um);
    g_string_append_c(script, ':');
    rf_figure_text_number(script, high_um + edge_um);
    g_string_append(script, "]\nset yrange [");
    rf_figure_text_number(script, low_um - edge_um);
    g_string_append_c(script, ':');
    rf_figure_text_number(script, high_um + edge_um);
    g_string_append_printf(script, "]\nplot x with lines lc rgb '#%s' lw 1 title 'equal'%s\n", RULE,
                           plots->str);
    g_string_append_printf(
        alt,
        "Radius from the spread of the path against radius from the fall for %u spells, with the line where "
        "both agree.",
        n);
    return true;
}
