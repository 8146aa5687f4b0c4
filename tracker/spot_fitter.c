#include "tracker/spot_fitter.h"

#include "tracker/spot_excess.h"
#include "tracker/spot_window.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

typedef struct {
    RfSpotFit fit;
    double start_x_px, start_y_px, reach_px; /* it must stay this near where it was first seen */
} Member;

typedef struct {
    Member members[RF_LOCALISE_MOST_SPOTS];
    unsigned n;
    bool is_crowded; /* others lie within reach that the fit has no room for */
} Group;

struct RfSpotFitter {
    Member all[RF_FITTER_MOST_CANDIDATES];
    bool is_taken[RF_FITTER_MOST_CANDIDATES];
    RfPatchPixel pixels[RF_LOCALISE_MOST_PIXELS];
    float residuals[RF_LOCALISE_MOST_PIXELS];
    double vars[RF_LOCALISE_MOST_PIXELS]; /* of the residuals, the shape's error included */
};

RfSpotFitter *rf_spot_fitter_new(void)
{
    return g_new0(RfSpotFitter, 1);
}

void rf_spot_fitter_free(RfSpotFitter *fitter)
{
    g_free(fitter);
}

/* A spot about as wide as the filter that saw it best; the filter halves the peak of such a spot. */
static Member first_guess(const RfFitterSettings *settings, const RfExposureView *view,
                          const RfCandidate *candidate)
{
    double width = candidate->size ? 2.0 * (1 << candidate->size) : settings->localiser.expected_width_px;
    width = MIN(width, 0.9 * rf_spot_shape_widest_px(settings->localiser.shape));
    double line_offset = view->line_step == 2 ? view->first_line : 0.5;
    double mean_var = rf_pixel_noise_var(&view->background->noise, (double)view->background->level[0]);
    double white_sd = rf_spot_detector_white_sd();
    double contrast = (double)candidate->strength * white_sd * sqrt(mean_var);
    Member member = {.start_x_px = 2 * (double)candidate->x + 0.5,
                     .start_y_px = 2 * (double)candidate->y + line_offset,
                     .reach_px = 1.5 * width + 2};
    double pixels_summed = (1 << candidate->size) * (view->line_step == 2 ? sqrt(2) : 2.0);
    member.fit = (RfSpotFit){.x_px = member.start_x_px,
                             .y_px = member.start_y_px,
                             .peak = settings->sign * 2 * contrast / pixels_summed,
                             .width_px = width};
    return member;
}

static double fit_radius(double width_px)
{
    return 2.6 * width_px + 2.5;
}

static double distance(const RfSpotFit *a, const RfSpotFit *b, double aspect)
{
    return hypot((a->x_px - b->x_px) * aspect, a->y_px - b->y_px);
}

/* Near enough that each lies in the other's wing. */
static bool is_within_reach(const RfSpotFit *a, const RfSpotFit *b, double aspect)
{
    double across = (a->x_px - b->x_px) * aspect, down = a->y_px - b->y_px,
           reach = 2.2 * (a->width_px + b->width_px) + 2;
    return across * across + down * down < reach * reach;
}

/* The strongest untaken candidate and what lies in its reach, chained, until the group is full. */
static Group next_group(RfSpotFitter *fitter, int first, int n, double aspect)
{
    Group group = {.n = 1};
    group.members[0] = fitter->all[first];
    fitter->is_taken[first] = true;
    for (unsigned k = 0; k < group.n; k++)
        for (int i = first + 1; i < n; i++) {
            if (fitter->is_taken[i] || !is_within_reach(&group.members[k].fit, &fitter->all[i].fit, aspect))
                continue;
            if (group.n == RF_LOCALISE_MOST_SPOTS) {
                group.is_crowded = true;
                continue;
            }
            group.members[group.n++] = fitter->all[i];
            fitter->is_taken[i] = true;
        }
    return group;
}

static RfWindow collect(RfSpotFitter *fitter, const RfExposureView *view, const RfSpotFit *fits, unsigned n)
{
    RfWindowDisc discs[RF_LOCALISE_MOST_SPOTS];
    for (unsigned i = 0; i < n; i++)
        discs[i] = (RfWindowDisc){fits[i].x_px, fits[i].y_px, fit_radius(fits[i].width_px)};
    return rf_spot_window_collect(view, discs, n, fitter->pixels);
}

