#include "cli/report_parts.h"

static const char *state_word(RfBenchState state)
{
    static const char *const words[] = {"too few", "steady", "stands out", "may have moved", "moved"};
    return words[state];
}

static void summary_row(GString *out, const RfBenchChart *chart, guint number)
{
    const bool has_limits = chart->state != RF_BENCH_TOO_FEW;
    g_string_append_printf(out, "<tr><th scope=\"row\"><a href=\"#chart-%u\">", number);
    rf_report_text(out, chart->title);
    g_string_append(out, "</a></th>");
    rf_report_text_fixed_cell(out, chart->points->len, 0);
    if (has_limits)
        rf_report_text_number_cell(out, (RfValue){chart->limits.centre, chart->limits.sigma});
    else
        rf_report_text_cell(out, true, "–");
    rf_report_text_cell(out, false, state_word(chart->state));
    g_string_append(out, "</tr>\n");
}

static void summary(GString *out, const GPtrArray *charts)
{
    rf_report_text_open(out, "verdict", "The bench over time");
    rf_report_text_table(
        out, "What was followed",
        "<tr><th scope=\"col\">quantity</th><th scope=\"col\" class=\"number\">recordings</th>"
        "<th scope=\"col\" class=\"number\">centre, and sigma of one recording</th>"
        "<th scope=\"col\">state</th></tr>");
    for (guint i = 0; i < charts->len; i++) summary_row(out, charts->pdata[i], i + 1);
    rf_report_text_table_end(out);
    g_string_append(
        out,
        "<p>The first recordings set the limits: their mean, and three times the sigma that follows from the "
        "mean difference of neighbours (ISO 7870-2). A recording beyond them, seven in a row on one side of "
        "the "
        "centre, seven in a row up or down, or a jump is a signal, and framed.</p>\n");
    rf_report_text_close(out);
}

void rf_report_bench(GString *out, const GPtrArray *charts, const RfFigureSet *figures)
{
    summary(out, charts);
    for (guint i = 0; i < charts->len; i++) {
        const RfBenchChart *chart = charts->pdata[i];
        g_autofree char *name = g_strdup_printf("chart-%u", i + 1);
        g_autoptr(GString) heading = g_string_new(NULL);
        rf_report_text(heading, chart->title);
        rf_report_text_open(out, name, heading->str);
        g_string_append(out, "<p>");
        rf_report_text_sentence(out, chart->verdict);
        g_string_append(out, "</p>\n");
        rf_report_text_figure(out, figures, name,
                              "Unbroken line: centre; broken lines: limits; upright line: where it moved. "
                              "Bars are one standard "
                              "uncertainty as stated by the run.");
        rf_report_text_close(out);
    }
}
