/* What has to hold between the keys of a sheet, and what follows from several of them: temperature from a thermistor, gravity
 * from a latitude. Not for single values: settings.c has read those. */
#pragma once

#include "cli/settings_keys.h"
#include "cli/sheet_text.h"

/* Completes values->settings; RF_SETTINGS_ERROR otherwise. */
bool rf_settings_rules_apply(const RfSheetText *sheet, RfSheetValues *values, GError **error);

/* One more line for the list of settings used; `remark` NULL: it stands in the sheet. */
void rf_settings_add_used(GArray *array, const char *group, const char *key, const char *value,
                          const char *remark);
