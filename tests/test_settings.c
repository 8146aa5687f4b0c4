#include "cli/settings.h"

#include <gsl/gsl_errno.h>
#include <locale.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "cli/results.h"
#include "cli/settings_keys.h"

static const char good[] = "[recording]\n"
                           "video=calm.mkv\n"
                           "gravity=down\n"
                           "[reticle]\n"
                           "image=reticle.png\n"
                           "spacing=0.1000(2) mm\n"
                           "lines=grid\n"
                           "[cell]\n"
                           "plate_gap=6.000(10) mm\n"
                           "[oil]\n"
                           "density=886.0(10) kg/m^3\n"
                           "[air]\n"
                           "temperature=23.0(2) degC\n"
                           "pressure=101.30(5) kPa\n"
                           "humidity=45(5) %\n"
                           "[supply]\n"
                           "voltage=300.0(4) V\n"
                           "states=off,top+\n";

/* The good sheet with one piece replaced, and something behind it. */
static char *altered(const char *from, const char *to, const char *behind)
{
    const char *at = strstr(good, from);
    g_assert_nonnull(at);
    if (*from == '\0') return g_strconcat(good, behind, NULL);
    g_autofree char *before = g_strndup(good, (size_t)(at - good));
    return g_strconcat(before, to, at + strlen(from), behind, NULL);
}

static RfSettings *parse(const char *text)
{
    g_autoptr(GError) error = NULL;
    RfSettings *settings = rf_settings_parse(text, strlen(text), "bench/run.ini", &error);
    g_assert_no_error(error);
    return settings;
}

static RfSettings *parse_altered(const char *from, const char *to, const char *behind)
{
    g_autofree char *text = altered(from, to, behind);
    return parse(text);
}

static void assert_value(RfValue got, double value, double sigma)
{
    g_assert_cmpfloat_with_epsilon(got.value, value, 1e-12 * fabs(value) + 1e-300);
    g_assert_cmpfloat_with_epsilon(got.sigma, sigma, 1e-12 * sigma + 1e-300);
}

static void assert_usual(const RfSettings *s)
{
    assert_value(s->spacing_m, 1e-4, 2e-7);
    assert_value(s->plate_gap_m, 6e-3, 1e-5);
    assert_value(s->density_kg_m3, 886.0, 1.0);
    assert_value(s->temperature_kelvin, 296.15, 0.2);
    assert_value(s->pressure_pa, 101300.0, 50.0);
    assert_value(s->humidity, 0.45, 0.05);
    assert_value(s->voltage_V.v, 300.0, 0.4);
}

static void a_good_sheet(void)
{
    g_autoptr(RfSettings) s = parse(good);
    assert_usual(s);
    g_assert_cmpuint(s->videos->len, ==, 1);
    g_assert_cmpstr(s->videos->pdata[0], ==, "bench/calm.mkv");
    g_assert_cmpstr(s->reticle_image, ==, "bench/reticle.png");
    g_assert_cmpint(s->gravity, ==, RF_GRAVITY_DOWN);
    g_assert_false(s->finds_gravity);
    g_assert_cmpint(s->lines, ==, RF_RETICLE_GRID);
    g_assert_cmpuint(s->n_states, ==, 2);
    g_assert_cmpint(s->states[0], ==, RF_FIELD_OFF);
    g_assert_cmpint(s->states[1], ==, RF_FIELD_TOP_PLUS);
    g_assert_false(s->start_s.is_set || s->stop_s.is_set || s->frame_rate_hz.is_set ||
                   s->density_at_kelvin.is_set);
    g_assert_null(s->log);
    g_assert_null(s->timings);
    assert_value(s->plane_ratio, 1.0, 0.0);
    g_assert_cmpfloat(s->gravity_m_s2.value, ==, 9.80665);
    g_assert_cmpfloat(s->gravity_m_s2.sigma, >, 0.0);
    g_assert_cmpint(s->slip, ==, RF_SLIP_KIM_2005);
    g_assert_cmpint(s->viscosity, ==, RF_VISCOSITY_ISO_15900);
}

static const RfUsedSetting *used(const RfSettings *s, const char *group, const char *key)
{
    for (unsigned i = 0; i < s->used->len; i++) {
        const RfUsedSetting *setting = &g_array_index(s->used, RfUsedSetting, i);
        if (strcmp(setting->group, group) == 0 && strcmp(setting->key, key) == 0) return setting;
    }
    return NULL;
}

