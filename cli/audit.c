#include "cli/audit.h"

#include "calib/table.h"
#include "cli/audit_findings.h"
#include "cli/audit_person.h"

static void warn_of_problems(RfResults *results, const char *path, const RfHandTimings *timings,
                             const RfHandHabit *habit)
{
    if (timings->unreadable > 0)
        g_ptr_array_add(
            results->warnings,
            g_strdup_printf("%s: %u of %u entries can't be read; the audit names line and column of each",
                            path, timings->unreadable, timings->entries->len));
    for (guint i = 0; i < timings->entries->len; i++)
        if (g_array_index(timings->entries, RfHandEntry, i).has_start && !habit->has_clock) {
            g_ptr_array_add(
                results->warnings,
                g_strdup_printf(
                    "%s: no clock offset puts the noted starts on what the droplets did; the starts "
                    "are not used",
                    path));
            return;
        }
}

bool rf_audit_can_read(const char *path, GError **error)
{
    g_autoptr(RfHandTimings) timings = rf_hand_timings_read(path, error);
    return timings != NULL;
}

bool rf_audit_timings(const char *path, RfResults *results, const RfMedium *medium, GError **error)
{
    g_autoptr(RfHandTimings) timings = rf_hand_timings_read(path, error);
    if (!timings) return false;
    g_autoptr(RfLineCrossings) crossings = rf_line_crossings_new(results);
    if (!crossings) {
        g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_SHAPE,
                    "%s: timings can't be audited: the scale has no two reticle lines across gravity "
                    "(scale.json: line_step_mm)",
                    path);
        return false;
    }
    g_autoptr(RfAuditMatch) match = rf_audit_match_new(timings, crossings);
    g_autoptr(GArray) explanations = g_array_new(FALSE, FALSE, sizeof(RfExplanation));
    g_array_set_size(results->audit, 0);
    for (guint i = 0; i < timings->entries->len; i++) {
        RfAuditRow row = rf_audit_findings_row(match, timings, i, explanations);
        g_array_append_val(results->audit, row);
    }
    warn_of_problems(results, path, timings, rf_audit_match_habit(match));
    rf_audit_person_describe(results, timings, match, medium);
    return true;
}
