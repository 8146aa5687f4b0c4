#include "physics/velocity_charge.h"

#include <gsl/gsl_fit.h>
#include <math.h>

#include "physics/drag.h"
#include "physics/physics_error.h"

static bool check_input(const RfFallAtVoltage *falls, size_t n, GError **error)
{
    if (n == 0) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_TOO_FEW, "no velocities; need at least one");
        return false;
    }
    for (size_t i = 0; i < n; i++) {
        const double sigma = falls[i].fall_m_s.sigma;
        if (isfinite(falls[i].fall_m_s.value) && isfinite(falls[i].voltage_V) && isfinite(sigma) &&
            sigma > 0.0)
            continue;
        g_set_error(
            error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_RANGE,
            "velocity %zu is %.6g m/s with sigma %.6g m/s at %.6g V; need finite values and a positive sigma",
            i + 1, falls[i].fall_m_s.value, sigma, falls[i].voltage_V);
        return false;
    }
    return true;
}

static bool has_one_voltage(const RfFallAtVoltage *falls, size_t n)
{
    for (size_t i = 1; i < n; i++)
        if (falls[i].voltage_V != falls[0].voltage_V) return false;
    return true;
}

static void average(const RfFallAtVoltage *falls, size_t n, RfVelocityCharge *result)
{
    double weights = 0.0, sum = 0.0;
    for (size_t i = 0; i < n; i++) {
        const double weight = 1.0 / (falls[i].fall_m_s.sigma * falls[i].fall_m_s.sigma);
        weights += weight;
        sum += weight * falls[i].fall_m_s.value;
    }
    result->settling_m_s = (RfValue){sum / weights, 1.0 / sqrt(weights)};
    for (size_t i = 0; i < n; i++) {
        const double off = (falls[i].fall_m_s.value - result->settling_m_s.value) / falls[i].fall_m_s.sigma;
        result->chi_squared += off * off;
    }
    result->degrees_of_freedom = (unsigned)n - 1;
}

static void fit_line(const RfFallAtVoltage *falls, size_t n, RfVelocityCharge *result)
{
    g_autofree double *columns = g_new(double, 3 * n);
    double *voltage = columns, *weight = columns + n, *fall = columns + 2 * n;
    for (size_t i = 0; i < n; i++) {
        voltage[i] = falls[i].voltage_V;
        weight[i] = 1.0 / (falls[i].fall_m_s.sigma * falls[i].fall_m_s.sigma);
        fall[i] = falls[i].fall_m_s.value;
    }
    double intercept = 0.0, slope = 0.0, var_intercept = 0.0, covariance = 0.0, var_slope = 0.0;
    gsl_fit_wlinear(voltage, 1, weight, 1, fall, 1, n, &intercept, &slope, &var_intercept, &covariance,
                    &var_slope, &result->chi_squared);
    result->settling_m_s = (RfValue){intercept, sqrt(var_intercept)};
    result->slope_m_s_V = (RfValue){slope, sqrt(var_slope)};
    result->covariance = covariance;
    result->degrees_of_freedom = (unsigned)n - 2;
}

/* a from v_g alone; q = k(a) d slope, so dq = k d dslope + (dk/da)(da/dv) d slope dv. */
static void propagate(const RfMedium *medium, RfVelocityCharge *result)
{
    const double radius_m = rf_drag_radius_m(medium, result->settling_m_s.value);
    const double da_dv = 1.0 / rf_drag_settling_slope_per_s(medium, radius_m);
    result->radius_m = (RfValue){radius_m, da_dv * result->settling_m_s.sigma};
    if (result->outcome != RF_VELOCITY_CHARGE_DONE) return;

    const double k_d = rf_drag_coefficient_kg_s(medium, radius_m) * medium->plate_gap_m;
    const double dq_dv = rf_drag_coefficient_slope_kg_s_m(medium, radius_m) * da_dv * medium->plate_gap_m *
                         result->slope_m_s_V.value;
    const double var_v = result->settling_m_s.sigma * result->settling_m_s.sigma;
    const double var_slope = result->slope_m_s_V.sigma * result->slope_m_s_V.sigma;
    const double variance =
        k_d * k_d * var_slope + dq_dv * dq_dv * var_v + 2.0 * k_d * dq_dv * result->covariance;
    result->charge_coulomb = (RfValue){k_d * result->slope_m_s_V.value, sqrt(fmax(variance, 0.0))};
    result->radius_charge_covariance = da_dv * (dq_dv * var_v + k_d * result->covariance);
}

bool rf_velocity_charge_find(const RfMedium *medium, const RfFallAtVoltage *falls, size_t n,
                             RfVelocityCharge *result, GError **error)
{
    if (!check_input(falls, n, error)) return false;
    *result = (RfVelocityCharge){.outcome = RF_VELOCITY_CHARGE_DONE};
    if (has_one_voltage(falls, n)) {
        average(falls, n, result);
        result->outcome =
            falls[0].voltage_V == 0.0 ? RF_VELOCITY_CHARGE_NO_FIELD : RF_VELOCITY_CHARGE_UNRESOLVED;
    } else {
        fit_line(falls, n, result);
    }
    if (result->outcome == RF_VELOCITY_CHARGE_UNRESOLVED) return true;
    if (result->settling_m_s.value <= 0.0) {
        result->outcome = RF_VELOCITY_CHARGE_NO_FALL;
        return true;
    }
    propagate(medium, result);
    return true;
}
