#include "tracker/coding_noise.h"

#include <math.h>

enum { LEAST_SPOTS = 30 };

/* Sums over spots whose excess is known. */
typedef struct {
    double excess, n;
} Sums;

/* All pictures coded alike; in them the spots that lie on lines of the reticle, or those that don't. */
typedef struct {
    GArray *seen; /* of float: excess of every spot */
    bool is_on_line;
    double level; /* of the excess, which a few misfits don't move */
    Sums sums;
    double groups, n2;      /* pictures with spots; sum of the squares of their n */
    double inside, between; /* squares about each picture's mean; of those, times n, about the common one */
    double weight;          /* in spots: how firmly a picture is drawn to the common mean */
} Kind;

typedef struct {
    Kind of[RF_CODINGS][2]; /* off lines, on lines */
} Kinds;

static bool is_telling(const RfSpot *spot)
{
    return spot->excess > 0 && !(spot->flags & ~(unsigned)RF_SPOT_LINE);
}

/* For comparing pictures: beyond three times the level it is a neighbour unnoticed rather than noise. */
static double bounded(const Kind *kind, const RfSpot *spot)
{
    return fmin((double)spot->excess, 3 * kind->level);
}

/* Encoders spend their bits on edges and drag lines along with spots: what is left there isn't what is left elsewhere. */
static bool is_on_line(const RfSpot *spot)
{
    return (spot->flags & RF_SPOT_LINE) != 0;
}

static Sums sums_of(const RfSightings *sightings, const RfExposure *exposure, const Kind *kind)
{
    Sums sums = {0, 0};
    for (unsigned i = 0; i < exposure->spots; i++) {
        const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
        if (!is_telling(spot) || is_on_line(spot) != kind->is_on_line) continue;
        sums.excess += bounded(kind, spot);
        sums.n++;
    }
    return sums;
}

static RfCoding coding_of(const RfExposure *exposure)
{
    return exposure->coding < RF_CODINGS ? (RfCoding)exposure->coding : RF_CODING_UNKNOWN;
}

static void collect(const RfSightings *sightings, const RfExposure *exposure, Kind *kind)
{
    for (unsigned i = 0; i < exposure->spots; i++) {
        const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
        if (is_telling(spot) && is_on_line(spot) == kind->is_on_line)
            g_array_append_val(kind->seen, spot->excess);
    }
}

static int compare_floats(const void *a, const void *b)
{
    float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* Median of a chi-square variable of one degree of freedom, whose mean is 1. */
static const double MEDIAN = 0.4549;

static void find_level(Kind *kind)
{
    if (!kind->seen->len) return;
    g_array_sort(kind->seen, compare_floats);
    kind->level = (double)g_array_index(kind->seen, float, kind->seen->len / 2) / MEDIAN;
}

static void add_sums(Kind *kind, const Sums *sums)
{
    kind->sums.excess += sums->excess;
    kind->sums.n += sums->n;
    kind->n2 += sums->n * sums->n;
    kind->groups += sums->n > 0;
}

static void add_squares(const RfSightings *sightings, const RfExposure *exposure, Kind *kind)
{
    Sums sums = sums_of(sightings, exposure, kind);
    if (!(sums.n > 0)) return;
    double mean = sums.excess / sums.n, away = mean - kind->sums.excess / kind->sums.n;
    kind->between += sums.n * away * away;
    for (unsigned i = 0; i < exposure->spots; i++) {
        const RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
        if (is_telling(spot) && is_on_line(spot) == kind->is_on_line)
            kind->inside += pow(bounded(kind, spot) - mean, 2);
    }
}

/* One-way analysis of variance with pictures as random groups of unequal size (e.g. S. R. Searle, G. Casella and C. E.
 * McCulloch, Variance Components, 1992, section 3.6): the best linear prediction of a picture's mean. What chance may
 * make of equal pictures (two sigma) is no difference. */
static void weigh(Kind *kind)
{
    double n = kind->sums.n, inside = kind->inside / fmax(1, n - kind->groups);
    double typical = (n - kind->n2 / fmax(1, n)) / fmax(1, kind->groups - 1);
    double chance = inside * (1 + 2 * sqrt(2 / fmax(1, kind->groups - 1)));
    double spread = (kind->between / fmax(1, kind->groups - 1) - chance) / fmax(1, typical);
    kind->weight = inside / fmax(spread, 1e-6 * fmax(inside, 1e-300));
}

typedef void (*Take)(const RfSightings *sightings, const RfExposure *exposure, Kind *kind);

static void take_sums(const RfSightings *sightings, const RfExposure *exposure, Kind *kind)
{
    Sums sums = sums_of(sightings, exposure, kind);
    add_sums(kind, &sums);
}

/* Every picture to both kinds of its coding. */
static void take_all(const RfSightings *sightings, Kinds *kinds, Take take)
{
    for (unsigned e = 0; e < sightings->exposures->len; e++) {
        const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, e);
        for (int line = 0; line < 2; line++) take(sightings, exposure, &kinds->of[coding_of(exposure)][line]);
    }
}

