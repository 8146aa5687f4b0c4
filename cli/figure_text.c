#include "cli/figure_text.h"

const char *const rf_figure_hue[RF_FIGURE_HUES] = RF_FIGURE_HUE_HEX;
const double rf_figure_codata_e_C = 1.602176634e-19; /* SI Brochure, 9th edition: exact */

void rf_figure_text_number(GString *out, double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_string_append(out, g_ascii_formatd(text, sizeof text, "%.8g", value));
}

void rf_figure_text_row(GString *out, const double *values, size_t n)
{
    for (size_t i = 0; i < n; i++) {
        if (i) g_string_append_c(out, ' ');
        rf_figure_text_number(out, values[i]);
    }
    g_string_append_c(out, '\n');
}

/* A name inside a gnuplot string: letters, digits and harmless signs only. */
char *rf_figure_text_harmless(const char *text)
{
    char *copy = g_strdup(text ? text : "");
    return g_strcanon(copy, G_CSET_A_2_Z G_CSET_a_2_z G_CSET_DIGITS " .,:()+/'-", ' ');
}
