#include "physics/field_states.h"

#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

#include "physics/drag.h"

enum { BEAM = 48 };
/* Price of an explanation outside the model (a step of charge, a mistake of the tracker), and of a switch. */
static const double SURPRISE_COST = 10, BRIEF_COST = 4, SWITCH_COST = 3;
/* Price of a sheet that names another state than the recording starts in: one sheet in a hundred. */
static const double OUT_OF_ORDER_COST = 4.6;
/* While nobody looked, a switch is as likely as none. */
static const double BLIND_SWITCH_COST = 0;
/* What is known of a droplet beforehand: it falls, at tens of micrometres a second; the field moves it by some
 * hundred micrometres a second. */
static const double FALL_PRIOR_M_S = 50e-6, FALL_SPREAD_M_S = 50e-6, FIELD_SPREAD_M_S = 200e-6;

/* Gaussian belief about (v_g, w V0), V0 the largest voltage, so that both are speeds. */
typedef struct {
    double mean[2], cov[3]; /* cov: 00, 01, 11 */
} Belief;

typedef struct {
    double cost;
    unsigned used; /* states that have occurred, a bit for each in the sheet's order */
    unsigned last;
    unsigned parent; /* which of the run before it extends */
    Belief *belief;  /* droplets; of those that left before this run, nobody's any more */
} Hypothesis;

static const Belief PRIOR = {{FALL_PRIOR_M_S, 0},
                             {FALL_SPREAD_M_S * FALL_SPREAD_M_S, 0, FIELD_SPREAD_M_S *FIELD_SPREAD_M_S}};

/* Takes a speed under relative voltage h; returns minus the log of its predicted density, per micrometre/s. */
static double learn(Belief *b, double h, const RfRunSpeed *seen)
{
    double p0 = b->cov[0] + h * b->cov[1], p1 = b->cov[1] + h * b->cov[2];
    double variance = p0 + h * p1 + seen->variance_m2_s2,
           miss = seen->speed_m_s - b->mean[0] - h * b->mean[1];
    double cost = 0.5 * miss * miss / variance + 0.5 * log(variance / 1e-12);
    double g0 = p0 / variance, g1 = p1 / variance;
    b->mean[0] += g0 * miss;
    b->mean[1] += g1 * miss;
    b->cov[0] -= g0 * p0;
    b->cov[1] -= g0 * p1;
    b->cov[2] -= g1 * p1;
    return cost;
}

/* The same, or at a price: a new charge where there is a field, a mistake where there is none. A run of a single bin may
 * hold a switch, so that its speed belongs to no state; that is cheap and teaches nothing. */
static double learn_or_wonder(Belief *b, double h, const RfRunSpeed *seen, bool is_brief)
{
    Belief as_before = *b, renewed = *b;
    double cost = learn(&as_before, h, seen);
    if (h != 0) {
        renewed.mean[1] = 0;
        renewed.cov[1] = 0;
        renewed.cov[2] = PRIOR.cov[2];
    } else {
        renewed = PRIOR;
    }
    double otherwise = (is_brief ? BRIEF_COST : SURPRISE_COST) + learn(&renewed, h, seen);
    if (h == 0 || is_brief) renewed = *b; /* a mistake teaches nothing */
    *b = cost <= otherwise ? as_before : renewed;
    return fmin(cost, otherwise);
}

/* Who is watched in which run. */
typedef struct {
    size_t *at;      /* runs + 1; where a run's droplets begin in `droplet` */
    size_t *droplet; /* rising within a run */
} Watched;

static void watched_init(Watched *watched, const RfFieldRuns *runs)
{
    watched->at = g_new0(size_t, runs->runs + 1);
    for (size_t j = 0; j < runs->droplets; j++)
        for (size_t r = runs->span[j].first; r < runs->span[j].end; r++) watched->at[r + 1]++;
    for (size_t r = 0; r < runs->runs; r++) watched->at[r + 1] += watched->at[r];
    watched->droplet = g_new(size_t, watched->at[runs->runs] + 1);
    g_autofree size_t *next = g_memdup2(watched->at, (runs->runs + 1) * sizeof(size_t));
    for (size_t j = 0; j < runs->droplets; j++)
        for (size_t r = runs->span[j].first; r < runs->span[j].end; r++) watched->droplet[next[r]++] = j;
}

