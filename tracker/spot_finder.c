#include "tracker/spot_finder.h"

#include "tracker/contrast.h"
#include "tracker/exposure_view.h"
#include "tracker/luma.h"
#include "tracker/registration.h"
#include "tracker/spot_calibration.h"
#include "tracker/spot_detector.h"
#include "tracker/spot_fitter.h"
#include "tracker/spot_statistics.h"
#include "tracker/work_shares.h"

#include <gsl/gsl_cdf.h>
#include <math.h>
#include <string.h>

struct RfSpotFinder {
    RfBackground *background;
    RfContrast *contrast;
    RfRegistration *registration; /* NULL for a camera at rest */
    RfSpotShape *shape;
    RfSpotDetectorSettings detecting;
    RfFitterSettings fitting;
    RfSpotFinderFindings findings;
};

struct RfSpotScratch {
    RfSpotDetector *detector;
    RfSpotFitter *fitter;
    RfRegistrationScratch *registration; /* NULL for a camera at rest */
    RfCandidate candidates[RF_FITTER_MOST_CANDIDATES];
};

RfSpotScratch *rf_spot_scratch_new(const RfSpotFinder *finder)
{
    RfSpotScratch *scratch = g_new0(RfSpotScratch, 1);
    scratch->detector =
        rf_spot_detector_new(rf_contrast_width(finder->contrast), rf_contrast_height(finder->contrast));
    scratch->fitter = rf_spot_fitter_new();
    if (finder->registration) scratch->registration = rf_registration_scratch_new(finder->registration);
    if (!scratch->detector)
        g_error("no memory for a picture of %dx%d", finder->background->width, finder->background->height);
    return scratch;
}

void rf_spot_scratch_free(RfSpotScratch *scratch)
{
    if (!scratch) return;
    rf_spot_detector_free(scratch->detector);
    rf_spot_fitter_free(scratch->fitter);
    rf_registration_scratch_free(scratch->registration);
    g_free(scratch);
}

void rf_look_init(RfLook *look)
{
    memset(look, 0, sizeof *look);
    look->spots = g_array_new(false, false, sizeof(RfSpot));
}

void rf_look_clear(RfLook *look)
{
    g_clear_pointer(&look->spots, g_array_unref);
}

void rf_spot_finder_free(RfSpotFinder *finder)
{
    if (!finder) return;
    rf_contrast_free(finder->contrast);
    rf_registration_free(finder->registration);
    rf_spot_shape_free(finder->shape);
    rf_background_free(finder->background);
    g_free(finder);
}

const RfBackground *rf_spot_finder_background(const RfSpotFinder *finder)
{
    return finder->background;
}

const RfSpotFinderFindings *rf_spot_finder_findings(const RfSpotFinder *finder)
{
    return &finder->findings;
}

/* Where the camera points in this frame; false where the reticle isn't found. */
static bool find_pose(const RfSpotFinder *finder, RfSpotScratch *scratch, const RfFrame *frame, RfPose *pose)
{
    *pose = (RfPose){0};
    if (!finder->registration) return true;
    return !rf_registration_is_one_way(finder->registration) &&
           rf_registration_find(finder->registration, scratch->registration, frame, pose, NULL);
}

static RfExposureView view_exposure(const RfSpotFinder *finder, const RfFrame *frame, const RfPose *pose,
                                    unsigned field)
{
    bool is_field = finder->background->is_interlaced;
    RfExposureView view = {
        .frame = frame,
        .background = finder->background,
        .first_line = is_field ? (field == 0) != frame->is_top_field_first : 0,
        .line_step = is_field ? 2 : 1,
        .pose = *pose,
        .is_posed = finder->background->is_moving,
        .cos_angle = cos(pose->angle_rad),
        .sin_angle = sin(pose->angle_rad),
    };
    rf_lamp_measure(view.background->level, &view.background->noise, view.background->pixel_aspect, frame,
                    pose, view.first_line, view.line_step, &view.lamp);
    return view;
}

