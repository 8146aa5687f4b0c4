/* Recordings of invented benches: what each bench states differs from the truth by draws of the stated sigmas, shared as
 * told; the charges are what the program would make of the speeds. For tests of pooling; of the program only drag, air and
 * the budget are used. */
#pragma once

#include <gsl/gsl_rng.h>
#include <stddef.h>

#include "physics/pooled_unit.h"

typedef struct {
    size_t recordings;
    unsigned droplets;            /* of each recording */
    unsigned largest_multiple;    /* even draws of 1 .. largest, of either sign */
    double sigma_low, sigma_high; /* random sigma of a charge, in units */
    size_t bottle_of;  /* so many recordings in a row share an oil density; gap and laws are shared by all */
    size_t reticle_of; /* the same for the scale */
} Benches;

typedef struct {
    size_t n, n_measurements;
    RfPooledRecording *recordings;
} BenchPool;

/* The truth is RF_ELEMENTARY_CHARGE_COULOMB. `shift`: relative, of the true scale of recording 0 beyond its sigma.
 * (returns new) */
BenchPool *bench_pool_new(const Benches *benches, double shift, gsl_rng *rng);
void bench_pool_free(BenchPool *pool);
