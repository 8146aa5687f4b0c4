#include <string.h>

#include "cli/manual.h"
#include "cli/settings_keys.h"

const char rf_manual_sheet_example[] = "[recording]\n"
                                       "video=morning.mkv\n"
                                       "timings=stopwatch.csv\n"
                                       "gravity=down\n"
                                       "[reticle]\n"
                                       "image=reticle.png\n"
                                       "spacing=0.1000(2) mm\n"
                                       "lines=grid\n"
                                       "[cell]\n"
                                       "plate_gap=6.000(10) mm\n"
                                       "gravity=9.8106(5) m/s^2\n"
                                       "[oil]\n"
                                       "density=886.0(10) kg/m^3\n"
                                       "[air]\n"
                                       "temperature=23.0(2) degC\n"
                                       "pressure=101.30(5) kPa\n"
                                       "humidity=45(5) %\n"
                                       "[supply]\n"
                                       "voltage=500.0(5) V\n"
                                       "states=off,top+\n"
                                       "[notes]\n"
                                       "operator=A. Example\n";

static bool is_quantity(const RfSettingsKey *key)
{
    return key->kind == RF_KEY_QUANTITY || key->kind == RF_KEY_MAYBE_QUANTITY ||
           key->kind == RF_KEY_VISCOSITY;
}

/* 0.001, 9000, 1e7 */
static char *limit_text(double limit)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    GString *out = g_string_new(g_ascii_formatd(text, sizeof text, "%g", limit));
    g_string_replace(out, "e+0", "e", 1);
    g_string_replace(out, "e-0", "e-", 1);
    return g_string_free(out, FALSE);
}

static void add_unit(GString *text, const RfSettingsKey *key)
{
    g_autofree char *least = limit_text(key->least), *most = limit_text(key->most);
    const bool is_pure = strcmp(key->form, "1") == 0;
    g_string_append_printf(text, " From %s to %s%s%s.", least, most, is_pure ? "" : " ",
                           is_pure ? "" : key->form);
}

static void add_words(GString *text, const RfSettingsKey *key)
{
    g_auto(GStrv) words = g_strsplit(key->form, "|", -1);
    g_autofree char *list = g_strjoinv(", ", words);
    g_string_append_printf(text, " One of %s.", list);
}

/* That it isn't stated in the sheet is what a default means. */
static void add_default(GString *text, const RfSettingsKey *key)
{
    g_string_append_printf(text, " Default: %s", key->fallback);
    if (strcmp(key->remark, "not stated in the sheet") != 0)
        g_string_append_printf(text, " (%s)", key->remark);
    g_string_append_c(text, '.');
}

static void add_key(RfManual *manual, const RfSettingsKey *key)
{
    g_autoptr(GString) text = g_string_new(key->help);
    g_string_append_c(text, '.');
    if (key->kind == RF_KEY_WORD) add_words(text, key);
    if (is_quantity(key)) add_unit(text, key);
    if (key->fallback)
        add_default(text, key);
    else if (key->kind == RF_KEY_QUANTITY || key->kind == RF_KEY_PATHS)
        g_string_append(text, " Needed.");
    rf_manual_add(manual, RF_MANUAL_ITEM, key->key, text->str);
}

static void add_keys(RfManual *manual)
{
    for (size_t i = 0; i < rf_settings_n_keys; i++) {
        const RfSettingsKey *key = &rf_settings_keys[i];
        if (i == 0 || strcmp(key->group, key[-1].group) != 0) {
            g_autofree char *group = g_strdup_printf("[%s]", key->group);
            rf_manual_add(manual, RF_MANUAL_HEADING, NULL, group);
        }
        add_key(manual, key);
    }
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, "[shared]");
    rf_manual_add(manual, RF_MANUAL_ITEM, "KEY=NAME",
                  "The input KEY is one and the same measurement in all sheets that name it so, as in "
                  "plate_gap=gap-march.");
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, "[notes]");
    rf_manual_add(manual, RF_MANUAL_ITEM, "any key",
                  "Carried into the report word for word: operator, date, certificates.");
}

RfManual *rf_manual_sheet(void)
{
    RfManual *manual =
        rf_manual_new("risefall-sheet", "the run sheet", 5, "what was measured at the bench, for risefall");
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, "Description");
    rf_manual_add_paragraphs(
        manual, "A run sheet is a text file of groups in brackets and lines key=value below them. Lines that "
                "begin with # are "
                "comments; they stand on lines of their own. Paths are relative to the sheet's folder.\n\n"
                "A quantity is a number with a unit, and its standard uncertainty in parentheses, counted in "
                "the last digits: "
                "6.000(10) mm is 6.000 mm with a standard uncertainty of 0.010 mm; 6.000 mm is taken as "
                "exact. Any unit of the "
                "right kind is taken: degC or K; Pa, hPa or mmHg; mm or in.\n\n"
                "A key that isn't known or is repeated, a unit of the wrong kind or an impossible value is "
                "refused with the line "
                "it stands on. Every default that is used is stated in the report.");
    add_keys(manual);
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, "Example");
    rf_manual_add(manual, RF_MANUAL_VERBATIM, NULL, rf_manual_sheet_example);
    rf_manual_add(manual, RF_MANUAL_HEADING, NULL, "See also");
    rf_manual_add(manual, RF_MANUAL_PARAGRAPH, NULL, "risefall-run(1), risefall(1)");
    return manual;
}
