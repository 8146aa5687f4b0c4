#include <math.h>
#include <string.h>

#include "cli/report_parts.h"
#include "cli/text_number.h"

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

static void audit_row(GString *out, const RfAuditRow *row)
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
    rf_report_text_cell(out, false, row->evidence);
    g_string_append(out, "</tr>\n");
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
    for (guint i = 0; i < rows->len; i++) audit_row(out, rows->pdata[i]);
    rf_report_text_table_end(out);
    rf_report_text_close(out);
}
