#include "cli/simulate_film.h"

#include "support/scene_from_text.h"

#include <gsl/gsl_errno.h>
#include <math.h>
#include <string.h>

typedef struct {         /* what came out, frame by frame */
    GArray *times;       /* double */
    GPtrArray *pictures; /* GBytes */
} Reel;

typedef struct {
    RfScene *scene;
    RfWorld *world;
    RfRecord *record;
    Reel reel;
} Show;

static bool keep(const void *pixels, ptrdiff_t stride_bytes, double time_s, int64_t frame, void *user,
                 GError **error)
{
    (void)error;
    Reel *reel = user;
    g_assert_cmpint((int)frame, ==, (int)reel->times->len);
    g_array_append_val(reel->times, time_s);
    g_ptr_array_add(reel->pictures, g_bytes_new(pixels, (gsize)(stride_bytes * 96)));
    return true;
}

static Show show_new(const char *more)
{
    Show show = {0};
    g_autofree char *text = g_strconcat("width=128\nheight=96\n", more, NULL);
    show.scene = scene_from_text(text);
    show.world = rf_simulate_world_new(show.scene);
    show.record = rf_simulate_record_new();
    show.reel.times = g_array_new(FALSE, FALSE, sizeof(double));
    show.reel.pictures = g_ptr_array_new_with_free_func((GDestroyNotify)g_bytes_unref);
    RfView view = rf_simulate_view_new(show.scene, show.world);
    g_autoptr(RfReticle) reticle =
        rf_simulate_reticle_new(&view, show.scene->line_width_m, show.scene->transmission, false);
    g_autoptr(RfRenderer) renderer = rf_simulate_render_new(show.scene, reticle);
    RfFilm film = {.scene = show.scene, .world = show.world, .view = &view, .renderer = renderer};
    g_assert_true(rf_simulate_film_play(&film, show.record, keep, &show.reel, NULL));
    return show;
}

static void show_clear(Show *show)
{
    g_array_unref(show->reel.times);
    g_ptr_array_unref(show->reel.pictures);
    rf_simulate_record_free(show->record);
    rf_simulate_world_free(show->world);
    rf_simulate_scene_free(show->scene);
}

static bool is_same_picture(const Show *show, unsigned a, unsigned b)
{
    return g_bytes_equal(g_ptr_array_index(show->reel.pictures, a),
                         g_ptr_array_index(show->reel.pictures, b));
}

static void test_even_times_without_mishaps(void)
{
    Show show = show_new("frame_rate=25 Hz\n");
    g_assert_cmpint((int)show.reel.times->len, ==, 50);
    for (unsigned i = 0; i < 50; i++)
        g_assert_cmpfloat_with_epsilon(g_array_index(show.reel.times, double, i), i / 25., 1e-12);
    show_clear(&show);
}

static void test_dropped_frames_leave_gaps(void)
{
    Show show = show_new("frame_rate=25 Hz\ndropped=5\n");
    g_assert_cmpint((int)show.reel.times->len, ==, 45);
    int missing = 0;
    for (unsigned i = 1; i < 45; i++) {
        const double *time_s = &g_array_index(show.reel.times, double, i);
        missing += (int)rint((time_s[0] - time_s[-1]) * 25) - 1;
    }
    g_assert_cmpint(missing, ==, 5);
    show_clear(&show);
}

static void test_repeated_pictures_are_the_same_and_say_so(void)
{
    Show show = show_new("frame_rate=25 Hz\nrepeated=3\n[droplet a]\nx=60\ny=20\nradius=0.5 um\nunits=0\n");
    const RfLife *life = g_ptr_array_index(show.record->lives, 0);
    int repeats = 0;
    for (unsigned i = 1; i < show.reel.times->len; i++) {
        bool is_repeated = g_array_index(life->seen, RfSeenAt, i).is_repeated;
        g_assert_true(is_same_picture(&show, i, i - 1) == is_repeated);
        repeats += is_repeated;
    }
    g_assert_cmpint(repeats, >=, 1);
    g_assert_cmpint(repeats, <=, 3);
    show_clear(&show);
}

static void test_fields_have_their_own_instants(void)
{
    Show show = show_new("frame_rate=25 Hz\ninterlaced=yes\n[droplet a]\nx=60\ny=20\nradius=0.5 um\nunits=0\n"
                         "[video]\ncodec=mpeg2\n");
    const RfLife *life = g_ptr_array_index(show.record->lives, 0);
    g_assert_cmpint((int)life->seen->len, ==, 100);
    for (unsigned i = 0; i < 100; i++) {
        const RfSeenAt *at = &g_array_index(life->seen, RfSeenAt, i);
        g_assert_cmpfloat_with_epsilon(at->time_s, i / 50., 1e-12);
        g_assert_cmpint(at->field, ==, i % 2);
        g_assert_cmpint((int)at->frame, ==, i / 2);
    }
    show_clear(&show);
}

