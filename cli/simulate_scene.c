#include "cli/simulate_scene.h"

#include "calib/quantity.h"

#include <math.h>
#include <stddef.h>
#include <string.h>

G_DEFINE_QUARK(rf - simulate - scene - error, rf_simulate_scene_error)

typedef enum {
    KEY_COUNT,  /* int */
    KEY_NUMBER, /* double, after conversion to `unit` */
    KEY_RANGE,  /* RfRange: "0.4..0.8 um" or one quantity */
    KEY_STATED, /* RfValue */
    KEY_FLAG,   /* bool: yes, no */
    KEY_CHOICE, /* enum: place in `choices` */
    KEY_TEXT,   /* read elsewhere */
} KeyKind;

typedef struct {
    const char *group, *key;
    KeyKind kind;
    size_t offset;
    const char *unit;
    double least, most;   /* in `unit` */
    const char *standard; /* default, as it would be written; NULL: the key is needed */
    const char *choices;
} Key;

#define AT(member) offsetof(RfScene, member)
static const Key keys[] = {
    {"picture", "width", KEY_COUNT, AT(width), NULL, 32, 8192, "640", NULL},
    {"picture", "height", KEY_COUNT, AT(height), NULL, 32, 8192, "480", NULL},
    {"picture", "bit_depth", KEY_COUNT, AT(bit_depth), NULL, 8, 16, "8", NULL},
    {"picture", "seed", KEY_COUNT, AT(seed), NULL, 1, 2e9, NULL, NULL},
    {"picture", "pixel_aspect", KEY_NUMBER, AT(pixel_aspect), "1", 0.25, 4, "1", NULL},
    {"picture", "frame_rate", KEY_NUMBER, AT(frame_rate_hz), "Hz", 0.5, 2000, "30 Hz", NULL},
    {"picture", "rate_jitter", KEY_NUMBER, AT(rate_jitter), "1", 0, 0.3, "0", NULL},
    {"picture", "duration", KEY_NUMBER, AT(duration_s), "s", 0.1, 36000, NULL, NULL},
    {"picture", "px_per_mm", KEY_NUMBER, AT(px_per_mm), "1", 1, 1e5, NULL, NULL},
    {"picture", "exposure", KEY_NUMBER, AT(exposure), "1", 0, 1, "0.5", NULL},
    {"picture", "interlaced", KEY_FLAG, AT(is_interlaced), NULL, 0, 0, "no", NULL},
    {"picture", "dropped", KEY_COUNT, AT(dropped), NULL, 0, 1e5, "0", NULL},
    {"picture", "repeated", KEY_COUNT, AT(repeated), NULL, 0, 1e5, "0", NULL},
    {"picture", "background", KEY_NUMBER, AT(background), "1", 0, 250, "30", NULL},
    {"picture", "gradient", KEY_NUMBER, AT(gradient), "1", -250, 250, "6", NULL},
    {"picture", "photons_per_level", KEY_NUMBER, AT(photons_per_level), "1", 0.01, 1e9, "20", NULL},
    {"picture", "read_noise", KEY_NUMBER, AT(read_noise), "1", 0, 60, "1", NULL},
    {"picture", "point_spread", KEY_NUMBER, AT(point_spread_px), "1", 0.4, 20, "1.9", NULL},
    {"picture", "hot_pixels", KEY_COUNT, AT(hot_pixels), NULL, 0, 1e5, "0", NULL},
    {"picture", "dust", KEY_COUNT, AT(dust), NULL, 0, 1e4, "0", NULL},
    {"picture", "flicker", KEY_NUMBER, AT(flicker), "1", 0, 0.9, "0", NULL},
    {"picture", "flicker_rate", KEY_NUMBER, AT(flicker_rate_hz), "Hz", 0.01, 1e4, "100 Hz", NULL},
    {"picture", "lamp_drift", KEY_NUMBER, AT(lamp_drift), "1", -0.9, 2, "0", NULL},
    {"reticle", "lines", KEY_CHOICE, AT(lines), NULL, 0, 0, "grid", "none|grid|horizontal|vertical"},
    {"reticle", "spacing", KEY_STATED, AT(spacing_m), "m", 1e-6, 1e-1, "0.1000(2) mm", NULL},
    {"reticle", "line_width", KEY_NUMBER, AT(line_width_m), "m", 0, 1e-3, "4 um", NULL},
    {"reticle", "transmission", KEY_NUMBER, AT(transmission), "1", 0, 1, "0.4", NULL},
    {"reticle", "rotation", KEY_NUMBER, AT(rotation_rad), "rad", -0.8, 0.8, "0 rad", NULL},
    {"reticle", "numerals", KEY_FLAG, AT(has_numerals), NULL, 0, 0, "no", NULL},
    {"reticle", "still", KEY_FLAG, AT(has_still), NULL, 0, 0, "no", NULL},
    {"camera", "gravity", KEY_CHOICE, AT(gravity), NULL, 0, 0, "down", "down|left|up|right"},
    {"camera", "roll", KEY_NUMBER, AT(roll_rad), "rad", -0.5, 0.5, "0 rad", NULL},
    {"camera", "wander", KEY_NUMBER, AT(wander_px), "1", 0, 100, "0", NULL},
    {"camera", "wander_time", KEY_NUMBER, AT(wander_time_s), "s", 1e-3, 1e5, "2 s", NULL},
    {"camera", "wander_angle", KEY_NUMBER, AT(wander_rad), "rad", 0, 0.2, "0 rad", NULL},
    {"cell", "plate_gap", KEY_STATED, AT(plate_gap_m), "m", 1e-4, 1, "6.000(10) mm", NULL},
    {"cell", "gravity", KEY_STATED, AT(gravity_m_s2), "m/s^2", 1, 30, "9.8106(5) m/s^2", NULL},
    {"oil", "density", KEY_STATED, AT(density_kg_m3), "kg/m^3", 100, 5000, "886.0(10) kg/m^3", NULL},
    {"air", "temperature", KEY_STATED, AT(temperature_kelvin), "K", 250, 330, "23.0(2) degC", NULL},
    {"air", "pressure", KEY_STATED, AT(pressure_pa), "Pa", 3e4, 1.2e5, "101.30(5) kPa", NULL},
    {"air", "humidity", KEY_STATED, AT(humidity), "1", 0, 1, "45(5) %", NULL},
    {"supply", "voltage", KEY_STATED, AT(voltage_v), "V", 0, 2e4, "300.0(4) V", NULL},
    {"supply", "states", KEY_TEXT, 0, NULL, 0, 0, "off,top+", NULL},
    {"droplets", "count", KEY_COUNT, AT(count), NULL, 0, 5000, "0", NULL},
    {"droplets", "least_units", KEY_COUNT, AT(units_low), NULL, 0, 100000, "1", NULL},
    {"droplets", "most_units", KEY_COUNT, AT(units_high), NULL, 0, 100000, "5", NULL},
    {"droplets", "sign", KEY_CHOICE, AT(sign), NULL, 0, 0, "minus", "minus|plus|both"},
    {"droplets", "radius", KEY_RANGE, AT(radius_m), "m", 5e-8, 2e-5, "0.45..0.75 um", NULL},
    {"droplets", "brightness", KEY_RANGE, AT(brightness), "1", 0, 250, "40..140", NULL},
    {"droplets", "refilled", KEY_FLAG, AT(is_refilled), NULL, 0, 0, "yes", NULL},
    {"droplets", "depth_of_focus", KEY_NUMBER, AT(depth_of_focus_m), "m", 1e-6, 1, "60 um", NULL},
    {"droplets", "depth_range", KEY_NUMBER, AT(depth_range_m), "m", 0, 1e-2, "60 um", NULL},
    {"droplets", "evaporation", KEY_NUMBER, AT(evaporation_m2_s), "m^2/s", 0, 1e-10, "0 um^2/s", NULL},
    {"droplets", "charge_steps", KEY_NUMBER, AT(steps_hz), "Hz", 0, 10, "0 Hz", NULL},
    {"motion", "drift", KEY_NUMBER, AT(drift_m_s), "m/s", 0, 1e-2, "2 um/s", NULL},
    {"motion", "drift_time", KEY_NUMBER, AT(drift_time_s), "s", 1e-2, 1e6, "20 s", NULL},
    {"motion", "tilt", KEY_NUMBER, AT(tilt_rad), "rad", -0.3, 0.3, "0 rad", NULL},
    {"field", "off", KEY_RANGE, AT(off_s), "s", 0.01, 1e5, "5..7 s", NULL},
    {"field", "on", KEY_RANGE, AT(on_s), "s", 0.01, 1e5, "4..5 s", NULL},
    {"field", "switches", KEY_TEXT, 0, NULL, 0, 0, "", NULL},
    {"log", "interval", KEY_NUMBER, AT(log_interval_s), "s", 0, 100, "0 s", NULL},
    {"log", "offset", KEY_NUMBER, AT(log_offset_s), "s", -1e6, 1e6, "7.4 s", NULL},
    {"log", "noise", KEY_NUMBER, AT(log_noise_v), "V", 0, 1000, "0.2 V", NULL},
    {"hand", "entries", KEY_COUNT, AT(entries), NULL, 0, 1e6, "0", NULL},
    {"hand", "bias", KEY_NUMBER, AT(hand_bias_s), "s", -5, 5, "0.02 s", NULL},
    {"hand", "clock_offset", KEY_NUMBER, AT(hand_clock_s), "s", -1e6, 1e6, "0 s", NULL},
    {"hand", "spread", KEY_NUMBER, AT(hand_spread_s), "s", 0, 5, "0.10 s", NULL},
    {"hand", "line_miscount", KEY_COUNT, AT(line_miscounts), NULL, 0, 1e5, "0", NULL},
    {"hand", "digit_slip", KEY_COUNT, AT(digit_slips), NULL, 0, 1e5, "0", NULL},
    {"hand", "other_droplet", KEY_COUNT, AT(other_droplets), NULL, 0, 1e5, "0", NULL},
    {"hand", "disagrees", KEY_COUNT, AT(disagreements), NULL, 0, 1e5, "0", NULL},
    {"hand", "field_switched_inside", KEY_COUNT, AT(switched_inside), NULL, 0, 1e5, "0", NULL},
    {"hand", "unmatched", KEY_COUNT, AT(unmatched), NULL, 0, 1e5, "0", NULL},
    {"video", "codec", KEY_CHOICE, AT(codec), NULL, 0, 0, "h264", "ffv1|h264|mjpeg|mpeg2"},
    {"video", "quality", KEY_COUNT, AT(quality), NULL, 0, 51, "18", NULL},
};

