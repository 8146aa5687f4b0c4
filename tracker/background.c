#include "tracker/background.h"

#include "tracker/lamp.h"
#include "tracker/level_stack.h"
#include "tracker/luma.h"
#include "tracker/registration.h"
#include "tracker/reticle_shade.h"
#include "tracker/work_shares.h"

#include <math.h>
#include <string.h>

static const double MOVEMENT_PX = 0.1; /* less than this, rms over the sample, is a camera at rest */
static const double FLICKER = 0.002;   /* a lamp steadier than this needs no second look */

enum { FIRST_FRAMES = 15, ROWS_AT_A_TIME = 16, FRAMES_AT_A_TIME = 4 };

/* Everything known about the sampled frames while learning. */
typedef struct {
    const RfPictureSample *sample;
    int threads;
    unsigned n;
    RfPose *poses;
    bool *is_usable; /* registration found its place; all true for a camera at rest */
    RfLamp *lamps;
    float *variance; /* per pixel, grey levels squared */
    float reach;     /* values further from a pixel's median than this aren't noise; grey levels */
} Learning;

double rf_pixel_noise_var(const RfPixelNoise *noise, double level)
{
    return noise->read_var + noise->photon_var_per_level * MAX(0.0, level - noise->black_level);
}

/* The k-th smallest of n numbers, which are reordered (Hoare 1961). */
static float kth_smallest(float *v, unsigned n, unsigned k)
{
    unsigned low = 0, high = n - 1;
    while (low < high) {
        float pivot = v[(low + high) / 2];
        unsigned i = low, j = high;
        do {
            while (v[i] < pivot) i++;
            while (v[j] > pivot) j--;
            if (i <= j) {
                float t = v[i];
                v[i++] = v[j];
                v[j] = t;
                if (!j) break;
                j--;
            }
        } while (i <= j);
        if (k <= j)
            high = j;
        else if (k >= i)
            low = i;
        else
            break;
    }
    return v[k];
}

/* Row y of the reference picture as frame i shows it, dimmed or brightened to what the background's lamp would have given. */
static void reference_row(const Learning *learning, unsigned i, const RfBackground *background, int y,
                          int16_t *out)
{
    const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
    const RfPose *pose = &learning->poses[i];
    double gain = rf_lamp_gain(&learning->lamps[i], y, background->height);
    float scale = (float)(1 / gain), black = (float)background->noise.black_level,
          offset = black - black * scale;
    if (!background->is_moving) {
        rf_level_stack_copy_row(frame, y, scale, offset, out);
        return;
    }
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad), aspect = background->pixel_aspect;
    double centre_x = 0.5 * (background->width - 1), centre_y = 0.5 * (background->height - 1);
    double right = -centre_x * aspect, down = y - centre_y;
    RfRowLine line = {
        .x_px = (c * right - s * down) / aspect + centre_x + pose->shift_x_px,
        .y_px = s * right + c * down + centre_y + pose->shift_y_px,
        .step_x = c,
        .step_y = s * aspect,
    };
    rf_level_stack_resample_row(frame, &line, scale, offset, out);
}

/* A pixel that hardly any frame shows gets its left neighbour's level, or the one above. */
static void fill_gaps(const Learning *learning, RfBackground *background, const int16_t *kept, int y)
{
    float *level = background->level + (size_t)y * (size_t)background->width;
    float *variance = learning->variance + (size_t)y * (size_t)background->width;
    const int16_t *seen = kept + (size_t)y * (size_t)background->width;
    for (int x = 0; x < background->width; x++)
        if (seen[x] < 3) {
            level[x] = x ? level[x - 1] : y ? level[-background->width] : 0;
            variance[x] = x ? variance[x - 1] : 0;
        }
}

typedef struct {
    const Learning *learning;
    RfBackground *background;
    unsigned every; /* frames taken: every so many-th */
    bool is_whole;  /* no lamp to undo, no interpolation */
    int16_t *kept;
} LevelJob;

static void learn_rows(int first, int end, void *user)
{
    const LevelJob *job = user;
    const Learning *learning = job->learning;
    size_t width = (size_t)job->background->width;
    g_autofree int16_t *rows = g_new0(int16_t, (learning->n + 1) * width + 64);
    for (int y = first; y < end; y++) {
        int n = 0;
        for (unsigned i = 0; i < learning->n; i += job->every)
            if (learning->is_usable[i])
                reference_row(learning, i, job->background, y, rows + (size_t)n++ * width);
        RfLevelStack stack = {.rows = rows,
                              .n = n,
                              .width = job->background->width,
                              .bit_depth = job->background->bit_depth,
                              .is_whole = job->is_whole,
                              .reach = learning->reach};
        size_t at = (size_t)y * width;
        rf_level_stack_reduce(&stack, job->background->level + at, learning->variance + at, job->kept + at);
    }
}