static void defaults_are_recorded_with_their_reason(void)
{
    g_autoptr(RfSettings) s = parse_altered("humidity=45(5) %\n", "", "");
    assert_value(s->humidity, 0.50, 0.29);
    g_assert_true(used(s, "air", "humidity")->is_default);
    g_assert_cmpstr(used(s, "air", "humidity")->value, ==, "50(29) %");
    g_assert_true(used(s, "cell", "gravity")->is_default);
    g_assert_true(used(s, "analysis", "slip")->is_default);
    g_assert_false(used(s, "cell", "plate_gap")->is_default);
    g_assert_cmpstr(used(s, "cell", "plate_gap")->value, ==, "6.000(10) mm");
    for (unsigned i = 0; i < s->used->len; i++) {
        const RfUsedSetting *setting = &g_array_index(s->used, RfUsedSetting, i);
        g_assert_true(setting->is_default == (*setting->remark != '\0'));
    }
}

static void byte_order_mark_and_crlf(void)
{
    g_auto(GStrv) lines = g_strsplit(good, "\n", -1);
    g_autofree char *crlf = g_strjoinv("\r\n", lines);
    g_autofree char *marked = g_strconcat("\xef\xbb\xbf", crlf, NULL);
    g_autoptr(RfSettings) s = parse(marked);
    assert_usual(s);
    g_assert_cmpstr(s->reticle_image, ==, "bench/reticle.png");
}

static void locale_does_not_matter(void)
{
    if (!setlocale(LC_ALL, "de_DE.UTF-8")) {
        g_test_skip("no German locale here");
        return;
    }
    g_autoptr(RfSettings) s = parse(good);
    setlocale(LC_ALL, "C");
    assert_usual(s);
}

static void several_recordings(void)
{
    g_autoptr(RfSettings) s = parse_altered("video=calm.mkv", "video=a.mkv; b c.mkv;/abs/d.mkv", "");
    g_assert_cmpuint(s->videos->len, ==, 3);
    g_assert_cmpstr(s->videos->pdata[1], ==, "bench/b c.mkv");
    g_assert_cmpstr(s->videos->pdata[2], ==, "/abs/d.mkv");
}

static void optional_keys(void)
{
    g_autofree char *text = altered(
        "video=calm.mkv\ngravity=down\n",
        "video=calm.mkv\ngravity=find\nstart=5 s\nstop=1.0 min\nframe_rate=30.000(1) "
        "Hz\ntimings=t.csv\nreview=r.csv\n",
        "voltage_top_minus=290.0(4) V\nlog=volts.csv\n[analysis]\nslip=one-term\nslip_b=6.17e-4 cm cmHg\n"
        "viscosity=1.8325(27)e-5 Pa s\n[notes]\noperator=A. Example\ncertificate = no. 7; C:\\reticle\n"
        "[shared]\nplate_gap=gap-march\ndensity=bottle-7\n");
    g_autoptr(RfSettings) s = parse(text);
    RfValue voltage_V;
    g_assert_true(s->finds_gravity);
    assert_value(s->start_s.v, 5.0, 0.0);
    assert_value(s->stop_s.v, 60.0, 0.0);
    assert_value(s->frame_rate_hz.v, 30.0, 0.001);
    g_assert_cmpstr(s->timings, ==, "bench/t.csv");
    g_assert_cmpstr(s->review, ==, "bench/r.csv");
    g_assert_cmpstr(s->log, ==, "bench/volts.csv");
    g_assert_cmpint(s->slip, ==, RF_SLIP_ONE_TERM);
    /* 6.17e-4 cm cmHg = 6.17e-6 m * 1333.22 Pa = 8.226e-3 Pa m (Millikan 1917) */
    g_assert_cmpfloat_with_epsilon(s->slip_b_pa_m.v.value, 8.226e-3, 1e-6);
    g_assert_cmpint(s->viscosity, ==, RF_VISCOSITY_GIVEN);
    assert_value(s->viscosity_pa_s.v, 1.8325e-5, 0.0027e-5);
    g_assert_true(rf_settings_voltage(s, RF_FIELD_TOP_MINUS, &voltage_V));
    assert_value(voltage_V, 290.0, 0.4);
    g_assert_true(rf_settings_voltage(s, RF_FIELD_TOP_PLUS, &voltage_V));
    assert_value(voltage_V, 300.0, 0.4);
    g_assert_true(rf_settings_voltage(s, RF_FIELD_OFF, &voltage_V));
    assert_value(voltage_V, 0.0, 0.0);
    g_assert_cmpuint(s->notes->len, ==, 2);
    g_assert_cmpstr(g_array_index(s->notes, RfUsedSetting, 1).value, ==, "no. 7; C:\\reticle");
    g_assert_cmpuint(s->shared->len, ==, 2);
    g_assert_cmpstr(g_array_index(s->shared, RfUsedSetting, 0).value, ==, "gap-march");
}

