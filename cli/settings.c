#include "cli/settings.h"

#include <math.h>
#include <string.h>

#include "calib/quantity.h"
#include "cli/results.h"
#include "cli/settings_keys.h"
#include "cli/settings_rules.h"
#include "cli/sheet_text.h"

GQuark rf_settings_error_quark(void)
{
    return g_quark_from_static_string("rf-settings-error-quark");
}

static void used_clear(void *data)
{
    RfUsedSetting *used = data;
    g_free(used->group);
    g_free(used->key);
    g_free(used->value);
    g_free(used->remark);
}

static GArray *used_array(void)
{
    GArray *array = g_array_new(false, true, sizeof(RfUsedSetting));
    g_array_set_clear_func(array, used_clear);
    return array;
}

void rf_settings_add_used(GArray *array, const char *group, const char *key, const char *value,
                          const char *remark)
{
    RfUsedSetting used = {g_strdup(group), g_strdup(key), g_strdup(value), remark != NULL,
                          g_strdup(remark ? remark : "")};
    g_array_append_val(array, used);
}

static void values_clear(RfSheetValues *values)
{
    RfSettings *s = &values->settings;
    char *texts[] = {s->path, s->timings, s->review, s->reticle_image, s->log, values->thermistor_table};
    for (size_t i = 0; i < G_N_ELEMENTS(texts); i++) g_free(texts[i]);
    if (s->videos) g_ptr_array_unref(s->videos);
    GArray *arrays[] = {s->shared, s->notes, s->used};
    for (size_t i = 0; i < G_N_ELEMENTS(arrays); i++)
        if (arrays[i]) g_array_unref(arrays[i]);
}

void rf_settings_free(RfSettings *settings)
{
    if (!settings) return;
    RfSheetValues values = {.settings = *settings};
    values_clear(&values);
    g_free(settings);
}

/* Where a value stands, for errors about it; key may be one that the sheet lacks. */
typedef struct {
    const RfSheetText *sheet;
    const RfSheetEntry *entry;
    const RfSettingsKey *key;
    const char *value;
    RfSheetValues *values;
} Place;

static void prefix_place(const Place *place, GError **error)
{
    if (place->entry)
        g_prefix_error(error, "%s: line %u: [%s] %s: ", place->sheet->path, place->entry->line,
                       place->entry->group, place->entry->key);
    else
        g_prefix_error(error, "%s: [%s] %s: ", place->sheet->path, place->key->group, place->key->key);
}

static bool refuse_value(GError **error, const char *format, ...) G_GNUC_PRINTF(2, 3);
static bool refuse_value(GError **error, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *what = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    g_set_error_literal(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_VALUE, what);
    return false;
}

static bool read_quantity(const Place *place, RfValue *out, GError **error)
{
    const RfSettingsKey *key = place->key;
    g_autoptr(GError) why = NULL;
    RfValue value;
    if (!rf_quantity_parse(place->value, key->form, &value, &why))
        return refuse_value(error, "%s", why->message);
    const bool is_pure = strcmp(key->form, "1") == 0;
    if (value.value < key->least || value.value > key->most)
        return refuse_value(error, "seen `%s`; possible is %g to %g%s%s", place->value, key->least, key->most,
                            is_pure ? "" : " ", is_pure ? "" : key->form);
    if (key->least > 0.0 && value.sigma >= value.value)
        return refuse_value(error,
                            "seen `%s`, whose uncertainty is as large as the value; a smaller one is needed",
                            place->value);
    *out = value;
    return true;
}

static bool read_word(const Place *place, int *out, GError **error)
{
    g_auto(GStrv) words = g_strsplit(place->key->form, "|", -1);
    for (int i = 0; words[i]; i++)
        if (strcmp(words[i], place->value) == 0) {
            *out = i;
            return true;
        }
    return refuse_value(error, "seen `%s`; one of %s is needed", place->value, place->key->form);
}

static char *resolve_path(const RfSheetText *sheet, const char *path)
{
    if (g_path_is_absolute(path)) return g_strdup(path);
    g_autofree char *folder = g_path_get_dirname(sheet->path);
    return strcmp(folder, ".") == 0 ? g_strdup(path) : g_build_filename(folder, path, NULL);
}

static bool read_path(const Place *place, char **out, GError **error)
{
    if (*place->value == '\0') return refuse_value(error, "nothing there; the path of a file is needed");
    *out = resolve_path(place->sheet, place->value);
    return true;
}

static bool read_paths(const Place *place, GPtrArray **out, GError **error)
{
    g_auto(GStrv) paths = g_strsplit(place->value, ";", -1);
    *out = g_ptr_array_new_with_free_func(g_free);
    for (size_t i = 0; paths[i]; i++) {
        g_strstrip(paths[i]);
        if (*paths[i]) g_ptr_array_add(*out, resolve_path(place->sheet, paths[i]));
    }
    return (*out)->len > 0 || refuse_value(error, "nothing there; the path of a recording is needed");
}