static const char *const droplet_keys[] = {"x", "y", "radius", "units", "brightness", "depth", "steps", NULL};

const char *rf_simulate_scene_state_name(RfFieldState state)
{
    static const char *const names[] = {"off", "top+", "top-"};
    return names[state];
}

G_GNUC_PRINTF(3, 4)
static bool fail(GError **error, RfSimulateSceneError code, const char *format, ...)
{
    va_list args;
    va_start(args, format);
    g_autofree char *message = g_strdup_vprintf(format, args);
    va_end(args);
    g_set_error_literal(error, RF_SIMULATE_SCENE_ERROR, code, message);
    return false;
}

static const Key *find_key(const char *group, const char *key)
{
    for (size_t i = 0; i < G_N_ELEMENTS(keys); i++)
        if (g_str_equal(keys[i].group, group) && (!key || g_str_equal(keys[i].key, key))) return &keys[i];
    return NULL;
}

char *rf_simulate_scene_text(const RfScene *scene, const char *group, const char *key)
{
    char *given = g_key_file_get_string(scene->source, group, key, NULL);
    return given ? g_strstrip(given) : g_strdup(find_key(group, key)->standard);
}

static bool is_known(const char *group, const char *key)
{
    if (g_str_equal(group, "notes") || g_str_equal(group, "certificate")) return true;
    if (g_str_has_prefix(group, "droplet ")) return !key || g_strv_contains(droplet_keys, key);
    return find_key(group, key) != NULL;
}

