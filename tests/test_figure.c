#include "cli/figure.h"

#include <string.h>

#include "cli/folder_tree.h"
#include "cli/inline_svg.h"
#include "tests/support/sample_results.h"

typedef struct {
    char *root, *target;
} Place;

static void set_up(Place *place, const void *unused)
{
    (void)unused;
    place->root = g_dir_make_tmp("risefall-figure-XXXXXX", NULL);
    place->target = g_build_filename(place->root, "out", NULL);
}

static void tear_down(Place *place, const void *unused)
{
    (void)unused;
    rf_folder_tree_remove(place->root);
    g_free(place->root);
    g_free(place->target);
}

static RfFigureSet *draw(const Place *place, const RfResults *results, const char *plotter)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(place->target, &error);
    g_assert_no_error(error);
    RfFigureSet *set = rf_figure_draw_with(results, folder, plotter, &error);
    g_assert_no_error(error);
    g_assert_true(rf_result_folder_commit(folder, &error));
    return set;
}

static bool is_there(const Place *place, const char *name)
{
    g_autofree char *path = g_build_filename(place->target, "figures", name, NULL);
    return g_file_test(path, G_FILE_TEST_IS_REGULAR);
}

static void every_figure_with_its_source(Place *place, const void *unused)
{
    (void)unused;
    g_autofree char *program = g_find_program_in_path("gnuplot");
    if (!program) {
        g_test_skip("gnuplot is not installed");
        return;
    }
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(RfFigureSet) set = draw(place, results, "gnuplot");
    g_assert_cmpstr(set->warning, ==, NULL);
    const char *const names[] = {"charges", "multiples", "velocities", "unit", "radius", "budget"};
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++) {
        const RfFigure *figure = rf_figure_find(set, names[i]);
        g_assert_nonnull(figure);
        g_assert_nonnull(strstr(figure->svg, "</svg>"));
        g_assert_cmpuint(strlen(figure->alt), >, 40);
        g_autofree char *data = g_strconcat(names[i], ".dat", NULL),
                        *script = g_strconcat(names[i], ".gp", NULL);
        g_assert_true(is_there(place, data));
        g_assert_true(is_there(place, script));
    }
    for (int droplet = 1; droplet <= 7; droplet++) {
        g_autofree char *title = g_strdup_printf("<title>droplet %d</title>", droplet);
        g_assert_nonnull(strstr(rf_figure_find(set, "velocities")->svg, title));
    }
}

static void missing_plotter_is_a_warning(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(RfFigureSet) set = draw(place, results, "no-such-plotter");
    g_assert_nonnull(strstr(set->warning, "no-such-plotter is not installed"));
    g_assert_null(rf_figure_find(set, "charges")->svg);
    g_assert_true(is_there(place, "charges.gp"));
}

static void failing_plotter_is_a_warning(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(RfFigureSet) set = draw(place, results, "false");
    g_assert_nonnull(strstr(set->warning, "charges.gp"));
    g_assert_null(rf_figure_find(set, "charges")->svg);
}

static void nothing_to_draw(Place *place, const void *unused)
{
    (void)unused;
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autoptr(RfFigureSet) set = draw(place, results, "gnuplot");
    g_assert_cmpuint(set->figures->len, ==, 0);
    g_assert_null(set->warning);
}

/* A budget line named by somebody with ideas must not become a command of gnuplot's. */
static void names_are_never_commands(Place *place, const void *unused)
{
    (void)unused;
    g_autofree char *proof = g_build_filename(place->root, "proof", NULL);
    g_autoptr(RfResults) results = sample_results_new();
    RfBudgetRow *line = &g_array_index(results->budget, RfBudgetRow, 0);
    g_free(line->input);
    line->input = g_strdup_printf("x\" 1)\nsystem(\"touch %s\")\nset ytics (\"`touch %s`", proof, proof);
    g_autoptr(RfFigureSet) set = draw(place, results, "gnuplot");
    g_assert_nonnull(rf_figure_find(set, "budget"));
    g_assert_false(g_file_test(proof, G_FILE_TEST_EXISTS));
}

static const char DRAWN[] =
    "<?xml version=\"1.0\"?>\n<svg \n viewBox=\"0 0 9 9\"\n xmlns=\"http://www.w3.org/2000/svg\"\n"
    " xmlns:xlink=\"http://www.w3.org/1999/xlink\"\n>\n<title>Gnuplot</title>\n<desc>Produced by</desc>\n"
    "<defs><circle id='gpPt5' r='1'/></defs>\n<g id=\"gnuplot_plot_2\" ><title>droplet 12</title>\n"
    "<use xlink:href='#gpPt5' color='rgb( 11, 110, 127)'/><text fill=\"black\">1</text></g>\n</svg>\n";

static void inline_is_self_contained(void)
{
    g_autofree char *text = rf_inline_svg_new(DRAWN, "charges", "seven \"charges\"");
    g_assert_null(strstr(text, "http:"));
    g_assert_null(strstr(text, "<?xml"));
    g_assert_nonnull(strstr(text, "aria-label=\"seven &quot;charges&quot;\""));
    g_assert_nonnull(strstr(text, "viewBox=\"0 0 9 9\""));
}

static void inline_marks_droplets_and_ids(void)
{
    g_autofree char *text = rf_inline_svg_new(DRAWN, "charges", "");
    g_assert_nonnull(strstr(text, "<g class=\"mark\" data-droplet=\"12\"><title>droplet 12</title>"));
    g_assert_nonnull(strstr(text, "id='charges-gpPt5'"));
    g_assert_nonnull(strstr(text, "href='#charges-gpPt5'"));
    g_assert_nonnull(strstr(text, "color='var(--hue-1)'"));
    g_assert_nonnull(strstr(text, "fill=\"var(--ink)\""));
}

static void add(const char *path, void (*test)(Place *, const void *))
{
    g_test_add(path, Place, NULL, set_up, test, tear_down);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    add("/figure/draw/every-figure-with-its-source", every_figure_with_its_source);
    add("/figure/draw/missing-plotter-is-a-warning", missing_plotter_is_a_warning);
    add("/figure/draw/failing-plotter-is-a-warning", failing_plotter_is_a_warning);
    add("/figure/draw/nothing-to-draw", nothing_to_draw);
    add("/figure/draw/names-are-never-commands", names_are_never_commands);
    g_test_add_func("/figure/inline/self-contained", inline_is_self_contained);
    g_test_add_func("/figure/inline/marks-droplets-and-ids", inline_marks_droplets_and_ids);
    return g_test_run();
}
