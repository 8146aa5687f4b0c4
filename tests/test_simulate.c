#include "cli/simulate.h"

#include "tracker/video_file.h"

#include <glib/gstdio.h>
#include <gsl/gsl_errno.h>
#include <math.h>
#include <string.h>

static const char small_scene[] =
    "[picture]\nwidth=128\nheight=96\nduration=8 "
    "s\npx_per_mm=300\nseed=11\nbackground=20\ndust=1\nhot_pixels=2\n"
    "[reticle]\nstill=yes\nspacing=0.0500(1) mm\n[droplets]\ncount=9\nbrightness=90..120\ncharge_steps=0.2 "
    "Hz\n"
    "[field]\noff=3..3.5 s\non=1.5..2 s\n[log]\ninterval=0.1 s\n"
    "[hand]\nentries=12\nline_miscount=2\ndigit_slip=2\nunmatched=1\n[video]\ncodec=ffv1\n";

typedef struct {
    char *folder, *scene, *out;
} Place;

static Place place_new(const char *text)
{
    Place place = {.folder = g_dir_make_tmp("simulate-XXXXXX", NULL)};
    place.scene = g_build_filename(place.folder, "a.scene", NULL);
    place.out = g_build_filename(place.folder, "out", NULL);
    g_assert_true(g_file_set_contents(place.scene, text, -1, NULL));
    return place;
}

static void remove_folder(const char *path)
{
    g_autoptr(GDir) dir = g_dir_open(path, 0, NULL);
    for (const char *name; dir && (name = g_dir_read_name(dir));) {
        g_autofree char *inside = g_build_filename(path, name, NULL);
        g_remove(inside);
    }
    g_rmdir(path);
}

static void place_clear(Place *place)
{
    remove_folder(place->out);
    remove_folder(place->folder);
    g_free(place->folder);
    g_free(place->scene);
    g_free(place->out);
}

static void simulate(const Place *place, RfSimulateSummary *summary)
{
    g_autoptr(GError) error = NULL;
    rf_simulate(place->scene, place->out, NULL, NULL, summary, &error);
    g_assert_no_error(error);
}

static char *file_in(const Place *place, const char *name, gsize *length)
{
    g_autofree char *path = g_build_filename(place->out, name, NULL);
    char *text = NULL;
    g_assert_true(g_file_get_contents(path, &text, length, NULL));
    return text;
}

static const char *const files[] = {"recording.mkv",    "sheet.ini",          "reticle.png",
                                    "timings.csv",      "volts.csv",          "truth_paths.csv",
                                    "truth_steps.csv",  "truth_droplets.csv", "truth_switches.csv",
                                    "truth_scale.json", "truth_model.json",   "truth_timings.csv"};

static void test_same_seed_same_bytes(void)
{
    Place a = place_new(small_scene), b = place_new(small_scene);
    simulate(&a, NULL);
    simulate(&b, NULL);
    for (size_t i = 0; i < G_N_ELEMENTS(files); i++) {
        gsize n, m;
        g_autofree char *left = file_in(&a, files[i], &n), *right = file_in(&b, files[i], &m);
        g_assert_cmpmem(left, n, right, m);
    }
    place_clear(&a);
    place_clear(&b);
}

static void test_other_seed_other_paths(void)
{
    g_autofree char *changed = g_strdup(small_scene);
    char *seed = strstr(changed, "seed=11");
    seed[6] = '2';
    Place a = place_new(small_scene), b = place_new(changed);
    simulate(&a, NULL);
    simulate(&b, NULL);
    g_autofree char *left = file_in(&a, "truth_paths.csv", NULL),
                    *right = file_in(&b, "truth_paths.csv", NULL);
    g_assert_cmpstr(left, !=, right);
    place_clear(&a);
    place_clear(&b);
}

/* Rows of a table without its header, split at commas. */
static GPtrArray *rows_of(const Place *place, const char *name)
{
    g_autofree char *text = file_in(place, name, NULL);
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    GPtrArray *rows = g_ptr_array_new_with_free_func((GDestroyNotify)g_strfreev);
    for (int i = 1; lines[0] && lines[i]; i++)
        if (*lines[i]) g_ptr_array_add(rows, g_strsplit(lines[i], ",", -1));
    return rows;
}

/* Brightness-weighted mean around the true place in the lossless recording. */
static bool spot_is_there(const RfFrame *frame, double x, double y, double background)
{
    double sum = 0, sx = 0, sy = 0;
    int cx = (int)rint(x), cy = (int)rint(y);
    for (int j = cy - 5; j <= cy + 5; j++)
        for (int i = cx - 5; i <= cx + 5; i++) {
            const uint8_t *row = (const uint8_t *)frame->luma + j * frame->stride_bytes;
            double light = row[i] - background;
            sum += light;
            sx += light * i;
            sy += light * j;
        }
    return sum > 300 && hypot(sx / sum - x, sy / sum - y) < 0.5;
}

