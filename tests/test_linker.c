#include "tracker/linker.h"

#include <gsl/gsl_errno.h>
#include <math.h>

#include "tests/support/spot_play.h"
#include "tests/support/track_score.h"
#include "tracker/fill.h"

/* Off, up, off, up: seconds at which the supply is switched. */
static const RfFieldChange switches[] = {{0, 0}, {4.013, -1}, {7.52, 0}, {12.34, -1}, {16.02, 0}};
static const RfFieldCourse course = {switches, G_N_ELEMENTS(switches)};

/* Three droplets that keep clear of each other, at 30 frames/s for 20 s. */
static const RfActor quiet[] = {
    {.x_px = 100,
     .y_px = 60,
     .vx_px_s = 2,
     .vy_px_s = 30,
     .response_px_s = 70,
     .spread_px = 0.5,
     .until = 600},
    {.x_px = 320,
     .y_px = 90,
     .vx_px_s = 2,
     .vy_px_s = 20,
     .response_px_s = 45,
     .spread_px = 0.6,
     .until = 600},
    {.x_px = 500,
     .y_px = 300,
     .vx_px_s = 2,
     .vy_px_s = 22,
     .response_px_s = 0,
     .spread_px = 0.4,
     .until = 600},
};

static RfPlay quiet_play(void)
{
    return (RfPlay){.actors = quiet,
                    .n_actors = G_N_ELEMENTS(quiet),
                    .frames = 600,
                    .rate_hz = 30,
                    .noise_px = 0.08,
                    .miss = 0.02,
                    .false_spots = 0.2,
                    .merge_px = 4,
                    .field = course,
                    .seed = 7};
}

static GPtrArray *points_of(const RfSightings *sightings, const RfPaths *paths)
{
    GPtrArray *tracks = g_ptr_array_new_with_free_func((GDestroyNotify)g_array_unref);
    for (unsigned i = 0; i < paths->paths->len; i++) {
        const RfPath *path = g_ptr_array_index(paths->paths, i);
        GArray *track = g_array_new(false, false, sizeof(RfScorePoint));
        for (unsigned k = 0; k < path->points->len; k++) {
            const RfPathPoint *p = &g_array_index(path->points, RfPathPoint, k);
            const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, p->exposure);
            RfScorePoint point = {(int)exposure->frame, 0, 0};
            rf_pose_to_reference(&exposure->pose, sightings, p->x_px, p->y_px, &point.x_px, &point.y_px);
            point.x_px *= sightings->pixel_aspect;
            g_array_append_val(track, point);
        }
        g_ptr_array_add(tracks, track);
    }
    return tracks;
}

/* Plays, links and scores. paths may be NULL; otherwise (out, new). */
static RfTrackScore link_play(const RfPlay *play, bool is_field_known, RfPaths **paths)
{
    GError *error = NULL;
    g_autoptr(GPtrArray) truth = NULL;
    g_autoptr(RfSightings) sightings = rf_spot_play_run(play, &truth);
    RfPaths *found = rf_linker_run(sightings, is_field_known ? &play->field : NULL, NULL, &error);
    g_assert_no_error(error);
    g_autoptr(GPtrArray) tracks = points_of(sightings, found);
    RfTrackScore score = rf_track_score(truth, tracks, play->frames, 5);
    g_test_message("jsc %.4f, tracks %.3f, rmse %.3f px, %d switches, %u paths, %u cuts", score.jsc,
                   score.jsc_theta, score.rmse_px, score.identity_switches, found->paths->len, found->cuts);
    if (paths)
        *paths = found;
    else
        rf_paths_free(found);
    return score;
}

static void test_nothing(void)
{
    g_autoptr(RfSightings) sightings = rf_sightings_new(640, 480, 1);
    g_autoptr(RfPaths) paths = rf_linker_run(sightings, NULL, NULL, NULL);
    g_assert_nonnull(paths);
    g_assert_cmpuint(paths->paths->len, ==, 0);
}

