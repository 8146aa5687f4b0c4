#include "calib/table.h"

#include <glib/gstdio.h>
#include <gsl/gsl_errno.h>
#include <string.h>

static RfTable *parse(const char *text)
{
    g_autoptr(GError) error = NULL;
    RfTable *table = rf_table_parse(text, strlen(text), "t.csv", &error);
    g_assert_no_error(error);
    g_assert_nonnull(table);
    return table;
}

static void refuse(const char *text, size_t length, int code, const char *needle)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_table_parse(text, length, "t.csv", &error));
    g_assert_error(error, RF_TABLE_ERROR, code);
    g_test_message("-> %s", error->message);
    g_assert_true(g_str_has_prefix(error->message, "t.csv: "));
    g_assert_nonnull(strstr(error->message, needle));
}

static double number(const RfTable *table, size_t row, const char *name)
{
    double value = -1;
    size_t column = 0;
    g_autoptr(GError) error = NULL;
    rf_table_require(table, name, &column, &error);
    g_assert_no_error(error);
    rf_table_number(table, row, column, &value, &error);
    g_assert_no_error(error);
    return value;
}

static void header_without_rows(void)
{
    g_autoptr(RfTable) table = parse("a,b\n");
    g_assert_cmpuint(rf_table_rows(table), ==, 0);
    g_assert_cmpuint(rf_table_columns(table), ==, 2);
}

static void plain_commas(void)
{
    g_autoptr(RfTable) table = parse("entry,label,time_s\n1,A,3.85\n2,B,-2.5e-3");
    g_assert_cmpuint(rf_table_rows(table), ==, 2);
    g_assert_cmpfloat(number(table, 0, "time_s"), ==, 3.85);
    g_assert_cmpfloat(number(table, 1, "time_s"), ==, -2.5e-3);
    g_assert_cmpstr(rf_table_text(table, 1, 1), ==, "B");
}

/* The same content, as five kinds of spreadsheet and person write it. */
static void every_way_of_writing_reads_the_same(void)
{
    static const char *const ways[] = {
        "time_s,voltage_V,label\n1.5,300.25,a b\n2.5,-7,\n",
        "\xef\xbb\xbftime_s;voltage_V;label\r\n1,5;300,25;a b\r\n2,5;-7;\r\n",
        "# made by hand\n\n label \tVoltage (V)\tTime [s]\n\na b\t300,25\t1,5\n\t-7\t2,5\n\n",
        "\"time_s\",\"voltage_V\",\"label\"\r\n\"1,5\",\"300,25\",\"a b\"\r\n\r\n\"2,5\",\"-7\",\"\"",
        "label,time_s,voltage_V,,\n  # a remark\n a b , 1.5 , 300.25 ,,\n,,,,\n,2.5,\342\210\2227,,\n",
    };
    for (size_t i = 0; i < G_N_ELEMENTS(ways); i++) {
        g_autoptr(RfTable) table = parse(ways[i]);
        g_test_message("way %zu", i);
        g_assert_cmpuint(rf_table_rows(table), ==, 2);
        g_assert_cmpfloat(number(table, 0, "time_s"), ==, 1.5);
        g_assert_cmpfloat(number(table, 0, "voltage_V"), ==, 300.25);
        g_assert_cmpfloat(number(table, 1, "time_s"), ==, 2.5);
        g_assert_cmpfloat(number(table, 1, "voltage_V"), ==, -7.0);
        size_t label = (size_t)rf_table_find(table, "label");
        g_assert_cmpstr(rf_table_text(table, 0, label), ==, "a b");
        g_assert_true(rf_table_is_blank(table, 1, label));
    }
}

static void quotes_hold_anything(void)
{
    g_autoptr(RfTable) table = parse("a,b\n\"x, \"\"y\"\"\nz\" ,2\n3,4\n");
    g_assert_cmpstr(rf_table_text(table, 0, 0), ==, "x, \"y\"\nz");
    g_assert_cmpfloat(number(table, 0, "b"), ==, 2.0);
    g_assert_cmpuint(rf_table_line(table, 0), ==, 2);
    g_assert_cmpuint(rf_table_line(table, 1), ==, 4);
}

