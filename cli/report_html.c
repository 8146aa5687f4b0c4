#include "cli/report_html.h"

#include "cli/report_parts.h"
#include "cli/version.h"

static const char *const STYLE[] = {
#include "cli/report_style.inc"
#include "cli/report_review_style.inc"
};

static const char *const SCRIPT[] = {
#include "cli/report_player.inc"
#include "cli/report_script.inc"
#include "cli/report_review_script.inc"
};

static char *joined(const char *const *lines, size_t n)
{
    GString *text = g_string_new(NULL);
    for (size_t i = 0; i < n; i++) g_string_append(text, lines[i]);
    return g_string_free(text, FALSE);
}

/* The browser runs the one script with this digest, and nothing that a label might bring. */
static char *script_digest(const char *script)
{
    guint8 digest[32];
    gsize length = sizeof digest;
    g_autoptr(GChecksum) sum = g_checksum_new(G_CHECKSUM_SHA256);
    g_checksum_update(sum, (const guchar *)script, -1);
    g_checksum_get_digest(sum, digest, &length);
    return g_base64_encode(digest, length);
}

static void head(GString *out, const RfResults *results, const char *script)
{
    g_autofree char *style = joined(STYLE, G_N_ELEMENTS(STYLE));
    g_autofree char *digest = script_digest(script);
    g_string_append_printf(out,
                           "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
                           "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n"
                           "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; "
                           "img-src data:; media-src blob:; "
                           "style-src 'unsafe-inline'; script-src 'sha256-%s'\">\n<title>",
                           digest);
    rf_report_text(out, results->sheet_path            ? results->sheet_path
                        : results->recordings->len > 0 ? "pool of recordings"
                                                       : "report");
    g_string_append_printf(out, " · risefall</title>\n<style>\n%s</style>\n</head>\n", style);
}

static void banner(GString *out, const RfResults *results)
{
    g_string_append(out, "<body>\n<a class=\"skip\" href=\"#verdict\">To the result</a>\n<header><p><span "
                         "class=\"name\">risefall</span> "
                         "charges of droplets");
    if (results->sheet_path) {
        g_string_append(out, " · ");
        rf_report_text(out, results->sheet_path);
    }
    g_string_append(out, "</p><p>");
    rf_report_text(out, results->recording_summary);
    g_string_append(out, "</p></header>\n<main>\n");
}

static void contents(GString *out, const RfResults *results, const RfFigureSet *figures)
{
    const bool is_pool = results->recordings->len > 0;
    const struct {
        const char *id, *name;
        bool is_there;
    } parts[] = {
        {"view", "View", results->width > 0 && results->height > 0},
        {"recordings", "Recordings", is_pool},
        {"residues", "Charges", rf_figure_find(figures, "residues") != NULL},
        {"charges", "Charges", rf_figure_find(figures, "charges") != NULL},
        {"velocities", "Velocities", rf_figure_find(figures, "velocities") != NULL},
        {"droplets", "Droplets", !is_pool},
        {"aside", "Set aside", !is_pool},
        {"review", results->without ? "Overruled" : "Overrule", !is_pool},
        {"events", "Switches and steps", !is_pool},
        {"unit", "Unit", true},
        {"radius", "Radius twice", rf_figure_find(figures, "radius") != NULL},
        {"budget", "Uncertainty", results->budget->len > 0},
        {"audit", "Hand timings", results->audit->len > 0},
        {"health", "The recording", results->fitness != NULL},
        {"sources", "Inputs", true},
        {"cautions", "Cautions", true},
    };
    g_string_append(out, "<nav aria-label=\"Parts of this report\"><ul>");
    for (size_t i = 0; i < G_N_ELEMENTS(parts); i++)
        if (parts[i].is_there)
            g_string_append_printf(out, "<li><a href=\"#%s\">%s</a></li>", parts[i].id, parts[i].name);
    g_string_append(out, "</ul></nav>\n");
}

static void figure_section(GString *out, const RfFigureSet *figures, const char *name, const char *heading,
                           const char *caption)
{
    if (!rf_figure_find(figures, name)) return;
    rf_report_text_open(out, name, heading);
    rf_report_text_figure(out, figures, name, caption);
    rf_report_text_close(out);
}

static void charges_section(GString *out, const RfFigureSet *figures)
{
    if (!rf_figure_find(figures, "charges")) return;
    rf_report_text_open(out, "charges", "Charges against whole multiples");
    rf_report_text_figure(out, figures, "charges", "Filled circles: accepted. Open squares: set aside.");
    rf_report_text_figure(out, figures, "multiples",
                          "The same charges, closer: how far each lies from the nearest whole multiple. Bars "
                          "are one standard uncertainty, "
                          "the common part included.");
    rf_report_text_close(out);
}

