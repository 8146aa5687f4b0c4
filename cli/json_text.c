#include "cli/json_text.h"

#include <math.h>
#include <string.h>

static void name(JsonBuilder *json, const char *key)
{
    if (key) json_builder_set_member_name(json, key);
}

void rf_json_text_number(JsonBuilder *json, const char *key, double value)
{
    name(json, key);
    if (isfinite(value))
        json_builder_add_double_value(json, value);
    else
        json_builder_add_null_value(json);
}

void rf_json_text_number_if(JsonBuilder *json, const char *key, bool present, double value)
{
    rf_json_text_number(json, key, present ? value : (double)NAN);
}

void rf_json_text_whole(JsonBuilder *json, const char *key, int64_t value)
{
    name(json, key);
    json_builder_add_int_value(json, value);
}

void rf_json_text_truth(JsonBuilder *json, const char *key, bool value)
{
    name(json, key);
    json_builder_add_boolean_value(json, value);
}

/* JSON is UTF-8: a path or note in another encoding is carried over with the odd bytes marked. */
void rf_json_text_words(JsonBuilder *json, const char *key, const char *text)
{
    name(json, key);
    if (!text) {
        json_builder_add_null_value(json);
        return;
    }
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    json_builder_add_string_value(json, valid);
}

/* The generator writes 17 digits, 0.20999999999999999 for 0.21: the shortest text that reads back as the same number
 * serves people and machines alike. Strings are matched too, so that nothing inside them changes. */
static gboolean shorten(const GMatchInfo *match, GString *out, void *unused)
{
    (void)unused;
    g_autofree char *token = g_match_info_fetch(match, 0);
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    const double value = g_ascii_strtod(token, NULL);
    g_ascii_formatd(text, sizeof text, "%.15g", value);
    const bool is_same =
        *token != '"' && g_ascii_strtod(text, NULL) >= value && g_ascii_strtod(text, NULL) <= value;
    g_string_append(out, is_same ? text : token);
    if (is_same && !strpbrk(text, ".e")) g_string_append(out, ".0"); /* stays a number with a fraction */
    return FALSE;
}

char *rf_json_text_finish(JsonBuilder *json)
{
    g_autoptr(JsonNode) root = json_builder_get_root(json);
    g_autofree char *text = json_to_string(root, TRUE);
    g_autoptr(GRegex) numbers = g_regex_new(
        "\"(?:[^\"\\\\]|\\\\.)*+\"|-?\\d+\\.\\d+(?:[eE][-+]?\\d+)?|-?\\d+[eE][-+]?\\d+", 0, 0, NULL);
    g_autofree char *short_text = g_regex_replace_eval(numbers, text, -1, 0, 0, shorten, NULL, NULL);
    return g_strconcat(short_text, "\n", NULL);
}
