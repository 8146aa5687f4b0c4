#include "cli/simulate_film.h"

#include <gsl/gsl_randist.h>
#include <math.h>

enum { MOMENTS = 6 }; /* at which an exposure looks at a droplet */

static const double visible_snr = 3, visible_margin_px = 3;
static const double faintest_snr = 1.5; /* below it nobody could say that it is still there */
static const double gone_margin_px = 20, gone_after_s = 1.2; /* then another droplet may enter */

typedef struct {
    const RfFilm *film;
    RfRecord *record;
    gsl_rng *bodies, *motion, *camera;
    GArray *on_stage; /* Actor */
    GArray *dust;     /* Speck */
    double now_s;     /* up to here every body has moved */
    RfPose pose;
    double pose_s;
} Play;

typedef struct {
    RfLife *life;
    bool is_drawn;          /* not laid down by hand */
    double outside_since_s; /* infinite: in view */
} Actor;

typedef struct { /* rests on a window of the cell */
    RfPixel px;
    double flux, width_px;
} Speck;

static void mark_repeats(GArray *times, const RfScene *scene, gsl_rng *random)
{
    for (int i = 0; i < scene->repeated && times->len > 2; i++) {
        unsigned place = 1 + (unsigned)gsl_rng_uniform_int(random, times->len - 1);
        g_array_index(times, RfFilmTime, place).is_repeated = true;
    }
}

GArray *rf_simulate_film_times(const RfScene *scene)
{
    GArray *times = g_array_new(FALSE, FALSE, sizeof(RfFilmTime));
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_CLOCK);
    double interval_s = 1 / scene->frame_rate_hz, wait_s = 0;
    int64_t frames = (int64_t)floor(scene->duration_s * scene->frame_rate_hz + 1e-9);
    for (int64_t i = 0; i < MAX(frames, 1); i++) {
        RfFilmTime time = {.time_s = scene->rate_jitter > 0 ? wait_s : (double)i * interval_s};
        g_array_append_val(times, time);
        double late = CLAMP(gsl_ran_gaussian(random, scene->rate_jitter), -0.8, 3);
        wait_s += interval_s * (1 + late);
    }
    for (int i = 0; i < scene->dropped && times->len > 4; i++)
        g_array_remove_index(times, 1 + (unsigned)gsl_rng_uniform_int(random, times->len - 2));
    mark_repeats(times, scene, random);
    gsl_rng_free(random);
    return times;
}

static void enter(Play *play, RfBody *body, bool is_drawn)
{
    Actor actor = {.life = rf_simulate_record_add(play->record, body),
                   .is_drawn = is_drawn,
                   .outside_since_s = HUGE_VAL};
    g_array_append_val(play->on_stage, actor);
}

static int draw_units(const RfScene *scene, gsl_rng *random)
{
    unsigned long span = (unsigned long)(scene->units_high - scene->units_low + 1);
    int units = scene->units_low + (int)gsl_rng_uniform_int(random, span);
    bool is_minus = gsl_rng_uniform(random) < 0.5;
    if (scene->sign != RF_SCENE_SIGN_BOTH) is_minus = scene->sign == RF_SCENE_SIGN_MINUS;
    return is_minus ? -units : units;
}

static RfBody *draw_body(Play *play, double birth_s)
{
    const RfScene *scene = play->film->scene;
    g_autoptr(GArray) spells = g_array_new(FALSE, FALSE, sizeof(RfSpell));
    RfSpell spell = {.time_s = -HUGE_VAL, .units = draw_units(scene, play->bodies)};
    g_array_append_val(spells, spell);
    double radius_m = rf_simulate_world_draw(scene->radius_m, play->bodies);
    double brightness = rf_simulate_world_draw(scene->brightness, play->bodies);
    RfBody *body = rf_simulate_motion_body_new(birth_s, radius_m, brightness, spells);
    body->evaporation_m2_s = scene->evaporation_m2_s;
    body->depth_range_m = scene->depth_range_m;
    body->place.depth_m = scene->depth_range_m * (2 * gsl_rng_uniform(play->bodies) - 1);
    rf_simulate_motion_add_steps(body, play->film->world, scene->steps_hz, scene->duration_s, play->bodies);
    return body;
}