/* GKeyFile takes the last of two equal keys without a word, so the lines are looked at once beforehand. */
static bool check_repeats(const char *text, GError **error)
{
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    g_autoptr(GHashTable) seen = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    g_autofree char *group = g_strdup("");
    for (int i = 0; lines[i]; i++) {
        char *line = g_strstrip(lines[i]);
        char *equals = strchr(line, '=');
        if (line[0] == '[') {
            g_free(group);
            group = g_strdup(line);
        }
        if (line[0] == '#' || (line[0] != '[' && !equals)) continue;
        g_autofree char *key = line[0] == '[' ? NULL : g_strchomp(g_strndup(line, (gsize)(equals - line)));
        char *name = key ? g_strdup_printf("%s %s", group, key) : g_strdup(group);
        if (!g_hash_table_add(seen, name))
            return fail(error, RF_SIMULATE_SCENE_ERROR_SYNTAX,
                        "line %d: %s stands here a second time; once is needed", i + 1, key ? key : group);
    }
    return true;
}

static bool check_known(GKeyFile *file, GError **error)
{
    g_auto(GStrv) groups = g_key_file_get_groups(file, NULL);
    for (int g = 0; groups[g]; g++) {
        if (!is_known(groups[g], NULL))
            return fail(error, RF_SIMULATE_SCENE_ERROR_UNKNOWN, "[%s]: no scene has this group", groups[g]);
        g_auto(GStrv) names = g_key_file_get_keys(file, groups[g], NULL, NULL);
        for (int k = 0; names && names[k]; k++)
            if (!is_known(groups[g], names[k]))
                return fail(error, RF_SIMULATE_SCENE_ERROR_UNKNOWN, "[%s] %s: no scene has this key",
                            groups[g], names[k]);
    }
    return true;
}

