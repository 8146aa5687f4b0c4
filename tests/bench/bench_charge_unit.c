/* Is the unit ever called resolved where the droplets can't tell it? Made-up sets of charges that are whole multiples of e,
 * too highly charged for their sigmas or too few; and, beside them, sets that can tell. Prints figures, judges nothing.
 * Argument: sets of each kind (300). */
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>

#include "physics/charge_unit.h"
#include "physics/constants.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB;

typedef struct {
    const char *name;
    unsigned fewest, most; /* droplets */
    int lowest, highest;   /* units */
    double u_relative;     /* of a charge, about; between half and one and a half of it */
} Kind;

enum { DROPLETS_MAX = 64 };

static unsigned draw(const Kind *kind, gsl_rng *random, RfValue *charges)
{
    unsigned n = kind->fewest + (unsigned)gsl_rng_uniform_int(random, kind->most - kind->fewest + 1);
    for (unsigned i = 0; i < n; i++) {
        unsigned span = (unsigned)(kind->highest - kind->lowest + 1);
        double truth = E * (kind->lowest + (int)gsl_rng_uniform_int(random, span));
        double sigma = truth * kind->u_relative * (0.5 + gsl_rng_uniform(random));
        charges[i] = (RfValue){truth + gsl_ran_gaussian(random, sigma), sigma};
    }
    return n;
}

static void measure(const Kind *kind, int sets, gsl_rng *random)
{
    RfValue charges[DROPLETS_MAX];
    unsigned resolved = 0, wrong = 0, silent = 0;
    for (int i = 0; i < sets; i++) {
        unsigned n = draw(kind, random, charges);
        g_autoptr(RfChargeUnit) unit = rf_charge_unit_find(charges, n, &RF_CHARGE_UNIT_DEFAULTS);
        double miss = fabs(unit->unit_coulomb.value - E);
        resolved += unit->is_resolved;
        wrong += unit->is_resolved && miss > 4 * unit->unit_coulomb.sigma;
        silent += !unit->is_resolved && (!unit->reason || !*unit->reason);
    }
    printf("%-46s %d sets: resolved %u, of these wrong %u; unresolved without a reason %u\n", kind->name,
           sets, resolved, wrong, silent);
}

int main(int argc, char **argv)
{
    static const Kind kinds[] = {
        {"15 to 60 e, u 2 %, 5 to 40 droplets", 5, 40, 15, 60, 0.02},
        {"15 to 60 e, u 4 %, 5 to 40 droplets", 5, 40, 15, 60, 0.04},
        {"15 to 60 e, u 1 %, 5 to 40 droplets", 5, 40, 15, 60, 0.01},
        {"1 to 5 e, u 3 %, 2 to 4 droplets: too few", 2, 4, 1, 5, 0.03},
        {"1 to 5 e, u 20 %, 5 to 20: too uncertain", 5, 20, 1, 5, 0.2},
        {"1 to 5 e, u 3 %, 8 to 20: can tell", 8, 20, 1, 5, 0.03},
    };
    int sets = argc > 1 ? atoi(argv[1]) : 300;
    gsl_set_error_handler_off();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937); /* its default seed, 4357 */
    for (size_t k = 0; k < G_N_ELEMENTS(kinds); k++) measure(&kinds[k], sets, random);
    gsl_rng_free(random);
    return 0;
}
