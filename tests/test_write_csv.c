#include "cli/write_csv.h"

#include <locale.h>
#include <string.h>

#include "tests/support/sample_results.h"

static void starts_with(GString *text, const char *start)
{
    if (!g_str_has_prefix(text->str, start))
        g_error("expected to start with \"%s\", got \"%.200s\"", start, text->str);
}

/* The columns that people's scripts rely on come first, in this order. */
static void columns_in_order(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    const struct {
        GString *(*write)(const RfResults *);
        const char *columns;
    } tables[] = {
        {rf_write_csv_paths, "droplet,frame,time_s,x_px,y_px,u_px,x_mm,y_mm,seen,"},
        {rf_write_csv_segments, "droplet,segment,start_s,end_s,field,voltage_V,fall_mm_s,u_fall_mm_s,drift_"
                                "mm_s,u_drift_mm_s,frames\n"},
        {rf_write_csv_switches, "switch,time_s,u_time_s,from,to,droplets,log_time_s\n"},
        {rf_write_csv_steps, "droplet,time_s,u_time_s,charge_before_C,charge_after_C,"},
        {rf_write_csv_droplets,
         "droplet,spell,start_s,end_s,frames,fall_mm_s,u_fall_mm_s,radius_um,u_radius_um,charge_C,"
         "u_charge_C,u_random_C,units,verdict,reason,units_probability,"},
        {rf_write_csv_audit, "entry,droplet,hand_time_s,tracked_time_s,difference_s,en_number,finding,"},
        {rf_write_csv_budget, "input,stated,relative_u,charge_relative_u,charge_relative_u_mc,common\n"},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(tables); i++) {
        g_autoptr(GString) text = tables[i].write(results);
        starts_with(text, tables[i].columns);
    }
}

/* Commas outside quotes, per line: a table whose rows differ is not a table. */
static void rows_are_as_wide_as_the_header(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    GString *(*const writers[])(const RfResults *) = {
        rf_write_csv_paths,    rf_write_csv_segments, rf_write_csv_switches, rf_write_csv_steps,
        rf_write_csv_droplets, rf_write_csv_audit,    rf_write_csv_budget};
    for (size_t i = 0; i < G_N_ELEMENTS(writers); i++) {
        g_autoptr(GString) text = writers[i](results);
        int width = -1, commas = 0;
        bool is_quoted = false;
        for (const char *c = text->str; *c; c++) {
            if (*c == '"') is_quoted = !is_quoted;
            commas += *c == ',' && !is_quoted;
            if (*c != '\n' || is_quoted) continue;
            if (width < 0) width = commas;
            g_assert_cmpint(commas, ==, width);
            commas = 0;
        }
        g_assert_cmpint(commas, ==, 0); /* ended in a newline */
        g_assert_false(is_quoted);
    }
}

static char *line(const GString *text, unsigned number)
{
    g_auto(GStrv) lines = g_strsplit(text->str, "\n", -1);
    g_assert_cmpuint(number, <, g_strv_length(lines));
    return g_strdup(lines[number]);
}

static void path_row_digits(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    const RfPathRow row = {.droplet = 3,
                           .frame = 12,
                           .field = 1,
                           .seen = true,
                           .time_s = 0.4004,
                           .x_px = 12.34567,
                           .y_px = -0.00001,
                           .u_x_px = 0.03,
                           .u_y_px = 0.04,
                           .x_mm = 0.0617283,
                           .y_mm = 1,
                           .u_x_mm = 0.00015121,
                           .u_y_mm = 0.000201613,
                           .snr = 9.5};
    g_array_append_val(results->paths, row);
    g_autoptr(GString) text = rf_write_csv_paths(results);
    g_autofree char *first = line(text, 1);
    /* rms of 0.03 and 0.04 is 0.05 / sqrt 2 */
    g_assert_cmpstr(
        first, ==,
        "3,12,0.400400,12.3457,0.0000,0.0354,0.0617283,1.0000000,1,1,0.0300,0.0400,0.0000,0.0000,0.0000,"
        "0.0000,9.500,0.00015121,0.00020161");
    rf_write_csv_settle_paths(results->paths);
    g_assert_cmpfloat(g_array_index(results->paths, RfPathRow, 0).u_y_mm, ==, 0.00020161);
    g_assert_cmpfloat(g_array_index(results->paths, RfPathRow, 0).y_px, ==, 0);
    g_autoptr(GString) settled = rf_write_csv_paths(results);
    g_assert_cmpstr(settled->str, ==, text->str);
}

