#include <math.h>

#include "cli/inline_svg.h"
#include "cli/report_parts.h"
#include "cli/text_number.h"

void rf_report_text(GString *out, const char *text)
{
    if (!text) return;
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    g_autofree char *escaped = g_markup_escape_text(valid, -1);
    g_string_append(out, escaped);
}

void rf_report_text_sentence(GString *out, const char *text)
{
    if (!text || !*text) return;
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    g_autofree char *first = g_utf8_strup(valid, g_utf8_next_char(valid) - valid);
    g_autofree char *whole =
        g_strconcat(first, g_utf8_next_char(valid), g_str_has_suffix(valid, ".") ? "" : ".", NULL);
    rf_report_text(out, whole);
}

void rf_report_text_cell(GString *out, bool is_number, const char *text)
{
    g_string_append(out, is_number ? "<td class=\"number\">" : "<td>");
    rf_report_text(out, text);
    g_string_append(out, "</td>");
}

/* A minus sign as wide as the digits, in place of the hyphen. */
static void number_cell(GString *out, const char *text)
{
    const bool is_negative = *text == '-';
    g_string_append_printf(out, "<td class=\"number\">%s%s</td>", is_negative ? "−" : "", text + is_negative);
}

void rf_report_text_number_cell(GString *out, RfValue value)
{
    g_autofree char *text = rf_text_number_concise(value);
    number_cell(out, text);
}

void rf_report_text_fixed_cell(GString *out, double value, int decimals)
{
    g_autoptr(GString) text = g_string_new(NULL);
    rf_text_number_append_fixed(text, value, decimals);
    number_cell(out, text->str);
}

void rf_report_text_charge(GString *out, RfValue charge_C)
{
    g_autofree char *text = rf_text_number_concise_scaled(charge_C, -19);
    g_string_append_printf(out, "<span class=\"nowrap\">%s × 10<sup>−19</sup> C</span>", text);
}

void rf_report_text_charge_cell(GString *out, RfValue charge_C)
{
    g_autofree char *text = rf_text_number_concise_scaled(charge_C, -19);
    number_cell(out, text);
}

void rf_report_text_percent(GString *out, double fraction)
{
    const double percent = 100 * fabs(fraction);
    const int decimals = percent > 0 ? CLAMP(1 - (int)floor(log10(percent)), 0, 6) : 0;
    rf_text_number_append_fixed(out, percent, decimals);
    g_string_append(out, " %");
}

void rf_report_text_droplet_cell(GString *out, unsigned droplet)
{
    g_string_append_printf(out, "<th scope=\"row\"><a class=\"pick\" href=\"#droplet-%u\">%u</a></th>",
                           droplet, droplet);
}

void rf_report_text_open(GString *out, const char *id, const char *heading)
{
    g_string_append_printf(
        out, "<section id=\"%s\" aria-labelledby=\"%s-heading\">\n<h2 id=\"%s-heading\">%s</h2>\n", id, id,
        id, heading);
}

void rf_report_text_close(GString *out)
{
    g_string_append(out, "</section>\n");
}

void rf_report_text_table(GString *out, const char *label, const char *head)
{
    g_string_append_printf(out,
                           "<div class=\"scroll\" role=\"region\" tabindex=\"0\" "
                           "aria-label=\"%s\"><table>\n<thead><tr>%s</tr></thead>\n"
                           "<tbody>\n",
                           label, head);
}

void rf_report_text_table_end(GString *out)
{
    g_string_append(out, "</tbody></table></div>\n");
}

void rf_report_text_figure(GString *out, const RfFigureSet *figures, const char *name, const char *caption)
{
    const RfFigure *figure = rf_figure_find(figures, name);
    if (!figure) return;
    if (!figure->svg) {
        g_string_append_printf(out,
                               "<p class=\"soft\">No picture could be drawn; the data and the script are in "
                               "<code>figures/%s.dat</code> and <code>figures/%s.gp</code>.</p>\n",
                               name, name);
        return;
    }
    g_autofree char *picture = rf_inline_svg_new(figure->svg, name, figure->alt);
    const char *shape = g_str_equal(name, "radius") ? " narrow" : "";
    g_string_append_printf(
        out,
        "<figure><div class=\"scroll%s\" role=\"region\" tabindex=\"0\" aria-label=\"%s, figure\">%s</div>"
        "<figcaption class=\"caption\">%s</figcaption></figure>\n",
        shape, figure->title, picture, caption);
}