static void take_fingerprint(const RfExposureView *view, RfFingerprint *print)
{
    enum { SIDE = 32 };
    G_STATIC_ASSERT(SIDE * SIDE == RF_FINGERPRINT_PIXELS);
    int width = view->frame->width, height = view->frame->height / view->line_step;
    for (int row = 0; row < SIDE; row++)
        for (int column = 0; column < SIDE; column++) {
            int x = (2 * column + 1) * width / (2 * SIDE), y = (2 * row + 1) * height / (2 * SIDE);
            print->pixels[row * SIDE + column] =
                (uint16_t)rf_luma_at(view->frame, x, y * view->line_step + view->first_line);
        }
}

static bool search(const RfSpotFinder *finder, RfSpotScratch *scratch, const RfExposureView *view,
                   GArray *spots)
{
    rf_contrast_fill(finder->contrast, view, finder->fitting.sign,
                     rf_spot_detector_picture(scratch->detector));
    if (!rf_spot_detector_filter(scratch->detector)) return false;
    int n = rf_spot_detector_search(scratch->detector, &finder->detecting, scratch->candidates,
                                    RF_FITTER_MOST_CANDIDATES);
    rf_spot_fitter_run(scratch->fitter, &finder->fitting, view, scratch->candidates, n, spots);
    return true;
}

static bool is_right_format(const RfSpotFinder *finder, const RfFrame *frame, GError **error)
{
    const RfBackground *b = finder->background;
    if (frame->width == b->width && frame->height == b->height && frame->bit_depth == b->bit_depth)
        return true;
    g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_INVAL,
                "frame %" G_GINT64_FORMAT
                " is %dx%d of %d bit; need %dx%d of %d bit as the background was learned from",
                frame->index, frame->width, frame->height, frame->bit_depth, b->width, b->height,
                b->bit_depth);
    return false;
}

bool rf_spot_finder_look(const RfSpotFinder *finder, RfSpotScratch *scratch, const RfFrame *frame,
                         double field_interval_s, RfLook *look, GError **error)
{
    if (!is_right_format(finder, frame, error)) return false;
    RfPose pose;
    bool is_posed = find_pose(finder, scratch, frame, &pose);
    look->exposures = finder->background->is_interlaced ? 2 : 1;
    g_array_set_size(look->spots, 0);
    for (unsigned field = 0; field < look->exposures; field++) {
        RfExposureView view = view_exposure(finder, frame, &pose, field);
        unsigned first = look->spots->len;
        if (is_posed && !search(finder, scratch, &view, look->spots)) {
            g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_FAILED,
                        "frame %" G_GINT64_FORMAT " couldn't be filtered", frame->index);
            return false;
        }
        look->gain[field] = view.lamp.gain;
        look->exposure[field] = (RfExposure){
            .frame = frame->index,
            .time_s = frame->time_s + field * field_interval_s,
            .pose = pose,
            .first_spot = first,
            .spots = look->spots->len - first,
            .field = (uint8_t)field,
            .flags = (uint8_t)((frame->is_damaged ? RF_EXPOSURE_DAMAGED : 0) |
                               (is_posed ? 0 : RF_EXPOSURE_UNPOSED)),
            .coding = (uint8_t)frame->coding,
        };
        take_fingerprint(&view, &look->fingerprint[field]);
    }
    return true;
}

static double difference(const RfFingerprint *a, const RfFingerprint *b)
{
    double sum = 0;
    for (unsigned i = 0; i < RF_FINGERPRINT_PIXELS; i++) {
        double off = (double)a->pixels[i] - (double)b->pixels[i];
        sum += off * off;
    }
    return sum / RF_FINGERPRINT_PIXELS;
}