static bool read_states(const Place *place, RfSettings *settings, GError **error)
{
    static const char *const names[] = {"off", "top+", "top-"};
    g_auto(GStrv) words = g_strsplit_set(place->value, ",;", -1);
    for (size_t i = 0; words[i]; i++) {
        unsigned state = 0;
        g_strstrip(words[i]);
        while (state < 3 && strcmp(words[i], names[state]) != 0) state++;
        if (state == 3)
            return refuse_value(error, "seen the state `%s`; off, top+ and top- are the states there are",
                                words[i]);
        for (unsigned k = 0; k < settings->n_states; k++)
            if (settings->states[k] == (RfFieldState)state)
                return refuse_value(
                    error, "seen `%s`, where %s stands twice; each state stands once, where it first occurs",
                    place->value, words[i]);
        settings->states[settings->n_states++] = (RfFieldState)state;
    }
    return settings->n_states > 0 || refuse_value(error, "nothing there; states such as off,top+ are needed");
}

static bool read_viscosity(const Place *place, RfSettings *settings, GError **error)
{
    settings->viscosity_pa_s.is_set = false;
    if (rf_air_viscosity_law_from_string(place->value, &settings->viscosity) &&
        settings->viscosity != RF_VISCOSITY_GIVEN)
        return true;
    settings->viscosity = RF_VISCOSITY_GIVEN;
    settings->viscosity_pa_s.is_set = true;
    if (read_quantity(place, &settings->viscosity_pa_s.v, error)) return true;
    g_prefix_error(error, "neither iso-15900 nor us-1976 nor a value: ");
    return false;
}

static bool read_value(const Place *place, GError **error)
{
    void *at = (char *)place->values + place->key->at;
    switch (place->key->kind) {
    case RF_KEY_QUANTITY:
        return read_quantity(place, at, error);
    case RF_KEY_MAYBE_QUANTITY:
        ((RfMaybeValue *)at)->is_set = true;
        return read_quantity(place, &((RfMaybeValue *)at)->v, error);
    case RF_KEY_WORD:
        return read_word(place, at, error);
    case RF_KEY_PATH:
        return read_path(place, at, error);
    case RF_KEY_PATHS:
        return read_paths(place, at, error);
    case RF_KEY_STATES:
        return read_states(place, &place->values->settings, error);
    case RF_KEY_VISCOSITY:
        return read_viscosity(place, &place->values->settings, error);
    }
    return false;
}

static bool is_free_group(const char *group)
{
    return strcmp(group, "notes") == 0 || strcmp(group, "shared") == 0;
}

/* The keys of a group, or the groups, as a list for people. */
static char *list_known(const char *group)
{
    GString *list = g_string_new(NULL);
    for (size_t i = 0; i < rf_settings_n_keys; i++) {
        const RfSettingsKey *key = &rf_settings_keys[i];
        bool is_new_group = i == 0 || strcmp(key->group, rf_settings_keys[i - 1].group) != 0;
        if (group ? strcmp(key->group, group) == 0 : is_new_group)
            g_string_append_printf(list, "%s%s", list->len ? ", " : "", group ? key->key : key->group);
    }
    if (!group) g_string_append(list, ", shared, notes");
    return g_string_free(list, false);
}

static bool is_known_group(const char *group)
{
    for (size_t i = 0; i < rf_settings_n_keys; i++)
        if (strcmp(rf_settings_keys[i].group, group) == 0) return true;
    return is_free_group(group);
}

static bool check_groups(const RfSheetText *sheet, GError **error)
{
    GHashTableIter iter;
    void *name, *line, *worst = NULL;
    unsigned first = G_MAXUINT;
    g_hash_table_iter_init(&iter, sheet->groups);
    while (g_hash_table_iter_next(&iter, &name, &line))
        if (!is_known_group(name) && GPOINTER_TO_UINT(line) < first) {
            first = GPOINTER_TO_UINT(line);
            worst = name;
        }
    if (!worst) return true;
    g_autofree char *known = list_known(NULL);
    g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_UNKNOWN,
                "%s: line %u: [%s] is no group of a run sheet; there are %s", sheet->path, first,
                (char *)worst, known);
    return false;
}

