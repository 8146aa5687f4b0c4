/* The form in which a person overrules the program. The page's script makes it work and saves what is decided; without
 * scripts it stays hidden. */
#include "cli/report_parts.h"
#include "cli/review.h"
#include "cli/review_place.h"
#include "cli/text_number.h"

static void open_attribute(GString *out, const char *name)
{
    g_string_append_printf(out, " data-%s=\"", name);
}

static void words(GString *out, const char *name, const char *text)
{
    open_attribute(out, name);
    rf_report_text(out, text);
    g_string_append_c(out, '"');
}

/* As many digits as it takes: a cut is on one side of a frame. */
static void number(GString *out, const char *name, double value)
{
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    open_attribute(out, name);
    g_string_append(out, g_ascii_formatd(text, sizeof text, "%.10g", value));
    g_string_append_c(out, '"');
}

static void place(GString *out, const char *prefix, const RfReviewPlace *at)
{
    const struct {
        const char *name;
        double value;
    } numbers[] = {{"number", at->droplet}, {"time-s", at->time_s}, {"x-px", at->x_px}, {"y-px", at->y_px}};
    for (size_t i = 0; i < G_N_ELEMENTS(numbers); i++) {
        g_autofree char *name = g_strconcat(prefix, numbers[i].name, NULL);
        number(out, name, numbers[i].value);
    }
}

/* What the review file holds already: the next one saved must be whole. */
static void given(GString *out, const GArray *review)
{
    g_string_append(out, "<ul id=\"review-given\" hidden>\n");
    for (guint i = 0; i < review->len; i++) {
        const RfReviewRow *entry = &g_array_index(review, RfReviewRow, i);
        g_string_append(out, "<li");
        words(out, "action", rf_review_action_to_string(entry->action));
        place(out, "", &entry->place);
        if (entry->action == RF_REVIEW_CUT) number(out, "cut-s", entry->cut_s);
        if (entry->action == RF_REVIEW_JOIN) place(out, "other-", &entry->other);
        words(out, "reason", entry->reason);
        words(out, "name", entry->name);
        words(out, "date", entry->date);
        g_string_append(out, "></li>\n");
    }
    g_string_append(out, "</ul>\n");
}

typedef struct {
    unsigned spells, accepted, restorable;
} Verdicts;

static Verdicts verdicts_of(const GArray *droplets, unsigned droplet)
{
    Verdicts verdicts = {0};
    for (guint i = 0; i < droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(droplets, RfDropletRow, i);
        if (row->droplet != droplet) continue;
        verdicts.spells++;
        verdicts.accepted += row->accepted;
        verdicts.restorable += !row->accepted && row->has_charge;
    }
    return verdicts;
}

static void option(GString *out, const RfResults *results, const RfReviewSighting *sighting)
{
    const unsigned droplet = sighting->place.droplet;
    const Verdicts verdicts = verdicts_of(results->droplets, droplet);
    g_string_append_printf(out, "<option value=\"%u\"", droplet);
    place(out, "", &sighting->place);
    number(out, "start-s", sighting->start_s);
    number(out, "end-s", sighting->end_s);
    number(out, "accepted", verdicts.accepted);
    number(out, "restorable", verdicts.restorable);
    g_string_append_printf(out, ">%u (%s, ", droplet,
                           verdicts.accepted == 0                ? "set aside"
                           : verdicts.accepted < verdicts.spells ? "accepted in part"
                                                                 : "accepted");
    rf_text_number_append_fixed(out, sighting->start_s, 1);
    g_string_append(out, " to ");
    rf_text_number_append_fixed(out, sighting->end_s, 1);
    g_string_append(out, " s)</option>\n");
}

static void choice_of_droplets(GString *out, const RfResults *results)
{
    g_autoptr(GArray) sightings = rf_review_place_sightings(results->paths);
    g_string_append(out, "<select id=\"review-droplet\" required><option value=\"\">choose</option>\n");
    for (guint i = 0; i < sightings->len; i++)
        option(out, results, &g_array_index(sightings, RfReviewSighting, i));
    g_string_append(out, "</select></p>\n");
}

