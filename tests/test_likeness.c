#include "cli/likeness.h"

#include <glib.h>

static const char *const known[] = {"run", "check", "calibrate", "paths", "charge"};

static const char *nearest(const char *word)
{
    return rf_likeness_nearest(word, known, G_N_ELEMENTS(known));
}

static void one_slip(void)
{
    g_assert_cmpstr(nearest("runn"), ==, "run");
    g_assert_cmpstr(nearest("rnu"), ==, "run"); /* swapped neighbours count once */
    g_assert_cmpstr(nearest("calibarte"), ==, "calibrate");
    g_assert_cmpstr(nearest("chek"), ==, "check");
    g_assert_cmpstr(nearest("path"), ==, "paths");
}

static void shortened_or_prolonged(void)
{
    g_assert_cmpstr(nearest("calib"), ==, "calibrate");
    g_assert_cmpstr(nearest("checkvideo"), ==, "check");
    g_assert_null(nearest("ca"));
}

static void something_else(void)
{
    g_assert_null(nearest("measure"));
    g_assert_null(nearest(""));
    g_assert_null(nearest("xx"));
    g_assert_null(nearest("measuremeasuremeasuremeasuremeasuremeasure"));
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/likeness/nearest/one-slip", one_slip);
    g_test_add_func("/likeness/nearest/shortened-or-prolonged", shortened_or_prolonged);
    g_test_add_func("/likeness/nearest/something-else", something_else);
    return g_test_run();
}
