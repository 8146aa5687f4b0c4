#include "cli/tally.h"

#include <math.h>

RfTally rf_tally_droplets(const RfResults *results)
{
    RfTally tally = {0};
    g_autoptr(GHashTable) seen = g_hash_table_new(NULL, NULL);
    g_autoptr(GHashTable) accepted = g_hash_table_new(NULL, NULL);
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        tally.spells++;
        g_hash_table_add(seen, GUINT_TO_POINTER(row->droplet));
        if (!row->accepted) continue;
        tally.spells_accepted++;
        g_hash_table_add(accepted, GUINT_TO_POINTER(row->droplet));
    }
    tally.droplets = g_hash_table_size(seen);
    tally.droplets_accepted = g_hash_table_size(accepted);
    return tally;
}

const RfBudgetRow *rf_tally_limiting_input(const RfResults *results)
{
    const RfBudgetRow *worst = NULL;
    for (guint i = 0; i < results->budget->len; i++) {
        const RfBudgetRow *row = &g_array_index(results->budget, RfBudgetRow, i);
        if (!worst || fabs(row->charge_relative_u) > fabs(worst->charge_relative_u)) worst = row;
    }
    return worst;
}

const char *rf_tally_field_to_string(RfFieldState field)
{
    switch (field) {
    case RF_FIELD_TOP_PLUS:
        return "top+";
    case RF_FIELD_TOP_MINUS:
        return "top-";
    case RF_FIELD_OFF:
        break;
    }
    return "off";
}

const char *rf_tally_recording_to_string(RfRecordingState state)
{
    static const char *const names[] = {"pooled", "silent", "empty", "failed"};
    return names[state];
}

unsigned rf_tally_recordings(const RfResults *results, RfRecordingState state)
{
    unsigned n = 0;
    for (guint i = 0; i < results->recordings->len; i++)
        n += g_array_index(results->recordings, RfRecordingRow, i).state == state;
    return n;
}
