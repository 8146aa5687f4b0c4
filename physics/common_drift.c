#include "physics/common_drift.h"

RfCommonDrift *rf_common_drift_new(void)
{
    RfCommonDrift *drift = g_new0(RfCommonDrift, 1);
    drift->time_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->fall_m_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->across_m_s = g_array_new(FALSE, TRUE, sizeof(double));
    drift->fall_p = drift->across_p = 1;
    return drift;
}

void rf_common_drift_free(RfCommonDrift *drift)
{
    if (!drift) return;
    g_array_unref(drift->time_s);
    g_array_unref(drift->fall_m_s);
    g_array_unref(drift->across_m_s);
    g_free(drift);
}

/* Integral of a piecewise linear velocity from the first knot; beyond the ends the velocity there goes on. */
static double displacement(const GArray *knots_s, const GArray *speeds_m_s, double time_s)
{
    const double *t = (const double *)(const void *)knots_s->data,
                 *v = (const double *)(const void *)speeds_m_s->data;
    unsigned n = knots_s->len;
    double sum = 0;
    if (n == 0) return 0;
    if (n == 1 || time_s <= t[0]) return v[0] * (time_s - t[0]);
    for (unsigned k = 0; k + 1 < n; k++) {
        double length = t[k + 1] - t[k], part = time_s < t[k + 1] ? time_s - t[k] : length;
        sum += part * (v[k] + 0.5 * (v[k + 1] - v[k]) * part / length);
        if (time_s < t[k + 1]) return sum;
    }
    return sum + v[n - 1] * (time_s - t[n - 1]);
}

double rf_common_drift_fall_m(const RfCommonDrift *drift, double time_s)
{
    return drift ? displacement(drift->time_s, drift->fall_m_s, time_s) : 0;
}

double rf_common_drift_across_m(const RfCommonDrift *drift, double time_s)
{
    return drift ? displacement(drift->time_s, drift->across_m_s, time_s) : 0;
}