static double widest(const RfSpotFit *fits, unsigned n)
{
    double width = 0;
    for (unsigned i = 0; i < n; i++) width = fmax(width, fits[i].width_px);
    return width;
}

/* Fits twice: the second window suits the width that the first one found. */
static RfLocaliseOutcome fit_group(RfSpotFitter *fitter, const RfFitterSettings *settings,
                                   const RfExposureView *view, Group *group, RfWindow *window)
{
    RfSpotFit fits[RF_LOCALISE_MOST_SPOTS];
    RfLocaliseOutcome outcome = {0};
    for (unsigned i = 0; i < group->n; i++) fits[i] = group->members[i].fit;
    for (int round = 0; round < 2; round++) {
        double before = widest(fits, group->n);
        *window = collect(fitter, view, fits, group->n);
        outcome = rf_localise(&settings->localiser, fitter->pixels, window->n, fits, group->n);
        if (fabs(widest(fits, group->n) - before) < 0.25 * before) break;
    }
    for (unsigned i = 0; i < group->n; i++) group->members[i].fit = fits[i];
    return outcome;
}

static bool is_inside(const RfExposureView *view, const RfSpotFit *fit)
{
    return fit->x_px > -0.5 && fit->y_px > -0.5 && fit->x_px < view->frame->width - 0.5 &&
           fit->y_px < view->frame->height - 0.5;
}

/* Lower is worse; below 1 it is no spot. */
static double merit(const RfFitterSettings *settings, const RfExposureView *view, const Member *member)
{
    const RfSpotFit *fit = &member->fit;
    double moved = hypot(fit->x_px - member->start_x_px, fit->y_px - member->start_y_px);
    bool is_spot = is_inside(view, fit) && moved < member->reach_px && settings->sign * fit->peak > 0 &&
                   fit->u_peak > 0 && fit->width_px > settings->narrowest_px &&
                   fit->width_px < 0.97 * rf_spot_shape_widest_px(settings->localiser.shape);
    return is_spot ? fabs(fit->peak) / fit->u_peak / (settings->least_significance * settings->u_factor) : 0;
}

/* Two that settled on one place are one: the fainter is of no merit. */
static int find_double(const Group *group, double aspect)
{
    for (unsigned i = 0; i < group->n; i++)
        for (unsigned j = i + 1; j < group->n; j++) {
            const RfSpotFit *a = &group->members[i].fit, *b = &group->members[j].fit;
            if (distance(a, b, aspect) < 0.8 * MIN(a->width_px, b->width_px))
                return fabs(a->peak) < fabs(b->peak) ? (int)i : (int)j;
        }
    return -1;
}

static int find_worst(const RfFitterSettings *settings, const RfExposureView *view, const Group *group)
{
    int worst = find_double(group, view->background->pixel_aspect);
    double least = 1;
    for (unsigned i = 0; worst < 0 && i < group->n; i++) {
        double m = merit(settings, view, &group->members[i]);
        if (m < least) least = m, worst = (int)i;
    }
    return worst;
}

static void drop_member(Group *group, unsigned which)
{
    memmove(&group->members[which], &group->members[which + 1],
            (group->n - which - 1) * sizeof group->members[0]);
    group->n--;
}

/* Fits, drops the worst that is no spot, and fits the others again from where they began. */
static RfLocaliseOutcome settle(RfSpotFitter *fitter, const RfFitterSettings *settings,
                                const RfExposureView *view, Group *group, RfWindow *window)
{
    RfLocaliseOutcome outcome = {0};
    while (group->n) {
        Group start = *group;
        outcome = fit_group(fitter, settings, view, group, window);
        int worst = find_worst(settings, view, group);
        if (outcome.is_converged && worst < 0) return outcome;
        if (worst < 0) worst = (int)group->n - 1; /* didn't settle: the faintest candidate came last */
        *group = start;
        drop_member(group, (unsigned)worst);
    }
    return outcome;
}

