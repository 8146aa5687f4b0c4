#include <string.h>

#include "cli/report_parts.h"
#include "cli/tally.h"
#include "cli/text_number.h"

static void open_row(GString *out, unsigned droplet, bool is_anchor)
{
    if (is_anchor)
        g_string_append_printf(out, "<tr id=\"droplet-%u\" data-droplet=\"%u\">", droplet, droplet);
    else
        g_string_append_printf(out, "<tr data-droplet=\"%u\">", droplet);
    rf_report_text_droplet_cell(out, droplet);
}

static void span_cell(GString *out, double start_s, double end_s)
{
    g_string_append(out, "<td class=\"number\">");
    rf_text_number_append_fixed(out, start_s, 1);
    g_string_append(out, " to ");
    rf_text_number_append_fixed(out, end_s, 1);
    g_string_append(out, "</td>");
}

static void multiple_cell(GString *out, const RfDropletRow *row)
{
    g_string_append(out, "<td class=\"number\">");
    if (row->has_units)
        g_string_append_printf(out, "%s%d",
                               row->units < 0   ? "−"
                               : row->units > 0 ? "+"
                                                : "",
                               ABS(row->units));
    else
        g_string_append(out, "–");
    if (row->has_charge && row->units_probability > 0.999) {
        g_string_append(out, " <small class=\"soft\">p &gt; 0.999</small>");
    } else if (row->has_charge) {
        g_string_append(out, " <small class=\"soft\">p = ");
        rf_text_number_append_fixed(out, row->units_probability, row->units_probability > 0.99 ? 3 : 2);
        g_string_append(out, "</small>");
    }
    g_string_append(out, "</td>");
}

static void droplet_row(GString *out, const RfDropletRow *row, bool is_first)
{
    open_row(out, row->droplet, is_first);
    g_string_append_printf(out, "<td class=\"number\">%u</td>", row->spell);
    span_cell(out, row->start_s, row->end_s);
    rf_report_text_number_cell(out, row->fall_mm_s);
    rf_report_text_number_cell(out, row->radius_um);
    if (row->has_charge) {
        rf_report_text_charge_cell(out, row->charge_C);
        g_autofree char *own =
            rf_text_number_concise_scaled((RfValue){row->u_random_C, row->u_random_C}, -19);
        own[strcspn(own, "(")] = '\0'; /* sigma itself, to two digits */
        rf_report_text_cell(out, true, own);
    } else {
        g_string_append(out, "<td class=\"number\">–</td><td class=\"number\">–</td>");
    }
    multiple_cell(out, row);
    g_string_append_printf(out, "<td>%s%s</td></tr>\n", row->accepted ? "accepted" : "set aside",
                           row->is_overruled ? " <small class=\"soft\">by a person</small>" : "");
}

void rf_report_droplets(GString *out, const RfResults *results)
{
    const GArray *rows = results->droplets;
    rf_report_text_open(out, "droplets", "The droplets");
    if (rows->len == 0) {
        g_string_append(out, "<p>No droplet could be measured.</p>\n");
        rf_report_text_close(out);
        return;
    }
    g_string_append(out, "<p>One row per spell of constant charge. Digits in brackets are one standard "
                         "uncertainty in the last digits: "
                         "6.000(10) is 6.000 ± 0.010. The multiple is of the known e, given where its "
                         "probability p is at least 0.95.</p>\n");
    rf_report_text_table(
        out, "Table of droplets",
        "<th scope=\"col\">Droplet</th><th scope=\"col\" class=\"number\">Spell</th>"
        "<th scope=\"col\" class=\"number\">Seen<small>s</small></th><th scope=\"col\" "
        "class=\"number\">Fall, field off<small>mm/s</small></th>"
        "<th scope=\"col\" class=\"number\">Radius<small>µm</small></th>"
        "<th scope=\"col\" class=\"number\">Charge<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">Own part of u<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">Multiple</th><th scope=\"col\">Verdict</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfDropletRow *row = &g_array_index(rows, RfDropletRow, i);
        droplet_row(out, row, i == 0 || row->droplet != (row - 1)->droplet);
    }
    rf_report_text_table_end(out);
    rf_report_text_close(out);
}

