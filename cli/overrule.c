#include "cli/overrule.h"

#include "cli/review_paths.h"
#include "cli/review_verdicts.h"

static void swap_paths(RfResults *results, GArray *paths)
{
    g_array_unref(results->paths);
    results->paths = paths;
}

/* A person decides on what a report without the review shows: paths that the program has cut where they passed to
 * another droplet are cut for the review too, and it may join them again. */
static void start_from(RfResults *results, const RfResults *without)
{
    g_ptr_array_unref(results->cuts);
    results->cuts = g_ptr_array_ref(without->cuts);
    swap_paths(results, rf_review_paths_apply(results->paths, results->review));
}

bool rf_overrule_measure(RfResults *results, const RfChargeInputs *inputs, const RfSupply *supply,
                         int threads, GError **error)
{
    if (results->review->len == 0) return rf_measure_paths(results, inputs, supply, threads, error);
    RfResults *without = rf_results_new();
    results->without = without;
    swap_paths(without, g_array_ref(results->paths)); /* the same rows: the program's cuts are in both */
    if (!rf_measure_paths(without, inputs, supply, threads, error)) return false;
    start_from(results, without);
    swap_paths(without, g_array_new(FALSE, TRUE, sizeof(RfPathRow))); /* they can be large */
    if (!rf_measure_paths(results, inputs, supply, threads, error)) return false;
    rf_review_verdicts_warn(results);
    return true;
}
