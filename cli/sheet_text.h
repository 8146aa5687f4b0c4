/* A key file looked through line by line before GKeyFile reads it, because GKeyFile merges repeated groups and keys in silence,
 * stops at a byte-order mark and doesn't tell lines. Not for what the keys mean: settings.c knows. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

typedef struct {
    char *group, *key;
    char *value; /* with GKeyFile's escapes resolved (but in [notes]), trimmed */
    unsigned line;
} RfSheetEntry;

typedef struct {
    char *path;
    GPtrArray *entries; /* RfSheetEntry*, in the order of the sheet */
    GHashTable *groups; /* char* -> line where it begins */
    GKeyFile *key_file; /* the same as GKeyFile sees it */
} RfSheetText;

/* (returns new), or NULL with an RF_SETTINGS_ERROR_FILE that names path and line. */
RfSheetText *rf_sheet_text_parse(const char *text, size_t length, const char *path, GError **error);
void rf_sheet_text_free(RfSheetText *sheet);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfSheetText, rf_sheet_text_free)

/* NULL if the sheet has no such key. */
const RfSheetEntry *rf_sheet_text_find(const RfSheetText *sheet, const char *group, const char *key);