static void short_rows_are_blank_behind(void)
{
    g_autoptr(RfTable) table = parse("a,b,c\n1\n");
    g_assert_false(rf_table_is_blank(table, 0, 0));
    g_assert_true(rf_table_is_blank(table, 0, 1));
    g_assert_true(rf_table_is_blank(table, 0, 2));
}

static void strange_bytes_in_a_label(void)
{
    g_autoptr(RfTable) table = parse("a,b\nM\xfcller,2\n");
    g_assert_true(g_utf8_validate(rf_table_text(table, 0, 0), -1, NULL));
    g_assert_cmpfloat(number(table, 0, "b"), ==, 2.0);
}

static void units_in_headers(void)
{
    double scale;
    g_autoptr(RfTable) table = parse("Time (ms);U_mV;Fall distance [mm];level;x (furlongz)\n1;2;3;4;5\n");
    g_assert_cmpint(rf_table_find_quantity(table, "time", "s", &scale), ==, 0);
    g_assert_cmpfloat_with_epsilon(scale, 1e-3, 1e-15);
    g_assert_cmpint(rf_table_find_quantity(table, "u", "V", &scale), ==, 1);
    g_assert_cmpfloat_with_epsilon(scale, 1e-3, 1e-15);
    g_assert_cmpint(rf_table_find_quantity(table, "fall_distance", "m", &scale), ==, 2);
    g_assert_cmpfloat_with_epsilon(scale, 1e-3, 1e-15);
    g_assert_cmpint(rf_table_find_quantity(table, "level", "V", &scale), ==, 3);
    g_assert_cmpfloat(scale, ==, 1.0);
    g_assert_cmpint(rf_table_find_quantity(table, "x", "m", &scale), ==, -1);
    g_assert_cmpint(rf_table_find_quantity(table, "time", "V", &scale), ==, -1);
}

static void shapes_that_do_not_fit(void)
{
    refuse("", 0, RF_TABLE_ERROR_SHAPE, "header");
    refuse("# only\n\n", 8, RF_TABLE_ERROR_SHAPE, "header");
    refuse("a,b\n1,2,3\n", 10, RF_TABLE_ERROR_SHAPE,
           "line 2: seen 3 cells, the header has 2; decimal commas");
    refuse("a,time (s),Time_s\n", 18, RF_TABLE_ERROR_SHAPE, "line 1: the columns 2 and 3 are both called");
    refuse("a,b\n1,\"2\n3,4\n", 13, RF_TABLE_ERROR_SHAPE, "line 2: a quote");
    refuse("a,b\n\"1\"x,2\n", 11, RF_TABLE_ERROR_SHAPE, "line 2: seen `x,2");
    refuse("a,b\n\0,2\n", 8, RF_TABLE_ERROR_FILE, "binary");
    refuse("\xff\xfe"
           "a\0",
           4, RF_TABLE_ERROR_FILE, "UTF-8");
}

static void missing_columns_are_named(void)
{
    size_t column;
    g_autoptr(GError) error = NULL;
    g_autoptr(RfTable) table = parse("a,b c\n1,2\n");
    g_assert_false(rf_table_require(table, "time_s", &column, &error));
    g_assert_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_COLUMN);
    g_assert_cmpstr(error->message, ==, "t.csv: no column `time_s`; seen: a, b c");
}

static void cells_that_are_no_numbers(void)
{
    static const char *const cells[] = {"x",     "nan",     "inf", "0x10", "1e999", "1.2.3",
                                        "1,2,3", "1.234,5", "3 s", "\"\"", "--1"};
    for (size_t i = 0; i < G_N_ELEMENTS(cells); i++) {
        double value = 7;
        g_autoptr(GError) error = NULL;
        g_autofree char *text = g_strdup_printf("a;time_s\n\n1;%s\n", cells[i]);
        g_autoptr(RfTable) table = parse(text);
        g_assert_false(rf_table_number(table, 0, 1, &value, &error));
        g_assert_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_CELL);
        g_assert_true(g_str_has_prefix(error->message, "t.csv: line 3, column time_s: seen `"));
        g_assert_cmpfloat(value, ==, 7.0);
    }
}

