/* Every key that a run sheet may hold, in one table: parsing, errors, defaults and help all read it. */
#pragma once

#include <stddef.h>

#include "cli/settings.h"

typedef enum {
    RF_KEY_QUANTITY,       /* RfValue */
    RF_KEY_MAYBE_QUANTITY, /* RfMaybeValue */
    RF_KEY_WORD,           /* int: index into `form`'s words */
    RF_KEY_PATH,           /* char*: resolved */
    RF_KEY_PATHS,          /* GPtrArray*: resolved, separated by ; */
    RF_KEY_STATES,         /* RfFieldState[3] and their count */
    RF_KEY_VISCOSITY,      /* a word, or a quantity */
} RfSettingsKind;

/* What the keys fill: the settings themselves, and what they are then worked out from. */
typedef struct {
    RfSettings settings;
    int gravity_word, lines_word, slip_word;
    RfMaybeValue temperature_kelvin;
    RfMaybeValue gravity_m_s2, latitude_deg, height_m;
    RfMaybeValue thermistor_per_kelvin[4], thermistor_reference_ohm, thermistor_u_kelvin;
    char *thermistor_table;
} RfSheetValues;

/* A quantity without fallback, and the recording, are needed; all else is optional. */
typedef struct {
    const char *group, *key;
    RfSettingsKind kind;
    const char *form;     /* SI unit of a quantity, or words separated by | */
    double least, most;   /* of a quantity, in that unit; both inclusive */
    const char *fallback; /* default as it would stand in the sheet, or NULL */
    const char *remark;   /* where the default comes from */
    const char *help;     /* one sentence: what it is, an example */
    size_t at;            /* offset in RfSheetValues */
} RfSettingsKey;

extern const RfSettingsKey rf_settings_keys[];
extern const size_t rf_settings_n_keys;

/* NULL if there is no such key. */
const RfSettingsKey *rf_settings_key_find(const char *group, const char *key);