static void absent_is_empty(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    const RfDropletRow droplet = {
        .droplet = 1, .spell = 1, .radius_um = {0.5, 0.01}, .reason = g_strdup("no field")};
    g_array_append_val(results->droplets, droplet);
    const RfSwitchRow change = {.number = 1, .time_s = {2, 0.01}, .to = RF_FIELD_TOP_MINUS, .droplets = 4};
    g_array_append_val(results->switches, change);
    g_autoptr(GString) droplets = rf_write_csv_droplets(results), switches = rf_write_csv_switches(results);
    g_autofree char *first = line(droplets, 1), *second = line(switches, 1);
    g_assert_cmpstr(
        first, ==,
        "1,1,0.000000,0.000000,0,0.000000,0.000000,0.50000,0.01000,,,,,set aside,no field,,,,,,,0.000,");
    g_assert_cmpstr(second, ==, "1,2.000000,0.010000,off,top-,4,");
}

/* RFC 4180, 2.7: quotes inside a quoted field are doubled. */
static void labels_are_quoted(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) text = rf_write_csv_audit(results);
    g_assert_nonnull(strstr(text->str, ",\"C, \"\"third\"\"\","));
    g_assert_nonnull(strstr(text->str, ",\"<script>alert(\"\"x\"\")</script> & co\","));
}

static void locale_does_not_matter(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) plain = rf_write_csv_droplets(results);
    if (!setlocale(LC_ALL, "de_DE.UTF-8"))
        g_test_message("no German locale here; checked under the default one");
    g_autoptr(GString) again = rf_write_csv_droplets(results);
    setlocale(LC_ALL, "C");
    g_assert_cmpstr(plain->str, ==, again->str);
}

/* A long recording: the table must not take longer than the disk that it goes to. */
static void a_million_rows(void)
{
    if (!g_test_perf()) {
        g_test_skip("run with -m perf");
        return;
    }
    g_autoptr(RfResults) results = rf_results_new();
    for (int i = 0; i < 1000000; i++) {
        const RfPathRow row = {.droplet = 1,
                               .frame = i,
                               .time_s = i / 30.0,
                               .x_px = i * 0.37,
                               .y_px = 200.123 + i * 1e-4,
                               .u_x_px = 0.1,
                               .u_y_px = 0.1,
                               .x_mm = i * 0.002,
                               .y_mm = 1.5,
                               .seen = true,
                               .snr = 12};
        g_array_append_val(results->paths, row);
    }
    g_test_timer_start();
    g_autoptr(GString) text = rf_write_csv_paths(results);
    g_test_minimized_result(g_test_timer_elapsed(), "1e6 rows, %zu bytes", text->len);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/write_csv/columns/in-order", columns_in_order);
    g_test_add_func("/write_csv/rows/as-wide-as-the-header", rows_are_as_wide_as_the_header);
    g_test_add_func("/write_csv/paths/digits", path_row_digits);
    g_test_add_func("/write_csv/droplets/absent-is-empty", absent_is_empty);
    g_test_add_func("/write_csv/audit/labels-are-quoted", labels_are_quoted);
    g_test_add_func("/write_csv/locale/does-not-matter", locale_does_not_matter);
    g_test_add_func("/write_csv/paths/a-million-rows", a_million_rows);
    return g_test_run();
}
