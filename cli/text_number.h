/* Numbers as people and spreadsheets read them, the same in every locale. Fixed digits for tables; concise notation
 * (JCGM 100, 7.2.2) for reports: the uncertainty to two digits, the value to the same place. */
#pragma once

#include <glib.h>

#include "calib/units.h"

/* value rounded to `decimals` (0 to 9), half away from zero; never "-0.00". Nothing at all for a value that is not finite. */
void rf_text_number_append_fixed(GString *out, double value, int decimals);
/* The number that is read back from what rf_text_number_append_fixed wrote. */
double rf_text_number_settle(double value, int decimals);
/* d.dddE-dd with `decimals` (0 to 15) behind the point. Nothing for a value that is not finite. */
void rf_text_number_append_exponent(GString *out, double value, int decimals);
/* 6.000(10), 12300(1200), 0(15); with sigma 0 up to six digits and no brackets. (returns new) */
char *rf_text_number_concise(RfValue value);
/* The same times a power of ten chosen by the caller: exponent -19 writes 1.602e-19 as "1.602(31)". (returns new) */
char *rf_text_number_concise_scaled(RfValue value, int exponent);
