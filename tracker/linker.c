#include "tracker/linker.h"

#include "tracker/fill.h"
#include "tracker/link_pass.h"
#include "tracker/path_build.h"
#include "tracker/stitch.h"
#include "tracker/twice_seen.h"

G_DEFINE_QUARK(rf - linker - error - quark, rf_linker_error)

static bool check_exposure(const RfSightings *sightings, unsigned e, double last_s, uint64_t next_spot,
                           GError **error)
{
    const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, e);
    if (e > 0 && exposure->time_s < last_s) {
        g_set_error(error, RF_LINKER_ERROR, RF_LINKER_ERROR_ORDER,
                    "exposure %u at %.6f s follows one at %.6f s; exposures need rising times", e,
                    exposure->time_s, last_s);
        return false;
    }
    if (exposure->first_spot < next_spot ||
        (uint64_t)exposure->first_spot + exposure->spots > sightings->spots->len) {
        g_set_error(error, RF_LINKER_ERROR, RF_LINKER_ERROR_ORDER,
                    "exposure %u has spots %u to %" G_GUINT64_FORMAT " of %u; need spots of its own", e,
                    exposure->first_spot, (uint64_t)exposure->first_spot + exposure->spots,
                    sightings->spots->len);
        return false;
    }
    return true;
}

static bool check_sightings(const RfSightings *sightings, GError **error)
{
    double last_s = 0;
    uint64_t next_spot = 0;
    for (unsigned e = 0; e < sightings->exposures->len; e++) {
        if (!check_exposure(sightings, e, last_s, next_spot, error)) return false;
        const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, e);
        last_s = exposure->time_s;
        next_spot = (uint64_t)exposure->first_spot + exposure->spots;
    }
    return true;
}

RfPaths *rf_linker_run(const RfSightings *sightings, const RfFieldCourse *field,
                       const RfLinkerOptions *options, GError **error)
{
    const RfLinkerOptions defaults = RF_LINKER_DEFAULTS;
    if (!check_sightings(sightings, error)) return NULL;
    g_autoptr(RfLinkScene) scene = rf_link_scene_new(sightings, field, options ? options : &defaults);
    g_autoptr(GPtrArray) chains = rf_link_pass_run(scene);
    rf_twice_seen_release(scene, chains);
    unsigned undecided = rf_stitch_chains(scene, chains);
    rf_fill_gaps(scene, chains);
    rf_fill_gaps(scene, chains); /* what the first round found narrows the rest */
    rf_fill_ends(scene, chains);
    rf_fill_release_shared(scene, chains);
    RfPaths *paths = rf_path_build(scene, chains);
    paths->cuts = undecided;
    return paths;
}