static bool read_stated(const Key *key, const char *text, RfValue *value, GError **error)
{
    if (!rf_quantity_parse(text, key->unit, value, error)) return false;
    if (value->value >= key->least && value->value <= key->most) return true;
    return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "%s is out of range; %g to %g (in %s) will do", text,
                key->least, key->most, key->unit);
}

static bool read_number(const Key *key, const char *text, double *number, GError **error)
{
    RfValue value;
    if (!read_stated(key, text, &value, error)) return false;
    *number = value.value;
    return value.sigma <= 0 || fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                                    "%s has an uncertainty; this value is exact by choice", text);
}

static bool read_count(const Key *key, const char *text, int *count, GError **error)
{
    gint64 number;
    if (g_ascii_string_to_signed(text, 10, (gint64)key->least, (gint64)key->most, &number, NULL)) {
        *count = (int)number;
        return true;
    }
    return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                "'%s' was given; a whole number from %.0f to %.0f is needed", text, key->least, key->most);
}

/* "0.4..0.8 um": the unit after the second number holds for both. */
static bool read_range(const Key *key, const char *text, RfRange *range, GError **error)
{
    const char *dots = strstr(text, "..");
    const char *high = dots ? dots + 2 : text;
    if (!read_number(key, high, &range->high, error)) return false;
    range->low = range->high;
    if (!dots) return true;
    const char *unit = high + strspn(high, " +-0123456789.eE");
    g_autofree char *low = g_strdup_printf("%.*s %s", (int)(dots - text), text, unit);
    if (!read_number(key, low, &range->low, error)) return false;
    return range->low <= range->high || fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                                             "%s runs downward; the smaller number is needed first", text);
}

