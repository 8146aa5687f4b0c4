#include "cli/fitness.h"

#include <math.h>

#include "cli/text_number.h"

/* Where a verdict changes is a matter of experience with such footage; every limit below says what it protects. */

const char *rf_fitness_verdict_to_string(RfFitnessVerdict verdict)
{
    switch (verdict) {
    case RF_FITNESS_FIT:
        return "fit";
    case RF_FITNESS_CARE:
        return "usable with care";
    case RF_FITNESS_UNFIT:
        break;
    }
    return "unfit";
}

static void line_clear(gpointer item)
{
    RfFitnessLine *line = item;
    g_free(line->figure);
    g_free(line->advice);
}

/* (takes figure) */
static void add(GArray *lines, const char *key, char *figure, RfFitnessVerdict verdict, const char *advice)
{
    const RfFitnessLine line = {key, figure, verdict, verdict == RF_FITNESS_FIT ? NULL : g_strdup(advice)};
    g_array_append_val(lines, line);
}

static double share(int64_t part, int64_t whole)
{
    return whole > 0 ? (double)part / (double)whole : 0;
}

/* ---- time ---- */

static void judge_timestamps(GArray *lines, const RfFitnessFigures *f)
{
    const int64_t wrong = f->times_missing + f->times_backwards;
    g_autoptr(GString) figure = g_string_new(NULL);
    g_string_append_printf(figure, "%.4g frames/s, %s", f->frame_rate_hz,
                           f->is_rate_constant ? "constant" : "variable");
    if (!f->is_rate_constant && f->part_exposures > 1)
        g_string_append_printf(figure, " (%.1f to %.1f ms)", 1e3 * f->interval_shortest_s,
                               1e3 * f->interval_longest_s);
    if (wrong > 0)
        g_string_append_printf(figure, ", %" G_GINT64_FORMAT " missing, %" G_GINT64_FORMAT " backwards",
                               f->times_missing, f->times_backwards);
    char *text = g_string_free(g_steal_pointer(&figure), FALSE);
    /* a hundredth of the times guessed: speeds are off by about as much */
    if (share(wrong, f->frames) > 0.01)
        add(lines, "timestamps", text, RF_FITNESS_UNFIT,
            "the file's times can't be trusted: state frame_rate= in the sheet if the camera's rate is "
            "known, else record "
            "again straight to a container that keeps times");
    else if (wrong > 0)
        add(lines, "timestamps", text, RF_FITNESS_CARE,
            "a few times were guessed from their neighbours; compare with frame_rate=");
    else if (!f->is_rate_constant && f->gaps == 0)
        add(lines, "timestamps", text, RF_FITNESS_CARE,
            "every frame's own time is used, and must be right: fix the camera's frame rate next time");
    else
        add(lines, "timestamps", text, RF_FITNESS_FIT, NULL);
}

static void judge_length(GArray *lines, const RfFitnessFigures *f)
{
    char *text = g_strdup_printf("%.1f s, %" G_GINT64_FORMAT " frames", f->duration_s, f->frames);
    /* an uncertainty goes with the root of the time watched; at 2 s a 0.5 um droplet's charge is known to 0.3 e */
    if (f->duration_s < 2)
        add(lines, "length", text, RF_FITNESS_UNFIT, "too short for any charge: record a minute or more");
    else if (f->duration_s < 20)
        add(lines, "length", text, RF_FITNESS_CARE,
            "uncertainties shrink with the root of the time: record a minute or more");
    else if (f->frame_rate_hz < 10)
        add(lines, "length", text, RF_FITNESS_CARE,
            "few frames per second: switches and crossings are seen late; 25 or more serve better");
    else
        add(lines, "length", text, RF_FITNESS_FIT, NULL);
}

static void judge_gaps(GArray *lines, const RfFitnessFigures *f)
{
    char *text = f->gaps > 0 ? g_strdup_printf("%" G_GINT64_FORMAT " times frames are left out", f->gaps)
                             : g_strdup("none");
    const double part = share(f->gaps, f->frames);
    add(lines, "gaps", text,
        part > 0.05   ? RF_FITNESS_UNFIT
        : f->gaps > 0 ? RF_FITNESS_CARE
                      : RF_FITNESS_FIT,
        "the recorder couldn't keep up: record to a faster disk, or at a lower rate or size");
}

