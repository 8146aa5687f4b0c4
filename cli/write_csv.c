#include "cli/write_csv.h"

#include <math.h>
#include <string.h>

#include "cli/csv_text.h"
#include "cli/tally.h"
#include "cli/text_number.h"

/* Digits behind the point. Places to 1e-4 px, a thousandth of the best localisation; millimetres to match at any
 * usual magnification; charges as six digits behind the point, a ten-thousandth of e at 100 e. */
enum {
    TIME = 6,
    PLACE_PX = 4,
    PLACE_MM = 7,
    SIGMA_MM = 8,
    SPEED = 6,
    RADIUS = 5,
    VOLTS = 3,
    RATIO = 3,
    CHANCE = 6,
    EXPONENT = 6
};

static void fixed(GString *out, double value, int decimals)
{
    rf_text_number_append_fixed(out, value, decimals);
    g_string_append_c(out, ',');
}

static void fixed_if(GString *out, bool present, double value, int decimals)
{
    if (present) rf_text_number_append_fixed(out, value, decimals);
    g_string_append_c(out, ',');
}

static void exponent(GString *out, double value)
{
    rf_text_number_append_exponent(out, value, EXPONENT);
    g_string_append_c(out, ',');
}

static void exponent_if(GString *out, bool present, double value)
{
    if (present) rf_text_number_append_exponent(out, value, EXPONENT);
    g_string_append_c(out, ',');
}

static void whole(GString *out, int64_t value)
{
    char text[24];
    size_t at = sizeof text;
    uint64_t rest = value < 0 ? -(uint64_t)value : (uint64_t)value;
    text[--at] = ',';
    do {
        text[--at] = (char)('0' + rest % 10);
        rest /= 10;
    } while (rest);
    if (value < 0) text[--at] = '-';
    g_string_append_len(out, text + at, (gssize)(sizeof text - at));
}

/* Every cell ends in a comma; the last one of a row becomes the end of the line. */
static void end_row(GString *out)
{
    out->str[out->len - 1] = '\n';
}

static GString *table(const char *header, size_t rows, size_t row_bytes)
{
    GString *out = g_string_sized_new(strlen(header) + rows * row_bytes + 1);
    g_string_append(out, header);
    return out;
}

static void path_row(GString *out, const RfPathRow *row)
{
    whole(out, row->droplet);
    whole(out, row->frame);
    fixed(out, row->time_s, TIME);
    fixed(out, row->x_px, PLACE_PX);
    fixed(out, row->y_px, PLACE_PX);
    fixed(out, sqrt((row->u_x_px * row->u_x_px + row->u_y_px * row->u_y_px) / 2), PLACE_PX);
    fixed(out, row->x_mm, PLACE_MM);
    fixed(out, row->y_mm, PLACE_MM);
    whole(out, row->seen);
    whole(out, row->field);
    fixed(out, row->u_x_px, PLACE_PX);
    fixed(out, row->u_y_px, PLACE_PX);
    fixed(out, row->smooth_x_px, PLACE_PX);
    fixed(out, row->smooth_y_px, PLACE_PX);
    fixed(out, row->u_smooth_x_px, PLACE_PX);
    fixed(out, row->u_smooth_y_px, PLACE_PX);
    fixed(out, row->snr, RATIO);
    fixed(out, row->u_x_mm, SIGMA_MM);
    fixed(out, row->u_y_mm, SIGMA_MM);
    end_row(out);
}

static void settle(double *value, int decimals)
{
    *value = rf_text_number_settle(*value, decimals);
}

static void settle_row(RfPathRow *row)
{
    settle(&row->time_s, TIME);
    settle(&row->x_px, PLACE_PX);
    settle(&row->y_px, PLACE_PX);
    settle(&row->u_x_px, PLACE_PX);
    settle(&row->u_y_px, PLACE_PX);
    settle(&row->x_mm, PLACE_MM);
    settle(&row->y_mm, PLACE_MM);
    settle(&row->u_x_mm, SIGMA_MM);
    settle(&row->u_y_mm, SIGMA_MM);
    settle(&row->smooth_x_px, PLACE_PX);
    settle(&row->smooth_y_px, PLACE_PX);
    settle(&row->u_smooth_x_px, PLACE_PX);
    settle(&row->u_smooth_y_px, PLACE_PX);
    settle(&row->snr, RATIO);
}

