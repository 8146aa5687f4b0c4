#include "physics/noise_memory.h"

#include <math.h>
#include <stdlib.h>

#include "physics/droplet_search.h"

/* The longest trails tell the most; more of them or more of each would only cost time. */
enum { TRAILS_MAX = 16, SAMPLES_MAX = 900, SAMPLES_MIN = 100 };
/* Three parameters: twice the gain is chi-squared with three degrees of freedom, 8.1 at p = 0.001. */
static const double GAIN_MIN = 8.1;

typedef struct {
    RfNoiseMemory fall, across;
} Memories;

typedef struct {
    RfDropletPath *path;
    RfSearch search;
    RfSearchPoint summit; /* found last; the next climb starts there */
    RfSearchPoint point;  /* of the climb under way */
    bool is_there;        /* the climb came to a summit */
} Member;

typedef struct {
    Member member[TRAILS_MAX];
    size_t n;
    const RfSideBySide *how;
    double frame_s;
    Memories tried, best;
    double best_value;
} Pool;

static int by_samples(const void *a, const void *b)
{
    const RfTrail *x = *(const RfTrail *const *)a, *y = *(const RfTrail *const *)b;
    if (x->n != y->n) return x->n < y->n ? 1 : -1;
    return (x > y) - (x < y);
}

static void add_member(Pool *pool, const RfTrail *trail, const RfDropletFit *fit, const RfDropletModel *model)
{
    Member *m = &pool->member[pool->n++];
    RfTrail part = {trail->droplet, MIN(trail->n, SAMPLES_MAX), trail->samples};
    m->path = rf_droplet_path_new(&part, model);
    rf_search_init(&m->search, m->path, model, &m->summit);
    m->summit.at[RF_LOG_RADIUS] = log(fit->radius_m.value);
    m->summit.at[RF_FALL_NOISE] = fit->fall_extra_variance_m2.value / m->search.noise_unit_m2;
    m->summit.at[RF_ACROSS_NOISE] = fit->across_extra_variance_m2.value / m->search.noise_unit_m2;
    pool->frame_s += m->path->typical_step_s;
}

/* Droplets whose charge changed are left out: their fall would need their steps. */
static void pool_fill(Pool *pool, const RfTrail *trails, const RfDropletFit *fits, size_t n,
                      const RfDropletModel *model)
{
    g_autofree const RfTrail **order = g_new(const RfTrail *, n + 1);
    size_t usable = 0;
    for (size_t i = 0; i < n; i++)
        if (fits[i].state == RF_FIT_DONE && fits[i].spells == 1 && trails[i].n >= SAMPLES_MIN)
            order[usable++] = &trails[i];
    qsort(order, usable, sizeof *order, by_samples);
    for (size_t i = 0; i < MIN(usable, TRAILS_MAX); i++)
        add_member(pool, order[i], &fits[order[i] - trails], model);
    if (pool->n > 0) pool->frame_s /= (double)pool->n;
}

static void pool_clear(Pool *pool)
{
    for (size_t i = 0; i < pool->n; i++) rf_droplet_path_free(pool->member[i].path);
}

static void climb(void *context, size_t i)
{
    Pool *pool = context;
    Member *m = &pool->member[i];
    m->point = m->summit;
    m->search.fall_memory = pool->tried.fall;
    m->search.across_memory = pool->tried.across;
    m->is_there = rf_search_climb(&m->search, &m->point);
}

/* Sum over droplets of the log-likelihood, each at its own best radius and noise. */
static double pooled(Pool *pool, const Memories *memories)
{
    double sum = 0;
    pool->tried = *memories;
    rf_for_each(pool->how, pool->n, climb, pool);
    for (size_t i = 0; i < pool->n; i++) {
        Member *m = &pool->member[i];
        if (!m->is_there) return -HUGE_VAL; /* such memory is impossible for one of them */
        m->summit = m->point;
        sum += m->point.log_likelihood;
    }
    return sum;
}

static void try_memories(Pool *pool, Memories memories)
{
    double value = pooled(pool, &memories);
    if (value <= pool->best_value) return;
    pool->best_value = value;
    pool->best = memories;
}

static void try_both(Pool *pool, RfNoiseMemory memory)
{
    try_memories(pool, (Memories){memory, memory});
}

/* The same kind of memory, larger and longer by these factors. */
static RfNoiseMemory scaled(RfNoiseMemory memory, double size, double length)
{
    return (RfNoiseMemory){memory.share * size, memory.memory_s * length, memory.smear_s * size};
}

/* The sizes on the two axes and the common length, by steps that shrink. */
static void polish(Pool *pool)
{
    static const double factors[] = {1.8, 1.35, 1.15};
    for (size_t round = 0; round < G_N_ELEMENTS(factors); round++)
        for (int side = 0; side < 2; side++) {
            double f = side == 0 ? factors[round] : 1 / factors[round];
            Memories at = pool->best;
            try_memories(pool, (Memories){scaled(at.fall, f, 1), at.across});
            at = pool->best;
            try_memories(pool, (Memories){at.fall, scaled(at.across, f, 1)});
            at = pool->best;
            try_memories(pool, (Memories){scaled(at.fall, 1, f), scaled(at.across, 1, f)});
        }
}

void rf_noise_memory_estimate(const RfTrail *trails, const RfDropletFit *fits, size_t n,
                              const RfDropletModel *model, const RfSideBySide *how, RfNoiseMemory *fall,
                              RfNoiseMemory *across)
{
    static const double shares[] = {0.3, 1, 3, 10}, smears[] = {0.05, 0.15, 0.4}, lengths[] = {0.5, 2.4};
    const Memories white = {0};
    RfDropletModel plain = *model;
    Pool pool = {.how = how};
    plain.steps = 0;
    plain.fall_memory = plain.across_memory = white.fall;
    pool_fill(&pool, trails, fits, n, &plain);
    double without = pool.best_value = pooled(&pool, &white);
    for (size_t i = 0; pool.n > 0 && i < G_N_ELEMENTS(shares); i++)
        try_both(&pool, (RfNoiseMemory){.share = shares[i], .memory_s = 1.7 * pool.frame_s});
    for (size_t i = 0; pool.n > 0 && i < G_N_ELEMENTS(smears); i++)
        try_both(&pool, (RfNoiseMemory){.smear_s = smears[i] * pool.frame_s, .memory_s = 1.7 * pool.frame_s});
    bool is_promising = pool.best_value > without + 2;
    const Memories start = pool.best;
    for (size_t i = 0; is_promising && i < G_N_ELEMENTS(lengths); i++)
        try_both(&pool, scaled(start.fall, 1, lengths[i]));
    if (is_promising) polish(&pool);
    Memories found = pool.best_value > without + GAIN_MIN ? pool.best : white;
    *fall = found.fall;
    *across = found.across;
    pool_clear(&pool);
}
