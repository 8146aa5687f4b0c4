#include "tracker/frame_clock.h"

#include <math.h>

/* With gaps allowed, chance agreement must stay unlikely: a tick may be this part of the interval at most. */
#define COARSEST_TICK 0.15
#define LONGEST_PAUSE_S 3600.0
#define DEFAULT_INTERVAL_S 0.04

static double seconds(const RfFrameClock *clock, int64_t ticks)
{
    return ((double)ticks - (double)clock->first) * clock->tick_s.num / clock->tick_s.den;
}

static bool is_known(RfRatio ratio)
{
    return ratio.num > 0 && ratio.den > 0;
}

static double multiple(const RfFrameClock *clock, int64_t ticks)
{
    return round(seconds(clock, ticks) * clock->rate_hz.num / clock->rate_hz.den);
}

/* All timestamps within a tick of a multiple of the interval, no two at the same. */
static bool agrees(RfFrameClock *clock, const int64_t *ticks, size_t n)
{
    double tick_s = (double)clock->tick_s.num / clock->tick_s.den;
    double interval_s = (double)clock->rate_hz.den / clock->rate_hz.num;
    double before = -1;
    clock->gaps = 0;
    for (size_t i = 0; i < n; i++) {
        double k = multiple(clock, ticks[i]);
        if (fabs(seconds(clock, ticks[i]) - k * interval_s) > tick_s * (1 + 1e-6) || k <= before)
            return false;
        if (k > before + 1) clock->gaps++;
        before = k;
    }
    return clock->gaps == 0 || tick_s <= COARSEST_TICK * interval_s;
}

static double mean_interval_s(const RfFrameClock *clock, const int64_t *ticks, size_t n, const RfRatio *rates,
                              size_t n_rates)
{
    if (clock->is_snapped) return (double)clock->rate_hz.den / clock->rate_hz.num;
    if (n > 1 && ticks[n - 1] > ticks[0]) return seconds(clock, ticks[n - 1]) / (double)(n - 1);
    for (size_t r = 0; r < n_rates; r++) {
        if (is_known(rates[r])) return (double)rates[r].den / rates[r].num;
    }
    return DEFAULT_INTERVAL_S;
}

RfFrameClock rf_frame_clock_fit(const int64_t *ticks, size_t n, RfRatio tick_s, const RfRatio *rates,
                                size_t n_rates)
{
    RfFrameClock best = {.first = n > 0 ? ticks[0] : 0, .tick_s = tick_s};
    for (size_t r = 0; r < n_rates && n > 1; r++) {
        RfFrameClock trial = {.first = best.first, .tick_s = tick_s, .rate_hz = rates[r]};
        if (!is_known(rates[r]) || !agrees(&trial, ticks, n)) continue;
        if (best.is_snapped && trial.gaps >= best.gaps) continue;
        trial.is_snapped = true;
        trial.is_constant = trial.gaps == 0;
        best = trial;
    }
    best.mean_interval_s = mean_interval_s(&best, ticks, n, rates, n_rates);
    return best;
}

double rf_frame_clock_time_s(const RfFrameClock *clock, int64_t ticks)
{
    if (!clock->is_snapped) return seconds(clock, ticks);
    return multiple(clock, ticks) * clock->rate_hz.den / clock->rate_hz.num;
}

RfFrameTimer rf_frame_timer_new(const RfFrameClock *clock, double start_s)
{
    return (RfFrameTimer){.clock = *clock, .shift_s = start_s, .last_s = start_s, .anchor_s = start_s};
}

static double start(RfFrameTimer *timer, bool has_ticks, int64_t ticks)
{
    timer->is_started = true;
    if (has_ticks) timer->clock.first = ticks;
    if (!has_ticks) timer->missing++;
    return timer->last_s;
}

static double after_anchor(RfFrameTimer *timer)
{
    timer->since_anchor++;
    return timer->anchor_s + (double)timer->since_anchor * timer->clock.mean_interval_s;
}

double rf_frame_timer_next(RfFrameTimer *timer, bool has_ticks, int64_t ticks)
{
    if (!timer->is_started) return start(timer, has_ticks, ticks);
    if (!has_ticks) {
        timer->missing++;
        return timer->last_s = after_anchor(timer);
    }
    double time_s = rf_frame_clock_time_s(&timer->clock, ticks) + timer->shift_s;
    if (time_s <= timer->last_s || time_s - timer->last_s > LONGEST_PAUSE_S) {
        timer->backwards++;
        double repaired_s = timer->last_s + timer->clock.mean_interval_s;
        timer->shift_s += repaired_s - time_s;
        time_s = repaired_s;
    }
    timer->anchor_s = time_s;
    timer->since_anchor = 0;
    return timer->last_s = time_s;
}
