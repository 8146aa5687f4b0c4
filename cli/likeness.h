/* A mistyped word's likely meaning. */
#pragma once

#include <stddef.h>

/* The one of `known` that takes fewest letters added, dropped, changed or swapped with their neighbour to become `word`
 * (optimal string alignment), if that is at most a third of its letters; else the first that goes on where `word` ends, or
 * the other way round, with three letters in common; else NULL. (borrowed from `known`) */
const char *rf_likeness_nearest(const char *word, const char *const *known, size_t n_known);
