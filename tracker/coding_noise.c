#include "tracker/coding_noise.h"

#include <math.h>

enum { LEAST_SPOTS = 30 };
static const double MOST_EXCESS = 40; /* of one spot: a neighbour unnoticed, not noise */

/* Sums over spots whose excess is known. */
typedef struct {
    double twofold, threefold, n;
} Sums;

/* One kind of picture. */
typedef struct {
    Sums sums;
    double inside, groups,
        n2;         /* squares of twofold about each picture's mean; pictures; sum of their n squared */
    double between; /* squares of pictures' means of twofold about the common mean, times n */
    double weight;  /* in spots: how firmly a picture is drawn to the common mean */
} Kind;

static bool is_telling(const RfSpot *spot)
{
    return spot->excess.twofold > 0 && !(spot->flags & ~(unsigned)RF_SPOT_LINE);
}

static double bounded(float excess)
{
    return fmin((double)excess, MOST_EXCESS);
}

static Sums sums_of(const RfSightings *sightings, const RfExposure *exposure)
{
    Sums sums = {0};
    for (unsigned i = 0; i < exposure->spots; i++) {
        const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
        if (!is_telling(spot)) continue;
        sums.twofold += bounded(spot->excess.twofold);
        sums.threefold += bounded(spot->excess.threefold);
        sums.n++;
    }
    return sums;
}

static RfCoding kind_of(const RfExposure *exposure)
{
    return exposure->coding < RF_CODINGS ? (RfCoding)exposure->coding : RF_CODING_UNKNOWN;
}

static void add_sums(Kind *kind, const Sums *sums)
{
    kind->sums.twofold += sums->twofold;
    kind->sums.threefold += sums->threefold;
    kind->sums.n += sums->n;
    kind->n2 += sums->n * sums->n;
    kind->groups += sums->n > 0;
}

static void add_squares(const RfSightings *sightings, const RfExposure *exposure, Kind *kind)
{
    Sums sums = sums_of(sightings, exposure);
    if (!(sums.n > 0)) return;
    double mean = sums.twofold / sums.n, away = mean - kind->sums.twofold / kind->sums.n;
    kind->between += sums.n * away * away;
    for (unsigned i = 0; i < exposure->spots; i++) {
        const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
        if (is_telling(spot)) kind->inside += pow(bounded(spot->excess.twofold) - mean, 2);
    }
}

/* One-way analysis of variance with pictures as random groups of unequal size (e.g. S. R. Searle, G. Casella and C. E.
 * McCulloch, Variance Components, 1992, section 3.6): the best linear prediction of a picture's mean. What
 * chance may make of equal pictures (two sigma) is no difference. */
static void weigh(Kind *kind)
{
    double n = kind->sums.n, inside = kind->inside / fmax(1, n - kind->groups);
    double typical = (n - kind->n2 / fmax(1, n)) / fmax(1, kind->groups - 1);
    double chance = inside * (1 + 2 * sqrt(2 / fmax(1, kind->groups - 1)));
    double spread = (kind->between / fmax(1, kind->groups - 1) - chance) / fmax(1, typical);
    kind->weight = inside / fmax(spread, 1e-6 * fmax(inside, 1e-300));
}

static void learn(const RfSightings *sightings, Kind kinds[RF_CODINGS])
{
    const GArray *exposures = sightings->exposures;
    for (unsigned e = 0; e < exposures->len; e++) {
        const RfExposure *exposure = &g_array_index(exposures, RfExposure, e);
        Sums sums = sums_of(sightings, exposure);
        add_sums(&kinds[kind_of(exposure)], &sums);
    }
    for (unsigned e = 0; e < exposures->len; e++) {
        const RfExposure *exposure = &g_array_index(exposures, RfExposure, e);
        add_squares(sightings, exposure, &kinds[kind_of(exposure)]);
    }
    for (int k = 0; k < RF_CODINGS; k++) weigh(&kinds[k]);
}

/* Exponents of the law: least squares on synthetic recordings of known truth (H.264 of quality 14 to 28, MPEG-2, MJPEG),
 * in which it holds to 13 % of an uncertainty. Pictures coded from others also drag spots behind their motion. Where
 * hardly anything is in excess, the ratio of the two says nothing. */
double rf_coding_noise_factor(RfCoding coding, double twofold, double threefold)
{
    static const double of_size_alone = 0.9, of_size = 1.22, of_slope = 0.9;
    double size = fmax(1, twofold), slope = fmax(1, size / fmax(1, threefold));
    return pow(size, coding == RF_CODING_ALONE ? of_size_alone : of_size) *
           pow(slope, of_slope * fmin(1, size - 1));
}

static double factor_of(RfCoding coding, const Kind *kind, const Sums *own)
{
    double n = own->n + kind->weight, twofold = kind->sums.twofold / kind->sums.n,
           threefold = kind->sums.threefold / kind->sums.n;
    return rf_coding_noise_factor(coding, (own->twofold + kind->weight * twofold) / n,
                                  (own->threefold + kind->weight * threefold) / n);
}

static void widen(RfSpot *spot, double factor)
{
    spot->u_x_px *= (float)sqrt(factor);
    spot->u_y_px *= (float)sqrt(factor);
    spot->cov_xy_px2 *= (float)factor;
}

void rf_coding_noise_apply(RfSightings *sightings)
{
    Kind kinds[RF_CODINGS] = {0}, all = {.weight = 1};
    learn(sightings, kinds);
    for (int k = 0; k < RF_CODINGS; k++) add_sums(&all, &kinds[k].sums);
    if (all.sums.n < LEAST_SPOTS) return;
    for (unsigned e = 0; e < sightings->exposures->len; e++) {
        const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, e);
        const Kind *kind = &kinds[kind_of(exposure)];
        Sums own = sums_of(sightings, exposure), none = {0};
        bool is_known = kind->sums.n >= LEAST_SPOTS;
        double factor =
            is_known ? factor_of(kind_of(exposure), kind, &own) : factor_of(kind_of(exposure), &all, &none);
        for (unsigned i = 0; i < exposure->spots; i++)
            widen(&g_array_index(sightings->spots, RfSpot, exposure->first_spot + i), factor);
    }
}
