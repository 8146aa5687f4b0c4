#include "cli/screen_summary.h"

#include <glib.h>
#include <pty.h>
#include <string.h>
#include <unistd.h>

#include "tests/support/sample_results.h"

static void one_page(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    for (int i = 0; i < 100; i++) {
        RfDropletRow row = g_array_index(results->droplets, RfDropletRow, 0);
        row.droplet = 8 + (unsigned)i;
        row.reason = g_strdup("");
        g_array_append_val(results->droplets, row);
    }
    g_autofree char *text = rf_screen_summary_new(results, "out", &(RfScreen){24, 80, false});
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    g_assert_cmpuint(g_strv_length(lines) - 1, <=, 24);
    for (char **line = lines; *line; line++) g_assert_cmpuint(strlen(*line), <=, 80);
    g_assert_nonnull(strstr(text, "more rows in droplets.csv"));
    g_assert_nonnull(strstr(text, "out/report.html"));
}

static void says_the_result(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, &(RfScreen){40, 80, false});
    g_assert_nonnull(strstr(text, "1.6049(13)e-19 C"));
    g_assert_nonnull(strstr(text, "6 accepted, 1 set aside"));
    g_assert_nonnull(strstr(text, "set aside\n"));
    g_assert_null(strchr(text, '\033'));
}

static void numbers_line_up(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, &(RfScreen){40, 80, false});
    const char *header = strstr(text, "droplet spell");
    const size_t edge = (size_t)(strstr(header, "  verdict") - header);
    g_auto(GStrv) lines = g_strsplit(header, "\n", -1);
    for (char **line = lines + 1; **line; line++)
        g_assert_true(g_str_has_prefix(*line + edge, "  accepted") ||
                      g_str_has_prefix(*line + edge, "  set aside"));
}

/* 200 droplets set aside for a dozen reasons, and a verdict of three lines. */
static void many_set_aside(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_free(results->verdict);
    results->verdict = g_strnfill(200, 'v');
    for (int i = 10; i < 200; i += 5) results->verdict[i] = ' ';
    for (int i = 0; i < 200; i++) {
        RfDropletRow row = g_array_index(results->droplets, RfDropletRow, 0);
        row.droplet = 8 + (unsigned)i;
        row.accepted = false;
        row.reason = g_strdup_printf("kind %c: x = %d", i % 20 < 12 ? 'a' : 'b' + i % 11, i);
        g_array_prepend_val(results->droplets, row);
    }
    for (int columns = 80; columns <= 120; columns += 40) {
        g_autofree char *text = rf_screen_summary_new(results, "out", &(RfScreen){24, columns, false});
        g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
        g_assert_cmpuint(g_strv_length(lines) - 1, <=, 24);
        for (char **line = lines; *line; line++) g_assert_cmpint((int)strlen(*line), <=, columns);
        g_assert_nonnull(strstr(text, "\nset aside        120: kind a\n"));
        g_assert_nonnull(strstr(text, ": other reasons\n"));
        g_assert_nonnull(strstr(text, "  accepted\n")); /* first, though they come last */
    }
}

static void reasons_where_there_is_room(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, 0);
    row->accepted = false;
    g_free(row->reason);
    row->reason = g_strdup("charge too uncertain: u = 2.1e-19 C, seen with a field on for 0.4 s of 2.0 s");
    g_autofree char *wide = rf_screen_summary_new(results, NULL, &(RfScreen){40, 120, false}),
                    *narrow = rf_screen_summary_new(results, NULL, &(RfScreen){40, 80, false});
    g_assert_nonnull(strstr(wide, "set aside: charge too uncertain: u = 2.1e-19 C, ..."));
    g_assert_null(strstr(narrow, "u = 2.1e-19"));
    g_assert_nonnull(strstr(narrow, "charge too uncertain\n"));
}

static void paths_alone(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_screen_summary_paths_new(results, "out", &(RfScreen){24, 80, false});
    g_assert_nonnull(strstr(text, "198.41"));
    g_assert_nonnull(strstr(text, "out/paths.csv\n"));
    g_assert_null(strstr(text, "report"));
    g_assert_null(strstr(text, "accepted"));
}

static void colour_adds_no_word(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *plain = rf_screen_summary_new(results, NULL, &(RfScreen){40, 80, false}),
                    *coloured = rf_screen_summary_new(results, NULL, &(RfScreen){40, 80, true});
    g_assert_nonnull(strstr(coloured, "\033["));
    g_autoptr(GRegex) code = g_regex_new("\033\\[[0-9;]*m", 0, 0, NULL);
    g_autofree char *bare = g_regex_replace_literal(code, coloured, -1, 0, "", 0, NULL);
    g_assert_cmpstr(bare, ==, plain);
}

static void nothing_measured(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, &(RfScreen){24, 80, false});
    g_assert_nonnull(strstr(text, "not resolved: no charges"));
}

/* no-color.org: set and not empty means no colour. */
static void no_color_is_honoured(void)
{
    g_setenv("TERM", "xterm", TRUE);
    int master, terminal;
    const struct winsize size = {.ws_row = 40, .ws_col = 132};
    g_assert_cmpint(openpty(&master, &terminal, NULL, NULL, &size), ==, 0);
    g_unsetenv("NO_COLOR");
    const RfScreen screen = rf_screen_on(terminal);
    g_assert_true(screen.colour);
    g_assert_cmpint(screen.lines, ==, 39); /* the prompt has one */
    g_assert_cmpint(screen.columns, ==, 120);
    g_setenv("NO_COLOR", "", TRUE);
    g_assert_true(rf_screen_on(terminal).colour);
    g_setenv("NO_COLOR", "1", TRUE);
    g_assert_false(rf_screen_on(terminal).colour);
    g_unsetenv("NO_COLOR");
    g_setenv("TERM", "dumb", TRUE);
    g_assert_false(rf_screen_on(terminal).colour);
    close(master);
    close(terminal);
}

static void no_terminal(void)
{
    g_setenv("TERM", "xterm", TRUE);
    int ends[2];
    g_assert_cmpint(pipe(ends), ==, 0);
    const RfScreen screen = rf_screen_on(ends[1]);
    g_assert_false(screen.colour);
    g_assert_cmpint(screen.lines, ==, 23);
    g_assert_cmpint(screen.columns, ==, 80);
    close(ends[0]);
    close(ends[1]);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/screen_summary/page/one-page", one_page);
    g_test_add_func("/screen_summary/page/says-the-result", says_the_result);
    g_test_add_func("/screen_summary/page/numbers-line-up", numbers_line_up);
    g_test_add_func("/screen_summary/page/nothing-measured", nothing_measured);
    g_test_add_func("/screen_summary/page/many-set-aside", many_set_aside);
    g_test_add_func("/screen_summary/page/reasons-where-there-is-room", reasons_where_there_is_room);
    g_test_add_func("/screen_summary/page/paths-alone", paths_alone);
    g_test_add_func("/screen_summary/screen/no-terminal", no_terminal);
    g_test_add_func("/screen_summary/colour/adds-no-word", colour_adds_no_word);
    g_test_add_func("/screen_summary/colour/no-color-is-honoured", no_color_is_honoured);
    return g_test_run();
}
