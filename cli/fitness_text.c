#include "cli/fitness_text.h"

#include <math.h>
#include <string.h>

#include "cli/version.h"

/* ---- for people ---- */

/* Words of a paragraph below one another, within the terminal's width. */
static void append_wrapped(GString *out, const char *text, int indent, int width)
{
    g_auto(GStrv) words = g_strsplit(text, " ", -1);
    int column = width;
    for (char **word = words; *word; word++) {
        const int length = (int)g_utf8_strlen(*word, -1);
        if (column + 1 + length > width) {
            g_string_append_printf(out, "%s%*s", column == width && word == words ? "" : "\n",
                                   word == words ? 0 : indent, "");
            column = indent;
        } else {
            g_string_append_c(out, ' ');
            column++;
        }
        g_string_append(out, *word);
        column += length;
    }
    g_string_append_c(out, '\n');
}

static void append_line(GString *out, const RfFitnessLine *line)
{
    static const char *const mark[] = {"ok  ", "care", "BAD "};
    enum { INDENT = 19, WIDTH = 80 };
    g_string_append_printf(out, "  %s %-12s", mark[line->verdict], line->key);
    append_wrapped(out, line->figure, INDENT, WIDTH);
    if (!line->advice) return;
    g_string_append_printf(out, "%*s", INDENT, "");
    append_wrapped(out, line->advice, INDENT, WIDTH);
}

char *rf_fitness_text(const char *path, const RfFitnessFigures *figures, const GArray *lines)
{
    GString *out = g_string_new(NULL);
    g_string_append_printf(out, "%s: %s\n", path, rf_fitness_verdict_to_string(rf_fitness_overall(lines)));
    if (figures->part_frames < figures->frames)
        g_string_append_printf(out,
                               "pictures looked at: %" G_GINT64_FORMAT " of %" G_GINT64_FORMAT
                               ", from %.1f s to %.1f s (--whole: all of them)\n",
                               figures->part_frames, figures->frames, figures->part_start_s,
                               figures->part_stop_s);
    for (guint i = 0; i < lines->len; i++) append_line(out, &g_array_index(lines, RfFitnessLine, i));
    return g_string_free(out, FALSE);
}

/* ---- for programs ---- */

static void number(JsonBuilder *json, const char *key, double value)
{
    json_builder_set_member_name(json, key);
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_ascii_formatd(text, sizeof text, "%.6g", value); /* no more digits than the figure has */
    if (isfinite(value))
        json_builder_add_double_value(json, g_ascii_strtod(text, NULL));
    else
        json_builder_add_null_value(json);
}

static void number_if(JsonBuilder *json, const char *key, bool is_known, double value)
{
    number(json, key, is_known ? value : (double)NAN);
}

static void add_file(JsonBuilder *json, const RfFitnessFigures *f)
{
    rf_json_text_words(json, "codec", f->codec);
    rf_json_text_words(json, "container", f->container);
    rf_json_text_whole(json, "width_px", f->width_px);
    rf_json_text_whole(json, "height_px", f->height_px);
    number(json, "pixel_aspect", f->pixel_aspect);
    rf_json_text_whole(json, "bit_depth", f->bit_depth);
    rf_json_text_truth(json, "is_limited_range", f->is_limited_range);
    rf_json_text_truth(json, "is_interlaced", f->is_interlaced);
    rf_json_text_truth(json, "is_lossless", f->is_lossless);
    number_if(json, "bits_per_pixel", f->bits_per_pixel > 0, f->bits_per_pixel);
    number(json, "frame_rate_hz", f->frame_rate_hz);
    rf_json_text_truth(json, "is_rate_constant", f->is_rate_constant);
    number(json, "tick_s", f->tick_s);
    number(json, "duration_s", f->duration_s);
    rf_json_text_whole(json, "frames", f->frames);
    rf_json_text_whole(json, "times_missing", f->times_missing);
    rf_json_text_whole(json, "times_backwards", f->times_backwards);
    rf_json_text_whole(json, "gaps", f->gaps);
}

static void add_part(JsonBuilder *json, const RfFitnessFigures *f)
{
    number(json, "part_start_s", f->part_start_s);
    number(json, "part_stop_s", f->part_stop_s);
    rf_json_text_whole(json, "part_frames", f->part_frames);
    rf_json_text_whole(json, "part_exposures", f->part_exposures);
    number_if(json, "interval_shortest_s", f->part_exposures > 1, f->interval_shortest_s);
    number_if(json, "interval_longest_s", f->part_exposures > 1, f->interval_longest_s);
    rf_json_text_whole(json, "frames_damaged", f->frames_damaged);
    rf_json_text_whole(json, "frames_lost", f->frames_lost);
    rf_json_text_whole(json, "exposures_repeated", f->exposures_repeated);
    number(json, "mean_level_grey", f->mean_level);
    number(json, "noise_sd_grey", f->noise_sd);
    number(json, "noise_correlation", f->noise_correlation);
    number(json, "black_clipped_share", f->black_clipped_share);
    number(json, "flicker_relative_sd", f->flicker_relative_sd);
    number(json, "movement_rms_px", f->movement_rms_px);
    number(json, "movement_longest_px", f->movement_longest_px);
    number(json, "rotation_rms_deg", f->rotation_rms_deg);
    number(json, "unposed_share", f->unposed_share);
}

