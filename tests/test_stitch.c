#include "tracker/stitch.h"

#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>

enum { EXPOSURES = 240, LOST = 100, FOUND = 138 }; /* unseen for 1.27 s of at most 1 */

static void add_spot(RfSightings *sightings, gsl_rng *random, double x_px, double y_px, double peak)
{
    RfSpot spot = {.x_px = (float)(x_px + gsl_ran_gaussian(random, 0.1)),
                   .y_px = (float)(y_px + gsl_ran_gaussian(random, 0.1)),
                   .u_x_px = 0.1f,
                   .u_y_px = 0.1f,
                   .peak = (float)peak,
                   .snr = (float)peak,
                   .width_px = 1.8f};
    g_array_append_val(sightings->spots, spot);
}

static void append_hit(RfChain *chain, unsigned exposure, unsigned spot)
{
    RfHit hit = {exposure, (int)spot};
    g_array_append_val(chain->hits, hit);
}

/* Two droplets sink side by side; the fainter is not seen between LOST and FOUND. Returns how many chains the three become. */
static unsigned chains_left(double companion_peak, bool is_companion_near, bool is_cut_after,
                            bool is_cut_before)
{
    g_autoptr(RfSightings) sightings = rf_sightings_new(640, 480, 1);
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20260000);
    for (int e = 0; e < EXPOSURES; e++) {
        unsigned first = sightings->spots->len;
        add_spot(sightings, random, is_companion_near ? 204 : 400, 50 + e, companion_peak);
        if (e <= LOST || e >= FOUND) add_spot(sightings, random, 200, 51 + e, 15);
        RfExposure exposure = {
            .frame = e, .time_s = e / 30.0, .first_spot = first, .spots = sightings->spots->len - first};
        g_array_append_val(sightings->exposures, exposure);
    }
    gsl_rng_free(random);
    const RfLinkerOptions options = RF_LINKER_DEFAULTS;
    g_autoptr(RfLinkScene) scene = rf_link_scene_new(sightings, NULL, &options);
    g_autoptr(GPtrArray) chains = g_ptr_array_new_with_free_func((GDestroyNotify)rf_chain_free);
    RfChain *before = rf_chain_new(scene), *after = rf_chain_new(scene), *companion = rf_chain_new(scene);
    for (unsigned e = 0; e < EXPOSURES; e++) {
        const RfExposure *exposure = rf_link_scene_exposure(scene, e);
        append_hit(companion, e, exposure->first_spot);
        if (exposure->spots > 1) append_hit(e <= LOST ? before : after, e, exposure->first_spot + 1);
    }
    before->is_cut_after = is_cut_after;
    after->is_cut_before = is_cut_before;
    g_ptr_array_add(chains, before);
    g_ptr_array_add(chains, companion);
    g_ptr_array_add(chains, after);
    rf_stitch_chains(scene, chains);
    return chains->len;
}

/* Known at one end to have been in another's spot, it may come out as if from nowhere, or go in unnoticed. */
static void test_hidden_by_companion_is_bridged(void)
{
    g_assert_cmpuint(chains_left(100, true, true, true), ==, 2);
    g_assert_cmpuint(chains_left(100, true, true, false), ==, 2);
    g_assert_cmpuint(chains_left(100, true, false, true), ==, 2);
}

static void test_long_absence_is_not(void)
{
    g_assert_cmpuint(chains_left(100, true, false, false), ==, 3);
    g_assert_cmpuint(chains_left(100, false, true, false), ==, 3); /* nobody there to be hidden by */
    g_assert_cmpuint(chains_left(25, true, true, false), ==, 3);   /* nobody bright enough */
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    gsl_set_error_handler_off();
    g_test_add_func("/stitch/chains/hidden-by-companion-is-bridged", test_hidden_by_companion_is_bridged);
    g_test_add_func("/stitch/chains/long-absence-is-not", test_long_absence_is_not);
    return g_test_run();
}
