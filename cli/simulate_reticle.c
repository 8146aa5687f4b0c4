#include "cli/simulate_reticle.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_randist.h>
#include <math.h>

#define STEPS_PER_PX 64
static const double blur_px = 0.5;        /* of the eyepiece, standard deviation */
static const double numeral_shade = 0.12; /* transmission of a stroke: numerals are printed thick */

typedef struct { /* stroke of a numeral: from a to b in reticle coordinates */
    double along_a, across_a, along_b, across_b;
} Stroke;

struct RfReticle {
    RfView view;
    double transmission;
    GArray *upright,
        *level;      /* float: share of a pixel covered against distance from a vertical, horizontal line */
    GArray *strokes; /* Stroke */
};

/* Integral of the normal distribution function of width blur_px. */
static double ramp(double x)
{
    return x * gsl_cdf_gaussian_P(x, blur_px) + blur_px * blur_px * gsl_ran_gaussian_pdf(x, blur_px);
}

/* Share of a pixel of side box_px, d away, that a line of width w covers after blur. */
static double coverage(double d, double w, double box_px)
{
    double half = 0.5 * w, box = 0.5 * box_px;
    return (ramp(d + half + box) - ramp(d + half - box) - ramp(d - half + box) + ramp(d - half - box)) /
           box_px;
}

static GArray *profile(double width_px, double box_px)
{
    GArray *table = g_array_new(FALSE, FALSE, sizeof(float));
    double reach_px = 0.5 * width_px + 0.5 * box_px + 5 * blur_px;
    for (int i = 0; i <= (int)ceil(reach_px * STEPS_PER_PX); i++) {
        float share = (float)coverage((double)i / STEPS_PER_PX, width_px, box_px);
        g_array_append_val(table, share);
    }
    return table;
}

static float covered(const GArray *table, double distance_px)
{
    double place = fabs(distance_px) * STEPS_PER_PX;
    unsigned i = (unsigned)MIN(place, 1e6);
    if (i + 1 >= table->len) return 0;
    const float *share = &g_array_index(table, float, i);
    return share[0] + (share[1] - share[0]) * (float)(place - i);
}

/* Seven strokes: top, upper right, lower right, bottom, lower left, upper left, middle; one bit each. */
static const unsigned char digit_strokes[10] = {0x3f, 0x06, 0x5b, 0x4f, 0x66, 0x6d, 0x7d, 0x07, 0x7f, 0x6f};
static const double stroke_ends[7][4] = {{0, 0, 1, 0}, {1, 0, 1, 1}, {1, 1, 1, 2}, {0, 2, 1, 2},
                                         {0, 1, 0, 2}, {0, 0, 0, 1}, {0, 1, 1, 1}};

static void add_numeral(GArray *strokes, int digit, double along, double across)
{
    const double unit = 0.14; /* spacings */
    for (int i = 0; i < 7; i++) {
        if (!(digit_strokes[digit] >> i & 1)) continue;
        const double *e = stroke_ends[i];
        Stroke stroke = {along + unit * e[0], across + unit * e[1], along + unit * e[2],
                         across + unit * e[3]};
        g_array_append_val(strokes, stroke);
    }
}

RfReticle *rf_simulate_reticle_new(const RfView *view, double line_width_m, double transmission,
                                   bool has_numerals)
{
    RfReticle *reticle = g_new0(RfReticle, 1);
    reticle->view = *view;
    reticle->transmission = transmission;
    double width_px = line_width_m * view->scale_px_m;
    reticle->upright = profile(width_px, view->pixel_aspect);
    reticle->level = profile(width_px, 1);
    reticle->strokes = g_array_new(FALSE, FALSE, sizeof(Stroke));
    int reach = (int)(0.5 * view->height / view->pitch_px);
    for (int line = -reach; has_numerals && line <= reach; line += 2)
        add_numeral(reticle->strokes, (line + reach) / 2 % 10, 2.1, line + 0.1);
    return reticle;
}

void rf_simulate_reticle_free(RfReticle *reticle)
{
    if (!reticle) return;
    g_array_unref(reticle->upright);
    g_array_unref(reticle->level);
    g_array_unref(reticle->strokes);
    g_free(reticle);
}

static bool has_upright(RfSceneLines lines)
{
    return lines == RF_SCENE_LINES_GRID || lines == RF_SCENE_LINES_VERTICAL;
}

static bool has_level(RfSceneLines lines)
{
    return lines == RF_SCENE_LINES_GRID || lines == RF_SCENE_LINES_HORIZONTAL;
}