static void test_noise_only(void)
{
    RfPlay play = {.frames = 900, .rate_hz = 30, .noise_px = 0.3, .false_spots = 2, .seed = 3};
    g_autoptr(RfPaths) paths = NULL;
    link_play(&play, false, &paths);
    g_assert_cmpuint(paths->paths->len, ==, 0);
}

static void test_specks(void)
{
    const RfActor specks[] = {{.x_px = 100, .y_px = 100, .until = 900},
                              {.x_px = 300, .y_px = 250, .until = 400},
                              {.x_px = 301, .y_px = 400, .from = 50, .until = 900}};
    RfPlay play = {.actors = specks,
                   .n_actors = 3,
                   .frames = 900,
                   .rate_hz = 30,
                   .noise_px = 0.3,
                   .miss = 0.3,
                   .seed = 4};
    g_autoptr(RfPaths) paths = NULL;
    link_play(&play, false, &paths);
    g_assert_cmpuint(paths->paths->len, ==, 0);
    g_assert_cmpuint(paths->set_aside_still, ==, 3);
}

static RfSightings *standing_spot(const double (*at_px)[2], const int *visits, int exposures, double u_px,
                                  double snr)
{
    RfSightings *sightings = rf_sightings_new(640, 480, 1);
    for (int e = 0; e < exposures; e++) {
        RfExposure exposure = {.frame = e, .time_s = e / 30.0, .first_spot = sightings->spots->len};
        if (visits[e] >= 0) {
            RfSpot spot = {.x_px = (float)at_px[visits[e]][0],
                           .y_px = (float)at_px[visits[e]][1],
                           .u_x_px = (float)u_px,
                           .u_y_px = (float)u_px,
                           .peak = 5,
                           .snr = (float)snr,
                           .width_px = 1.8f};
            g_array_append_val(sightings->spots, spot);
            exposure.spots = 1;
        }
        g_array_append_val(sightings->exposures, exposure);
    }
    return sightings;
}

/* What a codec makes of noise (places as found in H.264 at crf 18, signal below 1.5 times the noise) and of a speck's rim
 * under a flickering lamp (crf 26): it stands for some frames, then jumps. */
static void test_frozen_noise(void)
{
    static const double noise[][2] = {{198.855, 120.664}, {198.826, 121.445}, {198.697, 122.777},
                                      {199.021, 120.201}, {199.770, 119.989}, {198.987, 118.965},
                                      {199.018, 118.963}, {198.926, 118.574}, {197.976, 118.867}};
    static const int stays[] = {0, 0, -1, 1, 1, 2, 2, 2, 3, 3, 3, 4, 4, 4, 5, 5, 6, 6,
                                6, 6, 7,  7, 7, 7, 7, 8, 8, 8, 8, 8, 8, 8, 8, 8, 8};
    static const double rim[][2] = {{52.383, 474.063}, {48.934, 473.961}, {47.754, 473.863}};
    static const int jumps[] = {0, 0, -1, 0, -1, 0, 0, -1, 1, -1, 1, 2, 1, 1, -1, 1, 2};
    g_autoptr(RfSightings) frozen = standing_spot(noise, stays, G_N_ELEMENTS(stays), 0.65, 1.2);
    g_autoptr(RfSightings) specks = standing_spot(rim, jumps, G_N_ELEMENTS(jumps), 0.15, 14);
    g_autoptr(RfPaths) of_noise = rf_linker_run(frozen, NULL, NULL, NULL);
    g_autoptr(RfPaths) of_specks = rf_linker_run(specks, NULL, NULL, NULL);
    g_assert_cmpuint(of_noise->paths->len, ==, 0);
    g_assert_cmpuint(of_specks->paths->len, ==, 0);
}

