#include "calib/line_pieces.h"

#include <math.h>
#include <stdlib.h>

/* Long enough to average noise, short against a lens's bending of a line. */
enum { piece_px = 24 };

/* In a picture without any noise what remains is how far a line is from a Gaussian. */
static const double least_sigma_px = 1e-4;

enum { MOST_HALF_WINDOW = 9, WINDOW = 2 * MOST_HALF_WINDOW + 1 };

/* Mean profile across a piece, moved so that the comb's line lies at 0 on average. */
typedef struct {
    int index, half_window;
    double along_px, expected_px;
    double mean[WINDOW];
    double offset_px; /* mean of expected place less whole pixel */
    double kept;      /* part of the columns that count, 0..1 */
} Window;

typedef struct {
    double depth, at_px, var_depth, var_at; /* variances for unit noise variance */
    double squares;
    int degrees;
} Groove;

static double expected_px(const RfLineComb *comb, int index, double along_px)
{
    return comb->first_px + index * comb->period_px + comb->slope * (along_px - comb->middle_px);
}

static int half_window(const RfLineComb *comb)
{
    return CLAMP((int)(0.42 * comb->period_px), 2, MOST_HALF_WINDOW);
}

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Where the column's window begins in the plane; -1 if it reaches outside. */
static int column_start(const RfLinePlane *plane, const RfLineComb *comb, const Window *w, int a)
{
    int start = (int)lround(expected_px(comb, w->index, a)) - w->half_window;
    return start >= 0 && start + 2 * w->half_window < plane->across ? start : -1;
}

/* A line of the other family, or a speck, covers whole columns and takes the line's contrast away there: weighed unevenly, the columns would
 * pull a slanted line aside. They show at the window's ends. */
static bool choose_columns(const RfLinePlane *plane, const RfLineComb *comb, const Window *w, int from,
                           bool is_kept[])
{
    double ends[piece_px], sorted[piece_px];
    for (int i = 0; i < piece_px; i++) {
        int start = column_start(plane, comb, w, from + i), last = 2 * w->half_window;
        if (start < 0) return false;
        const float *row = plane->v + (size_t)(from + i) * (size_t)plane->across + start;
        sorted[i] = ends[i] =
            0.25 * ((double)row[0] + (double)row[1] + (double)row[last - 1] + (double)row[last]);
    }
    qsort(sorted, piece_px, sizeof *sorted, by_value);
    double middle = sorted[piece_px / 2];
    for (int i = 0; i < piece_px; i++) sorted[i] = fabs(ends[i] - middle);
    qsort(sorted, piece_px, sizeof *sorted, by_value);
    double limit = 3.5 * 1.4826 * sorted[piece_px / 2];
    for (int i = 0; i < piece_px; i++) is_kept[i] = fabs(ends[i] - middle) <= limit;
    return true;
}

/* Whole-pixel shifts smear a slanted line evenly to both sides; what they leave out on average is added back. */
static bool cut_window(const RfLinePlane *plane, const RfLineComb *comb, int index, int from, Window *w)
{
    double sign = comb->is_dark ? -1.0 : 1.0;
    bool is_kept[piece_px];
    int kept = 0;
    *w = (Window){.index = index, .half_window = half_window(comb)};
    if (!choose_columns(plane, comb, w, from, is_kept)) return false;
    for (int i = 0; i < piece_px; i++) kept += is_kept[i];
    for (int i = 0; i < piece_px; i++) {
        if (!is_kept[i]) continue;
        int start = column_start(plane, comb, w, from + i);
        const float *row = plane->v + (size_t)(from + i) * (size_t)plane->across + start;
        for (int j = 0; j <= 2 * w->half_window; j++) w->mean[j] += sign * (double)row[j] / kept;
        w->along_px += (double)(from + i) / kept;
        w->offset_px += (expected_px(comb, index, from + i) - (start + w->half_window)) / kept;
    }
    w->expected_px = expected_px(comb, index, w->along_px);
    w->kept = (double)kept / piece_px;
    return true;
}

/* Inverse in place by elimination, without pivoting because m is positive definite; false if it is singular. */
static bool invert(double m[4][4], int n)
{
    for (int i = 0; i < n; i++) {
        double pivot = m[i][i];
        if (!(fabs(pivot) > 1e-12)) return false;
        m[i][i] = 1.0;
        for (int k = 0; k < n; k++) m[i][k] /= pivot;
        for (int row = 0; row < n; row++) {
            if (row == i) continue;
            double factor = m[row][i];
            m[row][i] = 0.0;
            for (int k = 0; k < n; k++) m[row][k] -= factor * m[i][k];
        }
    }
    return true;
}

