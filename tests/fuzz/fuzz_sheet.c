/* Run sheets. What is accepted is finite and in its range, and goes into the conditions of a charge. */
#include <math.h>
#include <stdlib.h>

#include "cli/conditions.h"
#include "cli/settings.h"
#include "tests/fuzz/target.h"

static void check(const RfSettings *settings)
{
    const RfValue *values[] = {&settings->spacing_m,          &settings->plate_gap_m, &settings->gravity_m_s2,
                               &settings->density_kg_m3,      &settings->pressure_pa, &settings->humidity,
                               &settings->temperature_kelvin, &settings->plane_ratio};
    for (size_t i = 0; i < G_N_ELEMENTS(values); i++)
        if (!isfinite(values[i]->value) || !isfinite(values[i]->sigma) || values[i]->sigma < 0) abort();
    if (settings->videos->len == 0 || settings->plate_gap_m.value <= 0) abort();
    const RfChargeInputs inputs = rf_conditions_of(settings, 0.001);
    const RfMedium medium = rf_charge_budget_medium(&inputs);
    if (!isfinite(medium.viscosity_pa_s) || !(medium.viscosity_pa_s > 0)) abort();
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    g_autofree char *path = g_build_filename(rf_target_folder(), "sheet.ini", NULL);
    GError *error = NULL;
    g_autoptr(RfSettings) settings = rf_settings_parse((const char *)bytes, size, path, &error);
    if (settings != NULL)
        check(settings);
    else
        rf_target_check_words(error);
    return 0;
}