/* Left behind a droplet by H.264 at crf 28: it moves, but most of the time there is nothing. */
static void test_sparse_residue(void)
{
    static const double residue[][2] = {{506.876, 407.025}, {508.135, 407.635}, {511.342, 418.576},
                                        {512.416, 416.926}, {513.085, 417.491}, {513.003, 418.000}};
    static const int seen[] = {0, 1, -1, -1, -1, -1, -1, -1, -1, -1, -1, 2, 3, 4, 5};
    g_autoptr(RfSightings) sightings = standing_spot(residue, seen, G_N_ELEMENTS(seen), 0.12, 9);
    g_autoptr(RfPaths) paths = rf_linker_run(sightings, NULL, NULL, NULL);
    g_assert_cmpuint(paths->paths->len, ==, 0);
}

/* What is left of a speck where the camera moves, signal below 3 times the noise; twice as bright it might be a droplet. */
static void test_faint_remainder(void)
{
    static const double remainder[][2] = {{473.824, 56.540}, {473.021, 56.742}, {472.665, 56.731},
                                          {473.156, 52.997}, {473.007, 52.965}, {471.985, 55.656}};
    static const int seen[] = {0, -1, 1, 2, -1, 3, 4, -1, 5};
    for (int is_bright = 0; is_bright < 2; is_bright++) {
        g_autoptr(RfSightings) sightings =
            standing_spot(remainder, seen, G_N_ELEMENTS(seen), 0.23, is_bright ? 5.2 : 2.6);
        g_autoptr(RfPaths) paths = rf_linker_run(sightings, NULL, NULL, NULL);
        g_assert_cmpuint(paths->paths->len, ==, is_bright);
    }
}

static void test_quiet(void)
{
    RfPlay play = quiet_play();
    for (int known = 0; known < 2; known++) {
        RfTrackScore score = link_play(&play, known, NULL);
        g_assert_cmpfloat(score.jsc, >, 0.99);
        g_assert_cmpfloat(score.jsc_theta, ==, 1);
        g_assert_cmpint(score.identity_switches, ==, 0);
    }
}

/* Everything turns round at once, seven times faster than diffusion moves it. */
static void test_reversal(void)
{
    RfActor fast[] = {
        {.x_px = 100, .y_px = 200, .vy_px_s = 60, .response_px_s = 300, .spread_px = 0.5, .until = 240},
        {.x_px = 300, .y_px = 60, .vy_px_s = 30, .response_px_s = 60, .spread_px = 0.5, .until = 240},
        {.x_px = 420, .y_px = 200, .vy_px_s = 50, .response_px_s = 200, .spread_px = 0.5, .until = 240},
    };
    const RfFieldChange changes[] = {{0, 0}, {2.51, -1}, {3.3, 0}, {5.2, -1}, {5.6, 0}};
    RfPlay play = {.actors = fast,
                   .n_actors = 3,
                   .frames = 240,
                   .rate_hz = 30,
                   .noise_px = 0.05,
                   .merge_px = 4,
                   .field = {changes, 5},
                   .seed = 5};
    for (int known = 0; known < 2; known++) {
        RfTrackScore score = link_play(&play, known, NULL);
        g_assert_cmpfloat(score.jsc, >, 0.99);
        g_assert_cmpfloat(score.jsc_theta, ==, 1);
    }
}

/* A fast droplet overtakes a slow one on the same line: for some frames there is one spot. */
static void test_crossing(void)
{
    const RfActor meeting[] = {
        {.x_px = 200,
         .y_px = 40,
         .vy_px_s = 60,
         .response_px_s = 90,
         .spread_px = 0.4,
         .until = 240,
         .peak = 80},
        {.x_px = 201,
         .y_px = 120,
         .vy_px_s = 25,
         .response_px_s = 40,
         .spread_px = 0.5,
         .until = 240,
         .peak = 60},
        {.x_px = 400, .y_px = 120, .vy_px_s = 30, .response_px_s = 40, .spread_px = 0.5, .until = 240},
    };
    for (unsigned long seed = 1; seed <= 20; seed++) {
        RfPlay play = {.actors = meeting,
                       .n_actors = 3,
                       .frames = 240,
                       .rate_hz = 30,
                       .noise_px = 0.06,
                       .miss = 0.02,
                       .merge_px = 5,
                       .seed = seed};
        RfTrackScore score = link_play(&play, false, NULL);
        g_assert_cmpfloat(score.jsc, >, 0.97); /* exchanged after the meeting: below 0.7 */
        g_assert_cmpfloat(score.jsc_theta, ==, 1);
    }
}

