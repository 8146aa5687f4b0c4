#include "cli/figure_script.h"

#include <math.h>
#include <string.h>

#include "cli/figure_palette.h"
#include "cli/tally.h"
#include "cli/text_number.h"

static const char *const HUE[RF_FIGURE_HUES] = RF_FIGURE_HUE_HEX;
static const int FILLED[RF_FIGURE_SHAPES] = {7, 5, 9, 13,
                                             11}; /* gnuplot's point types: circle, square, ... */
static const char INK[] = "222222", RULE[] = "808080";
static const double CODATA_E_C = 1.602176634e-19;

static void number(GString *out, double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_string_append(out, g_ascii_formatd(text, sizeof text, "%.8g", value));
}

static void row(GString *out, const double *values, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        if (i) g_string_append_c(out, ' ');
        number(out, values[i]);
    }
    g_string_append_c(out, '\n');
}

/* A name inside a gnuplot string: letters, digits and harmless signs only. */
static char *harmless(const char *text)
{
    char *copy = g_strdup(text ? text : "");
    return g_strcanon(copy, G_CSET_A_2_Z G_CSET_a_2_z G_CSET_DIGITS " .,:()+/'-", ' ');
}

static void droplet_look(GString *script, unsigned droplet)
{
    g_string_append_printf(script, "lc rgb '#%s' pt %d", HUE[(droplet - 1) % RF_FIGURE_HUES],
                           FILLED[(droplet - 1) % RF_FIGURE_SHAPES]);
}

/* ---- charges against whole multiples ---- */

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
    const double unit_C = is_found ? results->unit.unit_C.value : CODATA_E_C;
    const int first = (int)floor(CLAMP(low_C / unit_C, -MOST_UNITS, MOST_UNITS));
    const int last = (int)ceil(CLAMP(high_C / unit_C, -MOST_UNITS, MOST_UNITS));
    const int step = 1 + (last - first) / 24, start = first - first % step;
    g_string_append_printf(script, "set y2label 'multiple of %s'\nset y2tics (",
                           is_found ? "the unit found" : "CODATA e");
    for (int n = start; n <= last; n += step) {
        g_string_append_printf(script, "%s'%d' ", n == start ? "" : ", ", n);
        number(script, n * unit_C * 1e19);
    }
    g_string_append(script, ")\nset grid noxtics noytics y2tics lt 1 lc rgb '#808080' lw 0.5\n");
    g_string_append(script, "set yrange [");
    number(script, (first - 0.4) * unit_C * 1e19);
    g_string_append_c(script, ':');
    number(script, (last + 0.4) * unit_C * 1e19);
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
                               file, i, columns, spell->accepted ? HUE[0] : HUE[4], spell->accepted ? 7 : 4,
                               spell->droplet, i + 1 < spells->len ? ", \\" : "");
    }
}

