#include "cli/manual.h"

#include <string.h>

#include "cli/settings_keys.h"
#include "cli/text_wrap.h"

static bool holds_term(const RfManual *manual, const char *term)
{
    for (guint i = 0; i < manual->parts->len; i++) {
        const RfManualPart *part = &g_array_index(manual->parts, RfManualPart, i);
        if (part->kind == RF_MANUAL_ITEM && strcmp(part->term, term) == 0) return true;
    }
    return false;
}

static void overview_names_every_command(void)
{
    g_autoptr(RfManual) manual = rf_manual_overview();
    for (const RfCommand *const *command = rf_commands; *command; command++)
        g_assert_true(holds_term(manual, (*command)->verb));
}

static void command_names_every_option(void)
{
    for (const RfCommand *const *command = rf_commands; *command; command++) {
        g_autoptr(RfManual) manual = rf_manual_command(*command);
        g_autofree char *text = rf_manual_text(manual, 80);
        g_autofree GOptionEntry *options = rf_command_options(*command);
        for (const GOptionEntry *option = options; option->long_name; option++) {
            g_autofree char *name = g_strdup_printf("--%s", option->long_name);
            g_assert_nonnull(strstr(text, name));
            g_assert_nonnull(option->description);
        }
    }
}

static void sheet_names_every_key(void)
{
    g_autoptr(RfManual) manual = rf_manual_sheet();
    for (size_t i = 0; i < rf_settings_n_keys; i++)
        g_assert_true(holds_term(manual, rf_settings_keys[i].key));
    g_autofree char *text = rf_manual_text(manual, 80);
    g_assert_nonnull(strstr(text, "\n[notes]\n"));
}

static void sheet_example_is_a_sheet(void)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(RfSettings) settings =
        rf_settings_parse(rf_manual_sheet_example, strlen(rf_manual_sheet_example), "/tmp/sheet.ini", &error);
    g_assert_no_error(error);
    g_assert_nonnull(settings);
}

static void text_keeps_its_columns(void)
{
    g_autoptr(RfManual) manual = rf_manual_sheet();
    for (int columns = 80; columns <= 120; columns += 20) {
        g_autofree char *text = rf_manual_text(manual, columns);
        g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
        for (char **line = lines; *line; line++) g_assert_cmpint(rf_text_wrap_width(*line), <=, columns);
    }
}

/* What a shell would read must come out of man(1) as it went in; a line's first dot or quote isn't a request. */
static void roff_is_escaped(void)
{
    g_autoptr(RfManual) manual = rf_manual_new("risefall-x", "risefall x", 1, "a 'test'");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL, ".hidden --out\n'quoted' \\ ^2 ~ `x`\n");
    rf_manual_add(manual, RF_MANUAL_ITEM, "--out", "5 \xc2\xb5m");
    g_autofree char *roff = rf_manual_roff(manual);
    g_assert_nonnull(strstr(roff, "\n\\&.hidden \\-\\-out\n"));
    g_assert_nonnull(strstr(roff, "\n\\(aqquoted\\(aq \\e \\(ha2 \\(ti \\(gax\\(ga\n"));
    g_assert_nonnull(strstr(roff, "\n.TP\n\\fB\\-\\-out\\fP\n5 \\[u00B5]m\n"));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/manual/overview/names-every-command", overview_names_every_command);
    g_test_add_func("/manual/command/names-every-option", command_names_every_option);
    g_test_add_func("/manual/sheet/names-every-key", sheet_names_every_key);
    g_test_add_func("/manual/sheet/example-is-a-sheet", sheet_example_is_a_sheet);
    g_test_add_func("/manual/text/keeps-its-columns", text_keeps_its_columns);
    g_test_add_func("/manual/roff/is-escaped", roff_is_escaped);
    return g_test_run();
}
