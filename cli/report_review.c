#include "cli/report_parts.h"
#include "cli/review.h"
#include "cli/tally.h"
#include "cli/text_number.h"

typedef void (*Writer)(GString *out, const RfResults *results);

static void unit_cell(GString *out, const RfResults *results)
{
    g_string_append(out, "<td>");
    if (results->unit.resolved)
        rf_report_text_charge(out, results->unit.unit_C);
    else
        g_string_append(out, "not resolved");
    g_string_append(out, "</td>");
}

static void unit_reason_cell(GString *out, const RfResults *results)
{
    rf_report_text_cell(out, false, results->unit.reason);
}

static void accepted_cell(GString *out, const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    g_string_append_printf(out, "<td>%u of %u</td>", tally.droplets_accepted, tally.droplets);
}

static void verdict_cell(GString *out, const RfResults *results)
{
    rf_report_text_cell(out, false, results->verdict);
}

static void side_by_side(GString *out, const RfResults *results)
{
    const struct {
        const char *what;
        Writer cell;
    } lines[] = {
        {"Unit of charge", unit_cell},
        {"What supports it", unit_reason_cell},
        {"Droplets accepted", accepted_cell},
        {"Verdict", verdict_cell},
    };
    rf_report_text_table(out, "The result with the review and without it",
                         "<th scope=\"col\">Result</th><th scope=\"col\">With the review</th>"
                         "<th scope=\"col\">Without it</th>");
    for (size_t i = 0; i < G_N_ELEMENTS(lines); i++) {
        g_string_append_printf(out, "<tr><th scope=\"row\">%s</th>", lines[i].what);
        lines[i].cell(out, results);
        lines[i].cell(out, results->without);
        g_string_append(out, "</tr>\n");
    }
    rf_report_text_table_end(out);
}

/* Every spell of a droplet: charge and verdict. */
static void state_of(GString *out, const RfResults *results, unsigned droplet)
{
    for (guint i = 0; droplet && i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (row->droplet != droplet) continue;
        g_autofree char *charge =
            row->has_charge ? rf_text_number_concise_scaled(row->charge_C, -19) : g_strdup("no charge");
        g_string_append_printf(out, "<div class=\"nowrap\">%u: %s, %s</div>", droplet, charge,
                               row->accepted ? "accepted" : "set aside");
    }
}

static void state_cell(GString *out, const RfResults *results, unsigned droplet, unsigned other)
{
    g_string_append(out, "<td>");
    if (!droplet && !other) g_string_append(out, "–");
    state_of(out, results, droplet);
    state_of(out, results, other);
    g_string_append(out, "</td>");
}

static void entry_row(GString *out, const RfResults *results, const RfReviewRow *entry)
{
    if (entry->now)
        g_string_append_printf(out, "<tr data-droplet=\"%u\">", entry->now);
    else
        g_string_append(out, "<tr>");
    g_string_append_printf(out, "<th scope=\"row\">%s %u", rf_review_action_to_string(entry->action),
                           entry->place.droplet);
    if (entry->action == RF_REVIEW_JOIN) g_string_append_printf(out, " and %u", entry->other.droplet);
    g_string_append(out, "</th>");
    rf_report_text_cell(out, false, entry->name);
    rf_report_text_cell(out, false, *entry->date ? entry->date : "not dated");
    rf_report_text_cell(out, false, entry->reason);
    g_string_append_printf(
        out, "<td><span class=\"finding %s\">%s</span>: ",
        entry->outcome == RF_REVIEW_HONOURED || entry->outcome == RF_REVIEW_ALREADY ? "good" : "bad",
        rf_review_outcome_to_string(entry->outcome));
    rf_report_text(out, entry->detail);
    g_string_append(out, "</td>");
    state_cell(out, results, entry->now, entry->other_now);
    state_cell(out, results->without, entry->found, entry->other_found);
    g_string_append(out, "</tr>\n");
}

static void entries(GString *out, const RfResults *results)
{
    rf_report_text_table(
        out, "Table of decisions by people",
        "<th scope=\"col\">Decision</th><th scope=\"col\">By</th><th scope=\"col\">When</th>"
        "<th scope=\"col\">Why</th><th scope=\"col\">What came of it</th>"
        "<th scope=\"col\">With the review<small>droplet: charge in 10<sup>−19</sup> C</small></th>"
        "<th scope=\"col\">Without it</th>");
    for (guint i = 0; i < results->review->len; i++)
        entry_row(out, results, &g_array_index(results->review, RfReviewRow, i));
    rf_report_text_table_end(out);
}

void rf_report_review(GString *out, const RfResults *results)
{
    rf_report_text_open(out, "review", "Overruled by a person");
    if (results->without) {
        g_string_append(
            out, "<p>Numbers of droplets in the first column are those of the report that the decision was "
                 "made on; the other columns have today’s.</p>\n");
        entries(out, results);
        side_by_side(out, results);
    } else {
        g_string_append(out, "<p>Nothing: every verdict in this report is the program’s own.</p>\n");
    }
    rf_report_review_form(out, results);
    rf_report_text_close(out);
}

static unsigned count_done(const GArray *review)
{
    unsigned done = 0;
    for (guint i = 0; i < review->len; i++)
        done += g_array_index(review, RfReviewRow, i).outcome == RF_REVIEW_HONOURED;
    return done;
}

void rf_report_review_notice(GString *out, const RfResults *results)
{
    if (!results->without) return;
    const unsigned done = count_done(results->review);
    const RfTally tally = rf_tally_droplets(results->without);
    g_string_append_printf(
        out,
        "<p class=\"overruled\"><strong>Reviewed by a person.</strong> %u of %u decisions changed "
        "something: <a href=\"#review\">what, by whom and why</a>. Without them: ",
        done, results->review->len);
    if (results->without->unit.resolved) {
        g_string_append(out, "unit ");
        rf_report_text_charge(out, results->without->unit.unit_C);
    } else {
        g_string_append(out, "no unit resolved");
    }
    g_string_append_printf(out, ", %u droplet%s accepted, %u set aside.</p>\n", tally.droplets_accepted,
                           tally.droplets_accepted == 1 ? "" : "s", tally.droplets - tally.droplets_accepted);
}