/* Every spot of the one lies where the other has it, far nearer than chance and motion would put it. */
static bool are_spots_same(const RfLook *a, unsigned i, const RfLook *b, unsigned j)
{
    const RfExposure *p = &a->exposure[i], *q = &b->exposure[j];
    if (p->spots != q->spots) return false;
    for (unsigned k = 0; k < p->spots; k++) {
        const RfSpot *s = &g_array_index(a->spots, RfSpot, p->first_spot + k);
        const RfSpot *t = &g_array_index(b->spots, RfSpot, q->first_spot + k);
        if (fabsf(s->x_px - t->x_px) > 0.1f * s->u_x_px + 1e-4f ||
            fabsf(s->y_px - t->y_px) > 0.1f * s->u_y_px + 1e-4f)
            return false;
    }
    return true;
}

void rf_spot_finder_mark_repeats(const RfSpotFinder *finder, const RfLook *previous, RfLook *look)
{
    double noise_var = finder->findings.noise_sd * finder->findings.noise_sd;
    for (unsigned i = 0; i < look->exposures; i++) {
        /* a field repeats the same field of the frame before, or (film) the other field of it */
        bool is_repeat = previous && previous->exposures == look->exposures &&
                         difference(&previous->fingerprint[i], &look->fingerprint[i]) < 0.1 * noise_var &&
                         are_spots_same(previous, i, look, i);
        look->exposure[i].flags = (uint8_t)(look->exposure[i].flags & ~RF_EXPOSURE_REPEATED);
        if (is_repeat) look->exposure[i].flags |= RF_EXPOSURE_REPEATED;
    }
}

void rf_look_append(const RfLook *look, RfSightings *sightings)
{
    for (unsigned i = 0; i < look->exposures; i++) {
        RfExposure exposure = look->exposure[i];
        exposure.first_spot += sightings->spots->len;
        g_array_append_val(sightings->exposures, exposure);
    }
    if (look->spots->len) g_array_append_vals(sightings->spots, look->spots->data, look->spots->len);
}

/* Learning */

/* One exposure of the sample. */
typedef struct {
    RfExposureView view;
    bool is_posed; /* the rest means nothing without */
    RfSpotStatistics *statistics;
    GArray *spots; /* of RfSpot, found in the last search */
} Shown;

typedef struct {
    const RfPictureSample *sample;
    RfSpotFinder *finder;
    const RfSpotFinderOptions *options;
    int fields;
    Shown *shown; /* `fields` of each frame */
} Lesson;

static void measure_noise(const Lesson *lesson, RfSpotScratch *scratch, Shown *shown)
{
    const RfContrast *contrast = lesson->finder->contrast;
    rf_contrast_fill(contrast, &shown->view, 1, rf_spot_detector_picture(scratch->detector));
    if (!rf_spot_detector_filter(scratch->detector)) return;
    for (int size = 0; size < RF_SPOT_DETECTOR_SIZES; size++) {
        int width, height;
        const float *filtered = rf_spot_detector_filtered(scratch->detector, size, &width, &height);
        rf_spot_statistics_add(shown->statistics, size, filtered, width * height, rf_contrast_width(contrast),
                               rf_spot_detector_picture(scratch->detector));
    }
    rf_spot_statistics_add_lamp(shown->statistics, shown->view.lamp.gain);
}

static void view_those(int first, int end, void *user)
{
    const Lesson *lesson = user;
    g_autoptr(RfSpotScratch) scratch = rf_spot_scratch_new(lesson->finder);
    for (int i = first; i < end; i++) {
        const RfFrame *frame = rf_picture_sample_frame(lesson->sample, (unsigned)i);
        RfPose pose;
        bool is_posed = find_pose(lesson->finder, scratch, frame, &pose);
        for (int field = 0; field < lesson->fields; field++) {
            Shown *shown = &lesson->shown[i * lesson->fields + field];
            shown->is_posed = is_posed;
            shown->spots = g_array_new(false, false, sizeof(RfSpot));
            shown->statistics = rf_spot_statistics_new();
            if (!is_posed) continue;
            shown->view = view_exposure(lesson->finder, frame, &pose, (unsigned)field);
            measure_noise(lesson, scratch, shown);
        }
    }
}

