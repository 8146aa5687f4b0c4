#include "cli/hand_timings.h"

#include "calib/table.h"

#include <string.h>
#include <time.h>

static RfHandTimings *parse(const char *text)
{
    g_autoptr(GError) error = NULL;
    RfHandTimings *timings = rf_hand_timings_parse(text, strlen(text), "timings.csv", &error);
    g_assert_no_error(error);
    return timings;
}

static const RfHandEntry *at(const RfHandTimings *timings, guint i)
{
    g_assert_cmpuint(i, <, timings->entries->len);
    return &g_array_index(timings->entries, RfHandEntry, i);
}

static void plain(void)
{
    g_autoptr(RfHandTimings) timings = parse("entry,label,motion,divisions,time_s,voltage_V,start_s\n"
                                             "7,A,rise,2,3.85,300,7.47\n8,,fall,1,2.42,,\n");
    g_assert_cmpuint(timings->entries->len, ==, 2);
    const RfHandEntry *first = at(timings, 0), *second = at(timings, 1);
    g_assert_cmpuint(first->entry, ==, 7);
    g_assert_cmpstr(first->label, ==, "A");
    g_assert_true(first->is_rise && first->has_voltage && first->has_start);
    g_assert_cmpfloat_with_epsilon(first->divisions, 2, 1e-12);
    g_assert_cmpfloat_with_epsilon(first->time_s, 3.85, 1e-12);
    g_assert_cmpfloat_with_epsilon(first->start_s, 7.47, 1e-12);
    g_assert_cmpstr(first->time_text, ==, "3.85");
    g_assert_true(!second->is_rise && !second->has_voltage && !second->has_start);
    g_assert_null(second->problem);
}

static void as_spreadsheets_write(void)
{
    g_autoptr(RfHandTimings) timings =
        parse("\xef\xbb\xbf\"Start (s)\";Divisions;\"Time (ms)\";Motion;Label\r\n\r\n"
              "# before noon\r\n12,5;2;\"3850,5\";Falling;\"B; left\"\r\n;;;;\r\n"
              "1:07,5;1;1900;UP;<b>&\r\n");
    g_assert_cmpuint(timings->entries->len, ==, 2);
    g_assert_cmpfloat_with_epsilon(at(timings, 0)->time_s, 3.8505, 1e-12);
    g_assert_cmpfloat_with_epsilon(at(timings, 0)->start_s, 12.5, 1e-12);
    g_assert_cmpstr(at(timings, 0)->label, ==, "B; left");
    g_assert_cmpfloat_with_epsilon(at(timings, 1)->start_s, 67.5, 1e-12);
    g_assert_true(at(timings, 1)->is_rise);
    g_assert_cmpstr(at(timings, 1)->label, ==, "<b>&"); /* as written: whoever shows it escapes it */
    g_assert_cmpuint(at(timings, 1)->entry, ==, 2);
    g_assert_cmpuint(timings->unreadable, ==, 0);
}

static void tabs_distance_and_hours(void)
{
    g_autoptr(RfHandTimings) timings =
        parse("motion\tdistance (um)\ttime\tstart\nfall\t200\t1:23.4\t14:03:22.5\n");
    g_assert_cmpfloat_with_epsilon(at(timings, 0)->distance_mm, 0.2, 1e-12);
    g_assert_cmpfloat(at(timings, 0)->divisions, <=, 0);
    g_assert_cmpfloat_with_epsilon(at(timings, 0)->time_s, 83.4, 1e-12);
    g_assert_cmpfloat_with_epsilon(at(timings, 0)->start_s, 50602.5, 1e-9);
}

static void bad_cells_sink_only_their_entry(void)
{
    static const char *const rows[][2] = {
        {"fall,1,abc,3", "line 2, column time_s: seen `abc`"},
        {"sideways,1,2,3", "line 2, column motion"},
        {"fall,0,2,3", "line 2, column divisions"},
        {"fall,-1,2,3", "line 2, column divisions"},
        {"fall,1,-2,3", "line 2, column time_s"},
        {"fall,1,0,3", "line 2, column time_s"},
        {"fall,1,nan,3", "line 2, column time_s: seen `nan`"},
        {"fall,1,1e400,3", "line 2, column time_s"},
        {"fall,1,1:75,3", "line 2, column time_s: seen `1:75`"},
        {"fall,1,2,soon", "line 2, column start_s: seen `soon`"},
        {"fall,1,::,3", "line 2, column time_s"},
        {"fall,,2,3", "line 2, column divisions: seen `(blank)`"},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(rows); i++) {
        g_autofree char *text =
            g_strdup_printf("motion,divisions,time_s,start_s\n%s\nrise,2,4.5,6\n", rows[i][0]);
        g_autoptr(RfHandTimings) timings = parse(text);
        g_assert_cmpuint(timings->entries->len, ==, 2);
        g_assert_cmpuint(timings->unreadable, ==, 1);
        g_assert_nonnull(at(timings, 0)->problem);
        g_assert_nonnull(strstr(at(timings, 0)->problem, rows[i][1]));
        g_assert_null(at(timings, 1)->problem);
    }
}

static void refuses(const char *text, int code, const char *words)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfHandTimings) timings = rf_hand_timings_parse(text, strlen(text), "timings.csv", &error);
    g_assert_null(timings);
    g_assert_error(error, RF_TABLE_ERROR, code);
    g_assert_nonnull(strstr(error->message, words));
}

static void refusals(void)
{
    refuses("entry,label,time_s,divisions\n1,A,2,1\n", RF_TABLE_ERROR_COLUMN, "motion");
    refuses("entry,motion,divisions\n1,fall,1\n", RF_TABLE_ERROR_COLUMN, "time_s");
    refuses("entry,motion,time_s\n1,fall,2\n", RF_TABLE_ERROR_COLUMN, "divisions");
    refuses("motion,time_s,divisions,Time (s)\nfall,2,1,2\n", RF_TABLE_ERROR_SHAPE, "columns 2 and 4");
    refuses("motion,time_s,divisions\n", RF_TABLE_ERROR_SHAPE, "no entries");
    refuses("", RF_TABLE_ERROR_SHAPE, "header");
}

static void a_long_record_is_quick(void)
{
    g_autoptr(GString) text = g_string_new("entry,label,motion,divisions,time_s,start_s\n");
    for (int i = 0; i < 100000; i++) g_string_append_printf(text, "%d,L%d,fall,2,3.85,%d\n", i + 1, i, i);
    clock_t from = clock();
    g_autoptr(RfHandTimings) timings = parse(text->str);
    double took_s = (double)(clock() - from) / CLOCKS_PER_SEC;
    g_test_message("100 000 rows in %.2f s of processor time", took_s);
    g_assert_cmpuint(timings->entries->len, ==, 100000);
    g_assert_cmpuint(timings->unreadable, ==, 0);
    g_assert_cmpfloat(took_s, <, 5);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/hand_timings/parse/plain", plain);
    g_test_add_func("/hand_timings/parse/as-spreadsheets-write", as_spreadsheets_write);
    g_test_add_func("/hand_timings/parse/tabs-distance-and-hours", tabs_distance_and_hours);
    g_test_add_func("/hand_timings/parse/bad-cells-sink-only-their-entry", bad_cells_sink_only_their_entry);
    g_test_add_func("/hand_timings/parse/refusals", refusals);
    g_test_add_func("/hand_timings/parse/a-long-record-is-quick", a_long_record_is_quick);
    return g_test_run();
}
