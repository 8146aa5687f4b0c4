/* From timestamps in ticks to seconds. Where a camera ran at a constant rate and the container's ticks are coarser than
 * its rate (Matroska: 1 ms), the rate knows the time better than the ticks do: a frame is then at k/rate, exactly, k
 * whole, if every timestamp of the file agrees to within one tick. Otherwise the timestamps stand. Pure. */
#pragma once

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef struct {
    int num, den; /* den == 0: unknown */
} RfRatio;

typedef struct {
    int64_t first; /* ticks of the first frame, which is at 0 s */
    RfRatio tick_s;
    RfRatio rate_hz;        /* if is_snapped */
    bool is_snapped;        /* every frame at a multiple of 1/rate */
    bool is_constant;       /* and none left out */
    int64_t gaps;           /* places where frames are left out, if is_snapped */
    double mean_interval_s; /* > 0 */
} RfFrameClock;

/* ticks: n, ascending. rates: what the container says, the likeliest first; also the interval where n < 2. */
RfFrameClock rf_frame_clock_fit(const int64_t *ticks, size_t n, RfRatio tick_s, const RfRatio *rates,
                                size_t n_rates);

double rf_frame_clock_time_s(const RfFrameClock *clock, int64_t ticks);

/* The same for frames that arrive one after the other with timestamps that may be absent, go back, or leap ahead by more
 * than an hour: such a frame is placed one mean interval after the one before it, and what follows continues there. */
typedef struct {
    RfFrameClock clock;
    bool is_started;
    double shift_s;  /* added to what the clock says */
    double last_s;   /* the frame before */
    double anchor_s; /* the last frame with a timestamp, and how many came without one since */
    int64_t since_anchor;
    int64_t missing, backwards;
} RfFrameTimer;

/* The first frame will be at start_s. */
RfFrameTimer rf_frame_timer_new(const RfFrameClock *clock, double start_s);
double rf_frame_timer_next(RfFrameTimer *timer, bool has_ticks, int64_t ticks);
