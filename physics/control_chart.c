#include "physics/control_chart.h"

#include <gsl/gsl_cdf.h>
#include <math.h>

/* Of the range of two normal points: mean and spread over sigma. ISO 7870-2 prints d2 = 1.128 and D4 = 1 + 3 d3/d2 = 3.267. */
static double range_mean(void)
{
    return 2 / sqrt(M_PI);
}

static double range_spread(void)
{
    return sqrt(2 - 4 / M_PI);
}

bool rf_control_chart_limits(const double *values, size_t n, RfControlLimits *limits)
{
    if (n < RF_CONTROL_CHART_BASELINE) return false;
    double sum = 0, ranges = 0;
    for (size_t i = 0; i < n; i++) {
        sum += values[i];
        if (i) ranges += fabs(values[i] - values[i - 1]);
    }
    if (!(ranges > 0)) return false;
    const double centre = sum / (double)n, mean_range = ranges / (double)(n - 1),
                 sigma = mean_range / range_mean();
    *limits = (RfControlLimits){
        .n = n,
        .centre = centre,
        .sigma = sigma,
        .lower = centre - 3 * sigma,
        .upper = centre + 3 * sigma,
        .mean_range = mean_range,
        .range_upper = mean_range * (1 + 3 * range_spread() / range_mean()),
    };
    return true;
}

static int sign(double x)
{
    return (x > 0) - (x < 0);
}

typedef struct {
    int direction; /* -1, 0, 1 */
    unsigned length;
} Streak;

/* `start`: how many points stand in the streak when it begins. */
static void go_on(Streak *streak, int direction, unsigned start)
{
    streak->length =
        direction && direction == streak->direction ? streak->length + 1 : (direction ? start : 0);
    streak->direction = direction;
}

void rf_control_chart_signals(const RfControlLimits *limits, const double *values, size_t n,
                              unsigned *signals)
{
    Streak side = {0}, slope = {0};
    for (size_t i = 0; i < n; i++) {
        signals[i] = 0;
        if (values[i] < limits->lower || values[i] > limits->upper) signals[i] |= RF_CONTROL_BEYOND;
        go_on(&side, sign(values[i] - limits->centre), 1);
        if (side.length >= RF_CONTROL_CHART_RUN) signals[i] |= RF_CONTROL_RUN;
        if (i == 0) continue;
        go_on(&slope, sign(values[i] - values[i - 1]), 2); /* one step joins two points */
        if (slope.length >= RF_CONTROL_CHART_RUN) signals[i] |= RF_CONTROL_TREND;
        if (fabs(values[i] - values[i - 1]) > limits->range_upper) signals[i] |= RF_CONTROL_RANGE;
    }
}

/* A lasting shift over the last m points: their mean against the centre, both uncertain. */
static RfControlShift shift_of(const RfControlLimits *limits, size_t first, double sum, double m)
{
    const double size = sum / m, variance = 1 / m + (limits->n ? 1 / (double)limits->n : 0);
    const double u_size = limits->sigma * sqrt(variance);
    return (RfControlShift){first, first, first, size, u_size, size * size / (2 * u_size * u_size)};
}

RfControlShift rf_control_chart_shift(const RfControlLimits *limits, const double *values, size_t baseline,
                                      size_t signal)
{
    static const double WITHIN = 2; /* chi-squared of one degree of freedom: 4, about 95 % */
    const size_t begin = baseline <= signal ? baseline : 0;
    RfControlShift best = {.first = signal, .from = signal, .to = signal};
    double sum = 0;
    for (size_t i = signal + 1; i-- > begin;) {
        sum += values[i] - limits->centre;
        const RfControlShift shift = shift_of(limits, i, sum, (double)(signal + 1 - i));
        if (shift.log_likelihood > best.log_likelihood) best = shift;
    }
    sum = 0;
    for (size_t i = signal + 1; i-- > begin;) {
        sum += values[i] - limits->centre;
        if (shift_of(limits, i, sum, (double)(signal + 1 - i)).log_likelihood < best.log_likelihood - WITHIN)
            continue;
        best.from = i < best.from ? i : best.from;
        best.to = i > best.to ? i : best.to;
    }
    return best;
}

/* Points so far in a row: state s > 0 above, s < 0 below, always fewer than RUN. Expected further points from each state solve
 * L(s) = 1 + sum over what may come of p L(next); a chain upward only depends on what follows a turn, so two unknowns are left:
 * U = L(+1), D = L(-1). L(+s) = 1 + up L(s+1) + down D, with L(RUN) = 0. */
double rf_control_chart_run_length(double shift_sigmas, bool with_runs)
{
    const double above = gsl_cdf_ugaussian_Q(3 - shift_sigmas),
                 below = gsl_cdf_ugaussian_P(-3 - shift_sigmas);
    if (!with_runs) return 1 / (above + below);
    const double up = gsl_cdf_ugaussian_Q(-shift_sigmas) - above,
                 down = gsl_cdf_ugaussian_P(-shift_sigmas) - below;
    /* U = a + b D and D = c + d U, by going through the chain once. */
    double up_sum = 0, down_sum = 0, up_power = 1, down_power = 1;
    for (int i = 1; i < RF_CONTROL_CHART_RUN; i++, up_power *= up, down_power *= down) {
        up_sum += up_power;
        down_sum += down_power;
    }
    const double a = up_sum, b = down * up_sum, c = down_sum, d = up * down_sum;
    const double from_up = (a + b * c) / (1 - b * d), from_down = c + d * from_up;
    return 1 + up * from_up + down * from_down;
}