static void gravity_from_the_place(void)
{
    g_autoptr(RfSettings) stated =
        parse_altered("6.000(10) mm\n", "6.000(10) mm\ngravity=9.8106(5) m/s^2\n", "");
    assert_value(stated->gravity_m_s2, 9.8106, 0.0005);
    /* normal gravity at 45 degrees, WGS84: 9.80619777 m/s^2 (NIMA TR8350.2 formula) */
    g_autoptr(RfSettings) placed = parse_altered("6.000(10) mm\n", "6.000(10) mm\nlatitude=45 degree\n", "");
    g_assert_cmpfloat_with_epsilon(placed->gravity_m_s2.value, 9.80619777, 1e-6);
    g_assert_true(used(placed, "cell", "gravity")->is_default);
    g_autoptr(RfSettings) high =
        parse_altered("6.000(10) mm\n", "6.000(10) mm\nlatitude=45 degree\nheight=1 km\n", "");
    g_assert_cmpfloat_with_epsilon(high->gravity_m_s2.value, 9.80619777 - 0.3086e-2, 2e-5);
}

/* The generic 10 kohm NTC of the thermistor's own tests: 10 kohm at 25 degC. */
static void temperature_from_a_thermistor(void)
{
    g_autoptr(RfSettings) s = parse_altered("temperature=23.0(2) degC", "resistance=10.000(10) kohm",
                                            "[thermistor]\na=1.12924e-3\nb=2.34108e-4\nc=0.87755e-7\n");
    g_assert_cmpfloat_with_epsilon(s->temperature_kelvin.value, 298.15, 1e-3);
    g_assert_cmpfloat_with_epsilon(s->temperature_kelvin.sigma, 0.0228, 1e-3);
    g_assert_nonnull(used(s, "air", "temperature"));
    g_autoptr(RfSettings) four = parse_altered("temperature=23.0(2) degC", "resistance=10.000 kohm",
                                               "[thermistor]\na=3.3539438e-3\nb=2.5646095e-4\nc=2.5158166e-"
                                               "6\nd=1.0503069e-7\nreference=10 kohm\nuncertainty=0.1 K\n");
    assert_value(four->temperature_kelvin, 1.0 / 3.3539438e-3, 0.1);
}

static void temperature_from_a_table(void)
{
    g_autofree char *path = g_build_filename(g_get_tmp_dir(), "rf_settings_thermistor.csv", NULL);
    g_autofree char *behind = g_strdup_printf("[thermistor]\ntable=%s\n", path);
    g_assert_true(g_file_set_contents(
        path, "resistance (kohm);temperature (degC)\n12,49;20\n10;25\n8,056;30\n", -1, NULL));
    g_autoptr(RfSettings) s = parse_altered("temperature=23.0(2) degC", "resistance=10.000 kohm", behind);
    g_assert_cmpfloat_with_epsilon(s->temperature_kelvin.value, 298.15, 1e-9);
    g_autoptr(GError) error = NULL;
    g_autofree char *text = altered("temperature=23.0(2) degC", "resistance=20 kohm", behind);
    g_assert_null(rf_settings_parse(text, strlen(text), "run.ini", &error));
    g_assert_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_VALUE);
    g_assert_nonnull(strstr(error->message, "beyond the thermistor's table"));
    remove(path);
}

typedef struct {
    const char *from, *to, *behind;
    int code;
    const char *where, *needle; /* the message begins "run.ini: " and then where */
} Bad;