static bool read_flag(const char *text, bool *flag, GError **error)
{
    *flag = g_str_equal(text, "yes");
    return *flag || g_str_equal(text, "no") ||
           fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "'%s' was given; yes or no is needed", text);
}

static bool read_choice(const Key *key, const char *text, int *choice, GError **error)
{
    g_auto(GStrv) choices = g_strsplit(key->choices, "|", -1);
    for (*choice = 0; choices[*choice]; ++*choice)
        if (g_str_equal(choices[*choice], text)) return true;
    return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "'%s' was given; one of %s is needed", text,
                key->choices);
}

static bool read_key(const Key *key, const char *text, RfScene *scene, GError **error)
{
    void *place = (char *)scene + key->offset;
    switch (key->kind) {
    case KEY_COUNT:
        return read_count(key, text, place, error);
    case KEY_NUMBER:
        return read_number(key, text, place, error);
    case KEY_RANGE:
        return read_range(key, text, place, error);
    case KEY_STATED:
        return read_stated(key, text, place, error);
    case KEY_FLAG:
        return read_flag(text, place, error);
    case KEY_CHOICE:
        return read_choice(key, text, place, error);
    case KEY_TEXT:
        return true;
    }
    g_assert_not_reached();
}

static bool read_keys(RfScene *scene, GError **error)
{
    for (size_t i = 0; i < G_N_ELEMENTS(keys); i++) {
        const Key *key = &keys[i];
        g_autofree char *given = g_key_file_get_string(scene->source, key->group, key->key, NULL);
        const char *text = given ? g_strstrip(given) : key->standard;
        if (!text)
            return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "[%s] %s: missing, and it has no default",
                        key->group, key->key);
        if (!read_key(key, text, scene, error)) {
            g_prefix_error(error, "[%s] %s: ", key->group, key->key);
            return false;
        }
    }
    return true;
}

static bool read_state(const char *text, RfFieldState *state, GError **error)
{
    for (*state = RF_FIELD_OFF; *state <= RF_FIELD_TOP_MINUS; ++*state)
        if (g_str_equal(text, rf_simulate_scene_state_name(*state))) return true;
    return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "'%s' was given; one of off, top+, top- is needed",
                text);
}

static bool read_states(RfScene *scene, GError **error)
{
    g_autofree char *given = g_key_file_get_string(scene->source, "supply", "states", NULL);
    g_auto(GStrv) words = g_strsplit(given ? given : find_key("supply", "states")->standard, ",", -1);
    for (int i = 0; words[i]; i++) {
        RfFieldState state;
        if (!read_state(g_strstrip(words[i]), &state, error)) {
            g_prefix_error(error, "[supply] states: ");
            return false;
        }
        g_array_append_val(scene->states, state);
    }
    return scene->states->len > 0 ||
           fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "[supply] states: empty; at least one state is needed");
}

static bool read_one_switch(const char *text, RfSceneSwitch *one, GError **error)
{
    char *after = NULL;
    one->time_s = g_ascii_strtod(text, &after);
    if (after == text || !isfinite(one->time_s) || one->time_s < 0)
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "'%s' was given; a time in seconds and a state is needed", text);
    return read_state(after + strspn(after, " "), &one->state, error);
}

