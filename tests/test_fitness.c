#include "cli/fitness.h"

#include <gsl/gsl_errno.h>
#include <string.h>

#include "cli/fitness_text.h"

/* A recording without any fault. */
static RfFitnessFigures good(void)
{
    return (RfFitnessFigures){
        .codec = "ffv1",
        .container = "matroska,webm",
        .width_px = 640,
        .height_px = 480,
        .bit_depth = 8,
        .pixel_aspect = 1,
        .is_lossless = true,
        .bits_per_pixel = 4.2,
        .frame_rate_hz = 30,
        .is_rate_constant = true,
        .tick_s = 0.001,
        .duration_s = 60,
        .frames = 1800,
        .part_stop_s = 60,
        .part_frames = 1800,
        .part_exposures = 1800,
        .interval_shortest_s = 1.0 / 30,
        .interval_longest_s = 1.0 / 30,
        .mean_level = 40,
        .noise_sd = 2,
        .noise_correlation = 0.01,
        .droplets = 12,
        .droplets_per_exposure = 8,
        .followed_mean_s = 15,
        .snr_median = 20,
        .snr_lower_quartile = 12,
        .spot_width_px = 1.8,
        .excess_scatter = {1.02, 0.03},
        .combing = {0.01, 0.02},
    };
}

static RfFitnessLine line_of(const GArray *lines, const char *key)
{
    for (guint i = 0; i < lines->len; i++)
        if (g_str_equal(g_array_index(lines, RfFitnessLine, i).key, key))
            return g_array_index(lines, RfFitnessLine, i);
    g_error("no line %s", key);
}

/* The fault shows in its own line and in no other. */
static void assert_only(const RfFitnessFigures *figures, const char *key, RfFitnessVerdict verdict)
{
    g_autoptr(GArray) lines = rf_fitness_judge(figures);
    for (guint i = 0; i < lines->len; i++) {
        const RfFitnessLine *line = &g_array_index(lines, RfFitnessLine, i);
        const RfFitnessVerdict expected = g_str_equal(line->key, key) ? verdict : RF_FITNESS_FIT;
        if (line->verdict != expected)
            g_error("%s: %s is %s, expected %s", key, line->key, rf_fitness_verdict_to_string(line->verdict),
                    rf_fitness_verdict_to_string(expected));
        g_assert_cmpint(line->advice != NULL, ==, expected != RF_FITNESS_FIT);
        g_assert_cmpint((int)strlen(line->figure), >, 0);
    }
    g_assert_cmpint(rf_fitness_overall(lines), ==, verdict);
}

static void a_good_recording_is_fit(void)
{
    const RfFitnessFigures figures = good();
    assert_only(&figures, "timestamps", RF_FITNESS_FIT);
}

#define FAULT(key, verdict, ...)                                                                             \
    do {                                                                                                     \
        RfFitnessFigures f = good();                                                                         \
        __VA_ARGS__;                                                                                         \
        assert_only(&f, key, verdict);                                                                       \
    } while (0)

static void faults_of_time(void)
{
    FAULT("timestamps", RF_FITNESS_CARE, f.times_missing = 3);
    FAULT("timestamps", RF_FITNESS_UNFIT, f.times_backwards = 30);
    FAULT("timestamps", RF_FITNESS_CARE, f.is_rate_constant = false);
    FAULT("gaps", RF_FITNESS_CARE, f.gaps = 2; f.is_rate_constant = false);
    FAULT("gaps", RF_FITNESS_UNFIT, f.gaps = 200);
    FAULT("length", RF_FITNESS_CARE, f.duration_s = 12);
    FAULT("length", RF_FITNESS_UNFIT, f.duration_s = 1.5);
    FAULT("length", RF_FITNESS_CARE, f.frame_rate_hz = 5);
    FAULT("repeats", RF_FITNESS_CARE, f.exposures_repeated = 1);
    FAULT("repeats", RF_FITNESS_UNFIT, f.exposures_repeated = 900);
    FAULT("damage", RF_FITNESS_CARE, f.frames_damaged = 1);
    FAULT("damage", RF_FITNESS_UNFIT, f.frames_lost = 300);
}