static bool is_any_lamp_off(const Learning *learning)
{
    for (unsigned i = 0; i < learning->n; i++)
        for (int band = 0; band < RF_LAMP_BANDS; band++)
            if (learning->lamps[i].band_gain[band] != 1) return true;
    return false;
}

/* Fills level and variance from every so many-th frame. */
static void learn_levels(Learning *learning, RfBackground *background, unsigned every)
{
    g_autofree int16_t *kept = g_new0(int16_t, (size_t)background->width * (size_t)background->height);
    LevelJob job = {learning, background, every, !background->is_moving && !is_any_lamp_off(learning), kept};
    rf_work_shares_run(learning->threads, background->height, ROWS_AT_A_TIME, learn_rows, &job);
    for (int y = 0; y < background->height; y++) fill_gaps(learning, background, kept, y);
}

static int by_value(const void *a, const void *b)
{
    float p = *(const float *)a, q = *(const float *)b;
    return p < q ? -1 : p > q;
}

/* Straight line of the pixels' variance against their level: medians of twenty equal shares, both ends not negative. */
static void fit_noise(const Learning *learning, RfBackground *background)
{
    enum { SHARES = 20 };
    size_t pixels = (size_t)background->width * (size_t)background->height, step = MAX(pixels / 40000, 1);
    g_autofree float *levels = g_new(float, pixels / step + 1), *sorted = g_new(float, pixels / step + 1);
    g_autofree float *in_share = g_new(float, pixels / step + 1);
    size_t n = 0;
    for (size_t i = 0; i < pixels; i += step) levels[n] = sorted[n] = background->level[i], n++;
    qsort(sorted, n, sizeof *sorted, by_value);
    double s_w = 0, s_x = 0, s_y = 0, s_xx = 0, s_xy = 0;
    for (int share = 0; share < SHARES; share++) {
        float low = sorted[n * (size_t)share / SHARES],
              high = sorted[MIN(n * (size_t)(share + 1) / SHARES, n - 1)];
        size_t kept = 0;
        double mean = 0;
        for (size_t k = 0; k < n; k++)
            if (levels[k] >= low && levels[k] <= high)
                in_share[kept++] = learning->variance[k * step], mean += (double)levels[k];
        if (kept < 10) continue;
        double x = mean / (double)kept - background->noise.black_level;
        double y = (double)kth_smallest(in_share, (unsigned)kept, (unsigned)kept / 2);
        double w = (double)kept;
        s_w += w, s_x += w * x, s_y += w * y, s_xx += w * x * x, s_xy += w * x * y;
    }
    double spread = s_xx - s_x * s_x / s_w;
    double slope = spread > 1e-6 * s_xx ? MAX(0.0, (s_xy - s_x * s_y / s_w) / spread) : 0;
    slope = s_x > 0 ? MIN(slope, s_y / s_x) : 0;
    /* a median of sample variances lies below their mean by (1 - 2/9k)^3, k degrees of freedom (Wilson, Hilferty 1931);
     * 1/12: rounding to whole levels */
    double to_mean = 1 / pow(1 - 2 / (9.0 * (learning->n - 1)), 3);
    background->noise.photon_var_per_level = slope * to_mean;
    background->noise.read_var = MAX((s_y - slope * s_x) / s_w * to_mean, 1.0 / 12);
}

static double flicker(const Learning *learning)
{
    double most = 0;
    for (unsigned i = 0; i < learning->n; i++)
        for (int band = 0; band < RF_LAMP_BANDS; band++)
            most = MAX(most, fabs(learning->lamps[i].band_gain[band] - 1));
    return most;
}

/* For the frames of the sample, each by itself. */
typedef struct {
    Learning *learning;
    const RfBackground *background;
    const RfRegistration *registration;
} FrameJob;

static void measure_lamps_of(int first, int end, void *user)
{
    const FrameJob *job = user;
    const RfBackground *background = job->background;
    for (int i = first; i < end; i++)
        rf_lamp_measure(background->level, &background->noise, background->pixel_aspect,
                        rf_picture_sample_frame(job->learning->sample, (unsigned)i), &job->learning->poses[i],
                        0, 1, &job->learning->lamps[i]);
}

static void measure_lamps(Learning *learning, const RfBackground *background)
{
    FrameJob job = {learning, background, NULL};
    rf_work_shares_run(learning->threads, (int)learning->n, FRAMES_AT_A_TIME, measure_lamps_of, &job);
}

static void register_those(int first, int end, void *user)
{
    const FrameJob *job = user;
    Learning *learning = job->learning;
    g_autoptr(RfRegistrationScratch) scratch = rf_registration_scratch_new(job->registration);
    for (int i = first; i < end; i++)
        learning->is_usable[i] = rf_registration_find(job->registration, scratch,
                                                      rf_picture_sample_frame(learning->sample, (unsigned)i),
                                                      &learning->poses[i], NULL);
}

