#include "cli/screen_summary.h"

#include <glib.h>
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
    g_autofree char *text = rf_screen_summary_new(results, "out", 24, false);
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    g_assert_cmpuint(g_strv_length(lines) - 1, <=, 24);
    for (char **line = lines; *line; line++) g_assert_cmpuint(strlen(*line), <=, 90);
    g_assert_nonnull(strstr(text, "more rows in droplets.csv"));
    g_assert_nonnull(strstr(text, "out/report.html"));
}

static void says_the_result(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, 40, false);
    g_assert_nonnull(strstr(text, "1.6049(13)e-19 C"));
    g_assert_nonnull(strstr(text, "6 accepted, 1 set aside"));
    g_assert_nonnull(strstr(text, "set aside\n"));
    g_assert_null(strchr(text, '\033'));
}

static void numbers_line_up(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, 40, false);
    const char *header = strstr(text, "droplet spell");
    const size_t edge = (size_t)(strstr(header, "  verdict") - header);
    g_auto(GStrv) lines = g_strsplit(header, "\n", -1);
    for (char **line = lines + 1; **line; line++)
        g_assert_true(g_str_has_prefix(*line + edge, "  accepted") ||
                      g_str_has_prefix(*line + edge, "  set aside"));
}

static void colour_adds_no_word(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autofree char *plain = rf_screen_summary_new(results, NULL, 40, false),
                    *coloured = rf_screen_summary_new(results, NULL, 40, true);
    g_assert_nonnull(strstr(coloured, "\033["));
    g_autoptr(GRegex) code = g_regex_new("\033\\[[0-9;]*m", 0, 0, NULL);
    g_autofree char *bare = g_regex_replace_literal(code, coloured, -1, 0, "", 0, NULL);
    g_assert_cmpstr(bare, ==, plain);
}

static void nothing_measured(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autofree char *text = rf_screen_summary_new(results, NULL, 24, false);
    g_assert_nonnull(strstr(text, "not resolved: no charges"));
}

/* no-color.org: set and not empty means no colour. */
static void no_color_is_honoured(void)
{
    g_setenv("TERM", "xterm", TRUE);
    g_setenv("NO_COLOR", "1", TRUE);
    g_assert_false(rf_screen_summary_wants_colour(STDOUT_FILENO));
    g_unsetenv("NO_COLOR");
    int ends[2];
    g_assert_cmpint(pipe(ends), ==, 0);
    g_assert_false(rf_screen_summary_wants_colour(ends[1])); /* not a terminal */
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
    g_test_add_func("/screen_summary/colour/adds-no-word", colour_adds_no_word);
    g_test_add_func("/screen_summary/colour/no-color-is-honoured", no_color_is_honoured);
    return g_test_run();
}