void rf_write_csv_settle_paths(GArray *rows)
{
    for (guint i = 0; i < rows->len; i++) settle_row(&g_array_index(rows, RfPathRow, i));
}

GString *rf_write_csv_paths(const RfResults *results)
{
    GString *out = table("droplet,frame,time_s,x_px,y_px,u_px,x_mm,y_mm,seen,field,u_x_px,u_y_px,"
                         "smooth_x_px,smooth_y_px,u_smooth_x_px,u_smooth_y_px,snr,u_x_mm,u_y_mm\n",
                         results->paths->len, 166);
    for (guint i = 0; i < results->paths->len; i++)
        path_row(out, &g_array_index(results->paths, RfPathRow, i));
    return out;
}

GString *rf_write_csv_segments(const RfResults *results)
{
    GString *out = table("droplet,segment,start_s,end_s,field,voltage_V,fall_mm_s,u_fall_mm_s,drift_mm_s,"
                         "u_drift_mm_s,frames\n",
                         results->segments->len, 96);
    for (guint i = 0; i < results->segments->len; i++) {
        const RfSegmentRow *row = &g_array_index(results->segments, RfSegmentRow, i);
        whole(out, row->droplet);
        whole(out, row->segment);
        fixed(out, row->start_s, TIME);
        fixed(out, row->end_s, TIME);
        rf_csv_text_append(out, rf_tally_field_to_string(row->field));
        fixed(out, row->voltage_V, VOLTS);
        fixed(out, row->fall_mm_s.value, SPEED);
        fixed(out, row->fall_mm_s.sigma, SPEED);
        fixed(out, row->drift_mm_s.value, SPEED);
        fixed(out, row->drift_mm_s.sigma, SPEED);
        whole(out, row->frames);
        end_row(out);
    }
    return out;
}

GString *rf_write_csv_switches(const RfResults *results)
{
    GString *out = table("switch,time_s,u_time_s,from,to,droplets,log_time_s\n", results->switches->len, 48);
    for (guint i = 0; i < results->switches->len; i++) {
        const RfSwitchRow *row = &g_array_index(results->switches, RfSwitchRow, i);
        whole(out, row->number);
        fixed(out, row->time_s.value, TIME);
        fixed(out, row->time_s.sigma, TIME);
        rf_csv_text_append(out, rf_tally_field_to_string(row->from));
        rf_csv_text_append(out, rf_tally_field_to_string(row->to));
        whole(out, row->droplets);
        fixed_if(out, row->has_log_time, row->log_time_s, TIME);
        end_row(out);
    }
    return out;
}

GString *rf_write_csv_steps(const RfResults *results)
{
    GString *out = table("droplet,time_s,u_time_s,charge_before_C,charge_after_C,u_charge_before_C,"
                         "u_charge_after_C,whole_multiples_p\n",
                         results->steps->len, 96);
    for (guint i = 0; i < results->steps->len; i++) {
        const RfStepRow *row = &g_array_index(results->steps, RfStepRow, i);
        whole(out, row->droplet);
        fixed(out, row->time_s.value, TIME);
        fixed(out, row->time_s.sigma, TIME);
        exponent(out, row->before_C.value);
        exponent(out, row->after_C.value);
        exponent(out, row->before_C.sigma);
        exponent(out, row->after_C.sigma);
        fixed_if(out, row->whole_multiples_p >= 0, row->whole_multiples_p, CHANCE);
        end_row(out);
    }
    return out;
}

