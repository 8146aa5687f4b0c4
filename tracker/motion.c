#include "tracker/motion.h"

#include <math.h>

static const double log_two_pi = 1.8378770664093453;

void rf_motion_start(RfMotion *m, const RfMotionModel *model, const RfSight *sight, double prior_factor)
{
    *m = (RfMotion){0};
    for (int i = 0; i < 2; i++) {
        double v = prior_factor * model->velocity_sd_px_s[i], r = prior_factor * model->response_sd_px_s[i];
        m->axis[i] = (RfKalman){
            .position_px = sight->at_px[i], .pp = sight->variance_px2[i], .vv = v * v, .rr = r * r};
    }
}

void rf_motion_predict(RfMotion *m, const RfMotionModel *model, double dt_s, double field_s)
{
    rf_kalman_predict(&m->axis[0], dt_s, field_s, &model->noise);
    rf_kalman_predict(&m->axis[1], dt_s, field_s, &model->noise);
    m->unseen_s += dt_s;
    m->unseen_field_s += field_s;
}

/* A reversal takes a velocity from one tail of its distribution to the other, and charges make those tails long. */
static const double reversal_factor = 2.5;

/* Variances that a change adds: to the response where the field is known to be on, else to the velocity. What is known of
 * the field was read from motion too: a switch that went unnoticed must not end every path. */
static void change_variances(const RfMotion *m, const RfMotionModel *model, int axis, double *velocity_px2_s2,
                             double *response_px2_s2)
{
    double v = reversal_factor * model->velocity_sd_px_s[axis], r = model->response_sd_px_s[axis];
    bool is_field_on = r > 0 && fabs(m->unseen_field_s) > fabs(m->unseen_s) / 2;
    *velocity_px2_s2 = is_field_on ? 0 : v * v;
    *response_px2_s2 = is_field_on ? r * r : 0;
}

static double loosened_variance(const RfMotion *m, const RfMotionModel *model, int axis)
{
    double v, r;
    change_variances(m, model, axis, &v, &r);
    return m->axis[axis].pp + (v * m->unseen_s * m->unseen_s + r * m->unseen_field_s * m->unseen_field_s) / 3;
}

/* -log of the normal density; as_changed: with the variances that a change adds. */
static double surprise_of(const RfMotion *m, const RfMotionModel *model, const RfSight *sight,
                          bool as_changed, double *d2)
{
    double determinant = 1;
    *d2 = 0;
    for (int i = 0; i < 2; i++) {
        double residual_px = sight->at_px[i] - m->axis[i].position_px;
        double s = (as_changed ? loosened_variance(m, model, i) : m->axis[i].pp) + sight->variance_px2[i];
        *d2 += residual_px * residual_px / s;
        determinant *= s;
    }
    return log_two_pi + (*d2 + log(determinant)) / 2;
}

double rf_motion_surprise(const RfMotion *m, const RfMotionModel *model, const RfSight *sight,
                          bool *is_changed)
{
    double d2, plain = surprise_of(m, model, sight, false, &d2), changed = HUGE_VAL;
    if (d2 / 2 > model->change_cost) /* below, a wider density can't make up for its cost */
        changed = surprise_of(m, model, sight, true, &d2) + model->change_cost;
    if (is_changed) *is_changed = changed < plain;
    return fmin(plain, changed);
}

void rf_motion_reach(const RfMotion *m, const RfMotionModel *model, double limit, double reach_px[2])
{
    double plain[2], loose[2];
    for (int i = 0; i < 2; i++) {
        plain[i] = m->axis[i].pp;
        loose[i] = loosened_variance(m, model, i);
    }
    /* the spot's own variance widens the window and lowers the density: leaving it out of the logarithm is safe */
    double d2_plain = fmax(0, 2 * (limit - log_two_pi) - log(plain[0] * plain[1]));
    double d2_loose = fmax(0, 2 * (limit - log_two_pi - model->change_cost) - log(loose[0] * loose[1]));
    for (int i = 0; i < 2; i++)
        reach_px[i] = fmax(sqrt(d2_plain * (plain[i] + 0.25)), sqrt(d2_loose * (loose[i] + 0.25)));
}

void rf_motion_loosen(RfMotion *m, const RfMotionModel *model)
{
    for (int i = 0; i < 2; i++) {
        double v, r;
        change_variances(m, model, i, &v, &r);
        rf_kalman_loosen(&m->axis[i], v, r, m->unseen_s, m->unseen_field_s);
    }
}

void rf_motion_update(RfMotion *m, const RfSight *sight)
{
    rf_kalman_update(&m->axis[0], sight->at_px[0], sight->variance_px2[0]);
    rf_kalman_update(&m->axis[1], sight->at_px[1], sight->variance_px2[1]);
    m->unseen_s = m->unseen_field_s = 0;
}

/* log of the normal density with covariance s (lower triangle by rows: pp, pv, vv, pr, vr, rr) in n <= 3 dimensions. */
static double log_normal(const double d[3], const double s[6], int n)
{
    double l[6], z[3], sum = 0;
    for (int i = 0, at = 0; i < n; i++) {
        double residual = d[i];
        for (int j = 0; j <= i; j++, at++) {
            double value = s[at];
            for (int k = 0; k < j; k++) value -= l[i * (i + 1) / 2 + k] * l[j * (j + 1) / 2 + k];
            l[at] = j == i ? sqrt(fmax(value, 1e-12)) : value / l[j * (j + 1) / 2 + j];
        }
        for (int k = 0; k < i; k++) residual -= l[i * (i + 1) / 2 + k] * z[k];
        z[i] = residual / l[at - 1];
        sum += z[i] * z[i] / 2 + log(l[at - 1]) + log_two_pi / 2;
    }
    return -sum;
}

static double axis_likeness(const RfKalman *a, const RfKalman *b, double velocity_sd, double response_sd)
{
    int n = response_sd > 0 ? 3 : 2;
    double d[3] = {b->position_px - a->position_px, b->velocity_px_s - a->velocity_px_s,
                   b->response_px_s - a->response_px_s};
    double s[6] = {a->pp + b->pp, a->pv + b->pv, a->vv + b->vv, a->pr + b->pr, a->vr + b->vr, a->rr + b->rr};
    /* any other droplet: place taken as known (its density is the caller's), velocity and response as droplets at large */
    double other_d[3] = {0, b->velocity_px_s, b->response_px_s};
    double wide = 1e4;
    double other_s[6] = {b->pp + wide, b->pv, b->vv + velocity_sd * velocity_sd,
                         b->pr,        b->vr, b->rr + response_sd * response_sd};
    return log_normal(d, s, n) - log_normal(other_d, other_s, n) - (log(wide + b->pp) + log_two_pi) / 2;
}

double rf_motion_likeness(const RfMotion *a, const RfMotion *b, const RfMotionModel *model, bool may_change)
{
    double same = 0, changed = -model->change_cost;
    RfMotion loose = *a;
    rf_motion_loosen(&loose, model);
    for (int i = 0; i < 2; i++) {
        double v = model->velocity_sd_px_s[i], r = model->response_sd_px_s[i];
        same += axis_likeness(&a->axis[i], &b->axis[i], v, r);
        changed += axis_likeness(&loose.axis[i], &b->axis[i], v, r);
    }
    return may_change ? fmax(same, changed) : same;
}
