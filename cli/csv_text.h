/* A cell of our CSV files as RFC 4180 (2.6, 2.7) wants it. */
#pragma once

#include <glib.h>

/* `text` (NULL: nothing), in quotes where it needs them, and a comma. */
void rf_csv_text_append(GString *out, const char *text);