static void fields(GString *out, const RfResults *results)
{
    g_string_append(out,
                    "<form id=\"review-form\" aria-labelledby=\"overrule-heading\">\n"
                    "<p><label for=\"review-action\">Decision</label><select id=\"review-action\">"
                    "<option value=\"set aside\">set aside</option><option value=\"restore\">restore</option>"
                    "<option value=\"cut\">cut its path in two</option>"
                    "<option value=\"join\">join it with another</option></select></p>\n"
                    "<p><label for=\"review-droplet\">Droplet</label>");
    choice_of_droplets(out, results);
    g_string_append(
        out,
        "<p id=\"review-cut-line\" hidden><label for=\"review-cut\">Cut at <small>s</small></label>"
        "<input id=\"review-cut\" type=\"number\" step=\"any\" min=\"0\" inputmode=\"decimal\" "
        "aria-describedby=\"review-cut-hint\"> <small id=\"review-cut-hint\" class=\"soft\"></small></p>\n"
        "<p id=\"review-other-line\" hidden><label for=\"review-other\">with droplet</label><select "
        "id=\"review-other\"></select></p>\n");
    g_string_append(
        out,
        "<p><label for=\"review-reason\">Reason</label><input id=\"review-reason\" type=\"text\" required "
        "maxlength=\"1000\" autocomplete=\"off\"></p>\n"
        "<p><label for=\"review-name\">Your name</label><input id=\"review-name\" type=\"text\" required "
        "maxlength=\"200\" autocomplete=\"name\"></p>\n"
        "<p><button type=\"submit\">Add to the review</button></p>\n</form>\n");
}

static const char *path_of(const RfResults *results, const char *role)
{
    for (guint i = 0; i < results->inputs->len; i++) {
        const RfInputFile *file = &g_array_index(results->inputs, RfInputFile, i);
        if (g_str_equal(file->role, role)) return file->path;
    }
    return NULL;
}

/* Where the saved file goes, and what to write where. */
static void what_next(GString *out, const RfResults *results, const char *review)
{
    g_string_append(out, "<p id=\"review-next\" class=\"soft\">");
    if (review) {
        g_string_append(out, "Put the saved file in place of <code>");
        rf_report_text(out, review);
        g_string_append(out, "</code>, which the run sheet names already. ");
    } else {
        g_string_append(out, "Put the saved file beside the run sheet <code>");
        rf_report_text(out, results->sheet_path);
        g_string_append(out, "</code> and write under its [recording]: <code>review=review.csv</code>. ");
    }
    g_string_append(
        out,
        "Then run it again; the next report names every decision, and has the numbers without it.</p>\n");
}

void rf_report_review_form(GString *out, const RfResults *results)
{
    if (results->paths->len == 0) return;
    const char *review = path_of(results, "review");
    g_autofree char *recording = rf_review_recording(results),
                    *file = review ? g_path_get_basename(review) : g_strdup("review.csv");
    g_string_append(out, "<div id=\"overrule\" hidden");
    words(out, "recording", recording);
    words(out, "file", file);
    g_string_append(
        out, ">\n<h3 id=\"overrule-heading\">Overrule the program</h3>\n"
             "<p>Choose a droplet, say what is to be done with it and why, and save the decisions as a small "
             "file.</p>\n");
    given(out, results->review);
    fields(out, results);
    g_string_append(out,
                    "<p id=\"review-status\" role=\"status\"></p>\n"
                    "<h4 id=\"review-list-heading\" tabindex=\"-1\">Decisions in the file to be saved</h4>\n"
                    "<ol id=\"review-list\" aria-labelledby=\"review-list-heading\"></ol>\n"
                    "<p><button type=\"button\" id=\"review-save\">Save the review file</button></p>\n");
    what_next(out, results, review);
    g_string_append(out, "</div>\n");
}
