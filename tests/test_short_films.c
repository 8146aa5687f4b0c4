/* Short films of the kinds that are easily broken unnoticed: gravity another way than down, deep grey levels, hardly any
 * droplets, a recording in several files, a part of one. Each is drawn by the program, measured, and compared with what
 * was put in or with the whole recording. */
#include "calib/table.h"
#include "cli/folder_tree.h"
#include "tracker/video_file.h"

#include <math.h>
#include <string.h>

enum { MOST = 64, FRAMES = 240 };

typedef struct {
    const char *name, *camera, *droplets;
    int bit_depth, seed;
} Film;

static char *root;

static char *in_root(const char *name)
{
    return g_build_filename(root, name, NULL);
}

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

static void draw(const Film *film)
{
    g_autofree char *scene = g_strdup_printf(
        "[picture]\nwidth=256\nheight=192\nframe_rate=30 Hz\nduration=8 s\npx_per_mm=400\nexposure=0.5\n"
        "background=30\ngradient=5\nphotons_per_level=22\nread_noise=1.1\npoint_spread=1.8\n"
        "bit_depth=%d\nseed=%d\n[camera]\ngravity=%s\n[droplets]\ncount=%s\nmost_units=4\n"
        "[field]\noff=2..2.5 s\non=1.4..1.8 s\n[video]\ncodec=ffv1\n",
        film->bit_depth, film->seed, film->camera, film->droplets);
    g_autofree char *name = g_strconcat(film->name, ".scene", NULL), *at = in_root(name);
    g_autofree char *folder = in_root(film->name);
    g_assert_true(g_file_set_contents(at, scene, -1, NULL));
    call("simulate", at, folder);
}

/* Measures a film by its own sheet with one thing in it replaced; the result is in the folder `result`. */
static void measure(const char *film, const char *old, const char *by, const char *result)
{
    g_autofree char *folder = in_root(film), *out = in_root(result), *text = NULL;
    g_autofree char *sheet = g_build_filename(folder, "sheet.ini", NULL);
    g_autofree char *own = g_build_filename(folder, "other.ini", NULL);
    g_assert_true(g_file_get_contents(sheet, &text, NULL, NULL));
    g_assert_nonnull(strstr(text, old));
    g_autoptr(GString) other = g_string_new(text);
    g_string_replace(other, old, by, 1);
    g_assert_true(g_file_set_contents(own, other->str, -1, NULL));
    call("run", own, out);
}

static RfTable *table(const char *folder, const char *name)
{
    g_autofree char *at = in_root(folder), *path = g_build_filename(at, name, NULL);
    g_autoptr(GError) error = NULL;
    RfTable *read = rf_table_read(path, &error);
    g_assert_no_error(error);
    return read;
}

static double number(const RfTable *of, size_t row, const char *name)
{
    int column = rf_table_find(of, name);
    g_assert_cmpint(column, >=, 0);
    return g_ascii_strtod(rf_table_text(of, row, (size_t)column), NULL);
}

static bool is_accepted(const RfTable *of, size_t row)
{
    return g_str_equal(rf_table_text(of, row, (size_t)rf_table_find(of, "verdict")), "accepted");
}

/* ---- against the truth ---- */

typedef struct {
    double x_px, y_px;
    int droplet;
    bool is_visible;
} Place;

typedef struct {
    GArray *at[FRAMES];    /* of Place */
    int votes[MOST][MOST]; /* of a path's frames, by true droplet */
    int visible, found;
} Match;

static void read_places(Match *match, const char *film)
{
    g_autoptr(RfTable) real = table(film, "truth_paths.csv");
    for (int f = 0; f < FRAMES; f++) match->at[f] = g_array_new(false, false, sizeof(Place));
    for (size_t row = 0; row < rf_table_rows(real); row++) {
        Place place = {number(real, row, "x_px"), number(real, row, "y_px"),
                       (int)number(real, row, "droplet"), number(real, row, "visible") > 0};
        int frame = (int)number(real, row, "frame");
        g_assert_true(frame < FRAMES && place.droplet < MOST);
        g_array_append_val(match->at[frame], place);
        match->visible += place.is_visible;
    }
}

/* The nearest true droplet within 3 px; NULL if there is none. */
static const Place *place_at(const GArray *there, double x_px, double y_px)
{
    const Place *nearest = NULL;
    double least_px = 3;
    for (unsigned i = 0; i < there->len; i++) {
        const Place *place = &g_array_index(there, Place, i);
        double apart_px = hypot(place->x_px - x_px, place->y_px - y_px);
        if (apart_px >= least_px) continue;
        least_px = apart_px;
        nearest = place;
    }
    return nearest;
}