static const Bad bad_sheets[] = {
    {"plate_gap", "plate_gab", "", RF_SETTINGS_ERROR_UNKNOWN,
     "line 9: [cell] plate_gab: ", "plate_gap, gravity"},
    {"[oil]", "[oyl]", "", RF_SETTINGS_ERROR_UNKNOWN, "line 10: [oyl] ", "recording, reticle, cell, oil"},
    {"", "", "[empty]\n", RF_SETTINGS_ERROR_UNKNOWN, "line 19: [empty] ", "no group"},
    {"[oil]\n", "plate_gap=6 mm\n[oil]\n", "", RF_SETTINGS_ERROR_FILE,
     "line 10: [cell] plate_gap: ", "line 9"},
    {"", "", "[cell]\nheight=3 m\n", RF_SETTINGS_ERROR_FILE, "line 19: [cell] ", "line 8"},
    {"[cell]", "[cell", "", RF_SETTINGS_ERROR_FILE, "line 8: ", "seen `[cell`"},
    {"lines=grid", "lines grid", "", RF_SETTINGS_ERROR_FILE, "line 7: ", "seen `lines grid`"},
    {"[recording]\n", "", "", RF_SETTINGS_ERROR_FILE, "line 1: ", "before the first group"},
    {"lines=grid", "lines=gr\xef", "", RF_SETTINGS_ERROR_FILE, "line 7: ", "UTF-8"},
    {"plate_gap=6.000(10) mm\n", "", "", RF_SETTINGS_ERROR_MISSING, "[cell] plate_gap: ", "6.000(10) mm"},
    {"video=calm.mkv\n", "", "", RF_SETTINGS_ERROR_MISSING, "[recording] video: ", "needed"},
    {"temperature=23.0(2) degC\n", "", "", RF_SETTINGS_ERROR_MISSING, "[air] temperature: ", "resistance="},
    {"states=off,top+\n", "", "", RF_SETTINGS_ERROR_MISSING, "[supply] states: ", "off,top+"},
    {"voltage=300.0(4) V\n", "", "", RF_SETTINGS_ERROR_MISSING, "[supply] voltage: ", "voltage_top_plus="},
    {"6.000(10) mm", "6,000(10) mm", "", RF_SETTINGS_ERROR_VALUE,
     "line 9: [cell] plate_gap: ", "decimal point"},
    {"6.000(10) mm", "6.000(10) kg", "", RF_SETTINGS_ERROR_VALUE,
     "line 9: [cell] plate_gap: ", "another dimension"},
    {"6.000(10) mm", "6.000(10)", "", RF_SETTINGS_ERROR_VALUE,
     "line 9: [cell] plate_gap: ", "without a unit"},
    {"6.000(10) mm", "0 mm", "", RF_SETTINGS_ERROR_VALUE, "line 9: [cell] plate_gap: ", "possible is"},
    {"6.000(10) mm", "nan mm", "", RF_SETTINGS_ERROR_VALUE, "line 9: [cell] plate_gap: ", "finite"},
    {"6.000(10) mm", "6.000(7000) mm", "", RF_SETTINGS_ERROR_VALUE,
     "line 9: [cell] plate_gap: ", "as large as"},
    {"6.000(10) mm", "6 mm # gap", "", RF_SETTINGS_ERROR_VALUE, "line 9: [cell] plate_gap: ", "unknown"},
    {"886.0(10) kg", "-886.0(10) kg", "", RF_SETTINGS_ERROR_VALUE, "line 11: [oil] density: ", "possible is"},
    {"45(5) %", "145(5) %", "", RF_SETTINGS_ERROR_VALUE, "line 15: [air] humidity: ", "possible is 0 to 1"},
    {"23.0(2) degC", "-400 degC", "", RF_SETTINGS_ERROR_VALUE, "line 13: [air] temperature: ", "possible is"},
    {"off,top+", "off,up", "", RF_SETTINGS_ERROR_VALUE, "line 18: [supply] states: ", "seen the state `up`"},
    {"off,top+", "off,top+,off", "", RF_SETTINGS_ERROR_VALUE, "line 18: [supply] states: ", "twice"},
    {"off,top+", "", "", RF_SETTINGS_ERROR_VALUE, "line 18: [supply] states: ", "states"},
    {"lines=grid", "lines=round", "", RF_SETTINGS_ERROR_VALUE,
     "line 7: [reticle] lines: ", "grid|horizontal|vertical"},
    {"gravity=down", "gravity=below", "", RF_SETTINGS_ERROR_VALUE,
     "line 3: [recording] gravity: ", "down|up"},
    {"video=calm.mkv", "video=", "", RF_SETTINGS_ERROR_VALUE, "line 2: [recording] video: ", "path"},
    {"image=reticle.png", "image=", "", RF_SETTINGS_ERROR_VALUE, "line 5: [reticle] image: ", "path"},
    {"gravity=down", "start=5 s\nstop=5 s", "", RF_SETTINGS_ERROR_VALUE,
     "line 4: [recording] stop: ", "after the start"},
    {"gravity=down", "start=-5 s", "", RF_SETTINGS_ERROR_VALUE, "line 3: [recording] start: ", "possible is"},
    {"[oil]", "gravity=9.8 m/s^2\nlatitude=50 degree\n[oil]", "", RF_SETTINGS_ERROR_VALUE,
     "line 10: [cell] gravity: ", "one or the other"},
    {"[oil]", "height=100 m\n[oil]", "", RF_SETTINGS_ERROR_MISSING, "line 10: [cell] height: ", "latitude"},
    {"[oil]", "latitude=91 degree\n[oil]", "", RF_SETTINGS_ERROR_VALUE,
     "line 10: [cell] latitude: ", "-90 to 90"},
    {"[air]", "density_at=20 degC\n[air]", "", RF_SETTINGS_ERROR_MISSING,
     "line 12: [oil] density_at: ", "density_slope"},
    {"[air]", "density_slope=-0.65 kg/m^3/K\n[air]", "", RF_SETTINGS_ERROR_MISSING,
     "line 12: [oil] density_slope: ", "density_at"},
    {"humidity", "resistance=10 kohm\nhumidity", "", RF_SETTINGS_ERROR_VALUE,
     "line 13: [air] temperature: ", "one or the"},
    {"temperature=23.0(2) degC", "resistance=10 kohm", "", RF_SETTINGS_ERROR_MISSING,
     "line 13: [air] resistance: ", "[thermistor]"},
    {"", "", "[thermistor]\na=1e-3\n", RF_SETTINGS_ERROR_MISSING,
     "[air] resistance: ", "in place of temperature"},
    {"temperature=23.0(2) degC", "resistance=10 kohm", "[thermistor]\na=1e-3\nb=2e-4\nc=1e-7\nd=1e-8\n",
     RF_SETTINGS_ERROR_MISSING, "line 23: [thermistor] d: ", "reference"},
    {"temperature=23.0(2) degC", "resistance=10 kohm", "[thermistor]\na=1e-3\nb=2e-4\nc=1e-7\ntable=t.csv\n",
     RF_SETTINGS_ERROR_VALUE, "line 23: [thermistor] table: ", "beside coefficients"},
    {"temperature=23.0(2) degC", "resistance=10 kohm", "[thermistor]\ntable=/nonexistent/t.csv\n",
     RF_SETTINGS_ERROR_VALUE, "line 20: [thermistor] table: ", "/nonexistent/t.csv"},
    {"", "", "[analysis]\nslip=cunningham\n", RF_SETTINGS_ERROR_VALUE,
     "line 20: [analysis] slip: ", "kim-2005|"},
    {"", "", "[analysis]\nslip=one-term\n", RF_SETTINGS_ERROR_MISSING,
     "[analysis] slip_b: ", "8.226e-3 Pa m"},
    {"", "", "[analysis]\nslip_b=8e-3 Pa m\n", RF_SETTINGS_ERROR_VALUE,
     "line 20: [analysis] slip_b: ", "one-term"},
    {"", "", "[analysis]\nviscosity=thick\n", RF_SETTINGS_ERROR_VALUE,
     "line 20: [analysis] viscosity: ", "iso-15900"},
    {"", "", "[shared]\ngap=gap-march\n", RF_SETTINGS_ERROR_UNKNOWN,
     "line 20: [shared] gap: ", "plate_gap=gap-march"},
    {"", "", "[shared]\nplate_gap=\n", RF_SETTINGS_ERROR_VALUE, "line 20: [shared] plate_gap: ", "name"},
    {"", "", "[shared]\nheight=site\n", RF_SETTINGS_ERROR_VALUE,
     "line 20: [shared] height: ", "doesn't hold"},
    {"gravity=down", "timings=a\\q", "", RF_SETTINGS_ERROR_FILE,
     "line 3: [recording] timings: ", "a backslash is written twice"},
};

