#include "cli/read_paths.h"

#include "calib/table.h"
#include "cli/json_cell.h"

#include <math.h>

/* Columns in the order of the struct below. Those from `field` on may be missing. */
static const char *const names[] = {"droplet", "frame", "time_s", "x_px",   "y_px",   "x_mm",
                                    "y_mm",    "seen",  "u_px",   "u_x_px", "u_y_px", "u_x_mm",
                                    "u_y_mm",  "field", "snr", "smooth_x_px", "smooth_y_px", "u_smooth_x_px", "u_smooth_y_px"};
enum {
    DROPLET,
    FRAME,
    TIME_S,
    X_PX,
    Y_PX,
    X_MM,
    Y_MM,
    SEEN,
    U_PX,
    U_X_PX,
    U_Y_PX,
    U_X_MM,
    U_Y_MM,
    FIELD,
    SNR,
    SMOOTH_X_PX,
    SMOOTH_Y_PX,
    U_SMOOTH_X_PX,
    U_SMOOTH_Y_PX,
    COLUMNS,
    REQUIRED = U_X_PX
};

static bool find_columns(const RfTable *table, int column[COLUMNS], GError **error)
{
    for (int i = 0; i < COLUMNS; i++) {
        size_t required;
        column[i] = rf_table_find(table, names[i]);
        if (column[i] < 0 && i < REQUIRED)
            return rf_table_require(table, names[i], &required, error);
    }
    return true;
}

/* What no camera, clock or bench comes near: beyond it squares are no numbers any more. */
static const double farthest = 1e12;

static bool is_sigma(int column)
{
    return g_str_has_prefix(names[column], "u_");
}

static bool read_cell(const RfTable *table, size_t row, int column, size_t at, double *cell, GError **error)
{
    if (!rf_table_number(table, row, at, cell, error))
        return false;
    const char *needed = fabs(*cell) > farthest            ? "a number within 1e12"
                         : is_sigma(column) && *cell < 0 ? "an uncertainty, not below zero"
                                                           : NULL;
    if (needed)
        rf_table_cell_error(table, row, at, needed, error);
    return needed == NULL;
}

static bool read_cells(const RfTable *table, size_t row, const int column[COLUMNS], double cell[COLUMNS], GError **error)
{
    for (int i = 0; i < COLUMNS; i++) {
        cell[i] = 0;
        if (column[i] >= 0 && !rf_table_is_blank(table, row, (size_t)column[i]) &&
            !read_cell(table, row, i, (size_t)column[i], &cell[i], error))
            return false;
    }
    return true;
}

static bool row_of(const RfTable *table, size_t row, const int column[COLUMNS], RfPathRow *out, GError **error)
{
    double cell[COLUMNS];
    if (!read_cells(table, row, column, cell, error))
        return false;
    if (!(cell[DROPLET] >= 1 && cell[DROPLET] <= 1e9)) {
        rf_table_cell_error(table, row, (size_t)column[DROPLET], "a droplet's number, from 1", error);
        return false;
    }
    *out = (RfPathRow){
        .droplet = (unsigned)cell[DROPLET],
        .frame = (int64_t)cell[FRAME],
        .field = cell[FIELD] > 0,
        .seen = cell[SEEN] > 0,
        .time_s = cell[TIME_S],
        .x_px = cell[X_PX],
        .y_px = cell[Y_PX],
        .u_x_px = column[U_X_PX] >= 0 ? cell[U_X_PX] : cell[U_PX],
        .u_y_px = column[U_Y_PX] >= 0 ? cell[U_Y_PX] : cell[U_PX],
        .x_mm = cell[X_MM],
        .y_mm = cell[Y_MM],
        .u_x_mm = cell[U_X_MM],
        .u_y_mm = cell[U_Y_MM],
        .snr = cell[SNR],
        .smooth_x_px = column[SMOOTH_X_PX] >= 0 ? cell[SMOOTH_X_PX] : cell[X_PX],
        .smooth_y_px = column[SMOOTH_Y_PX] >= 0 ? cell[SMOOTH_Y_PX] : cell[Y_PX],
        .u_smooth_x_px = cell[U_SMOOTH_X_PX],
        .u_smooth_y_px = cell[U_SMOOTH_Y_PX],
    };
    return true;
}

static bool in_order(const RfPathRow *before, const RfPathRow *row)
{
    return row->droplet > before->droplet || (row->droplet == before->droplet && row->time_s > before->time_s);
}

