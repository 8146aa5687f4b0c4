#include "tracker/spot_calibration.h"

#include "tracker/spot_window.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { MOST_OF_A_KIND = 160, LEAST_OF_A_KIND = 12, DEPTHS = 12 };
static const double DEPTH_STEP = 0.25;

/* One spot with the pixels around it. */
typedef struct {
    RfSpotFit fit;
    size_t first;
    unsigned n;
    bool has_line;
} Specimen;

struct RfSpotCalibration {
    GArray *specimens;
    GArray *pixels; /* of RfPatchPixel, of all specimens */
    unsigned of_kind[2];
};

RfSpotCalibration *rf_spot_calibration_new(void)
{
    RfSpotCalibration *calibration = g_new0(RfSpotCalibration, 1);
    calibration->specimens = g_array_new(false, false, sizeof(Specimen));
    calibration->pixels = g_array_new(false, false, sizeof(RfPatchPixel));
    return calibration;
}

void rf_spot_calibration_free(RfSpotCalibration *calibration)
{
    if (!calibration) return;
    g_array_unref(calibration->specimens);
    g_array_unref(calibration->pixels);
    g_free(calibration);
}

static bool is_lone(const RfSpot *spots, unsigned n, unsigned i)
{
    for (unsigned k = 0; k < n; k++) {
        float away = hypotf(spots[k].x_px - spots[i].x_px, spots[k].y_px - spots[i].y_px);
        if (k != i && away < 4 * (spots[i].width_px + spots[k].width_px)) return false;
    }
    return true;
}

void rf_spot_calibration_add(RfSpotCalibration *calibration, const RfExposureView *view, const RfSpot *spots,
                             unsigned n)
{
    RfPatchPixel *pixels = g_new(RfPatchPixel, RF_LOCALISE_MOST_PIXELS);
    for (unsigned i = 0; i < n; i++) {
        const RfSpot *spot = &spots[i];
        bool has_line = (spot->flags & RF_SPOT_LINE) != 0;
        if (spot->snr < 6 || (spot->flags & ~(unsigned)RF_SPOT_LINE) ||
            calibration->of_kind[has_line] >= MOST_OF_A_KIND || !is_lone(spots, n, i))
            continue;
        double width = (double)spot->width_px * view->background->pixel_aspect;
        RfWindowDisc disc = {(double)spot->x_px, (double)spot->y_px, 2.6 * width + 2.5};
        RfWindow window = rf_spot_window_collect(view, &disc, 1, pixels);
        Specimen specimen = {
            .fit = {.x_px = disc.x_px, .y_px = disc.y_px, .peak = (double)spot->peak, .width_px = width},
            .first = calibration->pixels->len,
            .n = window.n,
            .has_line = has_line};
        g_array_append_val(calibration->specimens, specimen);
        g_array_append_vals(calibration->pixels, pixels, window.n);
        calibration->of_kind[has_line]++;
    }
    g_free(pixels);
}

/* What one specimen's own fit leaves within two widths. */
typedef struct {
    double square;      /* mean of squared residuals, for the unknowns taken */
    double var, signal; /* means there: modelled background variance, light of the spot */
    double chi_square, n;
    double next_product, next_square; /* of residuals of neighbours along x */
    bool is_known;
} Remains;

/* Pixels come row by row, so that a neighbour along x is the one before. */
static Remains fit_specimen(const RfLocaliser *localiser, const Specimen *specimen,
                            const RfPatchPixel *pixels)
{
    Remains remains = {0};
    RfSpotFit fit = specimen->fit;
    RfLocaliseOutcome outcome = rf_localise(localiser, pixels, specimen->n, &fit, 1);
    double before = 0;
    for (unsigned p = 0; outcome.is_converged && p < specimen->n; p++) {
        const RfPatchPixel *pixel = &pixels[p];
        double dx = ((double)pixel->x_px - fit.x_px) * localiser->pixel_aspect,
               dy = (double)pixel->y_px - fit.y_px;
        double model = rf_localise_model(localiser, &fit, 1, pixel);
        double residual = (double)pixel->excess - outcome.offset - model;
        bool is_near = hypot(dx, dy) < 2 * fit.width_px;
        if (is_near && p && pixel->x_px == pixels[p - 1].x_px + 1) {
            remains.next_product += residual * before;
            remains.next_square += 0.5 * (residual * residual + before * before);
        }
        before = residual;
        if (!is_near) continue;
        double var =
            localiser->var_factor * (double)pixel->var + localiser->photon_var_per_level * fmax(model, 0);
        remains.square += residual * residual;
        remains.chi_square += residual * residual / var;
        remains.var += (double)pixel->var;
        remains.signal += fmax(model, 0);
        remains.n++;
    }
    remains.is_known = remains.n > 8;
    if (remains.is_known) {
        remains.square /= remains.n - 4;
        remains.var /= remains.n;
        remains.signal /= remains.n;
    }
    return remains;
}

static RfPatchPixel *pixels_of(const RfSpotCalibration *calibration, const Specimen *specimen)
{
    return &g_array_index(calibration->pixels, RfPatchPixel, specimen->first);
}

/* square = var_factor * var + photon * signal, by least squares with relative weights; outliers count less in the second
 * and third round. */
