#include <math.h>

#include "cli/figure_palette.h"
#include "cli/report_parts.h"
#include "cli/text_number.h"

/* A path of two hours has a quarter of a million points; what a page can show is this many per droplet. */
enum { MOST_POINTS = 1500 };

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

static void path(GString *out, const RfResults *results, const RfPathRow *rows, guint n, double text_px)
{
    const unsigned droplet = rows->droplet, hue = (droplet - 1) % RF_FIGURE_HUES + 1;
    double apart = 1;
    while (thin(rows, n, results->pixel_aspect, apart, NULL) > MOST_POINTS) apart *= 1.5;
    g_autoptr(GString) points = g_string_new(NULL);
    thin(rows, n, results->pixel_aspect, apart, points);
    const bool is_good = is_accepted(results, droplet);
    g_string_append_printf(out, "<g class=\"mark%s\" data-droplet=\"%u\"><title>droplet %u, %s</title>",
                           is_good ? "" : " aside", droplet, droplet, is_good ? "accepted" : "set aside");
    g_string_append_printf(
        out, "<polyline class=\"hit\" points=\"%s\"/><polyline class=\"line hue-%u\" points=\"%s\"/>",
        points->str, hue, points->str);
    g_string_append_printf(out, "<circle class=\"ink-%u\" r=\"%.1f\" cx=\"", hue, text_px / 4);
    rf_text_number_append_fixed(out, rows->x_px * results->pixel_aspect, 1);
    g_string_append(out, "\" cy=\"");
    rf_text_number_append_fixed(out, rows->y_px, 1);
    g_string_append_printf(out, "\"/><text class=\"ink-%u\" x=\"", hue);
    rf_text_number_append_fixed(out, rows->x_px * results->pixel_aspect + text_px * 0.5, 1);
    g_string_append(out, "\" y=\"");
    rf_text_number_append_fixed(out, rows->y_px - text_px * 0.3, 1);
    g_string_append_printf(out, "\">%u</text></g>\n", droplet);
}

static void paths(GString *out, const RfResults *results, double text_px)
{
    const GArray *all = results->paths;
    for (guint first = 0, next; first < all->len; first = next) {
        const RfPathRow *rows = &g_array_index(all, RfPathRow, first);
        for (next = first; next < all->len && g_array_index(all, RfPathRow, next).droplet == rows->droplet;)
            next++;
        path(out, results, rows, next - first, text_px);
    }
}

static void background(GString *out, const RfResults *results, double width)
{
    g_string_append_printf(out,
                           "<rect x=\"-0.5\" y=\"-0.5\" width=\"%.2f\" height=\"%d\" fill=\"#0d1112\"/>\n",
                           width, results->height);
    if (!results->view_png) return;
    size_t length;
    const guchar *bytes = g_bytes_get_data(results->view_png, &length);
    g_autofree char *text = g_base64_encode(bytes, length);
    g_string_append_printf(
        out,
        "<image x=\"-0.5\" y=\"-0.5\" width=\"%.2f\" height=\"%d\" preserveAspectRatio=\"none\" "
        "href=\"data:image/png;base64,%s\"/>\n",
        width, results->height, text);
}

void rf_report_view(GString *out, const RfResults *results)
{
    if (results->width <= 0 || results->height <= 0) return;
    const double width = results->width * results->pixel_aspect, text_px = results->height / 32.0;
    rf_report_text_open(out, "view", "The view, and the paths in it");
    g_string_append_printf(
        out,
        "<figure><svg class=\"view\" role=\"img\" aria-label=\"The recording’s fixed background with the "
        "path of "
        "every droplet drawn over it\" viewBox=\"-0.5 -0.5 %.2f %d\" font-size=\"%.1f\">\n",
        width, results->height, text_px);
    background(out, results, width);
    paths(out, results, text_px);
    g_string_append(out, "</svg><figcaption class=\"caption\">A dot and the droplet’s number stand where its "
                         "path begins. Broken lines: "
                         "droplets set aside. Choose a droplet here or in any table, and it is marked "
                         "everywhere.</figcaption></figure>\n");
    rf_report_text_close(out);
}
