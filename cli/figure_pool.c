#include <math.h>

#include "cli/figure_script.h"
#include "cli/figure_text.h"

/* More names than this would overprint each other: then only numbers. */
enum { MOST_NAMED = 40 };

static void name_axis(GString *script, const GArray *recordings, unsigned pooled)
{
    g_string_append_printf(script, "set xrange [0.3:%u.7]\n", pooled);
    if (pooled > MOST_NAMED) {
        g_string_append(script, "set xlabel 'recording, in the order of recordings.csv'\n");
        return;
    }
    g_string_append(script, "set xtics scale 0 rotate by 35 right (");
    unsigned place = 0;
    for (guint i = 0; i < recordings->len; i++) {
        const RfRecordingRow *row = &g_array_index(recordings, RfRecordingRow, i);
        if (row->state != RF_RECORDING_POOLED) continue;
        g_autofree char *name = rf_figure_text_harmless(row->name);
        g_string_append_printf(script, "%s\"%s\" %u", place ? ", " : "", name, place + 1);
        place++;
    }
    g_string_append(script, ")\n");
}

/* The pooled unit as a band, its sigma to either side. */
static void band(GString *script, RfValue unit_C)
{
    const double low = (unit_C.value - unit_C.sigma) * 1e19, high = (unit_C.value + unit_C.sigma) * 1e19;
    g_string_append(script, "set object 1 rectangle from graph 0, first ");
    rf_figure_text_number(script, low);
    g_string_append(script, " to graph 1, first ");
    rf_figure_text_number(script, high);
    g_string_append_printf(
        script, " behind fc rgb '#%s' fs transparent solid 0.18 noborder\nset arrow from graph 0, first ",
        rf_figure_hue[1]);
    rf_figure_text_number(script, unit_C.value * 1e19);
    g_string_append(script, " to graph 1, first ");
    rf_figure_text_number(script, unit_C.value * 1e19);
    g_string_append_printf(script, " nohead lw 1.4 lc rgb '#%s'\n", rf_figure_hue[1]);
}

bool rf_figure_recordings_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    unsigned pooled = 0;
    g_string_append(data, "# place unit_1e-19_C u_1e-19_C u_random_1e-19_C deviate\n");
    for (guint i = 0; i < results->recordings->len; i++) {
        const RfRecordingRow *row = &g_array_index(results->recordings, RfRecordingRow, i);
        if (row->state != RF_RECORDING_POOLED) continue;
        const double unit = row->unit_C.value * 1e19;
        rf_figure_text_row(
            data, (double[]){++pooled, unit, row->unit_C.sigma * 1e19, row->u_random_C * 1e19, row->deviate},
            5);
    }
    if (pooled == 0 || !results->unit.resolved) return false;
    name_axis(script, results->recordings, pooled);
    band(script, results->unit.unit_C);
    g_string_append_printf(
        script,
        "set ylabel 'unit of charge, 10^{-19} C'\nset grid noxtics\nset key top right\n"
        "plot 'recordings.dat' using 1:2:3 with yerrorbars lw 1.2 ps 0 lc rgb '#%s' title 'with common "
        "parts', \\\n"
        "  '' using 1:2:4 with yerrorbars lw 2.4 pt 7 ps 0.8 lc rgb '#%s' title 'droplets alone'\n",
        rf_figure_hue[4], rf_figure_hue[0]);
    g_string_append_printf(
        alt,
        "Each of %u recordings' own unit of charge with one standard uncertainty, over the pooled unit as "
        "a band; the table beside it has the same numbers.",
        pooled);
    return true;
}

/* One series: thousands of charges are a cloud, not marks to choose from. */
bool rf_figure_residues_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    const double unit_C = results->unit.unit_C.value;
    unsigned charges = 0;
    if (!results->unit.resolved) return false;
    g_string_append(data, "# charge beyond_nearest_multiple u_random (all in units) recording\n");
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (!row->accepted || !row->has_charge) continue;
        const double units = row->charge_C.value / unit_C;
        rf_figure_text_row(
            data, (double[]){units, units - round(units), row->u_random_C / unit_C, row->recording + 1}, 4);
        charges++;
    }
    g_string_append_printf(
        script,
        "set yrange [-0.5:0.5]\nset ytics 0.25\nset xzeroaxis lt 1 lc rgb '#222222' lw 0.8\n"
        "set xlabel 'charge, in units'\nset ylabel 'beyond whole, in units'\nunset key\n"
        "plot 'residues.dat' using 1:2:3 with yerrorbars lw 0.8 pt 7 ps 0.5 lc rgb '#%s' notitle\n",
        rf_figure_hue[0]);
    g_string_append_printf(
        alt,
        "Distance of each of %u accepted charges from the nearest whole multiple of the pooled unit, with "
        "the droplet's own standard uncertainty.",
        charges);
    return charges > 0;
}
