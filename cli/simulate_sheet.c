#include "cli/simulate_sheet.h"

const char *rf_simulate_sheet_video_name(const RfScene *scene)
{
    if (scene->codec == RF_SCENE_CODEC_MPEG2) return "recording.mpg";
    /* Matroska counts milliseconds, too coarse where intervals vary and matter */
    return scene->codec == RF_SCENE_CODEC_H264 && scene->rate_jitter > 0 ? "recording.mp4" : "recording.mkv";
}

/* As the scene has it, or as the default has it. */
static void copy(GString *out, const RfScene *scene, const char *group, const char *key)
{
    g_autofree char *text = rf_simulate_scene_text(scene, group, key);
    g_string_append_printf(out, "%s=%s\n", key, text);
}

static void append_recording(GString *out, const RfScene *scene, const char *video)
{
    g_string_append_printf(out, "[recording]\nvideo=%s\n", video);
    if (scene->entries > 0) g_string_append(out, "timings=timings.csv\n");
    copy(out, scene, "camera", "gravity");
}

static void append_reticle(GString *out, const RfScene *scene)
{
    if (scene->lines == RF_SCENE_LINES_NONE) return;
    g_string_append(out, "[reticle]\n");
    if (scene->has_still) g_string_append(out, "image=reticle.png\n");
    copy(out, scene, "reticle", "spacing");
    copy(out, scene, "reticle", "lines");
}

/* Word for word. */
static void append_group(GString *out, const RfScene *scene, const char *group)
{
    g_auto(GStrv) keys = g_key_file_get_keys(scene->source, group, NULL, NULL);
    if (!keys) return;
    g_string_append_printf(out, "[%s]\n", group);
    for (int i = 0; keys[i]; i++) {
        g_autofree char *text = g_key_file_get_value(scene->source, group, keys[i], NULL);
        g_string_append_printf(out, "%s=%s\n", keys[i], text);
    }
}

char *rf_simulate_sheet(const RfScene *scene, const char *video)
{
    GString *out =
        g_string_new("# Run sheet of a synthetic recording: inputs as stated, not as they truly were.\n");
    append_recording(out, scene, video);
    append_reticle(out, scene);
    g_string_append(out, "[cell]\n");
    copy(out, scene, "cell", "plate_gap");
    copy(out, scene, "cell", "gravity");
    g_string_append(out, "[oil]\n");
    copy(out, scene, "oil", "density");
    g_string_append(out, "[air]\n");
    copy(out, scene, "air", "temperature");
    copy(out, scene, "air", "pressure");
    copy(out, scene, "air", "humidity");
    g_string_append(out, "[supply]\n");
    copy(out, scene, "supply", "voltage");
    copy(out, scene, "supply", "states");
    if (scene->log_interval_s > 0) g_string_append(out, "log=volts.csv\n");
    append_group(out, scene, "certificate");
    append_group(out, scene, "notes");
    return g_string_free(out, FALSE);
}