static void put_at(const RfFilm *film, RfBody *body, double x_px, double y_px)
{
    RfPlace place = rf_simulate_view_place(film->view, (RfPixel){x_px, y_px});
    body->place.fall_m = place.fall_m;
    body->place.drift_m = place.drift_m;
}

static void start_drawn(Play *play)
{
    const RfScene *scene = play->film->scene;
    for (int i = 0; i < scene->count; i++) {
        RfBody *body = draw_body(play, play->now_s);
        double x = 0.05 + 0.9 * gsl_rng_uniform(play->bodies), y = 0.05 + 0.9 * gsl_rng_uniform(play->bodies);
        put_at(play->film, body, x * scene->width, y * scene->height);
        enter(play, body, true);
    }
}

static void start_by_hand(Play *play)
{
    const RfScene *scene = play->film->scene;
    for (unsigned i = 0; i < scene->by_hand->len; i++) {
        const RfSceneDroplet *given = &g_array_index(scene->by_hand, RfSceneDroplet, i);
        RfBody *body =
            rf_simulate_motion_body_new(play->now_s, given->radius_m, given->brightness, given->spells);
        body->evaporation_m2_s = scene->evaporation_m2_s;
        body->place.depth_m = given->depth_m;
        put_at(play->film, body, given->x_px, given->y_px);
        enter(play, body, false);
    }
}

static double flux_of(const RfFilm *film, double peak)
{
    double sd_px = film->scene->point_spread_px;
    return peak * 2 * G_PI * sd_px * sd_px / film->scene->pixel_aspect;
}

static void scatter_dust(Play *play)
{
    const RfScene *scene = play->film->scene;
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_PICTURE);
    for (int i = 0; i < scene->dust; i++) {
        Speck speck = {
            .px = {gsl_rng_uniform(random) * scene->width, gsl_rng_uniform(random) * scene->height},
            .flux = flux_of(play->film, 20 + 80 * gsl_rng_uniform(random)),
            .width_px = scene->point_spread_px * (0.8 + 0.8 * gsl_rng_uniform(random))};
        g_array_append_val(play->dust, speck);
    }
    gsl_rng_free(random);
}

/* Just outside the edge from which it would come into view now. */
static void place_entering(Play *play, RfBody *body)
{
    const RfFilm *film = play->film;
    const RfView *view = film->view;
    double push = rf_simulate_motion_mean_push(body, film->world, play->now_s, play->now_s + 1);
    double drag_kg_s = rf_drag_coefficient_kg_s(&film->world->medium, body->radius_m);
    double speed_m_s = rf_drag_settling_speed_m_s(&film->world->medium, body->radius_m) +
                       push / (drag_kg_s * film->world->medium.plate_gap_m);
    double tall_px = fabs(view->gravity_y) * view->height + fabs(view->gravity_x) * view->width;
    double wide_px = fabs(view->gravity_x) * view->height + fabs(view->gravity_y) * view->width;
    double away_m = (0.5 * tall_px + 6) / view->scale_px_m;
    body->place.fall_m = speed_m_s > 0 ? -away_m : away_m;
    body->place.drift_m = (gsl_rng_uniform(play->bodies) - 0.5) * 0.9 * wide_px / view->scale_px_m;
}

static void refill(Play *play)
{
    for (unsigned i = 0; i < play->on_stage->len; i++) {
        Actor *actor = &g_array_index(play->on_stage, Actor, i);
        if (!actor->is_drawn || play->now_s - actor->outside_since_s < gone_after_s) continue;
        RfBody *body = draw_body(play, play->now_s);
        place_entering(play, body);
        actor->life = rf_simulate_record_add(play->record, body);
        actor->outside_since_s = HUGE_VAL;
    }
}

