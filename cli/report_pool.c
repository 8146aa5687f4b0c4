#include "cli/report_parts.h"

#include "cli/tally.h"
#include "cli/text_number.h"

static const char *many(unsigned n)
{
    return n == 1 ? "" : "s";
}

static void agreement(GString *out, const RfResults *results)
{
    const RfAgreementOfRecordings *found = &results->agreement;
    if (found->used < 2) {
        g_string_append(out,
                        "<p>Fewer than two recordings tell of the unit: there is nothing to compare.</p>\n");
        return;
    }
    const RfRecordingRow *most_off = &g_array_index(results->recordings, RfRecordingRow, found->most_off);
    g_string_append(
        out, "<p>Do they agree? Their units about the pooled one, shared errors accounted for: chi-squared ");
    rf_text_number_append_fixed(out, found->chi_squared, 1);
    g_string_append_printf(
        out, " for %u degree%s of freedom, p = %.2g. The one furthest from what the others let expect is ",
        found->used - 1, many(found->used - 1), found->p);
    rf_report_text(out, most_off->name);
    g_string_append(out, ", by ");
    rf_text_number_append_fixed(out, most_off->deviate, 1);
    g_string_append_printf(out,
                           " standard uncertainties; chance puts one of %u as far off with p = %.2g.</p>\n",
                           found->used, found->most_off_p);
}

static void pooled_cells(GString *out, const RfRecordingRow *row)
{
    const bool has_others = row->offset.sigma > 0;
    g_autofree char *offset =
        rf_text_number_concise((RfValue){100 * row->offset.value, 100 * row->offset.sigma});
    rf_report_text_charge_cell(out, row->unit_C);
    rf_report_text_charge_cell(out, (RfValue){row->unit_C.value, row->u_random_C});
    rf_report_text_fixed_cell(out, 100 * row->weight, 1);
    rf_report_text_cell(out, true, has_others ? offset : "–");
    if (has_others)
        rf_report_text_fixed_cell(out, row->deviate, 1);
    else
        rf_report_text_cell(out, true, "–");
    if (has_others)
        rf_report_text_charge_cell(out, row->without_C);
    else
        rf_report_text_cell(out, true, "–");
    rf_report_text_cell(out, false, row->stands_alone ? "its own charges" : "with the others");
}

static void recording_row(GString *out, const RfRecordingRow *row)
{
    g_string_append(out, "<tr><th scope=\"row\">");
    rf_report_text(out, row->name);
    g_string_append_printf(out, "</th><td class=\"number\">%u</td>", row->droplets_accepted);
    if (row->state == RF_RECORDING_POOLED) {
        pooled_cells(out, row);
    } else {
        g_string_append_printf(out, "<td colspan=\"7\">%s: ",
                               row->state == RF_RECORDING_FAILED  ? "no result"
                               : row->state == RF_RECORDING_EMPTY ? "nothing measured"
                                                                  : "tells nothing of the unit");
        rf_report_text(out, row->reason);
        g_string_append(out, "</td>");
    }
    g_string_append(out, "</tr>\n");
}

void rf_report_recordings(GString *out, const RfResults *results, const RfFigureSet *figures)
{
    rf_report_text_open(out, "recordings", "Recording by recording");
    agreement(out, results);
    rf_report_text_figure(
        out, figures, "recordings",
        "Thick bars: what a recording’s own droplets leave open. Thin bars: with the part that its inputs "
        "add, some of it shared with other recordings. Band: the pooled unit.");
    rf_report_text_table(
        out, "Table of recordings",
        "<th scope=\"col\">Recording</th><th scope=\"col\" class=\"number\">Droplets</th>"
        "<th scope=\"col\" class=\"number\">Its unit<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">Droplets’ part<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">Weight<small>%</small></th>"
        "<th scope=\"col\" class=\"number\">Off the others<small>%</small></th>"
        "<th scope=\"col\" class=\"number\">Deviate</th>"
        "<th scope=\"col\" class=\"number\">Unit without it<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\">Multiples settled by</th>");
    for (guint i = 0; i < results->recordings->len; i++)
        recording_row(out, &g_array_index(results->recordings, RfRecordingRow, i));
    rf_report_text_table_end(out);
    g_string_append(
        out,
        "<p class=\"soft\">Off the others: its unit less what all others let expect of it. A weight below 0 "
        "is no mistake: such a recording serves to tell an error that others share.</p>\n");
    rf_report_text_close(out);
}

void rf_report_pool_sources(GString *out, const RfResults *results)
{
    rf_report_text_open(out, "sources", "Where the numbers come from");
    g_string_append(
        out, "<p>Every droplet, accepted or set aside, with its recording is in <code>droplets.csv</code>; "
             "what each "
             "measurement adds in <code>measurements.csv</code>; settings and notes in each recording’s own "
             "report.</p>\n");
    rf_report_files(out, results);
    rf_report_text_close(out);
    rf_report_cautions(out);
}
