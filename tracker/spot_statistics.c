#include "tracker/spot_statistics.h"

#include "tracker/spot_detector.h"

#include <math.h>
#include <stdlib.h>

enum { PER_EXPOSURE = 2000 };

struct RfSpotStatistics {
    GArray *absolute[RF_SPOT_DETECTOR_SIZES]; /* of float */
    GArray *gains;                            /* of double */
    double far_above, far_below;              /* sums of squares beyond FAR */
    double product, square;                   /* of neighbouring cells of the picture */
};
static const float FAR = 2.2f; /* eight white sd of the filtered picture */

RfSpotStatistics *rf_spot_statistics_new(void)
{
    RfSpotStatistics *statistics = g_new0(RfSpotStatistics, 1);
    for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++)
        statistics->absolute[i] = g_array_new(false, false, sizeof(float));
    statistics->gains = g_array_new(false, false, sizeof(double));
    return statistics;
}

void rf_spot_statistics_free(RfSpotStatistics *statistics)
{
    if (!statistics) return;
    for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++) g_array_unref(statistics->absolute[i]);
    g_array_unref(statistics->gains);
    g_free(statistics);
}

static void add_picture(RfSpotStatistics *statistics, const float *filtered, int n, int width,
                        const float *picture)
{
    for (int i = 0; i < n; i++) {
        double square = (double)filtered[i] * (double)filtered[i];
        if (filtered[i] > FAR)
            statistics->far_above += square;
        else if (filtered[i] < -FAR)
            statistics->far_below += square;
    }
    for (int i = 0; i + 1 < n; i += 3) {
        float a = picture[i], b = picture[i + 1];
        if ((i + 1) % width == 0 || fabsf(a) > 3 || fabsf(b) > 3) continue;
        statistics->product += (double)(a * b);
        statistics->square += 0.5 * (double)(a * a + b * b);
    }
}

void rf_spot_statistics_add(RfSpotStatistics *statistics, int size, const float *filtered, int n, int width,
                            const float *picture)
{
    int step = MAX(n / PER_EXPOSURE, 1);
    for (int i = step / 2; i < n; i += step) {
        float absolute = fabsf(filtered[i]);
        g_array_append_val(statistics->absolute[size], absolute);
    }
    if (size == 0) add_picture(statistics, filtered, n, width, picture);
}

void rf_spot_statistics_add_lamp(RfSpotStatistics *statistics, double gain)
{
    g_array_append_val(statistics->gains, gain);
}

static void join(GArray *values, const GArray *others)
{
    if (others->len) g_array_append_vals(values, others->data, others->len);
}

void rf_spot_statistics_join(RfSpotStatistics *statistics, const RfSpotStatistics *others)
{
    for (int i = 0; i < RF_SPOT_DETECTOR_SIZES; i++) join(statistics->absolute[i], others->absolute[i]);
    join(statistics->gains, others->gains);
    statistics->far_above += others->far_above;
    statistics->far_below += others->far_below;
    statistics->product += others->product;
    statistics->square += others->square;
}

static int by_float(const void *a, const void *b)
{
    float p = *(const float *)a, q = *(const float *)b;
    return p < q ? -1 : p > q;
}

static float share_of(GArray *values, double share)
{
    g_array_sort(values, by_float);
    return g_array_index(values, float, MIN((unsigned)(share * values->len), values->len - 1));
}

double rf_spot_statistics_noise_sd(const RfSpotStatistics *statistics, int size)
{
    GArray *absolute = statistics->absolute[size];
    return absolute->len ? 1.4826 * (double)share_of(absolute, 0.5) : 0;
}

bool rf_spot_statistics_is_dark(const RfSpotStatistics *statistics)
{
    return statistics->far_below > statistics->far_above;
}

/* Clear spots fitted alone; the sharpest tenth tells what focus can do, the middle what to expect. */
RfSpotWidths rf_spot_statistics_widths(const GArray *spots, double pixel_aspect)
{
    RfSpotWidths widths = {0};
    g_autoptr(GArray) clear = g_array_new(false, false, sizeof(float));
    for (unsigned i = 0; i < spots->len; i++) {
        const RfSpot *spot = &g_array_index(spots, RfSpot, i);
        float width = spot->width_px * (float)pixel_aspect;
        if (spot->snr > 8 && !(spot->flags & (RF_SPOT_CROWDED | RF_SPOT_EDGE | RF_SPOT_SATURATED)))
            g_array_append_val(clear, width);
    }
    if (clear->len < 5) return widths;
    widths.n = clear->len;
    widths.sharpest_px = MAX(0.7, (double)share_of(clear, 0.1));
    widths.typical_px = (double)share_of(clear, 0.5);
    return widths;
}

static double spread(const GArray *values)
{
    double sum = 0, square = 0, n = values->len;
    for (unsigned i = 0; i < values->len; i++) {
        double v = g_array_index(values, double, i);
        sum += v, square += v * v;
    }
    return n > 1 ? sqrt(MAX(0.0, (square - sum * sum / n) / (n - 1))) : 0;
}

void rf_spot_statistics_describe_noise(const RfSpotStatistics *statistics, const RfBackground *background,
                                       RfSpotFinderFindings *findings)
{
    double sum = 0;
    size_t pixels = (size_t)background->width * (size_t)background->height;
    for (size_t i = 0; i < pixels; i++) sum += (double)background->level[i];
    findings->mean_level = sum / (double)pixels;
    findings->noise_sd = sqrt(rf_pixel_noise_var(&background->noise, findings->mean_level));
    findings->noise_correlation = statistics->square > 0 ? statistics->product / statistics->square : 0;
    findings->gain_sd = spread(statistics->gains);
    findings->movement_rms_px = background->movement_rms_px;
}

void rf_spot_statistics_describe(const GArray *spots, unsigned exposures, RfSpotFinderFindings *findings)
{
    g_autoptr(GArray) snr = g_array_new(false, false, sizeof(float));
    g_autoptr(GArray) width = g_array_new(false, false, sizeof(float));
    unsigned saturated = 0;
    for (unsigned i = 0; i < spots->len; i++) {
        const RfSpot *spot = &g_array_index(spots, RfSpot, i);
        g_array_append_val(snr, spot->snr);
        g_array_append_val(width, spot->width_px);
        saturated += (spot->flags & RF_SPOT_SATURATED) != 0;
    }
    findings->spots_per_exposure = exposures ? (double)spots->len / exposures : 0;
    findings->saturated_spot_share = spots->len ? (double)saturated / spots->len : 0;
    findings->median_snr = spots->len ? (double)share_of(snr, 0.5) : 0;
    findings->spot_width_px = spots->len ? (double)share_of(width, 0.5) : 0;
}
