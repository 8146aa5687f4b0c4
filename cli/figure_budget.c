#include <math.h>

#include "cli/figure_script.h"
#include "cli/figure_text.h"

static const char INK[] = "222222";

static int by_size(const void *left, const void *right)
{
    const RfBudgetRow *a = *(RfBudgetRow *const *)left, *b = *(RfBudgetRow *const *)right;
    if (a->charge_relative_u == b->charge_relative_u) return 0;
    return a->charge_relative_u < b->charge_relative_u ? -1 : 1;
}

bool rf_figure_budget_write(const RfResults *results, GString *data, GString *script, GString *alt)
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
        g_autofree char *name = rf_figure_text_harmless(line->input);
        g_string_append_printf(script, "%s\"%s\" %u", i ? ", " : "", name, i + 1);
        const double percent = 100 * fabs(line->charge_relative_u);
        rf_figure_text_row(
            data, (double[]){i + 1, line->is_common ? percent : 0, line->is_common ? 0 : percent}, 3);
        g_string_truncate(data, data->len - 1);
        g_string_append_c(data, ' ');
        if (line->charge_relative_u_mc >= 0)
            rf_figure_text_number(data, 100 * line->charge_relative_u_mc), has_mc = true;
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
        rf_figure_hue[0], rf_figure_hue[1]);
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
