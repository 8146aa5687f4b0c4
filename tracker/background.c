#include "tracker/background.h"

#include "tracker/interpolate.h"
#include "tracker/lamp.h"
#include "tracker/luma.h"
#include "tracker/registration.h"
#include "tracker/reticle_shade.h"

#include <math.h>
#include <string.h>

static const double MOVEMENT_PX = 0.1; /* less than this, rms over the sample, is a camera at rest */
static const double FLICKER = 0.002;   /* a lamp steadier than this needs no second look */

/* Everything known about the sampled frames while learning. */
typedef struct {
    const RfPictureSample *sample;
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

/* Level and variance of one pixel from its values in n frames. The median alone is a whole number in 8-bit footage: the
 * mean of what lies within `reach` of it is finer. */
static void robust_level(float *v, unsigned n, float reach, float *level, float *variance)
{
    float middle = kth_smallest(v, n, n / 2), sum = 0, square = 0, kept = 0;
    for (unsigned i = 0; i < n; i++) {
        float off = v[i] - middle;
        bool is_near = fabsf(off) <= reach;
        sum += is_near ? off : 0, square += is_near ? off * off : 0, kept += is_near ? 1.0f : 0.0f;
    }
    float mean = sum / kept;
    *level = middle + mean;
    *variance = kept > 1 ? (square - kept * mean * mean) / (kept - 1) : 0;
}

/* Row y of the reference picture as frame i shows it; false where the frame doesn't reach that far. */
static void reference_row(const Learning *learning, unsigned i, const RfBackground *background, int y,
                          const float *frame_image, float *out, bool *is_seen)
{
    const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
    int width = background->width, height = background->height;
    const RfPose *pose = &learning->poses[i];
    if (!background->is_moving) {
        rf_luma_copy_row(frame, y, out);
        memset(is_seen, true, (size_t)width);
        return;
    }
    double c = cos(pose->angle_rad), s = sin(pose->angle_rad), aspect = background->pixel_aspect;
    double centre_x = 0.5 * (width - 1), down = y - 0.5 * (height - 1);
    for (int x = 0; x < width; x++) {
        double right = (x - centre_x) * aspect;
        double at_x = (c * right - s * down) / aspect + centre_x + pose->shift_x_px;
        double at_y = s * right + c * down + 0.5 * (height - 1) + pose->shift_y_px;
        is_seen[x] = rf_interpolate_cubic(frame_image, width, height, (float)at_x, (float)at_y, &out[x]);
    }
}

/* A frame's rows are dimmed or brightened to what the background's lamp would have given. */
static void undo_lamp(const RfLamp *lamp, double black, int y, int width, int height, float *row)
{
    double gain = rf_lamp_gain(lamp, y, height);
    float scale = (float)(1 / gain), offset = (float)(black - black / gain);
    for (int x = 0; x < width; x++) row[x] = row[x] * scale + offset;
}

static float **frame_images(const Learning *learning, const RfBackground *background)
{
    if (!background->is_moving) return NULL;
    float **images = g_new(float *, learning->n);
    for (unsigned i = 0; i < learning->n; i++) {
        const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
        images[i] = g_new(float, (size_t)frame->width *(size_t)frame->height);
        for (int y = 0; y < frame->height; y++)
            rf_luma_copy_row(frame, y, images[i] + (size_t)y * (size_t)frame->width);
    }
    return images;
}

static void free_images(float **images, unsigned n)
{
    for (unsigned i = 0; images && i < n; i++) g_free(images[i]);
    g_free(images);
}

/* Fills level and variance, pixel by pixel. A pixel that no frame shows gets its left neighbour's. */
static void learn_levels(Learning *learning, RfBackground *background)
{
    int width = background->width, height = background->height;
    unsigned n = learning->n;
    g_autofree float *rows = g_new(float, n *(size_t)width), *values = g_new(float, n);
    g_autofree bool *seen = g_new(bool, n *(size_t)width);
    float **images = frame_images(learning, background);
    for (int y = 0; y < height; y++) {
        for (unsigned i = 0; i < n; i++) {
            float *row = rows + i * (size_t)width;
            reference_row(learning, i, background, y, images ? images[i] : NULL, row,
                          seen + i * (size_t)width);
            undo_lamp(&learning->lamps[i], background->noise.black_level, y, width, height, row);
        }
        float *level = background->level + (size_t)y * (size_t)width;
        float *variance = learning->variance + (size_t)y * (size_t)width;
        for (int x = 0; x < width; x++) {
            unsigned kept = 0;
            for (unsigned i = 0; i < n; i++)
                if (learning->is_usable[i] && seen[i * (size_t)width + (size_t)x])
                    values[kept++] = rows[i * (size_t)width + (size_t)x];
            if (kept >= 3)
                robust_level(values, kept, learning->reach, &level[x], &variance[x]);
            else
                level[x] = x ? level[x - 1] : y ? level[x - width] : 0, variance[x] = x ? variance[x - 1] : 0;
        }
    }
    free_images(images, n);
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

static void measure_lamps(Learning *learning, const RfBackground *background)
{
    for (unsigned i = 0; i < learning->n; i++)
        rf_lamp_measure(background->level, &background->noise, background->pixel_aspect,
                        rf_picture_sample_frame(learning->sample, i), &learning->poses[i], 0, 1,
                        &learning->lamps[i]);
}

/* Poses of all sampled frames against `level`; false where hardly any frame finds its place. */
static bool register_frames(Learning *learning, const RfBackground *background, const float *level,
                            double noise_sd)
{
    g_autoptr(RfRegistration) registration =
        rf_registration_new(level, background->width, background->height, background->pixel_aspect, noise_sd);
    g_autoptr(RfRegistrationScratch) scratch = rf_registration_scratch_new(registration);
    unsigned found = 0;
    for (unsigned i = 0; i < learning->n; i++) {
        const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
        learning->is_usable[i] =
            rf_registration_find(registration, scratch, frame, &learning->poses[i], NULL);
        found += learning->is_usable[i];
    }
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

/* Noise from the differences of neighbouring pixels in one picture: good enough to tell structure from noise. A mean
 * absolute difference of normal noise is 1.128 sd. */
static double rough_noise_sd(const float *image, size_t pixels)
{
    enum { TAKEN = 20000 };
    double sum = 0, kept = 0;
    for (size_t i = 1; i < pixels; i += MAX(pixels / TAKEN, 1)) {
        double off = fabs((double)(image[i] - image[i - 1]));
        if (off < 12) sum += off, kept++;
    }
    return kept > 0 ? MAX(0.5, sum / kept / 1.128) : 1;
}

static void settle_movement(Learning *learning, RfBackground *background)
{
    size_t pixels = (size_t)background->width * (size_t)background->height;
    g_autofree float *middle = g_new(float, pixels);
    const RfFrame *frame = rf_picture_sample_frame(learning->sample, learning->n / 2);
    for (int y = 0; y < frame->height; y++)
        rf_luma_copy_row(frame, y, middle + (size_t)y * (size_t)frame->width);
    double noise_sd = rough_noise_sd(middle, pixels);
    learning->reach = (float)MAX(2.0, 4.5 * noise_sd);
    bool is_found = register_frames(learning, background, middle, noise_sd);
    background->movement_rms_px = is_found ? movement(learning, background) : 0;
    background->is_moving = background->movement_rms_px > MOVEMENT_PX;
    if (!background->is_moving) stay_put(learning);
}

/* Pixels of the sensor that show the same excess wherever the camera points: at rest they are in `level` instead. */
static void find_sensor_pixels(const Learning *learning, RfBackground *background)
{
    int width = background->width, height = background->height;
    g_autofree float *off = g_new(float, learning->n);
    for (int y = 2; y < height - 2; y++)
        for (int x = 2; x < width - 2; x++) {
            unsigned kept = 0;
            for (unsigned i = 0; i < learning->n; i++) {
                const RfFrame *frame = rf_picture_sample_frame(learning->sample, i);
                float ring = 0.25f * (rf_luma_at(frame, x - 2, y) + rf_luma_at(frame, x + 2, y) +
                                      rf_luma_at(frame, x, y - 2) + rf_luma_at(frame, x, y + 2));
                off[kept++] = rf_luma_at(frame, x, y) - ring;
                if (kept == 3 && fabsf(off[0]) < 5 && fabsf(off[1]) < 5 && fabsf(off[2]) < 5)
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
    if (background->is_moving)
        find_sensor_pixels(learning, background);
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
    learn_levels(learning, background);
    fit_noise(learning, background);
}

static void learn(Learning *learning, RfBackground *background)
{
    settle_movement(learning, background);
    for (unsigned i = 0; i < learning->n; i++) {
        learning->lamps[i].gain = 1;
        for (int band = 0; band < RF_LAMP_BANDS; band++) learning->lamps[i].band_gain[band] = 1;
    }
    learn_levels(learning, background);
    fit_noise(learning, background);
    if (background->is_moving) check_movement(learning, background);
    measure_lamps(learning, background);
    if (background->is_moving || flicker(learning) > FLICKER) {
        learn_levels(learning, background);
        fit_noise(learning, background);
    }
    rf_reticle_shade_find(background);
    find_bad_pixels(learning, background);
}

RfBackground *rf_background_learn(const RfPictureSample *sample, GError **error)
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
    Learning learning = {sample, n, poses, is_usable, lamps, variance, 0};
    learn(&learning, background);
    return background;
}
