#include "cli/examine_combing.h"

#include <math.h>
#include <string.h>

#include "tracker/frame_feed.h"

enum { SAMPLE_FRAMES = 60, SAMPLE_SPACING_FRAMES = 8 };

/* A droplet's way through one frame. */
typedef struct {
    double x_px, y_px, step_x_px, step_y_px;
} Mover;

/* The frames are shown twice: once to learn what they are like when odd and even lines are taken apart, once to look
 * for the droplets in either. */
typedef struct {
    GHashTable *movers; /* frame index -> GArray of Mover */
    RfPictureSample *sample;
    RfSpotFinder *finder;
    RfSpotScratch *scratch;
    double information, sum, square; /* of the regression of the offset on the step */
    unsigned pairs;
    GError *error;
} Comb;

static RfFrame as_fields(const RfFrame *frame)
{
    RfFrame fields = *frame;
    fields.is_interlaced = fields.is_top_field_first = true;
    return fields;
}

static bool learn(const RfFrame *frame, int slot, void *user)
{
    (void)slot; /* they come in order */
    Comb *comb = user;
    const RfFrame fields = as_fields(frame);
    return rf_picture_sample_add(comb->sample, &fields, &comb->error) &&
           rf_picture_sample_frames(comb->sample) < rf_picture_sample_capacity(frame);
}

/* The one spot of an exposure near a place; NULL where there is none, or more than one. */
static const RfSpot *spot_near(const RfLook *look, int exposure, const Mover *mover)
{
    static const double REACH_PX = 3;
    const RfExposure *taken = &look->exposure[exposure];
    const RfSpot *found = NULL;
    for (unsigned i = taken->first_spot; i < taken->first_spot + taken->spots; i++) {
        const RfSpot *spot = &g_array_index(look->spots, RfSpot, i);
        if (hypot((double)spot->x_px - mover->x_px, (double)spot->y_px - mover->y_px) > REACH_PX) continue;
        if (found) return NULL;
        found = spot;
    }
    return found;
}

static void add_pair(Comb *comb, const Mover *mover, const RfSpot *first, const RfSpot *second)
{
    const double variance_x = (double)(first->u_x_px * first->u_x_px + second->u_x_px * second->u_x_px);
    const double variance_y = (double)(first->u_y_px * first->u_y_px + second->u_y_px * second->u_y_px);
    const double off_x = (double)(second->x_px - first->x_px), off_y = (double)(second->y_px - first->y_px);
    comb->information +=
        mover->step_x_px * mover->step_x_px / variance_x + mover->step_y_px * mover->step_y_px / variance_y;
    comb->sum += mover->step_x_px * off_x / variance_x + mover->step_y_px * off_y / variance_y;
    comb->square += off_x * off_x / variance_x + off_y * off_y / variance_y;
    comb->pairs++;
}

static bool look_apart(const RfFrame *frame, int slot, void *user)
{
    (void)slot;
    Comb *comb = user;
    const GArray *movers = g_hash_table_lookup(comb->movers, &frame->index);
    if (!movers) return true;
    const RfFrame fields = as_fields(frame);
    RfLook look;
    rf_look_init(&look);
    const bool is_well = rf_spot_finder_look(comb->finder, comb->scratch, &fields, 0, &look, &comb->error);
    for (guint i = 0; is_well && look.exposures == 2 && i < movers->len; i++) {
        const Mover *mover = &g_array_index(movers, Mover, i);
        const RfSpot *first = spot_near(&look, 0, mover), *second = spot_near(&look, 1, mover);
        if (first && second) add_pair(comb, mover, first, second);
    }
    rf_look_clear(&look);
    return is_well;
}

/* ---- who moves where ---- */

static void add_mover(GHashTable *movers, int64_t frame, const Mover *mover)
{
    GArray *here = g_hash_table_lookup(movers, &frame);
    if (!here) {
        here = g_array_new(FALSE, FALSE, sizeof(Mover));
        g_hash_table_insert(movers, g_memdup2(&frame, sizeof frame), here);
    }
    g_array_append_val(here, *mover);
}

/* Steps are the smoothed path's: those of single measurements are mostly noise. */
static void add_path(GHashTable *movers, const RfSightings *sightings, const RfPath *path)
{
    for (guint i = 1; i + 1 < path->points->len; i++) {
        const RfPathPoint *at = &g_array_index(path->points, RfPathPoint, i), *before = at - 1,
                          *after = at + 1;
        if (!at->is_seen) continue;
        const Mover mover = {at->smooth_x_px, at->smooth_y_px,
                             0.5 * (after->smooth_x_px - before->smooth_x_px),
                             0.5 * (after->smooth_y_px - before->smooth_y_px)};
        add_mover(movers, g_array_index(sightings->exposures, RfExposure, at->exposure).frame, &mover);
    }
}

static bool show(Comb *comb, const RfVideoFile *video, bool (*take)(const RfFrame *, int, void *),
                 GError **error)
{
    const RfSampling how = {SAMPLE_FRAMES, SAMPLE_SPACING_FRAMES, .threads = 1, .take = take, .user = comb};
    const bool is_shown = rf_frame_feed_sample(video, &how, error);
    if (!comb->error) return is_shown;
    g_propagate_error(error, g_steal_pointer(&comb->error));
    return false;
}

/* Compression makes the scatter differ from the stated one: the sigma is widened by what is seen. */
static RfValue slope_of(const Comb *comb)
{
    enum { PAIRS_LEAST = 20 };
    if (comb->pairs < PAIRS_LEAST || !(comb->information > 0)) return (RfValue){0, 0};
    const double slope = comb->sum / comb->information;
    const double excess = (comb->square - slope * comb->sum) / (2.0 * comb->pairs - 1);
    return (RfValue){slope, sqrt(fmax(1, excess) / comb->information)};
}

bool rf_examine_combing(const RfWatch *watch, const RfPaths *paths, RfValue *combing, GError **error)
{
    g_autoptr(GHashTable) movers =
        g_hash_table_new_full(g_int64_hash, g_int64_equal, g_free, (GDestroyNotify)g_array_unref);
    for (guint i = 0; i < paths->paths->len; i++)
        add_path(movers, watch->sightings, g_ptr_array_index(paths->paths, i));
    *combing = (RfValue){0, 0};
    if (g_hash_table_size(movers) == 0) return true;
    g_autoptr(RfPictureSample) sample = rf_picture_sample_new(watch->sightings->pixel_aspect);
    Comb comb = {.movers = movers, .sample = sample};
    if (!show(&comb, watch->video, learn, error)) return false;
    g_autoptr(RfSpotFinder) finder = rf_spot_finder_learn(sample, NULL, error);
    if (!finder) return false;
    g_autoptr(RfSpotScratch) scratch = rf_spot_scratch_new(finder);
    comb.finder = finder;
    comb.scratch = scratch;
    if (!show(&comb, watch->video, look_apart, error)) return false;
    *combing = slope_of(&comb);
    return true;
}
