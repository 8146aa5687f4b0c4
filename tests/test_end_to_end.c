/* Footage with its truth, measured by the program itself and compared with what was put in. */
#include "calib/table.h"
#include "cli/folder_tree.h"

#include <json-glib/json-glib.h>
#include <math.h>
#include <stdlib.h>

#define ELEMENTARY_COULOMB 1.602176634e-19 /* CODATA 2018, exact */

enum { MOST_DROPLETS = 256, MOST_FRAMES = 4096, WIDTH_PX = 288, HEIGHT_PX = 224, BORDER_PX = 5 };

static const double frame_s = 1 / 30.0;

typedef struct {
    char *root, *film, *result;
} Place;

static Place place;

static void call(const char *verb, const char *what, const char *out)
{
    const char *const argv[] = {g_getenv("RISEFALL"), verb, what, "--out", out, "--quiet", NULL};
    g_autoptr(GError) error = NULL;
    int status;
    g_assert_true(
        g_spawn_sync(NULL, (char **)argv, NULL, G_SPAWN_DEFAULT, NULL, NULL, NULL, NULL, &status, &error));
    g_assert_true(g_spawn_check_wait_status(status, &error));
    g_assert_no_error(error);
}

static void film_and_measure(void)
{
    g_autofree char *scene =
        g_build_filename(g_getenv("RISEFALL_TESTS"), "scenes", "ten-droplets.scene", NULL);
    place.root = g_dir_make_tmp("risefall-end-to-end-XXXXXX", NULL);
    place.film = g_build_filename(place.root, "film", NULL);
    place.result = g_build_filename(place.root, "result", NULL);
    g_autofree char *sheet = g_build_filename(place.film, "sheet.ini", NULL);
    call("simulate", scene, place.film);
    call("run", sheet, place.result);
}

static RfTable *table(const char *folder, const char *name)
{
    g_autofree char *path = g_build_filename(folder, name, NULL);
    g_autoptr(GError) error = NULL;
    RfTable *read = rf_table_read(path, &error);
    g_assert_no_error(error);
    return read;
}

static const char *text(const RfTable *of, size_t row, const char *name)
{
    int column = rf_table_find(of, name);
    g_assert_cmpint(column, >=, 0);
    return rf_table_text(of, row, (size_t)column);
}

static double number(const RfTable *of, size_t row, const char *name)
{
    return g_ascii_strtod(text(of, row, name), NULL);
}

static int whole(const RfTable *of, size_t row, const char *name)
{
    return (int)number(of, row, name);
}

/* ---- which true droplet each path follows ---- */

typedef struct { /* where each true droplet was, by frame; visible: it counts */
    double x_px[MOST_DROPLETS][MOST_FRAMES], y_px[MOST_DROPLETS][MOST_FRAMES];
    char is_there[MOST_DROPLETS][MOST_FRAMES], is_visible[MOST_DROPLETS][MOST_FRAMES];
    char is_found[MOST_DROPLETS][MOST_FRAMES];
    int body[MOST_DROPLETS]; /* one that leaves and returns is two droplets, but still itself */
} Truth;

static Truth truth;

static void read_truth(void)
{
    g_autoptr(RfTable) paths = table(place.film, "truth_paths.csv");
    for (size_t row = 0; row < rf_table_rows(paths); row++) {
        int droplet = whole(paths, row, "droplet"), frame = whole(paths, row, "frame");
        g_assert_true(droplet < MOST_DROPLETS && frame < MOST_FRAMES);
        truth.x_px[droplet][frame] = number(paths, row, "x_px");
        truth.y_px[droplet][frame] = number(paths, row, "y_px");
        truth.is_there[droplet][frame] = 1;
        truth.is_visible[droplet][frame] = whole(paths, row, "visible") != 0;
    }
    g_autoptr(RfTable) droplets = table(place.film, "truth_droplets.csv");
    for (size_t row = 0; row < rf_table_rows(droplets); row++)
        truth.body[whole(droplets, row, "droplet")] = whole(droplets, row, "body");
}

/* The true droplet within 3 px, or 0. */
static int droplet_at(int frame, double x_px, double y_px)
{
    int nearest = 0;
    double least_px = 3;
    for (int droplet = 1; droplet < MOST_DROPLETS; droplet++) {
        if (!truth.is_there[droplet][frame]) continue;
        double distance_px = hypot(truth.x_px[droplet][frame] - x_px, truth.y_px[droplet][frame] - y_px);
        if (distance_px < least_px) {
            least_px = distance_px;
            nearest = droplet;
        }
    }
    return nearest;
}

