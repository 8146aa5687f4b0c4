#include "cli/text_wrap.h"

#include <string.h>
#include <sys/ioctl.h>

int rf_text_wrap_width(const char *text)
{
    return g_utf8_validate(text, -1, NULL) ? (int)g_utf8_strlen(text, -1) : (int)strlen(text);
}

void rf_text_wrap_append(GString *out, const char *text, int indent, int columns, bool is_begun)
{
    g_auto(GStrv) words = g_strsplit_set(text, " \n\t", -1);
    int at = is_begun ? indent : 0;
    bool is_empty = true; /* no word on this line yet */
    for (char **word = words; *word; word++) {
        if (!**word) continue;
        const int width = rf_text_wrap_width(*word);
        if (!is_empty && at + 1 + width > columns) {
            g_string_append_c(out, '\n');
            at = 0;
            is_empty = true;
        }
        const int blanks = !is_empty ? 1 : indent - at;
        g_string_append_printf(out, "%*s%s", blanks, "", *word);
        at += blanks + width;
        is_empty = false;
    }
    g_string_append_c(out, '\n');
}

int rf_text_wrap_terminal_columns(int fd)
{
    struct winsize size = {0};
    if (ioctl(fd, TIOCGWINSZ, &size) != 0 || size.ws_col == 0) return 80;
    return CLAMP((int)size.ws_col, 80, 120);
}
