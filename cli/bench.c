#include "cli/bench.h"

#include <math.h>
#include <string.h>

#include "cli/text_number.h"

enum { USUAL_BASELINE = 20 };

typedef struct {
    const char *name, *title;
    double per_shown; /* shown = value * per_shown: coulombs are shown in 1e-19 C */
    bool is_personal; /* of the operator, not of the bench */
} Figure;

static const Figure figures[] = {
    {"unit_charge_C", "unit, 1e-19 C", 1e19, false},
    {"scale_px_mm", "scale, px/mm", 1, false},
    {"noise_px", "noise of positions, px", 1, false},
    {"drift_mm_s", "drift across gravity, µm/s", 1e3, false},
    {"temperature_degC", "air temperature, °C", 1, false},
    {"timing_bias_s", "timing bias, s", 1, true},
};

/* ---- which entries count ---- */

/* The recordings that an entry was made from, whoever asked and how often: their digests. */
static char *identity(const RfLedgerEntry *entry)
{
    GString *text = g_string_new(NULL);
    for (guint i = 0; i < entry->inputs->len; i++) {
        const RfInputFile *input = &g_array_index(entry->inputs, RfInputFile, i);
        if (strcmp(input->role, "recording") == 0 || strcmp(input->role, "hand timings") == 0)
            g_string_append(text, input->sha256);
    }
    if (text->len == 0) g_string_append_printf(text, "%" G_GINT64_FORMAT, (gint64)entry->number);
    return g_string_free(text, FALSE);
}

static bool tells(const RfLedgerEntry *entry, const Figure *figure, const char *of_whom)
{
    if (strcmp(entry->kind, "pool") == 0 || !rf_ledger_entry_figure(entry, figure->name)) return false;
    return !figure->is_personal || g_strcmp0(rf_ledger_entry_note(entry, "operator"), of_whom) == 0;
}

/* The last entered of each recording. Digest -> RfLedgerEntry (borrowed). (returns new) */
static GHashTable *latest_of_each(const GPtrArray *entries, const Figure *figure, const char *of_whom)
{
    GHashTable *latest = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    for (guint i = 0; i < entries->len; i++) {
        RfLedgerEntry *entry = entries->pdata[i];
        if (!tells(entry, figure, of_whom)) continue;
        g_autofree char *key = identity(entry);
        const RfLedgerEntry *seen = g_hash_table_lookup(latest, key);
        if (!seen || seen->number < entry->number) g_hash_table_insert(latest, g_steal_pointer(&key), entry);
    }
    return latest;
}

static void point_clear(void *item)
{
    g_free(((RfBenchPoint *)item)->measured_on);
}

static GArray *points_of(const GPtrArray *entries, const Figure *figure, const char *of_whom)
{
    GArray *points = g_array_new(FALSE, FALSE, sizeof(RfBenchPoint));
    g_array_set_clear_func(points, point_clear);
    g_autoptr(GHashTable) latest = latest_of_each(entries, figure, of_whom);
    for (guint i = 0; i < entries->len; i++) {
        const RfLedgerEntry *entry = entries->pdata[i];
        g_autofree char *key = identity(entry);
        if (g_hash_table_lookup(latest, key) != entry) continue;
        const RfValue value = rf_ledger_entry_figure(entry, figure->name)->value;
        RfBenchPoint point = {entry->number,
                              g_strdup(entry->measured_on),
                              {value.value * figure->per_shown, value.sigma * figure->per_shown},
                              0};
        g_array_append_val(points, point);
    }
    return points;
}

/* ---- one chart ---- */

static const RfBenchPoint *point(const RfBenchChart *chart, size_t i)
{
    return &g_array_index(chart->points, RfBenchPoint, i);
}

/* The shift may have begun at any of the judged points: its likelihood is weighed by their number. Odds of 20 are asked for. */
static RfBenchState judge_signal(const RfBenchChart *chart, const RfControlShift *shift, size_t i,
                                 size_t judged)
{
    /* A single point that comes back is no movement, and shows in the range of two points. */
    if (shift->first == i || point(chart, i)->signals == RF_CONTROL_RANGE) return RF_BENCH_STANDS_OUT;
    return shift->log_likelihood > log(20.0 * (double)judged) ? RF_BENCH_MOVED : RF_BENCH_MAY_HAVE_MOVED;
}

/* Goes through the points that are judged: what came after the baseline, or the baseline itself where that is all. The
 * strongest state counts, from its first signal on. */
static void judge(RfBenchChart *chart, const double *values)
{
    const size_t n = chart->points->len, first = n > chart->baseline ? chart->baseline : 0;
    chart->state = RF_BENCH_STEADY;
    for (size_t i = first; i < n; i++) {
        if (!point(chart, i)->signals) continue;
        const RfControlShift shift = rf_control_chart_shift(&chart->limits, values, first, i);
        const RfBenchState state = judge_signal(chart, &shift, i, n - first);
        if (state <= chart->state) continue;
        chart->state = state;
        chart->signal = i;
        chart->shift = shift;
    }
}

static void find_signals(RfBenchChart *chart, unsigned wanted)
{
    const size_t n = chart->points->len;
    g_autofree double *values = g_new(double, n + 1);
    g_autofree unsigned *signals = g_new0(unsigned, n + 1);
    for (size_t i = 0; i < n; i++) values[i] = point(chart, i)->value.value;
    chart->baseline = MIN(n, wanted ? wanted : USUAL_BASELINE);
    if (!rf_control_chart_limits(values, chart->baseline, &chart->limits)) return;
    rf_control_chart_signals(&chart->limits, values, n, signals);
    for (size_t i = 0; i < n; i++) {
        g_array_index(chart->points, RfBenchPoint, i).signals = signals[i];
        chart->baseline_signals += i < chart->baseline && signals[i];
    }
    judge(chart, values);
}

