#include "cli/json_cell.h"

#include <math.h>

#include "calib/table.h"

static JsonNode *value_node(JsonObject *object, const char *name)
{
    JsonNode *node = json_object_get_member(object, name);
    return node != NULL && JSON_NODE_HOLDS_VALUE(node) ? node : NULL;
}

static bool is_number(JsonNode *node)
{
    GType type = json_node_get_value_type(node);
    return (type == G_TYPE_DOUBLE || type == G_TYPE_INT64) && isfinite(json_node_get_double(node));
}

bool rf_json_cell_number(JsonObject *object, const char *name, double *number, GError **error)
{
    *number = rf_json_cell_number_or_0(object, name);
    JsonNode *node = json_object_get_member(object, name);
    if (node == NULL || JSON_NODE_HOLDS_NULL(node) || (JSON_NODE_HOLDS_VALUE(node) && is_number(node)))
        return true;
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_CELL, "%s: not a finite number, which is needed there",
                name);
    return false;
}

double rf_json_cell_number_or_0(JsonObject *object, const char *name)
{
    JsonNode *node = value_node(object, name);
    return node != NULL && is_number(node) ? json_node_get_double(node) : 0;
}

const char *rf_json_cell_text(JsonObject *object, const char *name)
{
    JsonNode *node = value_node(object, name);
    return node != NULL && json_node_get_value_type(node) == G_TYPE_STRING ? json_node_get_string(node)
                                                                           : NULL;
}

bool rf_json_cell_is_true(JsonObject *object, const char *name)
{
    JsonNode *node = value_node(object, name);
    return node != NULL && json_node_get_value_type(node) == G_TYPE_BOOLEAN && json_node_get_boolean(node);
}

JsonParser *rf_json_cell_load(const char *path, JsonObject **root, GError **error)
{
    g_autoptr(JsonParser) parser = json_parser_new();
    g_autoptr(GError) why = NULL;
    bool is_read = json_parser_load_from_file(parser, path, &why);
    JsonNode *node = is_read ? json_parser_get_root(parser) : NULL;
    if (node != NULL && JSON_NODE_HOLDS_OBJECT(node)) {
        *root = json_node_get_object(node);
        return g_steal_pointer(&parser);
    }
    g_set_error(error, RF_TABLE_ERROR, RF_TABLE_ERROR_FILE, "%s: %s", path,
                why != NULL ? why->message : "not a JSON object, as a run writes it");
    return NULL;
}