static void fit_noise_line(const Remains *all, unsigned n, RfSpotLesson *lesson)
{
    double factor = lesson->var_factor, photon = lesson->photon_var_per_level;
    for (int round = 0; round < 4; round++) {
        double aa = 0, ab = 0, bb = 0, ay = 0, by = 0;
        for (unsigned i = 0; i < n; i++) {
            const Remains *r = &all[i];
            double expected = round ? factor * r->var + photon * r->signal : r->square;
            double off = round ? r->square / expected - 1 : 0,
                   w = 1 / (expected * expected) / (1 + off * off);
            aa += w * r->var * r->var, ab += w * r->var * r->signal, bb += w * r->signal * r->signal;
            ay += w * r->var * r->square, by += w * r->signal * r->square;
        }
        double det = aa * bb - ab * ab;
        if (!(det > 1e-9 * aa * bb)) break;
        factor = (ay * bb - by * ab) / det;
        photon = (by * aa - ay * ab) / det;
        if (photon < 0) photon = 0, factor = ay / aa;
        if (factor < 1) factor = 1, photon = fmax(0, (by - ab) / bb);
    }
    lesson->var_factor = factor;
    lesson->photon_var_per_level = photon;
}

/* Noise of neighbour correlation rho has, at wave number k, the power of white noise times this (first order
 * autoregression along one axis). */
static double power_at(double rho, double k)
{
    return (1 - rho * rho) / (1 - 2 * rho * cos(k) + rho * rho);
}

static double u_factor_of(double rho, double width)
{
    rho = CLAMP(rho, 0.0, 0.8);
    return fmax(1, sqrt(power_at(rho, 1 / width) * power_at(rho, 0.5 / width)));
}

static void learn_noise(const RfSpotCalibration *calibration, const RfLocaliser *localiser,
                        RfSpotLesson *lesson)
{
    g_autofree Remains *all = g_new(Remains, calibration->specimens->len + 1);
    unsigned n = 0;
    double product = 0, square = 0, width = 0;
    for (unsigned i = 0; i < calibration->specimens->len; i++) {
        const Specimen *specimen = &g_array_index(calibration->specimens, Specimen, i);
        if (specimen->has_line) continue;
        Remains remains = fit_specimen(localiser, specimen, pixels_of(calibration, specimen));
        if (!remains.is_known) continue;
        all[n++] = remains;
        product += remains.next_product / remains.square;
        square += remains.next_square / remains.square;
        width += specimen->fit.width_px;
    }
    if (n < LEAST_OF_A_KIND) return;
    fit_noise_line(all, n, lesson);
    lesson->u_factor = u_factor_of(square > 0 ? product / square : 0, width / n);
}

/* What all specimens on lines leave if lines shade droplets `depth` times as much as the background. One specimen that
 * fits badly for other reasons must not decide. */
static double misfit_at(const RfSpotCalibration *calibration, const RfLocaliser *localiser, double depth,
                        unsigned *n)
{
    g_autofree RfPatchPixel *pixels = g_new(RfPatchPixel, RF_LOCALISE_MOST_PIXELS);
    double sum = 0;
    *n = 0;
    for (unsigned i = 0; i < calibration->specimens->len; i++) {
        const Specimen *specimen = &g_array_index(calibration->specimens, Specimen, i);
        if (!specimen->has_line) continue;
        memcpy(pixels, pixels_of(calibration, specimen), specimen->n * sizeof *pixels);
        for (unsigned p = 0; p < specimen->n; p++)
            pixels[p].shade = (float)rf_spot_calibration_shade(depth, (double)pixels[p].shade);
        Remains remains = fit_specimen(localiser, specimen, pixels);
        double reduced = remains.is_known ? remains.chi_square / (remains.n - 4) : 6;
        sum += fmin(reduced, 6);
        ++*n;
    }
    return sum;
}

static double learn_line_depth(const RfSpotCalibration *calibration, const RfLocaliser *localiser)
{
    double misfit[DEPTHS];
    int best = 0;
    unsigned n = 0;
    for (int i = 0; i < DEPTHS; i++) {
        misfit[i] = misfit_at(calibration, localiser, 1 + i * DEPTH_STEP, &n);
        if (n < LEAST_OF_A_KIND) return 1;
        if (misfit[i] < misfit[best]) best = i;
    }
    double shift = 0;
    if (best > 0 && best < DEPTHS - 1) {
        double bend = misfit[best - 1] - 2 * misfit[best] + misfit[best + 1];
        shift = bend > 0 ? CLAMP(0.5 * (misfit[best - 1] - misfit[best + 1]) / bend, -0.5, 0.5) : 0;
    }
    return 1 + (best + shift) * DEPTH_STEP;
}

RfSpotLesson rf_spot_calibration_learn(const RfSpotCalibration *calibration, const RfLocaliser *localiser)
{
    RfSpotLesson lesson = {1, localiser->photon_var_per_level, 1, 1};
    learn_noise(calibration, localiser, &lesson);
    RfLocaliser informed = *localiser;
    informed.photon_var_per_level = lesson.photon_var_per_level;
    informed.var_factor = lesson.var_factor;
    lesson.line_depth = learn_line_depth(calibration, &informed);
    return lesson;
}