static void learn(const RfSightings *sightings, Kinds *kinds)
{
    take_all(sightings, kinds, collect);
    for (int k = 0; k < 2 * RF_CODINGS; k++) find_level(&kinds->of[k / 2][k % 2]);
    take_all(sightings, kinds, take_sums);
    take_all(sightings, kinds, add_squares);
    for (int k = 0; k < 2 * RF_CODINGS; k++) weigh(&kinds->of[k / 2][k % 2]);
}

/* Displacement over the shape measured, which is finer, and what prediction adds by dragging spots behind their motion:
 * geometric means over synthetic recordings of known truth (H.264 of quality 16 to 22, MPEG-2, MJPEG), such that
 * 68 % of the errors lie within what is stated. Single recordings are up to 20 % of an uncertainty away; from
 * H.264 quality 24 on, or of the fastest preset, errors can be twice what is stated. It sets in with the excess:
 * lossless pictures have none. */
double rf_coding_noise_factor(RfCoding coding, bool is_smooth, bool is_on_line, double excess)
{
    static const double drag[RF_CODINGS][2][2] = {
        [RF_CODING_UNKNOWN] = {{1.35, 1.35}, {2.0, 2.3}},
        [RF_CODING_ALONE] = {{0.9, 1.1}, {1.35, 1.35}},
        [RF_CODING_PAST] = {{1.35, 1.35}, {2.0, 2.3}},
        [RF_CODING_BOTH] = {{1.6, 1.6}, {3.25, 3.25}},
    };
    double size = fmax(1, excess);
    return size * (1 + (drag[coding][is_smooth][is_on_line] - 1) * fmin(1, size - 1));
}

static void widen(RfSpot *spot, double factor)
{
    spot->u_x_px *= (float)sqrt(factor);
    spot->u_y_px *= (float)sqrt(factor);
    spot->cov_xy_px2 *= (float)factor;
}

/* Of spots in one picture; 1 where nothing is known. */
static double factor_of(const RfSightings *sightings, const RfExposure *exposure, const Kind *kind,
                        bool is_smooth)
{
    if (kind->sums.n < LEAST_SPOTS) return 1;
    Sums own = sums_of(sightings, exposure, kind);
    double common = kind->sums.excess / kind->sums.n;
    double relative = (own.excess / common + kind->weight) / (own.n + kind->weight);
    return rf_coding_noise_factor(coding_of(exposure), is_smooth, kind->is_on_line, kind->level * relative);
}

/* Sum of the factors of all spots. Where a film has too few spots on lines to tell, they are taken for others. */
static double widen_all(RfSightings *sightings, const Kinds *kinds, bool is_smooth)
{
    double sum = 0;
    for (unsigned e = 0; e < sightings->exposures->len; e++) {
        const RfExposure *exposure = &g_array_index(sightings->exposures, RfExposure, e);
        const Kind *pair = kinds->of[coding_of(exposure)];
        double factor[2];
        for (int line = 0; line < 2; line++) {
            bool is_told = pair[line].sums.n >= LEAST_SPOTS;
            factor[line] = factor_of(sightings, exposure, &pair[is_told ? line : !line], is_smooth);
        }
        for (unsigned i = 0; i < exposure->spots; i++) {
            RfSpot *spot = &g_array_index(sightings->spots, RfSpot, exposure->first_spot + i);
            widen(spot, factor[is_on_line(spot)]);
            sum += factor[is_on_line(spot)];
        }
    }
    return sum;
}

double rf_coding_noise_apply(RfSightings *sightings, bool is_smooth)
{
    Kinds kinds = {0};
    for (int k = 0; k < 2 * RF_CODINGS; k++) {
        Kind *kind = &kinds.of[k / 2][k % 2];
        kind->is_on_line = k % 2;
        kind->seen = g_array_new(false, false, sizeof(float));
    }
    learn(sightings, &kinds);
    double sum = widen_all(sightings, &kinds, is_smooth);
    for (int k = 0; k < 2 * RF_CODINGS; k++) g_array_unref(kinds.of[k / 2][k % 2].seen);
    return sightings->spots->len ? sqrt(sum / sightings->spots->len) : 1;
}
