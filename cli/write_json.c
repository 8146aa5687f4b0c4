#include "cli/write_json.h"

#include <json-glib/json-glib.h>
#include <math.h>
#include <string.h>

#include "cli/review.h"
#include "cli/tally.h"
#include "cli/version.h"

/* JSON has no word for what is not a number: such a value is null. */
static void number(JsonBuilder *json, const char *key, double value)
{
    json_builder_set_member_name(json, key);
    if (isfinite(value))
        json_builder_add_double_value(json, value);
    else
        json_builder_add_null_value(json);
}

static void number_if(JsonBuilder *json, const char *key, bool present, double value)
{
    number(json, key, present ? value : (double)NAN);
}

static void whole(JsonBuilder *json, const char *key, int64_t value)
{
    json_builder_set_member_name(json, key);
    json_builder_add_int_value(json, value);
}

static void truth(JsonBuilder *json, const char *key, bool value)
{
    json_builder_set_member_name(json, key);
    json_builder_add_boolean_value(json, value);
}

/* JSON is UTF-8: a path or note in another encoding is carried over with the odd bytes marked. */
static void words(JsonBuilder *json, const char *key, const char *text)
{
    if (key) json_builder_set_member_name(json, key);
    if (!text) {
        json_builder_add_null_value(json);
        return;
    }
    g_autofree char *valid = g_utf8_make_valid(text, -1);
    json_builder_add_string_value(json, valid);
}

/* The generator writes 17 digits, 0.20999999999999999 for 0.21: the shortest text that reads back as the same number
 * serves people and machines alike. Strings are matched too, so that nothing inside them changes. */
static gboolean shorten(const GMatchInfo *match, GString *out, void *unused)
{
    (void)unused;
    g_autofree char *token = g_match_info_fetch(match, 0);
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    const double value = g_ascii_strtod(token, NULL);
    g_ascii_formatd(text, sizeof text, "%.15g", value);
    const bool is_same =
        *token != '"' && g_ascii_strtod(text, NULL) >= value && g_ascii_strtod(text, NULL) <= value;
    g_string_append(out, is_same ? text : token);
    if (is_same && !strpbrk(text, ".e")) g_string_append(out, ".0"); /* stays a number with a fraction */
    return FALSE;
}

static char *finish(JsonBuilder *json)
{
    json_builder_end_object(json);
    g_autoptr(JsonNode) root = json_builder_get_root(json);
    g_autofree char *text = json_to_string(root, TRUE);
    g_autoptr(GRegex) numbers = g_regex_new(
        "\"(?:[^\"\\\\]|\\\\.)*+\"|-?\\d+\\.\\d+(?:[eE][-+]?\\d+)?|-?\\d+[eE][-+]?\\d+", 0, 0, NULL);
    g_autofree char *short_text = g_regex_replace_eval(numbers, text, -1, 0, 0, shorten, NULL, NULL);
    return g_strconcat(short_text, "\n", NULL);
}

char *rf_write_json_scale(const RfResults *results)
{
    const RfScaleRow *scale = &results->scale;
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    number_if(json, "px_per_mm_x", scale->found, scale->px_per_mm_x);
    number_if(json, "px_per_mm_y", scale->found, scale->px_per_mm_y);
    number_if(json, "u_px_per_mm_x", scale->found, scale->u_px_per_mm_x);
    number_if(json, "u_px_per_mm_y", scale->found, scale->u_px_per_mm_y);
    number_if(json, "rotation_deg", scale->found, scale->rotation_deg);
    whole(json, "lines_found", scale->lines_found);
    number_if(json, "residual_px", scale->found, scale->residual_px);
    words(json, "source", scale->source);
    number_if(json, "u_relative_along_gravity", scale->u_relative_along_gravity > 0,
              scale->u_relative_along_gravity);
    number_if(json, "line_offset_mm", scale->has_lines, scale->line_offset_mm);
    number_if(json, "line_step_mm", scale->has_lines, scale->line_step_mm);
    number_if(json, "line_slope", scale->has_lines, scale->line_slope);
    return finish(json);
}

static void unit(JsonBuilder *json, const RfUnitResult *found)
{
    number_if(json, "unit_charge_C", found->resolved, found->unit_C.value);
    number_if(json, "u_unit_charge_C", found->resolved, found->unit_C.sigma);
    truth(json, "unit_resolved", found->resolved);
    words(json, "unit_reason", found->reason);
    number_if(json, "u_random_unit_charge_C", found->resolved, found->u_random_C);
    number(json, "unit_chance", found->chance);
}

static void recording(JsonBuilder *json, const RfResults *results)
{
    json_builder_set_member_name(json, "recording");
    json_builder_begin_object(json);
    words(json, "summary", results->recording_summary);
    whole(json, "width_px", results->width);
    whole(json, "height_px", results->height);
    number(json, "pixel_aspect", results->pixel_aspect);
    whole(json, "frames", results->frames);
    number(json, "duration_s", results->duration_s);
    number(json, "gravity_axis_deg", results->gravity_axis_deg);
    json_builder_end_object(json);
}

