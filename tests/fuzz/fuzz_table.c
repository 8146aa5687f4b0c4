/* Tables as people and spreadsheets write them, and stopwatch records, which are such tables. */
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "calib/table.h"
#include "cli/hand_timings.h"
#include "tests/fuzz/target.h"

static void look_at_cell(const RfTable *table, size_t row, size_t column)
{
    GError *error = NULL;
    double number = 0;
    guint64 whole;
    if (!g_utf8_validate(rf_table_text(table, row, column), -1, NULL)) abort();
    if (!rf_table_number(table, row, column, &number, &error))
        rf_target_check_words(g_steal_pointer(&error));
    else if (!isfinite(number))
        abort();
    if (!rf_table_whole(table, row, column, &whole, &error)) rf_target_check_words(g_steal_pointer(&error));
}

static void look_through(const RfTable *table)
{
    double scale;
    for (size_t row = 0; row < rf_table_rows(table); row++)
        for (size_t column = 0; column < rf_table_columns(table); column++) look_at_cell(table, row, column);
    for (size_t column = 0; column < rf_table_columns(table); column++)
        if (rf_table_find(table, rf_table_header(table, column)) > (int)column) abort();
    rf_table_find_quantity(table, "time", "s", &scale);
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    GError *error = NULL;
    g_autoptr(RfTable) table = rf_table_parse((const char *)bytes, size, "table.csv", &error);
    if (table != NULL)
        look_through(table);
    else
        rf_target_check_words(g_steal_pointer(&error));
    g_autoptr(RfHandTimings) timings = rf_hand_timings_parse((const char *)bytes, size, "table.csv", &error);
    if (timings == NULL) rf_target_check_words(error);
    for (guint i = 0; timings != NULL && i < timings->entries->len; i++) {
        const RfHandEntry *entry = &g_array_index(timings->entries, RfHandEntry, i);
        if (entry->problem == NULL && !(isfinite(entry->time_s) && entry->time_s > 0)) abort();
    }
    return 0;
}
