#include "cli/view.h"

#include "cli/ruler.h"
#include "tracker/video_file.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static double level_at(const RfPicture *picture, int x, int y)
{
    const char *row = (const char *)picture->pixels + y * picture->stride_bytes;
    switch (picture->kind) {
    case RF_PIXEL_U8:
        return ((const uint8_t *)row)[x];
    case RF_PIXEL_U16:
        return ((const uint16_t *)(const void *)row)[x];
    case RF_PIXEL_FLOAT:
        break;
    }
    return (double)((const float *)(const void *)row)[x];
}

static int compare_doubles(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

/* Levels below and above which 0.5 % of the pixels lie, from every 7th pixel. */
static void find_stretch(const RfPicture *picture, double *black, double *white)
{
    g_autoptr(GArray) levels = g_array_new(FALSE, FALSE, sizeof(double));
    for (int64_t i = 0; i < (int64_t)picture->width * picture->height; i += 7) {
        double level = level_at(picture, (int)(i % picture->width), (int)(i / picture->width));
        g_array_append_val(levels, level);
    }
    qsort(levels->data, levels->len, sizeof(double), compare_doubles);
    *black = g_array_index(levels, double, levels->len / 200);
    *white = g_array_index(levels, double, levels->len - 1 - levels->len / 200);
    if (*white <= *black)
        *white = *black + 1;
}

unsigned char *rf_view_grey(const RfPicture *picture)
{
    double black, white;
    find_stretch(picture, &black, &white);
    unsigned char *grey = g_malloc((size_t)picture->width * (size_t)picture->height);
    for (int y = 0; y < picture->height; y++)
        for (int x = 0; x < picture->width; x++) {
            double share = (level_at(picture, x, y) - black) / (white - black);
            grey[(size_t)y * (size_t)picture->width + (size_t)x] =
                (unsigned char)lround(255 * fmin(1, fmax(0, share)));
        }
    return grey;
}

GBytes *rf_view_background_png(const RfBackground *background)
{
    RfPicture picture = rf_ruler_background(background);
    g_autofree unsigned char *grey = rf_view_grey(&picture);
    return rf_video_file_encode_png(grey, background->width, background->width, background->height, 1, 8, NULL);
}

typedef struct {
    unsigned char *rgb;
    int width, height;
} Canvas;

static void mark(const Canvas *canvas, double x_px, double y_px, const unsigned char colour[3])
{
    int x = (int)lround(x_px), y = (int)lround(y_px);
    if (x >= 0 && x < canvas->width && y >= 0 && y < canvas->height)
        memcpy(canvas->rgb + 3 * ((size_t)y * (size_t)canvas->width + (size_t)x), colour, 3);
}

/* Dashed, so that the ruled line itself stays visible between the dashes. */
static void draw_line(const Canvas *canvas, const RfReticleLine *line)
{
    static const unsigned char across[3] = {255, 176, 0}, along[3] = {86, 180, 233};
    double dx = line->to.x - line->from.x, dy = line->to.y - line->from.y;
    int steps = (int)fmax(fabs(dx), fabs(dy)) + 1;
    for (int i = 0; i <= steps; i++)
        if (i % 12 < 7)
            mark(canvas, line->from.x + dx * i / steps, line->from.y + dy * i / steps,
                 line->is_horizontal ? across : along);
}

GBytes *rf_view_lines_png(const unsigned char *grey, int width, int height, const RfLengthScale *scale, GError **error)
{
    size_t pixels = (size_t)width * (size_t)height;
    g_autofree unsigned char *rgb = g_malloc(3 * pixels);
    for (size_t i = 0; i < pixels; i++)
        memset(rgb + 3 * i, grey[i], 3);
    Canvas canvas = {rgb, width, height};
    for (guint i = 0; i < scale->lines->len; i++)
        draw_line(&canvas, &g_array_index(scale->lines, RfReticleLine, i));
    return rf_video_file_encode_png(rgb, 3 * (ptrdiff_t)width, width, height, 3, 8, error);
}