void rf_report_set_aside(GString *out, const RfResults *results)
{
    unsigned n = 0;
    for (guint i = 0; i < results->droplets->len; i++)
        n += !g_array_index(results->droplets, RfDropletRow, i).accepted;
    rf_report_text_open(out, "aside", "Set aside, and why");
    if (n == 0) {
        g_string_append(out, "<p>Nothing was set aside.</p>\n");
        rf_report_text_close(out);
        return;
    }
    rf_report_text_table(out, "Table of what was set aside",
                         "<th scope=\"col\">Droplet</th><th scope=\"col\" class=\"number\">Spell</th><th "
                         "scope=\"col\">Reason</th>");
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (row->accepted) continue;
        open_row(out, row->droplet, false);
        g_string_append_printf(out, "<td class=\"number\">%u</td>", row->spell);
        rf_report_text_cell(out, false, row->reason);
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
    rf_report_text_close(out);
}

static void switches(GString *out, const RfResults *results)
{
    const GArray *rows = results->switches;
    g_string_append(out, "<h3>Field switches</h3>\n");
    if (rows->len == 0) {
        g_string_append(out, "<p>None found.</p>\n");
        return;
    }
    rf_report_text_table(out, "Table of field switches",
                         "<th scope=\"col\">Switch</th><th scope=\"col\" "
                         "class=\"number\">Time<small>s</small></th><th scope=\"col\">From</th>"
                         "<th scope=\"col\">To</th><th scope=\"col\" class=\"number\">Droplets that tell</th>"
                         "<th scope=\"col\" class=\"number\">Log’s clock<small>s</small></th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfSwitchRow *row = &g_array_index(rows, RfSwitchRow, i);
        g_string_append_printf(out, "<tr><th scope=\"row\">%u</th>", row->number);
        rf_report_moment_time_cell(out, results, RF_MOMENT_SWITCH, row->number, row->time_s);
        rf_report_text_cell(out, false, rf_tally_field_to_string(row->from));
        rf_report_text_cell(out, false, rf_tally_field_to_string(row->to));
        g_string_append_printf(out, "<td class=\"number\">%u</td>", row->droplets);
        if (row->has_log_time)
            rf_report_text_fixed_cell(out, row->log_time_s, 3);
        else
            g_string_append(out, "<td class=\"number\">–</td>");
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
}

static void steps(GString *out, const RfResults *results)
{
    const GArray *rows = results->steps;
    g_string_append(out, "<h3>Charge steps</h3>\n");
    if (rows->len == 0) {
        g_string_append(out, "<p>None found.</p>\n");
        return;
    }
    rf_report_text_table(
        out, "Table of charge steps",
        "<th scope=\"col\">Droplet</th><th scope=\"col\" class=\"number\">Time<small>s</small></th>"
        "<th scope=\"col\" class=\"number\">Charge before<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">after<small>10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\" class=\"number\">Chance, if whole multiples</th>");
    for (guint i = 0; i < rows->len; i++) {
        const RfStepRow *row = &g_array_index(rows, RfStepRow, i);
        open_row(out, row->droplet, false);
        rf_report_moment_time_cell(out, results, RF_MOMENT_STEP, i + 1, row->time_s);
        rf_report_text_charge_cell(out, row->before_C);
        rf_report_text_charge_cell(out, row->after_C);
        if (row->whole_multiples_p >= 0)
            rf_report_text_fixed_cell(out, row->whole_multiples_p, 2);
        else
            rf_report_text_cell(out, true, "not tested");
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
}

void rf_report_events(GString *out, const RfResults *results)
{
    rf_report_text_open(out, "events", "When something happened");
    switches(out, results);
    steps(out, results);
    rf_report_text_close(out);
}
