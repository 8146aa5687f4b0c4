#include "tests/support/spot_play.h"

#include <gsl/gsl_randist.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

#include "tests/support/track_score.h"

typedef struct {
    const RfPlay *play;
    gsl_rng *random;
    RfSightings *sightings;
    double (*place)[2]; /* of each actor, now: square pixels of the reference picture */
    bool *is_there, *is_seen;
} Stage;

static void move(Stage *stage, unsigned i, int frame)
{
    const RfActor *actor = &stage->play->actors[i];
    double dt_s = 1 / stage->play->rate_hz;
    double field_s = rf_field_course_integral_s(&stage->play->field, (frame - 1) * dt_s, frame * dt_s);
    if (frame == actor->from) {
        stage->place[i][0] = actor->x_px;
        stage->place[i][1] = actor->y_px;
        return;
    }
    stage->place[i][0] += actor->vx_px_s * dt_s + gsl_ran_gaussian(stage->random, actor->spread_px);
    stage->place[i][1] += actor->vy_px_s * dt_s + actor->response_px_s * field_s +
                          gsl_ran_gaussian(stage->random, actor->spread_px);
}

static RfPose pose_at(const RfPlay *play, int frame)
{
    double phase = 2 * G_PI * frame / 90;
    return (RfPose){play->shake_px * sin(phase), play->shake_px * cos(1.3 * phase),
                    play->shake_px * 1e-3 * sin(0.7 * phase)};
}

static void add_spot(Stage *stage, const RfPose *pose, const double at_px[2], double peak)
{
    const RfPlay *play = stage->play;
    double x_px, y_px, u_px = play->stated_px > 0 ? play->stated_px : play->noise_px;
    rf_pose_from_reference(pose, stage->sightings, at_px[0] / stage->sightings->pixel_aspect, at_px[1], &x_px,
                           &y_px);
    x_px += gsl_ran_gaussian(stage->random, play->noise_px);
    y_px += gsl_ran_gaussian(stage->random, play->noise_px);
    RfSpot spot = {.x_px = (float)x_px,
                   .y_px = (float)y_px,
                   .u_x_px = (float)u_px,
                   .u_y_px = (float)u_px,
                   .width_px = 1.7f,
                   .peak = (float)(peak * (1 + gsl_ran_gaussian(stage->random, 0.05))),
                   .snr = (float)(peak / 3)};
    g_array_append_val(stage->sightings->spots, spot);
}

/* Each visible actor that is nobody's companion, in the middle of those that merge with it. */
static void show_actors(Stage *stage, const RfPose *pose)
{
    const RfPlay *play = stage->play;
    g_autofree bool *is_told = g_new0(bool, play->n_actors + 1);
    for (unsigned i = 0; i < play->n_actors; i++) {
        if (is_told[i] || !stage->is_seen[i]) continue;
        double sum[2] = {stage->place[i][0], stage->place[i][1]}, n = 1, peak = play->actors[i].peak;
        for (unsigned j = i + 1; j < play->n_actors; j++) {
            if (is_told[j] || !stage->is_seen[j] ||
                hypot(stage->place[i][0] - stage->place[j][0], stage->place[i][1] - stage->place[j][1]) >=
                    play->merge_px)
                continue;
            is_told[j] = true;
            sum[0] += stage->place[j][0];
            sum[1] += stage->place[j][1];
            n++;
        }
        if (gsl_rng_uniform(stage->random) >= play->miss)
            add_spot(stage, pose, (double[]){sum[0] / n, sum[1] / n}, n * (peak > 0 ? peak : 60));
    }
}

static void show_noise(Stage *stage, const RfPose *pose)
{
    unsigned n = gsl_ran_poisson(stage->random, stage->play->false_spots);
    for (unsigned i = 0; i < n; i++) {
        double x = stage->sightings->width * stage->sightings->pixel_aspect * gsl_rng_uniform(stage->random);
        double y = stage->sightings->height * gsl_rng_uniform(stage->random);
        add_spot(stage, pose, (double[]){x, y}, 12);
    }
}