/* Every measured place votes for the true droplet there. */
static void read_paths(Match *match, const char *result)
{
    g_autoptr(RfTable) paths = table(result, "paths.csv");
    for (size_t row = 0; row < rf_table_rows(paths); row++) {
        const Place *place = place_at(match->at[(int)number(paths, row, "frame")], number(paths, row, "x_px"),
                                      number(paths, row, "y_px"));
        if (!place) continue;
        match->votes[(int)number(paths, row, "droplet")][place->droplet]++;
        match->found += place->is_visible;
    }
}

static int followed_by(const Match *match, int path)
{
    int most = 1;
    for (int droplet = 2; droplet < MOST; droplet++)
        if (match->votes[path][droplet] > match->votes[path][most]) most = droplet;
    return most;
}

static double true_charge_C(const RfTable *real, int droplet)
{
    for (size_t row = 0; row < rf_table_rows(real); row++)
        if ((int)number(real, row, "droplet") == droplet) return number(real, row, "charge_C");
    g_assert_not_reached();
}

/* 4 u: one chance in 16 000 for each of these few. */
static int check_charges(const Match *match, const char *film, const char *result)
{
    g_autoptr(RfTable) found = table(result, "droplets.csv"), real = table(film, "truth_droplets.csv");
    int accepted = 0;
    for (size_t row = 0; row < rf_table_rows(found); row++) {
        if (!is_accepted(found, row)) continue;
        double charge_C = true_charge_C(real, followed_by(match, (int)number(found, row, "droplet")));
        double pull = (number(found, row, "charge_C") - charge_C) / number(found, row, "u_charge_C");
        g_test_message("%s: charge %.3g C, pull %+.2f", result, charge_C, pull);
        g_assert_cmpfloat(fabs(pull), <, 4);
        accepted++;
    }
    return accepted;
}

static void check_switches(const char *film, const char *result)
{
    g_autoptr(RfTable) found = table(result, "switches.csv"), real = table(film, "truth_switches.csv");
    g_assert_cmpuint(rf_table_rows(found), ==, rf_table_rows(real));
    for (size_t row = 0; row < rf_table_rows(real); row++) {
        double off_s = number(found, row, "time_s") - number(real, row, "time_s");
        g_assert_cmpfloat(fabs(off_s), <, 4.5 * number(found, row, "u_time_s"));
        g_assert_cmpfloat(fabs(off_s), <, 0.1);
    }
}

static void check_truth(const char *film, const char *result, int least_accepted)
{
    g_autofree Match *match = g_new0(Match, 1);
    read_places(match, film);
    read_paths(match, result);
    g_test_message("%s: %d of %d visible places found", result, match->found, match->visible);
    g_assert_cmpint(match->visible, >, FRAMES);
    g_assert_cmpfloat(match->found, >=, 0.98 * match->visible);
    g_assert_cmpint(check_charges(match, film, result), >=, least_accepted);
    check_switches(film, result);
    for (int f = 0; f < FRAMES; f++) g_array_unref(match->at[f]);
}

static void gravity_up_found(void)
{
    draw(&(Film){"up", "up", "6", 10, 7});
    measure("up", "gravity=up", "gravity=find", "up-found");
    check_truth("up", "up-found", 3);
}

static void gravity_right_stated(void)
{
    draw(&(Film){"right", "right", "6", 8, 8});
    measure("right", "gravity=right", "gravity=right", "right-stated");
    check_truth("right", "right-stated", 3);
}

static void sixteen_bit(void)
{
    draw(&(Film){"deep", "down", "6", 16, 7});
    measure("deep", "gravity=down", "gravity=down", "deep-whole");
    check_truth("deep", "deep-whole", 3);
}

static void two_droplets(void)
{
    draw(&(Film){"two", "down", "2", 8, 11});
    measure("two", "gravity=down", "gravity=down", "two-whole");
    check_truth("two", "two-whole", 1);
}

/* ---- against the whole ---- */

/* Frames first .. first + frames - 1 of a film as a file of their own, whose time begins at 0. */
static void copy_part(const char *film, int64_t first, int64_t frames, const char *name)
{
    g_autofree char *folder = in_root(film), *from = g_build_filename(folder, "recording.mkv", NULL);
    g_autofree char *to = g_build_filename(folder, name, NULL);
    GError *error = NULL;
    g_autoptr(RfVideoFile) file = rf_video_file_open((const char *const[]){from, NULL}, NULL, &error);
    g_assert_no_error(error);
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, 1, &error);
    g_assert_no_error(error);
    RfVideoWriterOptions options = {
        .codec = RF_VIDEO_CODEC_FFV1, .width = 256, .height = 192, .bit_depth = 8, .is_full_range = true};
    g_autoptr(RfVideoWriter) writer = rf_video_file_create(to, &options, &error);
    g_assert_no_error(error);
    RfFrame frame;
    while (rf_video_file_next(reader, &frame, &error) == RF_VIDEO_FRAME) {
        if (frame.index < first || frame.index >= first + frames) continue;
        rf_video_file_write(writer, frame.luma, frame.stride_bytes, (double)(frame.index - first) / 30,
                            &error);
        g_assert_no_error(error);
    }
    g_assert_no_error(error);
    g_assert_true(rf_video_file_finish(writer, &error));
}

