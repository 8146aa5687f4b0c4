#include "cli/write_json.h"

#include "cli/fitness_text.h"
#include "cli/json_text.h"
#include "cli/review.h"
#include "cli/tally.h"
#include "cli/version.h"

static char *finish(JsonBuilder *json)
{
    json_builder_end_object(json);
    return rf_json_text_finish(json);
}

char *rf_write_json_scale(const RfResults *results)
{
    const RfScaleRow *scale = &results->scale;
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    rf_json_text_number_if(json, "px_per_mm_x", scale->found, scale->px_per_mm_x);
    rf_json_text_number_if(json, "px_per_mm_y", scale->found, scale->px_per_mm_y);
    rf_json_text_number_if(json, "u_px_per_mm_x", scale->found, scale->u_px_per_mm_x);
    rf_json_text_number_if(json, "u_px_per_mm_y", scale->found, scale->u_px_per_mm_y);
    rf_json_text_number_if(json, "rotation_deg", scale->found, scale->rotation_deg);
    rf_json_text_whole(json, "lines_found", scale->lines_found);
    rf_json_text_number_if(json, "residual_px", scale->found, scale->residual_px);
    rf_json_text_words(json, "source", scale->source);
    rf_json_text_number_if(json, "u_relative_along_gravity", scale->u_relative_along_gravity > 0,
                           scale->u_relative_along_gravity);
    rf_json_text_number_if(json, "line_offset_mm", scale->has_lines, scale->line_offset_mm);
    rf_json_text_number_if(json, "line_step_mm", scale->has_lines, scale->line_step_mm);
    rf_json_text_number_if(json, "line_slope", scale->has_lines, scale->line_slope);
    return finish(json);
}

static void unit(JsonBuilder *json, const RfUnitResult *found)
{
    rf_json_text_number_if(json, "unit_charge_C", found->resolved, found->unit_C.value);
    rf_json_text_number_if(json, "u_unit_charge_C", found->resolved, found->unit_C.sigma);
    rf_json_text_truth(json, "unit_resolved", found->resolved);
    rf_json_text_words(json, "unit_reason", found->reason);
    rf_json_text_number_if(json, "u_random_unit_charge_C", found->resolved, found->u_random_C);
    rf_json_text_number(json, "unit_chance", found->chance);
}

static void recording(JsonBuilder *json, const RfResults *results)
{
    json_builder_set_member_name(json, "recording");
    json_builder_begin_object(json);
    rf_json_text_words(json, "summary", results->recording_summary);
    rf_json_text_whole(json, "width_px", results->width);
    rf_json_text_whole(json, "height_px", results->height);
    rf_json_text_number(json, "pixel_aspect", results->pixel_aspect);
    rf_json_text_whole(json, "frames", results->frames);
    rf_json_text_number(json, "duration_s", results->duration_s);
    rf_json_text_number(json, "gravity_axis_deg", results->gravity_axis_deg);
    json_builder_end_object(json);
}