/* Shaking hands as two Ornstein-Uhlenbeck walks and one of the angle, up to time_s. */
static void move_camera(Play *play, double time_s)
{
    const RfScene *scene = play->film->scene;
    double keep = exp(-MAX(time_s - play->pose_s, 0) / scene->wander_time_s), fresh = sqrt(1 - keep * keep);
    double x = gsl_ran_gaussian(play->camera, 1), y = gsl_ran_gaussian(play->camera, 1);
    double angle = gsl_ran_gaussian(play->camera, 1);
    play->pose.shift_x_px = keep * play->pose.shift_x_px + fresh * x * scene->wander_px / scene->pixel_aspect;
    play->pose.shift_y_px = keep * play->pose.shift_y_px + fresh * y * scene->wander_px;
    play->pose.angle_rad = keep * play->pose.angle_rad + fresh * angle * scene->wander_rad;
    play->pose_s = time_s;
}

/* Mean over the exposure of a lamp that drifts evenly and flickers as a sine. */
static double lamp_at(const RfScene *scene, double time_s, double exposure_s)
{
    double half = G_PI * scene->flicker_rate_hz * exposure_s;
    double kept = half > 1e-9 ? sin(half) / half : 1;
    return (1 + scene->lamp_drift * time_s / scene->duration_s) *
           (1 + scene->flicker * kept * sin(2 * G_PI * scene->flicker_rate_hz * time_s));
}

static void mark_outside(const Play *play, Actor *actor, RfPixel reference_px, double time_s)
{
    bool is_outside = !rf_simulate_view_contains(play->film->view, reference_px, -gone_margin_px);
    if (!is_outside)
        actor->outside_since_s = HUGE_VAL;
    else if (isinf(actor->outside_since_s))
        actor->outside_since_s = time_s;
}

static void show_actor(Play *play, Actor *actor, const RfPlace moments[MOMENTS], RfSeenAt at)
{
    const RfFilm *film = play->film;
    RfPixel centres[MOMENTS];
    double depth_m = 0;
    for (int m = 0; m < MOMENTS; m++) {
        RfPixel reference = rf_simulate_view_reference_px(film->view, &moments[m]);
        centres[m] = rf_simulate_view_posed_px(film->view, &play->pose, reference);
        at.reference_px.x += reference.x / MOMENTS;
        at.reference_px.y += reference.y / MOMENTS;
        at.px.x += centres[m].x / MOMENTS;
        at.px.y += centres[m].y / MOMENTS;
        depth_m += moments[m].depth_m / MOMENTS;
    }
    double defocus = depth_m / film->scene->depth_of_focus_m;
    double width_px = film->scene->point_spread_px * sqrt(1 + defocus * defocus);
    RfSpotBound seen = rf_simulate_render_spot(film->renderer, centres, MOMENTS,
                                               flux_of(film, actor->life->body->brightness), width_px);
    at.snr = seen.snr;
    at.bound_px = seen.bound_px;
    at.is_in_view = seen.snr >= faintest_snr && rf_simulate_view_contains(film->view, at.px, 0);
    at.is_visible = at.is_in_view && seen.snr >= visible_snr &&
                    rf_simulate_view_contains(film->view, at.px, visible_margin_px);
    g_array_append_val(actor->life->seen, at);
    mark_outside(play, actor, at.reference_px, at.time_s);
}

static void expose(Play *play, RfSeenAt at)
{
    const RfFilm *film = play->film;
    g_autofree RfPlace *places = g_new(RfPlace, MOMENTS * MAX(play->on_stage->len, 1));
    for (int m = 0; m < MOMENTS; m++) {
        double moment_s = at.time_s + play->record->exposure_s * ((m + 0.5) / MOMENTS - 0.5);
        for (unsigned i = 0; i < play->on_stage->len; i++) {
            RfBody *body = g_array_index(play->on_stage, Actor, i).life->body;
            if (moment_s > play->now_s)
                rf_simulate_motion_advance(body, film->world, play->now_s, moment_s, play->motion);
            places[i * MOMENTS + (unsigned)m] = body->place;
        }
        play->now_s = MAX(play->now_s, moment_s);
    }
    move_camera(play, at.time_s);
    rf_simulate_render_begin(film->renderer, &play->pose,
                             lamp_at(film->scene, at.time_s, play->record->exposure_s));
    for (unsigned i = 0; i < play->dust->len; i++) {
        const Speck *speck = &g_array_index(play->dust, Speck, i);
        RfPixel px = rf_simulate_view_posed_px(film->view, &play->pose, speck->px);
        rf_simulate_render_spot(film->renderer, &px, 1, speck->flux, speck->width_px);
    }
    for (unsigned i = 0; i < play->on_stage->len; i++)
        show_actor(play, &g_array_index(play->on_stage, Actor, i), &places[i * MOMENTS], at);
}