static void unit_section(GString *out, const RfResults *results, const RfFigureSet *figures)
{
    rf_report_text_open(out, "unit",
                        results->unit.resolved ? "The unit of charge" : "Why there is no unit of charge");
    g_string_append(out, "<p>");
    if (results->unit.resolved) {
        g_string_append(out, "Found: ");
        rf_report_text_charge(out, results->unit.unit_C);
        g_string_append(out, ", of which the droplets’ own part is ");
        rf_report_text_percent(out, results->unit.u_random_C / results->unit.unit_C.value);
        g_string_append(out, ". ");
    }
    rf_report_text_sentence(out, results->unit.reason);
    g_string_append(out, "</p>\n");
    rf_report_text_figure(out, figures, "unit",
                          "Every half, third and so on of a unit explains the charges as well as the unit "
                          "does: the largest unit that the "
                          "charges support is the one taken.");
    rf_report_text_close(out);
}

static void foot(GString *out, const RfResults *results, const char *script)
{
    g_string_append(
        out,
        "</main>\n<footer>Written by risefall " RF_VERSION
        ". The tables behind this page are the CSV and JSON files "
        "beside it; the figures, with their data and scripts, are in <code>figures/</code>.</footer>\n"
        "<div id=\"chosen\" class=\"is-empty\"><span role=\"status\"></span><button type=\"button\">Show "
        "all</button></div>\n");
    rf_report_preview(out, results);
    g_string_append_printf(out, "<script>%s</script>\n</body>\n</html>\n", script);
}

GString *rf_report_html_new(const RfResults *results, const RfFigureSet *figures)
{
    g_autofree char *script = joined(SCRIPT, G_N_ELEMENTS(SCRIPT));
    GString *out = g_string_sized_new(1 << 18);
    head(out, results, script);
    banner(out, results);
    rf_report_first_screen(out, results);
    contents(out, results, figures);
    rf_report_view(out, results);
    charges_section(out, figures);
    figure_section(out, figures, "velocities", "Velocities in time",
                   "One bar per stretch in one field state; broken upright lines are field switches, open "
                   "triangles charge steps.");
    rf_report_droplets(out, results);
    rf_report_set_aside(out, results);
    rf_report_review(out, results);
    rf_report_events(out, results);
    unit_section(out, results, figures);
    figure_section(out, figures, "radius", "The radius, seen twice",
                   "Once in the speed of the fall, once in the spread of the path. Points far from the line "
                   "deserve a second look.");
    rf_report_budget(out, results, figures);
    rf_report_audit(out, results);
    rf_report_health(out, results);
    rf_report_sources(out, results);
    foot(out, results, script);
    return out;
}

GString *rf_report_html_pool_new(const RfResults *results, const RfFigureSet *figures)
{
    g_autofree char *script = joined(SCRIPT, G_N_ELEMENTS(SCRIPT));
    GString *out = g_string_sized_new(1 << 17);
    head(out, results, script);
    banner(out, results);
    rf_report_first_screen(out, results);
    contents(out, results, figures);
    rf_report_recordings(out, results, figures);
    figure_section(out, figures, "residues", "Charges against whole multiples",
                   "Every accepted charge: how far it lies from the nearest whole multiple of the pooled "
                   "unit. Bars are the "
                   "droplet’s own standard uncertainty.");
    unit_section(out, results, figures);
    rf_report_budget(out, results, figures);
    rf_report_pool_sources(out, results);
    foot(out, results, script);
    return out;
}

GString *rf_report_html_audit_new(const RfResults *results)
{
    g_autofree char *script = joined(SCRIPT, G_N_ELEMENTS(SCRIPT));
    GString *out = g_string_sized_new(1 << 16);
    head(out, results, script);
    banner(out, results);
    rf_report_audit(out, results);
    foot(out, results, script);
    return out;
}

GString *rf_report_html_bench_new(const GPtrArray *charts, const RfFigureSet *figures)
{
    g_autofree char *script = joined(SCRIPT, G_N_ELEMENTS(SCRIPT));
    g_autoptr(RfResults) nobody = rf_results_new(); /* no one recording is behind this page */
    nobody->recording_summary = g_strdup("a bench over time");
    GString *out = g_string_sized_new(1 << 16);
    head(out, nobody, script);
    banner(out, nobody);
    rf_report_bench(out, charts, figures);
    foot(out, nobody, script);
    return out;
}
