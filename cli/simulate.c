#include "cli/simulate.h"

#include "cli/result_folder.h"
#include "cli/simulate_film.h"
#include "cli/simulate_hand.h"
#include "cli/simulate_sheet.h"
#include "cli/simulate_truth.h"
#include "tracker/video_file.h"

typedef struct { /* everything of one simulation */
    RfScene *scene;
    RfWorld *world;
    RfView view;
    RfReticle *reticle;
    RfRenderer *renderer;
    RfRecord *record;
} Simulation;

static bool open_simulation(Simulation *sim, const char *scene_path, GError **error)
{
    sim->scene = rf_simulate_scene_load(scene_path, error);
    if (!sim->scene) return false;
    sim->world = rf_simulate_world_new(sim->scene);
    sim->view = rf_simulate_view_new(sim->scene, sim->world);
    sim->reticle = rf_simulate_reticle_new(&sim->view, sim->scene->line_width_m, sim->scene->transmission,
                                           sim->scene->has_numerals);
    sim->renderer = rf_simulate_render_new(sim->scene, sim->reticle);
    sim->record = rf_simulate_record_new();
    return true;
}

static void close_simulation(Simulation *sim)
{
    rf_simulate_record_free(sim->record);
    rf_simulate_render_free(sim->renderer);
    rf_simulate_reticle_free(sim->reticle);
    rf_simulate_world_free(sim->world);
    rf_simulate_scene_free(sim->scene);
}

typedef struct {
    RfVideoWriter *writer;
    RfSimulateProgress progress;
    void *user;
    int64_t total;
} Recording;

static bool on_frame(const void *pixels, ptrdiff_t stride_bytes, double time_s, int64_t frame, void *user,
                     GError **error)
{
    Recording *recording = user;
    if (recording->progress && !recording->progress(frame, recording->total, recording->user)) {
        g_set_error(error, G_FILE_ERROR, G_FILE_ERROR_INTR, "stopped at frame %" G_GINT64_FORMAT, frame);
        return false;
    }
    return rf_video_file_write(recording->writer, pixels, stride_bytes, time_s, error);
}

static RfVideoWriterOptions writer_options(const RfScene *scene)
{
    static const RfVideoCodec codecs[] = {RF_VIDEO_CODEC_FFV1, RF_VIDEO_CODEC_H264, RF_VIDEO_CODEC_MJPEG,
                                          RF_VIDEO_CODEC_MPEG2};
    return (RfVideoWriterOptions){
        .codec = codecs[scene->codec],
        .width = scene->width,
        .height = scene->height,
        .bit_depth = scene->bit_depth,
        .is_full_range = true,
        .is_interlaced = scene->is_interlaced,
        .is_top_field_first = scene->is_interlaced,
        .pixel_aspect = scene->pixel_aspect,
        .frame_rate_hz = scene->frame_rate_hz,
        .quality = scene->quality,
        .preset = "veryfast",
    };
}

static bool record_video(Simulation *sim, const char *path, RfSimulateProgress progress, void *user,
                         GError **error)
{
    RfVideoWriterOptions options = writer_options(sim->scene);
    g_autoptr(RfVideoWriter) writer = rf_video_file_create(path, &options, error);
    if (!writer) return false;
    g_autoptr(GArray) times = rf_simulate_film_times(sim->scene);
    Recording recording = {.writer = writer, .progress = progress, .user = user, .total = times->len};
    RfFilm film = {.scene = sim->scene, .world = sim->world, .view = &sim->view, .renderer = sim->renderer};
    return rf_simulate_film_play(&film, sim->record, on_frame, &recording, error) &&
           rf_video_file_finish(writer, error);
}

static bool add_text(RfResultFolder *folder, const char *name, char *text, GError **error)
{
    g_autofree char *owned = text;
    return rf_result_folder_add_text(folder, name, owned, error);
}

