#include "cli/simulate_scene.h"

#include "cli/simulate_sheet.h"

#include <glib/gstdio.h>
#include <gsl/gsl_errno.h>
#include <string.h>

static const char whole[] = "[picture]\nduration=2 s\npx_per_mm=400\nseed=5\n";

/* Loads a scene made of `whole` and more lines. (returns new) */
static RfScene *load(const char *more, GError **error)
{
    g_autofree char *path = NULL;
    int file = g_file_open_tmp("scene-XXXXXX", &path, NULL);
    g_assert_cmpint(file, >=, 0);
    g_autofree char *text = g_strconcat(whole, more, NULL);
    g_assert_true(g_file_set_contents(path, text, -1, NULL));
    RfScene *scene = rf_simulate_scene_load(path, error);
    g_assert_cmpint(g_unlink(path), ==, 0);
    g_close(file, NULL);
    return scene;
}

static void test_defaults(void)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfScene) scene = load("", &error);
    g_assert_no_error(error);
    g_assert_cmpint(scene->width, ==, 640);
    g_assert_cmpfloat(scene->duration_s, ==, 2);
    g_assert_cmpfloat_with_epsilon(scene->plate_gap_m.value, 6e-3, 1e-12);
    g_assert_cmpfloat_with_epsilon(scene->plate_gap_m.sigma, 1e-5, 1e-12);
    g_assert_cmpfloat_with_epsilon(scene->temperature_kelvin.value, 296.15, 1e-9);
    g_assert_cmpfloat_with_epsilon(scene->temperature_kelvin.sigma, 0.2, 1e-9); /* not 273.35 */
    g_assert_cmpint((int)scene->states->len, ==, 2);
}

static void test_reads_what_is_written(void)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfScene) scene =
        load("interlaced=no\n[droplets]\ncount=3\nradius=0.4..0.8 um\nbrightness=50\n"
             "[droplet a]\nx=10\ny=20.5\nradius=500 nm\nunits=-2\nsteps=1.5:-1; 1.75:4\n"
             "[field]\nswitches=0.5 top+; 1 off; 1.25 top-\n[camera]\ngravity=left\n",
             &error);
    g_assert_no_error(error);
    g_assert_cmpfloat_with_epsilon(scene->radius_m.low, 0.4e-6, 1e-15);
    g_assert_cmpfloat_with_epsilon(scene->radius_m.high, 0.8e-6, 1e-15);
    g_assert_cmpfloat(scene->brightness.low, ==, scene->brightness.high);
    g_assert_cmpint(scene->gravity, ==, RF_SCENE_GRAVITY_LEFT);
    const RfSceneDroplet *droplet = &g_array_index(scene->by_hand, RfSceneDroplet, 0);
    g_assert_cmpfloat_with_epsilon(droplet->radius_m, 0.5e-6, 1e-15);
    g_assert_cmpint((int)droplet->spells->len, ==, 3);
    g_assert_cmpint(g_array_index(droplet->spells, RfSpell, 2).units, ==, 4);
    const RfSceneSwitch *last = &g_array_index(scene->switches, RfSceneSwitch, 2);
    g_assert_cmpfloat(last->time_s, ==, 1.25);
    g_assert_cmpint(last->state, ==, RF_FIELD_TOP_MINUS);
}

static void test_sheet_says_what_the_scene_says(void)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfScene) scene = load("[cell]\nplate_gap=5.998(12) mm\n[notes]\noperator=N. Body\n", &error);
    g_assert_no_error(error);
    g_autofree char *sheet = rf_simulate_sheet(scene, "recording.mkv");
    g_autoptr(GKeyFile) file = g_key_file_new();
    g_assert_true(g_key_file_load_from_data(file, sheet, strlen(sheet), G_KEY_FILE_NONE, NULL));
    g_autofree char *gap = g_key_file_get_string(file, "cell", "plate_gap", NULL);
    g_autofree char *who = g_key_file_get_string(file, "notes", "operator", NULL);
    g_autofree char *density = g_key_file_get_string(file, "oil", "density", NULL);
    g_assert_cmpstr(gap, ==, "5.998(12) mm");
    g_assert_cmpstr(who, ==, "N. Body");
    g_assert_cmpstr(density, ==, "886.0(10) kg/m^3");
    g_assert_false(g_key_file_has_key(file, "supply", "log", NULL));
}

