#include "calib/quoted_text.h"

#include <glib.h>

enum { MOST_CHARACTERS = 60 };

char *rf_quoted_text(const char *seen)
{
    g_autofree char *valid = g_utf8_make_valid(seen, -1);
    GString *shown = g_string_new(NULL);
    const char *at = valid;
    for (int i = 0; *at != '\0' && i < MOST_CHARACTERS; i++, at = g_utf8_next_char(at)) {
        gunichar character = g_utf8_get_char(at);
        g_string_append_unichar(shown, g_unichar_iscntrl(character) ? '?' : character);
    }
    if (*at != '\0') g_string_append(shown, "...");
    return g_string_free(shown, FALSE);
}
