#include "cli/report_html.h"

#include <string.h>

#include "tests/support/sample_results.h"

static const char SVG[] =
    "<?xml version=\"1.0\"?>\n<svg \n viewBox=\"0 0 9 9\"\n xmlns=\"http://www.w3.org/2000/svg\"\n>\n"
    "<g id=\"gnuplot_plot_1\" ><title>droplet 3</title><path d='M0,0 L1,1'/></g>\n</svg>\n";

static RfFigureSet *invented_figures(void)
{
    RfFigureSet *set = g_new0(RfFigureSet, 1);
    set->figures = g_ptr_array_new();
    return set;
}

static GString *page_with(const RfResults *results, const char *svg)
{
    const char *const names[] = {"charges", "multiples", "velocities", "unit", "radius", "budget"};
    RfFigure figures[G_N_ELEMENTS(names)];
    g_autoptr(RfFigureSet) set = invented_figures();
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++) {
        figures[i] = (RfFigure){(char *)names[i], (char *)"title", (char *)"alt", (char *)svg};
        g_ptr_array_add(set->figures, &figures[i]);
    }
    return rf_report_html_new(results, set);
}

static void assert_has(const GString *page, const char *text)
{
    if (!strstr(page->str, text)) g_error("the page lacks \"%s\"", text);
}

static void assert_lacks(const GString *page, const char *text)
{
    const char *at = strstr(page->str, text);
    if (at) g_error("the page has \"%s\": %.80s", text, at);
}

static void first_screen_says_it(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) page = page_with(results, SVG);
    assert_has(page, "Six of seven droplets carry whole multiples");
    assert_has(page, "one unit of charge, <span class=\"nowrap\">1.6049(13) × 10<sup>−19</sup> C</span></h1>");
    assert_has(page, "1.6049(13) × 10<sup>−19</sup> C");
    assert_has(page, "6 accepted, <span class=\"nowrap\">1 set aside</span>");
    assert_has(page, "this droplet&apos;s motion");
    g_assert_cmpuint((gsize)(strstr(page->str, "1 thing to know") - page->str), <,
                     (gsize)(strstr(page->str, "id=\"view\"") - page->str));
}

static void unresolved_says_why(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autoptr(GString) page = rf_report_html_new(results, NULL);
    assert_has(page, "No droplet could be followed");
    assert_has(page, "not resolved");
    assert_has(page, "No charges.");
    assert_has(page, "No droplet could be measured");
    assert_lacks(page, "nan");
}

/* Labels, notes and file names come from people and spreadsheets. */
static void text_is_never_markup(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_free(results->verdict);
    results->verdict = g_strdup("</h1><img src=x onerror=alert(1)>");
    g_ptr_array_add(results->warnings, g_strdup("bad byte \xff and <iframe>"));
    g_autoptr(GString) page = page_with(results, SVG);
    assert_lacks(page, "<script>alert");
    assert_lacks(page, "<img");
    assert_lacks(page, "<iframe");
    assert_lacks(page, "<b>bold");
    assert_has(page, "&lt;script&gt;alert(&quot;x&quot;)&lt;/script&gt; &amp; co");
    assert_has(page, "A. Example &lt;b&gt;bold&lt;/b&gt;");
    assert_has(page, "cell &amp; view.mkv");
    g_assert_true(g_utf8_validate(page->str, -1, NULL));
}

static void asks_for_nothing_outside(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    results->view_png = g_bytes_new_static("\x89PNG", 4);
    g_autoptr(GString) page = page_with(results, SVG);
    const char *const outside[] = {"http:", "https:", "//www",   "@import", "url(",
                                   "<link", "<img",   "<iframe", " src="};
    for (size_t i = 0; i < G_N_ELEMENTS(outside); i++) assert_lacks(page, outside[i]);
    assert_has(page, "href=\"data:image/png;base64,iVBORw==\"");
    for (const char *at = page->str; (at = strstr(at, "href=")); at += 5)
        g_assert_true(at[6] == '#' || g_str_has_prefix(at + 6, "data:"));
}

/* Every droplet can be found in the view, in the figures and in the table. */
static void droplets_are_linked(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) page = page_with(results, SVG);
    for (int droplet = 1; droplet <= 7; droplet++) {
        g_autofree char *row =
            g_strdup_printf("<tr id=\"droplet-%d\" data-droplet=\"%d\">", droplet, droplet);
        assert_has(page, row);
        g_autofree char *path = g_strdup_printf("data-droplet=\"%d\"><title>droplet %d, ", droplet, droplet);
        assert_has(page, path);
    }
    assert_has(page, "<g class=\"mark\" data-droplet=\"3\"><title>droplet 3</title>");
}