static void fill_residuals(RfSpotFitter *fitter, const RfFitterSettings *settings, const Group *group,
                           unsigned n_pixels, double offset)
{
    RfSpotFit fits[RF_LOCALISE_MOST_SPOTS];
    for (unsigned i = 0; i < group->n; i++) fits[i] = group->members[i].fit;
    rf_localise_models(&settings->localiser, fits, group->n, fitter->pixels, n_pixels, fitter->residuals);
    for (unsigned p = 0; p < n_pixels; p++)
        fitter->residuals[p] = fitter->pixels[p].excess - (float)offset - fitter->residuals[p];
}

typedef struct {
    double peak, significance;
} Leftover;

static void fill_vars(RfSpotFitter *fitter, const RfFitterSettings *settings, unsigned n_pixels)
{
    for (unsigned p = 0; p < n_pixels; p++) {
        double model = (double)fitter->pixels[p].excess - (double)fitter->residuals[p];
        fitter->vars[p] = settings->localiser.var_factor * (double)fitter->pixels[p].var +
                          settings->localiser.photon_var_per_level * fmax(model, 0) +
                          settings->shape_error * settings->shape_error * model * model;
    }
}

/* Best peak of a sharp spot at a pixel for what the fit left. */
static Leftover leftover_at(const RfSpotFitter *fitter, const RfFitterSettings *settings, unsigned n_pixels,
                            unsigned at, const RfSpotProfile *profile)
{
    double aspect = settings->localiser.pixel_aspect, product = 0, square = 0;
    const RfPatchPixel *middle = &fitter->pixels[at];
    unsigned first = at;
    while (first > 0 && middle->y_px - fitter->pixels[first - 1].y_px <= 3 * profile->width_px) first--;
    for (unsigned p = first; p < n_pixels && fitter->pixels[p].y_px - middle->y_px <= 3 * profile->width_px;
         p++) { /* they lie row by row */
        const RfPatchPixel *pixel = &fitter->pixels[p];
        float dx = (pixel->x_px - middle->x_px) * (float)aspect, dy = pixel->y_px - middle->y_px,
              r2 = dx * dx + dy * dy;
        if (r2 > 9 * profile->width_px * profile->width_px) continue;
        double value = (double)(pixel->shade * rf_spot_profile_at(profile, r2).value);
        product += value * (double)fitter->residuals[p] / fitter->vars[p];
        square += value * value / fitter->vars[p];
    }
    return square > 0 ? (Leftover){product / square, product / sqrt(square)} : (Leftover){0, 0};
}

/* A spot in what the others leave, beyond what noise and an imperfect shape can do. */
static bool find_hidden(RfSpotFitter *fitter, const RfFitterSettings *settings, const Group *group,
                        unsigned n_pixels, Member *hidden)
{
    double width = settings->localiser.expected_width_px,
           best = 1.3 * settings->least_significance * settings->u_factor;
    double brightest = 0;
    bool is_found = false;
    for (unsigned i = 0; i < group->n; i++) brightest = fmax(brightest, fabs(group->members[i].fit.peak));
    RfSpotProfile profile = rf_spot_shape_profile(settings->localiser.shape, width);
    fill_vars(fitter, settings, n_pixels);
    for (unsigned p = 0; p < n_pixels; p++) {
        double residual = settings->sign * (double)fitter->residuals[p];
        if (residual < 1.5 * sqrt(settings->localiser.var_factor * (double)fitter->pixels[p].var) ||
            residual < 0.06 * brightest)
            continue; /* nothing that could be a spot's middle */
        Leftover left = leftover_at(fitter, settings, n_pixels, p, &profile);
        if (settings->sign * left.significance < best || fabs(left.peak) < 0.1 * brightest) continue;
        best = settings->sign * left.significance;
        const RfPatchPixel *pixel = &fitter->pixels[p];
        *hidden = (Member){.fit = {.x_px = (double)pixel->x_px,
                                   .y_px = (double)pixel->y_px,
                                   .peak = left.peak,
                                   .width_px = width},
                           .start_x_px = (double)pixel->x_px,
                           .start_y_px = (double)pixel->y_px,
                           .reach_px = 1.5 * width + 2};
        is_found = true;
    }
    return is_found;
}