/* Poses of all sampled frames against `level`; false where hardly any frame finds its place. */
static bool register_frames(Learning *learning, const RfBackground *background, const float *level,
                            double noise_sd)
{
    g_autoptr(RfRegistration) registration =
        rf_registration_new(level, background->width, background->height, background->pixel_aspect, noise_sd);
    FrameJob job = {learning, background, registration};
    rf_work_shares_run(learning->threads, (int)learning->n, FRAMES_AT_A_TIME, register_those, &job);
    unsigned found = 0;
    for (unsigned i = 0; i < learning->n; i++) found += learning->is_usable[i];
    return found >= MAX(3u, learning->n / 2);
}

static double movement(const Learning *learning, const RfBackground *background)
{
    double square = 0, x = 0, y = 0, turn = 0;
    unsigned n = 0;
    for (unsigned i = 0; i < learning->n; i++)
        if (learning->is_usable[i]) {
            const RfPose *pose = &learning->poses[i];
            double swing = pose->angle_rad * background->width / 4;
            square +=
                pose->shift_x_px * pose->shift_x_px + pose->shift_y_px * pose->shift_y_px + swing * swing;
            x += pose->shift_x_px, y += pose->shift_y_px, turn += swing, n++;
        }
    return n ? sqrt(MAX(0.0, square / n - (x * x + y * y + turn * turn) / ((double)n * n))) : 0;
}

static void stay_put(Learning *learning)
{
    memset(learning->poses, 0, learning->n * sizeof *learning->poses);
    memset(learning->is_usable, true, learning->n * sizeof *learning->is_usable);
}

/* How many of the file's grey levels one level at 8 bit is. */
static double levels_of_8_bit(int bit_depth)
{
    return ldexp(1, bit_depth - 8);
}

/* Noise from the differences of neighbouring pixels in one picture: good enough to tell structure from noise. A mean
 * absolute difference of normal noise is 1.128 sd. */
static double rough_noise_sd(const float *image, size_t pixels, int bit_depth)
{
    enum { TAKEN = 20000 };
    double unit = levels_of_8_bit(bit_depth);
    double sum = 0, kept = 0;
    for (size_t i = 1; i < pixels; i += MAX(pixels / TAKEN, 1)) {
        double off = fabs((double)(image[i] - image[i - 1]));
        if (off < 12 * unit) sum += off, kept++;
    }
    return kept > 0 ? MAX(0.5 * unit, sum / kept / 1.128) : unit;
}

static void settle_movement(Learning *learning, RfBackground *background)
{
    size_t pixels = (size_t)background->width * (size_t)background->height;
    g_autofree float *middle = g_new(float, pixels);
    const RfFrame *frame = rf_picture_sample_frame(learning->sample, learning->n / 2);
    for (int y = 0; y < frame->height; y++)
        rf_luma_copy_row(frame, y, middle + (size_t)y * (size_t)frame->width);
    double noise_sd = rough_noise_sd(middle, pixels, background->bit_depth);
    learning->reach = (float)MAX(2 * levels_of_8_bit(background->bit_depth), 4.5 * noise_sd);
    bool is_found = register_frames(learning, background, middle, noise_sd);
    background->movement_rms_px = is_found ? movement(learning, background) : 0;
    background->is_moving = background->movement_rms_px > MOVEMENT_PX;
    if (!background->is_moving) stay_put(learning);
}

/* Pixels of the sensor that show the same excess wherever the camera points: at rest they are in `level` instead. */
static void find_sensor_pixels(int first, int end, void *user)
{
    const LevelJob *job = user;
    const Learning *learning = job->learning;
    RfBackground *background = job->background;
    int width = background->width, height = background->height;
    g_autofree float *off = g_new(float, learning->n);
    float least = (float)(5 * levels_of_8_bit(background->bit_depth));
    for (int y = MAX(first, 2); y < MIN(end, height - 2); y++)
        for (int x = 2; x < width - 2; x++) {
            unsigned kept = 0;
            for (unsigned i = 0; i < learning->n; i++) {
                const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
                float ring = 0.25f * (rf_luma_at(frame, x - 2, y) + rf_luma_at(frame, x + 2, y) +
                                      rf_luma_at(frame, x, y - 2) + rf_luma_at(frame, x, y + 2));
                off[kept++] = rf_luma_at(frame, x, y) - ring;
                if (kept == 3 && fabsf(off[0]) < least && fabsf(off[1]) < least && fabsf(off[2]) < least)
                    break; /* nothing sticks out: not worth a median */
            }
            if (kept < learning->n) continue;
            double limit =
                6 * sqrt(rf_pixel_noise_var(&background->noise, (double)background->level[y * width + x]));
            if (fabs((double)kth_smallest(off, kept, kept / 2)) > limit)
                background->sensor_flags[y * width + x] |= RF_PIXEL_BAD;
        }
}

