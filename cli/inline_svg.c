#include "cli/inline_svg.h"

#include <string.h>

#include "cli/figure_palette.h"

static const char *const HUE[RF_FIGURE_HUES] = RF_FIGURE_HUE_HEX;

/* The patterns are constants of this file: one that does not compile is a mistake in it. */
static void replace(char **text, const char *pattern, const char *by)
{
    g_autoptr(GError) error = NULL;
    g_autoptr(GRegex) regex = g_regex_new(pattern, G_REGEX_OPTIMIZE, 0, &error);
    g_assert_no_error(error);
    char *changed = g_regex_replace(regex, *text, -1, 0, by, 0, &error);
    g_assert_no_error(error);
    g_free(*text);
    *text = changed;
}

/* gnuplot writes "rgb( 11, 110, 127)", with blanks that depend on the number. */
static void colours(char **text)
{
    for (int i = 0; i < RF_FIGURE_HUES; i++) {
        const guint64 hex = g_ascii_strtoull(HUE[i], NULL, 16);
        g_autofree char *pattern = g_strdup_printf("rgb\\(\\s*%u,\\s*%u,\\s*%u\\)", (unsigned)(hex >> 16),
                                                   (unsigned)(hex >> 8 & 255), (unsigned)(hex & 255));
        g_autofree char *by = g_strdup_printf("var(--hue-%d)", i + 1);
        replace(text, pattern, by);
    }
    replace(text, "rgb\\(\\s*128,\\s*128,\\s*128\\)", "var(--rule)");
    replace(text, "rgb\\(\\s*34,\\s*34,\\s*34\\)", "var(--ink)");
    replace(text, "=(['\"])black\\1", "=\\1var(--ink)\\1");
    replace(text, "=(['\"])gray\\1", "=\\1var(--rule)\\1");
    replace(text, "=(['\"])white\\1", "=\\1var(--paper)\\1");
}

static void identities(char **text, const char *name)
{
    g_autofree char *own = g_strdup_printf(" id=\\1%s-", name);
    g_autofree char *used = g_strdup_printf(" href=\\1#%s-", name);
    replace(text, "<g id=\"gnuplot_plot_\\d+[a-z]?\" ><title>droplet (\\d+)</title>",
            "<g class=\"mark\" data-droplet=\"\\1\"><title>droplet \\1</title>");
    replace(text, " id=(['\"])", own);
    replace(text, " (?:xlink:)?href=(['\"])#", used);
}

char *rf_inline_svg_new(const char *svg, const char *name, const char *label)
{
    const char *start = strstr(svg, "<svg");
    g_autofree char *text = g_strdup(start ? start : "");
    g_autofree char *spoken = g_markup_escape_text(label, -1);
    replace(&text, "<title>Gnuplot</title>\\s*<desc>[^<]*</desc>", "");
    replace(&text, "(?s)<filter .*?</filter>\\s*", "");
    replace(&text, "<g [^>]*>\\s*</g>\\s*", "");
    replace(&text, "\\s+xmlns(:xlink)?=\"[^\"]*\"", "");
    identities(&text, name);
    colours(&text);
    const char *rest = strncmp(text, "<svg", 4) == 0 ? text + 4 : text;
    return g_strdup_printf("<svg class=\"plot\" role=\"img\" aria-label=\"%s\"%s", spoken, rest);
}