/* Millimetres per pixel from the rows themselves: how far the droplets moved in both. */
static double mm_per_px(const GArray *rows)
{
    double mm2 = 0, px2 = 0;
    for (guint i = 1; i < rows->len; i++) {
        const RfPathRow *a = &g_array_index(rows, RfPathRow, i - 1), *b = &g_array_index(rows, RfPathRow, i);
        if (a->droplet != b->droplet)
            continue;
        mm2 += (b->x_mm - a->x_mm) * (b->x_mm - a->x_mm) + (b->y_mm - a->y_mm) * (b->y_mm - a->y_mm);
        px2 += (b->x_px - a->x_px) * (b->x_px - a->x_px) + (b->y_px - a->y_px) * (b->y_px - a->y_px);
    }
    return px2 > 0 ? sqrt(mm2 / px2) : 0;
}

static void fill_in_sigma(GArray *rows)
{
    double scale = mm_per_px(rows);
    for (guint i = 0; i < rows->len; i++) {
        RfPathRow *row = &g_array_index(rows, RfPathRow, i);
        row->u_x_mm = row->u_x_px * scale;
        row->u_y_mm = row->u_y_px * scale;
    }
}

static bool read_rows(const RfTable *table, GArray *rows, GError **error)
{
    int column[COLUMNS];
    if (!find_columns(table, column, error))
        return false;
    for (size_t i = 0; i < rf_table_rows(table); i++) {
        RfPathRow row;
        if (!row_of(table, i, column, &row, error))
            return false;
        if (rows->len > 0 && !in_order(&g_array_index(rows, RfPathRow, rows->len - 1), &row)) {
            rf_table_cell_error(table, i, (size_t)column[TIME_S],
                                "rows sorted by droplet, then by rising time", error);
            return false;
        }
        g_array_append_val(rows, row);
    }
    if (column[U_X_MM] < 0 || column[U_Y_MM] < 0)
        fill_in_sigma(rows);
    return true;
}

static bool read_numbers(JsonObject *object, RfScaleRow *scale, GError **error)
{
    double lines_found = 0;
    const struct {
        const char *name;
        double *number;
    } members[] = {
        {"px_per_mm_x", &scale->px_per_mm_x},
        {"px_per_mm_y", &scale->px_per_mm_y},
        {"u_px_per_mm_x", &scale->u_px_per_mm_x},
        {"u_px_per_mm_y", &scale->u_px_per_mm_y},
        {"u_relative_along_gravity", &scale->u_relative_along_gravity},
        {"rotation_deg", &scale->rotation_deg},
        {"lines_found", &lines_found},
        {"residual_px", &scale->residual_px},
        {"line_offset_mm", &scale->line_offset_mm},
        {"line_step_mm", &scale->line_step_mm},
        {"line_slope", &scale->line_slope},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(members); i++)
        if (!rf_json_cell_number(object, members[i].name, members[i].number, error))
            return false;
    scale->lines_found = (unsigned)fmax(0, fmin(1e6, lines_found));
    return true;
}

static bool read_scale(const char *path, RfScaleRow *scale, GError **error)
{
    JsonObject *object;
    g_autoptr(JsonParser) parser = rf_json_cell_load(path, &object, error);
    if (!parser)
        return false;
    if (!read_numbers(object, scale, error)) {
        g_prefix_error(error, "%s: ", path);
        return false;
    }
    scale->source = g_strdup(path);
    scale->has_lines = scale->line_step_mm > 0;
    scale->found = scale->px_per_mm_x > 0 && scale->px_per_mm_y > 0;
    return true;
}

static double relative_u(const RfScaleRow *scale)
{
    if (scale->u_relative_along_gravity > 0)
        return scale->u_relative_along_gravity;
    return scale->found ? scale->u_px_per_mm_y / scale->px_per_mm_y : 0;
}

bool rf_read_paths(const char *path, RfResults *results, double *scale_relative_u, GError **error)
{
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table || !read_rows(table, results->paths, error))
        return false;
    g_autofree char *folder = g_path_get_dirname(path);
    g_autofree char *scale_path = g_build_filename(folder, "scale.json", NULL);
    if (g_file_test(scale_path, G_FILE_TEST_EXISTS) && !read_scale(scale_path, &results->scale, error))
        return false;
    *scale_relative_u = relative_u(&results->scale);
    if (!results->scale.found)
        g_ptr_array_add(results->warnings,
                        g_strdup("no scale.json with a scale lies beside the paths: the scale's uncertainty is missing from u_charge_C"));
    return true;
}
