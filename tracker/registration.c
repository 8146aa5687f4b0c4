#include "tracker/registration.h"

#include "tracker/interpolate.h"
#include "tracker/luma_reduce.h"

#include <math.h>
#include <string.h>

enum {
    LEVELS = 3,        /* pictures reduced by 8, 4 and 1 */
    POINTS = 3000,     /* steep pixels used per level, at most */
    LEAST_POINTS = 60, /* fewer: nothing to hold on to */
    UNKNOWNS = 5,      /* shift x, shift y, angle, gain, offset */
    STEPS = 12,        /* Gauss-Newton steps per level, at most */
    COARSE_STEP = 10,  /* every tenth steep pixel will do for the coarse search, */
    ROUGH_STEP = 4,    /* every fourth for all steps but the last two */
    LAST_STEPS = 2,
    REACH_CELLS = 10, /* coarse search: this many pixels of the smallest picture either way */
};
static const double TRUSTED_PX = 0.2;
static const double BLURRED_SLOPE =
    0.2;                            /* sd of a slope after the finest level's blur, per noise sd of a pixel */
static const double CROSSED = 0.02; /* share of the points that lines across the others have, at least */
static const double AGREEING = 0.8; /* share of the points: a pose that needs no rival */
static const double CLEARLY = 0.05; /* so much more of them must agree with a pose further away */
static const int REDUCTION[LEVELS] = {8, 4, 1};

/* One steep pixel of a reduced reference picture; places from the picture's middle, in full-size stored pixels. */
typedef struct {
    float x_px, y_px;
    float level;
    float slope_x, slope_y; /* grey levels per full-size stored pixel */
    int column, row;        /* of the reduced picture */
} SteepPixel;

typedef struct {
    int width, height;
    unsigned n;
    SteepPixel *points;
} Level;

struct RfRegistration {
    int width, height;
    double pixel_aspect;
    double noise_sd;
    double along_x, along_y; /* unit vector along lines that run one way only; zero where they don't */
    Level levels[LEVELS];
    RfBlur blur;
};

struct RfRegistrationScratch {
    float *picture[LEVELS - 1]; /* the frame reduced; at full size it is looked at where it lies */
};

/* Mean of reduction x reduction pixels; what doesn't fill a cell at the right and bottom is left out. */
static void reduce_row(const float *const *rows, int reduction, int width, float *out)
{
    float scale = 1.0f / (float)(reduction * reduction);
    for (int i = 0; i < width; i++) {
        float sum = 0;
        for (int j = 0; j < reduction; j++)
            for (int k = 0; k < reduction; k++) sum += rows[j][i * reduction + k];
        out[i] = sum * scale;
    }
}

static void reduce(const float *image, int full_width, int reduction, int width, int height, float *out)
{
    const float *rows[8];
    for (int y = 0; y < height; y++) {
        for (int j = 0; j < reduction; j++)
            rows[j] = image + (size_t)(y * reduction + j) * (size_t)full_width;
        reduce_row(rows, reduction, width, out + (size_t)y * (size_t)width);
    }
}

/* 1 2 1 in both directions: a lone steep line becomes wide enough to be caught from two pixels away. */
static void soften(float *image, int width, int height)
{
    for (int y = 0; y < height; y++) {
        float *row = image + (size_t)y * (size_t)width, before = row[0];
        for (int x = 0; x < width - 1; x++) {
            float here = row[x];
            row[x] = 0.25f * (before + 2 * here + row[x + 1]);
            before = here;
        }
    }
    for (int x = 0; x < width; x++) {
        float *column = image + x, before = column[0];
        for (int y = 0; y < height - 1; y++, column += width) {
            float here = column[0];
            column[0] = 0.25f * (before + 2 * here + column[width]);
            before = here;
        }
    }
}