static void test_camera_moves_the_picture_not_the_droplet(void)
{
    Show show =
        show_new("[camera]\nwander=3\nwander_time=0.5 s\n[motion]\ndrift=0 um/s\n[droplet a]\nx=60\ny=40\n"
                 "radius=2 um\nunits=0\n");
    const RfLife *life = g_ptr_array_index(show.record->lives, 0);
    double shake = 0;
    for (unsigned i = 0; i < life->seen->len; i++) {
        const RfSeenAt *at = &g_array_index(life->seen, RfSeenAt, i);
        shake += pow(at->px.x - at->reference_px.x, 2) / life->seen->len;
        g_assert_cmpfloat_with_epsilon(at->reference_px.x, 60, 6); /* diffusion alone: 1.2 px in 2 s */
    }
    g_assert_cmpfloat(sqrt(shake), >, 1);
    g_assert_cmpfloat(sqrt(shake), <, 9);
    show_clear(&show);
}

/* Who leaves is replaced, and the new one comes from outside. */
static void test_refill_enters_from_outside(void)
{
    Show show =
        show_new("frame_rate=10 Hz\n[droplets]\ncount=3\nradius=3 um\nmost_units=1\n[supply]\nstates=off\n");
    g_assert_cmpint((int)show.record->lives->len, >, 3);
    for (unsigned i = 3; i < show.record->lives->len; i++) {
        const RfLife *life = g_ptr_array_index(show.record->lives, i);
        g_assert_cmpfloat(g_array_index(life->seen, RfSeenAt, 0).px.y, <, 60);
    }
    show_clear(&show);
}

/* Increments of recorded positions: variance 2 D dt (1 - 2 R), neighbours' covariance 2 R D dt (Berglund, Phys. Rev. E
 * 82 (2010) 011917). R = sum over pairs of moments; of m evenly spaced ones it is te/6 (1 - 1/m^2). */
static void test_exposure_blurs_as_berglund_says(void)
{
    Show show =
        show_new("exposure=1\nframe_rate=30 Hz\n[camera]\ngravity=down\n[motion]\ndrift=0 um/s\n"
                 "[supply]\nstates=off\n[droplets]\ncount=300\nradius=0.5 um\nrefilled=no\nbrightness=1\n");
    double dt = 1 / 30., r = 1. / 6 * (1 - 1. / 36);
    double d_px2 = rf_drag_diffusion_m2_s(&show.world->medium, 0.5e-6) * 4e5 * 4e5;
    double variance = 0, covariance = 0, n = 0;
    for (unsigned l = 0; l < show.record->lives->len; l++) {
        const GArray *seen = ((const RfLife *)g_ptr_array_index(show.record->lives, l))->seen;
        for (unsigned i = 2; i < seen->len; i++) {
            const RfSeenAt *at = &g_array_index(seen, RfSeenAt, i);
            double step = at[0].px.x - at[-1].px.x, before = at[-1].px.x - at[-2].px.x;
            variance += step * step;
            covariance += step * before;
            n++;
        }
    }
    double unit = 2 * d_px2 * dt, sigma = 4 * sqrt(2 / n);
    g_test_message("variance %.4f (%.4f), covariance %.4f (%.4f)", variance / n / unit, 1 - 2 * r,
                   covariance / n / unit, r);
    g_assert_cmpfloat_with_epsilon(variance / n / unit, 1 - 2 * r, sigma);
    g_assert_cmpfloat_with_epsilon(covariance / n / unit, r, sigma);
    show_clear(&show);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/simulate-film/times/even-without-mishaps", test_even_times_without_mishaps);
    g_test_add_func("/simulate-film/times/dropped-frames-leave-gaps", test_dropped_frames_leave_gaps);
    g_test_add_func("/simulate-film/play/repeated-pictures-are-the-same-and-say-so",
                    test_repeated_pictures_are_the_same_and_say_so);
    g_test_add_func("/simulate-film/play/fields-have-their-own-instants",
                    test_fields_have_their_own_instants);
    g_test_add_func("/simulate-film/play/camera-moves-the-picture-not-the-droplet",
                    test_camera_moves_the_picture_not_the_droplet);
    g_test_add_func("/simulate-film/play/refill-enters-from-outside", test_refill_enters_from_outside);
    g_test_add_func("/simulate-film/play/exposure-blurs-as-berglund-says",
                    test_exposure_blurs_as_berglund_says);
    return g_test_run();
}