static void watched_clear(Watched *watched)
{
    g_free(watched->at);
    g_free(watched->droplet);
}

/* Beliefs about those who are watched in this run; whoever comes later is what it was in all hypotheses. */
static void hypothesis_copy(Hypothesis *to, const Hypothesis *from, const Watched *watched, size_t run)
{
    Belief *belief = to->belief;
    for (size_t i = watched->at[run]; i < watched->at[run + 1]; i++)
        belief[watched->droplet[i]] = from->belief[watched->droplet[i]];
    *to = *from;
    to->belief = belief;
}

/* The levels to choose from. */
typedef struct {
    const RfFieldLevel *level;
    size_t n;
    unsigned states;
    unsigned other_start; /* order of the state that the recording may start in against the sheet; 0: none */
    double relative[RF_FIELD_LEVELS]; /* voltages over the largest */
} Levels;

/* Returns what the speeds seen in this run cost. */
static double learn_run(Belief *belief, const RfFieldRuns *runs, const Watched *watched, size_t run,
                        double relative_voltage, double cost)
{
    bool is_brief = runs->edge_s[run + 1] - runs->edge_s[run] < 1.5 * runs->bin_s;
    for (size_t i = watched->at[run]; i < watched->at[run + 1]; i++) {
        size_t j = watched->droplet[i];
        const RfRunSpeed *seen = rf_field_runs_speed(runs, j, run);
        if (seen->time_s > 0) cost += learn_or_wonder(&belief[j], relative_voltage, seen, is_brief);
    }
    return cost;
}

static void extend(Hypothesis *h, const RfFieldRuns *runs, const Watched *watched, size_t run,
                   const Levels *levels, unsigned to)
{
    if (run > 0 && to != h->last) h->cost += runs->is_blind[run] ? BLIND_SWITCH_COST : SWITCH_COST;
    if (run == 0 && levels->level[to].order > 0) h->cost += OUT_OF_ORDER_COST;
    h->used |= 1u << levels->level[to].order;
    h->last = to;
    h->cost = learn_run(h->belief, runs, watched, run, levels->relative[to], h->cost);
}

/* The fall that belongs to a droplet's wander, as far as that is known (sd of D about sqrt(6/n) of it, twice that in
 * the fall), weighed against the usual prior. */
static Belief first_belief(const RfFieldRuns *runs, size_t droplet, const RfMedium *medium)
{
    static const double smallest_m = 0.1e-6, largest_m = 5e-6, model_error = 0.1;
    double diffusion = runs->own_diffusion_m2_s[droplet], samples = (double)runs->samples[droplet];
    Belief belief = PRIOR;
    if (!medium || samples < 30 || !(diffusion > rf_drag_diffusion_m2_s(medium, largest_m)) ||
        diffusion > rf_drag_diffusion_m2_s(medium, smallest_m))
        return belief;
    double low = smallest_m, high = largest_m;
    while (high / low > 1.001) {
        double middle = sqrt(low * high);
        if (rf_drag_diffusion_m2_s(medium, middle) > diffusion)
            low = middle;
        else
            high = middle;
    }
    double fall = rf_drag_settling_speed_m_s(medium, low),
           spread = fall * (model_error + 2.4 * sqrt(6 / samples));
    double weight = 1 / (spread * spread), prior = 1 / PRIOR.cov[0];
    belief.mean[0] = (weight * fall + prior * FALL_PRIOR_M_S) / (weight + prior);
    belief.cov[0] = 1 / (weight + prior);
    return belief;
}

