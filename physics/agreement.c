#include "physics/agreement.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_statistics_double.h>
#include <math.h>

#include "physics/physics_error.h"

double rf_agreement_en_number(RfValue measured, RfValue reference)
{
    const double difference = measured.value - reference.value;
    const double expanded = 2.0 * hypot(measured.sigma, reference.sigma);
    if (expanded > 0.0) return difference / expanded;
    return difference == 0.0 ? 0.0 : copysign(G_MAXDOUBLE, difference);
}

static RfInterval around(double centre, double half_width)
{
    return (RfInterval){centre - half_width, centre + half_width};
}

bool rf_agreement_limits(const double *differences, size_t n, double coverage, double confidence,
                         RfAgreement *agreement, GError **error)
{
    if (n < 2) {
        g_set_error(error, RF_PHYSICS_ERROR, RF_PHYSICS_ERROR_TOO_FEW,
                    "%zu difference(s); need at least 2 for limits of agreement", n);
        return false;
    }
    const double bias = gsl_stats_mean(differences, 1, n);
    const double s = gsl_stats_sd_m(differences, 1, n, bias);
    const double t = gsl_cdf_tdist_Pinv(0.5 + 0.5 * confidence, (double)n - 1.0);
    const double u_bias = s / sqrt((double)n), u_limit = s * sqrt(3.0 / (double)n);
    const double lower = bias - coverage * s, upper = bias + coverage * s;
    *agreement = (RfAgreement){.n = n,
                               .bias = bias,
                               .standard_deviation = s,
                               .u_bias = u_bias,
                               .u_limit = u_limit,
                               .lower = lower,
                               .upper = upper,
                               .bias_interval = around(bias, t * u_bias),
                               .lower_interval = around(lower, t * u_limit),
                               .upper_interval = around(upper, t * u_limit)};
    return true;
}
