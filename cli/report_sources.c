#include "cli/report_parts.h"
#include "cli/text_number.h"
#include "cli/version.h"

static void percent_cell(GString *out, bool is_there, double fraction)
{
    g_string_append(out, "<td class=\"number\">");
    if (is_there)
        rf_report_text_percent(out, fraction);
    else
        g_string_append(out, "–");
    g_string_append(out, "</td>");
}

static bool has_monte_carlo(const GArray *rows)
{
    for (guint i = 0; i < rows->len; i++)
        if (g_array_index(rows, RfBudgetRow, i).charge_relative_u_mc >= 0) return true;
    return false;
}

static void budget_row(GString *out, const RfBudgetRow *row, bool with_mc, bool is_pool)
{
    g_string_append(out, "<tr><th scope=\"row\">");
    rf_report_text(out, row->input);
    g_string_append(out, "</th>");
    rf_report_text_cell(out, false, row->stated);
    percent_cell(out, row->relative_u > 0, row->relative_u);
    percent_cell(out, true, row->charge_relative_u);
    if (with_mc) percent_cell(out, row->charge_relative_u_mc >= 0, row->charge_relative_u_mc);
    const char *shared_by = is_pool          ? row->is_common ? "recordings that name it" : "none"
                            : row->is_common ? "all droplets"
                                             : "each droplet";
    rf_report_text_cell(out, false, shared_by);
    g_string_append(out, "</tr>\n");
}

void rf_report_budget(GString *out, const RfResults *results, const RfFigureSet *figures)
{
    if (results->budget->len == 0) return;
    rf_report_text_open(out, "budget", "What the uncertainty is made of");
    const bool is_pool = results->recordings->len > 0;
    g_string_append(
        out,
        is_pool
            ? "<p>For the pooled unit. A measurement that recordings share doesn’t average out over them; "
              "what each has of its own does.</p>\n"
            : "<p>For a typical accepted droplet. Parts shared by all droplets don’t average out "
              "over them; a droplet’s own part does.</p>\n");
    const bool with_mc = has_monte_carlo(results->budget);
    rf_report_text_figure(out, figures, "budget",
                          with_mc ? "Bars: analytic propagation (JCGM 100). Diamonds: Monte Carlo (JCGM 101)."
                                  : "Bars: analytic propagation (JCGM 100).");
    g_autofree char *head =
        g_strconcat("<th scope=\"col\">Input</th><th scope=\"col\">Value used</th>"
                    "<th scope=\"col\" class=\"number\">u of the input</th>",
                    is_pool ? "<th scope=\"col\" class=\"number\">u in the unit</th>"
                            : "<th scope=\"col\" class=\"number\">u in the charge</th>",
                    with_mc ? "<th scope=\"col\" class=\"number\">by Monte Carlo</th>" : "",
                    "<th scope=\"col\">Shared by</th>", NULL);
    rf_report_text_table(out, "Table of the uncertainty budget", head);
    for (guint i = 0; i < results->budget->len; i++)
        budget_row(out, &g_array_index(results->budget, RfBudgetRow, i), with_mc, is_pool);
    rf_report_text_table_end(out);
    rf_report_text_close(out);
}

static void fact(GString *out, const char *name, const char *format, ...) G_GNUC_PRINTF(3, 4);
static void fact(GString *out, const char *name, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *text = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    g_string_append_printf(out, "<tr><th scope=\"row\">%s</th>", name);
    rf_report_text_cell(out, false, text);
    g_string_append(out, "</tr>\n");
}

static char *fixed_text(double value, int decimals)
{
    GString *text = g_string_new(NULL);
    rf_text_number_append_fixed(text, value, decimals);
    return g_string_free(text, FALSE);
}

static void recording(GString *out, const RfResults *results)
{
    const RfScaleRow *scale = &results->scale;
    g_string_append(out, "<h3>Recording and scale</h3>\n");
    rf_report_text_table(out, "Recording and scale",
                         "<th scope=\"col\">What</th><th scope=\"col\">Found</th>");
    if (results->recording_summary) fact(out, "Recording", "%s", results->recording_summary);
    g_autofree char *duration = fixed_text(results->duration_s, 2),
                    *axis = fixed_text(results->gravity_axis_deg, 2);
    fact(out, "Used", "%" G_GINT64_FORMAT " frames, %s s", results->frames, duration);
    fact(out, "Gravity in the picture", "%s° from the picture’s upright", axis);
    if (results->has_log_clock) {
        g_autofree char *ahead = rf_text_number_concise(results->log_offset_s);
        fact(out, "Voltage log", "its clock is %s s ahead of the recording’s", ahead);
    }
    if (scale->found) {
        g_autofree char *x = rf_text_number_concise((RfValue){scale->px_per_mm_x, scale->u_px_per_mm_x});
        g_autofree char *y = rf_text_number_concise((RfValue){scale->px_per_mm_y, scale->u_px_per_mm_y});
        g_autofree char *turn = fixed_text(scale->rotation_deg, 3),
                        *residual = fixed_text(scale->residual_px, 3);
        fact(out, "Scale", "%s px/mm across, %s px/mm upright, turned by %s°", x, y, turn);
        fact(out, "Reticle", "%u lines in %s, residual %s px rms", scale->lines_found,
             scale->source ? scale->source : "the reticle", residual);
    } else {
        fact(out, "Scale", "not found");
    }
    rf_report_text_table_end(out);
}