static void add_droplets(JsonBuilder *json, const RfFitnessFigures *f)
{
    const bool is_any = f->droplets > 0;
    rf_json_text_whole(json, "droplets", f->droplets);
    number(json, "droplets_per_exposure", f->droplets_per_exposure);
    number_if(json, "snr_median", is_any, f->snr_median);
    number_if(json, "snr_lower_quartile", is_any, f->snr_lower_quartile);
    number_if(json, "spot_width_px", is_any, f->spot_width_px);
    number_if(json, "saturated_share", is_any, f->saturated_share);
    number_if(json, "followed_mean_s", is_any, f->followed_mean_s);
    number_if(json, "excess_scatter", f->excess_scatter.sigma > 0, f->excess_scatter.value);
    number_if(json, "u_excess_scatter", f->excess_scatter.sigma > 0, f->excess_scatter.sigma);
    number_if(json, "error_correlation", f->error_correlation.sigma > 0, f->error_correlation.value);
    number_if(json, "u_error_correlation", f->error_correlation.sigma > 0, f->error_correlation.sigma);
    number_if(json, "standstill_share", is_any, f->standstill_share);
    number_if(json, "keyframe_jump_px", f->keyframe_jump_px.sigma > 0, f->keyframe_jump_px.value);
    number_if(json, "u_keyframe_jump_px", f->keyframe_jump_px.sigma > 0, f->keyframe_jump_px.sigma);
    number_if(json, "combing_frames", f->combing.sigma > 0, f->combing.value);
    number_if(json, "u_combing_frames", f->combing.sigma > 0, f->combing.sigma);
}

void rf_fitness_text_findings(JsonBuilder *json, const GArray *lines)
{
    json_builder_set_member_name(json, "findings");
    json_builder_begin_object(json);
    for (guint i = 0; i < lines->len; i++) {
        const RfFitnessLine *line = &g_array_index(lines, RfFitnessLine, i);
        json_builder_set_member_name(json, line->key);
        json_builder_begin_object(json);
        rf_json_text_words(json, "verdict", rf_fitness_verdict_to_string(line->verdict));
        rf_json_text_words(json, "figure", line->figure);
        rf_json_text_words(json, "advice", line->advice);
        json_builder_end_object(json);
    }
    json_builder_end_object(json);
}

/* json-glib writes 17 digits; %.6g above has rounded, so that 15 say the same. */
static gboolean shorten(const GMatchInfo *match, GString *out, gpointer unused)
{
    (void)unused;
    g_autofree char *token = g_match_info_fetch(match, 0);
    if (*token == '"' || !strpbrk(token, ".eE")) {
        g_string_append(out, token);
        return FALSE;
    }
    char text[G_ASCII_DTOSTR_BUF_SIZE];
    g_string_append(out, g_ascii_formatd(text, sizeof text, "%.6g", g_ascii_strtod(token, NULL)));
    if (!strpbrk(text, ".e")) g_string_append(out, ".0"); /* stays a number with a fraction */
    return FALSE;
}

char *rf_fitness_json(const char *path, const RfFitnessFigures *figures, const GArray *lines)
{
    g_autoptr(JsonBuilder) json = json_builder_new_immutable();
    json_builder_begin_object(json);
    rf_json_text_words(json, "program", "risefall " RF_VERSION);
    rf_json_text_words(json, "recording", path);
    rf_json_text_words(json, "verdict", rf_fitness_verdict_to_string(rf_fitness_overall(lines)));
    rf_fitness_text_findings(json, lines);
    json_builder_set_member_name(json, "figures");
    json_builder_begin_object(json);
    add_file(json, figures);
    add_part(json, figures);
    add_droplets(json, figures);
    json_builder_end_object(json);
    json_builder_end_object(json);
    g_autoptr(JsonNode) root = json_builder_get_root(json);
    g_autofree char *text = json_to_string(root, TRUE);
    g_autoptr(GRegex) tokens =
        g_regex_new("\"(?:[^\"\\\\]|\\\\.)*+\"|-?\\d+(?:\\.\\d+)?(?:[eE][-+]?\\d+)?", 0, 0, NULL);
    g_autofree char *shorter = g_regex_replace_eval(tokens, text, -1, 0, 0, shorten, NULL, NULL);
    return g_strconcat(shorter, "\n", NULL);
}
