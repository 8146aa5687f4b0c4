#include "calib/line_family.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

/* Wider than any line, so that what is left of a line after taking the local mean away is most of it. */
enum { background_radius_px = 12 };
static const int block_px = 4; /* along; the steepest line crosses one pixel in a block */
static const double least_period_px = 6.0;

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double quantile(double *values, size_t n, double q)
{
    qsort(values, n, sizeof *values, by_value);
    return n ? values[(size_t)(q * (double)(n - 1))] : 0.0;
}

/* Blocks along the lines, the running mean across taken away. */
static RfLinePlane flatten(const RfLinePlane *plane)
{
    RfLinePlane flat = {plane->along / block_px, plane->across, NULL};
    flat.v = g_new(float, (size_t)flat.along *(size_t)flat.across);
    g_autofree double *sums = g_new(double, (size_t)plane->across + 1);
    for (int b = 0; b < flat.along; b++) {
        float *row = flat.v + (size_t)b * (size_t)flat.across;
        sums[0] = 0.0;
        for (int c = 0; c < plane->across; c++) {
            double sum = 0.0;
            for (int k = 0; k < block_px; k++)
                sum += (double)plane->v[(size_t)(b * block_px + k) * (size_t)plane->across + (size_t)c];
            row[c] = (float)(sum / block_px);
            sums[c + 1] = sums[c] + (double)row[c];
        }
        for (int c = 0; c < plane->across; c++) {
            int from = MAX(0, c - background_radius_px),
                to = MIN(plane->across, c + background_radius_px + 1);
            row[c] -= (float)((sums[to] - sums[from]) / (to - from));
        }
    }
    return flat;
}

/* Droplets and specks count for no more than a line does. */
static void clip(RfLinePlane *flat)
{
    size_t n = (size_t)flat->along * (size_t)flat->across, step = MAX(1, n / 20000), m = 0;
    g_autofree double *sample = g_new(double, n / step + 1);
    for (size_t i = 0; i < n; i += step) sample[m++] = fabs((double)flat->v[i]);
    float most = (float)quantile(sample, m, 0.95);
    for (size_t i = 0; i < n; i++) flat->v[i] = CLAMP(flat->v[i], -most, most);
}

/* Mean along the slope for each place across; counts say how many blocks it has. */
typedef struct {
    int n;
    double *mean;
    int *count;
} Profile;

static void sum_along(const RfLinePlane *flat, double slope, Profile *profile)
{
    memset(profile->mean, 0, (size_t)profile->n * sizeof *profile->mean);
    memset(profile->count, 0, (size_t)profile->n * sizeof *profile->count);
    for (int b = 0; b < flat->along; b++) {
        const float *row = flat->v + (size_t)b * (size_t)flat->across;
        int shift = (int)lround(slope * block_px * (b - 0.5 * (flat->along - 1)));
        int from = MAX(0, shift), to = flat->across + MIN(0, shift);
        for (int c = from; c < to; c++) {
            profile->mean[c - shift] += (double)row[c];
            profile->count[c - shift]++;
        }
    }
    for (int c = 0; c < profile->n; c++)
        if (profile->count[c]) profile->mean[c] /= profile->count[c];
}

static bool is_counted(const RfLinePlane *flat, const Profile *profile, int c)
{
    return 4 * profile->count[c] >= flat->along;
}

/* Noise adds the same at every angle: count * mean^2 sums to it. */
static double energy(const RfLinePlane *flat, const Profile *profile)
{
    double sum = 0.0;
    for (int c = 0; c < profile->n; c++)
        if (is_counted(flat, profile, c)) sum += profile->count[c] * profile->mean[c] * profile->mean[c];
    return sum;
}

static double best_slope(const RfLinePlane *flat, Profile *profile, double from, double to, double step)
{
    double best = from, most = -1.0;
    int steps = (int)ceil((to - from) / step);
    for (int i = 0; i <= steps; i++) {
        double slope = from + i * step;
        sum_along(flat, slope, profile);
        double found = energy(flat, profile);
        if (found > most) {
            most = found;
            best = slope;
        }
    }
    return best;
}

typedef struct {
    double at_px, height;
} Peak;

/* Takes the running median away: a running mean has left a step on both sides of each line. */
static void level_profile(Profile *profile)
{
    g_autofree double *level = g_new(double, (size_t)profile->n);
    double window[2 * background_radius_px + 1];
    for (int c = 0; c < profile->n; c++) {
        int from = MAX(0, c - background_radius_px), to = MIN(profile->n, c + background_radius_px + 1);
        memcpy(window, profile->mean + from, (size_t)(to - from) * sizeof *window);
        level[c] = quantile(window, (size_t)(to - from), 0.5);
    }
    for (int c = 0; c < profile->n; c++) profile->mean[c] -= level[c];
}

/* Spread of the levelled profile between the lines, which are the smaller part. */
static double profile_noise(const RfLinePlane *flat, const Profile *profile)
{
    g_autofree double *values = g_new(double, (size_t)profile->n);
    size_t n = 0;
    for (int c = 0; c < profile->n; c++)
        if (is_counted(flat, profile, c)) values[n++] = fabs(profile->mean[c]);
    return 1.4826 * quantile(values, n, 0.5);
}

static double line_sign(const RfLinePlane *flat, const Profile *profile)
{
    double sum = 0.0;
    for (int c = 0; c < profile->n; c++)
        if (is_counted(flat, profile, c)) sum += pow(profile->mean[c], 3.0);
    return sum < 0.0 ? -1.0 : 1.0;
}

static bool is_peak(const double *p, int c, int n, double sign)
{
    for (int k = MAX(0, c - 2); k <= MIN(n - 1, c + 2); k++)
        if (sign * p[k] > sign * p[c] || (k < c && p[k] == p[c])) return false;
    return true;
}