static void certificate(GString *out, const GArray *rows)
{
    if (rows->len == 0) return;
    g_string_append(out,
                    "<h3>Against the certificate</h3>\n"
                    "<p>E<sub>n</sub> between -1 and 1: they agree within expanded uncertainties.</p>\n");
    rf_report_text_table(out, "Table of certified against found",
                         "<th scope=\"col\">Quantity</th><th scope=\"col\">Certified</th><th "
                         "scope=\"col\">Found</th><th scope=\"col\" class=\"number\">E<sub>n</sub></th><th "
                         "scope=\"col\" class=\"number\">Droplets</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfCertificateRow *row = &g_array_index(rows, RfCertificateRow, i);
        g_autofree char *certified = rf_text_number_concise(row->certified),
                        *found = rf_text_number_concise(row->found);
        g_autofree char *certified_unit = g_strdup_printf("%s %s", certified, row->unit),
                        *found_unit = g_strdup_printf("%s %s", found, row->unit);
        g_string_append_printf(out, "<tr><th scope=\"row\">%s</th>", row->quantity);
        rf_report_text_cell(out, false, certified_unit);
        rf_report_text_cell(out, false, found_unit);
        rf_report_text_fixed_cell(out, row->en_number, 2);
        g_string_append_printf(out, "<td class=\"number\">%u</td></tr>\n", row->droplets);
    }
    rf_report_text_table_end(out);
}

static void effects(GString *out, const GArray *rows)
{
    if (rows->len == 0) return;
    g_string_append(out, "<h3>Effects beside the formula</h3>\n");
    rf_report_text_table(out, "Table of effects",
                         "<th scope=\"col\">Effect</th><th scope=\"col\">Size</th><th scope=\"col\">What was "
                         "done</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfEffectRow *row = &g_array_index(rows, RfEffectRow, i);
        g_string_append(out, "<tr><th scope=\"row\">");
        rf_report_text(out, row->effect);
        g_string_append(out, "</th>");
        rf_report_text_cell(out, false, row->size);
        rf_report_text_cell(out, false, row->done);
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
}

static void settings(GString *out, const GArray *rows)
{
    g_string_append(out, "<h3>Every setting used</h3>\n");
    rf_report_text_table(out, "Table of settings",
                         "<th scope=\"col\">Group</th><th scope=\"col\">Key</th><th "
                         "scope=\"col\">Value</th><th scope=\"col\">From</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfUsedSetting *row = &g_array_index(rows, RfUsedSetting, i);
        g_string_append(out, "<tr>");
        rf_report_text_cell(out, false, row->group);
        rf_report_text_cell(out, false, row->key);
        rf_report_text_cell(out, false, row->value);
        g_string_append(out, row->is_default ? "<td>default" : "<td>the sheet");
        if (row->remark && *row->remark) {
            g_string_append(out, ": ");
            rf_report_text(out, row->remark);
        }
        g_string_append(out, "</td></tr>\n");
    }
    rf_report_text_table_end(out);
}

static void notes(GString *out, const GArray *rows)
{
    if (rows->len == 0) return;
    g_string_append(out, "<h3>Notes of the sheet, word for word</h3>\n");
    rf_report_text_table(out, "Notes of the sheet", "<th scope=\"col\">Note</th><th scope=\"col\">Text</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfUsedSetting *row = &g_array_index(rows, RfUsedSetting, i);
        g_string_append(out, "<tr><th scope=\"row\">");
        rf_report_text(out, row->key);
        g_string_append(out, "</th>");
        rf_report_text_cell(out, false, row->value);
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
}

void rf_report_files(GString *out, const RfResults *results)
{
    g_string_append(out, "<h3>Input files and program</h3>\n");
    rf_report_text_table(
        out, "Table of input files",
        "<th scope=\"col\">File</th><th scope=\"col\">Path</th><th scope=\"col\">SHA-256</th>");
    for (guint i = 0; i < results->inputs->len; i++) {
        const RfInputFile *file = &g_array_index(results->inputs, RfInputFile, i);
        g_string_append(out, "<tr><th scope=\"row\">");
        rf_report_text(out, file->role);
        g_string_append(out, "</th>");
        rf_report_text_cell(out, false, file->path);
        g_string_append(out, "<td><code>");
        rf_report_text(out, file->sha256);
        g_string_append(out, "</code></td></tr>\n");
    }
    g_string_append(out,
                    "<tr><th scope=\"row\">program</th><td>risefall " RF_VERSION "</td><td></td></tr>\n");
    rf_report_text_table_end(out);
}

void rf_report_cautions(GString *out)
{
    g_string_append(out, "<section id=\"cautions\" aria-labelledby=\"cautions-heading\"><h2 "
                         "id=\"cautions-heading\">Cautions</h2>\n"
                         "<p class=\"cautions\">Bare plates at high voltage can give a dangerous shock, also "
                         "for a while after the supply "
                         "is off. An ionising source in the cell must be handled, kept and accounted for as "
                         "its licence says. Oil mist "
                         "irritates and burns: keep it small, away from sparks and out of breath. Local "
                         "rules, and the people licensed "
                         "to decide, come before anything written here; this report says nothing about "
                         "whether a set-up is safe.</p>\n"
                         "</section>\n");
}

void rf_report_sources(GString *out, const RfResults *results)
{
    rf_report_text_open(out, "sources", "Where the numbers come from");
    recording(out, results);
    certificate(out, results->certificate);
    effects(out, results->effects);
    settings(out, results->settings);
    notes(out, results->notes);
    rf_report_files(out, results);
    rf_report_text_close(out);
    rf_report_cautions(out);
}