static void judge_repeats(GArray *lines, const RfFitnessFigures *f)
{
    const double part = share(f->exposures_repeated, f->part_exposures);
    char *text = f->exposures_repeated > 0
                     ? g_strdup_printf("%" G_GINT64_FORMAT " of %" G_GINT64_FORMAT
                                       " pictures (%.2g %%) show the one before again",
                                       f->exposures_repeated, f->part_exposures, 100 * part)
                     : g_strdup("none");
    /* they are left out; where a third is, the camera was slower than the file says and the times of the rest are doubtful */
    add(lines, "repeats", text,
        part > 0.3 ? RF_FITNESS_UNFIT
        : part > 0 ? RF_FITNESS_CARE
                   : RF_FITNESS_FIT,
        "repeated pictures are left out, but when the others were taken is less sure: record at the camera's "
        "own rate");
}

static void judge_damage(GArray *lines, const RfFitnessFigures *f)
{
    const int64_t broken = f->frames_damaged + f->frames_lost;
    const double part = share(broken, f->part_frames + f->frames_lost);
    char *text = broken > 0
                     ? g_strdup_printf("%" G_GINT64_FORMAT " frames concealed, %" G_GINT64_FORMAT " lost",
                                       f->frames_damaged, f->frames_lost)
                     : g_strdup("none");
    add(lines, "damage", text,
        part > 0.05  ? RF_FITNESS_UNFIT
        : broken > 0 ? RF_FITNESS_CARE
                     : RF_FITNESS_FIT,
        "copy the file again from where it was recorded; what can't be read is left out");
}

/* ---- picture ---- */

static void judge_interlacing(GArray *lines, const RfFitnessFigures *f)
{
    const RfValue c = f->combing;
    if (f->is_interlaced) {
        add(lines, "interlacing", g_strdup("two fields a frame, and the file says so"), RF_FITNESS_FIT, NULL);
        return;
    }
    if (!(c.sigma > 0)) {
        add(lines, "interlacing",
            g_strdup(f->is_combing_untested ? "none said; risefall check tests it"
                                            : "none said; too little moves to test it"), RF_FITNESS_FIT, NULL);
        return;
    }
    g_autofree char *apart = rf_text_number_concise((RfValue){fabs(c.value), c.sigma});
    char *text = g_strdup_printf("odd and even lines %s frames apart", apart);
    /* fields are 0.5 frames apart: nearer to that than to 0, and beyond chance */
    const bool is_combed = fabs(c.value) > 0.25 && fabs(c.value) > 5 * c.sigma;
    add(lines, "interlacing", text, is_combed ? RF_FITNESS_UNFIT : RF_FITNESS_FIT,
        "frames are woven from two fields though the file says progressive: mark the file as interlaced, or "
        "capture again "
        "without deinterlacing or rescaling");
}

static void judge_picture(GArray *lines, const RfFitnessFigures *f)
{
    char *text = g_strdup_printf("%d x %d, %d bit, %s range", f->width_px, f->height_px, f->bit_depth,
                                 f->is_limited_range ? "limited" : "full");
    const int least_px = MIN(f->width_px, f->height_px);
    if (least_px < 120)
        add(lines, "picture", text, RF_FITNESS_UNFIT,
            "too small to follow a droplet for long: record at the camera's full size");
    else if (least_px < 400)
        add(lines, "picture", text, RF_FITNESS_CARE,
            "small: more pixels over the same view locate droplets better");
    else
        add(lines, "picture", text, RF_FITNESS_FIT, NULL);
}

static void judge_exposure(GArray *lines, const RfFitnessFigures *f)
{
    char *text =
        g_strdup_printf("%.2g %% of the droplets' pictures saturated, %.2g %% of the background black",
                        100 * f->saturated_share, 100 * f->black_clipped_share);
    if (f->saturated_share > 0.3)
        add(lines, "exposure", text, RF_FITNESS_UNFIT,
            "shorten the exposure or lower the gain until no droplet is white");
    else if (f->saturated_share > 0.02)
        add(lines, "exposure", text, RF_FITNESS_CARE,
            "shorten the exposure or lower the gain until no droplet is white");
    else if (f->black_clipped_share > 0.5)
        add(lines, "exposure", text, RF_FITNESS_CARE,
            "the background is cut off at black, and its noise with it: raise the black level (brightness) a "
            "little");
    else
        add(lines, "exposure", text, RF_FITNESS_FIT, NULL);
}

