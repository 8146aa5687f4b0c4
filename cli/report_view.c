#include <math.h>

#include "cli/figure_palette.h"
#include "cli/report_parts.h"
#include "cli/text_number.h"

/* A path of two hours has a quarter of a million points; what a page can show is this many per droplet, fewer where there
 * are many: a browser takes seconds over the points of two hundred. */
enum { MOST_POINTS = 1500, LEAST_POINTS = 150, POINTS_IN_ALL = 50000 };

/* From here on the numbers are set smaller, to leave the picture visible. */
enum { MANY = 40 };

static void coordinate(GString *out, double x, double y)
{
    rf_text_number_append_fixed(out, x, 1);
    g_string_append_c(out, ',');
    rf_text_number_append_fixed(out, y, 1);
    g_string_append_c(out, ' ');
}

/* Points at least `apart` from the one before; how many that leaves. */
static unsigned thin(const RfPathRow *rows, guint n, double aspect, double apart, GString *out)
{
    unsigned kept = 0;
    const RfPathRow *last = NULL;
    for (guint i = 0; i < n; i++) {
        if (!isfinite(rows[i].x_px) || !isfinite(rows[i].y_px)) continue;
        if (last && hypot((rows[i].x_px - last->x_px) * aspect, rows[i].y_px - last->y_px) < apart) continue;
        last = &rows[i];
        kept++;
        if (out) coordinate(out, last->x_px * aspect, last->y_px);
    }
    return kept;
}

static bool is_accepted(const RfResults *results, unsigned droplet)
{
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (row->droplet == droplet && row->accepted) return true;
    }
    return false;
}

static void attribute(GString *out, const char *name, double value)
{
    g_string_append_printf(out, " %s=\"", name);
    rf_text_number_append_fixed(out, value, 1);
    g_string_append_c(out, '"');
}

static void open_mark(GString *out, const RfResults *results, unsigned droplet)
{
    const bool is_good = is_accepted(results, droplet);
    g_string_append_printf(out, "<g class=\"mark%s\" data-droplet=\"%u\"><title>droplet %u, %s</title>",
                           is_good ? "" : " aside", droplet, droplet, is_good ? "accepted" : "set aside");
}

/* The line, and the same line again, wide and unseen, so that a finger can hit it. */
static void line(GString *out, const RfResults *results, const RfPathRow *rows, guint n, unsigned most)
{
    double apart = 1;
    while (thin(rows, n, results->pixel_aspect, apart, NULL) > most) apart *= 1.5;
    open_mark(out, results, rows->droplet);
    g_string_append_printf(out, "<polyline id=\"path-%u\" class=\"line hue-%u\" points=\"", rows->droplet,
                           (rows->droplet - 1) % RF_FIGURE_HUES + 1);
    thin(rows, n, results->pixel_aspect, apart, out);
    g_string_append_printf(out, "\"/><use class=\"hit\" href=\"#path-%u\"/></g>\n", rows->droplet);
}

/* Where the path begins: a dot, and the number beside it, never outside the picture. */
static void label(GString *out, const RfResults *results, const RfPathRow *first, double text_px)
{
    const unsigned hue = (first->droplet - 1) % RF_FIGURE_HUES + 1;
    const double x = first->x_px * results->pixel_aspect,
                 right = results->width * results->pixel_aspect - 1.5 * text_px;
    if (!isfinite(x) || !isfinite(first->y_px)) return;
    open_mark(out, results, first->droplet);
    g_string_append_printf(out, "<circle class=\"ink-%u\"", hue);
    attribute(out, "r", text_px / 4);
    attribute(out, "cx", x);
    attribute(out, "cy", first->y_px);
    g_string_append_printf(out, "/><text class=\"ink-%u\"", hue);
    attribute(out, "x", CLAMP(x + text_px * 0.5, 0, fmax(right, 0)));
    attribute(out, "y", CLAMP(first->y_px - text_px * 0.3, text_px, results->height));
    g_string_append_printf(out, ">%u</text></g>\n", first->droplet);
}

static guint path_end(const GArray *all, guint first)
{
    const unsigned droplet = g_array_index(all, RfPathRow, first).droplet;
    guint end = first;
    while (end < all->len && g_array_index(all, RfPathRow, end).droplet == droplet) end++;
    return end;
}

static unsigned count_paths(const GArray *all)
{
    unsigned n = 0;
    for (guint first = 0; first < all->len; first = path_end(all, first)) n++;
    return n;
}

/* Lines first, so that no line hides a number. */
static void paths(GString *out, const RfResults *results, double text_px)
{
    const GArray *all = results->paths;
    const unsigned most = CLAMP(POINTS_IN_ALL / MAX(1, count_paths(all)), LEAST_POINTS, MOST_POINTS);
    for (guint first = 0, end; first < all->len; first = end) {
        end = path_end(all, first);
        line(out, results, &g_array_index(all, RfPathRow, first), end - first, most);
    }
    for (guint first = 0; first < all->len; first = path_end(all, first))
        label(out, results, &g_array_index(all, RfPathRow, first), text_px);
}

static void place(GString *out, double width, double height)
{
    g_string_append(out, " x=\"-0.5\" y=\"-0.5\"");
    attribute(out, "width", width);
    attribute(out, "height", height);
}

static void background(GString *out, const RfResults *results, double width)
{
    g_string_append(out, "<rect fill=\"#0d1112\"");
    place(out, width, results->height);
    g_string_append(out, "/>\n");
    if (!results->view_png) return;
    size_t length;
    const guchar *bytes = g_bytes_get_data(results->view_png, &length);
    g_autofree char *text = g_base64_encode(bytes, length);
    g_string_append(out, "<image preserveAspectRatio=\"none\"");
    place(out, width, results->height);
    g_string_append_printf(out, " href=\"data:image/png;base64,%s\"/>\n", text);
}

void rf_report_view(GString *out, const RfResults *results)
{
    if (results->width <= 0 || results->height <= 0) return;
    const double width = results->width * results->pixel_aspect,
                 text_px = results->height / (count_paths(results->paths) > MANY ? 56.0 : 32.0);
    rf_report_text_open(out, "view", "The view, and the paths in it");
    g_string_append(out, "<figure><svg class=\"view\" role=\"img\" aria-label=\"The recording’s fixed "
                         "background with the path of every "
                         "droplet drawn over it\" viewBox=\"-0.5 -0.5 ");
    rf_text_number_append_fixed(out, width, 2);
    g_string_append_printf(out, " %d\"", results->height);
    attribute(out, "font-size", text_px);
    g_string_append(out, ">\n");
    background(out, results, width);
    paths(out, results, text_px);
    g_string_append(out, "</svg><figcaption class=\"caption\">A dot and the droplet’s number stand where its "
                         "path begins. Broken lines: "
                         "droplets set aside. Choose a droplet here or in any table, and it is marked "
                         "everywhere.");
    if (results->preview)
        g_string_append(out, " <button type=\"button\" class=\"look\">Watch the footage</button>");
    g_string_append(out, "</figcaption></figure>\n");
    rf_report_text_close(out);
}
