#include "cli/ruler.h"

#include <math.h>

static const double px_per_m = 5e5;

static void add_line(RfLengthScale *scale, bool is_horizontal, int index, double at_px)
{
    RfReticleLine line = {.is_horizontal = is_horizontal, .index = index};
    line.from = is_horizontal ? (RfPixel){10, at_px} : (RfPixel){at_px, 10};
    line.to = is_horizontal ? (RfPixel){600, at_px} : (RfPixel){at_px, 470};
    g_array_append_val(scale->lines, line);
}

/* Horizontal lines 50 px apart from 20 px on, one of them missing; vertical ones 50 px apart from 35 px on. */
static RfLengthScale *grid(void)
{
    RfLengthScale *scale = g_new0(RfLengthScale, 1);
    scale->lines = g_array_new(FALSE, FALSE, sizeof(RfReticleLine));
    for (int i = 0; i < 9; i++)
        if (i != 4) add_line(scale, true, i, 20 + 50 * i);
    for (int i = 0; i < 11; i++) add_line(scale, false, i, 35 + 50 * i);
    return scale;
}

static RfPictureFrame frame(double gravity_rad)
{
    return (RfPictureFrame){.width = 640,
                            .height = 480,
                            .pixel_aspect = 1,
                            .px_per_m_x = px_per_m,
                            .px_per_m_y = px_per_m,
                            .gravity_rad = gravity_rad};
}

static void lines_across_gravity(void)
{
    g_autoptr(RfLengthScale) scale = grid();
    RfPictureFrame down = frame(rf_picture_frame_direction_rad(RF_GRAVITY_DOWN));
    RfScaleRow row = {0};
    rf_ruler_lines(scale, &down, &row);
    g_assert_true(row.has_lines);
    g_assert_cmpfloat_with_epsilon(row.line_offset_mm, 0.04, 1e-9);
    g_assert_cmpfloat_with_epsilon(row.line_step_mm, 0.1, 1e-9);
    g_assert_cmpfloat_with_epsilon(row.line_slope, 0, 1e-9);
}

/* Whichever way things fall, every end of a line that crosses gravity lies on a whole level. */
static void ends_lie_on_whole_levels(void)
{
    static const RfGravityDirection ways[] = {RF_GRAVITY_DOWN, RF_GRAVITY_UP, RF_GRAVITY_LEFT,
                                              RF_GRAVITY_RIGHT};
    for (size_t k = 0; k < G_N_ELEMENTS(ways); k++) {
        g_autoptr(RfLengthScale) scale = grid();
        RfPictureFrame turned = frame(rf_picture_frame_direction_rad(ways[k]) + 0.02);
        RfScaleRow row = {0};
        rf_ruler_lines(scale, &turned, &row);
        g_assert_true(row.has_lines);
        g_assert_cmpfloat_with_epsilon(fabs(row.line_slope), tan(0.02), 1e-9);
        for (guint i = 0; i < scale->lines->len; i++) {
            const RfReticleLine *line = &g_array_index(scale->lines, RfReticleLine, i);
            if (line->is_horizontal != (ways[k] == RF_GRAVITY_DOWN || ways[k] == RF_GRAVITY_UP)) continue;
            RfMetre at = rf_picture_frame_to_cell(&turned, line->to);
            double level = (at.y * 1e3 - row.line_offset_mm - row.line_slope * at.x * 1e3) / row.line_step_mm;
            g_assert_cmpfloat_with_epsilon(level, round(level), 1e-6);
        }
    }
}

static void one_line_is_not_enough(void)
{
    g_autoptr(RfLengthScale) scale = grid();
    g_array_set_size(scale->lines, 1);
    RfPictureFrame down = frame(0);
    RfScaleRow row = {.has_lines = true};
    rf_ruler_lines(scale, &down, &row);
    g_assert_false(row.has_lines);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/ruler/lines/across-gravity", lines_across_gravity);
    g_test_add_func("/ruler/lines/ends-lie-on-whole-levels", ends_lie_on_whole_levels);
    g_test_add_func("/ruler/lines/one-line-is-not-enough", one_line_is_not_enough);
    return g_test_run();
}
