#include "cli/preview_plan.h"

#include <math.h>

static void add_life(RfResults *results, unsigned droplet, double start_s, double stop_s)
{
    const double ends_s[] = {start_s, stop_s};
    for (int i = 0; i < 2; i++) {
        const RfPathRow row = {.droplet = droplet, .time_s = ends_s[i], .seen = true};
        g_array_append_val(results->paths, row);
    }
}

static void add_switch(RfResults *results, double time_s)
{
    const RfSwitchRow row = {.number = results->switches->len + 1, .time_s = {time_s, 0.003}};
    g_array_append_val(results->switches, row);
}

/* How many frames of a recording at 30 frames/s the film takes. */
static unsigned filmed(const RfPreviewPlan *plan, double duration_s)
{
    unsigned n = 0;
    double previous_s = -HUGE_VAL;
    for (int64_t i = 0; (double)i / 30 < duration_s; i++) {
        const double time_s = (double)i / 30;
        if (!rf_preview_plan_wants(plan, time_s, previous_s)) continue;
        previous_s = time_s;
        n++;
    }
    return n;
}

static void short_recordings_are_shown_whole(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    add_life(results, 1, 2, 50);
    add_life(results, 2, 0, 30);
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    g_assert_cmpuint(plan->stretches->len, ==, 1);
    g_assert_cmpfloat(g_array_index(plan->stretches, RfPreviewSpan, 0).start_s, ==, 0);
    g_assert_cmpfloat(g_array_index(plan->stretches, RfPreviewSpan, 0).stop_s, ==, 50);
    g_assert_cmpuint(filmed(plan, 60), ==, 501); /* 10 a second, both ends */
}

static void every_frame_around_a_moment(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    add_life(results, 1, 0, 10);
    add_switch(results, 5.003);
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    g_assert_cmpuint(plan->moments->len, ==, 1);
    for (int off = -8; off <= 8; off++) {
        const double time_s = (150 + off) / 30.0;
        g_assert_true(rf_preview_plan_wants(plan, time_s, time_s - 1 / 30.0));
    }
    g_assert_false(rf_preview_plan_wants(plan, 141 / 30.0, 140 / 30.0));
    g_assert_false(rf_preview_plan_wants(plan, 159 / 30.0, 158 / 30.0));
}

/* Two hours, 200 droplets, a switch every 20 s: each droplet has its stretch, and the budget holds. */
static void long_recordings_stay_within_the_budget(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    for (unsigned i = 0; i < 200; i++) add_life(results, i + 1, 36.0 * i, 36.0 * i + 90);
    for (double time_s = 10; time_s < 7200; time_s += 20) add_switch(results, time_s);
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    const unsigned frames = filmed(plan, 7300);
    g_test_message("%u frames, %u stretches at %.0f a second", frames, plan->stretches->len,
                   plan->stretch_hz);
    g_assert_cmpuint(frames, <=, RF_PREVIEW_MOST_FRAMES);
    g_assert_cmpuint(frames, >, 1000);
    for (unsigned i = 0; i < 200; i++) {
        const double next_s = rf_preview_plan_next_s(plan, 36.0 * i);
        g_assert_cmpfloat(next_s, <, 36.0 * i + 88);
    }
}

/* Crowds for which even the tersest terms are too long: accepted ones first, and the budget holds. */
static void crowds_stay_within_the_budget(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    for (unsigned i = 0; i < 3000; i++) add_life(results, i + 1, 20.0 * i, 20.0 * i + 15);
    const RfDropletRow last = {.droplet = 3000, .accepted = true};
    g_array_append_val(results->droplets, last);
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    g_assert_cmpuint(filmed(plan, 60100), <=, RF_PREVIEW_MOST_FRAMES);
    g_assert_true(isfinite(rf_preview_plan_next_s(plan, 20.0 * 2999)));
}

static void add_timing(RfResults *results, unsigned entry, unsigned droplet, const char *finding)
{
    const RfAuditRow row = {.entry = entry,
                            .droplet = droplet,
                            .finding = finding,
                            .start_s = 10.0 * entry,
                            .has_tracked = true,
                            .tracked_time_s = {3, 0.01},
                            .hand_time_s = {5, 0.1}};
    g_array_append_val(results->audit, row);
}

static void only_timings_that_need_a_look(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    add_timing(results, 1, 1, "agrees");
    add_timing(results, 2, 4, "digit slip");
    add_timing(results, 3, 0, "unmatched");
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    g_assert_cmpuint(plan->moments->len, ==, 2);
    const RfMoment *start = &g_array_index(plan->moments, RfMoment, 0), *stop = start + 1;
    g_assert_cmpint(start->kind, ==, RF_MOMENT_TIMED_START);
    g_assert_cmpuint(start->number, ==, 2);
    g_assert_cmpuint(start->droplet, ==, 4);
    g_assert_cmpfloat(start->time_s, ==, 20);
    g_assert_cmpfloat(stop->time_s, ==, 23); /* by the recording, not by hand */
}

static void nothing_seen_nothing_wanted(void)
{
    g_autoptr(RfResults) results = rf_results_new();
    g_autoptr(RfPreviewPlan) plan = rf_preview_plan_new(results, 30);
    g_assert_false(isfinite(rf_preview_plan_next_s(plan, 0)));
    g_assert_false(rf_preview_plan_wants(plan, 1, -HUGE_VAL));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/preview_plan/short-recordings-whole", short_recordings_are_shown_whole);
    g_test_add_func("/preview_plan/moments/every-frame", every_frame_around_a_moment);
    g_test_add_func("/preview_plan/moments/timings-that-need-a-look", only_timings_that_need_a_look);
    g_test_add_func("/preview_plan/budget/long-recordings", long_recordings_stay_within_the_budget);
    g_test_add_func("/preview_plan/budget/crowds", crowds_stay_within_the_budget);
    g_test_add_func("/preview_plan/nothing-seen", nothing_seen_nothing_wanted);
    return g_test_run();
}
