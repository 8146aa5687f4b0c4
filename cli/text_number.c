#include "cli/text_number.h"

#include <math.h>
#include <stdint.h>

/* Beyond this the scaled value no longer fits a double's 53 bits exactly, and printf takes over. */
static const double EXACT_LIMIT = 9.0e15;
static const double POWER[] = {1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9};

/* A path table has a million rows of seventeen numbers: printf would take seconds where this takes tenths. */
void rf_text_number_append_fixed(GString *out, double value, int decimals)
{
    g_return_if_fail(decimals >= 0 && decimals <= 9);
    if (!isfinite(value)) return;
    const double scaled = round(fabs(value) * POWER[decimals]);
    if (scaled > EXACT_LIMIT) {
        char format[8], text[400];
        g_snprintf(format, sizeof format, "%%.%df", decimals);
        g_string_append(out, g_ascii_formatd(text, sizeof text, format, value));
        return;
    }
    char text[24];
    size_t at = sizeof text;
    uint64_t rest = (uint64_t)scaled;
    for (int place = 0; rest > 0 || place <= decimals; place++) {
        if (place == decimals && place > 0) text[--at] = '.';
        text[--at] = (char)('0' + rest % 10);
        rest /= 10;
    }
    if (value < 0 && scaled > 0) text[--at] = '-';
    g_string_append_len(out, text + at, (gssize)(sizeof text - at));
}

double rf_text_number_settle(double value, int decimals)
{
    g_return_val_if_fail(decimals >= 0 && decimals <= 9, value);
    const double scaled = round(fabs(value) * POWER[decimals]);
    if (!(scaled <= EXACT_LIMIT)) return value;
    return scaled > 0 ? copysign(scaled / POWER[decimals], value) : 0;
}

void rf_text_number_append_exponent(GString *out, double value, int decimals)
{
    g_return_if_fail(decimals >= 0 && decimals <= 15);
    if (!isfinite(value)) return;
    char format[8], text[40];
    g_snprintf(format, sizeof format, "%%.%de", decimals);
    g_string_append(out, g_ascii_formatd(text, sizeof text, format, value + 0.0)); /* + 0.0: no "-0" */
}

/* The place of the last digit kept: -2 keeps hundredths. Two digits of sigma, after rounding (0.0996 is 0.10). */
static int last_place(double sigma)
{
    int place = (int)floor(log10(sigma)) - 1;
    if (round(sigma / pow(10, place)) >= 100) place++;
    return place;
}

static char *exact_text(double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    return g_strdup(g_ascii_formatd(text, sizeof text, "%.6g", value + 0.0));
}

char *rf_text_number_concise(RfValue value)
{
    if (!isfinite(value.value)) return g_strdup("");
    if (!isfinite(value.sigma) || value.sigma <= 0) return exact_text(value.value);
    const int place = last_place(value.sigma);
    g_autoptr(GString) out = g_string_new(NULL);
    if (place >= 0) { /* whole numbers: the bracket shows the zeros too */
        const double step = pow(10, place);
        rf_text_number_append_fixed(out, round(value.value / step) * step, 0);
        g_string_append_c(out, '(');
        rf_text_number_append_fixed(out, round(value.sigma / step) * step, 0);
    } else {
        char format[8], text[400];
        g_snprintf(format, sizeof format, "%%.%df", MIN(-place, 60));
        const double step = pow(10, -place);
        const double rounded = round(value.value * step) / step;
        g_string_append(out, g_ascii_formatd(text, sizeof text, format, rounded + 0.0));
        g_string_append_c(out, '(');
        rf_text_number_append_fixed(out, round(value.sigma * step), 0);
    }
    g_string_append_c(out, ')');
    return g_string_free(g_steal_pointer(&out), FALSE);
}

char *rf_text_number_concise_scaled(RfValue value, int exponent)
{
    const double scale = pow(10, -exponent);
    return rf_text_number_concise((RfValue){value.value * scale, value.sigma * scale});
}