/* As rf_blur_sample, of the reference picture. */
static bool sample_blurred(const float *image, int width, int height, float x, float y, float *value)
{
    enum { REACH = 3, TAPS = 2 * REACH + 1 };
    int column = (int)lrintf(x), row = (int)lrintf(y);
    if (column < REACH || row < REACH || column >= width - REACH || row >= height - REACH) return false;
    float across[TAPS], down[TAPS], total_across = 0, total_down = 0, sum = 0;
    for (int i = 0; i < TAPS; i++) {
        float dx = (float)(column + i - REACH) - x, dy = (float)(row + i - REACH) - y;
        total_across += across[i] = expf(-0.5f * dx * dx);
        total_down += down[i] = expf(-0.5f * dy * dy);
    }
    for (int j = 0; j < TAPS; j++) {
        const float *tap = image + (size_t)(row + j - REACH) * (size_t)width + column - REACH;
        float line = 0;
        for (int i = 0; i < TAPS; i++) line += across[i] * tap[i];
        sum += down[j] * line;
    }
    *value = sum / (total_across * total_down);
    return true;
}

typedef struct {
    float steepness;
    int x, y;
} Steep;

static int by_steepness(const void *a, const void *b)
{
    const Steep *p = a, *q = b;
    if (p->steepness != q->steepness) return p->steepness > q->steepness ? -1 : 1;
    return p->y != q->y ? p->y - q->y : p->x - q->x;
}

typedef struct {
    int left, right, top, bottom; /* right and bottom exclusive */
} Tile;

static void find_steep(const Level *level, const float *image, Tile tile, float least, GArray *steep)
{
    int w = level->width;
    g_array_set_size(steep, 0);
    for (int y = tile.top; y < tile.bottom; y++)
        for (int x = tile.left; x < tile.right; x++) {
            const float *p = image + (size_t)y * (size_t)w + x;
            Steep s = {hypotf(p[1] - p[-1], p[w] - p[-w]), x, y};
            if (s.steepness > least) g_array_append_val(steep, s);
        }
    g_array_sort(steep, by_steepness);
}

static SteepPixel steep_pixel(const Level *level, const float *image, int reduction,
                              const RfRegistration *all, Steep s)
{
    int w = level->width;
    const float *p = image + (size_t)s.y * (size_t)w + s.x;
    float half = 0.5f * (float)(reduction - 1);
    return (SteepPixel){
        .x_px = (float)(s.x * reduction) + half - 0.5f * (float)(all->width - 1),
        .y_px = (float)(s.y * reduction) + half - 0.5f * (float)(all->height - 1),
        .level = p[0],
        .slope_x = 0.5f * (p[1] - p[-1]) / (float)reduction,
        .slope_y = 0.5f * (p[w] - p[-w]) / (float)reduction,
        .column = s.x,
        .row = s.y,
    };
}

/* Steep pixels evenly from all over the picture: tiles, so many from each. Of all that are steep, not the steepest: these
 * are hot pixels and droplets, and of a line always the same flank, which would turn an interpolation's blur into a shift. */
static void choose_points(Level *level, const float *image, int reduction, const RfRegistration *all)
{
    enum { ACROSS = 12, DOWN = 8, PER_TILE = POINTS / (ACROSS * DOWN) };
    g_autoptr(GArray) steep = g_array_new(false, false, sizeof(Steep));
    level->points = g_new(SteepPixel, POINTS);
    int w = level->width, h = level->height;
    float least = (float)(4 * all->noise_sd) / (float)reduction;
    for (int i = 0; i < ACROSS * DOWN; i++) {
        int column = i % ACROSS, row = i / ACROSS;
        Tile tile = {MAX(3, w * column / ACROSS), MIN(w - 3, w * (column + 1) / ACROSS),
                     MAX(3, h * row / DOWN), MIN(h - 3, h * (row + 1) / DOWN)};
        find_steep(level, image, tile, least, steep);
        unsigned n = MIN(steep->len, PER_TILE);
        for (unsigned k = 0; k < n; k++)
            level->points[level->n++] = steep_pixel(level, image, reduction, all,
                                                    g_array_index(steep, Steep, (size_t)k * steep->len / n));
    }
}

