#include "tracker/assignment.h"

#include <glib.h>
#include <math.h>
#include <stdbool.h>
#include <string.h>

/* One component, dense: columns first, then one dummy column a row, taken when the row is left over. */
typedef struct {
    int rows, columns; /* columns without the dummies */
    int width;         /* columns + rows + 1: index 0 is the search's own start */
    double *cost;      /* [row * columns + column], HUGE_VAL where forbidden */
    double leftover_cost;
    double *row_potential, *column_potential, *shortest;
    int *row_of_column, *way_back;
    bool *is_done;
} Table;

static Table *table_new(int rows, int columns, double leftover_cost)
{
    Table *t = g_new0(Table, 1);
    t->rows = rows;
    t->columns = columns;
    t->width = columns + rows + 1;
    t->leftover_cost = leftover_cost;
    t->cost = g_new(double, (size_t)rows *(size_t)columns);
    for (size_t i = 0; i < (size_t)rows * (size_t)columns; i++) t->cost[i] = HUGE_VAL;
    t->row_potential = g_new0(double, rows + 1);
    t->column_potential = g_new0(double, t->width);
    t->shortest = g_new(double, t->width);
    t->row_of_column = g_new0(int, t->width); /* rows from 1; 0: free */
    t->way_back = g_new0(int, t->width);
    t->is_done = g_new(bool, t->width);
    return t;
}

static void table_free(Table *t)
{
    g_free(t->cost);
    g_free(t->row_potential);
    g_free(t->column_potential);
    g_free(t->shortest);
    g_free(t->row_of_column);
    g_free(t->way_back);
    g_free(t->is_done);
    g_free(t);
}

/* Rows and columns from 1, as the search counts them. */
static double table_cost(const Table *t, int row, int column)
{
    if (column <= t->columns) return t->cost[(size_t)(row - 1) * (size_t)t->columns + (size_t)(column - 1)];
    return column - t->columns == row ? t->leftover_cost : HUGE_VAL;
}

/* Relaxes every open column from one row; returns the nearest open column, or 0 if none can be reached. */
static int scan_row(Table *t, int from_column, double *step)
{
    int row = t->row_of_column[from_column], nearest = 0;
    *step = HUGE_VAL;
    for (int j = 1; j < t->width; j++) {
        if (t->is_done[j]) continue;
        double reduced = table_cost(t, row, j) - t->row_potential[row] - t->column_potential[j];
        if (reduced < t->shortest[j]) {
            t->shortest[j] = reduced;
            t->way_back[j] = from_column;
        }
        if (t->shortest[j] < *step) {
            *step = t->shortest[j];
            nearest = j;
        }
    }
    return nearest;
}

static void shift_potentials(Table *t, double step)
{
    for (int j = 0; j < t->width; j++) {
        if (t->is_done[j]) {
            t->row_potential[t->row_of_column[j]] += step;
            t->column_potential[j] -= step;
        } else {
            t->shortest[j] -= step;
        }
    }
}

/* The dummy column is always within reach, so a shortest path to a free column exists. */
static void augment(Table *t, int row)
{
    t->row_of_column[0] = row;
    for (int j = 0; j < t->width; j++) {
        t->shortest[j] = HUGE_VAL;
        t->is_done[j] = false;
    }
    int column = 0;
    do {
        t->is_done[column] = true;
        double step;
        int next = scan_row(t, column, &step);
        shift_potentials(t, step);
        column = next;
    } while (t->row_of_column[column] != 0);
    while (column != 0) {
        int before = t->way_back[column];
        t->row_of_column[column] = t->row_of_column[before];
        column = before;
    }
}

static int find_root(int *parent, int i)
{
    while (parent[i] != i) {
        parent[i] = parent[parent[i]];
        i = parent[i];
    }
    return i;
}

/* Components of the graph whose nodes are the rows and, behind them, the columns. */
static int *find_components(const RfAssignmentEdge *edges, size_t n_edges, int n_rows, int n_columns)
{
    int *parent = g_new(int, n_rows + n_columns + 1);
    for (int i = 0; i < n_rows + n_columns; i++) parent[i] = i;
    for (size_t e = 0; e < n_edges; e++) {
        int a = find_root(parent, edges[e].row), b = find_root(parent, n_rows + edges[e].column);
        parent[MAX(a, b)] = MIN(a, b); /* the smallest node names the component: a row, since each has one */
    }
    for (int i = 0; i < n_rows + n_columns; i++) parent[i] = find_root(parent, i);
    return parent;
}

typedef struct {
    const RfAssignmentEdge *edges;
    int *edge_order; /* edges by component */
    int *place;      /* of each node: index within its component, from 0; -1: not seen yet */
    int n_rows;
    double leftover_cost;
    int *column_of_row;
} Work;

