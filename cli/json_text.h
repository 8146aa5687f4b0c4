/* JSON as all our files have it, on json-glib's builder: what is not a number is null, numbers are the shortest that read back
 * the same, text is UTF-8 with odd bytes marked. A key of NULL is for the rows of an array. */
#pragma once

#include <json-glib/json-glib.h>
#include <stdbool.h>
#include <stdint.h>

void rf_json_text_number(JsonBuilder *json, const char *key, double value);
void rf_json_text_number_if(JsonBuilder *json, const char *key, bool present, double value);
void rf_json_text_whole(JsonBuilder *json, const char *key, int64_t value);
void rf_json_text_truth(JsonBuilder *json, const char *key, bool value);
void rf_json_text_words(JsonBuilder *json, const char *key, const char *text);

/* What was built, in lines, with a newline at the end; the root must be closed. (returns new) */
char *rf_json_text_finish(JsonBuilder *json);
