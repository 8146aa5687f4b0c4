#include <string.h>

#include "cli/manual.h"
#include "cli/text_wrap.h"

enum { INDENT = 2, BESIDE = 24 }; /* columns: of text, and of an item's text beside its term */

static void append_lines(GString *out, const char *text)
{
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    for (char **line = lines; *line; line++)
        if (**line || line[1]) g_string_append_printf(out, "%*s%s\n", **line ? INDENT + 2 : 0, "", *line);
}

static void append_item(GString *out, const RfManualPart *part, int columns)
{
    const int width = rf_text_wrap_width(part->term);
    const bool fits = INDENT + width + 2 <= BESIDE;
    g_string_append_printf(out, "%*s%s", INDENT, "", part->term);
    if (fits)
        g_string_append_printf(out, "%*s", BESIDE - INDENT - width, "");
    else
        g_string_append_c(out, '\n');
    rf_text_wrap_append(out, part->text, BESIDE, columns, fits);
}

static void append_part(GString *out, const RfManualPart *part, int columns)
{
    switch (part->kind) {
    case RF_MANUAL_HEADING:
        g_string_append_printf(out, "\n%s\n", part->text);
        break;
    case RF_MANUAL_PARAGRAPH:
        rf_text_wrap_append(out, part->text, INDENT, columns, false);
        break;
    case RF_MANUAL_ITEM:
        append_item(out, part, columns);
        break;
    case RF_MANUAL_VERBATIM:
        append_lines(out, part->text);
        break;
    }
}

static bool are_paragraphs(const GArray *parts, guint i)
{
    return i > 0 && g_array_index(parts, RfManualPart, i).kind == RF_MANUAL_PARAGRAPH &&
           g_array_index(parts, RfManualPart, i - 1).kind != RF_MANUAL_HEADING;
}

char *rf_manual_text(const RfManual *manual, int columns)
{
    g_autoptr(GString) title = g_string_new(NULL);
    g_autofree char *line = g_strdup_printf("%s: %s", manual->called, manual->purpose),
                    *parts = rf_manual_parts_text(manual, columns);
    rf_text_wrap_append(title, line, 0, columns, false);
    return g_strconcat(title->str, parts, NULL);
}

char *rf_manual_parts_text(const RfManual *manual, int columns)
{
    GString *out = g_string_new(NULL);
    for (guint i = 0; i < manual->parts->len; i++) {
        if (are_paragraphs(manual->parts, i)) g_string_append_c(out, '\n');
        append_part(out, &g_array_index(manual->parts, RfManualPart, i), columns);
    }
    return g_string_free(out, FALSE);
}
