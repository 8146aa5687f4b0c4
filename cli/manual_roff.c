#include "cli/manual.h"
#include "cli/text_wrap.h"
#include "cli/version.h"

#include <string.h>

enum { SOURCE_COLUMNS = 78 };

/* Characters that roff would read as commands, or that man(1) would turn into typographic ones: what stands in the page
 * can be copied into a shell. */
static const char *escape_of(gunichar c)
{
    switch (c) {
    case '\\':
        return "\\e";
    case '-':
        return "\\-";
    case '^':
        return "\\(ha";
    case '~':
        return "\\(ti";
    case '\'':
        return "\\(aq";
    case '`':
        return "\\(ga";
    default:
        return NULL;
    }
}

static void append_escaped(GString *out, const char *text)
{
    for (const char *c = text; *c; c = g_utf8_next_char(c)) {
        const gunichar one = g_utf8_get_char(c);
        const char *escape = escape_of(one);
        if (escape)
            g_string_append(out, escape);
        else if (one < 0x80)
            g_string_append_c(out, (char)one);
        else
            g_string_append_printf(out, "\\[u%04X]", one);
    }
}

/* A line that begins with a dot would be a request. */
static void append_line(GString *out, const char *line)
{
    if (*line == '.') g_string_append(out, "\\&");
    append_escaped(out, line);
    g_string_append_c(out, '\n');
}

static void append_wrapped(GString *out, const char *text)
{
    g_autoptr(GString) wrapped = g_string_new(NULL);
    rf_text_wrap_append(wrapped, text, 0, SOURCE_COLUMNS, false);
    g_auto(GStrv) lines = g_strsplit(wrapped->str, "\n", -1);
    for (char **line = lines; *line; line++)
        if (**line) append_line(out, *line);
}

static void append_verbatim(GString *out, const char *text)
{
    g_auto(GStrv) lines = g_strsplit(text, "\n", -1);
    g_string_append(out, ".nf\n.RS 4\n");
    for (char **line = lines; *line; line++)
        if (**line || line[1]) append_line(out, *line);
    g_string_append(out, ".RE\n.fi\n");
}

static void append_item(GString *out, const RfManualPart *part)
{
    g_string_append(out, ".TP\n\\fB");
    append_escaped(out, part->term);
    g_string_append(out, "\\fP\n");
    append_wrapped(out, part->text);
}

static void append_heading(GString *out, const char *text)
{
    g_autofree char *upper =
        *text == '[' ? g_strdup(text) : g_ascii_strup(text, -1); /* a sheet's group as it is */
    g_string_append(out, ".SH \"");
    append_escaped(out, upper);
    g_string_append(out, "\"\n");
}

static void append_part(GString *out, const RfManualPart *part, bool follows_heading)
{
    switch (part->kind) {
    case RF_MANUAL_HEADING:
        append_heading(out, part->text);
        break;
    case RF_MANUAL_PARAGRAPH:
        g_string_append(out, follows_heading ? "" : ".PP\n");
        append_wrapped(out, part->text);
        break;
    case RF_MANUAL_ITEM:
        append_item(out, part);
        break;
    case RF_MANUAL_VERBATIM:
        append_verbatim(out, part->text);
        break;
    }
}

char *rf_manual_roff(const RfManual *manual)
{
    GString *out = g_string_new(".\\\" Made from the program's own tables: cli/manual.c.\n");
    g_autofree char *upper = g_ascii_strup(manual->name, -1);
    g_string_append(out, ".TH ");
    append_escaped(out, upper);
    g_string_append_printf(out, " %d \"" RF_VERSION_DATE "\" \"risefall " RF_VERSION "\"\n.SH NAME\n",
                           manual->section);
    append_escaped(out, manual->name);
    g_string_append(out, " \\- ");
    append_line(out, manual->purpose);
    bool follows_heading = false;
    for (guint i = 0; i < manual->parts->len; i++) {
        const RfManualPart *part = &g_array_index(manual->parts, RfManualPart, i);
        append_part(out, part, follows_heading);
        follows_heading = part->kind == RF_MANUAL_HEADING;
    }
    return g_string_free(out, FALSE);
}