/* While two droplets are one spot, that spot is nobody's measurement. */
static void test_merged_is_bridged(void)
{
    const RfActor meeting[] = {
        {.x_px = 200, .y_px = 40, .vy_px_s = 50, .spread_px = 0.3, .until = 200},
        {.x_px = 200, .y_px = 120, .vy_px_s = 20, .spread_px = 0.3, .until = 200},
    };
    RfPlay play = {.actors = meeting,
                   .n_actors = 2,
                   .frames = 200,
                   .rate_hz = 30,
                   .noise_px = 0.05,
                   .merge_px = 5,
                   .seed = 2};
    g_autoptr(RfPaths) paths = NULL;
    link_play(&play, false, &paths);
    g_assert_cmpuint(paths->paths->len, ==, 2);
    const RfPath *a = g_ptr_array_index(paths->paths, 0), *b = g_ptr_array_index(paths->paths, 1);
    unsigned together = 0;
    for (unsigned k = 0; k < MIN(a->points->len, b->points->len); k++) {
        const RfPathPoint *p = &g_array_index(a->points, RfPathPoint, k),
                          *q = &g_array_index(b->points, RfPathPoint, k);
        bool is_near = hypot(p->smooth_x_px - q->smooth_x_px, p->smooth_y_px - q->smooth_y_px) < 2;
        if (is_near) g_assert_false(p->is_seen || q->is_seen);
        together += is_near;
    }
    g_assert_cmpuint(together, >=, 2);
}

/* Compression held a droplet's picture still, then lets it jump; for one exposure both places show a spot. */
static void test_seen_twice_after_a_jump(void)
{
    for (unsigned long seed = 1; seed <= 10; seed++) {
        const RfActor held_and_let_go[] = {
            {.x_px = 200, .y_px = 80, .spread_px = 0.2, .until = 8},
            {.x_px = 200, .y_px = 85, .vy_px_s = 25, .spread_px = 0.8, .from = 7, .until = 200},
            {.x_px = 400, .y_px = 60, .vy_px_s = 30, .spread_px = 0.8, .until = 200},
        };
        RfPlay play = {.actors = held_and_let_go,
                       .n_actors = 3,
                       .frames = 200,
                       .rate_hz = 30,
                       .noise_px = 0.3,
                       .merge_px = 5,
                       .seed = seed};
        g_autoptr(RfPaths) paths = NULL;
        link_play(&play, false, &paths);
        g_assert_cmpuint(paths->paths->len, ==, 2);
        for (unsigned i = 0; i < 2; i++) {
            const RfPath *path = g_ptr_array_index(paths->paths, i);
            g_assert_cmpuint(path->points->len, ==, 200);
            g_assert_cmpuint(path->seen, >=, 198);
        }
    }
}

/* Half a second behind an opaque numeral, with the field switched meanwhile. */
static void test_gap_over_reversal(void)
{
    RfActor hidden[3] = {quiet[0], quiet[1], quiet[2]};
    for (int i = 0; i < 3; i++) {
        hidden[i].hidden_from = 222; /* the field goes off at frame 225.6 */
        hidden[i].hidden_until = 237;
    }
    RfPlay play = quiet_play();
    play.actors = hidden;
    g_autoptr(RfPaths) paths = NULL;
    RfTrackScore score = link_play(&play, true, &paths);
    g_assert_cmpfloat(score.jsc_theta, ==, 1);
    g_assert_cmpfloat(score.jsc, >, 0.99);
    g_assert_cmpuint(paths->paths->len, ==, 3);
}

/* What is known of the field was read from motion and may be wrong: a switch missed, one invented, one late, all unheard
 * of. Identities hold all the same. */