/* Findings that need a person come before those that don't. */
static void audit_by_weight(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) page = page_with(results, SVG);
    const char *slip = strstr(page->str, "digit slip</span>"), *lost = strstr(page->str, "unmatched</span>"),
               *good = strstr(page->str, "agrees</span>");
    g_assert_true(slip && lost && good);
    g_assert_true(slip < lost && lost < good);
}

static void health_has_figure_and_verdict(void)
{
    g_autoptr(RfResults) results = sample_results_new(), empty = sample_results_empty_new();
    g_autoptr(GString) page = page_with(results, SVG), none = page_with(empty, SVG);
    assert_has(page, "<strong>usable with care</strong>: of 17 matters looked at, 2 call for care.");
    assert_has(page, "<th scope=\"row\">compression</th><td class=\"finding care\">care</td>"
                     "<td>h264, lossy, 0.25 bit per pixel</td><td>Lossy compression can hide");
    assert_has(page, "<th scope=\"row\">noise</th><td class=\"finding good\">fit</td>");
    assert_has(page, "none said; risefall check tests it");
    assert_lacks(none, "id=\"health\"");
}

/* What a person decided stands on the first screen, and with name, date and reason in its own section. */
static void overruled_with_a_trail(void)
{
    g_autoptr(RfResults) results = sample_results_reviewed_new();
    g_autoptr(GString) page = page_with(results, SVG);
    assert_has(page, "<strong>Reviewed by a person.</strong> 2 of 3 decisions changed something");
    assert_has(page, "Without them: unit <span class=\"nowrap\">1.6049(13) ×");
    assert_has(page, "6 droplets accepted, 1 set aside.</p>");
    assert_has(page, "<tr data-droplet=\"2\"><th scope=\"row\">set aside 2</th><td>B. Example</td><td>2026-05-04 10:12 UTC</td>");
    assert_has(page, "<td>not dated</td>");
    assert_has(page, "droplet not found</span>: no droplet was within 3 px");
    assert_has(page, "set aside <small class=\"soft\">by a person</small></td>");
    assert_has(page, "<div class=\"nowrap\">2: -11.2");
    assert_has(page, "<th scope=\"row\">Droplets accepted</th><td>5 of 7</td><td>6 of 7</td>");
    g_assert_cmpuint((gsize)(strstr(page->str, "Reviewed by a person") - page->str), <,
                     (gsize)(strstr(page->str, "id=\"view\"") - page->str));
}

static void reasons_and_names_are_never_markup(void)
{
    g_autoptr(RfResults) results = sample_results_reviewed_new();
    g_autoptr(GString) page = page_with(results, SVG);
    assert_lacks(page, "<img");
    assert_lacks(page, "<script>alert");
    assert_lacks(page, "data-reason=\"\"");
    assert_has(page, "&lt;script&gt;alert(1)&lt;/script&gt;");
    assert_has(page, " data-reason=\"&quot;&gt;&lt;img src=x onerror=alert(1)&gt;\"");
}

/* The next file saved must hold what the one before held, to the last digit of a cut. */
static void form_starts_from_the_review(void)
{
    g_autoptr(RfResults) plain = sample_results_new(), results = sample_results_reviewed_new();
    g_autoptr(GString) page = page_with(results, SVG), first = page_with(plain, SVG);
    assert_has(page, "<li data-action=\"cut\" data-number=\"4\" data-time-s=\"3.25\" data-x-px=\"415.1\" "
                     "data-y-px=\"300.5\" data-cut-s=\"41.033333\"");
    assert_has(page, "data-file=\"by-hand.csv\"");
    assert_has(page, "in place of <code>lab/by-hand.csv</code>");
    assert_has(first, "<ul id=\"review-given\" hidden>\n</ul>");
    assert_has(first, "beside the run sheet <code>run.sheet</code>");
    assert_has(first, "<option value=\"5\" data-number=\"5\"");
    assert_has(first, "Nothing: every verdict in this report is the program’s own.");
}

static bool is_void(const char *name)
{
    const char *const names[] = {"meta", "!DOCTYPE", "br", "hr", "input"};
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++)
        if (strcmp(name, names[i]) == 0) return true;
    return false;
}

