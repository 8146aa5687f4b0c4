#include "tracker/assignment.h"

#include <glib.h>
#include <gsl/gsl_rng.h>
#include <math.h>
#include <stdbool.h>

enum { most = 12 };

static GArray *list_edges(const double *cost, int rows, int columns)
{
    GArray *edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    for (int i = 0; i < rows; i++)
        for (int j = 0; j < columns; j++) {
            RfAssignmentEdge edge = {i, j, cost[i * columns + j]};
            if (isfinite(edge.cost)) g_array_append_val(edges, edge);
        }
    return edges;
}

static double solve(const double *cost, int rows, int columns, double leftover_cost, int *column_of_row)
{
    g_autoptr(GArray) edges = list_edges(cost, rows, columns);
    return rf_assignment_solve((const RfAssignmentEdge *)(const void *)edges->data, edges->len, rows, columns,
                               leftover_cost, column_of_row);
}

static void test_empty(void)
{
    int none[1] = {7};
    g_assert_cmpfloat(rf_assignment_solve(NULL, 0, 0, 0, 5, none), ==, 0);
    g_assert_cmpfloat(rf_assignment_solve(NULL, 0, 1, 3, 5, none), ==, 5);
    g_assert_cmpint(none[0], ==, -1);
}

/* Example in the documentation of SciPy's linear_sum_assignment. */
static void test_documented(void)
{
    const double cost[] = {4, 1, 3, 2, 0, 5, 3, 2, 2};
    int got[3];
    g_assert_cmpfloat(solve(cost, 3, 3, 1000, got), ==, 5);
    g_assert_cmpint(got[0], ==, 1);
    g_assert_cmpint(got[1], ==, 0);
    g_assert_cmpint(got[2], ==, 2);
}

/* Teaching example of the Munkres method (from memory, unverified; optimum checked by exhaustive search): a tie. */
static void test_tie(void)
{
    const double cost[] = {5, 9, 1, 10, 3, 2, 8, 7, 4};
    int got[3];
    g_assert_cmpfloat(solve(cost, 3, 3, 1000, got), ==, 12);
}

/* Taking the cheapest first costs 10. */
static void test_greedy_trap(void)
{
    const double cost[] = {1, 2, 2, 9};
    int got[2];
    g_assert_cmpfloat(solve(cost, 2, 2, 1000, got), ==, 4);
    g_assert_cmpint(got[0], ==, 1);
    g_assert_cmpint(got[1], ==, 0);
}

/* Public test case of SciPy: a row too many. */
static void test_surplus_row(void)
{
    const double cost[] = {1, 9, 9, 1, 5, 5};
    int got[3];
    g_assert_cmpfloat(solve(cost, 3, 2, 1000, got), ==, 1002);
    g_assert_cmpint(got[0], ==, 0);
    g_assert_cmpint(got[1], ==, 1);
    g_assert_cmpint(got[2], ==, -1);
}

/* Public test case of SciPy: no complete matching exists; here one row is left over, the dearer one. */
static void test_no_complete_matching(void)
{
    const double cost[] = {1, HUGE_VAL, 2, HUGE_VAL};
    int got[2];
    g_assert_cmpfloat(solve(cost, 2, 2, 1000, got), ==, 1001);
    g_assert_cmpint(got[0], ==, 0);
    g_assert_cmpint(got[1], ==, -1);
}

/* Optima from SciPy 1.10.1: rng = numpy.random.default_rng(20240501), then for (n, m) in (6,6), (8,8), (10,10), (5,9),
 * (9,5): c = rng.integers(1, 100, (n, m)); i, j = scipy.optimize.linear_sum_assignment(c); c[i, j].sum() */
static void test_against_scipy(void)
{
    static const struct {
        int rows, columns;
        double optimum, cost[100];
    } cases[] = {
        {6, 6, 54, {97, 27, 40, 37, 20, 2,  17, 15, 7,  34, 25, 38, 81, 40, 21, 26, 99, 59,
                    73, 23, 2,  2,  81, 20, 69, 1,  95, 92, 93, 39, 10, 78, 46, 9,  11, 84}},
        {8, 8, 161, {88, 64, 47, 17, 49, 10, 89, 85, 34, 82, 43, 87, 31, 19, 51, 51, 43, 49, 22, 35, 89, 73,
                     50, 53, 67, 18, 55, 25, 43, 51, 53, 37, 49, 29, 55, 94, 96, 62, 15, 55, 10, 27, 89, 87,
                     33, 4,  46, 19, 31, 59, 53, 92, 57, 25, 44, 68, 61, 15, 2,  68, 63, 55, 83, 27}},
        {10, 10, 108, {26, 54, 12, 76, 86, 88, 71, 42, 95, 79, 18, 90, 91, 10, 87, 46, 88, 44, 70, 76,
                       23, 54, 18, 49, 7,  51, 33, 30, 7,  70, 97, 2,  76, 99, 71, 39, 45, 4,  8,  22,
                       12, 37, 55, 4,  84, 10, 74, 53, 86, 89, 74, 77, 29, 36, 7,  21, 61, 62, 43, 61,
                       97, 11, 81, 49, 26, 95, 4,  29, 45, 58, 1,  1,  98, 9,  21, 84, 26, 42, 44, 1,
                       44, 77, 51, 44, 99, 99, 37, 27, 62, 22, 42, 84, 17, 94, 65, 50, 62, 76, 28, 42}},
        {5, 9, 34, {12, 63, 81, 62, 44, 38, 46, 10, 25, 74, 98, 44, 62, 81, 3,
                    21, 5,  37, 7,  51, 90, 97, 25, 33, 95, 90, 14, 21, 10, 28,
                    47, 49, 36, 64, 65, 55, 7,  65, 7,  23, 80, 67, 36, 70, 4}},
        {9, 5, 53, {72, 57, 18, 58, 79, 71, 51, 24, 7,  88, 12, 86, 19, 75, 23, 23, 9,  89, 14, 67, 21, 6, 78,
                    14, 57, 38, 53, 16, 74, 12, 96, 98, 65, 58, 49, 10, 25, 18, 40, 85, 78, 77, 97, 99, 25}},
    };
    for (size_t k = 0; k < G_N_ELEMENTS(cases); k++) {
        int got[most], surplus = MAX(0, cases[k].rows - cases[k].columns);
        double sum = solve(cases[k].cost, cases[k].rows, cases[k].columns, 1000, got);
        g_assert_cmpfloat(sum - 1000 * surplus, ==, cases[k].optimum);
    }
}