static void droplet_row(GString *out, const RfDropletRow *row)
{
    whole(out, row->droplet);
    whole(out, row->spell);
    fixed(out, row->start_s, TIME);
    fixed(out, row->end_s, TIME);
    whole(out, row->frames);
    const bool is_fitted = row->radius_um.value > 0;
    fixed_if(out, is_fitted, row->fall_mm_s.value, SPEED);
    fixed_if(out, is_fitted, row->fall_mm_s.sigma, SPEED);
    fixed_if(out, is_fitted, row->radius_um.value, RADIUS);
    fixed_if(out, is_fitted, row->radius_um.sigma, RADIUS);
    exponent_if(out, row->has_charge, row->charge_C.value);
    exponent_if(out, row->has_charge, row->charge_C.sigma);
    exponent_if(out, row->has_charge, row->u_random_C);
    if (row->has_units)
        whole(out, row->units);
    else
        g_string_append_c(out, ',');
    rf_csv_text_append(out, row->accepted ? "accepted" : "set aside");
    rf_csv_text_append(out, row->reason);
    fixed_if(out, row->has_charge, row->units_probability, CHANCE);
    const bool from_fall = row->radius_fall_um.sigma > 0, from_spread = row->radius_spread_um.sigma > 0;
    fixed_if(out, from_fall, row->radius_fall_um.value, RADIUS);
    fixed_if(out, from_fall, row->radius_fall_um.sigma, RADIUS);
    fixed_if(out, from_spread, row->radius_spread_um.value, RADIUS);
    fixed_if(out, from_spread, row->radius_spread_um.sigma, RADIUS);
    fixed_if(out, from_fall && from_spread, row->radius_agreement_p, CHANCE);
    fixed(out, row->median_snr, RATIO);
    rf_csv_text_append(out, !row->is_overruled ? "" : row->accepted ? "restored" : "set aside");
    end_row(out);
}

GString *rf_write_csv_droplets(const RfResults *results)
{
    GString *out = table(
        "droplet,spell,start_s,end_s,frames,fall_mm_s,u_fall_mm_s,radius_um,u_radius_um,charge_C,"
        "u_charge_C,u_random_C,units,verdict,reason,units_probability,radius_fall_um,"
        "u_radius_fall_um,radius_spread_um,u_radius_spread_um,radius_agreement_p,median_snr,overruled\n",
        results->droplets->len, 240);
    for (guint i = 0; i < results->droplets->len; i++)
        droplet_row(out, &g_array_index(results->droplets, RfDropletRow, i));
    return out;
}

GString *rf_write_csv_droplets_without_review(const RfResults *results)
{
    return rf_write_csv_droplets(results->without);
}

GString *rf_write_csv_audit(const RfResults *results)
{
    GString *out = table("entry,droplet,hand_time_s,tracked_time_s,difference_s,en_number,finding,label,"
                         "u_hand_time_s,u_tracked_time_s,match_confidence,start_s,evidence\n",
                         results->audit->len, 160);
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = &g_array_index(results->audit, RfAuditRow, i);
        whole(out, row->entry);
        if (row->droplet)
            whole(out, row->droplet);
        else
            g_string_append_c(out, ',');
        fixed(out, row->hand_time_s.value, TIME);
        fixed_if(out, row->has_tracked, row->tracked_time_s.value, TIME);
        fixed_if(out, row->has_tracked, row->difference_s, TIME);
        fixed_if(out, row->has_tracked, row->en_number, RATIO);
        rf_csv_text_append(out, row->finding);
        rf_csv_text_append(out, row->label);
        fixed(out, row->hand_time_s.sigma, TIME);
        fixed_if(out, row->has_tracked, row->tracked_time_s.sigma, TIME);
        fixed(out, row->match_confidence, CHANCE);
        fixed_if(out, row->has_tracked, row->start_s, TIME);
        rf_csv_text_append(out, row->evidence);
        end_row(out);
    }
    return out;
}

/* One input after the other under each spell; those without effect are left out. */
static void influence_rows(GString *out, const RfInfluenceRow *row, const GArray *common)
{
    for (guint k = 0; k < common->len; k++) {
        const RfCommonRow *input = &g_array_index(common, RfCommonRow, k);
        const double charge_C = sqrt(input->line_share) * row->charge_C[input->line];
        if (fabs(charge_C) == 0) continue;
        whole(out, row->droplet);
        whole(out, row->spell);
        rf_csv_text_append(out, input->input);
        exponent(out, charge_C);
        end_row(out);
    }
}

GString *rf_write_csv_influences(const RfResults *results)
{
    GString *out =
        table("droplet,spell,input,charge_C\n", results->influences->len * results->common->len, 40);
    for (guint i = 0; i < results->influences->len; i++)
        influence_rows(out, &g_array_index(results->influences, RfInfluenceRow, i), results->common);
    return out;
}

