#include "tracker/spot_normal.h"

#include "tracker/lanes.h"
#include "tracker/wide.h"

#include <math.h>
#include <string.h>

enum { BLOCK = RF_NORMAL_BLOCK, PER_SPOT = RF_NORMAL_PER_SPOT, MOST = RF_NORMAL_MOST };
enum { X = RF_NORMAL_X, Y = RF_NORMAL_Y, PEAK = RF_NORMAL_PEAK, WIDTH = RF_NORMAL_WIDTH };

/* The profile of one spot as it stands, along the radius: the two widths of the shape's table blended once, so that a
 * pixel needs one look only. */
enum { VALUE, PER_R2, PER_WIDTH, COLUMNS };
typedef struct {
    RfLanes entries[RF_SPOT_SHAPE_ENTRIES + 2]; /* VALUE, PER_R2, PER_WIDTH, unused */
    float per_px;                               /* entries per px */
    float end;                                  /* entries beyond hold nothing */
    float x_px, y_px, peak;
} Drawn;

static RF_WITHIN void draw(const RfLocaliser *localiser, const RfPatchColumns *columns, const RfSpotFit *spot,
                           Drawn *drawn)
{
    RfSpotProfile profile = rf_spot_shape_profile(localiser->shape, spot->width_px);
    drawn->x_px = (float)(spot->x_px - columns->origin_x_px);
    drawn->y_px = (float)(spot->y_px - columns->origin_y_px);
    drawn->peak = (float)spot->peak;
    drawn->per_px = profile.per_scale * RF_SPOT_SHAPE_PER_UNIT;
    float across = fmaxf(columns->right_px - drawn->x_px, drawn->x_px - columns->left_px) *
                   (float)localiser->pixel_aspect,
          down = fmaxf(columns->bottom_px - drawn->y_px, drawn->y_px - columns->top_px);
    float reach = fminf(sqrtf(across * across + down * down) * drawn->per_px + 2, RF_SPOT_SHAPE_ENTRIES);
    float scale = profile.per_scale * profile.per_scale, per_step = 1 / profile.step_px;
    int end = (int)reach;
    for (int i = 0; i <= end; i++) {
        const float *a = profile.row + 2 * i, *b = profile.wider_row + 2 * i;
        float u = (float)i / RF_SPOT_SHAPE_PER_UNIT, wider = b[0] - a[0];
        if (profile.is_sharp)
            drawn->entries[i] = (RfLanes){a[0], a[1] * scale, -u * u * a[1] * profile.per_scale, 0};
        else
            drawn->entries[i] = (RfLanes){a[0] + profile.part * wider,
                                          (a[1] + profile.part * (b[1] - a[1])) * scale, wider * per_step, 0};
        if (drawn->entries[i][VALUE] < 1e-7f) end = i;
    }
    drawn->entries[end] = drawn->entries[end + 1] = (RfLanes){0, 0, 0, 0};
    drawn->end = (float)end;
}

RF_WIDE void rf_spot_normal_fill(RfPatchColumns *columns, const RfPatchPixel *pixels, unsigned n)
{
    columns->n = n;
    columns->padded = (n + BLOCK - 1) / BLOCK * BLOCK;
    columns->origin_x_px = (double)pixels[0].x_px, columns->origin_y_px = (double)pixels[0].y_px;
    columns->left_px = columns->right_px = columns->top_px = columns->bottom_px = 0;
    for (unsigned p = 0; p < columns->padded; p++) {
        const RfPatchPixel *pixel = &pixels[p < n ? p : n - 1];
        float x = pixel->x_px - pixels[0].x_px, y = pixel->y_px - pixels[0].y_px;
        columns->x_px[p] = x, columns->y_px[p] = y;
        columns->excess[p] = pixel->excess, columns->var[p] = pixel->var, columns->shade[p] = pixel->shade;
        columns->left_px = MIN(columns->left_px, x), columns->right_px = MAX(columns->right_px, x);
        columns->top_px = MIN(columns->top_px, y), columns->bottom_px = MAX(columns->bottom_px, y);
    }
}

RF_WIDE void rf_spot_normal_weigh(RfPatchColumns *columns, double factor, double photon_var_per_level)
{
    float f = (float)factor, photon = (float)photon_var_per_level;
    const float *var = columns->var, *model = columns->model;
    float *weight = columns->weight;
    if (photon > 0)
        for (unsigned p = 0; p < columns->padded; p++)
            weight[p] = 1 / (f * var[p] + photon * (model[p] > 0 ? model[p] : 0));
    else
        for (unsigned p = 0; p < columns->padded; p++) weight[p] = 1 / (f * var[p]);
    for (unsigned p = columns->n; p < columns->padded; p++) weight[p] = 0;
}

/* One block of pixels: gradient by unknown of the spots that reach it. */
typedef struct {
    _Alignas(16) float gradient[MOST][BLOCK];
    _Alignas(16) float model[BLOCK];
    unsigned row[MOST]; /* which unknowns `gradient` holds */
    unsigned rows;
} Block;

