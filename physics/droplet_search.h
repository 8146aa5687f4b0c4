/* The likelihood surface of one droplet over (ln radius, fall noise, across noise), and the climb to its top.
 * Charges and drift are solved for at each point (they are linear). Only droplet_fit.c and its kin should need it. */
#pragma once

#include "physics/droplet_path.h"

enum { RF_LOG_RADIUS, RF_FALL_NOISE, RF_ACROSS_NOISE, RF_SEARCH_PARAMETERS };

/* One axis at one point. */
typedef struct {
    double log_likelihood;
    size_t p; /* coefficients: speed per volt of each charged spell, then a
                                                       free speed where there is one */
    double coefficient[RF_DROPLET_SPELLS_MAX + 1];
    double covariance[(RF_DROPLET_SPELLS_MAX + 1) * (RF_DROPLET_SPELLS_MAX + 1)]; /* p x p */
} RfAxisFit;

typedef struct {
    double at[RF_SEARCH_PARAMETERS]; /* noise in noise_unit_m2 */
    double log_likelihood;
    double gradient[RF_SEARCH_PARAMETERS];
    double covariance[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS];
    RfAxisFit fall, across;
} RfSearchPoint;

typedef struct {
    const RfDropletPath *path;
    const RfMedium *medium;
    RfNoiseMemory fall_memory, across_memory;
    double noise_unit_m2;
    double step[RF_SEARCH_PARAMETERS]; /* of central differences */
    bool is_loose;                     /* fall speed free instead of tied to the radius */
} RfSearch;

/* Also sets the starting point, from the scatter of the path. */
void rf_search_init(RfSearch *search, const RfDropletPath *path, const RfDropletModel *model,
                    RfSearchPoint *start);

/* Log-likelihood of one axis; a large negative number where the parameters are impossible. fit may be NULL. */
double rf_search_fall_axis(const RfSearch *search, double log_radius, double noise, RfAxisFit *fit);
double rf_search_across_axis(const RfSearch *search, double log_radius, double noise, RfAxisFit *fit);

/* Gradient at a point and the information (minus second derivatives) there; false where neighbouring points are
 * impossible. */
bool rf_search_slopes(const RfSearch *search, const double *at, double *log_likelihood, double *gradient,
                      double information[RF_SEARCH_PARAMETERS][RF_SEARCH_PARAMETERS]);

/* Newton's climb from point->at, with a simplex search where the surface isn't yet curved like a summit; fills the
 * rest of the point. Returns false where no inner maximum is found. */
bool rf_search_climb(const RfSearch *search, RfSearchPoint *point);
