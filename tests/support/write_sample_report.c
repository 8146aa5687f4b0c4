/* Writes the invented results as a whole result folder: for tests that need a real page, and for looking at it.
 *   write_sample_report FOLDER */
#include <glib/gstdio.h>
#include <stdio.h>
#include <string.h>

#include "cli/write_results.h"
#include "tests/support/sample_results.h"
#include "tracker/video_file.h"

/* The step of droplet 4, at 41.0 s, and every frame around it; else two frames a second. */
enum { FRAMES = 1800, STEP_FRAME = 1230, AROUND = 8, SPARSE = 15, WIDTH = 64, HEIGHT = 48 };

static void shoot(RfPreview *preview, RfVideoWriter *writer, int64_t frame, GError **error)
{
    uint8_t grey[WIDTH * HEIGHT];
    memset(grey, 60, sizeof grey);
    grey[frame % sizeof grey] = 220;
    const RfPreviewFrame shot = {frame, (double)frame / 30, (unsigned)(frame * 100 / 3)};
    g_array_append_val(preview->frames, shot);
    rf_video_file_write(writer, grey, WIDTH, shot.film_ms / 1000.0, error);
}

static void shoot_all(RfPreview *preview, RfVideoWriter *writer, GError **error)
{
    RfMoment step = {RF_MOMENT_STEP, 1, 4, STEP_FRAME / 30.0, true, 0, 0, 0};
    for (int64_t frame = 0; frame < FRAMES && !*error; frame++) {
        const bool is_near = ABS(frame - STEP_FRAME) <= AROUND;
        if (!is_near && frame % SPARSE != 0) continue;
        if (frame == STEP_FRAME - AROUND) step.first = preview->frames->len;
        if (frame == STEP_FRAME) step.at = preview->frames->len;
        if (frame == STEP_FRAME + AROUND) step.last = preview->frames->len;
        shoot(preview, writer, frame, error);
    }
    g_array_append_val(preview->moments, step);
}

static RfPreview *film(const char *scratch, GError **error)
{
    const RfVideoWriterOptions options = {.codec = RF_VIDEO_CODEC_VP9,
                                          .width = WIDTH,
                                          .height = HEIGHT,
                                          .ticks_per_s = 1000,
                                          .keyframe_every = 40};
    g_autoptr(RfVideoWriter) writer = rf_video_file_create(scratch, &options, error);
    if (!writer) return NULL;
    g_autoptr(RfPreview) preview = rf_preview_new();
    preview->width = WIDTH, preview->height = HEIGHT;
    shoot_all(preview, writer, error);
    char *bytes;
    gsize length;
    if (*error || !rf_video_file_finish(writer, error) ||
        !g_file_get_contents(scratch, &bytes, &length, error))
        return NULL;
    g_remove(scratch);
    preview->film = g_bytes_new_take(bytes, length);
    return g_steal_pointer(&preview);
}

int main(int argc, char **argv)
{
    if (argc != 2) {
        fputs("usage: write_sample_report FOLDER\n", stderr);
        return 2;
    }
    g_autoptr(RfResults) results = sample_results_new();
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(argv[1], &error);
    g_autofree char *scratch =
        folder ? g_build_filename(rf_result_folder_path(folder), "film.webm", NULL) : NULL;
    results->preview = scratch ? film(scratch, &error) : NULL;
    if (results->preview && rf_write_results(results, folder, RF_WRITE_RESULTS_ALL, &error) &&
        rf_result_folder_commit(folder, &error))
        return 0;
    fprintf(stderr, "%s\n", error->message);
    return 1;
}
