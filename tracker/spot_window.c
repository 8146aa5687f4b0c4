#include "tracker/spot_window.h"

#include "tracker/interpolate.h"
#include "tracker/luma.h"

#include <math.h>

static const float LINE_SHADE = 0.97f;    /* less light than this comes through: a line */
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
    const uint8_t *bytes; /* its luma */
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
        .bytes = rf_luma_row(view->frame, y),
        .level = b->level + first,
        .transmission = b->transmission + first,
        .flags = b->sensor_flags + first,
    };
}

/* The pixels of one row that lie in each disc: from `left` to `right`, none where left > right. */
typedef struct {
    int left[RF_LOCALISE_MOST_SPOTS], right[RF_LOCALISE_MOST_SPOTS];
    unsigned n;
} Spans;

/* Of discs of `share` of their radius. */
static Spans span(const RfWindowDisc *discs, unsigned n, double share, double aspect, int y)
{
    Spans spans = {.n = n};
    for (unsigned i = 0; i < n; i++) {
        double radius = share * discs[i].radius_px, down = y - discs[i].y_px,
               across2 = radius * radius - down * down;
        spans.left[i] = 1, spans.right[i] = 0;
        if (across2 < 0) continue;
        double across = sqrt(across2) / aspect;
        spans.left[i] = (int)ceil(discs[i].x_px - across);
        spans.right[i] = (int)floor(discs[i].x_px + across);
    }
    return spans;
}

static bool is_within(const Spans *spans, int x)
{
    for (unsigned i = 0; i < spans->n; i++)
        if (x >= spans->left[i] && x <= spans->right[i]) return true;
    return false;
}

/* Where the run of pixels in any span ends that `x` begins; x - 1 where it lies in none. */
static int run_end(const Spans *spans, int x)
{
    int end = x - 1;
    for (bool has_grown = true; has_grown;) {
        has_grown = false;
        for (unsigned i = 0; i < spans->n; i++)
            if (spans->left[i] <= end + 1 && spans->right[i] > end) end = spans->right[i], has_grown = true;
    }
    return end;
}

/* A window's rows lie far apart in memory: all are sent for before the first is read. */
static void fetch_row(const RfExposureView *view, Box box, int y)
{
    enum { LINE_BYTES = 64 };
    const RfBackground *b = view->background;
    size_t left = (size_t)CLAMP(box.left, 0, b->width - 1), right = (size_t)CLAMP(box.right, 0, b->width - 1),
           first = (size_t)y * (size_t)b->width;
    size_t depth_bytes = view->frame->bit_depth == 8 ? 1 : 2;
    __builtin_prefetch(rf_luma_row(view->frame, y) + left * depth_bytes);
    __builtin_prefetch(rf_luma_row(view->frame, y) + right * depth_bytes);
    __builtin_prefetch(b->sensor_flags + first + left);
    for (size_t x = left; x < right + LINE_BYTES / sizeof(float); x += LINE_BYTES / sizeof(float)) {
        size_t at = first + MIN(x, right);
        __builtin_prefetch(b->level + at);
        __builtin_prefetch(b->transmission + at);
    }
}

static inline float luma_at(const Row *row, int x)
{
    return row->view->frame->bit_depth == 8 ? (float)row->bytes[x]
                                            : (float)((const uint16_t *)(const void *)row->bytes)[x];
}

static inline RfPatchPixel patch_pixel(const Row *row, int x, float seen, Ground ground)
{
    float light = row->gain * (ground.level - row->black);
    return (RfPatchPixel){
        .x_px = (float)x,
        .y_px = (float)row->y,
        .excess = seen - (light + row->black),
        .var = row->read_var + row->photon * (light > 0 ? light : 0) + ground.extra_var,
        .shade = ground.shade,
    };
}

static void take_posed_pixel(const Row *row, int x, bool is_inner, RfWindow *window, RfPatchPixel *pixels)
{
    float seen = luma_at(row, x);
    if (seen >= row->saturation) {
        window->is_saturated |= is_inner;
        return;
    }
    if (row->flags[x] & RF_PIXEL_BAD) return;
    Ground ground = ground_under_pose(row->view, x, row->y);
    if (!ground.is_known) return;
    window->has_line |= ground.shade < LINE_SHADE && is_inner;
    pixels[window->n++] = patch_pixel(row, x, seen, ground);
}

static void take_posed_run(const Row *row, int first, int end, const Spans *inner, RfWindow *window,
                           RfPatchPixel *pixels)
{
    for (int x = first; x <= end && window->n < RF_LOCALISE_MOST_PIXELS; x++)
        take_posed_pixel(row, x, is_within(inner, x), window, pixels);
}

static void note_inner(const Row *row, int first, int end, const Spans *inner, RfWindow *window)
{
    for (int x = first; x <= end; x++) {
        if (!is_within(inner, x)) continue;
        bool is_full = luma_at(row, x) >= row->saturation;
        window->is_saturated |= is_full;
        window->has_line |= !is_full && !(row->flags[x] & RF_PIXEL_BAD) && row->transmission[x] < LINE_SHADE;
    }
}

/* Every pixel is written, and the next one over it where it doesn't count: nothing to guess for the processor. */
static void take_run(const Row *row, int first, int end, const Spans *inner, RfWindow *window,
                     RfPatchPixel *pixels)
{
    unsigned n = window->n;
    bool is_noted = false;
    int x = first;
    for (; x <= end && n < RF_LOCALISE_MOST_PIXELS; x++) {
        float seen = luma_at(row, x);
        bool is_full = seen >= row->saturation, is_bad = (row->flags[x] & RF_PIXEL_BAD) != 0;
        pixels[n] = patch_pixel(row, x, seen, (Ground){row->level[x], row->transmission[x], 0, true});
        is_noted |= is_full | (row->transmission[x] < LINE_SHADE);
        n += !(is_full | is_bad);
    }
    window->n = n;
    if (is_noted) note_inner(row, first, x - 1, inner, window);
}

static void take_row(const RfExposureView *view, const RfWindowDisc *discs, unsigned n, int y,
                     RfWindow *window, RfPatchPixel *pixels)
{
    double aspect = view->background->pixel_aspect;
    Spans outer = span(discs, n, 1, aspect, y), inner = span(discs, n, 0.5, aspect, y);
    int first = G_MAXINT, last = -1;
    for (unsigned i = 0; i < n; i++) {
        if (outer.left[i] > outer.right[i]) continue;
        first = MIN(first, outer.left[i]), last = MAX(last, outer.right[i]);
    }
    Row row = row_at(view, y);
    last = MIN(last, view->frame->width - 1);
    for (int x = MAX(first, 0); x <= last; x++) {
        int end = MIN(run_end(&outer, x), last);
        if (view->is_posed)
            take_posed_run(&row, x, end, &inner, window, pixels);
        else
            take_run(&row, x, end, &inner, window, pixels);
        x = MAX(x, end);
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
    int bottom = MIN(box.bottom, height - 1);
    for (int y = top; y <= bottom && !view->is_posed; y += view->line_step) fetch_row(view, box, y);
    for (int y = top; y <= bottom; y += view->line_step) take_row(view, discs, n, y, &window, pixels);
    return window;
}