static void search_those(int first, int end, void *user)
{
    const Lesson *lesson = user;
    g_autoptr(RfSpotScratch) scratch = rf_spot_scratch_new(lesson->finder);
    for (int i = first * lesson->fields; i < end * lesson->fields; i++) {
        Shown *shown = &lesson->shown[i];
        g_array_set_size(shown->spots, 0);
        if (shown->is_posed) search(lesson->finder, scratch, &shown->view, shown->spots);
    }
}

enum { FRAMES_AT_A_TIME = 4 };

static void share_out(Lesson *lesson, RfShareJob job)
{
    rf_work_shares_run(lesson->options->threads, (int)rf_picture_sample_frames(lesson->sample),
                       FRAMES_AT_A_TIME, job, lesson);
}

static int exposures(const Lesson *lesson)
{
    return (int)rf_picture_sample_frames(lesson->sample) * lesson->fields;
}

/* So high that pure noise crosses it `false_per_exposure` times per exposure, all sizes together. */
static void set_thresholds(const Lesson *lesson, const RfSpotStatistics *statistics)
{
    RfSpotFinder *finder = lesson->finder;
    double cells = (double)rf_contrast_width(finder->contrast) * rf_contrast_height(finder->contrast);
    for (int size = 0; size < RF_SPOT_DETECTOR_SIZES; size++, cells /= 4) {
        double chance = lesson->options->false_per_exposure / (RF_SPOT_DETECTOR_SIZES * MAX(cells, 1.0));
        double sd = rf_spot_statistics_noise_sd(statistics, size);
        finder->detecting.noise_sd[size] = (float)MAX(sd, 1e-3 * rf_spot_detector_white_sd());
        finder->detecting.threshold[size] = (float)gsl_cdf_ugaussian_Qinv(MIN(chance, 0.1));
    }
    finder->fitting.least_significance = (double)finder->detecting.threshold[0];
}

static void settle_polarity(const Lesson *lesson, const RfSpotStatistics *statistics)
{
    bool is_dark = lesson->options->polarity == RF_POLARITY_DARK ||
                   (lesson->options->polarity == RF_POLARITY_FIND && rf_spot_statistics_is_dark(statistics));
    lesson->finder->fitting.sign = is_dark ? -1 : 1;
    lesson->finder->findings.is_dark = is_dark;
}

/* All spots of the last search, in order. (returns new) */
static GArray *gather_spots(const Lesson *lesson, RfSpotCalibration *calibration, unsigned *posed)
{
    GArray *spots = g_array_new(false, false, sizeof(RfSpot));
    *posed = 0;
    for (int i = 0; i < exposures(lesson); i++) {
        const Shown *shown = &lesson->shown[i];
        *posed += shown->is_posed;
        if (!shown->spots->len) continue;
        g_array_append_vals(spots, shown->spots->data, shown->spots->len);
        rf_spot_calibration_add(calibration, &shown->view, &g_array_index(shown->spots, RfSpot, 0),
                                shown->spots->len);
    }
    return spots;
}

static void use_shape(RfSpotFinder *finder, double focus_width_px, double expected_width_px)
{
    RfSpotShape *before = finder->shape;
    finder->shape =
        before ? rf_spot_shape_resized(before, focus_width_px) : rf_spot_shape_new(focus_width_px);
    rf_spot_shape_free(before);
    finder->fitting.localiser.shape = finder->shape;
    finder->fitting.localiser.expected_width_px = expected_width_px;
}

