/* One value out of JSON that an earlier run wrote and that anyone may have had in hand since: json-glib takes a value of
 * another kind for a programmer's mistake, here it is a file's. */
#pragma once

#include <json-glib/json-glib.h>
#include <stdbool.h>

/* Finite number, or 0 where the member is absent or null; an error that names it where it is anything else. */
bool rf_json_cell_number(JsonObject *object, const char *name, double *number, GError **error);

/* The same, for a value that the rest hardly hangs on: 0 where it isn't a finite number. */
double rf_json_cell_number_or_0(JsonObject *object, const char *name);

/* Text (borrowed from the object), or NULL where it isn't one. */
const char *rf_json_cell_text(JsonObject *object, const char *name);

bool rf_json_cell_is_true(JsonObject *object, const char *name);

/* (returns new) The parser with an object as its root, or NULL: an error that begins with the path. */
JsonParser *rf_json_cell_load(const char *path, JsonObject **root, GError **error);