/* Flickering pixels, and those far brighter than all around them: a speck or a hot pixel. */
static void find_bad_pixels(const Learning *learning, RfBackground *background)
{
    int width = background->width, height = background->height;
    for (int y = 1; y < height - 1; y++)
        for (int x = 1; x < width - 1; x++) {
            size_t i = (size_t)y * (size_t)width + (size_t)x;
            const float *p = background->level + i;
            double var = rf_pixel_noise_var(&background->noise, (double)p[0]);
            float around = 0.25f * (p[-1] + p[1] + p[-width] + p[width]);
            bool sticks_out = (double)(p[0] - around) > 5 * sqrt(var);
            bool flickers = (double)learning->variance[i] > 6 * var && !background->is_moving;
            if (sticks_out || flickers || (double)p[0] >= background->saturation_level)
                background->flags[i] |= RF_PIXEL_BAD;
        }
    LevelJob job = {.learning = learning, .background = background};
    if (background->is_moving)
        rf_work_shares_run(learning->threads, height, ROWS_AT_A_TIME, find_sensor_pixels, &job);
    else
        memcpy(background->sensor_flags, background->flags, (size_t)width * (size_t)height);
}

static RfBackground *background_new(const RfPictureSample *sample)
{
    const RfFrame *frame = rf_picture_sample_frame(sample, 0);
    size_t pixels = (size_t)frame->width * (size_t)frame->height;
    RfBackground *background = g_new0(RfBackground, 1);
    background->width = frame->width;
    background->height = frame->height;
    background->bit_depth = frame->bit_depth;
    background->pixel_aspect = rf_picture_sample_pixel_aspect(sample);
    background->is_interlaced = frame->is_interlaced;
    background->is_top_field_first = frame->is_top_field_first;
    double full = (double)(1 << frame->bit_depth);
    background->saturation_level = frame->is_limited_range ? full * 235 / 256 : full - 1;
    background->noise = (RfPixelNoise){.read_var = 1, .black_level = rf_luma_black_level(frame)};
    background->level = g_new0(float, pixels);
    background->transmission = g_new0(float, pixels);
    background->flags = g_new0(uint8_t, pixels);
    background->sensor_flags = g_new0(uint8_t, pixels);
    return background;
}

void rf_background_free(RfBackground *background)
{
    if (!background) return;
    g_free(background->level);
    g_free(background->transmission);
    g_free(background->flags);
    g_free(background->sensor_flags);
    g_free(background);
}

/* The median is a better reference than one noisy frame: against it, what looked like movement may turn out as noise. */
static void check_movement(Learning *learning, RfBackground *background)
{
    double noise_sd = sqrt(rf_pixel_noise_var(&background->noise, (double)background->level[0]));
    bool is_found = register_frames(learning, background, background->level, noise_sd);
    background->movement_rms_px = is_found ? movement(learning, background) : 0;
    background->is_moving = background->movement_rms_px > MOVEMENT_PX;
    if (background->is_moving) return;
    stay_put(learning);
    learn_levels(learning, background, 1);
    fit_noise(learning, background);
}

static void learn(Learning *learning, RfBackground *background)
{
    settle_movement(learning, background);
    for (unsigned i = 0; i < learning->n; i++) {
        learning->lamps[i].gain = 1;
        for (int band = 0; band < RF_LAMP_BANDS; band++) learning->lamps[i].band_gain[band] = 1;
    }
    /* the first picture of a moving camera only has to be better than one frame */
    learn_levels(learning, background, background->is_moving ? MAX(1u, learning->n / FIRST_FRAMES) : 1);
    fit_noise(learning, background);
    if (background->is_moving) check_movement(learning, background);
    measure_lamps(learning, background);
    if (background->is_moving || flicker(learning) > FLICKER) {
        learn_levels(learning, background, 1);
        fit_noise(learning, background);
    }
    rf_reticle_shade_find(background);
    find_bad_pixels(learning, background);
}

RfBackground *rf_background_learn(const RfPictureSample *sample, int threads, GError **error)
{
    unsigned n = rf_picture_sample_frames(sample);
    if (n < 8) {
        g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_INVAL,
                    "%u frames to learn the background from; need 8 or more", n);
        return NULL;
    }
    RfBackground *background = background_new(sample);
    size_t pixels = (size_t)background->width * (size_t)background->height;
    g_autofree RfPose *poses = g_new0(RfPose, n);
    g_autofree bool *is_usable = g_new0(bool, n);
    g_autofree RfLamp *lamps = g_new0(RfLamp, n);
    g_autofree float *variance = g_new0(float, pixels);
    Learning learning = {sample, threads, n, poses, is_usable, lamps, variance, 0};
    learn(&learning, background);
    return background;
}
