#include "cli/overlay_picture.h"

#include <cairo.h>

#include "cli/figure_palette.h"

struct RfOverlayPicture {
    int width, height, band;
    double text_px;
    cairo_surface_t *lines, *sheet; /* paths so far; the picture being made */
    cairo_t *line_pen, *pen;
    uint8_t *rgb;
};

static cairo_t *pen_on(cairo_surface_t *surface)
{
    cairo_t *pen = cairo_create(surface);
    /* cairo's built-in face: the same letters whatever fonts a machine has */
    cairo_select_font_face(pen, "@cairo:", CAIRO_FONT_SLANT_NORMAL, CAIRO_FONT_WEIGHT_BOLD);
    cairo_set_line_cap(pen, CAIRO_LINE_CAP_ROUND);
    cairo_set_line_join(pen, CAIRO_LINE_JOIN_ROUND);
    return pen;
}

RfOverlayPicture *rf_overlay_picture_new(int width, int height)
{
    RfOverlayPicture *picture = g_new0(RfOverlayPicture, 1);
    picture->width = width;
    picture->height = height;
    picture->text_px = MAX(10, height / 36.0);
    picture->band = (int)(1.8 * picture->text_px) / 2 * 2;
    picture->lines = cairo_image_surface_create(CAIRO_FORMAT_ARGB32, width, height);
    picture->sheet = cairo_image_surface_create(CAIRO_FORMAT_RGB24, width, height + picture->band);
    picture->line_pen = pen_on(picture->lines);
    picture->pen = pen_on(picture->sheet);
    picture->rgb = g_malloc_n((size_t)width * 3, (size_t)(height + picture->band));
    return picture;
}

void rf_overlay_picture_free(RfOverlayPicture *picture)
{
    if (!picture) return;
    cairo_destroy(picture->line_pen);
    cairo_destroy(picture->pen);
    cairo_surface_destroy(picture->lines);
    cairo_surface_destroy(picture->sheet);
    g_free(picture->rgb);
    g_free(picture);
}

int rf_overlay_picture_height(const RfOverlayPicture *picture)
{
    return picture->height + picture->band;
}

static void take_colour(cairo_t *pen, unsigned droplet, double opacity)
{
    static const unsigned hues[RF_FIGURE_HUES] = RF_FIGURE_DARK_HUE_RGB;
    const unsigned rgb = hues[(droplet - 1) % RF_FIGURE_HUES];
    cairo_set_source_rgba(pen, (rgb >> 16) / 255.0, (rgb >> 8 & 255) / 255.0, (rgb & 255) / 255.0, opacity);
}

/* ---- paths ---- */

void rf_overlay_picture_add_line(RfOverlayPicture *picture, const RfOverlayMark *from,
                                 const RfOverlayMark *to)
{
    take_colour(picture->line_pen, to->droplet, 0.7);
    cairo_set_line_width(picture->line_pen, MAX(1, picture->text_px / 12));
    cairo_move_to(picture->line_pen, from->x_px, from->y_px);
    cairo_line_to(picture->line_pen, to->x_px, to->y_px);
    cairo_stroke(picture->line_pen);
}

void rf_overlay_picture_wipe_lines(RfOverlayPicture *picture)
{
    cairo_set_operator(picture->line_pen, CAIRO_OPERATOR_CLEAR);
    cairo_paint(picture->line_pen);
    cairo_set_operator(picture->line_pen, CAIRO_OPERATOR_OVER);
}

/* ---- one picture ---- */

static void lay_grey(RfOverlayPicture *picture, const uint8_t *grey)
{
    cairo_surface_flush(picture->sheet);
    uint8_t *rows = cairo_image_surface_get_data(picture->sheet);
    const int stride_bytes = cairo_image_surface_get_stride(picture->sheet);
    for (int y = 0; y < picture->height; y++) {
        uint32_t *row = (uint32_t *)(void *)(rows + (ptrdiff_t)y * stride_bytes);
        for (int x = 0; x < picture->width; x++, grey++) {
            const uint32_t level = (uint32_t)(CLAMP(*grey - 16, 0, 219) * 255 + 109) / 219;
            row[x] = level << 16 | level << 8 | level;
        }
    }
    cairo_surface_mark_dirty(picture->sheet);
}