/* The finest level's values and slopes, by the very blur that frames are sampled with. */
static void blur_points(Level *level, const float *image, const RfRegistration *all)
{
    for (unsigned i = 0; i < level->n; i++) {
        SteepPixel *p = &level->points[i];
        float x = p->x_px + 0.5f * (float)(all->width - 1), y = p->y_px + 0.5f * (float)(all->height - 1);
        float left = p->level, right = p->level, above = p->level, below = p->level;
        int w = all->width, h = all->height;
        sample_blurred(image, w, h, x, y, &p->level);
        if (sample_blurred(image, w, h, x - 0.5f, y, &left) &&
            sample_blurred(image, w, h, x + 0.5f, y, &right))
            p->slope_x = right - left;
        if (sample_blurred(image, w, h, x, y - 0.5f, &above) &&
            sample_blurred(image, w, h, x, y + 0.5f, &below))
            p->slope_y = below - above;
    }
}

/* Share of the points whose slope along a direction is more than noise makes of it. */
static double share_steep(const Level *level, double x, double y, double noise_sd)
{
    unsigned steep = 0;
    for (unsigned i = 0; i < level->n; i++) {
        const SteepPixel *p = &level->points[i];
        steep += fabs((double)p->slope_x * x + (double)p->slope_y * y) > 4 * BLURRED_SLOPE * noise_sd;
    }
    return level->n ? (double)steep / level->n : 0;
}

/* The direction in which the finest level's slopes have least to say: along lines, where there is hardly a slope. */
static void find_lone_direction(RfRegistration *registration)
{
    const Level *level = &registration->levels[LEVELS - 1];
    double xx = 0, xy = 0, yy = 0;
    for (unsigned i = 0; i < level->n; i++) {
        const SteepPixel *p = &level->points[i];
        xx += (double)(p->slope_x * p->slope_x);
        xy += (double)(p->slope_x * p->slope_y);
        yy += (double)(p->slope_y * p->slope_y);
    }
    double across_rad = 0.5 * atan2(2 * xy, xx - yy), x = -sin(across_rad), y = cos(across_rad);
    if (level->n < LEAST_POINTS || share_steep(level, x, y, registration->noise_sd) > CROSSED) return;
    registration->along_x = x;
    registration->along_y = y;
}

RfRegistration *rf_registration_new(const float *image, int width, int height, double pixel_aspect,
                                    double noise_sd)
{
    RfRegistration *registration = g_new0(RfRegistration, 1);
    registration->width = width;
    registration->height = height;
    registration->pixel_aspect = pixel_aspect;
    registration->noise_sd = noise_sd;
    rf_blur_prepare(&registration->blur);
    for (int i = 0; i < LEVELS; i++) {
        Level *level = &registration->levels[i];
        level->width = width / REDUCTION[i];
        level->height = height / REDUCTION[i];
        if (level->width < 16 || level->height < 16) continue;
        g_autofree float *small = g_new(float, (size_t)level->width *(size_t)level->height);
        reduce(image, width, REDUCTION[i], level->width, level->height, small);
        soften(small, level->width, level->height);
        choose_points(level, small, REDUCTION[i], registration);
        if (REDUCTION[i] == 1) blur_points(level, image, registration);
    }
    find_lone_direction(registration);
    return registration;
}

bool rf_registration_is_one_way(const RfRegistration *registration)
{
    return registration->along_x != 0 || registration->along_y != 0;
}

void rf_registration_free(RfRegistration *registration)
{
    if (!registration) return;
    for (int i = 0; i < LEVELS; i++) g_free(registration->levels[i].points);
    g_free(registration);
}

RfRegistrationScratch *rf_registration_scratch_new(const RfRegistration *registration)
{
    RfRegistrationScratch *scratch = g_new0(RfRegistrationScratch, 1);
    for (int i = 0; i < LEVELS - 1; i++)
        scratch->picture[i] =
            g_new0(float, (size_t)registration->levels[i].width *(size_t)registration->levels[i].height + 1);
    return scratch;
}

void rf_registration_scratch_free(RfRegistrationScratch *scratch)
{
    if (!scratch) return;
    for (int i = 0; i < LEVELS - 1; i++) g_free(scratch->picture[i]);
    g_free(scratch);
}