static void test_wrong_course_ends_no_path(void)
{
    static const RfFieldChange missed[] = {{0, 0}, {4.013, -1}, {7.52, 0}},
                               invented[] = {{0, 0},    {2.2, -1},   {3.1, 0},  {4.013, -1},
                                             {7.52, 0}, {12.34, -1}, {16.02, 0}},
                               late[] = {{0, 0}, {4.313, -1}, {7.32, 0}, {12.54, -1}, {16.32, 0}},
                               constant[] = {{0, 0}}, inverted[] = {{0, -1}, {4.013, 0}, {7.52, -1}};
    const RfFieldCourse told[] = {{missed, G_N_ELEMENTS(missed)},
                                  {invented, G_N_ELEMENTS(invented)},
                                  {late, G_N_ELEMENTS(late)},
                                  {constant, G_N_ELEMENTS(constant)},
                                  {inverted, G_N_ELEMENTS(inverted)}};
    RfPlay play = quiet_play();
    for (size_t i = 0; i < G_N_ELEMENTS(told); i++) {
        GError *error = NULL;
        g_autoptr(GPtrArray) truth = NULL;
        g_autoptr(RfSightings) sightings = rf_spot_play_run(&play, &truth);
        g_autoptr(RfPaths) paths = rf_linker_run(sightings, &told[i], NULL, &error);
        g_assert_no_error(error);
        g_autoptr(GPtrArray) tracks = points_of(sightings, paths);
        RfTrackScore score = rf_track_score(truth, tracks, play.frames, 5);
        g_test_message("course %zu: jsc %.4f, %u paths", i, score.jsc, paths->paths->len);
        g_assert_cmpuint(paths->paths->len, ==, 3);
        g_assert_cmpint(score.identity_switches, ==, 0);
        g_assert_cmpfloat(score.jsc, >, 0.99);
    }
}

static void test_long_absence_is_new_droplet(void)
{
    RfActor away = quiet[0];
    away.hidden_from = 60;
    away.hidden_until = 96; /* 1.2 s */
    RfPlay play = quiet_play();
    play.actors = &away;
    play.n_actors = 1;
    g_autoptr(RfPaths) paths = NULL;
    link_play(&play, true, &paths);
    g_assert_cmpuint(paths->paths->len, ==, 2);
    const RfPath *first = g_ptr_array_index(paths->paths, 0), *second = g_ptr_array_index(paths->paths, 1);
    g_assert_cmpint(first->birth, ==, RF_PATH_BIRTH_RECORDING);
    g_assert_cmpint(first->death, ==, RF_PATH_DEATH_FOCUS);
    g_assert_cmpint(second->birth, ==, RF_PATH_BIRTH_FOCUS);
    g_assert_cmpint(second->death, ==, RF_PATH_DEATH_RECORDING);
}

static void test_edges(void)
{
    const RfActor through = {.x_px = 300, .y_px = -80, .vy_px_s = 45, .spread_px = 0.5, .until = 600};
    RfPlay play = {
        .actors = &through, .n_actors = 1, .frames = 500, .rate_hz = 30, .noise_px = 0.1, .seed = 9};
    g_autoptr(RfPaths) paths = NULL;
    RfTrackScore score = link_play(&play, false, &paths);
    g_assert_cmpuint(paths->paths->len, ==, 1);
    g_assert_cmpfloat(score.jsc, ==, 1);
    const RfPath *path = g_ptr_array_index(paths->paths, 0);
    g_assert_cmpint(path->birth, ==, RF_PATH_BIRTH_EDGE);
    g_assert_cmpint(path->death, ==, RF_PATH_DEATH_EDGE);
}

/* Two droplets alike in everything drift together: often nobody can tell which is which afterwards. Then the paths are cut
 * rather than exchanged. */