static Peak refine_peak(const double *p, int c, double sign)
{
    double left = sign * p[c - 1], here = sign * p[c], right = sign * p[c + 1];
    double bend = left - 2.0 * here + right;
    return (Peak){c + (bend < 0.0 ? 0.5 * (left - right) / bend : 0.0), here};
}

static double third_highest(const GArray *peaks)
{
    g_autofree double *heights = g_new(double, peaks->len + 1);
    for (unsigned i = 0; i < peaks->len; i++) heights[i] = g_array_index(peaks, Peak, i).height;
    qsort(heights, peaks->len, sizeof *heights, by_value);
    return peaks->len >= 3 ? heights[peaks->len - 3] : 0.0;
}

static GArray *find_peaks(const RfLinePlane *flat, const Profile *profile, double sign)
{
    double noise = profile_noise(flat, profile);
    GArray *peaks = g_array_new(false, false, sizeof(Peak));
    for (int c = 1; c < profile->n - 1; c++) {
        if (!is_counted(flat, profile, c) || !is_peak(profile->mean, c, profile->n, sign)) continue;
        Peak peak = refine_peak(profile->mean, c, sign);
        if (peak.height > 5.0 * noise) g_array_append_val(peaks, peak);
    }
    /* two peaks may be something else than a line; the third is one, or lines are few */
    double least = 0.3 * third_highest(peaks);
    for (unsigned i = peaks->len; i-- > 0;)
        if (g_array_index(peaks, Peak, i).height < least) g_array_remove_index(peaks, i);
    return peaks;
}

typedef struct {
    double first_px, period_px;
    int lowest, highest;
    int score;
} Comb;

static double tolerance_px(double period_px)
{
    return MAX(1.5, 0.1 * period_px);
}

/* Straight line through the peaks that lie on whole multiples within `reach` of the pair it began with. */
static unsigned refit(const GArray *peaks, double centre_px, int reach, Comb *comb)
{
    double n = 0, sk = 0, ss = 0, skk = 0, sks = 0;
    comb->lowest = G_MAXINT;
    comb->highest = G_MININT;
    for (unsigned i = 0; i < peaks->len; i++) {
        double at = g_array_index(peaks, Peak, i).at_px;
        double k = round((at - comb->first_px) / comb->period_px);
        if (fabs(at - comb->first_px - k * comb->period_px) > tolerance_px(comb->period_px)) continue;
        if (fabs(at - centre_px) > reach * comb->period_px) continue;
        n += 1, sk += k, ss += at, skk += k * k, sks += k * at;
        comb->lowest = MIN(comb->lowest, (int)k);
        comb->highest = MAX(comb->highest, (int)k);
    }
    double spread = n * skk - sk * sk;
    if (spread > 0.0) {
        comb->period_px = (n * sks - sk * ss) / spread;
        comb->first_px = (ss - comb->period_px * sk) / n;
    }
    return (unsigned)n;
}

/* Peaks on the comb count for it; peaks beside it and empty teeth between, against it: half the period leaves teeth empty, twice
 * the period leaves peaks beside. */
static Comb grow_comb(const GArray *peaks, double from_px, double period_px)
{
    Comb comb = {from_px, period_px, 0, 0, G_MININT};
    unsigned on_comb = 0;
    for (int reach = 2; reach < 4000; reach *= 2) {
        on_comb = refit(peaks, from_px, reach, &comb);
        if (on_comb < 2 || comb.period_px < least_period_px) return comb;
    }
    int teeth = comb.highest - comb.lowest + 1;
    comb.score = (int)on_comb - (int)(peaks->len - on_comb) - (teeth - (int)on_comb);
    return comb;
}

static Comb best_comb(const GArray *peaks)
{
    Comb best = {0, 0, 0, 0, G_MININT};
    for (unsigned i = 0; i < peaks->len; i++)
        for (unsigned j = i + 1; j < MIN(peaks->len, i + 4); j++) {
            double from_px = g_array_index(peaks, Peak, i).at_px;
            double period_px = g_array_index(peaks, Peak, j).at_px - from_px;
            if (period_px < least_period_px) continue;
            Comb comb = grow_comb(peaks, from_px, period_px);
            if (comb.score > best.score) best = comb;
        }
    return best;
}

/* Leaves the levelled profile along the best slope. */
static double find_slope(const RfLinePlane *flat, double steepest, Profile *profile)
{
    double step = 3.0 / (block_px * flat->along); /* the ends are off by 0.75 px at most */
    double slope = best_slope(flat, profile, -steepest, steepest, step);
    slope = best_slope(flat, profile, slope - step, slope + step, step / 5.0);
    sum_along(flat, slope, profile);
    level_profile(profile);
    return slope;
}

unsigned rf_line_family_find(const RfLinePlane *plane, double steepest, RfLineComb *out)
{
    RfLinePlane flat = flatten(plane);
    Profile profile = {plane->across, g_new0(double, (size_t)plane->across),
                       g_new0(int, (size_t)plane->across)};
    clip(&flat);
    double slope = find_slope(&flat, steepest, &profile);
    double sign = line_sign(&flat, &profile);
    g_autoptr(GArray) peaks = find_peaks(&flat, &profile, sign);
    Comb comb = best_comb(peaks);
    *out = (RfLineComb){.first_px = comb.first_px,
                        .period_px = comb.period_px,
                        .slope = slope,
                        .middle_px = 0.5 * (flat.along * block_px - 1),
                        .is_dark = sign < 0.0};
    g_free(flat.v);
    g_free(profile.mean);
    g_free(profile.count);
    return peaks->len < 2 || comb.score == G_MININT ? MIN(peaks->len, 1) : peaks->len;
}
