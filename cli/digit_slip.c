#include "cli/digit_slip.h"

#include <math.h>
#include <string.h>

enum { MOST_TEXT = 24 };

/* Digits mistaken for each other in handwriting and on seven-segment displays. Weights are a judgement: how often relative
 * to an exchange of neighbours. */
typedef struct {
    char one, other;
    double weight;
} Alike;

static const Alike alike[] = {
    {'1', '7', 0.5},  {'3', '8', 0.5},  {'4', '9', 0.5},  {'5', '6', 0.5},
    {'0', '6', 0.5},  {'0', '5', 0.15}, {'0', '8', 0.15}, {'6', '8', 0.15},
    {'2', '7', 0.15}, {'3', '5', 0.15}, {'0', '9', 0.15}, {'2', '5', 0.15},
};
static const double point_weight = 0.3;

static void add(const char *text, double scale, double written_s, double least_s, double weight, GArray *out)
{
    RfDigitSlip slip = {g_ascii_strtod(text, NULL) * scale, weight};
    if (slip.time_s > 0 && fabs(slip.time_s - written_s) > least_s) g_array_append_val(out, slip);
}

static void add_exchanges(char *text, double scale, double written_s, double least_s, GArray *out)
{
    for (size_t i = 0; text[i]; i++) {
        size_t k = text[i + 1] == '.' ? i + 2 : i + 1;
        if (!g_ascii_isdigit(text[i]) || !g_ascii_isdigit(text[k]) || text[i] == text[k]) continue;
        char held = text[i];
        text[i] = text[k];
        text[k] = held;
        add(text, scale, written_s, least_s, 1, out);
        text[k] = text[i];
        text[i] = held;
    }
}

static void add_alike(char *text, double scale, double written_s, double least_s, GArray *out)
{
    for (size_t i = 0; text[i]; i++)
        for (size_t k = 0; k < G_N_ELEMENTS(alike); k++) {
            char held = text[i];
            if (held != alike[k].one && held != alike[k].other) continue;
            text[i] = held == alike[k].one ? alike[k].other : alike[k].one;
            add(text, scale, written_s, least_s, alike[k].weight, out);
            text[i] = held;
        }
}

void rf_digit_slip_find(const char *text, double scale, double least_s, GArray *out)
{
    char room[MOST_TEXT];
    if (scale <= 0 || strlen(text) >= sizeof room) return;
    strcpy(room, text);
    g_strdelimit(room, ",", '.');
    if (strspn(room, "0123456789.") != strlen(room)) return;
    double written_s = g_ascii_strtod(room, NULL) * scale;
    add_exchanges(room, scale, written_s, least_s, out);
    add_alike(room, scale, written_s, least_s, out);
    add(room, scale * 10, written_s, least_s, point_weight, out);
    add(room, scale / 10, written_s, least_s, point_weight, out);
}