static void whole_numbers(void)
{
    guint64 value;
    g_autoptr(RfTable) table = parse("a\n12\n-1\n1.5\n");
    g_assert_true(rf_table_whole(table, 0, 0, &value, NULL));
    g_assert_cmpuint(value, ==, 12);
    g_assert_false(rf_table_whole(table, 1, 0, &value, NULL));
    g_assert_false(rf_table_whole(table, 2, 0, &value, NULL));
}

static void a_hundred_thousand_rows(void)
{
    g_autoptr(GString) text = g_string_new("droplet,frame,time_s,x_px\n");
    for (int i = 0; i < 100000; i++)
        g_string_append_printf(text, "%d,%d,%.4f,%.3f\n", i % 7, i, i / 30.0, i * 0.37);
    g_autofree char *path = g_build_filename(g_get_tmp_dir(), "rf_table_XXXXXX", NULL);
    int handle = g_mkstemp(path);
    g_assert_cmpint(handle, >=, 0);
    g_close(handle, NULL);
    g_assert_true(g_file_set_contents(path, text->str, (gssize)text->len, NULL));
    gint64 start_us = g_get_monotonic_time();
    g_autoptr(RfTable) table = rf_table_read(path, NULL);
    g_unlink(path);
    double sum = 0, value;
    for (size_t row = 0; row < rf_table_rows(table); row++)
        if (rf_table_number(table, row, 3, &value, NULL)) sum += value;
    g_test_message("100 000 rows in %.0f ms", (double)(g_get_monotonic_time() - start_us) / 1e3);
    g_assert_cmpuint(rf_table_rows(table), ==, 100000);
    g_assert_cmpfloat_with_epsilon(sum, 0.37 * 99999.0 * 50000.0, 1e-3);
}

static void a_file_that_is_not_there(void)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_table_read("/nonexistent/t.csv", &error));
    g_assert_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE);
    g_assert_nonnull(strstr(error->message, "/nonexistent/t.csv"));
}

/* A few hundred kilobytes that would be 400 million cells, if each short row were filled up to the header's width. */
static void test_wide_header_over_short_rows(void)
{
    enum { SIDE = 20000 };
    g_autoptr(GString) text = g_string_new("c0");
    for (int i = 1; i < SIDE; i++) g_string_append_printf(text, ",c%d", i);
    g_string_append_c(text, '\n');
    for (int i = 0; i < SIDE; i++) g_string_append(text, "1\n");
    g_autoptr(GError) error = NULL;
    g_autoptr(RfTable) table = rf_table_parse(text->str, text->len, "wide.csv", &error);
    g_assert_no_error(error);
    g_assert_cmpuint(rf_table_rows(table), ==, SIDE);
    g_assert_cmpuint(rf_table_columns(table), ==, SIDE);
    g_assert_cmpstr(rf_table_text(table, SIDE - 1, 0), ==, "1");
    g_assert_true(rf_table_is_blank(table, SIDE - 1, SIDE - 1));
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/table/parse/header-without-rows", header_without_rows);
    g_test_add_func("/table/parse/plain-commas", plain_commas);
    g_test_add_func("/table/parse/every-way-of-writing-reads-the-same", every_way_of_writing_reads_the_same);
    g_test_add_func("/table/parse/quotes-hold-anything", quotes_hold_anything);
    g_test_add_func("/table/parse/short-rows-are-blank-behind", short_rows_are_blank_behind);
    g_test_add_func("/table/parse/strange-bytes-in-a-label", strange_bytes_in_a_label);
    g_test_add_func("/table/parse/shapes-that-do-not-fit", shapes_that_do_not_fit);
    g_test_add_func("/table/find/units-in-headers", units_in_headers);
    g_test_add_func("/table/require/missing-columns-are-named", missing_columns_are_named);
    g_test_add_func("/table/number/cells-that-are-no-numbers", cells_that_are_no_numbers);
    g_test_add_func("/table/whole/whole-numbers", whole_numbers);
    g_test_add_func("/table/read/a-hundred-thousand-rows", a_hundred_thousand_rows);
    g_test_add_func("/table/read/a-file-that-is-not-there", a_file_that_is_not_there);
    g_test_add_func("/table/rows/wide-header-over-short-rows", test_wide_header_over_short_rows);
    return g_test_run();
}