static bool charges(const RfResults *results, GString *data, GString *script, GString *alt)
{
    g_autoptr(GPtrArray) spells = charged_spells(results);
    if (spells->len == 0) return false;
    double low_C = 0, high_C = 0;
    g_string_append(data, "# rank droplet spell charge_1e-19_C u_charge_1e-19_C u_random_1e-19_C accepted\n");
    for (guint i = 0; i < spells->len; i++) {
        const RfDropletRow *spell = spells->pdata[i];
        const double q = spell->charge_C.value, u = spell->charge_C.sigma;
        row(data,
            (double[]){i + 1, spell->droplet, spell->spell, q * 1e19, u * 1e19, spell->u_random_C * 1e19,
                       spell->accepted},
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

/* ---- how far from whole ---- */

/* Charges span many units, so that their bars vanish in the figure above; here half a unit fills the height. */
static bool multiples_missed(const RfResults *results, GString *data, GString *script, GString *alt)
{
    g_autoptr(GPtrArray) spells = charged_spells(results);
    if (spells->len == 0) return false;
    const bool is_found = results->unit.resolved && results->unit.unit_C.value > 0;
    const double unit_C = is_found ? results->unit.unit_C.value : CODATA_E_C;
    g_string_append(data,
                    "# rank droplet spell beyond_nearest_multiple u u_random (all in units) accepted\n");
    for (guint i = 0; i < spells->len; i++) {
        const RfDropletRow *spell = spells->pdata[i];
        const double units = spell->charge_C.value / unit_C;
        row(data,
            (double[]){i + 1, spell->droplet, spell->spell, units - round(units),
                       spell->charge_C.sigma / unit_C, spell->u_random_C / unit_C, spell->accepted},
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

/* ---- velocities in time ---- */

static void switch_lines(GString *script, const RfResults *results)
{
    const bool has_room = results->switches->len <= 14;
    for (guint i = 0; i < results->switches->len; i++) {
        const RfSwitchRow *change = &g_array_index(results->switches, RfSwitchRow, i);
        g_string_append(script, "set arrow from ");
        number(script, change->time_s.value);
        g_string_append(script, ", graph 0 to ");
        number(script, change->time_s.value);
        g_string_append_printf(script, ", graph 1 nohead dt (4,3) lc rgb '#%s'\n", RULE);
        if (!has_room) continue;
        if (i == 0)
            g_string_append_printf(script, "set label '%s' at graph 0.005, graph 1.04\n",
                                   rf_tally_field_to_string(change->from));
        g_string_append_printf(script, "set label '%s' at ", rf_tally_field_to_string(change->to));
        number(script, change->time_s.value);
        g_string_append(script, ", graph 1.04\n");
    }
    for (guint i = 0; i < results->steps->len; i++) {
        const RfStepRow *step = &g_array_index(results->steps, RfStepRow, i);
        g_string_append_printf(script, "set label 'step %u' at ", step->droplet);
        number(script, step->time_s.value);
        g_string_append_printf(script, ", graph 0.05 offset 0.8,0 point pt 8 ps 1.2 lc rgb '#%s'\n", INK);
    }
}

static bool velocities(const RfResults *results, GString *data, GString *script, GString *alt)
{
    const GArray *segments = results->segments;
    if (segments->len == 0) return false;
    g_string_append(data, "# droplet start_s end_s fall_mm_s u_fall_mm_s voltage_V; one block per droplet\n");
    g_string_append(
        script,
        "set xlabel 'time, s'\nset ylabel 'fall, mm/s (negative: rising)'\nset errorbars 0\nset tmargin 2.2\n"
        "set xzeroaxis lt 1 lc rgb '#222222' lw 0.8\n");
    switch_lines(script, results);
    g_string_append(script, "plot \\\n");
    unsigned blocks = 0;
    for (guint i = 0; i < segments->len; i++) {
        const RfSegmentRow *part = &g_array_index(segments, RfSegmentRow, i);
        const bool is_new = i == 0 || part->droplet != (part - 1)->droplet;
        if (is_new) {
            if (i) g_string_append(data, "\n\n"), g_string_append(script, ", \\\n");
            g_string_append_printf(
                script,
                "  'velocities.dat' index %u using (($2+$3)/2):4:(($3-$2)/2):5 with xyerrorbars "
                "lw 1.8 ps 0.7 ",
                blocks++);
            droplet_look(script, part->droplet);
            g_string_append_printf(script, " title 'droplet %u'", part->droplet);
        }
        row(data,
            (double[]){part->droplet, part->start_s, part->end_s, part->fall_mm_s.value,
                       part->fall_mm_s.sigma, part->voltage_V},
            6);
    }
    g_string_append_c(script, '\n');
    g_string_append_printf(
        alt,
        "Speed along gravity of %u droplets, one bar per stretch in one field state; broken upright "
        "lines are the %u field switches, open triangles at the foot the %u charge steps.",
        blocks, results->switches->len, results->steps->len);
    return true;
}

/* ---- how well a trial unit explains the charges ---- */

/* Trial units this much less likely than the best (as a logarithm) are beyond discussion. */
enum { DEEPEST_SHOWN = 40 };

static bool unit(const RfResults *results, GString *data, GString *script, GString *alt)
{
    const GArray *trial = results->unit.curve_unit_C, *level = results->unit.curve_log_likelihood;
    const guint n = MIN(trial->len, level->len);
    if (n < 2) return false;
    g_string_append(data, "# trial_unit_1e-19_C log_likelihood_below_best\n");
    double best = -INFINITY;
    for (guint i = 0; i < n; i++) best = fmax(best, g_array_index(level, double, i));
    for (guint i = 0; i < n; i++)
        row(data, (double[]){g_array_index(trial, double, i) * 1e19, g_array_index(level, double, i) - best},
            2);
    double deepest = 0;
    for (guint i = 0; i < n; i++) deepest = fmin(deepest, g_array_index(level, double, i) - best);
    g_string_append(
        script,
        "set xlabel 'trial unit, 10^{-19} C'\nset ylabel 'log-likelihood below the best'\nset logscale x\n"
        "set xtics (0.1, 0.2, 0.3, 0.5, 0.7, 1, 1.5, 2, 3, 5, 7, 10, 15, 20, 30, 50)\nset xrange [");
    number(script, g_array_index(trial, double, 0) * 1e19);
    g_string_append_c(script, ':');
    number(script, g_array_index(trial, double, n - 1) * 1e19);
    g_string_append(script, "]\nset yrange [");
    number(script, fmax(deepest - 1, -DEEPEST_SHOWN));
    g_string_append(script, ":1]\n");
    if (results->unit.resolved) {
        g_string_append(script, "set arrow from ");
        number(script, results->unit.unit_C.value * 1e19);
        g_string_append(script, ", graph 0 to ");
        number(script, results->unit.unit_C.value * 1e19);
        g_string_append_printf(script, ", graph 1 nohead lw 1.6 lc rgb '#%s'\nset label 'unit found' at ",
                               HUE[1]);
        number(script, results->unit.unit_C.value * 1e19);
        g_string_append_printf(script, ", graph 0.06 offset 0.6,0 tc rgb '#%s'\n", HUE[1]);
    }
    g_string_append_printf(
        script, "plot 'unit.dat' using 1:2 with lines lw 1.8 lc rgb '#%s' title 'likelihood'\n", HUE[0]);
    g_string_append(alt, "How well each trial unit explains the charges: log-likelihood below the best "
                         "against the trial unit.");
    return true;
}

/* ---- the radius seen twice ---- */

static bool radius(const RfResults *results, GString *data, GString *script, GString *alt)
{
    unsigned n = 0;
    double low_um = INFINITY, high_um = 0;
    g_autoptr(GString) plots = g_string_new(NULL);
    g_string_append(
        data,
        "# droplet spell radius_fall_um u_radius_fall_um radius_spread_um u_radius_spread_um accepted\n");
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *spell = &g_array_index(results->droplets, RfDropletRow, i);
        const RfValue fall = spell->radius_fall_um, spread = spell->radius_spread_um;
        if (!(fall.sigma > 0) || !(spread.sigma > 0) || !isfinite(fall.value) || !isfinite(spread.value))
            continue;
        row(data,
            (double[]){spell->droplet, spell->spell, fall.value, fall.sigma, spread.value, spread.sigma,
                       spell->accepted},
            7);
        g_string_append(data, "\n\n");
        g_string_append_printf(
            plots,
            ", \\\n  'radius.dat' index %u using 3:5:4:6 with xyerrorbars lw 1.4 ps 0.9 lc rgb '#%s' pt %d "
            "title 'droplet %u'",
            n++, spell->accepted ? HUE[0] : HUE[4], spell->accepted ? 7 : 4, spell->droplet);
        low_um = fmin(low_um, fmin(fall.value, spread.value - spread.sigma));
        high_um = fmax(high_um, fmax(fall.value, spread.value + spread.sigma));
    }
    if (n == 0) return false;
    const double edge_um = 0.06 * (high_um - low_um) + 1e-3;
    g_string_append(script,
                    "set xlabel 'radius from fall, µm'\nset ylabel 'radius from spread, µm'\nset xrange [");
    number(script, low_um - edge_um);
    g_string_append_c(script, ':');
    number(script, high_um + edge_um);
    g_string_append(script, "]\nset yrange [");
    number(script, low_um - edge_um);
    g_string_append_c(script, ':');
    number(script, high_um + edge_um);
    g_string_append_printf(script, "]\nplot x with lines lc rgb '#%s' lw 1 title 'equal'%s\n", RULE,
                           plots->str);
    g_string_append_printf(
        alt,
        "Radius from the spread of the path against radius from the fall for %u spells, with the line where "
        "both agree.",
        n);
    return true;
}

/* ---- budget ---- */

static int by_size(const void *left, const void *right)
{
    const RfBudgetRow *a = *(RfBudgetRow *const *)left, *b = *(RfBudgetRow *const *)right;
    if (a->charge_relative_u == b->charge_relative_u) return 0;
    return a->charge_relative_u < b->charge_relative_u ? -1 : 1;
}

static bool budget(const RfResults *results, GString *data, GString *script, GString *alt)
{
    if (results->budget->len == 0) return false;
    g_autoptr(GPtrArray) rows = g_ptr_array_new();
    for (guint i = 0; i < results->budget->len; i++)
        g_ptr_array_add(rows, &g_array_index(results->budget, RfBudgetRow, i));
    g_ptr_array_sort(rows, by_size);
    bool has_mc = false;
    g_string_append(data, "# place common_percent own_percent monte_carlo_percent (nan: not there)\n");
    g_string_append(script, "set ytics scale 0 (");
    for (guint i = 0; i < rows->len; i++) {
        const RfBudgetRow *line = rows->pdata[i];
        g_autofree char *name = harmless(line->input);
        g_string_append_printf(script, "%s\"%s\" %u", i ? ", " : "", name, i + 1);
        const double percent = 100 * fabs(line->charge_relative_u);
        row(data, (double[]){i + 1, line->is_common ? percent : 0, line->is_common ? 0 : percent}, 3);
        g_string_truncate(data, data->len - 1);
        g_string_append_c(data, ' ');
        if (line->charge_relative_u_mc >= 0)
            number(data, 100 * line->charge_relative_u_mc), has_mc = true;
        else
            g_string_append(data, "nan");
        g_string_append_c(data, '\n');
    }
    g_string_append_printf(
        script,
        ")\nset yrange [0.4:%u.6]\nset xrange [0:*]\nset xlabel 'adds to the charge, %%'\nset grid noytics\n"
        "set key bottom right Left reverse\nset style fill solid 0.85\n",
        rows->len);
    g_string_append_printf(
        script,
        "plot 'budget.dat' using ($2/2):1:(0):2:($1-0.3):($1+0.3) with boxxyerror lc rgb '#%s' title "
        "'shared by all droplets', \\\n  '' using ($3/2):1:(0):3:($1-0.18):($1+0.18) with boxxyerror lc rgb "
        "'#%s' title 'of a droplet alone'",
        HUE[0], HUE[1]);
    if (has_mc)
        g_string_append_printf(
            script, ", \\\n  '' using 4:1 with points pt 12 ps 1 lw 1.5 lc rgb '#%s' title 'Monte Carlo'",
            INK);
    g_string_append_c(script, '\n');
    g_string_append(alt, "What each input adds to the uncertainty of a typical charge, largest at the top; "
                         "the table beside it has "
                         "the same numbers.");
    return true;
}

const RfFigureScript rf_figure_scripts[] = {
    {"charges", "Charges against whole multiples", charges},
    {"multiples", "Distance from the nearest whole multiple", multiples_missed},
    {"velocities", "Velocities in time", velocities},
    {"unit", "How well a unit explains the charges", unit},
    {"radius", "Radius from fall against radius from spread", radius},
    {"budget", "What limits the charge", budget},
};
const size_t rf_figure_scripts_n = G_N_ELEMENTS(rf_figure_scripts);