static bool add_truth(const Simulation *sim, RfResultFolder *folder, GError **error)
{
    const RfRecord *record = sim->record;
    const RfWorld *world = sim->world;
    return add_text(folder, "truth_paths.csv", rf_simulate_truth_paths(record), error) &&
           add_text(folder, "truth_droplets.csv", rf_simulate_truth_droplets(record, world), error) &&
           add_text(folder, "truth_switches.csv", rf_simulate_truth_switches(record, world, sim->scene),
                    error) &&
           add_text(folder, "truth_steps.csv", rf_simulate_truth_steps(record, world), error) &&
           add_text(folder, "truth_scale.json",
                    rf_simulate_truth_scale(record, world, sim->scene, &sim->view, sim->reticle), error) &&
           add_text(folder, "truth_model.json", rf_simulate_truth_model(record, world), error);
}

/* A still of the reticle: many exposures without droplets, so the noise is gone. */
static bool add_still(const Simulation *sim, RfResultFolder *folder, GError **error)
{
    size_t pixels = (size_t)sim->view.width * (size_t)sim->view.height;
    g_autofree float *levels = g_new(float, pixels);
    g_autofree uint8_t *grey = g_new(uint8_t, pixels);
    const RfPose rest = {0};
    rf_simulate_render_begin(sim->renderer, &rest, 1);
    rf_simulate_render_expected(sim->renderer, levels);
    for (size_t i = 0; i < pixels; i++)
        grey[i] = (uint8_t)CLAMP(levels[i] * 3 + 0.5f, 0, 255); /* the lamp is turned up for it */
    g_autoptr(GBytes) png =
        rf_video_file_encode_png(grey, sim->view.width, sim->view.width, sim->view.height, 1, 8, error);
    if (!png) return false;
    gsize length;
    const void *bytes = g_bytes_get_data(png, &length);
    return rf_result_folder_add(folder, "reticle.png", bytes, length, error);
}

static bool add_hand(const Simulation *sim, RfResultFolder *folder, GError **error)
{
    RfHandRecord hand = rf_simulate_hand_write(sim->record, sim->world, sim->scene, &sim->view);
    bool ok = add_text(folder, "timings.csv", hand.timings, error);
    return add_text(folder, "truth_timings.csv", hand.truth, ok ? error : NULL) && ok;
}

static bool add_all(Simulation *sim, RfResultFolder *folder, const char *video, GError **error)
{
    if (!add_truth(sim, folder, error)) return false;
    if (sim->scene->entries > 0 && !add_hand(sim, folder, error)) return false;
    if (sim->scene->log_interval_s > 0 &&
        !add_text(folder, "volts.csv", rf_simulate_hand_log(sim->record, sim->world, sim->scene), error))
        return false;
    if (sim->scene->has_still && !add_still(sim, folder, error)) return false;
    return add_text(folder, "sheet.ini", rf_simulate_sheet(sim->scene, video), error);
}

static void summarise(const Simulation *sim, const char *out_dir, RfSimulateSummary *summary)
{
    *summary = (RfSimulateSummary){.sheet_path = g_build_filename(out_dir, "sheet.ini", NULL),
                                   .frames = sim->record->frames,
                                   .droplets = (int)sim->record->droplets->len,
                                   .bodies = (int)sim->record->lives->len,
                                   .switches = (int)sim->world->field->len - 1,
                                   .duration_s = sim->record->last_s};
}

static bool simulate(Simulation *sim, const char *scene_path, const char *out_dir,
                     RfSimulateProgress progress, void *user, GError **error)
{
    if (!open_simulation(sim, scene_path, error)) return false;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(out_dir, error);
    if (!folder) return false;
    const char *video = rf_simulate_sheet_video_name(sim->scene);
    g_autofree char *path = g_build_filename(rf_result_folder_path(folder), video, NULL);
    return record_video(sim, path, progress, user, error) && add_all(sim, folder, video, error) &&
           rf_result_folder_commit(folder, error);
}

bool rf_simulate(const char *scene_path, const char *out_dir, RfSimulateProgress progress, void *user,
                 RfSimulateSummary *summary, GError **error)
{
    Simulation sim = {0};
    bool ok = simulate(&sim, scene_path, out_dir, progress, user, error);
    if (ok && summary) summarise(&sim, out_dir, summary);
    close_simulation(&sim);
    return ok;
}

void rf_simulate_summary_clear(RfSimulateSummary *summary)
{
    g_clear_pointer(&summary->sheet_path, g_free);
}