static void inputs(JsonBuilder *json, const GArray *files)
{
    json_builder_set_member_name(json, "inputs");
    json_builder_begin_array(json);
    for (guint i = 0; i < files->len; i++) {
        const RfInputFile *file = &g_array_index(files, RfInputFile, i);
        json_builder_begin_object(json);
        words(json, "role", file->role);
        words(json, "path", file->path);
        words(json, "sha256", file->sha256);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void settings(JsonBuilder *json, const char *name, const GArray *rows)
{
    json_builder_set_member_name(json, name);
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfUsedSetting *row = &g_array_index(rows, RfUsedSetting, i);
        json_builder_begin_object(json);
        words(json, "group", row->group);
        words(json, "key", row->key);
        words(json, "value", row->value);
        truth(json, "default", row->is_default);
        words(json, "remark", row->remark);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void warnings(JsonBuilder *json, const GPtrArray *list)
{
    json_builder_set_member_name(json, "warnings");
    json_builder_begin_array(json);
    for (guint i = 0; i < list->len; i++) words(json, NULL, list->pdata[i]);
    json_builder_end_array(json);
}

/* As `check --json` has it, without the figures behind it. */
static void health(JsonBuilder *json, const GArray *lines)
{
    json_builder_set_member_name(json, "health");
    if (!lines) {
        json_builder_add_null_value(json);
        return;
    }
    json_builder_begin_object(json);
    words(json, "verdict", rf_fitness_verdict_to_string(rf_fitness_overall(lines)));
    json_builder_set_member_name(json, "findings");
    json_builder_begin_object(json);
    for (guint i = 0; i < lines->len; i++) {
        const RfFitnessLine *line = &g_array_index(lines, RfFitnessLine, i);
        json_builder_set_member_name(json, line->key);
        json_builder_begin_object(json);
        words(json, "verdict", rf_fitness_verdict_to_string(line->verdict));
        words(json, "figure", line->figure);
        words(json, "advice", line->advice);
        json_builder_end_object(json);
    }
    json_builder_end_object(json);
    json_builder_end_object(json);
}

static void effects(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "effects");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfEffectRow *row = &g_array_index(rows, RfEffectRow, i);
        json_builder_begin_object(json);
        words(json, "effect", row->effect);
        words(json, "size", row->size);
        words(json, "done", row->done);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void certificate(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "certificate");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfCertificateRow *row = &g_array_index(rows, RfCertificateRow, i);
        json_builder_begin_object(json);
        words(json, "quantity", row->quantity);
        words(json, "unit", row->unit);
        number(json, "certified", row->certified.value);
        number(json, "u_certified", row->certified.sigma);
        number(json, "found", row->found.value);
        number(json, "u_found", row->found.sigma);
        number(json, "en_number", row->en_number);
        whole(json, "droplets", row->droplets);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

/* Which measurement each input is: what pooling with other recordings needs. */
static void common_inputs(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "common_inputs");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfCommonRow *row = &g_array_index(rows, RfCommonRow, i);
        json_builder_begin_object(json);
        words(json, "input", row->input);
        words(json, "line", rf_charge_line_to_string(row->line));
        number(json, "value", row->value.value);
        number(json, "u", row->value.sigma);
        words(json, "unit", row->unit);
        words(json, "shared", row->shared);
        truth(json, "law", row->is_law);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void droplet_if(JsonBuilder *json, const char *key, unsigned droplet)
{
    if (droplet) {
        whole(json, key, droplet);
    } else {
        json_builder_set_member_name(json, key);
        json_builder_add_null_value(json);
    }
}

static void review_entry(JsonBuilder *json, const RfReviewRow *row)
{
    const bool is_join = row->action == RF_REVIEW_JOIN;
    json_builder_begin_object(json);
    whole(json, "line", row->line);
    words(json, "action", rf_review_action_to_string(row->action));
    whole(json, "droplet", row->place.droplet);
    number(json, "time_s", row->place.time_s);
    number(json, "x_px", row->place.x_px);
    number(json, "y_px", row->place.y_px);
    number_if(json, "cut_s", row->action == RF_REVIEW_CUT, row->cut_s);
    droplet_if(json, "other_droplet", is_join ? row->other.droplet : 0);
    words(json, "reason", row->reason);
    words(json, "name", row->name);
    words(json, "date", row->date);
    words(json, "outcome", rf_review_outcome_to_string(row->outcome));
    words(json, "detail", row->detail);
    droplet_if(json, "droplet_now", row->now);
    droplet_if(json, "other_droplet_now", row->other_now);
    droplet_if(json, "droplet_without", row->found);
    droplet_if(json, "other_droplet_without", row->other_found);
    json_builder_end_object(json);
}

static void without_review(JsonBuilder *json, const RfResults *without)
{
    const RfTally tally = rf_tally_droplets(without);
    json_builder_set_member_name(json, "without");
    json_builder_begin_object(json);
    truth(json, "measured", without->measured);
    words(json, "verdict", without->verdict);
    unit(json, &without->unit);
    whole(json, "droplets_accepted", tally.droplets_accepted);
    whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    whole(json, "spells_accepted", tally.spells_accepted);
    whole(json, "spells_set_aside", tally.spells - tally.spells_accepted);
    json_builder_end_object(json);
}

static void review(JsonBuilder *json, const RfResults *results)
{
    json_builder_set_member_name(json, "review");
    if (!results->without) {
        json_builder_add_null_value(json);
        return;
    }
    json_builder_begin_object(json);
    json_builder_set_member_name(json, "entries");
    json_builder_begin_array(json);
    for (guint i = 0; i < results->review->len; i++)
        review_entry(json, &g_array_index(results->review, RfReviewRow, i));
    json_builder_end_array(json);
    without_review(json, results->without);
    json_builder_end_object(json);
}

char *rf_write_json_summary(const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    words(json, "program", "risefall");
    words(json, "program_version", RF_VERSION);
    truth(json, "measured", results->measured);
    words(json, "verdict", results->verdict);
    unit(json, &results->unit);
    whole(json, "droplets_accepted", tally.droplets_accepted);
    whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    whole(json, "spells_accepted", tally.spells_accepted);
    whole(json, "spells_set_aside", tally.spells - tally.spells_accepted);
    whole(json, "switches", results->switches->len);
    whole(json, "steps", results->steps->len);
    number_if(json, "log_offset_s", results->has_log_clock, results->log_offset_s.value);
    number_if(json, "u_log_offset_s", results->has_log_clock, results->log_offset_s.sigma);
    number_if(json, "log_drift", results->has_log_clock, results->log_drift.value);
    warnings(json, results->warnings);
    certificate(json, results->certificate);
    health(json, results->fitness);
    effects(json, results->effects);
    words(json, "sheet", results->sheet_path);
    recording(json, results);
    inputs(json, results->inputs);
    settings(json, "settings", results->settings);
    settings(json, "notes", results->notes);
    common_inputs(json, results->common);
    review(json, results);
    return finish(json);
}

/* ---- of a pool ---- */

static void recordings(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "recordings");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfRecordingRow *row = &g_array_index(rows, RfRecordingRow, i);
        const bool is_pooled = row->state == RF_RECORDING_POOLED,
                   has_others = is_pooled && row->offset.sigma > 0;
        json_builder_begin_object(json);
        words(json, "recording", row->name);
        words(json, "state", rf_tally_recording_to_string(row->state));
        words(json, "reason", row->reason);
        whole(json, "droplets_accepted", row->droplets_accepted);
        number_if(json, "unit_charge_C", is_pooled, row->unit_C.value);
        number_if(json, "u_unit_charge_C", is_pooled, row->unit_C.sigma);
        number_if(json, "weight", is_pooled, row->weight);
        number_if(json, "deviate", has_others, row->deviate);
        number_if(json, "unit_charge_without_C", has_others, row->without_C.value);
        number_if(json, "u_unit_charge_without_C", has_others, row->without_C.sigma);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void measurements(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "measurements");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfMeasurementRow *row = &g_array_index(rows, RfMeasurementRow, i);
        json_builder_begin_object(json);
        words(json, "input", row->input);
        words(json, "shared", row->name);
        whole(json, "recordings", row->recordings);
        number(json, "unit_relative_u", row->unit_relative_u);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void agreement(JsonBuilder *json, const RfResults *results)
{
    const RfAgreementOfRecordings *found = &results->agreement;
    const bool is_tested = found->used > 1;
    const char *most_off =
        is_tested ? g_array_index(results->recordings, RfRecordingRow, found->most_off).name : NULL;
    number_if(json, "chi_squared", is_tested, found->chi_squared);
    whole(json, "degrees_of_freedom", found->used > 0 ? found->used - 1 : 0);
    number_if(json, "chi_squared_p", is_tested, found->p);
    words(json, "most_off", most_off);
    number_if(json, "most_off_p", is_tested, found->most_off_p);
}

char *rf_write_json_pool(const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    words(json, "program", "risefall");
    words(json, "program_version", RF_VERSION);
    truth(json, "measured", results->measured);
    words(json, "verdict", results->verdict);
    unit(json, &results->unit);
    whole(json, "droplets_accepted", tally.droplets_accepted);
    whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    whole(json, "recordings_pooled", rf_tally_recordings(results, RF_RECORDING_POOLED));
    whole(json, "recordings_failed", rf_tally_recordings(results, RF_RECORDING_FAILED));
    agreement(json, results);
    warnings(json, results->warnings);
    recordings(json, results->recordings);
    measurements(json, results->measurements);
    inputs(json, results->inputs);
    return finish(json);
}
