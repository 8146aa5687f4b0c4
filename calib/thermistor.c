#include "calib/thermistor.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_interp.h>
#include <math.h>
#include <stdlib.h>

GQuark rf_thermistor_error_quark(void)
{
    return g_quark_from_static_string("rf-thermistor-error-quark");
}

typedef struct {
    double log_ohm, per_kelvin;
} Point;

/* 1/T and its slope in ln R. */
typedef struct {
    double per_kelvin, slope;
} Inverse;

static Inverse power_series(const double c[4], double l)
{
    return (Inverse){c[0] + l * (c[1] + l * (c[2] + l * c[3])), c[1] + l * (2.0 * c[2] + l * 3.0 * c[3])};
}

static int by_resistance(const void *a, const void *b)
{
    double x = ((const Point *)a)->log_ohm, y = ((const Point *)b)->log_ohm;
    return (x > y) - (x < y);
}

static bool sort_table(const RfThermistor *t, Point *points, GError **error)
{
    for (size_t i = 0; i < t->n; i++) {
        if (!(t->resistance_ohm[i] > 0.0) || !(t->temperature_kelvin[i] > 0.0)) {
            g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_TABLE,
                        "thermistor table: seen %g ohm at %g K; both need to be above zero",
                        t->resistance_ohm[i], t->temperature_kelvin[i]);
            return false;
        }
        points[i] = (Point){log(t->resistance_ohm[i]), 1.0 / t->temperature_kelvin[i]};
    }
    qsort(points, t->n, sizeof *points, by_resistance);
    for (size_t i = 1; i < t->n; i++)
        if (!(points[i].log_ohm > points[i - 1].log_ohm) ||
            !(points[i].per_kelvin > points[i - 1].per_kelvin)) {
            g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_TABLE,
                        "thermistor table: the temperature doesn't fall from %.6g ohm to %.6g ohm; it has to "
                        "for an NTC",
                        exp(points[i - 1].log_ohm), exp(points[i].log_ohm));
            return false;
        }
    return true;
}

static bool interpolate(const Point *points, size_t n, double l, Inverse *out)
{
    g_autofree double *x = g_new(double, n), *y = g_new(double, n);
    for (size_t i = 0; i < n; i++) {
        x[i] = points[i].log_ohm;
        y[i] = points[i].per_kelvin;
    }
    gsl_interp *curve = gsl_interp_alloc(n >= 3 ? gsl_interp_steffen : gsl_interp_linear, n);
    bool is_done = curve && gsl_interp_init(curve, x, y, n) == GSL_SUCCESS &&
                   gsl_interp_eval_e(curve, x, y, l, NULL, &out->per_kelvin) == GSL_SUCCESS &&
                   gsl_interp_eval_deriv_e(curve, x, y, l, NULL, &out->slope) == GSL_SUCCESS;
    gsl_interp_free(curve);
    return is_done;
}

static bool look_up(const RfThermistor *t, double resistance_ohm, Inverse *out, GError **error)
{
    if (t->n < 2) {
        g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_TABLE,
                    "thermistor table: seen %zu rows; at least 2 are needed", t->n);
        return false;
    }
    g_autofree Point *points = g_new(Point, t->n);
    if (!sort_table(t, points, error)) return false;
    if (!interpolate(points, t->n, log(resistance_ohm), out)) {
        g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_RANGE,
                    "%g ohm lies beyond the thermistor's table, which runs from %.6g ohm to %.6g ohm",
                    resistance_ohm, exp(points[0].log_ohm), exp(points[t->n - 1].log_ohm));
        return false;
    }
    return true;
}

static bool inverse_temperature(const RfThermistor *t, double resistance_ohm, Inverse *out, GError **error)
{
    const double *c = t->coefficient_per_kelvin;
    switch (t->law) {
    case RF_THERMISTOR_STEINHART_HART:
        *out = power_series((double[4]){c[0], c[1], 0.0, c[2]}, log(resistance_ohm));
        return true;
    case RF_THERMISTOR_FOUR_TERM:
        *out = power_series(c, log(resistance_ohm / t->reference_ohm));
        return true;
    case RF_THERMISTOR_TABLE:
        return look_up(t, resistance_ohm, out, error);
    }
    return false;
}

bool rf_thermistor_kelvin(const RfThermistor *t, RfValue resistance_ohm, RfValue *kelvin, GError **error)
{
    Inverse inverse;
    if (!(resistance_ohm.value > 0.0) || !isfinite(resistance_ohm.value)) {
        g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_RANGE,
                    "seen a resistance of %g ohm; it needs to be above zero", resistance_ohm.value);
        return false;
    }
    if (!inverse_temperature(t, resistance_ohm.value, &inverse, error)) return false;
    double found_kelvin = 1.0 / inverse.per_kelvin;
    if (!(found_kelvin > 100.0 && found_kelvin < 600.0)) {
        g_set_error(error, RF_THERMISTOR_ERROR, RF_THERMISTOR_ERROR_RANGE,
                    "%g ohm and these coefficients give %.4g K; 100 K to 600 K is what a thermistor can tell",
                    resistance_ohm.value, found_kelvin);
        return false;
    }
    /* dT = -T^2 d(1/T), d ln R = dR/R */
    double u_kelvin =
        found_kelvin * found_kelvin * fabs(inverse.slope) * resistance_ohm.sigma / resistance_ohm.value;
    *kelvin = (RfValue){found_kelvin, hypot(u_kelvin, t->u_law_kelvin)};
    return true;
}