static void refused(const char *more, int code, const char *words)
{
    g_autoptr(GError) error = NULL;
    RfScene *scene = load(more, &error);
    g_assert_null(scene);
    g_test_message("%s", error->message);
    g_assert_error(error, RF_SIMULATE_SCENE_ERROR, code);
    g_assert_nonnull(strstr(error->message, words));
}

static void test_refuses_unknown_and_repeated(void)
{
    refused("colour=red\n", RF_SIMULATE_SCENE_ERROR_UNKNOWN, "[picture] colour");
    refused("[pictures]\nwidth=64\n", RF_SIMULATE_SCENE_ERROR_UNKNOWN, "[pictures]");
    refused("seed=6\n", RF_SIMULATE_SCENE_ERROR_SYNTAX, "second time");
    refused("[cell]\n[picture]\nwidth=64\n", RF_SIMULATE_SCENE_ERROR_SYNTAX, "second time");
    refused("[droplet a]\nx=1\ny=1\nradius=1 um\nunits=1\nmass=3\n", RF_SIMULATE_SCENE_ERROR_UNKNOWN, "mass");
}

static void test_refuses_impossible_values(void)
{
    refused("width=20\n", RF_SIMULATE_SCENE_ERROR_VALUE, "[picture] width");
    refused("width=321\n", RF_SIMULATE_SCENE_ERROR_VALUE, "even");
    refused("exposure=1.5\n", RF_SIMULATE_SCENE_ERROR_VALUE, "out of range");
    refused("point_spread=1.9(1)\n", RF_SIMULATE_SCENE_ERROR_VALUE, "uncertainty");
    refused("interlaced=maybe\n", RF_SIMULATE_SCENE_ERROR_VALUE, "yes or no");
    refused("[video]\ncodec=vhs\n", RF_SIMULATE_SCENE_ERROR_VALUE, "ffv1|h264");
    refused("[field]\nswitches=2 off; 1 top+\n", RF_SIMULATE_SCENE_ERROR_VALUE, "rising");
    refused("[field]\nswitches=2 sideways\n", RF_SIMULATE_SCENE_ERROR_VALUE, "sideways");
    refused("[droplets]\nradius=0.8..0.4 um\n", RF_SIMULATE_SCENE_ERROR_VALUE, "downward");
    refused("[droplets]\nleast_units=7\n", RF_SIMULATE_SCENE_ERROR_VALUE, "most_units");
    refused("[droplet a]\nx=1\ny=1\nunits=1\n", RF_SIMULATE_SCENE_ERROR_VALUE, "radius: missing");
    refused("bit_depth=10\n", RF_SIMULATE_SCENE_ERROR_VALUE, "ffv1");
}

static void test_refuses_wrong_dimension_and_absent_file(void)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(load("[cell]\nplate_gap=6 s\n", &error));
    g_assert_nonnull(strstr(error->message, "[cell] plate_gap"));
    g_clear_error(&error);
    g_assert_null(rf_simulate_scene_load("/nowhere/at/all.scene", &error));
    g_assert_error(error, G_FILE_ERROR, G_FILE_ERROR_NOENT);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate-scene/load/defaults", test_defaults);
    g_test_add_func("/simulate-scene/load/reads-what-is-written", test_reads_what_is_written);
    g_test_add_func("/simulate-scene/sheet/says-what-the-scene-says", test_sheet_says_what_the_scene_says);
    g_test_add_func("/simulate-scene/load/refuses-unknown-and-repeated", test_refuses_unknown_and_repeated);
    g_test_add_func("/simulate-scene/load/refuses-impossible-values", test_refuses_impossible_values);
    g_test_add_func("/simulate-scene/load/refuses-wrong-dimension-and-absent-file",
                    test_refuses_wrong_dimension_and_absent_file);
    return g_test_run();
}
