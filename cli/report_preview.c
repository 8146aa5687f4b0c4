#include <math.h>

#include "cli/report_parts.h"
#include "cli/tally.h"
#include "cli/text_number.h"

/* ---- moments, as buttons where the tables name them ---- */

void rf_report_moment_button(GString *out, const RfResults *results, RfMomentKind kind, unsigned number)
{
    static const char *const spoken[RF_MOMENTS] = {"the switch", "the step", "the start", "the stop"};
    if (!results->preview) return;
    const GArray *moments = results->preview->moments;
    for (guint i = 0; i < moments->len; i++) {
        const RfMoment *moment = &g_array_index(moments, RfMoment, i);
        if (moment->kind != kind || moment->number != number || !moment->is_filmed) continue;
        g_string_append_printf(
            out,
            " <button type=\"button\" class=\"look\" data-moment=\"%u\" aria-label=\"Frames around %s %u\">"
            "%s</button>",
            i, spoken[kind], number,
            kind == RF_MOMENT_TIMED_STOP    ? "stop"
            : kind == RF_MOMENT_TIMED_START ? "start"
                                            : "frames");
    }
}

void rf_report_moment_time_cell(GString *out, const RfResults *results, RfMomentKind kind,
                                unsigned number_of_it, RfValue time_s)
{
    g_autofree char *text = rf_text_number_concise(time_s);
    g_string_append_printf(out, "<td class=\"number\">%s", text);
    rf_report_moment_button(out, results, kind, number_of_it);
    g_string_append(out, "</td>");
}

/* ---- what the script needs to know ---- */

static void number(GString *out, double value, double per_unit)
{
    g_string_append_printf(out, "%ld", lround(value * per_unit));
}

static void frame_data(GString *out, const RfPreview *preview)
{
    static const char *const keys[] = {"ms", "frame", "time_0.1ms"};
    for (int k = 0; k < 3; k++) {
        g_string_append_printf(out, "\"%s\":[", keys[k]);
        for (guint i = 0; i < preview->frames->len; i++) {
            const RfPreviewFrame *frame = &g_array_index(preview->frames, RfPreviewFrame, i);
            if (i) g_string_append_c(out, ',');
            if (k == 0) g_string_append_printf(out, "%u", frame->film_ms);
            if (k == 1) g_string_append_printf(out, "%" G_GINT64_FORMAT, frame->frame);
            if (k == 2) number(out, frame->time_s, 1e4);
        }
        g_string_append(out, "],\n");
    }
}

static void moment_data(GString *out, const GArray *moments)
{
    static const char *const kinds[RF_MOMENTS] = {"switch", "step", "start", "stop"};
    g_string_append(out, "\"moments\":[");
    for (guint i = 0; i < moments->len; i++) {
        const RfMoment *moment = &g_array_index(moments, RfMoment, i);
        g_string_append_printf(out,
                               "%s{\"kind\":\"%s\",\"number\":%u,\"droplet\":%u,\"filmed\":%s,\"first\":%u,"
                               "\"at\":%u,\"last\":%u}",
                               i ? "," : "", kinds[moment->kind], moment->number, moment->droplet,
                               moment->is_filmed ? "true" : "false", moment->first, moment->at, moment->last);
    }
    g_string_append(out, "],\n");
}

static void field_data(GString *out, const RfResults *results)
{
    const GArray *switches = results->switches;
    g_string_append(out, "\"field\":[");
    for (guint i = 0; i < switches->len; i++) {
        const RfSwitchRow *row = &g_array_index(switches, RfSwitchRow, i);
        if (i == 0) g_string_append_printf(out, "[0,\"%s\"]", rf_tally_field_to_string(row->from));
        g_string_append(out, ",[");
        number(out, row->time_s.value, 1e4);
        g_string_append_printf(out, ",\"%s\"]", rf_tally_field_to_string(row->to));
    }
    g_string_append(out, "],\n");
}

/* Where the droplet is in each frame of the film: runs of frames side by side, "[first, x, y, x, y, ...]" in tenths of a
 * pixel of the view. Interlaced footage: in the field that is filmed. */