static void fill_picture(const RfRegistration *registration, RfRegistrationScratch *scratch,
                         const RfFrame *frame, int which)
{
    const Level *level = &registration->levels[which];
    if (!level->n) return;
    rf_luma_reduce(frame, REDUCTION[which], scratch->picture[which]);
    soften(scratch->picture[which], level->width, level->height);
}

/* Correlation of the smallest pictures' steep pixels at a shift of whole pixels, or -1 where too few overlap. */
static double correlation_at(const Level *level, const float *picture, int dx, int dy)
{
    float n = 0, s_a = 0, s_b = 0, s_aa = 0, s_bb = 0, s_ab = 0;
    for (unsigned i = 0; i < level->n; i += COARSE_STEP) {
        const SteepPixel *p = &level->points[i];
        int x = p->column + dx, y = p->row + dy;
        if (x < 0 || y < 0 || x >= level->width || y >= level->height) continue;
        float a = p->level, b = picture[y * level->width + x];
        n += 1, s_a += a, s_b += b, s_aa += a * a, s_bb += b * b, s_ab += a * b;
    }
    if (n * COARSE_STEP < 0.5f * (float)level->n || n < 8) return -1;
    float var_a = s_aa - s_a * s_a / n, var_b = s_bb - s_b * s_b / n;
    return var_a > 0 && var_b > 0 ? (double)((s_ab - s_a * s_b / n) / sqrtf(var_a * var_b)) : -1;
}

/* A reticle looks nearly the same one spacing on: of shifts that fit about as well, the smallest is taken. */
static void search_coarsely(const RfRegistration *registration, const RfRegistrationScratch *scratch,
                            RfPose *pose)
{
    const Level *level = &registration->levels[0];
    double best = -2;
    for (int dy = -REACH_CELLS; level->n && dy <= REACH_CELLS; dy++)
        for (int dx = -REACH_CELLS; dx <= REACH_CELLS; dx++) {
            double score = correlation_at(level, scratch->picture[0], dx, dy) - 0.04 * hypot(dx, dy);
            if (score > best) {
                best = score;
                pose->shift_x_px = dx * REDUCTION[0];
                pose->shift_y_px = dy * REDUCTION[0];
            }
        }
}

/* Normal equations of one Gauss-Newton step. */
typedef struct {
    double matrix[UNKNOWNS][UNKNOWNS], right[UNKNOWNS];
    double weighted_square, weight;
    unsigned n;
} Normal;

static void add_equation(Normal *normal, const double row[UNKNOWNS], double residual, double weight)
{
    for (int i = 0; i < UNKNOWNS; i++) {
        for (int j = 0; j <= i; j++) normal->matrix[i][j] += weight * row[i] * row[j];
        normal->right[i] += weight * row[i] * residual;
    }
    normal->weighted_square += weight * residual * residual;
    normal->weight += weight;
    normal->n++;
}

/* No step along lines that run one way. */
static void hold(const RfRegistration *registration, Normal *normal)
{
    double(*a)[UNKNOWNS] = normal->matrix;
    double stiff = 1e4 * (a[0][0] + a[1][1]), x = registration->along_x, y = registration->along_y;
    a[0][0] += stiff * x * x;
    a[1][0] += stiff * x * y;
    a[1][1] += stiff * y * y;
}