/* Reticle coordinates are linear along a row, so two ends of the row give all of it. */
static void draw_row(const RfReticle *reticle, const RfPose *pose, int y, float *row)
{
    const RfView *view = &reticle->view;
    double along, across, along_1, across_1;
    rf_simulate_view_reticle(view, rf_simulate_view_unposed_px(view, pose, (RfPixel){0, y}), &along, &across);
    rf_simulate_view_reticle(view, rf_simulate_view_unposed_px(view, pose, (RfPixel){1, y}), &along_1,
                             &across_1);
    float shade = (float)(1 - reticle->transmission);
    for (int x = 0; x < view->width; x++) {
        double u = along + x * (along_1 - along), v = across + x * (across_1 - across);
        float upright =
            has_upright(view->lines) ? covered(reticle->upright, (u - rint(u)) * view->pitch_px) : 0;
        float level = has_level(view->lines) ? covered(reticle->level, (v - rint(v)) * view->pitch_px) : 0;
        row[x] = (1 - shade * upright) * (1 - shade * level);
    }
}

static double distance_to_stroke(const Stroke *stroke, double u, double v)
{
    double du = stroke->along_b - stroke->along_a, dv = stroke->across_b - stroke->across_a;
    double t = ((u - stroke->along_a) * du + (v - stroke->across_a) * dv) / (du * du + dv * dv);
    t = CLAMP(t, 0, 1);
    return hypot(u - stroke->along_a - t * du, v - stroke->across_a - t * dv);
}

static RfPixel stored_px(const RfReticle *reticle, const RfPose *pose, double along, double across)
{
    const RfView *view = &reticle->view;
    double u0, v0, c = cos(view->rotation_rad), s = sin(view->rotation_rad);
    RfPixel centre = {0.5 * (view->width - 1), 0.5 * (view->height - 1)};
    rf_simulate_view_reticle(view, centre, &u0, &v0);
    double u = (along - u0) * view->pitch_px, v = (across - v0) * view->pitch_px;
    RfPixel reference = {centre.x + (c * u - s * v) / view->pixel_aspect, centre.y + s * u + c * v};
    return rf_simulate_view_posed_px(view, pose, reference);
}

static void draw_stroke(const RfReticle *reticle, const RfPose *pose, const Stroke *stroke, float *map)
{
    const RfView *view = &reticle->view;
    double half_px = MAX(1, 0.03 * view->pitch_px);
    RfPixel a = stored_px(reticle, pose, stroke->along_a, stroke->across_a);
    RfPixel b = stored_px(reticle, pose, stroke->along_b, stroke->across_b);
    double reach = half_px + 2, reach_x = reach / view->pixel_aspect + 1;
    int x0 = (int)MAX(0, MIN(a.x, b.x) - reach_x), x1 = (int)MIN(view->width - 1, MAX(a.x, b.x) + reach_x);
    int y0 = (int)MAX(0, MIN(a.y, b.y) - reach), y1 = (int)MIN(view->height - 1, MAX(a.y, b.y) + reach);
    for (int y = y0; y <= y1; y++)
        for (int x = x0; x <= x1; x++) {
            double u, v;
            rf_simulate_view_reticle(view, rf_simulate_view_unposed_px(view, pose, (RfPixel){x, y}), &u, &v);
            double inside_px = half_px - distance_to_stroke(stroke, u, v) * view->pitch_px;
            double shade = (1 - numeral_shade) * gsl_cdf_gaussian_P(inside_px, 0.6);
            float *pixel = &map[(size_t)y * (size_t)view->width + (size_t)x];
            *pixel = MIN(*pixel, (float)(1 - shade));
        }
}

void rf_simulate_reticle_draw(const RfReticle *reticle, const RfPose *pose, float *map)
{
    for (int y = 0; y < reticle->view.height; y++)
        draw_row(reticle, pose, y, map + (size_t)y * (size_t)reticle->view.width);
    for (unsigned i = 0; i < reticle->strokes->len; i++)
        draw_stroke(reticle, pose, &g_array_index(reticle->strokes, Stroke, i), map);
}

int rf_simulate_reticle_lines(const RfReticle *reticle)
{
    const RfView *view = &reticle->view;
    RfPixel edge[] = {{0, 0.5 * (view->height - 1)},
                      {view->width - 1, 0.5 * (view->height - 1)},
                      {0.5 * (view->width - 1), 0},
                      {0.5 * (view->width - 1), view->height - 1}};
    double u[4], v[4];
    for (int i = 0; i < 4; i++) rf_simulate_view_reticle(view, edge[i], &u[i], &v[i]);
    int lines = 0;
    if (has_upright(view->lines)) lines += (int)(floor(u[1]) - ceil(u[0])) + 1;
    if (has_level(view->lines)) lines += (int)(floor(v[3]) - ceil(v[2])) + 1;
    return lines;
}