static void heed(RfSpotFinder *finder, const RfSpotLesson *lesson)
{
    RfBackground *b = finder->background;
    finder->fitting.localiser.var_factor = lesson->var_factor;
    finder->fitting.localiser.photon_var_per_level = lesson->photon_var_per_level;
    finder->fitting.u_factor = lesson->u_factor;
    for (size_t i = 0; i < (size_t)b->width * (size_t)b->height; i++)
        if (b->flags[i] & RF_PIXEL_LINE)
            b->transmission[i] =
                (float)rf_spot_calibration_shade(lesson->line_depth, (double)b->transmission[i]);
}

/* Twice: fits of the sampled exposures tell the droplets' widths, and these make the fits better, which then tell what
 * noise and lines do to a spot. */
static void learn_spots(Lesson *lesson)
{
    RfSpotFinder *finder = lesson->finder;
    for (int round = 0; round < 2; round++) {
        g_autoptr(RfSpotCalibration) calibration = rf_spot_calibration_new();
        unsigned posed;
        share_out(lesson, search_those);
        g_autoptr(GArray) spots = gather_spots(lesson, calibration, &posed);
        RfSpotWidths widths = rf_spot_statistics_widths(spots, finder->background->pixel_aspect);
        if (widths.n) use_shape(finder, widths.sharpest_px, widths.typical_px);
        rf_spot_statistics_describe(spots, posed, &finder->findings);
        if (round == 1) {
            RfSpotLesson learned = rf_spot_calibration_learn(calibration, &finder->fitting.localiser);
            heed(finder, &learned);
        }
    }
}

static RfSpotFinder *finder_on(RfBackground *background)
{
    RfSpotFinder *finder = g_new0(RfSpotFinder, 1);
    finder->background = background;
    finder->contrast = rf_contrast_new(background);
    double middle = (double)background->level[(size_t)(background->height / 2) * (size_t)background->width];
    if (background->is_moving)
        finder->registration = rf_registration_new(background->level, background->width, background->height,
                                                   background->pixel_aspect,
                                                   sqrt(rf_pixel_noise_var(&background->noise, middle)));
    finder->fitting = (RfFitterSettings){.sign = 1, .narrowest_px = 0.6, .u_factor = 1, .shape_error = 0.05};
    finder->fitting.localiser.var_factor = 1;
    finder->fitting.localiser.pixel_aspect = background->pixel_aspect;
    finder->fitting.localiser.photon_var_per_level = background->noise.photon_var_per_level;
    use_shape(finder, 1.5, 2.0);
    return finder;
}

/* What all exposures say together of noise and polarity. */
static void learn_noise(const Lesson *lesson)
{
    g_autoptr(RfSpotStatistics) statistics = rf_spot_statistics_new();
    for (int i = 0; i < exposures(lesson); i++)
        rf_spot_statistics_join(statistics, lesson->shown[i].statistics);
    rf_spot_statistics_describe_noise(statistics, lesson->finder->background, &lesson->finder->findings);
    settle_polarity(lesson, statistics);
    set_thresholds(lesson, statistics);
}

RfSpotFinder *rf_spot_finder_learn(const RfPictureSample *sample, const RfSpotFinderOptions *options,
                                   GError **error)
{
    static const RfSpotFinderOptions defaults = RF_SPOT_FINDER_DEFAULTS;
    const RfSpotFinderOptions *how = options ? options : &defaults;
    RfBackground *background = rf_background_learn(sample, how->threads, error);
    if (!background) return NULL;
    Lesson lesson = {sample, finder_on(background), how, background->is_interlaced ? 2 : 1, NULL};
    lesson.shown = g_new0(Shown, exposures(&lesson));
    share_out(&lesson, view_those);
    learn_noise(&lesson);
    learn_spots(&lesson);
    for (int i = 0; i < exposures(&lesson); i++) {
        rf_spot_statistics_free(lesson.shown[i].statistics);
        g_array_unref(lesson.shown[i].spots);
    }
    g_free(lesson.shown);
    return lesson.finder;
}
