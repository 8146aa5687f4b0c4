#include "cli/figure_script.h"
#include "cli/figure_text.h"
#include "cli/tally.h"

static const int FILLED[RF_FIGURE_SHAPES] = {7, 5, 9, 13,
                                             11}; /* gnuplot's point types: circle, square, ... */
static const char INK[] = "222222", RULE[] = "808080";

/* Above so many bars a browser takes longer over their symbols than over all the rest of the page: bars and hues alone then. */
enum { MOST_SYMBOLS = 500 };

static void droplet_look(GString *script, unsigned droplet, bool has_symbol)
{
    if (!has_symbol) {
        g_string_append_printf(script, "lc rgb '#%s' pt -1", rf_figure_hue[(droplet - 1) % RF_FIGURE_HUES]);
        return;
    }
    g_string_append_printf(script, "lc rgb '#%s' pt %d", rf_figure_hue[(droplet - 1) % RF_FIGURE_HUES],
                           FILLED[(droplet - 1) % RF_FIGURE_SHAPES]);
}

static void switch_lines(GString *script, const RfResults *results)
{
    const bool has_room = results->switches->len <= 14;
    for (guint i = 0; i < results->switches->len; i++) {
        const RfSwitchRow *change = &g_array_index(results->switches, RfSwitchRow, i);
        g_string_append(script, "set arrow from ");
        rf_figure_text_number(script, change->time_s.value);
        g_string_append(script, ", graph 0 to ");
        rf_figure_text_number(script, change->time_s.value);
        g_string_append_printf(script, ", graph 1 nohead dt (4,3) lc rgb '#%s'\n", RULE);
        if (!has_room) continue;
        if (i == 0)
            g_string_append_printf(script, "set label '%s' at graph 0.005, graph 1.04\n",
                                   rf_tally_field_to_string(change->from));
        g_string_append_printf(script, "set label '%s' at ", rf_tally_field_to_string(change->to));
        rf_figure_text_number(script, change->time_s.value);
        g_string_append(script, ", graph 1.04\n");
    }
    for (guint i = 0; i < results->steps->len; i++) {
        const RfStepRow *step = &g_array_index(results->steps, RfStepRow, i);
        g_string_append_printf(script, "set label 'step %u' at ", step->droplet);
        rf_figure_text_number(script, step->time_s.value);
        g_string_append_printf(script, ", graph 0.05 offset 0.8,0 point pt 8 ps 1.2 lc rgb '#%s'\n", INK);
    }
}

bool rf_figure_velocities_write(const RfResults *results, GString *data, GString *script, GString *alt)
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
            droplet_look(script, part->droplet, segments->len <= MOST_SYMBOLS);
            g_string_append_printf(script, " title 'droplet %u'", part->droplet);
        }
        rf_figure_text_row(data,
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