GString *rf_write_csv_budget(const RfResults *results)
{
    GString *out = table("input,stated,relative_u,charge_relative_u,charge_relative_u_mc,common\n",
                         results->budget->len, 80);
    for (guint i = 0; i < results->budget->len; i++) {
        const RfBudgetRow *row = &g_array_index(results->budget, RfBudgetRow, i);
        rf_csv_text_append(out, row->input);
        rf_csv_text_append(out, row->stated);
        exponent(out, row->relative_u);
        exponent(out, row->charge_relative_u);
        exponent_if(out, row->charge_relative_u_mc >= 0, row->charge_relative_u_mc);
        whole(out, row->is_common);
        end_row(out);
    }
    return out;
}

static void value_if(GString *out, bool is_there, RfValue value)
{
    exponent_if(out, is_there, value.value);
    exponent_if(out, is_there, value.sigma);
}

static void recording_row(GString *out, const RfRecordingRow *row)
{
    const bool is_pooled = row->state == RF_RECORDING_POOLED, has_others = is_pooled && row->offset.sigma > 0;
    rf_csv_text_append(out, row->name);
    rf_csv_text_append(out, rf_tally_recording_to_string(row->state));
    whole(out, row->droplets_accepted);
    whole(out, row->droplets_set_aside);
    rf_csv_text_append(out, !is_pooled ? "" : row->stands_alone ? "alone" : "together");
    value_if(out, is_pooled, row->unit_C);
    exponent_if(out, is_pooled, row->u_random_C);
    fixed_if(out, is_pooled, row->weight, CHANCE);
    value_if(out, has_others, row->offset);
    fixed_if(out, has_others, row->deviate, RATIO);
    exponent_if(out, has_others, row->deviate_p);
    value_if(out, has_others, row->without_C);
    rf_csv_text_append(out, row->reason);
    rf_csv_text_append(out, row->sheet);
    end_row(out);
}

GString *rf_write_csv_recordings(const RfResults *results)
{
    GString *out =
        table("recording,state,droplets_accepted,droplets_set_aside,integers,unit_C,u_unit_C,u_random_unit_C,"
              "weight,offset_relative,u_offset_relative,deviate,deviate_p,unit_without_C,u_unit_without_C,"
              "reason,sheet\n",
              results->recordings->len, 200);
    for (guint i = 0; i < results->recordings->len; i++)
        recording_row(out, &g_array_index(results->recordings, RfRecordingRow, i));
    return out;
}

GString *rf_write_csv_measurements(const RfResults *results)
{
    GString *out = table("input,shared,recordings,unit_relative_u\n", results->measurements->len, 60);
    for (guint i = 0; i < results->measurements->len; i++) {
        const RfMeasurementRow *row = &g_array_index(results->measurements, RfMeasurementRow, i);
        rf_csv_text_append(out, row->input);
        rf_csv_text_append(out, row->name);
        whole(out, row->recordings);
        exponent(out, row->unit_relative_u);
        end_row(out);
    }
    return out;
}

static void pooled_droplet_row(GString *out, const RfDropletRow *row, const char *recording)
{
    rf_csv_text_append(out, recording);
    whole(out, row->droplet_there);
    whole(out, row->spell);
    fixed(out, row->start_s, TIME);
    fixed(out, row->end_s, TIME);
    const bool is_fitted = row->radius_um.value > 0;
    fixed_if(out, is_fitted, row->radius_um.value, RADIUS);
    fixed_if(out, is_fitted, row->radius_um.sigma, RADIUS);
    value_if(out, row->has_charge, row->charge_C);
    exponent_if(out, row->has_charge, row->u_random_C);
    rf_csv_text_append(out, row->accepted ? "accepted" : "set aside");
    rf_csv_text_append(out, row->reason);
    end_row(out);
}

GString *rf_write_csv_pooled_droplets(const RfResults *results)
{
    GString *out =
        table("recording,droplet,spell,start_s,end_s,radius_um,u_radius_um,charge_C,u_charge_C,u_random_C,"
              "verdict,reason\n",
              results->droplets->len, 140);
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        pooled_droplet_row(out, row, g_array_index(results->recordings, RfRecordingRow, row->recording).name);
    }
    return out;
}
