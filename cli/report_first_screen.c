#include <math.h>

#include "cli/report_parts.h"
#include "cli/tally.h"
#include "cli/text_number.h"

static const double CODATA_E_C = 1.602176634e-19; /* SI Brochure, 9th edition: exact */

static void unit_fact(GString *out, const RfUnitResult *unit)
{
    g_string_append(out, "<div><dt>Unit of charge</dt><dd class=\"big\">");
    if (unit->resolved)
        rf_report_text_charge(out, unit->unit_C);
    else
        g_string_append(out, "not resolved");
    g_string_append(out, "</dd><dd class=\"note\">");
    if (unit->resolved && unit->unit_C.sigma > 0) {
        const double away = fabs(unit->unit_C.value - CODATA_E_C) / unit->unit_C.sigma;
        g_string_append(out, "Found from these charges alone. The accepted value of e lies ");
        rf_text_number_append_fixed(out, away, 1);
        g_string_append(
            out, " standard uncertainties away. In brackets: one standard uncertainty, in the last digits.");
    } else {
        rf_report_text_sentence(out, unit->reason);
    }
    g_string_append(out, "</dd></div>\n");
}

static const char *many(unsigned n)
{
    return n == 1 ? "" : "s";
}

static void droplets_fact(GString *out, const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    const unsigned switches = results->switches->len, steps = results->steps->len;
    g_string_append_printf(
        out,
        "<div><dt>Droplets</dt><dd class=\"big\">%u accepted, <span class=\"nowrap\">%u set aside</span></dd>"
        "<dd class=\"note\">%u spell%s of constant charge, %u field switch%s, %u charge step%s.</dd></div>\n",
        tally.droplets_accepted, tally.droplets - tally.droplets_accepted, tally.spells, many(tally.spells),
        switches, switches == 1 ? "" : "es", steps, many(steps));
}

static void recordings_fact(GString *out, const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    const unsigned failed = rf_tally_recordings(results, RF_RECORDING_FAILED),
                   pooled = rf_tally_recordings(results, RF_RECORDING_POOLED);
    g_string_append_printf(
        out,
        "<div><dt>Recordings</dt><dd class=\"big\">%u pooled, <span class=\"nowrap\">%u without a "
        "result</span></dd>"
        "<dd class=\"note\">%u tell nothing of the unit. %u droplet%s accepted, %u set aside.</dd></div>\n",
        pooled, failed, results->recordings->len - pooled - failed, tally.droplets_accepted,
        many(tally.droplets_accepted), tally.droplets - tally.droplets_accepted);
}

static void limit_fact(GString *out, const RfResults *results)
{
    const RfBudgetRow *limit = rf_tally_limiting_input(results);
    const bool is_pool = results->recordings->len > 0;
    g_string_append_printf(out, "<div><dt>What limits the %s</dt><dd class=\"big\">",
                           is_pool ? "unit" : "charges");
    if (!limit) {
        g_string_append(
            out, is_pool ? "no unit</dd><dd class=\"note\">There is nothing to budget.</dd></div>\n"
                         : "no charges</dd><dd class=\"note\">There is nothing to budget.</dd></div>\n");
        return;
    }
    rf_report_text(out, limit->input);
    g_string_append(out, "</dd><dd class=\"note\">Adds ");
    rf_report_text_percent(out, limit->charge_relative_u);
    g_string_append(out, is_pool ? " to the unit" : " to a typical charge");
    if (limit->is_common && limit->stated && *limit->stated) {
        g_string_append(out, "; used: ");
        rf_report_text(out, limit->stated);
    }
    if (is_pool)
        g_string_append(out,
                        limit->is_common
                            ? ". Shared by the recordings that name it, so more of them don’t average it out."
                            : ". More recordings reduce it.");
    else
        g_string_append(out, limit->is_common
                                 ? ". Shared by all droplets, so more of them don’t average it out."
                                 : ". Longer watching or more droplets reduce it.");
    g_string_append(out, "</dd></div>\n");
}

static void warnings(GString *out, const GPtrArray *list)
{
    if (list->len == 0) return;
    g_string_append_printf(
        out, "<div class=\"warnings\"><p>%u thing%s to know before using these numbers</p><ul>\n", list->len,
        many(list->len));
    for (guint i = 0; i < list->len; i++) {
        g_string_append(out, "<li>");
        rf_report_text(out, list->pdata[i]);
        g_string_append(out, "</li>\n");
    }
    g_string_append(out, "</ul></div>\n");
}

/* The screen's "1.614(13)e-19 C" as print has it. */
static void verdict(GString *out, const char *text)
{
    g_autoptr(GString) escaped = g_string_new(NULL);
    rf_report_text(escaped, text);
    g_autoptr(GRegex) power = g_regex_new("(\\d[\\d.]*(?:\\(\\d+\\))?)e-(\\d+) C\\b", 0, 0, NULL);
    g_autofree char *set = g_regex_replace(
        power, escaped->str, -1, 0, "<span class=\"nowrap\">\\1 × 10<sup>−\\2</sup> C</span>", 0, NULL);
    g_string_append(out, set);
}

void rf_report_first_screen(GString *out, const RfResults *results)
{
    g_string_append(
        out, "<section id=\"verdict\" aria-labelledby=\"verdict-heading\">\n<h1 id=\"verdict-heading\">");
    verdict(out, results->verdict ? results->verdict : "No verdict was reached");
    g_string_append(out, "</h1>\n<dl class=\"facts\">\n");
    unit_fact(out, &results->unit);
    if (results->recordings->len > 0)
        recordings_fact(out, results);
    else
        droplets_fact(out, results);
    limit_fact(out, results);
    g_string_append(out, "</dl>\n");
    rf_report_review_notice(out, results);
    warnings(out, results->warnings);
    rf_report_text_close(out);
}
