#include "cli/bench_write.h"

#include "cli/csv_text.h"
#include "cli/figure.h"
#include "cli/figure_text.h"
#include "cli/json_text.h"
#include "cli/plotter.h"
#include "cli/report_html.h"
#include "cli/result_folder.h"
#include "cli/text_number.h"
#include "cli/text_wrap.h"

static const RfBenchPoint *point(const RfBenchChart *chart, guint i)
{
    return &g_array_index(chart->points, RfBenchPoint, i);
}

/* ---- on the screen ---- */

static void append_heading(GString *out, const RfBenchChart *chart)
{
    g_autofree char *title = g_utf8_make_valid(chart->title, -1);
    g_string_append_printf(out, "%s", title);
    if (chart->state != RF_BENCH_TOO_FEW) {
        g_autofree char *centre =
            rf_text_number_concise((RfValue){chart->limits.centre, chart->limits.sigma});
        g_string_append_printf(out, ": %s in %u recordings", centre, chart->points->len);
    }
    g_string_append_c(out, '\n');
}

char *rf_bench_write_summary(const GPtrArray *charts, int columns)
{
    GString *out = g_string_new(NULL);
    for (guint i = 0; i < charts->len; i++) {
        const RfBenchChart *chart = charts->pdata[i];
        append_heading(out, chart);
        rf_text_wrap_append(out, chart->verdict, 2, columns, false);
    }
    return g_string_free(out, FALSE);
}

/* ---- tables ---- */

static void append_number(GString *out, double value)
{
    rf_figure_text_number(out, value);
    g_string_append_c(out, ',');
}

static void append_limits(GString *out, const RfBenchChart *chart)
{
    if (chart->state == RF_BENCH_TOO_FEW) {
        g_string_append(out, ",,,");
        return;
    }
    append_number(out, chart->limits.lower);
    append_number(out, chart->limits.centre);
    append_number(out, chart->limits.upper);
}

static void append_row(GString *out, const RfBenchChart *chart, guint number, guint i)
{
    g_autofree char *signals = rf_bench_signals_to_string(point(chart, i)->signals);
    g_string_append_printf(out, "%u,", number);
    rf_csv_text_append(out, chart->title);
    g_string_append_printf(out, "%" G_GINT64_FORMAT ",%s,", (gint64)point(chart, i)->entry,
                           point(chart, i)->measured_on);
    append_number(out, point(chart, i)->value.value);
    append_number(out, point(chart, i)->value.sigma);
    append_limits(out, chart);
    g_string_append_printf(out, "%d,", i < chart->baseline);
    rf_csv_text_append(out, signals);
    out->str[out->len - 1] = '\n';
}

char *rf_bench_write_csv(const GPtrArray *charts)
{
    GString *out =
        g_string_new("chart,quantity,entry,measured_on,value,u,lower,centre,upper,sets_limits,signals\n");
    for (guint i = 0; i < charts->len; i++) {
        const RfBenchChart *chart = charts->pdata[i];
        for (guint j = 0; j < chart->points->len; j++) append_row(out, chart, i + 1, j);
    }
    return g_string_free(out, FALSE);
}

static const char *state_to_string(RfBenchState state)
{
    static const char *const names[] = {"too few", "steady", "stands out", "may have moved", "moved"};
    return names[state];
}

static void add_chart(JsonBuilder *json, const RfBenchChart *chart)
{
    const bool has_limits = chart->state != RF_BENCH_TOO_FEW, has_moved = chart->state == RF_BENCH_MOVED;
    json_builder_begin_object(json);
    rf_json_text_words(json, "quantity", chart->title);
    rf_json_text_words(json, "figure", chart->name);
    rf_json_text_words(json, "operator", chart->of_whom);
    rf_json_text_whole(json, "recordings", chart->points->len);
    rf_json_text_words(json, "state", state_to_string(chart->state));
    rf_json_text_words(json, "verdict", chart->verdict);
    rf_json_text_number_if(json, "centre", has_limits, chart->limits.centre);
    rf_json_text_number_if(json, "sigma", has_limits, chart->limits.sigma);
    rf_json_text_number_if(json, "lower", has_limits, chart->limits.lower);
    rf_json_text_number_if(json, "upper", has_limits, chart->limits.upper);
    rf_json_text_words(json, "moved_on",
                       has_moved ? point(chart, (guint)chart->shift.first)->measured_on : NULL);
    rf_json_text_number_if(json, "moved_by", has_moved, chart->shift.size);
    rf_json_text_number_if(json, "u_moved_by", has_moved, chart->shift.u_size);
    rf_json_text_number_if(json, "log_likelihood", has_moved, chart->shift.log_likelihood);
    json_builder_end_object(json);
}

char *rf_bench_write_json(const GPtrArray *charts)
{
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_array(json);
    for (guint i = 0; i < charts->len; i++) add_chart(json, charts->pdata[i]);
    json_builder_end_array(json);
    return rf_json_text_finish(json);
}

/* ---- pictures ---- */

static void append_line(GString *script, double at, const char *style)
{
    g_string_append(script, "set arrow from graph 0, first ");
    rf_figure_text_number(script, at);
    g_string_append(script, " to graph 1, first ");
    rf_figure_text_number(script, at);
    g_string_append_printf(script, " nohead %s\n", style);
}