/* "0 off; 4.2 top+; 8.1 off" */
static bool read_switches(RfScene *scene, GError **error)
{
    g_autofree char *given = g_key_file_get_string(scene->source, "field", "switches", NULL);
    g_auto(GStrv) words = g_strsplit(given ? given : "", ";", -1);
    double last_s = -1;
    for (int i = 0; words[i]; i++) {
        RfSceneSwitch one;
        if (!*g_strstrip(words[i])) continue;
        if (!read_one_switch(words[i], &one, error)) {
            g_prefix_error(error, "[field] switches: ");
            return false;
        }
        if (one.time_s <= last_s)
            return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                        "[field] switches: %g s follows %g s; rising times are needed", one.time_s, last_s);
        last_s = one.time_s;
        g_array_append_val(scene->switches, one);
    }
    return true;
}

static void free_droplet(void *droplet)
{
    g_array_unref(((RfSceneDroplet *)droplet)->spells);
}

/* "12.0:-2; 30.5:-4": the charge in e from each time on */
static bool read_steps(const char *text, GArray *spells, GError **error)
{
    g_auto(GStrv) words = g_strsplit(text, ";", -1);
    for (int i = 0; words[i]; i++) {
        char *after = NULL;
        RfSpell spell = {.time_s = g_ascii_strtod(words[i], &after)};
        gint64 units;
        if (!isfinite(spell.time_s) || after == words[i] || *after != ':' ||
            !g_ascii_string_to_signed(after + 1, 10, -100000, 100000, &units, NULL))
            return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                        "steps: '%s' was given; SECONDS:UNITS is needed", words[i]);
        spell.units = (int)units;
        g_array_append_val(spells, spell);
    }
    return true;
}

static bool droplet_number(RfScene *scene, const char *group, const Key *key, double *number, GError **error)
{
    g_autofree char *given = g_key_file_get_string(scene->source, group, key->key, NULL);
    const char *text = given ? given : key->standard;
    if (!text)
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE, "%s: missing, and it has no default", key->key);
    if (read_number(key, text, number, error)) return true;
    g_prefix_error(error, "%s: ", key->key);
    return false;
}

static bool read_droplet(RfScene *scene, const char *group, RfSceneDroplet *droplet, GError **error)
{
    const Key x = {.key = "x", .unit = "1", .least = -1e4, .most = 2e4};
    const Key y = {.key = "y", .unit = "1", .least = -1e4, .most = 2e4};
    const Key radius = {.key = "radius", .unit = "m", .least = 5e-8, .most = 2e-5};
    const Key brightness = {.key = "brightness", .unit = "1", .most = 250, .standard = "100"};
    const Key depth = {.key = "depth", .unit = "m", .least = -1e-2, .most = 1e-2, .standard = "0 um"};
    const Key units = {.key = "units", .unit = "1", .least = -1e5, .most = 1e5};
    double n;
    if (!droplet_number(scene, group, &x, &droplet->x_px, error) ||
        !droplet_number(scene, group, &y, &droplet->y_px, error) ||
        !droplet_number(scene, group, &radius, &droplet->radius_m, error) ||
        !droplet_number(scene, group, &brightness, &droplet->brightness, error) ||
        !droplet_number(scene, group, &depth, &droplet->depth_m, error) ||
        !droplet_number(scene, group, &units, &n, error))
        return false;
    const RfSpell first = {.time_s = -HUGE_VAL, .units = (int)n};
    g_array_append_val(droplet->spells, first);
    g_autofree char *steps = g_key_file_get_string(scene->source, group, "steps", NULL);
    return !steps || read_steps(steps, droplet->spells, error);
}

static bool read_droplets(RfScene *scene, GError **error)
{
    g_auto(GStrv) groups = g_key_file_get_groups(scene->source, NULL);
    for (int g = 0; groups[g]; g++) {
        if (!g_str_has_prefix(groups[g], "droplet ")) continue;
        RfSceneDroplet droplet = {.spells = g_array_new(FALSE, FALSE, sizeof(RfSpell))};
        bool ok = read_droplet(scene, groups[g], &droplet, error);
        g_array_append_val(scene->by_hand, droplet);
        if (!ok) {
            g_prefix_error(error, "[%s] ", groups[g]);
            return false;
        }
    }
    return true;
}

