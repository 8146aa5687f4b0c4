#include <math.h>

#include "cli/figure_script.h"
#include "cli/figure_text.h"

static int by_charge(const void *left, const void *right)
{
    const RfDropletRow *a = *(RfDropletRow *const *)left, *b = *(RfDropletRow *const *)right;
    if (a->charge_C.value != b->charge_C.value) return a->charge_C.value < b->charge_C.value ? -1 : 1;
    return a->droplet != b->droplet ? (a->droplet < b->droplet ? -1 : 1) : (int)a->spell - (int)b->spell;
}

static GPtrArray *charged_spells(const RfResults *results)
{
    GPtrArray *spells = g_ptr_array_new();
    for (guint i = 0; i < results->droplets->len; i++) {
        RfDropletRow *spell = &g_array_index(results->droplets, RfDropletRow, i);
        if (spell->has_charge && isfinite(spell->charge_C.value)) g_ptr_array_add(spells, spell);
    }
    g_ptr_array_sort(spells, by_charge);
    return spells;
}

/* Far beyond any droplet; keeps a wild charge from filling the axis. */
static const double MOST_UNITS = 1e6;

static void multiples(GString *script, const RfResults *results, double low_C, double high_C)
{
    const bool is_found = results->unit.resolved && results->unit.unit_C.value > 0;
    const double unit_C = is_found ? results->unit.unit_C.value : rf_figure_codata_e_C;
    const int first = (int)floor(CLAMP(low_C / unit_C, -MOST_UNITS, MOST_UNITS));
    const int last = (int)ceil(CLAMP(high_C / unit_C, -MOST_UNITS, MOST_UNITS));
    const int step = 1 + (last - first) / 24, start = first - first % step;
    g_string_append_printf(script, "set y2label 'multiple of %s'\nset y2tics (",
                           is_found ? "the unit found" : "CODATA e");
    for (int n = start; n <= last; n += step) {
        g_string_append_printf(script, "%s'%d' ", n == start ? "" : ", ", n);
        rf_figure_text_number(script, n * unit_C * 1e19);
    }
    g_string_append(script, ")\nset grid noxtics noytics y2tics lt 1 lc rgb '#808080' lw 0.5\n");
    g_string_append(script, "set yrange [");
    rf_figure_text_number(script, (first - 0.4) * unit_C * 1e19);
    g_string_append_c(script, ':');
    rf_figure_text_number(script, (last + 0.4) * unit_C * 1e19);
    g_string_append(script, "]\nset link y2\n");
}

static void rank_axis(GString *script, const GPtrArray *spells)
{
    g_string_append_printf(
        script, "set xrange [0.3:%u.7]\nset xlabel 'droplet, in order of charge'\nset xtics scale 0 (",
        spells->len);
    for (guint i = 0; i < spells->len && spells->len <= 40; i++)
        g_string_append_printf(script, "%s'%u' %u", i ? ", " : "",
                               ((RfDropletRow *)spells->pdata[i])->droplet, i + 1);
    g_string_append(script, ")\n");
}

/* One plot per spell, so that the page can find each droplet's mark. */
static void spell_plots(GString *script, const GPtrArray *spells, const char *file, const char *columns)
{
    g_string_append(script, "plot \\\n");
    for (guint i = 0; i < spells->len; i++) {
        const RfDropletRow *spell = spells->pdata[i];
        g_string_append_printf(script,
                               "  '%s' index %u using %s with yerrorbars lw 1.6 ps 0.9 lc rgb '#%s' pt %d "
                               "title 'droplet %u'%s\n",
                               file, i, columns, spell->accepted ? rf_figure_hue[0] : rf_figure_hue[4],
                               spell->accepted ? 7 : 4, spell->droplet, i + 1 < spells->len ? ", \\" : "");
    }
}

bool rf_figure_charges_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    g_autoptr(GPtrArray) spells = charged_spells(results);
    if (spells->len == 0) return false;
    double low_C = 0, high_C = 0;
    g_string_append(data, "# rank droplet spell charge_1e-19_C u_charge_1e-19_C u_random_1e-19_C accepted\n");
    for (guint i = 0; i < spells->len; i++) {
        const RfDropletRow *spell = spells->pdata[i];
        const double q = spell->charge_C.value, u = spell->charge_C.sigma;
        rf_figure_text_row(data,
                           (double[]){i + 1, spell->droplet, spell->spell, q * 1e19, u * 1e19,
                                      spell->u_random_C * 1e19, spell->accepted},
                           7);
        g_string_append(data, "\n\n"); /* one block each: one mark each in the picture */
        if (spell->accepted || spells->len < 4) low_C = fmin(low_C, q - u), high_C = fmax(high_C, q + u);
    }
    rank_axis(script, spells);
    g_string_append(script, "set ylabel 'charge, 10^{-19} C'\n");
    multiples(script, results, low_C, high_C);
    spell_plots(script, spells, "charges.dat", "1:4:5");
    g_string_append_printf(
        alt,
        "Charges of %u spells with one standard uncertainty, over lines at whole multiples of the unit. "
        "Filled circles are accepted, open squares set aside.",
        spells->len);
    return true;
}

/* Charges span many units, so that their bars vanish in the figure above; here half a unit fills the height. */
bool rf_figure_multiples_write(const RfResults *results, GString *data, GString *script, GString *alt)
{
    g_autoptr(GPtrArray) spells = charged_spells(results);
    if (spells->len == 0) return false;
    const bool is_found = results->unit.resolved && results->unit.unit_C.value > 0;
    const double unit_C = is_found ? results->unit.unit_C.value : rf_figure_codata_e_C;
    g_string_append(data,
                    "# rank droplet spell beyond_nearest_multiple u u_random (all in units) accepted\n");
    for (guint i = 0; i < spells->len; i++) {
        const RfDropletRow *spell = spells->pdata[i];
        const double units = spell->charge_C.value / unit_C;
        rf_figure_text_row(data,
                           (double[]){i + 1, spell->droplet, spell->spell, units - round(units),
                                      spell->charge_C.sigma / unit_C, spell->u_random_C / unit_C,
                                      spell->accepted},
                           7);
        g_string_append(data, "\n\n");
    }
    rank_axis(script, spells);
    g_string_append_printf(script,
                           "set yrange [-0.5:0.5]\nset ytics 0.25\nset grid noxtics\nset xzeroaxis lt 1 lc "
                           "rgb '#222222' lw 0.8\n"
                           "set ylabel 'beyond whole, in %s'\n",
                           is_found ? "units" : "e");
    spell_plots(script, spells, "multiples.dat", "1:4:5");
    g_string_append_printf(alt,
                           "Distance of each of %u charges from the nearest whole multiple of %s, with one "
                           "standard uncertainty; half a "
                           "unit either way is the most there can be.",
                           spells->len, is_found ? "the unit found" : "e");
    return true;
}