/* [shared] names inputs by their key, which has to be one that a sheet can hold. */
static bool read_free(const RfSheetText *sheet, const RfSheetEntry *entry, RfSettings *settings,
                      GError **error)
{
    bool is_note = strcmp(entry->group, "notes") == 0, is_input = false;
    for (size_t i = 0; i < rf_settings_n_keys; i++)
        is_input |= strcmp(rf_settings_keys[i].key, entry->key) == 0;
    if (!is_note && (!is_input || *entry->value == '\0')) {
        g_set_error(error, RF_SETTINGS_ERROR, is_input ? RF_SETTINGS_ERROR_VALUE : RF_SETTINGS_ERROR_UNKNOWN,
                    "%s: line %u: [shared] %s: seen `%s`; the name of a key of this sheet and that of its "
                    "measurement "
                    "are needed, as in plate_gap=gap-march",
                    sheet->path, entry->line, entry->key, entry->value);
        return false;
    }
    rf_settings_add_used(is_note ? settings->notes : settings->shared, entry->group, entry->key, entry->value,
                         NULL);
    return true;
}

static bool read_entry(const RfSheetText *sheet, const RfSheetEntry *entry, RfSheetValues *values,
                       GError **error)
{
    if (is_free_group(entry->group)) return read_free(sheet, entry, &values->settings, error);
    const RfSettingsKey *key = rf_settings_key_find(entry->group, entry->key);
    if (!key) {
        g_autofree char *known = list_known(entry->group);
        g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_UNKNOWN,
                    "%s: line %u: [%s] %s: no such key; this group has %s", sheet->path, entry->line,
                    entry->group, entry->key, known);
        return false;
    }
    Place place = {sheet, entry, key, entry->value, values};
    if (!read_value(&place, error)) {
        prefix_place(&place, error);
        return false;
    }
    return true;
}

/* In the order of the table of keys, so that a report lists them alike whatever the sheet's order. */
static bool fill_defaults(const RfSheetText *sheet, RfSheetValues *values, GError **error)
{
    for (size_t i = 0; i < rf_settings_n_keys; i++) {
        const RfSettingsKey *key = &rf_settings_keys[i];
        const RfSheetEntry *entry = rf_sheet_text_find(sheet, key->group, key->key);
        Place place = {sheet, NULL, key, key->fallback, values};
        if (entry) {
            rf_settings_add_used(values->settings.used, key->group, key->key, entry->value, NULL);
        } else if (key->fallback) {
            if (!read_value(&place, error)) return false;
            rf_settings_add_used(values->settings.used, key->group, key->key, key->fallback, key->remark);
        } else if (key->kind == RF_KEY_QUANTITY || key->kind == RF_KEY_PATHS) {
            g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_MISSING, "missing, but needed: %s",
                        key->help);
            prefix_place(&place, error);
            return false;
        }
    }
    return true;
}

static bool read_all(const RfSheetText *sheet, RfSheetValues *values, GError **error)
{
    if (!check_groups(sheet, error)) return false;
    for (unsigned i = 0; i < sheet->entries->len; i++)
        if (!read_entry(sheet, sheet->entries->pdata[i], values, error)) return false;
    if (!fill_defaults(sheet, values, error)) return false;
    return rf_settings_rules_apply(sheet, values, error);
}

RfSettings *rf_settings_parse(const char *text, size_t length, const char *path, GError **error)
{
    g_autoptr(RfSheetText) sheet = rf_sheet_text_parse(text, length, path, error);
    if (!sheet) return NULL;
    RfSheetValues values = {0};
    values.settings.path = g_strdup(path);
    values.settings.shared = used_array();
    values.settings.notes = used_array();
    values.settings.used = used_array();
    if (!read_all(sheet, &values, error)) {
        values_clear(&values);
        return NULL;
    }
    g_free(values.thermistor_table);
    RfSettings *settings = g_new(RfSettings, 1);
    *settings = values.settings;
    return settings;
}

RfSettings *rf_settings_load(const char *path, GError **error)
{
    g_autofree char *text = NULL;
    size_t length;
    g_autoptr(GError) why = NULL;
    if (!g_file_get_contents(path, &text, &length, &why)) {
        g_set_error(error, RF_SETTINGS_ERROR, RF_SETTINGS_ERROR_FILE, "run sheet can't be read: %s",
                    why->message);
        return NULL;
    }
    return rf_settings_parse(text, length, path, error);
}

bool rf_settings_voltage(const RfSettings *settings, RfFieldState state, RfValue *voltage_V)
{
    const RfMaybeValue *own =
        state == RF_FIELD_TOP_PLUS ? &settings->voltage_top_plus_V : &settings->voltage_top_minus_V;
    if (state == RF_FIELD_OFF)
        *voltage_V = (RfValue){0.0, 0.0};
    else if (own->is_set)
        *voltage_V = own->v;
    else if (settings->voltage_V.is_set)
        *voltage_V = settings->voltage_V.v;
    else
        return false;
    return true;
}