/* The truth of a repeated picture is where the droplet stands in that picture, one exposure late. */
static void repeat_rows(Play *play, int64_t frame, double time_s)
{
    for (unsigned i = 0; i < play->on_stage->len; i++) {
        GArray *seen = g_array_index(play->on_stage, Actor, i).life->seen;
        int fields = play->film->scene->is_interlaced ? 2 : 1;
        unsigned from = seen->len;
        for (int f = 0; f < fields && from >= (unsigned)fields; f++) {
            RfSeenAt at = g_array_index(seen, RfSeenAt, from - (unsigned)(fields - f));
            at.frame = frame;
            at.time_s = time_s + f * play->record->exposure_interval_s;
            at.is_repeated = true;
            g_array_append_val(seen, at);
        }
    }
}

static void take_frame(Play *play, int64_t frame, const RfFilmTime *time)
{
    const RfScene *scene = play->film->scene;
    int fields = scene->is_interlaced ? 2 : 1;
    if (time->is_repeated) {
        repeat_rows(play, frame, time->time_s);
        return;
    }
    if (scene->is_refilled) refill(play);
    for (int f = 0; f < fields; f++) {
        double time_s = time->time_s + f * play->record->exposure_interval_s;
        expose(play, (RfSeenAt){.frame = frame, .time_s = time_s, .field = (uint8_t)f});
        rf_simulate_render_finish(play->film->renderer, f, fields);
    }
}

static void start(Play *play)
{
    const RfScene *scene = play->film->scene;
    RfRecord *record = play->record;
    record->exposure_interval_s = 1 / scene->frame_rate_hz / (scene->is_interlaced ? 2 : 1);
    record->exposure_s = scene->exposure * record->exposure_interval_s;
    record->scale_px_m = play->film->view->scale_px_m;
    play->now_s = -record->exposure_s / 2 - 1e-6;
    play->pose_s = -1e9; /* so that the first pose is drawn from the whole distribution */
    start_by_hand(play);
    start_drawn(play);
    scatter_dust(play);
}

static bool run(Play *play, const GArray *times, RfFilmFrame on_frame, void *user, GError **error)
{
    for (unsigned i = 0; i < times->len; i++) {
        const RfFilmTime *time = &g_array_index(times, RfFilmTime, i);
        take_frame(play, i, time);
        ptrdiff_t stride_bytes;
        const void *pixels = rf_simulate_render_picture(play->film->renderer, &stride_bytes);
        if (on_frame && !on_frame(pixels, stride_bytes, time->time_s, i, user, error)) return false;
        play->record->last_s = time->time_s;
    }
    play->record->frames = times->len;
    rf_simulate_record_cut(play->record);
    return true;
}

bool rf_simulate_film_play(const RfFilm *film, RfRecord *record, RfFilmFrame on_frame, void *user,
                           GError **error)
{
    Play play = {.film = film, .record = record};
    play.bodies = rf_simulate_world_stream(film->scene, RF_STREAM_BODIES);
    play.motion = rf_simulate_world_stream(film->scene, RF_STREAM_MOTION);
    play.camera = rf_simulate_world_stream(film->scene, RF_STREAM_CAMERA);
    play.on_stage = g_array_new(FALSE, FALSE, sizeof(Actor));
    play.dust = g_array_new(FALSE, FALSE, sizeof(Speck));
    g_autoptr(GArray) times = rf_simulate_film_times(film->scene);
    start(&play);
    bool ok = run(&play, times, on_frame, user, error);
    gsl_rng_free(play.bodies);
    gsl_rng_free(play.motion);
    gsl_rng_free(play.camera);
    g_array_unref(play.on_stage);
    g_array_unref(play.dust);
    return ok;
}
