#include "cli/screen_summary.h"

#include <glib.h>
#include <string.h>
#include <unistd.h>

#include "cli/tally.h"
#include "cli/text_number.h"

bool rf_screen_summary_wants_colour(int fd)
{
    const char *refusal = g_getenv("NO_COLOR"), *terminal = g_getenv("TERM");
    if (refusal && *refusal) return false;
    return isatty(fd) && terminal && strcmp(terminal, "dumb") != 0;
}

static void styled(GString *out, bool colour, const char *code, const char *text)
{
    if (colour)
        g_string_append_printf(out, "\033[%sm%s\033[0m", code, text);
    else
        g_string_append(out, text);
}

static void verdict(GString *out, const RfResults *results, bool colour)
{
    styled(out, colour, "1", results->verdict ? results->verdict : "No verdict was reached");
    g_string_append(out, "\n\n");
}

static void unit(GString *out, const RfUnitResult *found, bool colour)
{
    g_string_append(out, "unit of charge   ");
    if (found->resolved) {
        g_autofree char *value = rf_text_number_concise_scaled(found->unit_C, -19);
        styled(out, colour, "32", value);
        g_string_append(out, "e-19 C\n");
    } else {
        styled(out, colour, "33", "not resolved");
        g_string_append_printf(out, ": %s\n",
                               found->reason && *found->reason ? found->reason : "no reason given");
    }
}

static void counts(GString *out, const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    g_string_append_printf(out, "droplets         %u accepted, %u set aside\n", tally.droplets_accepted,
                           tally.droplets - tally.droplets_accepted);
    g_string_append_printf(out, "events           %u field switches, %u charge steps\n",
                           results->switches->len, results->steps->len);
    const RfBudgetRow *limit = rf_tally_limiting_input(results);
    if (!limit) return;
    g_string_append_printf(out, "limited by       %s: ", limit->input);
    rf_text_number_append_fixed(out, 100 * limit->charge_relative_u, 2);
    g_string_append(out, " % of a typical charge\n");
}

/* Right-aligned in `width` columns, with a blank before it. */
static void column(GString *out, const char *text, int width)
{
    g_string_append_printf(out, " %*s", width, text);
}

static void droplet(GString *out, const RfDropletRow *row, bool colour)
{
    g_autofree char *fall = rf_text_number_concise(row->fall_mm_s),
                    *radius = rf_text_number_concise(row->radius_um);
    g_autofree char *charge =
        row->has_charge ? rf_text_number_concise_scaled(row->charge_C, -19) : g_strdup("-");
    g_autofree char *units = row->has_units ? g_strdup_printf("%+d", row->units) : g_strdup("-");
    g_string_append_printf(out, "%7u %5u", row->droplet, row->spell);
    column(out, fall, 14);
    column(out, radius, 12);
    column(out, charge, 14);
    column(out, row->units == 0 && row->has_units ? "0" : units, 6);
    g_string_append(out, "  ");
    styled(out, colour, row->accepted ? "32" : "33", row->accepted ? "accepted" : "set aside");
    g_string_append_c(out, '\n');
}

static void table(GString *out, const GArray *rows, int room, bool colour)
{
    if (rows->len == 0 || room < 3) return;
    g_string_append(out, "\ndroplet spell      fall mm/s    radius um   charge e-19C  units  verdict\n");
    const guint shown = (int)rows->len <= room - 2 ? rows->len : (guint)(room - 3);
    for (guint i = 0; i < shown; i++) droplet(out, &g_array_index(rows, RfDropletRow, i), colour);
    if (shown < rows->len)
        g_string_append_printf(out, "        and %u more rows in droplets.csv\n", rows->len - shown);
}

static int count_lines(const GString *text)
{
    int lines = 0;
    for (const char *c = text->str; *c; c++) lines += *c == '\n';
    return lines;
}

char *rf_screen_summary_new(const RfResults *results, const char *out_folder, int lines, bool colour)
{
    g_autoptr(GString) out = g_string_new(NULL);
    verdict(out, results, colour);
    unit(out, &results->unit, colour);
    counts(out, results);
    if (results->warnings->len)
        g_string_append_printf(out, "warnings         %u, in the report and in summary.json\n",
                               results->warnings->len);
    const int below = out_folder ? 2 : 0;
    table(out, results->droplets, MAX(lines, 20) - count_lines(out) - below - 1, colour);
    if (out_folder) g_string_append_printf(out, "\nreport           %s/report.html\n", out_folder);
    return g_string_free(g_steal_pointer(&out), FALSE);
}
