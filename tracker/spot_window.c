#include "tracker/spot_window.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"

#include <math.h>

static const float POSE_ERROR_PX = 0.03f; /* of registration and interpolation, on a moving camera */

typedef struct {
    float level, shade, extra_var;
    bool is_known;
} Ground;

static Ground ground_under_pose(const RfExposureView *view, int x, int y)
{
    const RfBackground *b = view->background;
    double x_ref, y_ref;
    rf_exposure_view_reference(view, x, y, &x_ref, &y_ref);
    Ground ground = {0};
    if (!rf_interpolate_cubic(b->level, b->width, b->height, (float)x_ref, (float)y_ref, &ground.level))
        return ground;
    const float *p = b->level + (size_t)(y_ref + 0.5) * (size_t)b->width + (size_t)(x_ref + 0.5);
    float steep_x = 0.5f * (p[1] - p[-1]), steep_y = 0.5f * (p[b->width] - p[-b->width]);
    ground.shade = rf_interpolate_linear(b->transmission, b->width, b->height, (float)x_ref, (float)y_ref);
    ground.extra_var = POSE_ERROR_PX * POSE_ERROR_PX * (steep_x * steep_x + steep_y * steep_y);
    ground.is_known = true;
    return ground;
}

typedef struct {
    int left, right, top, bottom; /* inclusive */
} Box;

static Box enclose(const RfWindowDisc *discs, unsigned n, double aspect)
{
    Box box = {G_MAXINT, G_MININT, G_MAXINT, G_MININT};
    for (unsigned i = 0; i < n; i++) {
        double across = discs[i].radius_px / aspect, down = discs[i].radius_px;
        box.left = MIN(box.left, (int)floor(discs[i].x_px - across));
        box.right = MAX(box.right, (int)ceil(discs[i].x_px + across));
        box.top = MIN(box.top, (int)floor(discs[i].y_px - down));
        box.bottom = MAX(box.bottom, (int)ceil(discs[i].y_px + down));
    }
    return box;
}

/* What all pixels of one row have in common. */
typedef struct {
    const RfExposureView *view;
    int y;
    float gain, black, saturation, read_var, photon;
    const float *level, *transmission;
    const uint8_t *flags;
} Row;

static Row row_at(const RfExposureView *view, int y)
{
    const RfBackground *b = view->background;
    size_t first = (size_t)y * (size_t)b->width;
    return (Row){
        .view = view,
        .y = y,
        .gain = (float)rf_lamp_gain(&view->lamp, y, view->frame->height),
        .black = (float)b->noise.black_level,
        .saturation = (float)b->saturation_level,
        .read_var = (float)b->noise.read_var,
        .photon = (float)b->noise.photon_var_per_level,
        .level = b->level + first,
        .transmission = b->transmission + first,
        .flags = b->sensor_flags + first,
    };
}

static inline void take_pixel(const Row *row, int x, bool is_inner, RfWindow *window, RfPatchPixel *pixels)
{
    float seen = rf_luma_at(row->view->frame, x, row->y);
    if (seen >= row->saturation) {
        window->is_saturated |= is_inner;
        return;
    }
    if (row->flags[x] & RF_PIXEL_BAD) return;
    Ground ground = row->view->is_posed ? ground_under_pose(row->view, x, row->y)
                                        : (Ground){row->level[x], row->transmission[x], 0, true};
    if (!ground.is_known) return;
    float light = row->gain * (ground.level - row->black);
    window->has_line |= ground.shade < 0.97f && is_inner;
    pixels[window->n++] = (RfPatchPixel){
        .x_px = (float)x,
        .y_px = (float)row->y,
        .excess = seen - (light + row->black),
        .var = row->read_var + row->photon * (light > 0 ? light : 0) + ground.extra_var,
        .shade = ground.shade,
    };
}

/* The pixels of one row that lie in a disc of `share` of its radius: from `left` to `right`, none where left > right. */
static void span(const RfWindowDisc *disc, double share, double aspect, int y, int *left, int *right)
{
    double radius = share * disc->radius_px, down = y - disc->y_px, across2 = radius * radius - down * down;
    *left = 1, *right = 0;
    if (across2 < 0) return;
    double across = sqrt(across2) / aspect;
    *left = (int)ceil(disc->x_px - across);
    *right = (int)floor(disc->x_px + across);
}

static void take_row(const RfExposureView *view, const RfWindowDisc *discs, unsigned n, int y,
                     RfWindow *window, RfPatchPixel *pixels)
{
    int left[RF_LOCALISE_MOST_SPOTS], right[RF_LOCALISE_MOST_SPOTS], first = G_MAXINT, last = -1;
    int inner_left[RF_LOCALISE_MOST_SPOTS], inner_right[RF_LOCALISE_MOST_SPOTS];
    double aspect = view->background->pixel_aspect;
    for (unsigned i = 0; i < n; i++) {
        span(&discs[i], 1, aspect, y, &left[i], &right[i]);
        span(&discs[i], 0.5, aspect, y, &inner_left[i], &inner_right[i]);
        if (left[i] > right[i]) continue;
        first = MIN(first, left[i]), last = MAX(last, right[i]);
    }
    Row row = row_at(view, y);
    last = MIN(last, view->frame->width - 1);
    for (int x = MAX(first, 0); x <= last && window->n < RF_LOCALISE_MOST_PIXELS; x++) {
        bool is_inside = false, is_inner = false;
        for (unsigned i = 0; i < n; i++) {
            is_inside |= x >= left[i] && x <= right[i];
            is_inner |= x >= inner_left[i] && x <= inner_right[i];
        }
        if (is_inside) take_pixel(&row, x, is_inner, window, pixels);
    }
}

RfWindow rf_spot_window_collect(const RfExposureView *view, const RfWindowDisc *discs, unsigned n,
                                RfPatchPixel *pixels)
{
    g_assert(n <= RF_LOCALISE_MOST_SPOTS);
    RfWindow window = {0};
    int width = view->frame->width, height = view->frame->height;
    Box box = enclose(discs, n, view->background->pixel_aspect);
    window.is_cut = box.left < 0 || box.top < 0 || box.right >= width || box.bottom >= height;
    int top = MAX(box.top, 0);
    top += (view->first_line - top % view->line_step + view->line_step) % view->line_step;
    for (int y = top; y <= MIN(box.bottom, height - 1); y += view->line_step)
        take_row(view, discs, n, y, &window, pixels);
    return window;
}