static void test_undecidable_is_cut(void)
{
    unsigned cut = 0, exchanged = 0;
    for (unsigned long seed = 1; seed <= 40; seed++) {
        const RfActor alike[] = {
            {.x_px = 200, .y_px = 40, .vx_px_s = 2, .vy_px_s = 30, .spread_px = 0.5, .until = 400},
            {.x_px = 212, .y_px = 40, .vx_px_s = -2, .vy_px_s = 30, .spread_px = 0.5, .until = 400},
        };
        RfPlay play = {.actors = alike,
                       .n_actors = 2,
                       .frames = 400,
                       .rate_hz = 30,
                       .noise_px = 0.06,
                       .merge_px = 5,
                       .seed = seed};
        g_autoptr(RfPaths) paths = NULL;
        RfTrackScore score = link_play(&play, false, &paths);
        cut += paths->paths->len > 2;
        exchanged += paths->paths->len == 2 && score.jsc < 0.9;
    }
    g_test_message("of 40: cut %u times, exchanged %u times", cut, exchanged);
    g_assert_cmpuint(cut, >=, 4);
    g_assert_cmpuint(exchanged, <=, 4);
}

/* A picture shown twice is not a new measurement. */
static void test_repeats_are_bridged(void)
{
    RfPlay play = quiet_play();
    play.repeated_every = 7;
    play.false_spots = 0;
    g_autoptr(RfPaths) paths = NULL;
    RfTrackScore score = link_play(&play, true, &paths);
    g_assert_cmpfloat(score.jsc, >, 0.99);
    const RfPath *path = g_ptr_array_index(paths->paths, 0);
    for (unsigned k = 0; k < path->points->len; k++) {
        const RfPathPoint *p = &g_array_index(path->points, RfPathPoint, k);
        if (p->exposure % 7 == 0 && p->exposure > 0) g_assert_false(p->is_seen);
    }
}

static void test_moving_camera(void)
{
    RfPlay play = quiet_play();
    play.shake_px = 25;
    play.pixel_aspect = 16.0 / 15;
    RfTrackScore score = link_play(&play, true, NULL);
    g_assert_cmpfloat(score.jsc, >, 0.99);
    g_assert_cmpfloat(score.jsc_theta, ==, 1);
}

/* Measured rows are the spots themselves; the smoother lies nearer to the truth than they do, by as much as it says. */
static void test_smoothing_is_honest(void)
{
    RfPlay play = quiet_play();
    play.noise_px = 0.4;
    play.false_spots = 0;
    play.merge_px = 0;
    g_autoptr(GPtrArray) truth = NULL;
    g_autoptr(RfSightings) sightings = rf_spot_play_run(&play, &truth);
    g_autoptr(RfPaths) paths = rf_linker_run(sightings, &course, NULL, NULL);
    g_assert_cmpuint(paths->paths->len, ==, 3);
    double measured = 0, smooth = 0, pull = 0, n = 0;
    for (unsigned i = 0; i < 3; i++) {
        const RfPath *path = g_ptr_array_index(paths->paths, i);
        for (unsigned k = 0; k < path->points->len; k++) {
            const RfPathPoint *p = &g_array_index(path->points, RfPathPoint, k);
            for (unsigned t = 0; t < 3; t++) {
                const GArray *true_path = g_ptr_array_index(truth, t);
                if (p->exposure >= true_path->len) continue;
                const RfScorePoint *at = &g_array_index(true_path, RfScorePoint, p->exposure);
                if (!p->is_seen || fabs(at->x_px - p->x_px) > 5) continue;
                const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, p->spot);
                g_assert_cmpfloat(p->x_px, ==, (double)spot->x_px);
                measured += pow(p->x_px - at->x_px, 2);
                smooth += pow(p->smooth_x_px - at->x_px, 2);
                pull += pow((p->smooth_x_px - at->x_px) / p->u_smooth_x_px, 2);
                n++;
            }
        }
    }
    g_test_message("rms measured %.3f, smooth %.3f px, pull %.3f", sqrt(measured / n), sqrt(smooth / n),
                   sqrt(pull / n));
    g_assert_cmpfloat(n, >, 1300);
    g_assert_cmpfloat(smooth, <, 0.8 * measured);
    g_assert_cmpfloat_with_epsilon(sqrt(pull / n), 1, 0.07);
}