/* Every way to give columns to rows from `row` on. */
static double exhaust(const double *cost, int rows, int columns, double leftover_cost, int row,
                      unsigned taken)
{
    if (row == rows) return 0;
    double best = leftover_cost + exhaust(cost, rows, columns, leftover_cost, row + 1, taken);
    for (int j = 0; j < columns; j++)
        if (!(taken >> j & 1) && isfinite(cost[row * columns + j]))
            best = fmin(best, cost[row * columns + j] +
                                  exhaust(cost, rows, columns, leftover_cost, row + 1, taken | 1u << j));
    return best;
}

static void check_consistent(const double *cost, int rows, int columns, double leftover_cost, const int *got,
                             double sum)
{
    unsigned taken = 0;
    double again = 0;
    for (int i = 0; i < rows; i++) {
        again += got[i] < 0 ? leftover_cost : cost[i * columns + got[i]];
        if (got[i] < 0) continue;
        g_assert_false(taken >> got[i] & 1);
        taken |= 1u << got[i];
    }
    g_assert_cmpfloat_with_epsilon(again, sum, 1e-12);
}

static void test_against_exhaustion(void)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 1);
    for (int trial = 0; trial < 3000; trial++) {
        int rows = 1 + (int)gsl_rng_uniform_int(random, 6), columns = 1 + (int)gsl_rng_uniform_int(random, 6),
            got[6];
        double cost[36], gate = gsl_rng_uniform(random);
        for (int i = 0; i < rows * columns; i++)
            cost[i] = gsl_rng_uniform(random) < gate ? 10 * gsl_rng_uniform(random) - 3 : HUGE_VAL;
        double sum = solve(cost, rows, columns, 4, got);
        g_assert_cmpfloat_with_epsilon(sum, exhaust(cost, rows, columns, 4, 0, 0), 1e-12);
        check_consistent(cost, rows, columns, 4, got, sum);
    }
    gsl_rng_free(random);
}

/* A constant added to a row, or to a column that is surely taken, doesn't change who takes what. */
static void test_shift_invariance(void)
{
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 2);
    double cost[most * most];
    int before[most], after[most];
    for (int i = 0; i < most * most; i++) cost[i] = gsl_rng_uniform(random);
    double sum = solve(cost, most, most, 1000, before);
    for (int j = 0; j < most; j++) cost[3 * most + j] += 0.25;
    for (int i = 0; i < most; i++) cost[i * most + 5] -= 0.5;
    g_assert_cmpfloat_with_epsilon(solve(cost, most, most, 1000, after), sum - 0.25, 1e-12);
    g_assert_cmpmem(before, sizeof before, after, sizeof after);
    gsl_rng_free(random);
}

/* A thousand droplets, each in reach of its neighbours: the time is told, the answer checked. */
static void test_thousand(void)
{
    enum { n = 1000 };
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 3);
    g_autoptr(GArray) edges = g_array_new(false, false, sizeof(RfAssignmentEdge));
    for (int i = 0; i < n; i++)
        for (int j = MAX(0, i - i % 4); j < MIN(n, i - i % 4 + 4); j++) {
            RfAssignmentEdge edge = {i, j, (i == j ? 0 : 5) + gsl_rng_uniform(random)};
            g_array_append_val(edges, edge);
        }
    g_autofree int *got = g_new(int, n);
    int64_t start_us = g_get_monotonic_time();
    for (int k = 0; k < 100; k++)
        rf_assignment_solve((const RfAssignmentEdge *)(const void *)edges->data, edges->len, n, n, 100, got);
    g_test_message("1000 rows in components of 4: %.3f ms",
                   (double)(g_get_monotonic_time() - start_us) / 1e5);
    for (int i = 0; i < n; i++) g_assert_cmpint(got[i], ==, i);
    gsl_rng_free(random);
}

int main(int argc, char **argv)
{
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/assignment/solve/empty", test_empty);
    g_test_add_func("/assignment/solve/documented-example", test_documented);
    g_test_add_func("/assignment/solve/tie", test_tie);
    g_test_add_func("/assignment/solve/greedy-trap", test_greedy_trap);
    g_test_add_func("/assignment/solve/surplus-row", test_surplus_row);
    g_test_add_func("/assignment/solve/no-complete-matching", test_no_complete_matching);
    g_test_add_func("/assignment/solve/as-scipy", test_against_scipy);
    g_test_add_func("/assignment/solve/as-exhaustion", test_against_exhaustion);
    g_test_add_func("/assignment/solve/shift-invariance", test_shift_invariance);
    g_test_add_func("/assignment/solve/thousand", test_thousand);
    return g_test_run();
}