static void test_recording_shows_the_truth(void)
{
    static const char text[] =
        "[picture]\nwidth=96\nheight=96\nduration=3 s\npx_per_mm=300\nseed=3\nbackground=20\n"
        "gradient=0\nphotons_per_level=1000\nread_noise=0.3\n[reticle]\nlines=none\n"
        "[motion]\ndrift=0 um/s\n[droplet one]\nx=48\ny=30\nradius=0.7 um\nunits=-1\n"
        "[field]\nswitches=0 off\n[video]\ncodec=ffv1\n";
    Place place = place_new(text);
    RfSimulateSummary summary;
    simulate(&place, &summary);
    g_assert_cmpint((int)summary.frames, ==, 90);
    g_assert_cmpint(summary.droplets, ==, 1);
    g_autoptr(GError) error = NULL;
    g_autofree char *path = g_build_filename(place.out, "recording.mkv", NULL);
    const char *paths[] = {path, NULL};
    g_autoptr(RfVideoFile) file = rf_video_file_open(paths, NULL, &error);
    g_assert_no_error(error);
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, 1, &error);
    g_assert_no_error(error);
    g_autoptr(GPtrArray) rows = rows_of(&place, "truth_paths.csv");
    RfFrame frame;
    unsigned shown = 0;
    for (unsigned i = 0; rf_video_file_next(reader, &frame, &error) == RF_VIDEO_FRAME && i < rows->len; i++) {
        char **row = g_ptr_array_index(rows, i);
        g_assert_cmpfloat_with_epsilon(g_ascii_strtod(row[2], NULL), frame.time_s, 1e-3);
        shown += spot_is_there(&frame, g_ascii_strtod(row[3], NULL), g_ascii_strtod(row[4], NULL), 20);
    }
    g_assert_cmpint((int)shown, ==, 90);
    rf_simulate_summary_clear(&summary);
    place_clear(&place);
}

static int findings(const GPtrArray *rows, const char *finding)
{
    int n = 0;
    for (unsigned i = 0; i < rows->len; i++)
        n += g_str_equal(((char **)g_ptr_array_index(rows, i))[3], finding);
    return n;
}

static void test_hand_record_has_the_planted_mistakes(void)
{
    Place place = place_new(small_scene);
    simulate(&place, NULL);
    g_autoptr(GPtrArray) truth = rows_of(&place, "truth_timings.csv"), noted = rows_of(&place, "timings.csv");
    g_assert_cmpint((int)truth->len, ==, (int)noted->len);
    g_assert_cmpint(findings(truth, "line miscount"), ==, 2);
    g_assert_cmpint(findings(truth, "digit slip"), ==, 2);
    g_assert_cmpint(findings(truth, "unmatched"), ==, 1);
    for (unsigned i = 0; i < truth->len; i++) {
        char **t = g_ptr_array_index(truth, i), **n = g_ptr_array_index(noted, i);
        double off_s = g_ascii_strtod(n[4], NULL) - g_ascii_strtod(t[2], NULL);
        if (g_str_equal(t[3], "agrees")) g_assert_cmpfloat(fabs(off_s - 0.02), <, 5 * 0.10);
        if (g_str_equal(t[3], "digit slip")) g_assert_cmpfloat(fabs(off_s), >=, 0.5);
        if (g_str_equal(t[3], "line miscount")) g_assert_cmpstr(n[3], !=, t[4]);
    }
    place_clear(&place);
}

static bool stop_early(int64_t done, int64_t total, void *user)
{
    (void)total;
    (void)user;
    return done < 5;
}

static void test_leaves_nothing_when_stopped_or_refused(void)
{
    Place place = place_new(small_scene);
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_simulate(place.scene, place.out, stop_early, NULL, NULL, &error));
    g_assert_error(error, G_FILE_ERROR, G_FILE_ERROR_INTR);
    g_assert_false(g_file_test(place.out, G_FILE_TEST_EXISTS));
    g_clear_error(&error);
    g_assert_true(g_file_set_contents(place.scene, "[picture]\nseed=1\n", -1, NULL));
    g_assert_false(rf_simulate(place.scene, place.out, NULL, NULL, NULL, &error));
    g_assert_nonnull(error);
    g_assert_false(g_file_test(place.out, G_FILE_TEST_EXISTS));
    place_clear(&place);
}

/* Every scene of the sample folder is read without complaint. */
static void test_sample_scenes_are_sound(void)
{
    g_autofree char *folder = g_build_filename(g_getenv("RISEFALL_TESTS"), "..", "sample-synthetic", NULL);
    g_autoptr(GDir) dir = g_dir_open(folder, 0, NULL);
    g_assert_nonnull(dir);
    int scenes = 0;
    for (const char *name; (name = g_dir_read_name(dir));) {
        if (!g_str_has_suffix(name, ".scene")) continue;
        g_autoptr(GError) error = NULL;
        g_autofree char *path = g_build_filename(folder, name, NULL);
        Place place = place_new("");
        g_assert_false(rf_simulate(path, place.out, stop_early, NULL, NULL, &error));
        g_assert_error(error, G_FILE_ERROR, G_FILE_ERROR_INTR);
        place_clear(&place);
        scenes++;
    }
    g_assert_cmpint(scenes, >=, 10);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate/run/same-seed-same-bytes", test_same_seed_same_bytes);
    g_test_add_func("/simulate/run/other-seed-other-paths", test_other_seed_other_paths);
    g_test_add_func("/simulate/run/recording-shows-the-truth", test_recording_shows_the_truth);
    g_test_add_func("/simulate/run/hand-record-has-the-planted-mistakes",
                    test_hand_record_has_the_planted_mistakes);
    g_test_add_func("/simulate/run/leaves-nothing-when-stopped-or-refused",
                    test_leaves_nothing_when_stopped_or_refused);
    g_test_add_func("/simulate/run/sample-scenes-are-sound", test_sample_scenes_are_sound);
    return g_test_run();
}