/* Brownian steps of sd s per frame: 2 D dt = s^2. */
static void test_spread_is_found(void)
{
    RfPlay play = quiet_play();
    g_autoptr(RfPaths) paths = NULL;
    link_play(&play, true, &paths);
    for (unsigned i = 0; i < 3; i++) {
        const RfPath *path = g_ptr_array_index(paths->paths, i);
        unsigned who = path->points->len == 0                                   ? 0
                       : g_array_index(path->points, RfPathPoint, 0).x_px < 200 ? 0
                       : g_array_index(path->points, RfPathPoint, 0).x_px < 400 ? 1
                                                                                : 2;
        double expected = quiet[who].spread_px * quiet[who].spread_px * play.rate_hz / 2;
        /* 600 steps in two axes: 4 % standard deviation */
        g_assert_cmpfloat_with_epsilon(path->diffusion_px2_s / expected, 1, 0.16);
    }
}

static bool are_same(const RfPaths *a, const RfPaths *b)
{
    if (a->paths->len != b->paths->len) return false;
    for (unsigned i = 0; i < a->paths->len; i++) {
        const GArray *p = ((const RfPath *)g_ptr_array_index(a->paths, i))->points;
        const GArray *q = ((const RfPath *)g_ptr_array_index(b->paths, i))->points;
        if (p->len != q->len) return false;
        for (unsigned k = 0; k < p->len; k++)
            if (g_array_index(p, RfPathPoint, k).spot != g_array_index(q, RfPathPoint, k).spot ||
                g_array_index(p, RfPathPoint, k).smooth_x_px != g_array_index(q, RfPathPoint, k).smooth_x_px)
                return false;
    }
    return true;
}

static void test_deterministic(void)
{
    RfPlay play = quiet_play();
    g_autoptr(RfPaths) a = NULL, b = NULL;
    link_play(&play, true, &a);
    link_play(&play, true, &b);
    g_assert_true(are_same(a, b));
}

static void test_thousand(void)
{
    enum { n = 1000, frames = 60 };
    g_autofree RfActor *crowd = g_new0(RfActor, n);
    for (int i = 0; i < n; i++)
        crowd[i] = (RfActor){.x_px = 30 + 50 * (i % 38),
                             .y_px = 20 + 38 * (double)(i / 38),
                             .vy_px_s = 20 + i % 7,
                             .spread_px = 0.4,
                             .until = frames};
    RfPlay play = {.actors = crowd,
                   .n_actors = n,
                   .frames = frames,
                   .rate_hz = 30,
                   .noise_px = 0.05,
                   .false_spots = 2,
                   .merge_px = 4,
                   .seed = 1,
                   .width = 1920,
                   .height = 1080};
    g_autoptr(GPtrArray) truth = NULL;
    g_autoptr(RfSightings) sightings = rf_spot_play_run(&play, &truth);
    gint64 start_us = g_get_monotonic_time();
    g_autoptr(RfPaths) paths = rf_linker_run(sightings, NULL, NULL, NULL);
    g_test_message("%d droplets: %.3f ms per frame, all stages", n,
                   (double)(g_get_monotonic_time() - start_us) / 1e3 / frames);
    g_assert_cmpuint(paths->paths->len, >=, 990);
    g_assert_cmpuint(paths->paths->len, <=, n);
}

static void test_refuses_disorder(void)
{
    GError *error = NULL;
    g_autoptr(RfSightings) sightings = rf_sightings_new(640, 480, 1);
    RfExposure exposures[] = {{.time_s = 1}, {.time_s = 0.5}};
    g_array_append_vals(sightings->exposures, exposures, 2);
    g_assert_null(rf_linker_run(sightings, NULL, NULL, &error));
    g_assert_error(error, RF_LINKER_ERROR, RF_LINKER_ERROR_ORDER);
    g_clear_error(&error);
    g_array_index(sightings->exposures, RfExposure, 1).time_s = 2;
    g_array_index(sightings->exposures, RfExposure, 1).spots = 3;
    g_assert_null(rf_linker_run(sightings, NULL, NULL, &error));
    g_assert_error(error, RF_LINKER_ERROR, RF_LINKER_ERROR_ORDER);
    g_clear_error(&error);
}