static void judge_noise(GArray *lines, const RfFitnessFigures *f)
{
    const double step = (double)(1 << (f->bit_depth - 8)); /* an 8-bit grey level */
    char *text = g_strdup_printf("%.2f grey levels, neighbouring pixels correlated %.2f", f->noise_sd,
                                 f->noise_correlation);
    /* below 0.29 levels, what rounding alone does, no noise is left; uncompressed noise is white */
    if (f->noise_sd < 0.29 * step)
        add(lines, "noise", text, RF_FITNESS_CARE,
            "there is no noise left: compression or the camera's denoising ate it, and faint droplets with "
            "it; switch denoising off, "
            "raise the bit rate");
    else if (f->noise_correlation > 0.7)
        add(lines, "noise", text, RF_FITNESS_UNFIT,
            "compression or denoising ate the noise, loses faint droplets and drags the others: record again "
            "with "
            "less of it");
    else if (f->noise_correlation > 0.3 && !f->is_lossless)
        add(lines, "noise", text, RF_FITNESS_CARE,
            "compression smoothed the noise, so it doesn't tell how well droplets are located: raise the bit "
            "rate");
    else if (f->noise_correlation > 0.3)
        add(lines, "noise", text, RF_FITNESS_CARE, "the camera denoises or sharpens: switch that off");
    else
        add(lines, "noise", text, RF_FITNESS_FIT, NULL);
}

static void judge_flicker(GArray *lines, const RfFitnessFigures *f)
{
    char *text = g_strdup_printf("%.2g %%", 100 * f->flicker_relative_sd);
    /* it is taken off picture by picture; beyond a tenth droplets come and go with it */
    add(lines, "flicker", text, f->flicker_relative_sd > 0.1 ? RF_FITNESS_CARE : RF_FITNESS_FIT,
        "the lamp's brightness changes: drive it with direct current");
}

static void judge_camera(GArray *lines, const RfFitnessFigures *f)
{
    char *text = f->movement_rms_px > 0
                     ? g_strdup_printf("moves %.2f px (rms), %.1f px at most, %.3f degrees",
                                       f->movement_rms_px, f->movement_longest_px, f->rotation_rms_deg)
                     : g_strdup("at rest");
    if (f->unposed_share > 0.05)
        add(lines, "camera", text, RF_FITNESS_UNFIT,
            "the reticle is lost from sight: clamp the camera to the eyepiece");
    else if (f->movement_rms_px > 0.3 || f->unposed_share > 0)
        add(lines, "camera", text, RF_FITNESS_CARE,
            "the reticle is followed in every frame and its movement taken off; clamp the camera next time");
    else
        add(lines, "camera", text, RF_FITNESS_FIT, NULL);
}

/* ---- droplets ---- */

static void judge_droplets(GArray *lines, const RfFitnessFigures *f)
{
    char *text = f->droplets > 0 ? g_strdup_printf("%u followed for %.1f s on average, %.1f in each picture",
                                                   f->droplets, f->followed_mean_s, f->droplets_per_exposure)
                                 : g_strdup("none seen");
    if (f->droplets == 0)
        add(lines, "droplets", text, RF_FITNESS_UNFIT,
            "nothing that moves like a droplet: focus on the middle between the plates, "
            "light from the side, record while droplets are in view");
    else if (f->followed_mean_s < 2)
        add(lines, "droplets", text, RF_FITNESS_CARE,
            "lost again soon: slower droplets, a wider view, more light or less compression would keep them");
    else if (f->droplets_per_exposure > 100)
        add(lines, "droplets", text, RF_FITNESS_CARE,
            "a crowd: paths are cut where droplets can't be told apart; wait until fewer are left");
    else
        add(lines, "droplets", text, RF_FITNESS_FIT, NULL);
}

static void judge_contrast(GArray *lines, const RfFitnessFigures *f)
{
    if (f->droplets == 0) {
        add(lines, "contrast", g_strdup("not known"), RF_FITNESS_UNFIT,
            "without a droplet there is nothing to measure it on");
        return;
    }
    char *text =
        g_strdup_printf("half of the droplets' pictures above %.0f times the noise, spots %.1f px wide",
                        f->snr_median, f->spot_width_px);
    /* at 5 a position is good to a twelfth of the spot's width; below 3 spots and noise can't be told apart */
    if (f->snr_median < 4)
        add(lines, "contrast", text, RF_FITNESS_UNFIT,
            "hardly above the noise: more light, or a longer exposure");
    else if (f->snr_median < 8)
        add(lines, "contrast", text, RF_FITNESS_CARE,
            "faint: more light or a longer exposure locates droplets better");
    else if (f->spot_width_px < 0.7)
        add(lines, "contrast", text, RF_FITNESS_CARE,
            "spots are smaller than a pixel can locate: magnify more, or record at full size");
    else
        add(lines, "contrast", text, RF_FITNESS_FIT, NULL);
}

/* ---- what compression does ---- */