typedef struct {
    Hypothesis now[BEAM], next[BEAM * RF_FIELD_LEVELS];
    size_t n_now, n_next;
    Watched watched;
    uint8_t *parent, *label; /* [run * BEAM + i]: how the i-th best up to that run came about */
    Belief *first;           /* droplets */
} Beam;

G_STATIC_ASSERT(BEAM <= 256 && RF_FIELD_LEVELS <= 256);

static int compare_costs(const void *a, const void *b)
{
    const Hypothesis *x = a, *y = b;
    return (x->cost > y->cost) - (x->cost < y->cost);
}

/* States first occur in the sheet's order; a level that has occurred may come again. */
static bool may_follow(const Hypothesis *h, size_t run, const Levels *levels, unsigned to)
{
    unsigned order = levels->level[to].order, before = (1u << order) - 1;
    if (run == 0 && order > 0 && order == levels->other_start) return true;
    return (h->used & 1u << order) || (h->used & before) == before;
}

static void advance(Beam *beam, const RfFieldRuns *runs, size_t run, const Levels *levels)
{
    beam->n_next = 0;
    for (size_t i = 0; i < beam->n_now; i++) {
        /* What came first while nobody looked can't be known. */
        if (runs->is_blind[run]) beam->now[i].used = (1u << levels->states) - 1;
        for (unsigned l = 0; l < levels->n; l++) {
            if (!may_follow(&beam->now[i], run, levels, l)) continue;
            Hypothesis *to = &beam->next[beam->n_next++];
            hypothesis_copy(to, &beam->now[i], &beam->watched, run);
            to->parent = (unsigned)i;
            extend(to, runs, &beam->watched, run, levels, l);
        }
    }
    qsort(beam->next, beam->n_next, sizeof *beam->next, compare_costs);
    beam->n_now = MIN(beam->n_next, BEAM);
    for (size_t i = 0; i < beam->n_now; i++) {
        hypothesis_copy(&beam->now[i], &beam->next[i], &beam->watched, run);
        beam->parent[run * BEAM + i] = (uint8_t)beam->now[i].parent;
        beam->label[run * BEAM + i] = (uint8_t)beam->now[i].last;
    }
}

/* The labels of all runs in the i-th best reading. */
static void trace(const Beam *beam, size_t runs, size_t i, unsigned *label)
{
    for (size_t r = runs; r-- > 0;) {
        label[r] = beam->label[r * BEAM + i];
        i = beam->parent[r * BEAM + i];
    }
}

/* What the best reading makes of the droplets: their speeds once more, under its labels. */
static void report(const Beam *beam, const RfFieldRuns *runs, const Levels *levels, const unsigned *label,
                   double largest_v, RfStateDroplet *droplet)
{
    for (size_t r = 0; r < runs->runs; r++)
        learn_run(beam->first, runs, &beam->watched, r, levels->relative[label[r]], 0);
    for (size_t j = 0; j < runs->droplets; j++) {
        const Belief *b = &beam->first[j];
        droplet[j].fall_m_s = b->mean[0];
        droplet[j].speed_per_volt_m_s_v = largest_v > 0 ? b->mean[1] / largest_v : 0;
        droplet[j].u_speed_per_volt_m_s_v = largest_v > 0 ? sqrt(b->cov[2]) / largest_v : 0;
    }
}

/* Chance, run by run, that the label is not the best reading's: readings weighted by their likelihoods. */
static void weigh_doubts(const Beam *beam, size_t runs, const unsigned *best, double *doubt)
{
    g_autofree unsigned *label = g_new(unsigned, runs);
    double sum = 0;
    for (size_t r = 0; r < runs; r++) doubt[r] = 0;
    for (size_t i = 0; i < beam->n_now; i++) {
        double weight = exp(beam->now[0].cost - beam->now[i].cost);
        sum += weight;
        trace(beam, runs, i, label);
        for (size_t r = 0; r < runs; r++)
            if (label[r] != best[r]) doubt[r] += weight;
    }
    for (size_t r = 0; r < runs; r++) doubt[r] /= sum;
}

