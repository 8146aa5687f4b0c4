#include "cli/pool_check.h"

#include <math.h>
#include <string.h>

#include "calib/quantity.h"

static RfPoolRecording *at(const GPtrArray *recordings, guint i)
{
    return recordings->pdata[i];
}

/* ---- names ---- */

void rf_pool_check_names(const GPtrArray *recordings)
{
    g_autoptr(GHashTable) holders = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, NULL);
    for (guint i = 0; i < recordings->len; i++) {
        at(recordings, i)->name = g_path_get_basename(at(recordings, i)->folder);
        char *key = g_strdup(at(recordings, i)->name);
        const guint held = GPOINTER_TO_UINT(g_hash_table_lookup(holders, key));
        g_hash_table_replace(holders, key, GUINT_TO_POINTER(held + 1));
    }
    for (guint i = 0; i < recordings->len; i++) {
        RfPoolRecording *recording = at(recordings, i);
        if (GPOINTER_TO_UINT(g_hash_table_lookup(holders, recording->name)) == 1) continue;
        g_free(recording->name);
        recording->name = g_strdup(recording->folder);
    }
}

/* ---- the same recording twice ---- */

static bool overlap(const RfPoolRecording *one, const RfPoolRecording *other)
{
    return one->start_s < other->stop_s && other->start_s < one->stop_s;
}

static bool is_new(const GPtrArray *holders, const RfPoolRecording *recording, GError **error)
{
    for (guint i = 0; holders && i < holders->len; i++) {
        const RfPoolRecording *other = at(holders, i);
        if (!overlap(other, recording)) continue;
        g_set_error(
            error, RF_POOL_ERROR, RF_POOL_ERROR_CONFLICT,
            "%s and %s: the same recording (SHA-256 of the video), which can't count twice; leave one out",
            other->folder, recording->folder);
        return false;
    }
    return true;
}

bool rf_pool_check_twice(const GPtrArray *recordings, GError **error)
{
    g_autoptr(GHashTable) by_digest =
        g_hash_table_new_full(g_str_hash, g_str_equal, NULL, (GDestroyNotify)g_ptr_array_unref);
    for (guint i = 0; i < recordings->len; i++) {
        RfPoolRecording *recording = at(recordings, i);
        for (guint v = 0; v < recording->videos->len; v++) {
            char *digest = recording->videos->pdata[v];
            GPtrArray *holders = g_hash_table_lookup(by_digest, digest);
            if (!is_new(holders, recording, error)) return false;
            if (!holders) g_hash_table_insert(by_digest, digest, holders = g_ptr_array_new());
            if (!g_ptr_array_find(holders, recording, NULL)) g_ptr_array_add(holders, recording);
        }
    }
    return true;
}

/* ---- one name, one measurement ---- */

typedef struct {
    const RfPoolInput *input;
    const RfPoolRecording *recording;
} Holder;

static bool is_same(double one, double other)
{
    return fabs(one - other) <= 1e-9 * fmax(fabs(one), fabs(other));
}

static bool is_same_value(const RfPoolInput *one, const RfPoolInput *other)
{
    return is_same(one->value.value, other->value.value) && is_same(one->value.sigma, other->value.sigma);
}

static bool agrees(const Holder *first, const RfPoolInput *input, const RfPoolRecording *recording,
                   GError **error)
{
    if (is_same_value(first->input, input)) return true;
    g_autofree char *one = rf_quantity_format(first->input->value, input->unit),
                    *other = rf_quantity_format(input->value, input->unit);
    g_set_error(error, RF_POOL_ERROR, RF_POOL_ERROR_CONFLICT,
                "[shared] %s=%s: %s in %s but %s in %s; one name is one measurement: correct a sheet or give "
                "the second "
                "a name of its own",
                input->input, input->shared, one, first->recording->folder, other, recording->folder);
    return false;
}