static void every_error_says_where_and_what(void)
{
    for (size_t i = 0; i < G_N_ELEMENTS(bad_sheets); i++) {
        const Bad *bad = &bad_sheets[i];
        g_autoptr(GError) error = NULL;
        g_autofree char *text = altered(bad->from, bad->to, bad->behind);
        g_autofree char *begin = g_strconcat("run.ini: ", bad->where, NULL);
        g_assert_null(rf_settings_parse(text, strlen(text), "run.ini", &error));
        g_test_message("%s", error->message);
        g_assert_error(error, RF_SETTINGS_ERROR, bad->code);
        g_assert_true(g_str_has_prefix(error->message, begin));
        g_assert_nonnull(strstr(error->message, bad->needle));
        g_assert_null(strchr(error->message, '\n'));
    }
}

static void refuse_text(const char *text, size_t length, const char *needle)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_settings_parse(text, length, "run.ini", &error));
    g_assert_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE);
    g_assert_nonnull(strstr(error->message, needle));
}

static void files_that_are_no_sheets(void)
{
    g_autoptr(GError) error = NULL;
    g_autofree char *huge = g_malloc0((1 << 20) + 2);
    refuse_text("[a]\0b", 5, "binary");
    refuse_text("\xff\xfe[\0", 4, "UTF-16");
    refuse_text(huge, (1 << 20) + 2, "1 MiB");
    g_assert_null(rf_settings_load("/nonexistent/run.ini", &error));
    g_assert_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE);
    g_assert_nonnull(strstr(error->message, "/nonexistent/run.ini"));
}