static Beam *beam_new(const RfFieldRuns *runs, const RfMedium *medium, size_t levels)
{
    Beam *beam = g_new0(Beam, 1);
    size_t bytes = MAX(runs->droplets, 1) * sizeof(Belief);
    watched_init(&beam->watched, runs);
    beam->parent = g_new(uint8_t, runs->runs * BEAM);
    beam->label = g_new(uint8_t, runs->runs * BEAM);
    beam->first = g_malloc0(bytes);
    for (size_t j = 0; j < runs->droplets; j++) beam->first[j] = first_belief(runs, j, medium);
    for (size_t i = 0; i < BEAM; i++) beam->now[i].belief = g_memdup2(beam->first, bytes);
    for (size_t i = 0; i < BEAM * levels; i++) beam->next[i].belief = g_memdup2(beam->first, bytes);
    beam->n_now = 1;
    return beam;
}

static void beam_free(Beam *beam)
{
    for (int i = 0; i < BEAM; i++) g_free(beam->now[i].belief);
    for (int i = 0; i < BEAM * RF_FIELD_LEVELS; i++) g_free(beam->next[i].belief);
    watched_clear(&beam->watched);
    g_free(beam->parent);
    g_free(beam->label);
    g_free(beam->first);
    g_free(beam);
}

static Beam *search(const RfFieldRuns *runs, const RfMedium *medium, const Levels *levels)
{
    Beam *beam = beam_new(runs, medium, levels->n);
    for (size_t r = 0; r < runs->runs; r++) advance(beam, runs, r, levels);
    return beam;
}

/* A droplet's wander tells how fast it falls without field, and so which state has none; which polarity comes first
 * is the sheet's word alone. So with "off" first the first polarity may come before it, else off before that. */
static unsigned other_start(const RfFieldLevel *level, size_t n)
{
    bool is_off_first = false;
    unsigned off = 0;
    for (size_t l = 0; l < n; l++) {
        if (level[l].state != RF_FIELD_OFF) continue;
        off = level[l].order;
        is_off_first = off == 0;
    }
    return is_off_first ? 1 : off;
}

static double levels_init(Levels *levels, const RfFieldLevel *level, size_t n)
{
    double largest = 0;
    *levels = (Levels){.level = level, .n = n};
    for (size_t l = 0; l < n; l++) {
        largest = fmax(largest, fabs(level[l].voltage_v));
        levels->states = MAX(levels->states, level[l].order + 1);
    }
    for (size_t l = 0; l < n; l++) levels->relative[l] = largest > 0 ? level[l].voltage_v / largest : 0;
    return largest;
}

/* Twice: runs are many, and a beam over them fills up with readings that differ by a bin here or there. Stretches of one
 * label are few, and among their readings are those that differ in earnest. */
void rf_field_states_label(const RfFieldRuns *runs, const RfFieldLevel *level, size_t n_levels,
                           const RfMedium *medium, unsigned *label, double *doubt, RfStateDroplet *droplet)
{
    Levels levels;
    double largest = levels_init(&levels, level, n_levels);
    if (medium) levels.other_start = other_start(level, n_levels);
    g_autofree size_t *part = g_new(size_t, runs->runs);
    Beam *beam = search(runs, medium, &levels);
    trace(beam, runs->runs, 0, label);
    beam_free(beam);
    g_autoptr(RfFieldRuns) merged = rf_field_runs_merge(runs, label, part);
    beam = search(merged, medium, &levels);
    g_autofree unsigned *merged_label = g_new(unsigned, merged->runs);
    g_autofree double *merged_doubt = g_new(double, merged->runs);
    trace(beam, merged->runs, 0, merged_label);
    weigh_doubts(beam, merged->runs, merged_label, merged_doubt);
    for (size_t r = 0; r < runs->runs; r++) {
        label[r] = merged_label[part[r]];
        doubt[r] = merged_doubt[part[r]];
    }
    report(beam, merged, &levels, merged_label, largest, droplet);
    beam_free(beam);
}
