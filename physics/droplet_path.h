/* A droplet's path made ready for its fit: common drift taken off, cut into spells, with the impulse of the field in
 * each. Only droplet_fit.c and charge_step.c should need it. */
#pragma once

#include <glib.h>

#include "physics/droplet_fit.h"

typedef struct {
    size_t n;
    double *times_s, *fall_m, *across_m, *u_fall_m, *u_across_m; /* n each */
    double typical_step_s, mean_u2_m2;
    size_t spells, charged;            /* charged: spells in which there was a field */
    int column[RF_DROPLET_SPELLS_MAX]; /* of the spell's impulse, or -1 without a field */
    size_t first[RF_DROPLET_SPELLS_MAX], end[RF_DROPLET_SPELLS_MAX]; /* samples [first, end) */
    double on_s[RF_DROPLET_SPELLS_MAX];
    double *total_impulse_v_s; /* n: integral of the voltage, all spells together */
    double *impulse_v_s;       /* n rows of charged columns: the part that falls into each spell */
    double *scratch;           /* n rows of charged + 2 */
} RfDropletPath;

RfDropletPath *rf_droplet_path_new(const RfTrail *trail, const RfDropletModel *model);
void rf_droplet_path_free(RfDropletPath *path);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfDropletPath, rf_droplet_path_free)

/* Diffusion and noise from the scatter of the across axis, a start for a search: D = <dx^2>/2dt + <dx dx'>/dt,
 * s^2 = -<dx dx'> without regard to blur (C. L. Vestergaard, P. C. Blainey, H. Flyvbjerg, Phys. Rev. E 89 (2014)
 * 022726). Either may come out negative. */
void rf_droplet_path_scatter(const RfDropletPath *path, double *diffusion_m2_s, double *noise_m2);
