#include "physics/field_runs.h"

#include <gsl/gsl_errno.h>

/* Annual flow of the Nile at Aswan, 1871 to 1970, 1e8 m^3 (G. W. Cobb, Biometrika 65 (1978) 243, table 1). */
static const double NILE[] = {
    1120, 1160, 963,  1210, 1160, 1160, 813,  1230, 1370, 1140, 995,  935,  1110, 994, 1020, 960,  1180,
    799,  958,  1140, 1100, 1210, 1150, 1250, 1260, 1220, 1030, 1100, 774,  840,  874, 694,  940,  833,
    701,  916,  692,  1020, 1050, 969,  831,  726,  456,  824,  702,  1120, 1100, 832, 764,  821,  768,
    845,  864,  862,  698,  845,  744,  796,  1040, 759,  781,  865,  845,  944,  984, 897,  822,  1010,
    771,  676,  649,  846,  812,  742,  801,  1040, 860,  874,  848,  890,  744,  749, 838,  1050, 918,
    986,  797,  923,  975,  815,  1020, 906,  901,  1170, 912,  746,  919,  718,  714, 740};

/* The river as a droplet whose speed is the year's flow: its level changed after 1898 (Cobb 1978), and once only.
 * Its scatter across gravity is the flow about the two means 1097.75 and 849.97 that belong to that change. */
static void test_nile_changed_after_1898(void)
{
    RfSample samples[101] = {0};
    for (int year = 0; year < 100; year++) {
        double mean = year < 28 ? 1097.75 : 849.97;
        samples[year + 1] = (RfSample){.time_s = year + 1,
                                       .fall_m = samples[year].fall_m + NILE[year],
                                       .drift_m = samples[year].drift_m + NILE[year] - mean};
    }
    RfTrail river = {1, 101, samples};
    g_autoptr(RfFieldRuns) runs = rf_field_runs_new(&river, 1);
    g_assert_cmpuint(runs->runs, ==, 2);
    g_test_message("last year before the change: %.0f", 1870 + runs->edge_s[1]);
    /* Bins are two years long: the edge that holds the end of 1898, to a bin. */
    g_assert_cmpfloat_with_epsilon(1870 + runs->edge_s[1], 1898, 2);
    g_assert_cmpfloat_with_epsilon(rf_field_runs_speed(runs, 0, 0)->speed_m_s, 1097.75, 15);
    g_assert_cmpfloat_with_epsilon(rf_field_runs_speed(runs, 0, 1)->speed_m_s, 849.97, 15);
}

static void test_nothing_watched(void)
{
    RfTrail empty = {1, 0, NULL};
    g_autoptr(RfFieldRuns) runs = rf_field_runs_new(&empty, 1);
    g_assert_cmpuint(runs->runs, ==, 1);
    g_assert_cmpfloat(rf_field_runs_speed(runs, 0, 0)->time_s, ==, 0);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/field-runs/new/nothing-watched", test_nothing_watched);
    g_test_add_func("/field-runs/new/nile-changed-after-1898", test_nile_changed_after_1898);
    return g_test_run();
}