static void moved(const RfBenchChart *chart, GString *out)
{
    const RfControlShift *shift = &chart->shift;
    g_autofree char *size = rf_text_number_concise((RfValue){shift->size, shift->u_size});
    g_autofree char *signals = rf_bench_signals_to_string(point(chart, chart->signal)->signals);
    g_string_append_printf(out, "%s on %s by %s", chart->state == RF_BENCH_MOVED ? "moved" : "may have moved",
                           point(chart, shift->first)->measured_on, size);
    if (shift->from < shift->to)
        g_string_append_printf(out, " (between %s and %s)", point(chart, shift->from)->measured_on,
                               point(chart, shift->to)->measured_on);
    g_string_append_printf(out, "; noticed on %s: %s; %.3g times likelier than no change",
                           point(chart, chart->signal)->measured_on, signals,
                           exp(fmin(shift->log_likelihood, 50)));
}

static void stands_out(const RfBenchChart *chart, GString *out)
{
    unsigned n = 0;
    for (guint i = 0; i < chart->points->len; i++) n += point(chart, i)->signals != 0;
    g_autofree char *signals = rf_bench_signals_to_string(point(chart, chart->signal)->signals);
    g_string_append_printf(out, "%s stands out: %s", point(chart, chart->signal)->measured_on, signals);
    if (n > 1) g_string_append_printf(out, "; %u points in all", n);
}

static char *verdict_of(const RfBenchChart *chart)
{
    GString *out = g_string_new(NULL);
    switch (chart->state) {
    case RF_BENCH_TOO_FEW:
        g_string_append_printf(out, "only %u so far: at least %d that differ are needed to set limits",
                               chart->points->len, RF_CONTROL_CHART_BASELINE);
        break;
    case RF_BENCH_STEADY:
        g_string_append_printf(out,
                               "steady; a shift by one sigma would be noticed after %.0f recordings on "
                               "average, by two after %.0f",
                               rf_control_chart_run_length(1, true), rf_control_chart_run_length(2, true));
        break;
    case RF_BENCH_STANDS_OUT:
        stands_out(chart, out);
        break;
    case RF_BENCH_MAY_HAVE_MOVED:
    case RF_BENCH_MOVED:
        moved(chart, out);
        break;
    }
    if (chart->baseline_signals && chart->points->len > chart->baseline)
        g_string_append_printf(out,
                               "; %zu of the %zu recordings that set the limits have a signal themselves",
                               chart->baseline_signals, chart->baseline);
    return g_string_free(out, FALSE);
}

static void chart_free(RfBenchChart *chart)
{
    g_free(chart->name);
    g_free(chart->of_whom);
    g_free(chart->title);
    g_free(chart->verdict);
    g_array_unref(chart->points);
    g_free(chart);
}

static void add_chart(GPtrArray *charts, const GPtrArray *entries, const Figure *figure, const char *of_whom,
                      unsigned baseline)
{
    RfBenchChart *chart = g_new0(RfBenchChart, 1);
    chart->name = g_strdup(figure->name);
    chart->of_whom = g_strdup(of_whom);
    chart->title = of_whom ? g_strdup_printf("%s: %s", figure->title, of_whom) : g_strdup(figure->title);
    chart->points = points_of(entries, figure, of_whom);
    find_signals(chart, baseline);
    chart->verdict = verdict_of(chart);
    if (chart->points->len)
        g_ptr_array_add(charts, chart);
    else
        chart_free(chart);
}

static gboolean is_same_text(gconstpointer a, gconstpointer b)
{
    return g_strcmp0(a, b) == 0;
}

/* Everyone who timed, in the order in which they first occur; NULL stands for entries that name nobody. (borrowed) */
static GPtrArray *operators(const GPtrArray *entries, const Figure *figure)
{
    GPtrArray *names = g_ptr_array_new();
    for (guint i = 0; i < entries->len; i++) {
        const RfLedgerEntry *entry = entries->pdata[i];
        const char *name = rf_ledger_entry_note(entry, "operator");
        if (!rf_ledger_entry_figure(entry, figure->name)) continue;
        if (!g_ptr_array_find_with_equal_func(names, name, is_same_text, NULL))
            g_ptr_array_add(names, (gpointer)name);
    }
    return names;
}

GPtrArray *rf_bench_charts(const GPtrArray *entries, unsigned baseline)
{
    GPtrArray *charts = g_ptr_array_new_with_free_func((GDestroyNotify)chart_free);
    for (size_t i = 0; i < G_N_ELEMENTS(figures); i++) {
        if (!figures[i].is_personal) {
            add_chart(charts, entries, &figures[i], NULL, baseline);
            continue;
        }
        g_autoptr(GPtrArray) names = operators(entries, &figures[i]);
        for (guint j = 0; j < names->len; j++)
            add_chart(charts, entries, &figures[i], names->pdata[j], baseline);
    }
    return charts;
}

char *rf_bench_signals_to_string(unsigned signals)
{
    g_autofree char *run = g_strdup_printf("%d in a row on one side", RF_CONTROL_CHART_RUN),
                    *trend = g_strdup_printf("%d in a row up or down", RF_CONTROL_CHART_RUN);
    const struct {
        unsigned flag;
        const char *text;
    } names[] = {{RF_CONTROL_BEYOND, "beyond the limits"},
                 {RF_CONTROL_RUN, run},
                 {RF_CONTROL_TREND, trend},
                 {RF_CONTROL_RANGE, "a jump from the one before"}};
    GString *out = g_string_new(NULL);
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++)
        if (signals & names[i].flag) g_string_append_printf(out, "%s%s", out->len ? ", " : "", names[i].text);
    return g_string_free(out, FALSE);
}