/* Cholesky; false where the picture doesn't fix all unknowns. The inverse's first two diagonal elements come along. */
static bool solve(Normal *normal, double solution[UNKNOWNS], double variance[2])
{
    double(*a)[UNKNOWNS] = normal->matrix;
    for (int j = 0; j < UNKNOWNS; j++) {
        double before = a[j][j];
        for (int k = 0; k < j; k++) a[j][j] -= a[j][k] * a[j][k];
        if (!(a[j][j] > 1e-9 * before)) return false;
        a[j][j] = sqrt(a[j][j]);
        for (int i = j + 1; i < UNKNOWNS; i++) {
            for (int k = 0; k < j; k++) a[i][j] -= a[i][k] * a[j][k];
            a[i][j] /= a[j][j];
        }
    }
    for (int column = -1; column < 2; column++) {
        double z[UNKNOWNS];
        for (int i = 0; i < UNKNOWNS; i++) {
            z[i] = column < 0 ? normal->right[i] : i == column;
            for (int k = 0; k < i; k++) z[i] -= a[i][k] * z[k];
            z[i] /= a[i][i];
        }
        for (int i = UNKNOWNS - 1; i >= 0; i--) {
            for (int k = i + 1; k < UNKNOWNS; k++) z[i] -= a[k][i] * z[k];
            z[i] /= a[i][i];
        }
        if (column < 0)
            memcpy(solution, z, sizeof z);
        else
            variance[column] = z[column];
    }
    return true;
}

typedef struct {
    RfPose pose;
    double gain, offset;
    double scale;   /* of the residuals, grey levels */
    double support; /* share of the points that agree with the pose, 0..1 */
    double u_px;    /* of the shift */
} Guess;

/* One level's search: which points of which picture. */
typedef struct {
    const RfRegistration *registration;
    const Level *level;
    int reduction;
    const float *picture; /* reduced; NULL at full size */
    const RfFrame *frame;
    unsigned step; /* every so many-th point */
} View;

/* The reduced pictures are smooth enough as they are. */
static bool sample(const View *view, double x, double y, float *value)
{
    if (!view->picture)
        return rf_blur_sample(&view->registration->blur, view->frame, (float)x, (float)y, value);
    float half = 0.5f * (float)(view->reduction - 1), per_cell = 1 / (float)view->reduction;
    return rf_interpolate_cubic(view->picture, view->level->width, view->level->height,
                                ((float)x - half) * per_cell, ((float)y - half) * per_cell, value);
}

/* Linearised at the guess: frame(place) - gain * level - offset = -(slope . d place) * gain + ... */
static void gather(const View *view, const Guess *guess, Normal *normal)
{
    const RfRegistration *registration = view->registration;
    const Level *level = view->level;
    double aspect = registration->pixel_aspect, c = cos(guess->pose.angle_rad),
           s = sin(guess->pose.angle_rad);
    memset(normal, 0, sizeof *normal);
    for (unsigned i = 0; i < level->n; i += view->step) {
        const SteepPixel *p = &level->points[i];
        double right = (double)p->x_px * aspect, down = (double)p->y_px;
        double x = (c * right - s * down) / aspect + guess->pose.shift_x_px + 0.5 * (registration->width - 1);
        double y = s * right + c * down + guess->pose.shift_y_px + 0.5 * (registration->height - 1);
        float seen;
        if (!sample(view, x, y, &seen)) continue;
        double residual = (double)seen - guess->gain * (double)p->level - guess->offset;
        double slope_x = (double)p->slope_x * guess->gain, slope_y = (double)p->slope_y * guess->gain;
        double row[UNKNOWNS] = {-slope_x, -slope_y, slope_x * down / aspect - slope_y * right,
                                (double)p->level, 1};
        double in_scale = residual / (4.685 * guess->scale); /* Tukey's biweight, 95 % efficient */
        double weight = fabs(in_scale) < 1 ? (1 - in_scale * in_scale) * (1 - in_scale * in_scale) : 0;
        /* -slope: moving the picture by +d shows at a fixed place what lay at -d */
        if (weight > 0) add_equation(normal, row, residual, weight);
    }
}

static double residual_scale(const View *view, const Guess *guess)
{
    Guess open = *guess;
    open.scale = 1e6; /* no robust weight: all points count */
    Normal normal;
    gather(view, &open, &normal);
    return normal.n ? sqrt(normal.weighted_square / normal.weight) : 0;
}

typedef enum { LOST, MOVED, SETTLED } Step;

