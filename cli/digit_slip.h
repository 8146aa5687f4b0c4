/* What a person may have meant who wrote a time down wrongly: neighbouring digits exchanged, a digit taken for one that looks
 * like it or lies beside it, the decimal point one place off. Not for saying that it happened. */
#pragma once

#include <glib.h>

typedef struct {
    double time_s;
    double weight; /* relative to an exchange of digits: 1 */
} RfDigitSlip;

/* RfDigitSlip, appended to `out`, every time > 0 that `text` ("3.85", "3,85") may stand for and that differs from it by more
 * than `least_s`. `scale`: seconds per unit of the text. Nothing for text with minutes in it (scale 0). */
void rf_digit_slip_find(const char *text, double scale, double least_s, GArray *out);
