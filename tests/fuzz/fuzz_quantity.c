/* `6.000(10) mm` and what else may stand there. What is read comes back the same when it is written and read again. */
#include <math.h>
#include <stdlib.h>

#include "calib/quantity.h"
#include "tests/fuzz/target.h"

static void check_value(RfValue value)
{
    if (!isfinite(value.value) || !isfinite(value.sigma) || value.sigma < 0) abort();
    g_autofree char *text = rf_quantity_format(value, "m");
    RfValue again;
    GError *error = NULL;
    if (!rf_quantity_parse(text, "m", &again, &error)) abort();
    /* Sigma is shown with two digits, the value cut to match; more digits than a double has help nobody. */
    double tolerance = value.sigma > 0 ? 0.06 * value.sigma + 1e-15 * fabs(value.value) : 0;
    if (fabs(again.value - value.value) > tolerance) abort();
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    static const char *const units[] = {"m", "K", "kg m-3", "1", "V", "Pa s"};
    g_autofree char *text = g_strndup((const char *)bytes, size);
    RfValue value = {0, 0};
    GError *error = NULL;
    double scale, offset;
    for (size_t i = 0; i < G_N_ELEMENTS(units); i++) {
        if (rf_quantity_parse(text, units[i], &value, &error))
            check_value(value);
        else
            rf_target_check_words(g_steal_pointer(&error));
    }
    if (!rf_quantity_parse_number(text, &value, &error)) rf_target_check_words(g_steal_pointer(&error));
    if (!rf_quantity_conversion(text, "s", &scale, &offset, &error))
        rf_target_check_words(g_steal_pointer(&error));
    else if (!isfinite(scale) || !isfinite(offset))
        abort();
    return 0;
}
