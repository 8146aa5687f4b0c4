/* A supply's log. */
#include <math.h>
#include <stdlib.h>

#include "calib/voltage_log.h"
#include "tests/fuzz/target.h"

static void check(const RfVoltageLog *log)
{
    if (log->spells->len == 0 || log->switches->len + 1 != log->spells->len) abort();
    for (guint i = 0; i < log->spells->len; i++) {
        const RfLogSpell *spell = &g_array_index(log->spells, RfLogSpell, i);
        if (!isfinite(spell->voltage_V.value) || !isfinite(spell->voltage_V.sigma)) abort();
        if (!isfinite(spell->ripple_V) || spell->end_s < spell->start_s) abort();
    }
    for (guint i = 0; i < log->switches->len; i++) {
        const RfLogSwitch *change = &g_array_index(log->switches, RfLogSwitch, i);
        if (!isfinite(change->time_s.value) || !isfinite(change->time_s.sigma)) abort();
    }
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    g_autofree char *path = rf_target_file("volts.csv", bytes, size);
    GError *error = NULL;
    g_autoptr(RfVoltageLog) log = rf_voltage_log_read(path, &error);
    if (log != NULL)
        check(log);
    else
        rf_target_check_words(error);
    return 0;
}