/* Each element closes in the order in which it opened; style and script are skipped over. */
static void elements_nest(void)
{
    g_autoptr(RfResults) results = sample_results_reviewed_new();
    g_autoptr(GString) page = page_with(results, SVG);
    g_autoptr(GPtrArray) open = g_ptr_array_new_with_free_func(g_free);
    for (const char *at = page->str; (at = strchr(at, '<'));) {
        const bool is_end = at[1] == '/';
        const char *name_start = at + 1 + is_end, *end = strchr(at, '>');
        g_assert_nonnull(end);
        g_autofree char *name = g_strndup(name_start, strcspn(name_start, " \n>/"));
        if (is_end) {
            g_assert_cmpuint(open->len, >, 0);
            g_assert_cmpstr(open->pdata[open->len - 1], ==, name);
            g_ptr_array_set_size(open, (int)open->len - 1);
        } else if (end[-1] != '/' && !is_void(name)) {
            g_ptr_array_add(open, g_strdup(name));
            if (strcmp(name, "script") == 0 || strcmp(name, "style") == 0) {
                g_autofree char *close = g_strdup_printf("</%s>", name);
                end = strstr(end, close) - 1;
            }
        }
        at = end + 1;
    }
    g_assert_cmpuint(open->len, ==, 0);
}

static void identities_are_unique(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) page = page_with(results, SVG);
    g_autoptr(GHashTable) seen = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    for (const char *at = page->str; (at = strstr(at, " id=\"")); at += 5)
        g_assert_true(g_hash_table_add(seen, g_strndup(at + 5, strcspn(at + 5, "\""))));
    g_assert_cmpuint(g_hash_table_size(seen), >, 15);
}

static void links_lead_somewhere(void)
{
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GString) page = page_with(results, SVG);
    for (const char *at = page->str; (at = strstr(at, "<a ")); at += 3) {
        const char *link = strstr(at, "href=\"#");
        g_assert_nonnull(link);
        g_autofree char *name = g_strndup(link + 7, strcspn(link + 7, "\""));
        g_autofree char *target = g_strdup_printf(" id=\"%s\"", name);
        assert_has(page, target);
    }
}

/* A long path is thinned: the page must open at once. */
static void long_recordings_stay_small(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    results->width = 640, results->height = 480;
    for (int i = 0; i < 400000; i++) {
        const RfPathRow row = {.droplet = 1 + (unsigned)i / 200000,
                               .frame = i,
                               .x_px = (i * 37) % 600,
                               .y_px = (i * 91) % 470,
                               .seen = true};
        g_array_append_val(results->paths, row);
    }
    g_autoptr(GString) page = rf_report_html_new(results, NULL);
    g_assert_cmpuint(page->len, <, 200000);
}

static void cautions_defer(void)
{
    g_autoptr(RfResults) results = sample_results_empty_new();
    g_autoptr(GString) page = rf_report_html_new(results, NULL);
    assert_has(page, "high voltage");
    assert_has(page, "ionising source");
    assert_has(page, "Local rules");
    assert_has(page, "says nothing about whether a set-up is safe");
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/report/review/overruled-with-a-trail", overruled_with_a_trail);
    g_test_add_func("/report_html/health/has-figure-and-verdict", health_has_figure_and_verdict);
    g_test_add_func("/report/review/never-markup", reasons_and_names_are_never_markup);
    g_test_add_func("/report/review/form-starts-from-it", form_starts_from_the_review);
    g_test_add_func("/report_html/first-screen/says-it", first_screen_says_it);
    g_test_add_func("/report_html/first-screen/unresolved-says-why", unresolved_says_why);
    g_test_add_func("/report_html/text/never-markup", text_is_never_markup);
    g_test_add_func("/report_html/requests/none", asks_for_nothing_outside);
    g_test_add_func("/report_html/droplets/are-linked", droplets_are_linked);
    g_test_add_func("/report_html/audit/by-weight", audit_by_weight);
    g_test_add_func("/report_html/markup/elements-nest", elements_nest);
    g_test_add_func("/report_html/markup/identities-are-unique", identities_are_unique);
    g_test_add_func("/report_html/markup/links-lead-somewhere", links_lead_somewhere);
    g_test_add_func("/report_html/view/long-recordings-stay-small", long_recordings_stay_small);
    g_test_add_func("/report_html/cautions/defer", cautions_defer);
    return g_test_run();
}