static const double POOR_FIT = 1.3;     /* reduced chi-square: more than noise is left */
static const double WORTH_A_SPOT = 0.9; /* one more spot must lower the reduced chi-square to this share */

static double reduced_chi_square(const RfLocaliseOutcome *outcome, const RfWindow *window, unsigned n)
{
    return outcome->chi_square / MAX(1.0, (double)window->n - 4.0 * n);
}

/* One spot with the centre and the width of all members' light together. */
static Member as_one(const Group *group, double aspect)
{
    double light = 0, x_px = 0, y_px = 0, square = 0;
    for (unsigned i = 0; i < group->n; i++) {
        const RfSpotFit *fit = &group->members[i].fit;
        double part = fit->peak * fit->width_px * fit->width_px;
        light += part;
        x_px += part * fit->x_px;
        y_px += part * fit->y_px;
    }
    RfSpotFit one = {.x_px = x_px / light, .y_px = y_px / light};
    for (unsigned i = 0; i < group->n; i++) {
        const RfSpotFit *fit = &group->members[i].fit;
        double away = distance(fit, &one, aspect);
        square +=
            fit->peak * fit->width_px * fit->width_px * (fit->width_px * fit->width_px + away * away / 2);
    }
    one.width_px = sqrt(square / light);
    one.peak = light / (one.width_px * one.width_px);
    return (Member){one, one.x_px, one.y_px, 1.5 * one.width_px + 2};
}

/* A broad spot (far out of focus even brighter at its rim) may show several peaks, and a fit that begins with a spot for
 * each may settle there: where one explains them as well, or nearly, it was one. */
static RfLocaliseOutcome try_as_one(RfSpotFitter *fitter, const RfFitterSettings *settings,
                                    const RfExposureView *view, Group *group, RfWindow *window,
                                    RfLocaliseOutcome outcome)
{
    double several = reduced_chi_square(&outcome, window, group->n);
    if (group->n < 2 || group->is_crowded || several < POOR_FIT) return outcome;
    Group one = {.members = {as_one(group, view->background->pixel_aspect)}, .n = 1};
    if (one.members[0].fit.width_px > 0.9 * rf_spot_shape_widest_px(settings->localiser.shape))
        return outcome;
    RfWindow one_window;
    RfLocaliseOutcome with = settle(fitter, settings, view, &one, &one_window);
    if (one.n == 1 && WORTH_A_SPOT * reduced_chi_square(&with, &one_window, 1) < several) {
        *group = one;
        *window = one_window;
        return with;
    }
    fit_group(fitter, settings, view, group, window); /* brings its pixels back */
    return outcome;
}

/* Looks into what the fit left, while that is more than noise; a wrong addition is taken back. */
static RfLocaliseOutcome add_hidden(RfSpotFitter *fitter, const RfFitterSettings *settings,
                                    const RfExposureView *view, Group *group, RfWindow *window,
                                    RfLocaliseOutcome outcome)
{
    while (group->n < RF_LOCALISE_MOST_SPOTS && reduced_chi_square(&outcome, window, group->n) > POOR_FIT) {
        Member hidden;
        fill_residuals(fitter, settings, group, window->n, outcome.offset);
        if (!find_hidden(fitter, settings, group, window->n, &hidden)) break;
        Group larger = *group;
        RfWindow larger_window;
        larger.members[larger.n++] = hidden;
        RfLocaliseOutcome with = settle(fitter, settings, view, &larger, &larger_window);
        bool is_better =
            larger.n > group->n && reduced_chi_square(&with, &larger_window, larger.n) <
                                       WORTH_A_SPOT * reduced_chi_square(&outcome, window, group->n);
        if (!is_better) {
            fit_group(fitter, settings, view, group, window); /* brings its pixels back */
            break;
        }
        *group = larger;
        *window = larger_window;
        outcome = with;
    }
    return outcome;
}