bool rf_pool_check_shared(const GPtrArray *recordings, GError **error)
{
    g_autoptr(GHashTable) holders = g_hash_table_new_full(g_str_hash, g_str_equal, g_free, g_free);
    for (guint i = 0; i < recordings->len; i++)
        for (guint k = 0; k < at(recordings, i)->inputs->len; k++) {
            const RfPoolInput *input = &g_array_index(at(recordings, i)->inputs, RfPoolInput, k);
            /* The fit of the reticle's lines is each recording's own, though the still be the same: its sigma may differ. */
            if (!input->shared || input->is_law || strcmp(input->input, "image") == 0) continue;
            char *key = g_strconcat(input->input, "\n", input->shared, NULL);
            const Holder *first = g_hash_table_lookup(holders, key);
            if (first && !agrees(first, input, at(recordings, i), error)) {
                g_free(key);
                return false;
            }
            if (first)
                g_free(key);
            else
                g_hash_table_insert(holders, key,
                                    g_memdup2(&(Holder){input, at(recordings, i)}, sizeof(Holder)));
        }
    return true;
}

/* ---- what a reader should know ---- */

static void warn_of_versions(const GPtrArray *recordings, RfResults *results)
{
    const char *first = at(recordings, 0)->program_version;
    for (guint i = 1; i < recordings->len; i++)
        if (g_strcmp0(first, at(recordings, i)->program_version) != 0) {
            rf_results_warn(
                results,
                "%s was measured by version %s, %s by version %s: differences between recordings may be the "
                "program's; run all sheets with one version",
                at(recordings, 0)->name, first, at(recordings, i)->name, at(recordings, i)->program_version);
            return;
        }
}

static void warn_of_analysis(const GPtrArray *recordings, RfResults *results)
{
    g_autoptr(GString) first = g_string_new(NULL);
    for (guint i = 0; i < recordings->len; i++) {
        g_autoptr(GString) text = g_string_new(NULL);
        const GPtrArray *analysis = at(recordings, i)->analysis;
        for (guint k = 0; k < analysis->len; k++)
            g_string_append_printf(text, "%s%s", k ? ", " : "", (char *)analysis->pdata[k]);
        if (i == 0)
            g_string_assign(first, text->str);
        else if (strcmp(first->str, text->str) != 0) {
            rf_results_warn(
                results, "[analysis] differs: %s in %s, %s in %s; laws that differ are taken as independent",
                first->str, at(recordings, 0)->name, text->str, at(recordings, i)->name);
            return;
        }
    }
}

/* Recordings besides the first that state the same of an input without naming it. */
static guint count_unnamed(const GPtrArray *recordings, const RfPoolInput *input)
{
    guint same = 0;
    for (guint i = 1; i < recordings->len; i++)
        for (guint k = 0; k < at(recordings, i)->inputs->len; k++) {
            const RfPoolInput *other = &g_array_index(at(recordings, i)->inputs, RfPoolInput, k);
            same += strcmp(other->input, input->input) == 0 && !other->shared && is_same_value(input, other);
        }
    return same;
}

/* Forgetting [shared] makes a pooled unit look better than it is; so it is said where values look copied. */
static void warn_of_unnamed(const GPtrArray *recordings, RfResults *results)
{
    g_autoptr(GString) list = g_string_new(NULL);
    const GArray *inputs = at(recordings, 0)->inputs;
    for (guint k = 0; k < inputs->len; k++) {
        const RfPoolInput *input = &g_array_index(inputs, RfPoolInput, k);
        const bool is_sheets = strcmp(input->input, "image") != 0 && strcmp(input->input, "air_drift") != 0;
        if (is_sheets && !input->shared && input->value.sigma > 0 &&
            count_unnamed(recordings, input) + 1 == recordings->len)
            g_string_append_printf(list, "%s%s", list->len ? ", " : "", input->input);
    }
    if (list->len > 0 && recordings->len > 1)
        rf_results_warn(results,
                        "all recordings state the same %s, but no name in [shared] makes them one "
                        "measurement: each counts "
                        "as made anew, so that its uncertainty averages out. If it was made once, name it",
                        list->str);
}

void rf_pool_check_alike(const GPtrArray *recordings, RfResults *results)
{
    if (recordings->len == 0) return;
    warn_of_versions(recordings, results);
    warn_of_analysis(recordings, results);
    warn_of_unnamed(recordings, results);
}