static void inputs(JsonBuilder *json, const GArray *files)
{
    json_builder_set_member_name(json, "inputs");
    json_builder_begin_array(json);
    for (guint i = 0; i < files->len; i++) {
        const RfInputFile *file = &g_array_index(files, RfInputFile, i);
        json_builder_begin_object(json);
        rf_json_text_words(json, "role", file->role);
        rf_json_text_words(json, "path", file->path);
        rf_json_text_words(json, "sha256", file->sha256);
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
        rf_json_text_words(json, "group", row->group);
        rf_json_text_words(json, "key", row->key);
        rf_json_text_words(json, "value", row->value);
        rf_json_text_truth(json, "default", row->is_default);
        rf_json_text_words(json, "remark", row->remark);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void warnings(JsonBuilder *json, const GPtrArray *list)
{
    json_builder_set_member_name(json, "warnings");
    json_builder_begin_array(json);
    for (guint i = 0; i < list->len; i++) rf_json_text_words(json, NULL, list->pdata[i]);
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
    rf_json_text_words(json, "verdict", rf_fitness_verdict_to_string(rf_fitness_overall(lines)));
    rf_fitness_text_findings(json, lines);
    json_builder_end_object(json);
}

static void effects(JsonBuilder *json, const GArray *rows)
{
    json_builder_set_member_name(json, "effects");
    json_builder_begin_array(json);
    for (guint i = 0; i < rows->len; i++) {
        const RfEffectRow *row = &g_array_index(rows, RfEffectRow, i);
        json_builder_begin_object(json);
        rf_json_text_words(json, "effect", row->effect);
        rf_json_text_words(json, "size", row->size);
        rf_json_text_words(json, "done", row->done);
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
        rf_json_text_words(json, "quantity", row->quantity);
        rf_json_text_words(json, "unit", row->unit);
        rf_json_text_number(json, "certified", row->certified.value);
        rf_json_text_number(json, "u_certified", row->certified.sigma);
        rf_json_text_number(json, "found", row->found.value);
        rf_json_text_number(json, "u_found", row->found.sigma);
        rf_json_text_number(json, "en_number", row->en_number);
        rf_json_text_whole(json, "droplets", row->droplets);
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
        rf_json_text_words(json, "input", row->input);
        rf_json_text_words(json, "line", rf_charge_line_to_string(row->line));
        rf_json_text_number(json, "value", row->value.value);
        rf_json_text_number(json, "u", row->value.sigma);
        rf_json_text_words(json, "unit", row->unit);
        rf_json_text_words(json, "shared", row->shared);
        rf_json_text_truth(json, "law", row->is_law);
        json_builder_end_object(json);
    }
    json_builder_end_array(json);
}

static void droplet_if(JsonBuilder *json, const char *key, unsigned droplet)
{
    if (droplet) {
        rf_json_text_whole(json, key, droplet);
    } else {
        json_builder_set_member_name(json, key);
        json_builder_add_null_value(json);
    }
}

static void review_entry(JsonBuilder *json, const RfReviewRow *row)
{
    const bool is_join = row->action == RF_REVIEW_JOIN;
    json_builder_begin_object(json);
    rf_json_text_whole(json, "line", row->line);
    rf_json_text_words(json, "action", rf_review_action_to_string(row->action));
    rf_json_text_whole(json, "droplet", row->place.droplet);
    rf_json_text_number(json, "time_s", row->place.time_s);
    rf_json_text_number(json, "x_px", row->place.x_px);
    rf_json_text_number(json, "y_px", row->place.y_px);
    rf_json_text_number_if(json, "cut_s", row->action == RF_REVIEW_CUT, row->cut_s);
    droplet_if(json, "other_droplet", is_join ? row->other.droplet : 0);
    rf_json_text_words(json, "reason", row->reason);
    rf_json_text_words(json, "name", row->name);
    rf_json_text_words(json, "date", row->date);
    rf_json_text_words(json, "outcome", rf_review_outcome_to_string(row->outcome));
    rf_json_text_words(json, "detail", row->detail);
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
    rf_json_text_truth(json, "measured", without->measured);
    rf_json_text_words(json, "verdict", without->verdict);
    unit(json, &without->unit);
    rf_json_text_whole(json, "droplets_accepted", tally.droplets_accepted);
    rf_json_text_whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    rf_json_text_whole(json, "spells_accepted", tally.spells_accepted);
    rf_json_text_whole(json, "spells_set_aside", tally.spells - tally.spells_accepted);
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
    rf_json_text_words(json, "program", "risefall");
    rf_json_text_words(json, "program_version", RF_VERSION);
    rf_json_text_truth(json, "measured", results->measured);
    rf_json_text_words(json, "verdict", results->verdict);
    unit(json, &results->unit);
    rf_json_text_whole(json, "droplets_accepted", tally.droplets_accepted);
    rf_json_text_whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    rf_json_text_whole(json, "spells_accepted", tally.spells_accepted);
    rf_json_text_whole(json, "spells_set_aside", tally.spells - tally.spells_accepted);
    rf_json_text_whole(json, "switches", results->switches->len);
    rf_json_text_whole(json, "steps", results->steps->len);
    rf_json_text_number_if(json, "log_offset_s", results->has_log_clock, results->log_offset_s.value);
    rf_json_text_number_if(json, "u_log_offset_s", results->has_log_clock, results->log_offset_s.sigma);
    rf_json_text_number_if(json, "log_drift", results->has_log_clock, results->log_drift.value);
    warnings(json, results->warnings);
    certificate(json, results->certificate);
    health(json, results->fitness);
    effects(json, results->effects);
    rf_json_text_words(json, "sheet", results->sheet_path);
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
        rf_json_text_words(json, "recording", row->name);
        rf_json_text_words(json, "state", rf_tally_recording_to_string(row->state));
        rf_json_text_words(json, "reason", row->reason);
        rf_json_text_whole(json, "droplets_accepted", row->droplets_accepted);
        rf_json_text_number_if(json, "unit_charge_C", is_pooled, row->unit_C.value);
        rf_json_text_number_if(json, "u_unit_charge_C", is_pooled, row->unit_C.sigma);
        rf_json_text_number_if(json, "weight", is_pooled, row->weight);
        rf_json_text_number_if(json, "deviate", has_others, row->deviate);
        rf_json_text_number_if(json, "unit_charge_without_C", has_others, row->without_C.value);
        rf_json_text_number_if(json, "u_unit_charge_without_C", has_others, row->without_C.sigma);
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
        rf_json_text_words(json, "input", row->input);
        rf_json_text_words(json, "shared", row->name);
        rf_json_text_whole(json, "recordings", row->recordings);
        rf_json_text_number(json, "unit_relative_u", row->unit_relative_u);
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
    rf_json_text_number_if(json, "chi_squared", is_tested, found->chi_squared);
    rf_json_text_whole(json, "degrees_of_freedom", found->used > 0 ? found->used - 1 : 0);
    rf_json_text_number_if(json, "chi_squared_p", is_tested, found->p);
    rf_json_text_words(json, "most_off", most_off);
    rf_json_text_number_if(json, "most_off_p", is_tested, found->most_off_p);
}

char *rf_write_json_pool(const RfResults *results)
{
    const RfTally tally = rf_tally_droplets(results);
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    rf_json_text_words(json, "program", "risefall");
    rf_json_text_words(json, "program_version", RF_VERSION);
    rf_json_text_truth(json, "measured", results->measured);
    rf_json_text_words(json, "verdict", results->verdict);
    unit(json, &results->unit);
    rf_json_text_whole(json, "droplets_accepted", tally.droplets_accepted);
    rf_json_text_whole(json, "droplets_set_aside", tally.droplets - tally.droplets_accepted);
    rf_json_text_whole(json, "recordings_pooled", rf_tally_recordings(results, RF_RECORDING_POOLED));
    rf_json_text_whole(json, "recordings_failed", rf_tally_recordings(results, RF_RECORDING_FAILED));
    agreement(json, results);
    warnings(json, results->warnings);
    recordings(json, results->recordings);
    measurements(json, results->measurements);
    inputs(json, results->inputs);
    return finish(json);
}