static void faults_of_the_picture(void)
{
    FAULT("interlacing", RF_FITNESS_UNFIT, f.combing = ((RfValue){0.48, 0.03}));
    FAULT("interlacing", RF_FITNESS_UNFIT, f.combing = ((RfValue){-0.51, 0.03})); /* bottom field first */
    FAULT("interlacing", RF_FITNESS_FIT, f.combing = ((RfValue){0.4, 0.2}));      /* by chance */
    FAULT("interlacing", RF_FITNESS_FIT, f.is_interlaced = true; f.combing = ((RfValue){0, 0}));
    FAULT("picture", RF_FITNESS_CARE, f.height_px = 240);
    FAULT("picture", RF_FITNESS_UNFIT, f.height_px = 96);
    FAULT("exposure", RF_FITNESS_CARE, f.saturated_share = 0.1);
    FAULT("exposure", RF_FITNESS_UNFIT, f.saturated_share = 0.6);
    FAULT("exposure", RF_FITNESS_CARE, f.black_clipped_share = 0.9);
    FAULT("noise", RF_FITNESS_CARE, f.noise_sd = 0.14);
    FAULT("noise", RF_FITNESS_CARE, f.noise_correlation = 0.6);
    FAULT("noise", RF_FITNESS_UNFIT, f.noise_correlation = 0.8);
    FAULT("noise", RF_FITNESS_FIT, f.bit_depth = 10; f.noise_sd = 2);
    FAULT("noise", RF_FITNESS_CARE, f.bit_depth = 12; f.noise_sd = 2); /* an eighth of an 8-bit level */
    FAULT("flicker", RF_FITNESS_CARE, f.flicker_relative_sd = 0.2);
    FAULT("camera", RF_FITNESS_CARE, f.movement_rms_px = 3; f.movement_longest_px = 8);
    FAULT("camera", RF_FITNESS_UNFIT, f.movement_rms_px = 3; f.unposed_share = 0.2);
}

static void faults_of_the_droplets(void)
{
    FAULT("droplets", RF_FITNESS_CARE, f.droplets_per_exposure = 150);
    FAULT("droplets", RF_FITNESS_CARE, f.followed_mean_s = 1);
    FAULT("contrast", RF_FITNESS_CARE, f.snr_median = 6);
    FAULT("contrast", RF_FITNESS_UNFIT, f.snr_median = 3);
    FAULT("contrast", RF_FITNESS_CARE, f.spot_width_px = 0.5);
    RfFitnessFigures f = good();
    f.droplets = 0;
    g_autoptr(GArray) lines = rf_fitness_judge(&f);
    g_assert_cmpint(line_of(lines, "droplets").verdict, ==, RF_FITNESS_UNFIT);
    g_assert_cmpint(line_of(lines, "contrast").verdict, ==, RF_FITNESS_UNFIT);
}

static void faults_of_compression(void)
{
    FAULT("compression", RF_FITNESS_CARE, f.is_lossless = false);
    FAULT("scatter", RF_FITNESS_CARE, f.excess_scatter = ((RfValue){1.8, 0.1}));
    FAULT("scatter", RF_FITNESS_FIT, f.excess_scatter = ((RfValue){1.8, 0.4})); /* by chance */
    FAULT("scatter", RF_FITNESS_UNFIT, f.excess_scatter = ((RfValue){5, 0.2}));
    FAULT("memory", RF_FITNESS_CARE, f.error_correlation = ((RfValue){0.6, 0.05}));
    FAULT("memory", RF_FITNESS_FIT, f.error_correlation = ((RfValue){0.6, 0.2}));
    FAULT("memory", RF_FITNESS_UNFIT, f.standstill_share = 0.4);
}

