#include "physics/expectation.h"

#include <gsl/gsl_linalg.h>
#include <gsl/gsl_math.h>
#include <gsl/gsl_matrix.h>
#include <math.h>

#include "physics/drag.h"

static const double LONGEST_S = 1e6;

/* Fisher information of one stretch of N increments along one axis: on the velocity (its mean), and on D and w (its
 * covariance). */
typedef struct {
    double velocity, diffusion, noise, diffusion_noise;
} Information;

static Information information_of(double seconds, const RfObservation *watch, double diffusion_m2_s)
{
    const double dt = 1.0 / watch->frame_rate_hz;
    const int n = GSL_MAX_INT((int)lrint(seconds * watch->frame_rate_hz), 1);
    const double noise_m2 =
        watch->localisation_m * watch->localisation_m - 2.0 * watch->blur * diffusion_m2_s * dt;
    Information sum = {0, 0, 0, 0};
    for (int k = 1; k <= n; k++) {
        const double angle = k * M_PI / (n + 1.0);
        const double ripple = 2.0 * (1.0 - cos(angle));
        const double eigenvalue = 2.0 * diffusion_m2_s * dt + ripple * noise_m2;
        /* The mean of the increments is v dt times ones; ones project on the odd sine modes only, with the square
         * 2/(n+1) cot^2(angle/2). */
        if (k % 2 == 1) {
            const double cot = 1.0 / tan(0.5 * angle);
            sum.velocity += dt * dt * 2.0 / (n + 1.0) * cot * cot / eigenvalue;
        }
        const double by_diffusion = 2.0 * dt / eigenvalue, by_noise = ripple / eigenvalue;
        sum.diffusion += 0.5 * by_diffusion * by_diffusion;
        sum.noise += 0.5 * by_noise * by_noise;
        sum.diffusion_noise += 0.5 * by_diffusion * by_noise;
    }
    return sum;
}

/* Inverse of a symmetric positive definite 3 x 3: the bound on (radius, charge, w). Scaled first, as the units differ by
 * many decades. */
static void invert(double m[3][3])
{
    double unit[3];
    for (int i = 0; i < 3; i++) unit[i] = 1.0 / sqrt(m[i][i]);
    double scaled[9];
    for (int i = 0; i < 9; i++) scaled[i] = m[i / 3][i % 3] * unit[i / 3] * unit[i % 3];
    gsl_matrix_view view = gsl_matrix_view_array(scaled, 3, 3);
    gsl_linalg_cholesky_decomp1(&view.matrix);
    gsl_linalg_cholesky_invert(&view.matrix);
    for (int i = 0; i < 9; i++) m[i / 3][i % 3] = scaled[i] * unit[i / 3] * unit[i % 3];
}

/* How the velocities and D of a droplet answer to its radius and charge. */
typedef struct {
    double off_by_radius, on_by_radius, on_by_charge, diffusion_by_radius;
} Slopes;

static Slopes slopes_of(const RfMedium *medium, const RfObservation *watch, double radius_m,
                        double charge_coulomb)
{
    const double k = rf_drag_coefficient_kg_s(medium, radius_m);
    const double dk_da = rf_drag_coefficient_slope_kg_s_m(medium, radius_m);
    const double off_by_radius = rf_drag_settling_slope_per_s(medium, radius_m);
    const double on_by_charge = watch->voltage_V / (k * medium->plate_gap_m);
    return (Slopes){off_by_radius, off_by_radius - on_by_charge * charge_coulomb * dk_da / k, on_by_charge,
                    -rf_drag_diffusion_m2_s(medium, radius_m) * dk_da / k};
}

/* Information on (radius, charge, w); the drift across gravity stands apart. The spread is seen on both axes. */
static void joint_information(const Slopes *by, const Information *off, const Information *on,
                              bool with_spread, double m[3][3])
{
    const double spread = 2.0 * (off->diffusion + on->diffusion);
    const double mixed = 2.0 * (off->diffusion_noise + on->diffusion_noise);
    m[0][0] = by->off_by_radius * by->off_by_radius * off->velocity +
              by->on_by_radius * by->on_by_radius * on->velocity;
    m[0][1] = m[1][0] = by->on_by_radius * by->on_by_charge * on->velocity;
    m[1][1] = by->on_by_charge * by->on_by_charge * on->velocity;
    m[2][2] = 2.0 * (off->noise + on->noise);
    m[0][2] = m[2][0] = m[1][2] = m[2][1] = 0.0;
    if (!with_spread) return;
    m[0][0] += by->diffusion_by_radius * by->diffusion_by_radius * spread;
    m[0][2] = m[2][0] = by->diffusion_by_radius * mixed;
}

static double crossing_s(double view_m, double speed_m_s)
{
    return fmin(LONGEST_S, view_m / fmax(fabs(speed_m_s), view_m / LONGEST_S));
}

RfExpectation rf_expectation_find(const RfMedium *medium, const RfObservation *watch, double radius_m,
                                  double charge_coulomb)
{
    const double diffusion = rf_drag_diffusion_m2_s(medium, radius_m);
    const Information off = information_of(watch->off_s, watch, diffusion);
    const Information on = information_of(watch->on_s, watch, diffusion);
    const Slopes by = slopes_of(medium, watch, radius_m, charge_coulomb);
    double fall[3][3], joint[3][3];
    joint_information(&by, &off, &on, false, fall);
    joint_information(&by, &off, &on, true, joint);
    invert(fall);
    invert(joint);

    const double v_off = rf_drag_settling_speed_m_s(medium, radius_m);
    const double v_on = v_off + by.on_by_charge * charge_coulomb;
    return (RfExpectation){
        .fall_off_m_s = v_off,
        .fall_on_m_s = v_on,
        .diffusion_m2_s = diffusion,
        .in_view_off_s = crossing_s(watch->view_m, v_off),
        .in_view_on_s = crossing_s(watch->view_m, v_on),
        .u_fall_off_m_s = 1.0 / sqrt(off.velocity),
        .u_charge_fall_coulomb = sqrt(fall[1][1]),
        .u_charge_joint_coulomb = sqrt(joint[1][1]),
        .u_radius_fall_m = sqrt(fall[0][0]),
        .u_radius_joint_m = sqrt(joint[0][0]),
        .spread_share = 1.0 - joint[0][0] / fall[0][0],
    };
}

double rf_expectation_balance_voltage_V(const RfMedium *medium, double radius_m, double charge_coulomb)
{
    const double weight_n = 4.0 / 3.0 * M_PI * gsl_pow_3(radius_m) * rf_drag_net_weight_n_m3(medium);
    return -weight_n * medium->plate_gap_m / charge_coulomb;
}
