#include <math.h>
#include <string.h>

#include "cli/report_parts.h"
#include "cli/text_number.h"

enum { MOST_ROWS = 1000 }; /* more would be no page that anyone opens */

static bool agrees(const RfAuditRow *row)
{
    return row->finding && strcmp(row->finding, "agrees") == 0;
}

/* What matters most first: findings that aren't agreement, the largest E_n number among them, then what has no match. */
static int by_weight(const void *left, const void *right)
{
    const RfAuditRow *a = *(RfAuditRow *const *)left, *b = *(RfAuditRow *const *)right;
    if (agrees(a) != agrees(b)) return agrees(a) ? 1 : -1;
    const double en_a = a->has_tracked ? fabs(a->en_number) : 0,
                 en_b = b->has_tracked ? fabs(b->en_number) : 0;
    if (en_a != en_b) return en_a > en_b ? -1 : 1;
    return a->entry < b->entry ? -1 : a->entry > b->entry;
}

static void audit_row(GString *out, const RfResults *results, const RfAuditRow *row)
{
    if (row->droplet)
        g_string_append_printf(out, "<tr data-droplet=\"%u\">", row->droplet);
    else
        g_string_append(out, "<tr>");
    g_string_append_printf(out, "<th scope=\"row\">%u</th>", row->entry);
    rf_report_text_cell(out, false, row->label);
    g_string_append_printf(out, "<td><span class=\"finding %s\">", agrees(row) ? "good" : "bad");
    rf_report_text(out, row->finding);
    g_string_append(out, "</span></td>");
    rf_report_text_number_cell(out, row->hand_time_s);
    if (row->has_tracked) {
        rf_report_text_number_cell(out, row->tracked_time_s);
        rf_report_text_fixed_cell(out, row->difference_s, 2);
        rf_report_text_fixed_cell(out, row->en_number, 1);
    } else {
        g_string_append(out,
                        "<td class=\"number\">–</td><td class=\"number\">–</td><td class=\"number\">–</td>");
    }
    if (row->droplet)
        g_string_append_printf(out, "<td class=\"number\"><a class=\"pick\" href=\"#droplet-%u\">%u</a></td>",
                               row->droplet, row->droplet);
    else
        g_string_append(out, "<td class=\"number\">–</td>");
    g_string_append(out, "<td class=\"evidence\">");
    rf_report_text(out, row->evidence);
    rf_report_moment_button(out, results, RF_MOMENT_TIMED_START, row->entry);
    rf_report_moment_button(out, results, RF_MOMENT_TIMED_STOP, row->entry);
    g_string_append(out, "</td></tr>\n");
}

static void person_line(GString *out, const char *name, RfValue value, const char *unit)
{
    g_autofree char *text = rf_text_number_concise(value);
    g_string_append_printf(out, "<tr><th scope=\"row\">%s</th><td class=\"number\">", name);
    rf_report_text(out, text);
    g_string_append_printf(out, "</td><td>%s</td></tr>\n", unit);
}

/* What the habit is and what it costs, from the entries that are sound. */
static void person(GString *out, const RfPersonRow *found)
{
    if (!found->is_known) return;
    const RfAgreement *limits = &found->agreement;
    rf_report_text_table(out, "The person's timing",
                         "<th scope=\"col\">The person</th><th scope=\"col\" class=\"number\">"
                         "Value</th><th scope=\"col\">Unit and meaning</th>");
    person_line(out, "Bias", found->bias_s, "s, an interval by hand less the recording's");
    person_line(out, "Spread", found->spread_s, "s, of one interval");
    person_line(out, "Trend", found->trend_s_per_min, "s per minute of recording");
    if (limits->n > 1) {
        person_line(out, "Lower limit of agreement", (RfValue){limits->lower, limits->u_limit},
                    "s; 95 % of differences lie between the two");
        person_line(out, "Upper limit of agreement", (RfValue){limits->upper, limits->u_limit}, "s");
    }
    if (found->has_clock) {
        person_line(out, "Clock", found->clock_offset_s,
                    "s ahead of the recording; a habit at the start included");
        person_line(out, "Spread at the start", found->start_spread_s, "s");
        person_line(out, "Spread at the stop", found->stop_spread_s, "s");
    }
    person_line(out, "Effect on a velocity",
                (RfValue){100 * found->velocity_effect.value, 100 * found->velocity_effect.sigma}, "%");
    if (found->has_charge_effect)
        person_line(out, "Effect on a charge",
                    (RfValue){100 * found->charge_effect.value, 100 * found->charge_effect.sigma}, "%");
    rf_report_text_table_end(out);
}

static void charge_row(GString *out, const RfHandChargeRow *row)
{
    g_string_append(out, "<tr>");
    rf_report_text_droplet_cell(out, row->droplet);
    rf_report_text_cell(out, false, row->label);
    rf_report_text_charge_cell(out, row->raw_C);
    rf_report_text_charge_cell(out, row->corrected_C);
    rf_report_text_charge_cell(out, row->tracked_C);
    g_string_append(out, "</tr>\n");
}

static void hand_charges(GString *out, const GArray *charges)
{
    if (charges->len == 0) return;
    rf_report_text_table(
        out, "Charges from hand timings, 1e-19 C",
        "<th scope=\"col\">Droplet</th><th scope=\"col\">Label</th><th scope=\"col\" "
        "class=\"number\">By hand<small>10⁻¹⁹ C</small></th><th scope=\"col\" class=\"number\">Bias "
        "taken off</th><th scope=\"col\" class=\"number\">Recording</th>");
    for (guint i = 0; i < charges->len; i++) charge_row(out, &g_array_index(charges, RfHandChargeRow, i));
    rf_report_text_table_end(out);
}

void rf_report_audit(GString *out, const RfResults *results)
{
    if (results->audit->len == 0) return;
    g_autoptr(GPtrArray) rows = g_ptr_array_new();
    unsigned good = 0;
    for (guint i = 0; i < results->audit->len; i++) {
        g_ptr_array_add(rows, &g_array_index(results->audit, RfAuditRow, i));
        good += agrees(rows->pdata[i]);
    }
    g_ptr_array_sort(rows, by_weight);
    rf_report_text_open(out, "audit", "Hand timings against the recording");
    g_string_append_printf(
        out,
        "<p>%u of %u entries agree. What matters most stands first. E<sub>n</sub> is the difference over its "
        "expanded uncertainty: beyond 1 it is more than timing by hand explains.</p>\n",
        good, rows->len);
    rf_report_text_table(
        out, "Table of hand timings",
        "<th scope=\"col\">Entry</th><th scope=\"col\">Label</th><th scope=\"col\">Finding</th>"
        "<th scope=\"col\" class=\"number\">By hand<small>s</small></th><th scope=\"col\" "
        "class=\"number\">Recording<small>s</small></th>"
        "<th scope=\"col\" class=\"number\">Difference<small>s</small></th><th scope=\"col\" "
        "class=\"number\">E<sub>n</sub></th>"
        "<th scope=\"col\" class=\"number\">Droplet</th><th scope=\"col\">Evidence</th>");
    for (guint i = 0; i < MIN(rows->len, MOST_ROWS); i++) audit_row(out, results, rows->pdata[i]);
    rf_report_text_table_end(out);
    if (rows->len > MOST_ROWS)
        g_string_append_printf(out, "<p>%u more entries are in audit.csv.</p>\n", rows->len - MOST_ROWS);
    person(out, &results->person);
    hand_charges(out, results->hand_charges);
    rf_report_text_close(out);
}