/* A chain that knows the middle of a droplet's life finds the beginning and then, undisturbed by that, the end. */
static void test_both_ends_are_filled(void)
{
    enum { frames = 31, known_from = 10, known_until = 21 };
    const RfActor actor = {
        .x_px = 100, .y_px = 60, .vy_px_s = 30, .response_px_s = 70, .spread_px = 0.5, .until = frames};
    RfPlay play = {
        .actors = &actor, .n_actors = 1, .frames = frames, .rate_hz = 30, .noise_px = 0.08, .seed = 7};
    g_autoptr(GPtrArray) truth = NULL;
    g_autoptr(RfSightings) sightings = rf_spot_play_run(&play, &truth);
    const RfLinkerOptions options = RF_LINKER_DEFAULTS;
    g_autoptr(RfLinkScene) scene = rf_link_scene_new(sightings, NULL, &options);
    g_autoptr(GPtrArray) chains = g_ptr_array_new_with_free_func((GDestroyNotify)rf_chain_free);
    RfChain *chain = rf_chain_new(scene);
    g_ptr_array_add(chains, chain);
    for (int e = known_from; e < known_until; e++) {
        RfHit hit = {(unsigned)e, e}; /* one spot an exposure */
        g_array_append_val(chain->hits, hit);
        scene->is_claimed[e] = true;
    }
    rf_fill_ends(scene, chains);
    g_assert_cmpuint(chain->hits->len, ==, frames);
    for (unsigned i = 0; i < frames; i++)
        g_assert_cmpuint(g_array_index(chain->hits, RfHit, i).exposure, ==, i);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/linker/run/nothing", test_nothing);
    g_test_add_func("/linker/run/noise-only", test_noise_only);
    g_test_add_func("/linker/run/specks", test_specks);
    g_test_add_func("/linker/run/frozen-noise", test_frozen_noise);
    g_test_add_func("/linker/run/sparse-residue", test_sparse_residue);
    g_test_add_func("/linker/run/faint-remainder", test_faint_remainder);
    g_test_add_func("/linker/run/quiet", test_quiet);
    g_test_add_func("/linker/run/reversal", test_reversal);
    g_test_add_func("/linker/run/crossing", test_crossing);
    g_test_add_func("/linker/run/merged-is-bridged", test_merged_is_bridged);
    g_test_add_func("/linker/run/seen-twice-after-a-jump", test_seen_twice_after_a_jump);
    g_test_add_func("/linker/run/gap-over-reversal", test_gap_over_reversal);
    g_test_add_func("/linker/run/wrong-course-ends-no-path", test_wrong_course_ends_no_path);
    g_test_add_func("/linker/run/long-absence-is-new-droplet", test_long_absence_is_new_droplet);
    g_test_add_func("/linker/run/edges", test_edges);
    g_test_add_func("/linker/run/undecidable-is-cut", test_undecidable_is_cut);
    g_test_add_func("/linker/run/repeats-are-bridged", test_repeats_are_bridged);
    g_test_add_func("/linker/run/moving-camera", test_moving_camera);
    g_test_add_func("/linker/run/smoothing-is-honest", test_smoothing_is_honest);
    g_test_add_func("/linker/run/spread-is-found", test_spread_is_found);
    g_test_add_func("/linker/run/deterministic", test_deterministic);
    g_test_add_func("/linker/run/thousand", test_thousand);
    g_test_add_func("/linker/fill/both-ends", test_both_ends_are_filled);
    g_test_add_func("/linker/run/refuses-disorder", test_refuses_disorder);
    return g_test_run();
}
