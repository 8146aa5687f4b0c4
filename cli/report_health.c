#include "cli/report_parts.h"

static unsigned count(const GArray *lines, RfFitnessVerdict verdict)
{
    unsigned n = 0;
    for (guint i = 0; i < lines->len; i++) n += g_array_index(lines, RfFitnessLine, i).verdict == verdict;
    return n;
}

static void overall(GString *out, const GArray *lines)
{
    const unsigned care = count(lines, RF_FITNESS_CARE), unfit = count(lines, RF_FITNESS_UNFIT);
    g_string_append_printf(
        out, "<p>For measuring, the recording is <strong>%s</strong>: of %u matters looked at, ",
        rf_fitness_verdict_to_string(rf_fitness_overall(lines)), lines->len);
    if (care + unfit == 0) {
        g_string_append(out, "all are as they should be.</p>\n");
        return;
    }
    if (unfit > 0) g_string_append_printf(out, "%u spoil%s the result", unfit, unfit == 1 ? "s" : "");
    if (care > 0)
        g_string_append_printf(out, "%s%u call%s for care", unfit > 0 ? " and " : "", care,
                               care == 1 ? "s" : "");
    g_string_append(out, ". What that means, and what to do next time, stands beside it.</p>\n");
}

static void line_row(GString *out, const RfFitnessLine *line)
{
    static const struct {
        const char *shape, *word;
    } marks[] = {{"good", "fit"}, {"care", "care"}, {"bad", "unfit"}}; /* by RfFitnessVerdict */
    g_string_append_printf(out, "<tr><th scope=\"row\">%s</th><td class=\"finding %s\">%s</td>", line->key,
                           marks[line->verdict].shape, marks[line->verdict].word);
    rf_report_text_cell(out, false, line->figure);
    g_string_append(out, "<td>");
    rf_report_text_sentence(out, line->advice);
    g_string_append(out, "</td></tr>\n");
}

void rf_report_health(GString *out, const RfResults *results)
{
    if (!results->fitness) return;
    rf_report_text_open(out, "health", "The recording’s health");
    overall(out, results->fitness);
    rf_report_text_table(out, "Table of the recording’s health",
                         "<th scope=\"col\">Matter</th><th scope=\"col\">Verdict</th>"
                         "<th scope=\"col\">Found</th><th scope=\"col\">What it means, what to do</th>");
    for (guint i = 0; i < results->fitness->len; i++)
        line_row(out, &g_array_index(results->fitness, RfFitnessLine, i));
    rf_report_text_table_end(out);
    rf_report_text_close(out);
}