static void write_word(cairo_t *pen, double text_px, double x, double y, const char *text)
{
    cairo_set_font_size(pen, text_px);
    cairo_move_to(pen, x, y);
    cairo_text_path(pen, text);
}

/* Letters with a dark rim, to be read on any ground. */
static void write_number(RfOverlayPicture *picture, const RfOverlayMark *mark, double radius_px)
{
    char text[16];
    g_snprintf(text, sizeof text, "%u", mark->droplet);
    cairo_text_extents_t size;
    cairo_set_font_size(picture->pen, picture->text_px);
    cairo_text_extents(picture->pen, text, &size);
    const double right = mark->x_px + 1.3 * radius_px,
                 x = right + size.x_advance < picture->width ? right
                                                             : mark->x_px - 1.3 * radius_px - size.x_advance;
    write_word(picture->pen, picture->text_px, x,
               CLAMP(mark->y_px + 0.35 * picture->text_px, picture->text_px, picture->height - 2), text);
    cairo_set_source_rgba(picture->pen, 0, 0, 0, 0.8);
    cairo_set_line_width(picture->pen, picture->text_px / 4);
    cairo_stroke_preserve(picture->pen);
    take_colour(picture->pen, mark->droplet, 1);
    cairo_fill(picture->pen);
}

static void draw_ring(RfOverlayPicture *picture, const RfOverlayMark *mark, double radius_px)
{
    const double dash_px = radius_px / 2;
    cairo_new_path(picture->pen);
    cairo_arc(picture->pen, mark->x_px, mark->y_px, radius_px, 0, 2 * G_PI);
    cairo_set_dash(picture->pen, &dash_px, mark->is_seen ? 0 : 1, 0);
    cairo_set_line_width(picture->pen, MAX(1.2, picture->text_px / 10));
    take_colour(picture->pen, mark->droplet, 1);
    cairo_stroke(picture->pen);
    cairo_set_dash(picture->pen, NULL, 0, 0);
}

static void draw_band(RfOverlayPicture *picture, char *const words[RF_OVERLAY_WORDS])
{
    static const double starts[RF_OVERLAY_WORDS] = {0.02, 0.24, 0.5, 0.78}; /* of the width */
    cairo_rectangle(picture->pen, 0, picture->height, picture->width, picture->band);
    cairo_set_source_rgb(picture->pen, 0.05, 0.07, 0.07);
    cairo_fill(picture->pen);
    cairo_set_source_rgb(picture->pen, 0.91, 0.92, 0.92);
    for (int i = 0; i < RF_OVERLAY_WORDS; i++) {
        if (!words[i]) continue;
        write_word(picture->pen, MIN(picture->text_px, picture->width / 40.0), starts[i] * picture->width,
                   picture->height + 0.68 * picture->band, words[i]);
        cairo_fill(picture->pen);
    }
}

static const uint8_t *as_rgb(RfOverlayPicture *picture)
{
    cairo_surface_flush(picture->sheet);
    const uint8_t *rows = cairo_image_surface_get_data(picture->sheet);
    const int stride_bytes = cairo_image_surface_get_stride(picture->sheet);
    uint8_t *to = picture->rgb;
    for (int y = 0; y < picture->height + picture->band; y++) {
        const uint32_t *row = (const uint32_t *)(const void *)(rows + (ptrdiff_t)y * stride_bytes);
        for (int x = 0; x < picture->width; x++) {
            *to++ = (uint8_t)(row[x] >> 16);
            *to++ = (uint8_t)(row[x] >> 8);
            *to++ = (uint8_t)row[x];
        }
    }
    return picture->rgb;
}

const uint8_t *rf_overlay_picture_of(RfOverlayPicture *picture, const uint8_t *grey, const GArray *marks,
                                     char *const words[RF_OVERLAY_WORDS])
{
    const double radius_px = 0.62 * picture->text_px;
    lay_grey(picture, grey);
    cairo_set_source_surface(picture->pen, picture->lines, 0, 0);
    cairo_paint(picture->pen);
    for (guint i = 0; i < marks->len; i++)
        draw_ring(picture, &g_array_index(marks, RfOverlayMark, i), radius_px);
    for (guint i = 0; i < marks->len; i++)
        write_number(picture, &g_array_index(marks, RfOverlayMark, i), radius_px);
    draw_band(picture, words);
    return as_rgb(picture);
}