static bool check_together(const RfScene *scene, GError **error)
{
    if (scene->units_low > scene->units_high)
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "[droplets] least_units: %d is more than most_units, %d", scene->units_low,
                    scene->units_high);
    if (scene->is_interlaced && (scene->wander_px > 0 || scene->wander_rad > 0))
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "[camera] wander: not for interlaced footage; the two fields would need a pose each");
    if (scene->width % 2 || scene->height % 2)
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "[picture] width: %d x %d is odd; encoders need an even number of pixels each way",
                    scene->width, scene->height);
    double display = scene->width * scene->pixel_aspect / scene->height;
    bool is_mpeg2_shape = fabs(scene->pixel_aspect - 1) < 1e-9 || fabs(display - 4. / 3) < 1e-3 ||
                          fabs(display - 16. / 9) < 1e-3;
    if (scene->codec == RF_SCENE_CODEC_MPEG2 && !is_mpeg2_shape)
        return fail(
            error, RF_SIMULATE_SCENE_ERROR_VALUE,
            "[picture] pixel_aspect: mpeg2 can say so only of pictures shown as 4:3 or 16:9; this is %.3f:1",
            display);
    if (scene->is_interlaced && scene->codec != RF_SCENE_CODEC_MPEG2 && scene->codec != RF_SCENE_CODEC_H264)
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "[video] codec: interlaced footage needs mpeg2 or h264");
    bool is_deep = scene->bit_depth == 10 || scene->bit_depth == 12 || scene->bit_depth == 16;
    if (scene->bit_depth != 8 && !(is_deep && scene->codec == RF_SCENE_CODEC_FFV1))
        return fail(error, RF_SIMULATE_SCENE_ERROR_VALUE,
                    "[picture] bit_depth: %d; 8, or 10, 12, 16 with codec=ffv1 is needed", scene->bit_depth);
    return true;
}

enum { MOST_BYTES = 1 << 20 };

static bool load(RfScene *scene, const char *path, GError **error)
{
    g_autofree char *text = NULL;
    gsize length;
    if (!g_file_get_contents(path, &text, &length, error)) return false;
    if (length > MOST_BYTES || !g_utf8_validate(text, (gssize)length, NULL))
        return fail(error, RF_SIMULATE_SCENE_ERROR_SYNTAX,
                    length > MOST_BYTES ? "larger than 1 MiB; a scene is a short text"
                                        : "seen bytes that aren't UTF-8; a scene is a text of [group] and key=value lines");
    const char *start = g_str_has_prefix(text, "\xef\xbb\xbf") ? text + 3 : text;
    return check_repeats(start, error) &&
           g_key_file_load_from_data(scene->source, start, strlen(start), G_KEY_FILE_NONE, error) &&
           check_known(scene->source, error) && read_keys(scene, error) && read_states(scene, error) &&
           read_switches(scene, error) && read_droplets(scene, error) && check_together(scene, error);
}

RfScene *rf_simulate_scene_load(const char *path, GError **error)
{
    g_autoptr(RfScene) scene = g_new0(RfScene, 1);
    scene->source = g_key_file_new();
    scene->states = g_array_new(FALSE, FALSE, sizeof(RfFieldState));
    scene->switches = g_array_new(FALSE, FALSE, sizeof(RfSceneSwitch));
    scene->by_hand = g_array_new(FALSE, FALSE, sizeof(RfSceneDroplet));
    g_array_set_clear_func(scene->by_hand, free_droplet);
    if (load(scene, path, error)) return g_steal_pointer(&scene);
    g_prefix_error(error, "%s: ", path);
    return NULL;
}

void rf_simulate_scene_free(RfScene *scene)
{
    if (!scene) return;
    g_key_file_unref(scene->source);
    g_array_unref(scene->states);
    g_array_unref(scene->switches);
    g_array_unref(scene->by_hand);
    g_free(scene);
}
