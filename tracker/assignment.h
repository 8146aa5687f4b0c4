/* Optimal linear assignment on a sparse table of costs: each row takes at most one column and each column at
 * most one row, so that the sum of the costs taken, plus a fixed cost for every row left over, is least.
 * Edges that aren't listed are forbidden. Not for deciding what a cost means.
 * Method: connected components of the edges first; in each, shortest augmenting paths with potentials:
 * R. Jonker, A. Volgenant, Computing 38 (1987) 325. Where several assignments are equally good, the one found
 * depends on the order of the edges only. */
#pragma once

#include <stddef.h>

typedef struct {
    int row, column;
    double cost; /* finite */
} RfAssignmentEdge;

/* column_of_row: n_rows entries, filled with the column taken or -1. Returns the least sum. O(edges) where
 * components are small; O(n^3) for one dense component of n rows. */
double rf_assignment_solve(const RfAssignmentEdge *edges, size_t n_edges, int n_rows, int n_columns,
                           double leftover_cost, int *column_of_row);