/* One step of Gauss-Newton. The robust scale only shrinks. */
static Step step_on(const View *view, Guess *guess)
{
    Normal normal;
    double d[UNKNOWNS] = {0}, variance[2] = {0};
    gather(view, guess, &normal);
    hold(view->registration, &normal);
    if (normal.n * view->step < LEAST_POINTS || normal.n * view->step < view->level->n / 4 ||
        !solve(&normal, d, variance))
        return LOST;
    guess->pose.shift_x_px += d[0];
    guess->pose.shift_y_px += d[1];
    guess->pose.angle_rad += d[2];
    guess->gain += d[3];
    guess->offset += d[4];
    double floor = view->registration->noise_sd / view->reduction;
    guess->scale = CLAMP(1.3 * sqrt(normal.weighted_square / normal.weight), floor, guess->scale);
    guess->u_px = sqrt(MAX(variance[0], variance[1]) * normal.weighted_square / normal.weight);
    guess->support = (double)normal.n * view->step / view->level->n;
    bool is_small = fabs(d[0]) + fabs(d[1]) < 1e-3 && fabs(d[2]) * view->registration->width < 2e-3;
    return is_small ? SETTLED : MOVED;
}

/* At one level: a few of the points find the place, at full size all of them then refine it. */
static bool refine(const RfRegistration *registration, const RfRegistrationScratch *scratch,
                   const RfFrame *frame, int which, Guess *guess)
{
    bool is_full = which == LEVELS - 1;
    View view = {registration,
                 &registration->levels[which],
                 REDUCTION[which],
                 is_full ? NULL : scratch->picture[which],
                 frame,
                 1};
    if (view.level->n > ROUGH_STEP * 300) view.step = ROUGH_STEP;
    guess->scale = MAX(registration->noise_sd / view.reduction, residual_scale(&view, guess));
    Step last = MOVED;
    for (int step = 0; step < STEPS && last == MOVED; step++) last = step_on(&view, guess);
    if (last != LOST && is_full && view.step > 1) {
        view.step = 1;
        for (int step = 0; step < LAST_STEPS && last != LOST; step++) last = step_on(&view, guess);
    }
    return last == SETTLED || (last == MOVED && guess->u_px < TRUSTED_PX);
}

/* From a first guess of the shift through the levels, from `coarsest` on. */
static bool descend(const RfRegistration *registration, const RfRegistrationScratch *scratch,
                    const RfFrame *frame, int coarsest, Guess *guess)
{
    for (int i = coarsest; i < LEVELS; i++) {
        Guess tried = *guess;
        bool is_found =
            registration->levels[i].n >= LEAST_POINTS && refine(registration, scratch, frame, i, &tried);
        if (is_found)
            *guess = tried;
        else if (i == LEVELS - 1)
            return false;
    }
    return guess->gain > 0.3 && guess->gain < 3 && guess->u_px < TRUSTED_PX;
}

static void stay_across(const RfRegistration *registration, RfPose *pose)
{
    double along = pose->shift_x_px * registration->along_x + pose->shift_y_px * registration->along_y;
    pose->shift_x_px -= along * registration->along_x;
    pose->shift_y_px -= along * registration->along_y;
}

/* A reticle looks the same one spacing on, all but its edges and numerals, so the place nearest to the reference is tried
 * first and kept if the picture agrees with it; only then is it looked for further away. */
bool rf_registration_find(const RfRegistration *registration, RfRegistrationScratch *scratch,
                          const RfFrame *frame, RfPose *pose, double *u_px)
{
    g_assert(frame->width == registration->width && frame->height == registration->height);
    Guess near = {.gain = 1}, far = {.gain = 1};
    *pose = (RfPose){0};
    fill_picture(registration, scratch, frame, 1);
    bool is_near = descend(registration, scratch, frame, 1, &near);
    if (!is_near || near.support < AGREEING) {
        fill_picture(registration, scratch, frame, 0); /* seldom needed */
        search_coarsely(registration, scratch, &far.pose);
        stay_across(registration, &far.pose);
        bool is_far = descend(registration, scratch, frame, 0, &far);
        if (!is_near && !is_far) return false;
        if (!is_near || (is_far && far.support > near.support + CLEARLY)) near = far;
    }
    *pose = near.pose;
    if (u_px) *u_px = near.u_px;
    return true;
}
