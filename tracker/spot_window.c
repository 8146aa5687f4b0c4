#include "tracker/spot_window.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"

#include <math.h>

static const double POSE_ERROR_PX = 0.03; /* of registration and interpolation, on a moving camera */

typedef struct {
    double level, shade, extra_var;
    bool is_known;
} Ground;

static Ground ground_at_rest(const RfBackground *b, int x, int y)
{
    size_t i = (size_t)y * (size_t)b->width + (size_t)x;
    return (Ground){(double)b->level[i], (double)b->transmission[i], 0, true};
}

static Ground ground_under_pose(const RfExposureView *view, int x, int y)
{
    const RfBackground *b = view->background;
    double x_ref, y_ref;
    rf_exposure_view_reference(view, x, y, &x_ref, &y_ref);
    Ground ground = {0};
    float level;
    if (!rf_interpolate_cubic(b->level, b->width, b->height, (float)x_ref, (float)y_ref, &level))
        return ground;
    const float *p = b->level + (size_t)(y_ref + 0.5) * (size_t)b->width + (size_t)(x_ref + 0.5);
    double steep_x = 0.5 * (double)(p[1] - p[-1]), steep_y = 0.5 * (double)(p[b->width] - p[-b->width]);
    ground.level = (double)level;
    ground.shade =
        (double)rf_interpolate_linear(b->transmission, b->width, b->height, (float)x_ref, (float)y_ref);
    ground.extra_var = POSE_ERROR_PX * POSE_ERROR_PX * (steep_x * steep_x + steep_y * steep_y);
    ground.is_known = true;
    return ground;
}

/* How deep in the discs: 1 at a middle, 0 at a rim, negative outside all of them. */
static double depth_at(const RfWindowDisc *discs, unsigned n, double aspect, double x, double y)
{
    double deepest = -1;
    for (unsigned i = 0; i < n; i++) {
        double away = hypot((x - discs[i].x_px) * aspect, y - discs[i].y_px);
        deepest = fmax(deepest, 1 - away / discs[i].radius_px);
    }
    return deepest;
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

static void take_pixel(const RfExposureView *view, int x, int y, double gain, double depth, RfWindow *window,
                       RfPatchPixel *pixels)
{
    const RfBackground *b = view->background;
    double seen = (double)rf_luma_at(view->frame, x, y), black = b->noise.black_level;
    if (seen >= b->saturation_level) {
        window->is_saturated |= depth > 0.5;
        return;
    }
    if (b->sensor_flags[(size_t)y * (size_t)b->width + (size_t)x] & RF_PIXEL_BAD) return;
    Ground ground = view->is_posed ? ground_under_pose(view, x, y) : ground_at_rest(b, x, y);
    if (!ground.is_known) return;
    double level = gain * (ground.level - black) + black;
    window->has_line |= ground.shade < 0.97 && depth > 0.5;
    pixels[window->n++] = (RfPatchPixel){
        .x_px = (float)x,
        .y_px = (float)y,
        .excess = (float)(seen - level),
        .var = (float)(rf_pixel_noise_var(&b->noise, level) + ground.extra_var),
        .shade = (float)ground.shade,
    };
}

RfWindow rf_spot_window_collect(const RfExposureView *view, const RfWindowDisc *discs, unsigned n,
                                RfPatchPixel *pixels)
{
    RfWindow window = {0};
    int width = view->frame->width, height = view->frame->height;
    double aspect = view->background->pixel_aspect;
    Box box = enclose(discs, n, aspect);
    window.is_cut = box.left < 0 || box.top < 0 || box.right >= width || box.bottom >= height;
    int top = MAX(box.top, 0);
    top += (view->first_line - top % view->line_step + view->line_step) % view->line_step;
    for (int y = top; y <= MIN(box.bottom, height - 1); y += view->line_step) {
        double gain = rf_lamp_gain(&view->lamp, y, height);
        for (int x = MAX(box.left, 0); x <= MIN(box.right, width - 1); x++) {
            double depth = depth_at(discs, n, aspect, x, y);
            if (depth >= 0 && window.n < RF_LOCALISE_MOST_PIXELS)
                take_pixel(view, x, y, gain, depth, &window, pixels);
        }
    }
    return window;
}
