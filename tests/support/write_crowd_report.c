/* Writes the page of a long recording of a crowd, the largest that the program makes: 200 droplets in view for two hours,
 * footage as long as it may be with every droplet in every frame of it. Only the page and its figures.
 *   write_crowd_report FOLDER */
#include <math.h>
#include <stdio.h>

#include "cli/preview_plan.h"
#include "cli/report_html.h"
#include "tests/support/sample_results.h"

enum { DROPLETS = 200, FRAMES = RF_PREVIEW_MOST_FRAMES, STATES = 24 };
static const double DURATION_S = 7200;

/* What `run` films of bench-morning.scene takes 990 bytes a frame. */
enum { FILM_BYTES_A_FRAME = 1500 };

static void add_droplet(RfResults *results, unsigned droplet)
{
    for (int i = 0; i < FRAMES; i++) {
        const RfPathRow row = {.droplet = droplet,
                               .frame = i,
                               .time_s = i * DURATION_S / FRAMES,
                               .seen = true,
                               .x_px = 3.1 * droplet + 2.5 * sin(i * 0.9 + droplet),
                               .y_px = 240 + 200 * sin(i * 0.37 + droplet)};
        g_array_append_val(results->paths, row);
    }
    for (unsigned i = 0; i < STATES; i++) {
        const RfSegmentRow row = {.droplet = droplet,
                                  .segment = i + 1,
                                  .start_s = i * DURATION_S / STATES,
                                  .end_s = (i + 1) * DURATION_S / STATES,
                                  .field = i % 2 ? RF_FIELD_TOP_PLUS : RF_FIELD_OFF,
                                  .fall_mm_s = {0.03 + 0.0001 * droplet - 0.05 * (i % 2), 1e-4},
                                  .frames = FRAMES / STATES};
        g_array_append_val(results->segments, row);
    }
    RfDropletRow spell = g_array_index(results->droplets, RfDropletRow, droplet % 3);
    spell.droplet = droplet;
    spell.reason = g_strdup("");
    g_array_append_val(results->droplets, spell);
}

static RfPreview *footage(void)
{
    RfPreview *preview = rf_preview_new();
    const gsize length = (gsize)FRAMES * FILM_BYTES_A_FRAME;
    preview->film = g_bytes_new_take(g_malloc0(length), length);
    preview->width = 640, preview->height = 480;
    for (int i = 0; i < FRAMES; i++) {
        const RfPreviewFrame frame = {i, i * DURATION_S / FRAMES, (unsigned)i * 100};
        g_array_append_val(preview->frames, frame);
    }
    return preview;
}

int main(int argc, char **argv)
{
    if (argc != 2) {
        fputs("usage: write_crowd_report FOLDER\n", stderr);
        return 2;
    }
    g_autoptr(RfResults) results = sample_results_new();
    g_array_set_size(results->paths, 0);
    g_array_set_size(results->segments, 0);
    results->duration_s = DURATION_S;
    for (unsigned droplet = 1; droplet <= DROPLETS; droplet++) add_droplet(results, droplet);
    g_array_remove_range(results->droplets, 0, results->droplets->len - DROPLETS);
    results->preview = footage();
    g_autoptr(GError) error = NULL;
    g_autoptr(RfResultFolder) folder = rf_result_folder_open(argv[1], &error);
    g_autoptr(RfFigureSet) figures = folder ? rf_figure_draw(results, folder, &error) : NULL;
    g_autoptr(GString) page = figures ? rf_report_html_new(results, figures) : NULL;
    if (page && rf_result_folder_add(folder, "report.html", page->str, page->len, &error) &&
        rf_result_folder_commit(folder, &error))
        return 0;
    fprintf(stderr, "%s\n", error->message);
    return 1;
}
