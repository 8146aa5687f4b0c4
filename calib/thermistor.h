/* Temperature of an NTC thermistor from its resistance. Not for its self-heating or its leads.
 *   Steinhart-Hart   1/T = A + B ln R + C (ln R)^3, R in ohm      (Steinhart and Hart, Deep-Sea Research 15 (1968) 497)
 *   four terms       1/T = a + b l + c l^2 + d l^3, l = ln(R/R25)  (makers' form, fits -40..125 degC)
 *   table            1/T against ln R, monotone cubic between the points (Steffen 1990); never beyond its ends
 * Pure; safe from any thread. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

#include "calib/units.h"

typedef enum {
    RF_THERMISTOR_STEINHART_HART,
    RF_THERMISTOR_FOUR_TERM,
    RF_THERMISTOR_TABLE,
} RfThermistorLaw;

typedef struct {
    RfThermistorLaw law;
    double coefficient_per_kelvin[4]; /* A, B, C or a, b, c, d */
    double reference_ohm;             /* R25 of the four-term form, > 0 */
    double u_law_kelvin;              /* how far the law itself may be off, one standard uncertainty, >= 0 */
    size_t n;                         /* of the table, >= 2; the one form that needs these */
    const double *resistance_ohm;     /* (borrowed) > 0, any order, no two alike */
    const double *temperature_kelvin; /* (borrowed) > 0, falling as the resistance rises */
} RfThermistor;

#define RF_THERMISTOR_ERROR (rf_thermistor_error_quark())
GQuark rf_thermistor_error_quark(void);

typedef enum {
    RF_THERMISTOR_ERROR_RANGE, /* resistance outside what the law can tell: below 100 K, above 600 K, beyond the table */
    RF_THERMISTOR_ERROR_TABLE, /* too short, or not falling */
} RfThermistorError;

/* Sigma: the resistance's through the slope, and the law's own, added in squares. */
bool rf_thermistor_kelvin(const RfThermistor *thermistor, RfValue resistance_ohm, RfValue *kelvin,
                          GError **error);