static void judge_compression(GArray *lines, const RfFitnessFigures *f)
{
    char *text = f->is_lossless
                     ? g_strdup_printf("%s, lossless", f->codec)
                     : g_strdup_printf("%s, lossy, %.2f bit per pixel", f->codec, f->bits_per_pixel);
    add(lines, "compression", text, f->is_lossless ? RF_FITNESS_FIT : RF_FITNESS_CARE,
        "lossy compression can hide and drag droplets (see scatter, memory, lag): record lossless, or at the "
        "highest bit rate");
}

static void judge_scatter(GArray *lines, const RfFitnessFigures *f)
{
    const RfValue excess = f->excess_scatter;
    if (!(excess.sigma > 0)) {
        add(lines, "scatter", g_strdup("too small to be seen beside the droplets' own motion"),
            RF_FITNESS_FIT, NULL);
        return;
    }
    g_autofree char *number = rf_text_number_concise(excess);
    char *text = g_strdup_printf("positions scatter %s times as much as the noise explains", number);
    const double least = excess.value - 3 * excess.sigma;
    /* measured against lossless footage: 1.6 at mild compression, 4.5 and more where faint droplets drown */
    add(lines, "scatter", text,
        least > 4     ? RF_FITNESS_UNFIT
        : least > 1.3 ? RF_FITNESS_CARE
                      : RF_FITNESS_FIT,
        "stated uncertainties are widened by that; record with less compression");
}

static void judge_memory(GArray *lines, const RfFitnessFigures *f)
{
    const RfValue rho = f->error_correlation;
    g_autofree char *number = rf_text_number_concise(rho);
    char *text =
        rho.sigma > 0
            ? g_strdup_printf("errors of neighbouring frames correlated %s, %.2g %% of the steps are copies",
                              number, 100 * f->standstill_share)
            : g_strdup_printf("errors small beside the droplets' own motion, %.2g %% of the steps are copies",
                              100 * f->standstill_share);
    const bool is_correlated = rho.value > 0.3 && rho.value > 5 * rho.sigma;
    /* 7 % in the diffusion, and 4 % in a charge read from it, at a correlation of 0.5 */
    if (f->standstill_share > 0.2)
        add(lines, "memory", text, RF_FITNESS_UNFIT,
            "the encoder leaves droplets standing: record again with less compression");
    else if (is_correlated || f->standstill_share > 0.02)
        add(lines, "memory", text, RF_FITNESS_CARE,
            "errors that last pass for diffusion, and are allowed for; record with less compression");
    else
        add(lines, "memory", text, RF_FITNESS_FIT, NULL);
}

static void judge_lag(GArray *lines, const RfFitnessFigures *f)
{
    const RfValue jump = f->keyframe_jump_px;
    if (f->is_lossless || !(jump.sigma > 0)) {
        add(lines, "lag",
            g_strdup(f->is_lossless ? "none: lossless" : "too few fresh starts of the encoder to tell"),
            RF_FITNESS_FIT, NULL);
        return;
    }
    g_autofree char *leap = rf_text_number_concise(jump);
    char *text = g_strdup_printf("droplets leap %s px onwards where the encoder starts afresh", leap);
    const bool is_seen = jump.value > 3 * jump.sigma;
    /* a lag shifts switches in time, and a speed just after each reversal */
    add(lines, "lag", text,
        jump.value > fmax(0.5, 5 * jump.sigma) ? RF_FITNESS_UNFIT
        : is_seen                              ? RF_FITNESS_CARE
                                               : RF_FITNESS_FIT,
        "compression drags droplets behind their motion; record with less of it, with a keyframe every "
        "second");
}

GArray *rf_fitness_judge(const RfFitnessFigures *figures)
{
    static void (*const judges[])(GArray *, const RfFitnessFigures *) = {
        judge_timestamps, judge_length,      judge_gaps,    judge_repeats, judge_damage, judge_interlacing,
        judge_picture,    judge_exposure,    judge_noise,   judge_flicker, judge_camera, judge_droplets,
        judge_contrast,   judge_compression, judge_scatter, judge_memory,  judge_lag,
    };
    GArray *lines = g_array_new(FALSE, FALSE, sizeof(RfFitnessLine));
    g_array_set_clear_func(lines, line_clear);
    for (size_t i = 0; i < G_N_ELEMENTS(judges); i++) judges[i](lines, figures);
    return lines;
}

RfFitnessVerdict rf_fitness_overall(const GArray *lines)
{
    RfFitnessVerdict worst = RF_FITNESS_FIT;
    for (guint i = 0; i < lines->len; i++) worst = MAX(worst, g_array_index(lines, RfFitnessLine, i).verdict);
    return worst;
}