/* One Gauss-Newton step for background, its slope, depth, and depth times the shift: the shift is what isn't linear. */
static bool step_groove(const Window *w, double sigma_px, Groove *g)
{
    double m[4][4] = {{0}}, r[4] = {0}, sum_squares = 0.0;
    int n = 2 * w->half_window + 1;
    for (int j = 0; j < n; j++) {
        double x = j - w->half_window, z = (x - g->at_px) / sigma_px, bell = exp(-0.5 * z * z);
        double row[4] = {1.0, x / w->half_window, bell, bell * z / sigma_px};
        for (int a = 0; a < 4; a++) {
            r[a] += row[a] * w->mean[j];
            for (int b = 0; b < 4; b++) m[a][b] += row[a] * row[b];
        }
        sum_squares += w->mean[j] * w->mean[j];
    }
    if (!invert(m, 4)) return false;
    double x[4] = {0};
    g->squares = sum_squares;
    for (int a = 0; a < 4; a++) {
        for (int b = 0; b < 4; b++) x[a] += m[a][b] * r[b];
        g->squares -= x[a] * r[a];
    }
    g->degrees = n - 4;
    if (!(x[2] > 0.0)) return false;
    g->at_px += CLAMP(x[3] / x[2], -1.0, 1.0);
    g->depth = x[2];
    g->var_depth = m[2][2];
    g->var_at = m[3][3] / (x[2] * x[2]);
    return isfinite(g->at_px) && fabs(g->at_px) < w->half_window;
}

static double first_guess(const Window *w, Groove *g)
{
    int best = 0, n = 2 * w->half_window + 1;
    double ends = 0.5 * (w->mean[0] + w->mean[n - 1]);
    for (int j = 0; j < n; j++)
        if (w->mean[j] > w->mean[best]) best = j;
    *g = (Groove){.depth = w->mean[best] - ends, .at_px = best - w->half_window};
    return g->depth;
}

static bool fit_groove(const Window *w, double sigma_px, Groove *g)
{
    if (!(first_guess(w, g) > 0.0)) return false;
    double before_px;
    int i = 0;
    do {
        before_px = g->at_px;
        if (!step_groove(w, sigma_px, g)) return false;
    } while (++i < 12 && fabs(g->at_px - before_px) > 1e-5);
    return g->depth > 0.0;
}

/* Typical variance, for all columns kept, of what the groove leaves over: the width that leaves least is the line's. */
static double noise_variance(const GArray *windows, double sigma_px)
{
    g_autofree double *found = g_new(double, windows->len + 1);
    unsigned n = 0;
    for (unsigned i = 0; i < windows->len; i++) {
        Groove g;
        const Window *w = &g_array_index(windows, Window, i);
        if (fit_groove(w, sigma_px, &g) && g.degrees > 0)
            found[n++] = w->kept * MAX(g.squares, 0.0) / g.degrees;
    }
    qsort(found, n, sizeof *found, by_value);
    return n ? found[n / 2] : HUGE_VAL;
}

static double line_sigma_px(const GArray *windows, double *variance)
{
    double best_px = 1.0;
    *variance = HUGE_VAL;
    for (double sigma_px = 0.5; sigma_px < 4.5; sigma_px *= 1.15) { // NOLINT(cert-flp30-c)
        double found = noise_variance(windows, sigma_px);
        if (found < *variance) {
            *variance = found;
            best_px = sigma_px;
        }
    }
    return best_px;
}

/* From the edge of one comb to the other, and beyond by what the slope brings into the picture. */
static GArray *cut_windows(const RfLinePlane *plane, const RfLineComb *comb)
{
    GArray *windows = g_array_new(false, false, sizeof(Window));
    double reach_px = fabs(comb->slope) * 0.5 * plane->along;
    int from = (int)ceil((-reach_px - comb->first_px) / comb->period_px);
    int to = (int)floor((plane->across + reach_px - comb->first_px) / comb->period_px);
    for (int index = from; index <= to; index++)
        for (int a = 0; a + piece_px <= plane->along; a += piece_px) {
            Window w;
            if (cut_window(plane, comb, index, a, &w)) g_array_append_val(windows, w);
        }
    return windows;
}

/* A speck shows in one or two pieces, a line in many: at least three and a sixth of those that could. */
static void close_line(GArray *pieces, unsigned begin, unsigned possible)
{
    unsigned seen = pieces->len - begin;
    if (seen < 3 || 6 * seen < possible) g_array_set_size(pieces, begin);
}

static bool locate(const Window *w, double sigma_px, double variance, RfLinePiece *piece)
{
    Groove g;
    variance /= w->kept;
    if (!fit_groove(w, sigma_px, &g) || g.depth < 4.0 * sqrt(variance * g.var_depth)) return false;
    double place_px = w->expected_px - w->offset_px + g.at_px;
    *piece = (RfLinePiece){w->index, w->along_px, place_px, MAX(least_sigma_px, sqrt(variance * g.var_at))};
    return fabs(g.at_px - w->offset_px) < 0.7 * w->half_window && piece->sigma_px < 1.0;
}

GArray *rf_line_pieces_locate(const RfLinePlane *plane, const RfLineComb *comb, double *width_px)
{
    g_autoptr(GArray) windows = cut_windows(plane, comb);
    double variance, sigma_px = line_sigma_px(windows, &variance);
    GArray *pieces = g_array_new(false, false, sizeof(RfLinePiece));
    unsigned begin = 0, possible = 0;
    for (unsigned i = 0; i < windows->len; i++) {
        const Window *w = &g_array_index(windows, Window, i);
        RfLinePiece piece;
        if (i && w->index != g_array_index(windows, Window, i - 1).index) {
            close_line(pieces, begin, possible);
            begin = pieces->len;
            possible = 0;
        }
        possible++;
        if (locate(w, sigma_px, variance, &piece)) g_array_append_val(pieces, piece);
    }
    close_line(pieces, begin, possible);
    *width_px = 2.0 * sqrt(2.0 * log(2.0)) * sigma_px;
    return pieces;
}
