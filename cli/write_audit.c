#include "cli/write_audit.h"

#include "cli/json_rows.h"
#include "cli/report_html.h"
#include "cli/text_number.h"
#include "cli/text_wrap.h"
#include "cli/write_csv.h"

#include <math.h>
#include <string.h>

enum { MOST_SHOWN = 40, ENTRY = 11 };

static void number(GString *out, const char *name, double value, int decimals, bool is_exponent)
{
    g_string_append_printf(out, "    \"%s\": ", name);
    if (!isfinite(value)) /* JSON has no word for what is not a number */
        g_string_append(out, "null");
    else if (is_exponent)
        rf_text_number_append_exponent(out, value, decimals);
    else
        rf_text_number_append_fixed(out, value, decimals);
    g_string_append(out, ",\n");
}

static void pair(GString *out, const char *name, RfValue value, int decimals, bool is_exponent)
{
    g_autofree char *u_name = g_strconcat("u_", name, NULL);
    number(out, name, value.value, decimals, is_exponent);
    number(out, u_name, value.sigma, decimals, is_exponent);
}

static void count(GString *out, const char *name, unsigned value)
{
    g_string_append_printf(out, "    \"%s\": %u,\n", name, value);
}

/* The last comma is one too many. */
static void end_object(GString *out)
{
    g_string_truncate(out, out->len - 2);
    g_string_append(out, "\n  }");
}

static void person_object(GString *out, const RfPersonRow *person)
{
    g_string_append(out, "{\n  \"person\": {\n");
    count(out, "entries", person->entries);
    count(out, "sound", person->sound);
    count(out, "unreadable", person->unreadable);
    if (person->is_known) {
        pair(out, "bias_s", person->bias_s, 6, false);
        pair(out, "spread_s", person->spread_s, 6, false);
        pair(out, "trend_s_per_min", person->trend_s_per_min, 6, false);
        number(out, "verdict_level_s", person->verdict_level_s, 6, false);
        pair(out, "velocity_effect", person->velocity_effect, 6, false);
    }
    if (person->is_known && person->agreement.n > 1) {
        const RfAgreement *limits = &person->agreement;
        number(out, "lower_limit_s", limits->lower, 6, false);
        number(out, "lower_limit_low_s", limits->lower_interval.low, 6, false);
        number(out, "lower_limit_high_s", limits->lower_interval.high, 6, false);
        number(out, "upper_limit_s", limits->upper, 6, false);
        number(out, "upper_limit_low_s", limits->upper_interval.low, 6, false);
        number(out, "upper_limit_high_s", limits->upper_interval.high, 6, false);
    }
    if (person->has_clock) {
        pair(out, "clock_offset_s", person->clock_offset_s, 6, false);
        pair(out, "start_spread_s", person->start_spread_s, 6, false);
        pair(out, "stop_spread_s", person->stop_spread_s, 6, false);
    }
    if (person->has_charge_effect) pair(out, "charge_effect", person->charge_effect, 6, false);
    end_object(out);
}

static void charge_object(GString *out, const RfHandChargeRow *row)
{
    g_string_append(out, "\n  {\n    \"label\": ");
    rf_json_rows_append_string(out, row->label);
    g_string_append(out, ",\n");
    count(out, "droplet", row->droplet);
    count(out, "spell", row->spell);
    count(out, "falls", row->falls);
    count(out, "rises", row->rises);
    pair(out, "raw_C", row->raw_C, 6, true);
    pair(out, "corrected_C", row->corrected_C, 6, true);
    pair(out, "tracked_C", row->tracked_C, 6, true);
    end_object(out);
}

char *rf_write_audit_json(const RfResults *results)
{
    GString *out = g_string_new(NULL);
    person_object(out, &results->person);
    g_string_append(out, ",\n  \"charges\": [");
    for (guint i = 0; i < results->hand_charges->len; i++) {
        g_string_append(out, i ? "," : "");
        charge_object(out, &g_array_index(results->hand_charges, RfHandChargeRow, i));
    }
    g_string_append(out, "],\n  \"entries\": ");
    g_autoptr(GString) table = rf_write_csv_audit(results);
    rf_json_rows_append(out, table->str, 2);
    g_string_append(out, "\n}\n");
    return g_string_free(out, FALSE);
}

bool rf_write_audit(const RfResults *results, RfResultFolder *folder, GError **error)
{
    g_autoptr(GString) table = rf_write_csv_audit(results);
    g_autoptr(GString) page = rf_report_html_audit_new(results);
    g_autofree char *json = rf_write_audit_json(results);
    return rf_result_folder_add(folder, "audit.csv", table->str, table->len, error) &&
           rf_result_folder_add_text(folder, "audit.json", json, error) &&
           rf_result_folder_add(folder, "report.html", page->str, page->len, error);
}

/* ---- on screen ---- */

/* From the table: nothing that could steer a terminal. */
static void append_plain(GString *out, const char *text)
{
    for (const char *c = text; c && *c; c++)
        g_string_append_c(out, (unsigned char)*c < 0x20 || *c == 0x7f ? '?' : *c);
}

static void line(GString *out, const char *name, RfValue value, const char *unit)
{
    g_autofree char *text = rf_text_number_concise(value);
    g_string_append_printf(out, "%-16s %s %s\n", name, text, unit);
}

static void append_person(GString *out, const RfPersonRow *person)
{
    if (!person->is_known) {
        g_string_append(out, "too few sound entries to say anything of the person's habit\n");
        return;
    }
    line(out, "bias", person->bias_s, "s per interval, by hand less recording");
    line(out, "spread", person->spread_s, "s");
    if (person->has_clock) line(out, "clock", person->clock_offset_s, "s ahead of the recording");
    RfValue percent = {100 * person->velocity_effect.value, 100 * person->velocity_effect.sigma};
    line(out, "effect", percent, "% on a velocity");
}

static bool is_sound(const RfAuditRow *row)
{
    return strcmp(row->finding, "agrees") == 0;
}

static void append_entry(GString *out, const RfAuditRow *row, int columns)
{
    g_autoptr(GString) text = g_string_new(NULL);
    if (*row->label) {
        g_string_append(text, "(");
        append_plain(text, row->label);
        g_string_append(text, "): ");
    }
    g_string_append_printf(text, "%s: ", row->finding);
    append_plain(text, row->evidence);
    g_string_append_printf(out, "entry %-4u ", row->entry);
    rf_text_wrap_append(out, text->str, ENTRY, columns, true);
}

char *rf_write_audit_summary(const RfResults *results, const char *out_folder, int columns)
{
    GString *out = g_string_new(NULL);
    const RfPersonRow *person = &results->person;
    g_string_append_printf(out, "%u of %u entries agree with the recording.\n\n", person->sound,
                           person->entries);
    append_person(out, person);
    guint shown = 0, unsound = 0;
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = &g_array_index(results->audit, RfAuditRow, i);
        if (is_sound(row) || ++unsound > MOST_SHOWN) continue;
        if (shown++ == 0) g_string_append_c(out, '\n');
        append_entry(out, row, columns);
    }
    if (unsound > MOST_SHOWN) g_string_append_printf(out, "and %u more\n", unsound - MOST_SHOWN);
    if (out_folder) g_string_append_printf(out, "\nreport           %s/report.html\n", out_folder);
    return g_string_free(out, FALSE);
}