static void an_empty_sheet_asks_for_the_recording(void)
{
    g_autoptr(GError) error = NULL;
    g_assert_null(rf_settings_parse("", 0, "run.ini", &error));
    g_assert_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_MISSING);
    g_assert_true(g_str_has_prefix(error->message, "run.ini: [recording] video: missing"));
}

static void a_sheet_with_a_log_needs_no_voltage(void)
{
    RfValue voltage_V;
    g_autoptr(RfSettings) s = parse_altered("voltage=300.0(4) V\nstates=off,top+\n", "log=volts.csv\n", "");
    g_assert_cmpuint(s->n_states, ==, 0);
    g_assert_false(rf_settings_voltage(s, RF_FIELD_TOP_PLUS, &voltage_V));
    g_autoptr(RfSettings) never_on =
        parse_altered("voltage=300.0(4) V\nstates=off,top+\n", "states=off\n", "");
    g_assert_cmpuint(never_on->n_states, ==, 1);
}

/* Each default stands in the form in which a sheet would have it. */
static void defaults_are_valid_settings(void)
{
    for (size_t i = 0; i < rf_settings_n_keys; i++) {
        const RfSettingsKey *key = &rf_settings_keys[i];
        if (!key->fallback) continue;
        g_assert_nonnull(key->remark);
        g_autofree char *line = g_strdup_printf("%s=%s\n", key->key, key->fallback);
        g_autofree char *group = g_strdup_printf("[%s]\n", key->group);
        g_autofree char *replaced = g_strconcat(group, line, NULL);
        bool stands = strstr(good, group) != NULL;
        g_autofree char *without = g_strdup_printf("\n%s=", key->key);
        if (stands && strstr(good, without)) continue;
        g_autoptr(RfSettings) s =
            parse_altered(stands ? group : "", stands ? replaced : "", stands ? "" : replaced);
        g_assert_nonnull(s);
        g_assert_false(used(s, key->group, key->key)->is_default);
    }
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/settings/parse/a-good-sheet", a_good_sheet);
    g_test_add_func("/settings/parse/defaults-are-recorded-with-their-reason",
                    defaults_are_recorded_with_their_reason);
    g_test_add_func("/settings/parse/byte-order-mark-and-crlf", byte_order_mark_and_crlf);
    g_test_add_func("/settings/parse/locale-does-not-matter", locale_does_not_matter);
    g_test_add_func("/settings/parse/several-recordings", several_recordings);
    g_test_add_func("/settings/parse/optional-keys", optional_keys);
    g_test_add_func("/settings/parse/gravity-from-the-place", gravity_from_the_place);
    g_test_add_func("/settings/parse/temperature-from-a-thermistor", temperature_from_a_thermistor);
    g_test_add_func("/settings/parse/temperature-from-a-table", temperature_from_a_table);
    g_test_add_func("/settings/parse/a-sheet-with-a-log-needs-no-voltage",
                    a_sheet_with_a_log_needs_no_voltage);
    g_test_add_func("/settings/refuse/every-error-says-where-and-what", every_error_says_where_and_what);
    g_test_add_func("/settings/refuse/files-that-are-no-sheets", files_that_are_no_sheets);
    g_test_add_func("/settings/refuse/an-empty-sheet-asks-for-the-recording",
                    an_empty_sheet_asks_for_the_recording);
    g_test_add_func("/settings/help/defaults-are-valid-settings", defaults_are_valid_settings);
    return g_test_run();
}
