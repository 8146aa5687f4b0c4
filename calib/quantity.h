/* A measured quantity as people write it, in the concise notation of the GUM (JCGM 100:2008, 7.2.2): `6.000(10) mm`
 * is 6.000 mm with a standard uncertainty of 0.010 mm. Turned into SI and back into text for people.
 * Not for tables of plain numbers: table.h reads those.
 *
 * Units are UDUNITS-2's. Its unit system is loaded once per process, at the first call, and every use of it is behind
 * one lock, because its parser isn't thread-safe: every function here is safe from any thread. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"

typedef enum {
    RF_QUANTITY_ERROR_NUMBER,    /* not a number in this notation, or not finite */
    RF_QUANTITY_ERROR_UNIT,      /* missing, unknown, or not proportional (logarithmic, a date) */
    RF_QUANTITY_ERROR_DIMENSION, /* a unit, but of something else */
} RfQuantityError;

#define RF_QUANTITY_ERROR (rf_quantity_error_quark())
GQuark rf_quantity_error_quark(void);

/* Digits in parentheses count in units of the last digit shown, `1.602(98)e-19`; with a point of their own, `652.60(6.42)`,
 * they carry the unit of the value. Without parentheses sigma is 0: exact. Decimal points only; U+2212 serves as minus.
 *   si_unit   unit of the answer, "m", "K", "kg m-3", "1" ...; a value of dimension "1" may go without a unit
 * Value and offset are converted (degC -> K adds 273.15), sigma by the scale alone. On failure `out` is untouched and
 * the text says what was seen and what would do. */
bool rf_quantity_parse(const char *text, const char *si_unit, RfValue *out, GError **error);

/* The same for a plain number without any unit. */
bool rf_quantity_parse_number(const char *text, RfValue *out, GError **error);

/* How to turn numbers in `unit` into `si_unit`: si = offset + scale * number. */
bool rf_quantity_conversion(const char *unit, const char *si_unit, double *scale, double *offset,
                            GError **error);

/* "6.000(10) mm": sigma with two digits, the value cut to match, exponent form when that is shorter; sigma 0 gives the
 * shortest number that reads back the same. `unit` may be NULL or "". (returns new) */
char *rf_quantity_format(RfValue value, const char *unit);
