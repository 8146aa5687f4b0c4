#include "cli/bench.h"

#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <string.h>

#include "cli/bench_write.h"

static GPtrArray *no_entries(void)
{
    return g_ptr_array_new_with_free_func((GDestroyNotify)rf_ledger_entry_free);
}

/* One recording a day; `digest` NULL: one of its own. */
static RfLedgerEntry *add(GPtrArray *entries, int day, const char *name, RfValue value, const char *digest)
{
    RfLedgerEntry *entry = rf_ledger_entry_new("run");
    g_autoptr(GDateTime) first = g_date_time_new_utc(2026, 1, 1, 0, 0, 0),
                         then = g_date_time_add_days(first, day);
    g_autofree char *own = g_strdup_printf("%d-%u", day, entries->len);
    g_free(entry->measured_on);
    entry->measured_on = g_date_time_format(then, "%Y-%m-%d");
    entry->number = entries->len + 1;
    rf_ledger_entry_add_input(entry, "recording", "film.mkv", digest ? digest : own);
    rf_ledger_entry_add_figure(entry, name, value);
    g_ptr_array_add(entries, entry);
    return entry;
}

static const RfBenchChart *chart_of(const GPtrArray *charts, const char *title)
{
    for (guint i = 0; i < charts->len; i++)
        if (strcmp(((const RfBenchChart *)charts->pdata[i])->title, title) == 0) return charts->pdata[i];
    g_assert_not_reached();
}

static void few_recordings_give_no_limits(void)
{
    g_autoptr(GPtrArray) entries = no_entries();
    for (int day = 0; day < RF_CONTROL_CHART_BASELINE - 1; day++)
        add(entries, day, "scale_px_mm", (RfValue){500 + day % 3, 1}, NULL);
    g_autoptr(GPtrArray) charts = rf_bench_charts(entries, 0);
    g_assert_cmpuint(charts->len, ==, 1);
    g_assert_cmpint(chart_of(charts, "scale, px/mm")->state, ==, RF_BENCH_TOO_FEW);
}

static void recording_counts_once(void)
{
    g_autoptr(GPtrArray) entries = no_entries();
    for (int day = 0; day < 10; day++) add(entries, day, "scale_px_mm", (RfValue){500 + day % 3, 1}, NULL);
    add(entries, 10, "scale_px_mm", (RfValue){400, 1}, "same film");
    add(entries, 10, "scale_px_mm", (RfValue){501, 1}, "same film"); /* run again, with a better sheet */
    g_autoptr(GPtrArray) charts = rf_bench_charts(entries, 8);
    const RfBenchChart *chart = chart_of(charts, "scale, px/mm");
    g_assert_cmpuint(chart->points->len, ==, 11);
    g_assert_cmpfloat(g_array_index(chart->points, RfBenchPoint, 10).value.value, ==, 501);
    g_assert_cmpint(chart->state, ==, RF_BENCH_STEADY);
}

static void persons_are_kept_apart(void)
{
    g_autoptr(GPtrArray) entries = no_entries();
    for (int day = 0; day < 10; day++) {
        RfLedgerEntry *entry = add(entries, day, "timing_bias_s", (RfValue){0.1 * (day % 2), 0.01}, NULL);
        rf_ledger_entry_add_setting(entry, "notes", "operator", day % 2 ? "B" : "A", false);
    }
    g_autoptr(GPtrArray) charts = rf_bench_charts(entries, 0);
    g_assert_cmpuint(chart_of(charts, "timing bias, s: A")->points->len, ==, 5);
    g_assert_cmpuint(chart_of(charts, "timing bias, s: B")->points->len, ==, 5);
}

