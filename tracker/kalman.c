#include "tracker/kalman.h"

#include <math.h>

void rf_kalman_predict(RfKalman *k, double dt_s, double field_s, const RfKalmanNoise *noise)
{
    double t = dt_s, f = field_s, elapsed_s = fabs(dt_s);
    k->position_px += k->velocity_px_s * t + k->response_px_s * f;

    double pv = k->pv + t * k->vv + f * k->vr;
    double pr = k->pr + t * k->vr + f * k->rr;
    k->pp += t * (k->pv + pv) + f * (k->pr + pr);
    k->pv = pv;
    k->pr = pr;

    /* velocity and response are random walks in continuous time: P. S. Maybeck, Stochastic Models 1
     * (1979), 4.8 */
    double w = noise->wander_px2_s3, r = noise->response_px2_s3 * fabs(f) / fmax(elapsed_s, 1e-9);
    k->pp += noise->spread_px2_s * elapsed_s + (w * t * t + r * f * f) * elapsed_s / 3;
    k->pv += w * t * elapsed_s / 2;
    k->pr += r * f * elapsed_s / 2;
    k->vv += w * elapsed_s;
    k->rr += r * elapsed_s;
}

void rf_kalman_loosen(RfKalman *k, double velocity_px2_s2, double response_px2_s2, double dt_s,
                      double field_s)
{
    /* a change at an instant uniform within the interval: mean of the squared remaining time is dt^2 / 3 */
    k->pp += (velocity_px2_s2 * dt_s * dt_s + response_px2_s2 * field_s * field_s) / 3;
    k->pv += velocity_px2_s2 * dt_s / 2;
    k->pr += response_px2_s2 * field_s / 2;
    k->vv += velocity_px2_s2;
    k->rr += response_px2_s2;
}

void rf_kalman_update(RfKalman *k, double measured_px, double variance_px2)
{
    double s = k->pp + variance_px2, residual_px = measured_px - k->position_px;
    double gain_p = k->pp / s, gain_v = k->pv / s, gain_r = k->pr / s;
    k->position_px += gain_p * residual_px;
    k->velocity_px_s += gain_v * residual_px;
    k->response_px_s += gain_r * residual_px;
    k->vv -= gain_v * k->pv;
    k->vr -= gain_v * k->pr;
    k->rr -= gain_r * k->pr;
    /* pp - gain pp, written so that it stays positive for any variance */
    k->pp = variance_px2 * gain_p;
    k->pv = variance_px2 * gain_v;
    k->pr = variance_px2 * gain_r;
}

/* Bierman's adjoint: a vector and a symmetric matrix that carry what later measurements say. */
typedef struct {
    double p, v, r;
    double pp, pv, pr, vv, vr, rr;
} Adjoint;

/* Through the measurement: l <- (1 - K H)' l - H' y / s,  L <- (1 - K H)' L (1 - K H) + H' H / s. Only the
 * first row and column change, since H picks the position. */
static void adjoin_measurement(Adjoint *a, const RfKalmanStep *step)
{
    const RfKalman *k = &step->predicted;
    double s = k->pp + step->variance_px2;
    double c = step->variance_px2 / s, gain_v = k->pv / s, gain_r = k->pr / s;
    double row_p = a->pp * c - a->pv * gain_v - a->pr * gain_r;
    double row_v = a->pv * c - a->vv * gain_v - a->vr * gain_r;
    double row_r = a->pr * c - a->vr * gain_v - a->rr * gain_r;
    a->p = c * a->p - gain_v * a->v - gain_r * a->r - (step->measured_px - k->position_px) / s;
    a->pp = c * row_p - gain_v * row_v - gain_r * row_r + 1 / s;
    a->pv = row_v;
    a->pr = row_r;
}

/* Back over the interval that led to a step: l <- F' l, L <- F' L F. */
static void adjoin_interval(Adjoint *a, double t, double f)
{
    a->v += t * a->p;
    a->r += f * a->p;
    double pv = a->pv + t * a->pp, pr = a->pr + f * a->pp;
    a->vv += t * (a->pv + pv);
    a->vr += t * pr + f * a->pv;
    a->rr += f * (a->pr + pr);
    a->pv = pv;
    a->pr = pr;
}

void rf_kalman_smooth(const RfKalmanStep *steps, size_t n, double *position_px, double *variance_px2)
{
    Adjoint a = {0};
    for (size_t i = n; i-- > 0;) {
        const RfKalman *k = &steps[i].predicted;
        if (steps[i].variance_px2 >= 0) adjoin_measurement(&a, &steps[i]);
        position_px[i] = k->position_px - (k->pp * a.p + k->pv * a.v + k->pr * a.r);
        double row_p = a.pp * k->pp + a.pv * k->pv + a.pr * k->pr;
        double row_v = a.pv * k->pp + a.vv * k->pv + a.vr * k->pr;
        double row_r = a.pr * k->pp + a.vr * k->pv + a.rr * k->pr;
        variance_px2[i] = fmax(0, k->pp - (k->pp * row_p + k->pv * row_v + k->pr * row_r));
        adjoin_interval(&a, steps[i].dt_s, steps[i].field_s);
    }
}