static void check_same(const char *one, const char *other, const char *name)
{
    g_autofree char *a = NULL, *b = NULL, *in_one = in_root(one), *in_other = in_root(other);
    g_autofree char *first = g_build_filename(in_one, name, NULL),
                    *second = g_build_filename(in_other, name, NULL);
    g_assert_true(g_file_get_contents(first, &a, NULL, NULL));
    g_assert_true(g_file_get_contents(second, &b, NULL, NULL));
    g_test_message("%s: %zu and %zu bytes", name, strlen(a), strlen(b));
    g_assert_true(g_str_equal(a, b)); /* too long to print */
}

/* Cut in the middle of a fall, at key frames (every 12th), so that the background is learned from the same pictures: the
 * same pictures at the same times give the same bytes. */
static void three_files_as_one(void)
{
    copy_part("whole", 0, 96, "a.mkv");
    copy_part("whole", 96, 84, "b.mkv");
    copy_part("whole", 180, FRAMES - 180, "c.mkv");
    measure("whole", "video=recording.mkv", "video=a.mkv;b.mkv;c.mkv", "whole-files");
    check_same("whole-all", "whole-files", "paths.csv");
    check_same("whole-all", "whole-files", "switches.csv");
    check_same("whole-all", "whole-files", "droplets.csv");
}

/* Path rows that the whole recording has at the same frame within 0.2 px and 1 us. */
static unsigned count_shared(const RfTable *part, const RfTable *whole)
{
    unsigned shared = 0;
    for (size_t row = 0; row < rf_table_rows(part); row++)
        for (size_t k = 0; k < rf_table_rows(whole); k++)
            if ((int)number(whole, k, "frame") == (int)number(part, row, "frame") &&
                fabs(number(whole, k, "time_s") - number(part, row, "time_s")) < 1e-6 &&
                hypot(number(whole, k, "x_px") - number(part, row, "x_px"),
                      number(whole, k, "y_px") - number(part, row, "y_px")) < 0.2) {
                shared++;
                break;
            }
    return shared;
}

/* Times, frame numbers and switches of a part are those of the whole recording. */
static void part_keeps_the_clock(void)
{
    measure("whole", "[recording]\n", "[recording]\nstart=1.5 s\nstop=7 s\n", "whole-part");
    g_autoptr(RfTable) part = table("whole-part", "paths.csv"), all = table("whole-all", "paths.csv");
    g_autoptr(RfTable) some = table("whole-part", "switches.csv"),
                       switches = table("whole-all", "switches.csv");
    unsigned shared = count_shared(part, all);
    g_test_message("%u of %zu rows of the part are the whole's", shared, rf_table_rows(part));
    g_assert_cmpuint(rf_table_rows(part), >, 300);
    g_assert_cmpfloat(shared, >=, 0.98 * (double)rf_table_rows(part));
    size_t next = 0;
    for (size_t row = 0; row < rf_table_rows(switches); row++) {
        double time_s = number(switches, row, "time_s");
        if (time_s < 1.5 || time_s > 7) continue;
        g_assert_cmpuint(next, <, rf_table_rows(some));
        g_assert_cmpfloat_with_epsilon(number(some, next, "time_s"), time_s,
                                       2 * number(switches, row, "u_time_s"));
        next++;
    }
    g_assert_cmpuint(next, ==, rf_table_rows(some));
    g_assert_cmpuint(next, >=, 2);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    root = g_dir_make_tmp("risefall-short-films-XXXXXX", NULL);
    draw(&(Film){"whole", "down", "6", 8, 7});
    measure("whole", "gravity=down", "gravity=down", "whole-all");
    g_test_add_func("/short-films/gravity/up-found", gravity_up_found);
    g_test_add_func("/short-films/gravity/right-stated", gravity_right_stated);
    g_test_add_func("/short-films/picture/sixteen-bit", sixteen_bit);
    g_test_add_func("/short-films/droplets/two", two_droplets);
    g_test_add_func("/short-films/recording/three-files-as-one", three_files_as_one);
    g_test_add_func("/short-films/recording/part-keeps-the-clock", part_keeps_the_clock);
    int status = g_test_run();
    rf_folder_tree_remove(root);
    g_free(root);
    return status;
}