/* At most ten days are written below the axis, so that they can be read. */
static void append_days(GString *script, const RfBenchChart *chart)
{
    const guint n = chart->points->len, step = (n + 9) / 10;
    g_string_append(script, "set xtics rotate by -30 (");
    for (guint i = 0; i < n; i += step) {
        g_autofree char *day = rf_figure_text_harmless(point(chart, i)->measured_on);
        g_string_append_printf(script, "%s'%.10s' %u", i ? ", " : "", day, i + 1);
    }
    g_string_append_printf(script, ")\nset xrange [0.5:%u.5]\n", n);
}

static void append_data(GString *data, const RfBenchChart *chart)
{
    g_string_append(data, "# first block: point, value, u; second: those with a signal\n");
    for (int only_signals = 0; only_signals < 2; only_signals++) {
        for (guint i = 0; i < chart->points->len; i++)
            if (!only_signals || point(chart, i)->signals)
                rf_figure_text_row(
                    data, (double[]){i + 1.0, point(chart, i)->value.value, point(chart, i)->value.sigma}, 3);
        g_string_append(data, "\n\n");
    }
}

static bool has_signal(const RfBenchChart *chart)
{
    for (guint i = 0; i < chart->points->len; i++)
        if (point(chart, i)->signals) return true;
    return false;
}

static void append_plot(GString *script, const RfBenchChart *chart, const char *name)
{
    g_autofree char *title = rf_figure_text_harmless(chart->title);
    g_string_append_printf(script, "set ylabel '%s'\nset key off\n", title);
    append_days(script, chart);
    if (chart->state != RF_BENCH_TOO_FEW) {
        append_line(script, chart->limits.lower, "dt (6,4) lc rgb '#808080'");
        append_line(script, chart->limits.upper, "dt (6,4) lc rgb '#808080'");
        append_line(script, chart->limits.centre, "dt 1 lw 1.3 lc rgb '#808080'");
    }
    if (chart->state == RF_BENCH_MOVED)
        g_string_append_printf(
            script, "set arrow from %zu.5, graph 0 to %zu.5, graph 1 nohead lw 1.5 lc rgb '#222222'\n",
            chart->shift.first, chart->shift.first);
    g_string_append_printf(script,
                           "plot '%s.dat' index 0 using 1:2:3 with yerrorlines pt 7 ps 0.5 lc rgb '#%s'",
                           name, rf_figure_hue[0]);
    if (has_signal(chart))
        g_string_append_printf(script, ", '' index 1 using 1:2 with points pt 4 ps 1.4 lw 1.5 lc rgb '#%s'",
                               rf_figure_hue[1]);
    g_string_append_c(script, '\n');
}

static bool add_picture(RfFigureSet *set, RfResultFolder *folder, const RfBenchChart *chart, guint number,
                        GError **error)
{
    g_autofree char *name = g_strdup_printf("chart-%u", number);
    g_autoptr(GString) data = g_string_new(NULL), body = g_string_new(NULL);
    append_data(data, chart);
    append_plot(body, chart, name);
    g_autofree char *title = rf_figure_text_harmless(chart->title);
    g_autofree char *script =
        rf_plotter_script(name, title, &(RfPlotterSize){"860,300", "17cm,6cm"}, body->str);
    g_autofree char *data_name = g_strdup_printf("figures/%s.dat", name),
                    *script_name = g_strdup_printf("figures/%s.gp", name);
    if (!rf_result_folder_add_text(folder, data_name, data->str, error) ||
        !rf_result_folder_add_text(folder, script_name, script, error))
        return false;
    RfFigure *figure = g_new0(RfFigure, 1);
    figure->name = g_steal_pointer(&name);
    figure->title = g_strdup(chart->title);
    figure->alt = g_strdup_printf("Control chart of %u recordings: %s", chart->points->len, chart->verdict);
    g_ptr_array_add(set->figures, figure);
    return true;
}

static RfFigureSet *draw(RfResultFolder *folder, const GPtrArray *charts, GError **error)
{
    g_autoptr(RfFigureSet) set = rf_figure_set_new();
    for (guint i = 0; i < charts->len; i++)
        if (!add_picture(set, folder, charts->pdata[i], i + 1, error)) return NULL;
    rf_figure_set_draw(set, folder, "gnuplot");
    return g_steal_pointer(&set);
}

bool rf_bench_write(const char *target, const GPtrArray *charts, char **warning, GError **error)
{
    *warning = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(target, error);
    if (!folder) return false;
    g_autoptr(RfFigureSet) figures = draw(folder, charts, error);
    if (!figures) return false;
    *warning = g_strdup(figures->warning);
    g_autofree char *csv = rf_bench_write_csv(charts), *json = rf_bench_write_json(charts);
    g_autoptr(GString) page = rf_report_html_bench_new(charts, figures);
    return rf_result_folder_add_text(folder, "bench.csv", csv, error) &&
           rf_result_folder_add_text(folder, "bench.json", json, error) &&
           rf_result_folder_add(folder, "report.html", page->str, page->len, error) &&
           rf_result_folder_commit(folder, error);
}