/* Places in the profile; false where the whole block lies beyond it. */
static RF_WITHIN bool measure_radii(const RfPatchColumns *columns, unsigned first, const Drawn *drawn,
                                    float aspect, float *dx, float *dy, float *at)
{
    float nearest = 1e30f, per_px = drawn->per_px, end = drawn->end, middle_x = drawn->x_px,
          middle_y = drawn->y_px;
    const float *x = columns->x_px + first, *y = columns->y_px + first;
    for (int j = 0; j < BLOCK; j++) {
        dx[j] = (x[j] - middle_x) * aspect, dy[j] = y[j] - middle_y;
        float u = sqrtf(dx[j] * dx[j] + dy[j] * dy[j]) * per_px;
        at[j] = u < end ? u : end;
    }
    for (int j = 0; j < BLOCK; j++) nearest = at[j] < nearest ? at[j] : nearest;
    return nearest < end;
}

static RF_WITHIN void look_up(const Drawn *drawn, const float *at, float *value, float *per_r2,
                              float *per_width)
{
    for (int j = 0; j < BLOCK; j++) {
        int i = (int)at[j];
        float t = at[j] - (float)i;
        RfLanes part = {t, t, t, t};
        RfLanes here = drawn->entries[i], mixed = here + part * (drawn->entries[i + 1] - here);
        value[j] = mixed[VALUE], per_r2[j] = mixed[PER_R2], per_width[j] = mixed[PER_WIDTH];
    }
}

static RF_WITHIN void add_spot(const RfPatchColumns *columns, unsigned first, const Drawn *drawn,
                               float aspect, unsigned which, Block *block)
{
    _Alignas(16) float dx[BLOCK], dy[BLOCK], at[BLOCK], value[BLOCK], per_r2[BLOCK], per_width[BLOCK];
    if (!measure_radii(columns, first, drawn, aspect, dx, dy, at)) return;
    look_up(drawn, at, value, per_r2, per_width);
    float(*g)[BLOCK] = block->gradient + block->rows, peak = drawn->peak;
    const float *shade = columns->shade + first;
    for (int j = 0; j < BLOCK; j++) {
        float light = shade[j] * peak, slope = -light * per_r2[j];
        g[X][j] = slope * dx[j] * aspect;
        g[Y][j] = slope * dy[j];
        g[PEAK][j] = shade[j] * value[j];
        g[WIDTH][j] = light * per_width[j];
        block->model[j] += light * value[j];
    }
    for (unsigned k = 0; k < PER_SPOT; k++) block->row[block->rows + k] = which * PER_SPOT + k;
    block->rows += PER_SPOT;
}

static RF_WITHIN void fill_block(const RfLocaliser *localiser, RfPatchColumns *columns, unsigned first,
                                 const Drawn *drawn, unsigned n, Block *block)
{
    block->rows = 0;
    memset(block->model, 0, sizeof block->model);
    for (unsigned i = 0; i < n; i++)
        add_spot(columns, first, &drawn[i], (float)localiser->pixel_aspect, i, block);
    memcpy(columns->model + first, block->model, sizeof block->model);
}

static RF_WITHIN double dot(const float *a, const float *b)
{
    return rf_lanes_total(rf_lanes_dot(a, b, BLOCK));
}

/* The block's share of all sums. The offset's gradient is 1. */
static RF_WITHIN void add_block(const RfPatchColumns *columns, unsigned first, float offset, Block *block,
                                unsigned last, RfNormal *normal)
{
    _Alignas(16) float residual[BLOCK], weighted[BLOCK];
    const float *excess = columns->excess + first, *weight = columns->weight + first;
    for (int j = 0; j < BLOCK; j++) {
        residual[j] = excess[j] - offset - block->model[j];
        weighted[j] = weight[j] * residual[j];
        block->gradient[block->rows][j] = 1;
    }
    normal->chi_square += dot(residual, weighted);
    block->row[block->rows] = last;
    for (unsigned i = 0; i <= block->rows; i++) {
        const float *g = block->gradient[i];
        double *row = normal->matrix[block->row[i]];
        normal->right[block->row[i]] += dot(g, weighted);
        _Alignas(16) float wg[BLOCK];
        for (int j = 0; j < BLOCK; j++) wg[j] = weight[j] * g[j];
        for (unsigned k = 0; k <= i; k++) row[block->row[k]] += dot(wg, block->gradient[k]);
    }
}

RF_WIDE void rf_spot_normal_gather(const RfLocaliser *localiser, RfPatchColumns *columns,
                                   const RfSpotFit *spots, unsigned n, double offset, RfNormal *normal)
{
    Drawn drawn[RF_LOCALISE_MOST_SPOTS];
    Block block;
    unsigned last = n * PER_SPOT;
    for (unsigned i = 0; i < n; i++) draw(localiser, columns, &spots[i], &drawn[i]);
    for (unsigned i = 0; i <= last; i++) {
        memset(normal->matrix[i], 0, (i + 1) * sizeof normal->matrix[i][0]);
        normal->right[i] = 0;
    }
    normal->chi_square = 0;
    for (unsigned first = 0; first < columns->padded; first += BLOCK) {
        fill_block(localiser, columns, first, drawn, n, &block);
        add_block(columns, first, (float)offset, &block, last, normal);
    }
}

RF_WIDE void rf_spot_normal_model(const RfLocaliser *localiser, RfPatchColumns *columns,
                                  const RfSpotFit *spots, unsigned n)
{
    Drawn drawn[RF_LOCALISE_MOST_SPOTS];
    Block block;
    for (unsigned i = 0; i < n; i++) draw(localiser, columns, &spots[i], &drawn[i]);
    for (unsigned first = 0; first < columns->padded; first += BLOCK)
        fill_block(localiser, columns, first, drawn, n, &block);
}
