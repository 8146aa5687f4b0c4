/* Cramer-Rao bounds for one droplet, for planning: what rf_droplet_fit can reach at best. */
#include <math.h>

#include "physics/drag.h"
#include "physics/droplet_fit.h"

/* Information on ln D in one axis of a long path whose noise is unknown: Whittle's integral over the spectrum of the
 * increments, S(w) = 2 D dt + 2 s^2 (1 - cos w), the noise's share taken out (Schur complement). */
static double diffusion_information(double spread_m2, double noise_m2, double increments)
{
    enum { POINTS = 512 };
    double dd = 0, dn = 0, nn = 0;
    for (int i = 0; i < POINTS; i++) {
        double w = M_PI * (i + 0.5) / POINTS, wave = 2 * (1 - cos(w));
        double spectrum = spread_m2 + noise_m2 * wave;
        double by_spread = spread_m2 / spectrum, by_noise = wave * spread_m2 / spectrum;
        dd += by_spread * by_spread;
        dn += by_spread * by_noise;
        nn += by_noise * by_noise;
    }
    return increments / 2 * (dd - dn * dn / nn) / POINTS;
}

/* Variance of a speed watched for a time: Brownian wander, plus a straight line through white noise. */
static double speed_variance(double diffusion_m2_s, double noise_m2, double frame_s, double time_s)
{
    if (!(time_s > 0)) return HUGE_VAL;
    return 2 * diffusion_m2_s / time_s + 12 * noise_m2 * frame_s / (time_s * time_s * time_s);
}

void rf_droplet_fit_attainable(const RfObservationPlan *plan, const RfMedium *medium,
                               RfAttainable *attainable)
{
    double a = plan->radius_m, q = plan->charge_coulomb, field = plan->voltage_v / medium->plate_gap_m;
    double k = rf_drag_coefficient_kg_s(medium, a), k_slope = rf_drag_coefficient_slope_kg_s_m(medium, a) * a;
    double fall = rf_drag_settling_speed_m_s(medium, a),
           fall_slope = rf_drag_settling_slope_per_s(medium, a) * a;
    double diffusion = rf_drag_diffusion_m2_s(medium, a), frame_s = 1 / plan->frame_rate_hz;
    double noise = plan->u_position_m * plan->u_position_m;
    double watched_s = plan->off_s + plan->on_s;
    double off = fall_slope * fall_slope / speed_variance(diffusion, noise, frame_s, plan->off_s);
    double spread = 2 * (k_slope / k) * (k_slope / k) *
                    diffusion_information(2 * diffusion * frame_s, noise, watched_s * plan->frame_rate_hz);
    double on = speed_variance(diffusion, noise, frame_s, plan->on_s) * (k / field) * (k / field);
    /* q = (v_on - v_g(a)) k(a) d/V at given v_on: its slope against ln a. */
    double slope = q * k_slope / k - fall_slope * k / field;
    attainable->fall_m_s = fall;
    attainable->on_speed_m_s = fall + q * field / k;
    attainable->u_radius_joint_m = a / sqrt(off + spread);
    attainable->u_radius_speeds_m = a / sqrt(off);
    attainable->u_charge_joint_coulomb = sqrt(on + slope * slope / (off + spread));
    attainable->u_charge_speeds_coulomb = sqrt(on + slope * slope / off);
}