static RfSpot spot_of(const RfFitterSettings *settings, const RfExposureView *view, const Group *group,
                      unsigned i, const RfWindow *window)
{
    const RfSpotFit *fit = &group->members[i].fit;
    const RfBackground *b = view->background;
    int x = CLAMP((int)lrint(fit->x_px), 0, b->width - 1), y = CLAMP((int)lrint(fit->y_px), 0, b->height - 1);
    double level = (double)b->level[(size_t)y * (size_t)b->width + (size_t)x],
           level_sd = sqrt(settings->localiser.var_factor * rf_pixel_noise_var(&b->noise, level));
    unsigned flags = (window->is_saturated ? RF_SPOT_SATURATED : 0) | (window->is_cut ? RF_SPOT_EDGE : 0) |
                     (window->has_line ? RF_SPOT_LINE : 0) |
                     (group->n > 1 || group->is_crowded ? RF_SPOT_CROWDED : 0);
    return (RfSpot){
        .x_px = (float)fit->x_px,
        .y_px = (float)fit->y_px,
        .u_x_px = (float)sqrt(fit->var_x_px2),
        .u_y_px = (float)sqrt(fit->var_y_px2),
        .cov_xy_px2 = (float)fit->cov_xy_px2,
        .peak = (float)fit->peak,
        .snr = (float)(fabs(fit->peak) / level_sd),
        .width_px = (float)(fit->width_px / b->pixel_aspect),
        .flags = flags,
    };
}

/* Only of a spot by itself. */
static double excess_of(RfSpotFitter *fitter, const RfFitterSettings *settings, const Group *group,
                        const RfWindow *window, double offset)
{
    const RfSpotFit *fit = &group->members[0].fit;
    if (group->n != 1 || group->is_crowded) return 0;
    rf_localise_models(&settings->localiser, fit, 1, fitter->pixels, window->n, fitter->residuals);
    return rf_spot_excess(&settings->localiser, fitter->pixels, fitter->residuals, window->n, fit, offset);
}

static int by_place(const void *a, const void *b)
{
    const RfSpot *p = a, *q = b;
    if (p->y_px != q->y_px) return p->y_px < q->y_px ? -1 : 1;
    return p->x_px < q->x_px ? -1 : p->x_px > q->x_px;
}

/* Two groups may end on the same spot where one was full: the later, fainter one goes. */
static bool is_known(const GArray *spots, unsigned first, const RfSpot *spot)
{
    for (unsigned i = first; i < spots->len; i++) {
        const RfSpot *known = &g_array_index(spots, RfSpot, i);
        float dx = known->x_px - spot->x_px, dy = known->y_px - spot->y_px,
              reach = 0.7f * MIN(known->width_px, spot->width_px);
        if (dx * dx + dy * dy < reach * reach) return true;
    }
    return false;
}

void rf_spot_fitter_run(RfSpotFitter *fitter, const RfFitterSettings *settings, const RfExposureView *view,
                        const RfCandidate *candidates, int n, GArray *spots)
{
    unsigned first_spot = spots->len;
    n = MIN(n, RF_FITTER_MOST_CANDIDATES);
    memset(fitter->is_taken, 0, sizeof fitter->is_taken);
    for (int i = 0; i < n; i++) fitter->all[i] = first_guess(settings, view, &candidates[i]);
    for (int i = 0; i < n; i++) {
        if (fitter->is_taken[i]) continue;
        RfWindow window;
        Group group = next_group(fitter, i, n, view->background->pixel_aspect);
        RfLocaliseOutcome outcome = settle(fitter, settings, view, &group, &window);
        if (group.n) outcome = try_as_one(fitter, settings, view, &group, &window, outcome);
        if (group.n) outcome = add_hidden(fitter, settings, view, &group, &window, outcome);
        for (unsigned k = 0; k < group.n; k++) {
            RfSpot spot = spot_of(settings, view, &group, k, &window);
            spot.excess = (float)excess_of(fitter, settings, &group, &window, outcome.offset);
            if (!is_known(spots, first_spot, &spot)) g_array_append_val(spots, spot);
        }
    }
    if (spots->len > first_spot)
        qsort(&g_array_index(spots, RfSpot, first_spot), spots->len - first_spot, sizeof(RfSpot), by_place);
}
