#include "cli/figure.h"

#include <string.h>

#include "cli/figure_script.h"
#include "cli/plotter.h"

static void figure_free(void *item)
{
    RfFigure *figure = item;
    g_free(figure->name);
    g_free(figure->title);
    g_free(figure->alt);
    g_free(figure->svg);
    g_free(figure);
}

void rf_figure_set_free(RfFigureSet *set)
{
    if (!set) return;
    g_ptr_array_unref(set->figures);
    g_free(set->warning);
    g_free(set);
}

static char *whole_script(const RfFigureScript *what, const char *body)
{
    const bool is_square = strcmp(what->name, "radius") == 0, is_low = strcmp(what->name, "multiples") == 0;
    const RfPlotterSize size = is_square ? (RfPlotterSize){"560,460", "12cm,10cm"}
                               : is_low  ? (RfPlotterSize){"860,280", "17cm,5.6cm"}
                                         : (RfPlotterSize){"860,430", "17cm,8.5cm"};
    return rf_plotter_script(what->name, what->title, &size, body);
}

static bool add_figure(RfFigureSet *set, const RfFigureScript *what, const RfResults *results,
                       RfResultFolder *folder, GError **error)
{
    const RfFigureOf wanted = results->recordings->len > 0 ? RF_FIGURE_OF_POOL : RF_FIGURE_OF_RUN;
    if (!(what->of & wanted)) return true;
    g_autoptr(GString) data = g_string_new(NULL), body = g_string_new(NULL), alt = g_string_new(NULL);
    if (!what->write(results, data, body, alt)) return true;
    g_autofree char *script = whole_script(what, body->str);
    g_autofree char *data_name = g_strdup_printf("figures/%s.dat", what->name);
    g_autofree char *script_name = g_strdup_printf("figures/%s.gp", what->name);
    if (!rf_result_folder_add(folder, data_name, data->str, data->len, error)) return false;
    if (!rf_result_folder_add_text(folder, script_name, script, error)) return false;
    RfFigure *figure = g_new0(RfFigure, 1);
    figure->name = g_strdup(what->name);
    figure->title = g_strdup(what->title);
    figure->alt = g_strdup(alt->str);
    g_ptr_array_add(set->figures, figure);
    return true;
}

static char *script_of(const RfFigure *figure)
{
    return g_strconcat(figure->name, ".gp", NULL);
}

static bool fetch(RfFigure *figure, const char *inside)
{
    g_autofree char *picture = g_strconcat(inside, "/", figure->name, ".svg", NULL);
    return g_file_get_contents(picture, &figure->svg, NULL, NULL);
}

static void draw_one(RfFigureSet *set, RfFigure *figure, const char *program, const char *inside)
{
    g_autofree char *script = script_of(figure);
    g_autofree char *complaint = NULL;
    const char *const scripts[] = {script, NULL};
    if (rf_plotter_run(program, inside, scripts, &complaint) && fetch(figure, inside)) return;
    if (set->warning) return;
    set->warning = g_strdup_printf("figures: gnuplot failed on %s; data and scripts are in figures/",
                                   complaint ? complaint : figure->name);
}

/* All at once; where that fails one by one, so that one bad figure doesn't take the others along. */
static void draw_all(RfFigureSet *set, const char *program, const char *inside)
{
    g_autoptr(GPtrArray) scripts = g_ptr_array_new_with_free_func(g_free);
    g_autofree char *complaint = NULL;
    for (guint i = 0; i < set->figures->len; i++) g_ptr_array_add(scripts, script_of(set->figures->pdata[i]));
    g_ptr_array_add(scripts, NULL);
    bool is_well =
        rf_plotter_run(program, inside, (const char *const *)(const void *)scripts->pdata, &complaint);
    for (guint i = 0; is_well && i < set->figures->len; i++) is_well = fetch(set->figures->pdata[i], inside);
    if (is_well) return;
    for (guint i = 0; i < set->figures->len; i++) {
        RfFigure *figure = set->figures->pdata[i];
        g_clear_pointer(&figure->svg, g_free);
        draw_one(set, figure, program, inside);
    }
}

RfFigureSet *rf_figure_set_new(void)
{
    RfFigureSet *set = g_new0(RfFigureSet, 1);
    set->figures = g_ptr_array_new_with_free_func(figure_free);
    return set;
}

void rf_figure_set_draw(RfFigureSet *set, const RfResultFolder *folder, const char *plotter)
{
    if (set->figures->len == 0) return;
    g_autofree char *program = g_find_program_in_path(plotter);
    if (!program) {
        set->warning = g_strdup_printf(
            "figures: %s is not installed, so there are no pictures; data and scripts are in figures/",
            plotter);
        return;
    }
    g_autofree char *inside = g_build_filename(rf_result_folder_path(folder), "figures", NULL);
    draw_all(set, program, inside);
}

RfFigureSet *rf_figure_draw_with(const RfResults *results, RfResultFolder *folder, const char *plotter,
                                 GError **error)
{
    g_autoptr(RfFigureSet) set = rf_figure_set_new();
    for (size_t i = 0; i < rf_figure_scripts_n; i++)
        if (!add_figure(set, &rf_figure_scripts[i], results, folder, error)) return NULL;
    rf_figure_set_draw(set, folder, plotter);
    return g_steal_pointer(&set);
}

RfFigureSet *rf_figure_draw(const RfResults *results, RfResultFolder *folder, GError **error)
{
    return rf_figure_draw_with(results, folder, "gnuplot", error);
}

const RfFigure *rf_figure_find(const RfFigureSet *set, const char *name)
{
    for (guint i = 0; set && i < set->figures->len; i++) {
        const RfFigure *figure = set->figures->pdata[i];
        if (strcmp(figure->name, name) == 0) return figure;
    }
    return NULL;
}
