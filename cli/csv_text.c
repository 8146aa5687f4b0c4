#include "cli/csv_text.h"

#include <string.h>

void rf_csv_text_append(GString *out, const char *text)
{
    if (!text) text = "";
    if (!strpbrk(text, ",\"\r\n")) {
        g_string_append(out, text);
    } else {
        g_string_append_c(out, '"');
        for (const char *c = text; *c; c++) {
            if (*c == '"') g_string_append_c(out, '"');
            g_string_append_c(out, *c);
        }
        g_string_append_c(out, '"');
    }
    g_string_append_c(out, ',');
}
