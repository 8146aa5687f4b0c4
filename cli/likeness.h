/* A mistyped word's likely meaning. */
#pragma once

#include <stddef.h>

/* The one of `known` that takes fewest letters added, dropped, changed or swapped with their neighbour to become `word`
 * (optimal string alignment); NULL if that is more than a third of its letters. (borrowed from `known`) */
const char *rf_likeness_nearest(const char *word, const char *const *known, size_t n_known);