/* Only where something was compressed away can a droplet lag. */
static void lag_needs_a_lossy_file(void)
{
    static const struct {
        RfValue jump_px;
        bool is_lossless;
        RfFitnessVerdict verdict;
    } cases[] = {
        {{0.2, 0.03}, false, RF_FITNESS_CARE}, {{0.62, 0.05}, false, RF_FITNESS_UNFIT},
        {{0.62, 0.25}, false, RF_FITNESS_FIT}, {{-0.62, 0.05}, false, RF_FITNESS_FIT},
        {{0.62, 0.05}, true, RF_FITNESS_FIT},  {{0, 0}, false, RF_FITNESS_FIT},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(cases); i++) {
        RfFitnessFigures figures = good();
        figures.is_lossless = cases[i].is_lossless;
        figures.keyframe_jump_px = cases[i].jump_px;
        g_autoptr(GArray) lines = rf_fitness_judge(&figures);
        g_assert_cmpint(line_of(lines, "lag").verdict, ==, cases[i].verdict);
    }
}

/* Scripts rely on the keys. */
static void json_has_its_keys(void)
{
    static const char *const keys[] = {
        "\"verdict\" : \"usable with care\"",
        "\"timestamps\" : {",
        "\"gaps\" : {",
        "\"interlacing\" : {",
        "\"noise_sd_grey\" : 2.0",
        "\"snr_median\" : 20.0",
        "\"frame_rate_hz\" : 29.97",
        "\"combing_frames\" : 0.01",
        "\"keyframe_jump_px\" : null",
        "\"saturated_share\" : 0.1",
        "\"width_px\" : 640",
        "\"advice\" : \"shorten the exposure",
    };
    RfFitnessFigures figures = good();
    figures.saturated_share = 0.1;
    figures.frame_rate_hz = 29.97;
    g_autoptr(GArray) lines = rf_fitness_judge(&figures);
    g_autofree char *json = rf_fitness_json("a \"b\" 1.50000.mkv", &figures, lines);
    for (size_t i = 0; i < G_N_ELEMENTS(keys); i++)
        if (!strstr(json, keys[i])) g_error("%s is not in\n%s", keys[i], json);
    g_assert_nonnull(strstr(json, "a \\\"b\\\" 1.50000.mkv")); /* names are left as they are */
}

static void text_fits_the_terminal(void)
{
    RfFitnessFigures figures = good();
    figures.is_lossless = false;
    figures.is_rate_constant = false;
    figures.saturated_share = 0.1;
    figures.standstill_share = 0.4;
    figures.droplets = 0;
    g_autoptr(GArray) lines = rf_fitness_judge(&figures);
    g_autofree char *text = rf_fitness_text("x.mkv", &figures, lines);
    g_auto(GStrv) rows = g_strsplit(text, "\n", -1);
    g_assert_cmpstr(rows[0], ==, "x.mkv: unfit");
    for (char **row = rows; *row; row++) {
        g_assert_cmpint((int)g_utf8_strlen(*row, -1), <=, 80);
        g_assert_false(g_str_has_suffix(*row, " "));
    }
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/fitness/judge/a-good-recording-is-fit", a_good_recording_is_fit);
    g_test_add_func("/fitness/judge/faults-of-time", faults_of_time);
    g_test_add_func("/fitness/judge/faults-of-the-picture", faults_of_the_picture);
    g_test_add_func("/fitness/judge/faults-of-the-droplets", faults_of_the_droplets);
    g_test_add_func("/fitness/judge/faults-of-compression", faults_of_compression);
    g_test_add_func("/fitness/judge/lag-needs-a-lossy-file", lag_needs_a_lossy_file);
    g_test_add_func("/fitness/json/has-its-keys", json_has_its_keys);
    g_test_add_func("/fitness/text/fits-the-terminal", text_fits_the_terminal);
    return g_test_run();
}