static int votes[MOST_DROPLETS][MOST_DROPLETS]; /* of a path's frames, by true droplet; 0: for none */
static int invented;                            /* rows that lie well inside the picture and on no droplet */

static bool is_inside(double x_px, double y_px)
{
    return x_px > BORDER_PX && x_px < WIDTH_PX - BORDER_PX && y_px > BORDER_PX &&
           y_px < HEIGHT_PX - BORDER_PX;
}

static void count_votes(void)
{
    g_autoptr(RfTable) paths = table(place.result, "paths.csv");
    for (size_t row = 0; row < rf_table_rows(paths); row++) {
        int path = whole(paths, row, "droplet"), frame = whole(paths, row, "frame");
        double x_px = number(paths, row, "x_px"), y_px = number(paths, row, "y_px");
        int droplet = droplet_at(frame, x_px, y_px);
        invented += droplet == 0 && is_inside(x_px, y_px);
        votes[path][droplet]++;
        truth.is_found[droplet][frame] = 1;
    }
}

static int followed_by(int path)
{
    int most = 1;
    for (int droplet = 1; droplet < MOST_DROPLETS; droplet++)
        if (votes[path][droplet] > votes[path][most]) most = droplet;
    return most;
}

static void paths_follow_one_droplet_each(void)
{
    int frames = 0, astray = 0;
    for (int path = 1; path < MOST_DROPLETS; path++)
        for (int droplet = 1; droplet < MOST_DROPLETS; droplet++) {
            frames += votes[path][droplet];
            astray += truth.body[droplet] == truth.body[followed_by(path)] ? 0 : votes[path][droplet];
        }
    g_test_message("%d of %d rows on another droplet, %d on none", astray, frames, invented);
    g_assert_cmpint(frames, >, 2000);
    g_assert_cmpint(astray * 200, <, frames); /* where two meet, a few rows may be nearer to the other one */
    g_assert_cmpint(invented * 200, <, frames);
}

static void what_is_visible_is_followed(void)
{
    int visible = 0, found = 0;
    for (int droplet = 1; droplet < MOST_DROPLETS; droplet++)
        for (int frame = 0; frame < MOST_FRAMES; frame++) {
            visible += truth.is_visible[droplet][frame];
            found += truth.is_visible[droplet][frame] && truth.is_found[droplet][frame];
        }
    g_test_message("%d of %d visible droplet-frames", found, visible);
    g_assert_cmpfloat(found, >=, 0.95 * visible);
}

/* ---- charges, radii, the unit ---- */

static size_t row_of_droplet(const RfTable *of, int droplet)
{
    for (size_t row = 0; row < rf_table_rows(of); row++)
        if (whole(of, row, "droplet") == droplet) return row;
    g_assert_not_reached();
}

/* Mean square of (measured - true) / u over the accepted rows; each must be below 4 u. */
static double mean_square_pull(const char *quantity, const char *u, int *accepted)
{
    g_autoptr(RfTable) measured = table(place.result, "droplets.csv");
    g_autoptr(RfTable) real = table(place.film, "truth_droplets.csv");
    double sum = 0;
    *accepted = 0;
    for (size_t row = 0; row < rf_table_rows(measured); row++) {
        if (!g_str_equal(text(measured, row, "verdict"), "accepted")) continue;
        size_t at = row_of_droplet(real, followed_by(whole(measured, row, "droplet")));
        double pull =
            (number(measured, row, quantity) - number(real, at, quantity)) / number(measured, row, u);
        g_assert_cmpfloat(fabs(pull), <, 4);
        sum += pull * pull;
        ++*accepted;
    }
    g_test_message("%s: %d accepted, mean square pull %.2f", quantity, *accepted, sum / *accepted);
    return sum / *accepted;
}

/* Bounds: chi-square over 8 or more has less than one chance in 1000 to leave them. */
static void charges_are_true_within_their_uncertainty(void)
{
    int accepted;
    double mean_square = mean_square_pull("charge_C", "u_charge_C", &accepted);
    g_assert_cmpint(accepted, >=, 8);
    g_assert_cmpfloat(mean_square, >, 0.1);
    g_assert_cmpfloat(mean_square, <, 3.3);
}

static void radii_are_true_within_their_uncertainty(void)
{
    int accepted;
    double mean_square = mean_square_pull("radius_um", "u_radius_um", &accepted);
    g_assert_cmpfloat(mean_square, >, 0.1);
    g_assert_cmpfloat(mean_square, <, 3.3);
}