static void track(GString *out, const RfResults *results, guint first, guint end)
{
    const GArray *frames = results->preview->frames;
    bool is_in_run = false, is_any = false;
    guint row = first;
    for (guint i = 0; i < frames->len; i++) {
        const int64_t frame = g_array_index(frames, RfPreviewFrame, i).frame;
        while (row < end && g_array_index(results->paths, RfPathRow, row).frame < frame) row++;
        const RfPathRow *found = row < end ? &g_array_index(results->paths, RfPathRow, row) : NULL;
        const bool is_there =
            found && found->frame == frame && isfinite(found->x_px) && isfinite(found->y_px);
        if (is_in_run && !is_there) g_string_append_c(out, ']');
        if (is_there && !is_in_run) g_string_append_printf(out, "%s[%u", is_any ? "," : "", i);
        is_in_run = is_there;
        is_any |= is_there;
        if (!is_there) continue;
        g_string_append_c(out, ',');
        number(out, found->x_px * results->pixel_aspect, 10);
        g_string_append_c(out, ',');
        number(out, found->y_px, 10);
    }
    if (is_in_run) g_string_append_c(out, ']');
}

static void track_data(GString *out, const RfResults *results)
{
    const GArray *rows = results->paths;
    g_string_append(out, "\"droplets\":{");
    for (guint first = 0, end; first < rows->len; first = end) {
        const unsigned droplet = g_array_index(rows, RfPathRow, first).droplet;
        for (end = first; end < rows->len && g_array_index(rows, RfPathRow, end).droplet == droplet;) end++;
        g_string_append_printf(out, "%s\n\"%u\":[", first ? "," : "", droplet);
        track(out, results, first, end);
        g_string_append_c(out, ']');
    }
    g_string_append(out, "}");
}

/* Only numbers and words of this program: no text from outside comes near. */
static void data(GString *out, const RfResults *results)
{
    const RfPreview *preview = results->preview;
    g_string_append(out, "<script type=\"application/json\" id=\"film-data\">{\n");
    frame_data(out, preview);
    moment_data(out, preview->moments);
    field_data(out, results);
    track_data(out, results);
    g_string_append(out, "}</script>\n<script type=\"text/plain\" id=\"film\">");
    gsize length;
    const guchar *bytes = g_bytes_get_data(preview->film, &length);
    g_autofree char *text = g_base64_encode(bytes, length);
    g_string_append(out, text);
    g_string_append(out, "</script>\n");
}

/* ---- the player ---- */

void rf_report_preview(GString *out, const RfResults *results)
{
    if (!results->preview) return;
    g_string_append_printf(out,
                           "<section id=\"player\" aria-label=\"Footage\" hidden>\n"
                           "<div class=\"stage\"><video muted playsinline width=\"%d\" height=\"%d\" "
                           "aria-label=\"Footage of the recording\"></video>"
                           "<svg aria-hidden=\"true\" viewBox=\"-0.5 -0.5 ",
                           results->preview->width, results->preview->height);
    rf_text_number_append_fixed(out, results->width * results->pixel_aspect, 2);
    g_string_append_printf(out,
                           " %d\"><g class=\"paths\"></g><circle class=\"ring\"/><text></text></svg>"
                           "<canvas class=\"close-up\" width=\"160\" height=\"160\" role=\"img\" "
                           "aria-label=\"Close-up of the droplet\"></canvas></div>\n",
                           results->height);
    g_string_append(out,
                    "<p class=\"when\"><strong class=\"what\"></strong> <span class=\"where\"></span></p>\n"
                    "<label class=\"seek\"><span class=\"unseen\">Frame</span><input type=\"range\" "
                    "min=\"0\" max=\"0\" value=\"0\" step=\"1\"></label>\n"
                    "<div class=\"controls\">"
                    "<button type=\"button\" class=\"back\" aria-label=\"Previous frame\">◂ frame</button>"
                    "<button type=\"button\" class=\"play\">Play</button>"
                    "<button type=\"button\" class=\"on\" aria-label=\"Next frame\">frame ▸</button>"
                    "<label><span class=\"unseen\">What to show</span><select></select></label>"
                    "<button type=\"button\" class=\"size\" aria-pressed=\"false\">Larger</button>"
                    "<button type=\"button\" class=\"close\">Close</button></div>\n"
                    "<p class=\"hint\">← and → step by one frame, the space bar plays.</p>\n</section>\n");
    data(out, results);
}