static int compare_spots(const void *a, const void *b)
{
    const RfSpot *p = a, *q = b;
    return p->y_px != q->y_px ? (p->y_px < q->y_px ? -1 : 1) : (p->x_px > q->x_px) - (p->x_px < q->x_px);
}

static void note_truth(const Stage *stage, int frame, GPtrArray *truth)
{
    for (unsigned i = 0; i < stage->play->n_actors; i++) {
        RfScorePoint point = {frame, stage->place[i][0], stage->place[i][1]};
        if (stage->is_there[i]) g_array_append_val((GArray *)g_ptr_array_index(truth, i), point);
    }
}

static void play_frame(Stage *stage, int frame, GPtrArray *truth)
{
    const RfPlay *play = stage->play;
    RfSightings *s = stage->sightings;
    for (unsigned i = 0; i < play->n_actors; i++) {
        const RfActor *actor = &play->actors[i];
        bool exists = frame >= actor->from && frame < actor->until;
        if (exists) move(stage, i, frame);
        stage->is_there[i] = exists && stage->place[i][0] > 0 && stage->place[i][1] > 0 &&
                             stage->place[i][0] < s->width * s->pixel_aspect &&
                             stage->place[i][1] < s->height;
        stage->is_seen[i] =
            stage->is_there[i] && !(frame >= actor->hidden_from && frame < actor->hidden_until);
    }
    note_truth(stage, frame, truth);
    RfExposure exposure = {.frame = frame, .time_s = frame / play->rate_hz, .pose = pose_at(play, frame)};
    exposure.first_spot = s->spots->len;
    show_actors(stage, &exposure.pose);
    show_noise(stage, &exposure.pose);
    exposure.spots = s->spots->len - exposure.first_spot;
    if (play->repeated_every > 0 && frame > 0 && frame % play->repeated_every == 0) {
        const RfExposure *before = &g_array_index(s->exposures, RfExposure, s->exposures->len - 1);
        g_array_set_size(s->spots, exposure.first_spot);
        for (unsigned i = 0; i < before->spots; i++) {
            RfSpot spot = g_array_index(s->spots, RfSpot, before->first_spot + i);
            g_array_append_val(s->spots, spot);
        }
        exposure.spots = before->spots;
        exposure.flags = RF_EXPOSURE_REPEATED;
    }
    if (exposure.spots > 0)
        qsort(&g_array_index(s->spots, RfSpot, exposure.first_spot), exposure.spots, sizeof(RfSpot),
              compare_spots);
    g_array_append_val(s->exposures, exposure);
}

RfSightings *rf_spot_play_run(const RfPlay *play, GPtrArray **truth)
{
    Stage stage = {.play = play, .random = gsl_rng_alloc(gsl_rng_mt19937)};
    gsl_rng_set(stage.random, play->seed);
    stage.sightings = rf_sightings_new(play->width ? play->width : 640, play->height ? play->height : 480,
                                       play->pixel_aspect > 0 ? play->pixel_aspect : 1);
    stage.place = g_malloc0_n(play->n_actors + 1, sizeof *stage.place);
    stage.is_there = g_new0(bool, play->n_actors + 1);
    stage.is_seen = g_new0(bool, play->n_actors + 1);
    *truth = g_ptr_array_new_with_free_func((GDestroyNotify)g_array_unref);
    for (unsigned i = 0; i < play->n_actors; i++)
        g_ptr_array_add(*truth, g_array_new(false, false, sizeof(RfScorePoint)));
    for (int frame = 0; frame < play->frames; frame++) play_frame(&stage, frame, *truth);
    gsl_rng_free(stage.random);
    g_free(stage.place);
    g_free(stage.is_there);
    g_free(stage.is_seen);
    return stage.sightings;
}