static void whole_multiples_are_the_true_ones(void)
{
    g_autoptr(RfTable) measured = table(place.result, "droplets.csv");
    g_autoptr(RfTable) real = table(place.film, "truth_droplets.csv");
    int told = 0;
    for (size_t row = 0; row < rf_table_rows(measured); row++) {
        if (!*text(measured, row, "units")) continue;
        size_t at = row_of_droplet(real, followed_by(whole(measured, row, "droplet")));
        g_assert_cmpint(whole(measured, row, "units"), ==, whole(real, at, "units"));
        told++;
    }
    g_test_message("%d whole multiples", told);
    g_assert_cmpint(told, >=, 6);
}

/* ---- switches, scale, unit ---- */

static void every_switch_within_a_frame(void)
{
    g_autoptr(RfTable) found = table(place.result, "switches.csv");
    g_autoptr(RfTable) real = table(place.film, "truth_switches.csv");
    g_assert_cmpuint(rf_table_rows(found), ==, rf_table_rows(real));
    for (size_t row = 0; row < rf_table_rows(real); row++) {
        double off_s = number(found, row, "time_s") - number(real, row, "time_s");
        g_assert_cmpfloat(fabs(off_s), <, frame_s);
        g_assert_cmpfloat(fabs(off_s), <, 4.5 * number(found, row, "u_time_s"));
        g_assert_cmpstr(text(found, row, "from"), ==, text(real, row, "from"));
        g_assert_cmpstr(text(found, row, "to"), ==, text(real, row, "to"));
    }
}

static JsonObject *object(const char *folder, const char *name)
{
    g_autofree char *path = g_build_filename(folder, name, NULL);
    g_autoptr(JsonParser) parser = json_parser_new();
    g_autoptr(GError) error = NULL;
    json_parser_load_from_file(parser, path, &error);
    g_assert_no_error(error);
    return json_object_ref(json_node_get_object(json_parser_get_root(parser)));
}

static void scale_within_three_sigma(void)
{
    g_autoptr(JsonObject) found = object(place.result, "scale.json");
    g_autoptr(JsonObject) real = object(place.film, "truth_scale.json");
    const char *const names[] = {"px_per_mm_x", "px_per_mm_y"};
    for (size_t i = 0; i < G_N_ELEMENTS(names); i++) {
        g_autofree char *u = g_strconcat("u_", names[i], NULL);
        double off =
            json_object_get_double_member(found, names[i]) - json_object_get_double_member(real, names[i]);
        g_assert_cmpfloat(fabs(off), <, 3 * json_object_get_double_member(found, u));
    }
}

static void the_unit_is_the_elementary_charge(void)
{
    g_autoptr(JsonObject) summary = object(place.result, "summary.json");
    g_assert_true(json_object_get_boolean_member(summary, "unit_resolved"));
    double unit_C = json_object_get_double_member(summary, "unit_charge_C");
    double u_C = json_object_get_double_member(summary, "u_unit_charge_C");
    g_test_message("unit %.4g(%.2g) C", unit_C, u_C);
    g_assert_cmpfloat(fabs(unit_C - ELEMENTARY_COULOMB), <, 2 * u_C);
    g_assert_cmpfloat(u_C, <, 0.05 * ELEMENTARY_COULOMB);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    film_and_measure();
    read_truth();
    count_votes();
    g_test_add_func("/end-to-end/paths/one-droplet-each", paths_follow_one_droplet_each);
    g_test_add_func("/end-to-end/paths/what-is-visible-is-followed", what_is_visible_is_followed);
    g_test_add_func("/end-to-end/droplets/charges-true-within-uncertainty",
                    charges_are_true_within_their_uncertainty);
    g_test_add_func("/end-to-end/droplets/radii-true-within-uncertainty",
                    radii_are_true_within_their_uncertainty);
    g_test_add_func("/end-to-end/droplets/whole-multiples", whole_multiples_are_the_true_ones);
    g_test_add_func("/end-to-end/switches/every-one-within-a-frame", every_switch_within_a_frame);
    g_test_add_func("/end-to-end/scale/within-three-sigma", scale_within_three_sigma);
    g_test_add_func("/end-to-end/unit/elementary-charge", the_unit_is_the_elementary_charge);
    int status = g_test_run();
    rf_folder_tree_remove(place.root);
    g_free(place.root);
    g_free(place.film);
    g_free(place.result);
    return status;
}