static void one_bad_day_is_no_movement(void)
{
    g_autoptr(GPtrArray) entries = no_entries();
    for (int day = 0; day < 30; day++)
        add(entries, day, "scale_px_mm", (RfValue){day == 25 ? 530 : 500 + (day * 7) % 3, 1}, NULL);
    g_autoptr(GPtrArray) charts = rf_bench_charts(entries, 0);
    const RfBenchChart *chart = chart_of(charts, "scale, px/mm");
    g_assert_cmpint(chart->state, ==, RF_BENCH_STANDS_OUT);
    g_assert_nonnull(strstr(chart->verdict, "2026-01-26"));
}

/* A planted shift: how soon it is noticed against what the chart's theory says of limits known exactly. Limits from 200
 * recordings are nearly that; a tenth is left for what they lack. */
static void planted_shift_is_found_in_time(void)
{
    enum { BENCHES = 400, BEFORE = 200, AFTER = 60 };
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 2026);
    for (double shift = 1.5; shift < 3; shift += 0.5) {
        double waited = 0;
        int n = 0, dated = 0;
        for (int bench = 0; bench < BENCHES; bench++) {
            double values[BEFORE + AFTER];
            for (int i = 0; i < BEFORE + AFTER; i++)
                values[i] = 1.602 + 0.01 * ((i < BEFORE ? 0 : shift) + gsl_ran_gaussian_ziggurat(random, 1));
            g_autoptr(GPtrArray) entries = no_entries();
            for (int i = 0; i < BEFORE + AFTER; i++)
                add(entries, i, "unit_charge_C", (RfValue){values[i] * 1e-19, 1e-21}, NULL);
            g_autoptr(GPtrArray) charts = rf_bench_charts(entries, BEFORE);
            const RfBenchChart *chart = charts->pdata[0];
            size_t first = BEFORE; /* the first signal after the shift that counts in the theory */
            while (first < BEFORE + AFTER && !(g_array_index(chart->points, RfBenchPoint, first).signals &
                                               (RF_CONTROL_BEYOND | RF_CONTROL_RUN)))
                first++;
            waited += (double)(first - BEFORE + 1);
            n++;
            dated += chart->state >= RF_BENCH_MAY_HAVE_MOVED && chart->signal >= BEFORE &&
                     chart->shift.from <= BEFORE && BEFORE <= chart->shift.to;
        }
        const double theory = rf_control_chart_run_length(shift, true);
        g_test_message(
            "shift %.1f sigma: noticed after %.2f recordings, theory %.2f; day inside the range in %d of %d",
            shift, waited / n, theory, dated, n);
        g_assert_cmpfloat(waited / n, <, 1.1 * theory);
    }
    gsl_rng_free(random);
}

static void verdict_names_day_and_size(void)
{
    g_autoptr(GPtrArray) entries = no_entries();
    for (int day = 0; day < 40; day++)
        add(entries, day, "scale_px_mm", (RfValue){500 + (day * 7) % 3 + (day >= 30 ? 8 : 0), 1}, NULL);
    g_autoptr(GPtrArray) charts = rf_bench_charts(entries, 0);
    const RfBenchChart *chart = charts->pdata[0];
    g_assert_cmpint(chart->state, ==, RF_BENCH_MOVED);
    g_assert_cmpuint(chart->shift.first, ==, 30);
    g_assert_nonnull(strstr(chart->verdict, "moved on 2026-01-31 by "));
    g_autofree char *csv = rf_bench_write_csv(charts), *summary = rf_bench_write_summary(charts, 80);
    g_assert_nonnull(strstr(csv, "\n1,\"scale, px/mm\",31,2026-01-31,"));
    g_assert_nonnull(strstr(summary, "scale, px/mm: "));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/bench/too-few", few_recordings_give_no_limits);
    g_test_add_func("/bench/recording-counts-once", recording_counts_once);
    g_test_add_func("/bench/persons-apart", persons_are_kept_apart);
    g_test_add_func("/bench/bad-day", one_bad_day_is_no_movement);
    g_test_add_func("/bench/verdict", verdict_names_day_and_size);
    g_test_add_func("/bench/planted-shift", planted_shift_is_found_in_time);
    return g_test_run();
}
