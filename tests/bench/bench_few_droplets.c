/* Recordings with two to four droplets, measured as a whole: switches unknown, each droplet able to mislead the others. How
 * many spells have a charge to go by, how many of these a wrong whole multiple. Prints figures, judges nothing. Arguments:
 * number of recordings (150); "late": the first droplet may come after the first switch, "contrary": the sheet names the
 * state first that comes second. */
#include <gsl/gsl_errno.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "physics/constants.h"
#include "physics/droplet_set.h"
#include "physics/whole_multiples.h"
#include "tests/support/droplet_walk.h"

static const double E = RF_ELEMENTARY_CHARGE_COULOMB, VOLTAGE_V = 300, END_S = 40;

typedef struct {
    unsigned recordings, unmeasured, droplets, judged, named, wrong, within_1, within_2, switches_wrong,
        doubtful;
} Tally;

static Walk random_walk(const RfFieldTimeline *timeline, gsl_rng *random)
{
    double start_s = gsl_rng_uniform(random) < 0.5 ? 0 : 15 * gsl_rng_uniform(random);
    return (Walk){.medium = &WALK_MEDIUM,
                  .timeline = timeline,
                  .radius_m = (0.35 + 0.4 * gsl_rng_uniform(random)) * 1e-6,
                  .charge_coulomb = E * ((double)gsl_rng_uniform_int(random, 9) - 4),
                  .start_s = start_s,
                  .end_s = start_s + (END_S - start_s) * (0.5 + 0.5 * gsl_rng_uniform(random)),
                  .frame_s = 1.0 / 25,
                  .exposure = 0.5,
                  .noise_m = (0.05 + 0.2 * gsl_rng_uniform(random)) * 1e-6};
}

/* As the program sets droplets aside: a doubtful state of the field, two radii that disagree, a useless charge. */
static bool has_charge_to_go_by(const RfFieldTimeline *timeline, const RfDropletFit *fit,
                                const RfSpellFit *spell)
{
    double u = spell->charge_coulomb.sigma;
    bool is_useless = u > 0.25 * E && u > 0.1 * fabs(spell->charge_coulomb.value);
    return spell->has_charge && !is_useless && fit->radius_agreement_p >= 1e-3 &&
           !rf_field_timeline_is_doubtful(timeline, spell->start_s, spell->end_s);
}

static void judge(const RfDropletSet *set, const Walk *walks, Tally *tally)
{
    for (size_t i = 0; i < set->n; i++) {
        const RfDropletFit *fit = &set->droplets[i].fit;
        tally->droplets++;
        for (size_t k = 0; fit->state == RF_FIT_DONE && k < fit->spells; k++) {
            const RfSpellFit *spell = &fit->spell[k];
            if (!has_charge_to_go_by(set->timeline, fit, spell)) continue;
            RfWholeMultiple multiple = rf_whole_multiples_nearest(spell->charge_coulomb);
            double miss = fabs(spell->charge_coulomb.value - walks[i].charge_coulomb);
            bool is_named = multiple.probability >= 0.95 && fabs(multiple.deviation) < 4;
            tally->judged++;
            tally->named += is_named;
            tally->wrong += is_named && multiple.n != (int)lround(walks[i].charge_coulomb / E);
            tally->within_1 += miss < spell->charge_coulomb.sigma;
            tally->within_2 += miss < 2 * spell->charge_coulomb.sigma;
        }
    }
}

static void measure(const char *kind, gsl_rng *random, Tally *tally)
{
    bool is_late = strcmp(kind, "late") == 0, is_contrary = strcmp(kind, "contrary") == 0;
    RfFieldSheet sheet = {.states = 2, .state = {RF_FIELD_OFF, RF_FIELD_TOP_PLUS}, .top_plus_v = 300};
    if (is_contrary) sheet.state[0] = RF_FIELD_TOP_PLUS, sheet.state[1] = RF_FIELD_OFF;
    const RfDropletSetSettings settings = {.medium = &WALK_MEDIUM, .sheet = &sheet};
    double switch_s[5];
    for (int k = 0; k < 5; k++) switch_s[k] = 7 * k + 3 + 4 * gsl_rng_uniform(random);
    g_autoptr(RfFieldTimeline) truth = walk_timeline_new(switch_s, 5, RF_FIELD_TOP_PLUS, VOLTAGE_V, END_S);
    size_t n = 2 + gsl_rng_uniform_int(random, 3);
    Walk walks[4];
    RfTrail trails[4];
    for (size_t i = 0; i < n; i++) {
        walks[i] = random_walk(truth, random);
        if (i == 0 && !is_late)
            walks[i].start_s = 0; /* the field is off when the recording starts, as the sheet says */
        trails[i] = walk_trail_new(&walks[i], (unsigned)i + 1, random);
    }
    g_autoptr(RfDropletSet) set = rf_droplet_set_measure(trails, n, &settings, NULL);
    tally->recordings++;
    if (set) {
        judge(set, walks, tally);
        tally->doubtful += set->timeline->doubts->len > 0;
        tally->switches_wrong += set->timeline->switches->len != 5;
    } else {
        tally->unmeasured++;
    }
    for (size_t i = 0; i < n; i++) walk_trail_clear(&trails[i]);
}

int main(int argc, char **argv)
{
    int recordings = argc > 1 ? atoi(argv[1]) : 150;
    gsl_set_error_handler_off();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937); /* its default seed, 4357 */
    Tally t = {0};
    for (int i = 0; i < recordings; i++) measure(argc > 2 ? argv[2] : "", random, &t);
    printf(
        "recordings             %u, %u not measured, %u with another number of switches than the true one, "
        "%u in doubt somewhere\n",
        t.recordings, t.unmeasured, t.switches_wrong, t.doubtful);
    printf("spells to go by        %u of %u droplets\n", t.judged, t.droplets);
    printf("whole multiple named   %u, wrong %u\n", t.named, t.wrong);
    printf("within 1 sigma         %.3f (0.683 expected), within 2 %.3f (0.954 expected)\n",
           (double)t.within_1 / t.judged, (double)t.within_2 / t.judged);
    gsl_rng_free(random);
    return 0;
}