/* A component of one row: no search needed. */
static void solve_star(const Work *w, int begin, int end)
{
    const RfAssignmentEdge *best = &w->edges[w->edge_order[begin]];
    for (int i = begin + 1; i < end; i++)
        if (w->edges[w->edge_order[i]].cost < best->cost) best = &w->edges[w->edge_order[i]];
    if (best->cost < w->leftover_cost) w->column_of_row[best->row] = best->column;
}

static void solve_dense(const Work *w, int begin, int end, const GArray *rows, const GArray *columns)
{
    Table *t = table_new((int)rows->len, (int)columns->len, w->leftover_cost);
    for (int i = begin; i < end; i++) {
        const RfAssignmentEdge *e = &w->edges[w->edge_order[i]];
        double *cell =
            &t->cost[(size_t)w->place[e->row] * columns->len + (size_t)w->place[w->n_rows + e->column]];
        *cell = fmin(*cell, e->cost);
    }
    for (int row = 1; row <= t->rows; row++) augment(t, row);
    for (int j = 1; j <= t->columns; j++)
        if (t->row_of_column[j])
            w->column_of_row[g_array_index(rows, int, t->row_of_column[j] - 1)] =
                g_array_index(columns, int, j - 1);
    table_free(t);
}

static void solve_component(const Work *w, int begin, int end, GArray *rows, GArray *columns)
{
    g_array_set_size(rows, 0);
    g_array_set_size(columns, 0);
    for (int i = begin; i < end; i++) {
        const RfAssignmentEdge *e = &w->edges[w->edge_order[i]];
        if (w->place[e->row] < 0) {
            w->place[e->row] = (int)rows->len;
            g_array_append_val(rows, e->row);
        }
        if (w->place[w->n_rows + e->column] < 0) {
            w->place[w->n_rows + e->column] = (int)columns->len;
            g_array_append_val(columns, e->column);
        }
    }
    if (rows->len == 1)
        solve_star(w, begin, end);
    else
        solve_dense(w, begin, end, rows, columns);
}

/* Edges by component, in their own order within each: a counting sort on the component's name. */
static int *sort_edges(const RfAssignmentEdge *edges, size_t n_edges, const int *component, int n_rows,
                       int *begin)
{
    int *order = g_new(int, n_edges + 1);
    memset(begin, 0, sizeof *begin * (size_t)(n_rows + 2));
    for (size_t e = 0; e < n_edges; e++) begin[component[edges[e].row] + 1]++;
    for (int i = 0; i < n_rows; i++) begin[i + 1] += begin[i];
    g_autofree int *next = g_memdup2(begin, sizeof *begin * (size_t)(n_rows + 2));
    for (size_t e = 0; e < n_edges; e++) order[next[component[edges[e].row]]++] = (int)e;
    return order;
}

static double sum_of_costs(const Work *w, size_t n_edges)
{
    double sum = 0;
    for (int row = 0; row < w->n_rows; row++) sum += w->column_of_row[row] < 0 ? w->leftover_cost : 0;
    g_autofree double *taken = g_new(double, w->n_rows + 1);
    for (int row = 0; row < w->n_rows; row++) taken[row] = HUGE_VAL;
    for (size_t e = 0; e < n_edges; e++)
        if (w->column_of_row[w->edges[e].row] == w->edges[e].column)
            taken[w->edges[e].row] = fmin(taken[w->edges[e].row], w->edges[e].cost);
    for (int row = 0; row < w->n_rows; row++)
        if (w->column_of_row[row] >= 0) sum += taken[row];
    return sum;
}

double rf_assignment_solve(const RfAssignmentEdge *edges, size_t n_edges, int n_rows, int n_columns,
                           double leftover_cost, int *column_of_row)
{
    g_autofree int *component = find_components(edges, n_edges, n_rows, n_columns);
    g_autofree int *begin = g_new(int, n_rows + 2);
    g_autofree int *order = sort_edges(edges, n_edges, component, n_rows, begin);
    g_autofree int *place = g_new(int, n_rows + n_columns + 1);
    for (int i = 0; i < n_rows + n_columns; i++) place[i] = -1;
    for (int row = 0; row < n_rows; row++) column_of_row[row] = -1;

    Work w = {edges, order, place, n_rows, leftover_cost, column_of_row};
    g_autoptr(GArray) rows = g_array_new(false, false, sizeof(int));
    g_autoptr(GArray) columns = g_array_new(false, false, sizeof(int));
    for (int i = 0; i < n_rows; i++)
        if (begin[i + 1] > begin[i]) solve_component(&w, begin[i], begin[i + 1], rows, columns);
    return sum_of_costs(&w, n_edges);
}
