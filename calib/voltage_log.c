#include "calib/voltage_log.h"

#include <math.h>
#include <stdlib.h>

GQuark rf_voltage_log_error_quark(void)
{
    return g_quark_from_static_string("rf-voltage-log-error-quark");
}

static const unsigned least_samples_in_a_spell = 3;

void rf_voltage_log_free(RfVoltageLog *log)
{
    if (!log) return;
    g_array_unref(log->spells);
    g_array_unref(log->switches);
    g_free(log);
}

typedef struct {
    const double *time_s, *voltage_V;
    size_t n;
    double noise_V, step_V; /* step_V: what no noise makes between neighbours */
} Samples;

static int by_value(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static double median_step(const double *values, size_t n, bool absolute)
{
    g_autofree double *steps = g_new(double, n);
    for (size_t i = 1; i < n; i++) {
        double step = values[i] - values[i - 1];
        steps[i - 1] = absolute ? fabs(step) : step;
    }
    qsort(steps, n - 1, sizeof *steps, by_value);
    return steps[(n - 1) / 2];
}

/* A step stands out of the noise, and is more than a hundredth of the highest voltage, which is nothing that moves a droplet. */
static Samples take_samples(const double *time_s, const double *voltage_V, size_t n)
{
    Samples s = {.time_s = time_s, .voltage_V = voltage_V, .n = n};
    double most_V = 0.0;
    for (size_t i = 0; i < n; i++) most_V = MAX(most_V, fabs(voltage_V[i]));
    s.noise_V = 1.4826 * median_step(voltage_V, n, true) / sqrt(2.0);
    s.step_V = MAX(8.0 * s.noise_V, 0.01 * most_V);
    return s;
}

/* A single sample away from two neighbours that agree is a slip of the meter. */
static bool is_slip(const Samples *s, size_t i)
{
    if (i == 0 || i + 1 == s->n) return false;
    double before_V = s->voltage_V[i - 1], here_V = s->voltage_V[i], behind_V = s->voltage_V[i + 1];
    return fabs(before_V - behind_V) < s->step_V && fabs(here_V - before_V) >= s->step_V &&
           fabs(here_V - behind_V) >= s->step_V;
}

static double smooth_V(const Samples *s, size_t i)
{
    return is_slip(s, i) ? 0.5 * (s->voltage_V[i - 1] + s->voltage_V[i + 1]) : s->voltage_V[i];
}

typedef struct {
    size_t first, last;
} Rest;

static double mean_V(const Samples *s, Rest rest)
{
    double sum = 0.0;
    for (size_t i = rest.first; i <= rest.last; i++) sum += smooth_V(s, i);
    return sum / (double)(rest.last - rest.first + 1);
}

/* Two stretches at the same level with a short disturbance between them are one. */
static void add_rest(const Samples *s, Rest rest, GArray *rests)
{
    Rest *before = rests->len ? &g_array_index(rests, Rest, rests->len - 1) : NULL;
    if (rest.last - rest.first + 1 < least_samples_in_a_spell) return;
    bool is_close = before && rest.first - before->last <= least_samples_in_a_spell;
    if (is_close && fabs(mean_V(s, rest) - mean_V(s, *before)) < s->step_V)
        before->last = rest.last;
    else
        g_array_append_val(rests, rest);
}

/* Stretches in which no sample is a step away from the one before. */
static GArray *find_rests(const Samples *s)
{
    GArray *rests = g_array_new(false, false, sizeof(Rest));
    Rest rest = {0, 0};
    for (size_t i = 1; i < s->n; i++) {
        if (fabs(smooth_V(s, i) - smooth_V(s, i - 1)) < s->step_V) {
            rest.last = i;
            continue;
        }
        add_rest(s, rest, rests);
        rest = (Rest){i, i};
    }
    add_rest(s, rest, rests);
    return rests;
}

/* Slips don't count for the mean. */
static RfLogSpell spell_of(const Samples *s, Rest rest)
{
    double sum = 0.0, squares = 0.0;
    unsigned n = 0;
    for (size_t i = rest.first; i <= rest.last; i++) {
        if (is_slip(s, i)) continue;
        sum += s->voltage_V[i];
        n++;
    }
    double mean = sum / n;
    for (size_t i = rest.first; i <= rest.last; i++)
        if (!is_slip(s, i)) squares += (s->voltage_V[i] - mean) * (s->voltage_V[i] - mean);
    double ripple_V = sqrt(squares / (n - 1));
    return (RfLogSpell){.start_s = s->time_s[rest.first],
                        .end_s = s->time_s[rest.last],
                        .voltage_V = {mean, ripple_V / sqrt(n)},
                        .ripple_V = ripple_V,
                        .samples = n};
}

/* Off is what is near zero against the highest level: a supply that is off still reads a few tenths of a volt. */
static void name_levels(const Samples *s, GArray *spells)
{
    double most_V = 0.0;
    for (unsigned i = 0; i < spells->len; i++)
        most_V = MAX(most_V, fabs(g_array_index(spells, RfLogSpell, i).voltage_V.value));
    double off_V = MAX(s->step_V, 0.03 * most_V);
    for (unsigned i = 0; i < spells->len; i++) {
        RfLogSpell *spell = &g_array_index(spells, RfLogSpell, i);
        double v = spell->voltage_V.value;
        spell->sign = fabs(v) < off_V ? 0 : v > 0.0 ? 1 : -1;
    }
}

/* Where the straight lines between samples pass halfway between two levels. */
static RfLogSwitch switch_between(const Samples *s, Rest from, Rest to)
{
    double half_V = 0.5 * (mean_V(s, from) + mean_V(s, to));
    bool is_rising = mean_V(s, to) > mean_V(s, from);
    size_t i = from.last;
    while (i + 1 < to.first && (s->voltage_V[i + 1] < half_V) == is_rising) i++;
    double gap_s = s->time_s[i + 1] - s->time_s[i], ramp_s = s->time_s[to.first] - s->time_s[from.last];
    double step_V = s->voltage_V[i + 1] - s->voltage_V[i];
    double part = step_V != 0.0 ? CLAMP((half_V - s->voltage_V[i]) / step_V, 0.0, 1.0) : 0.5;
    /* one gap wide: anywhere in it, a rectangular distribution; on a ramp seen in several samples, better than that */
    bool is_sudden = i == from.last && i + 1 == to.first;
    double at_s = s->time_s[i] + (is_sudden ? 0.5 : part) * gap_s;
    return (RfLogSwitch){{at_s, gap_s / sqrt(12.0)}, ramp_s};
}

static bool check_samples(const double *time_s, size_t n, const char *name, GError **error)
{
    if (n < 2 * least_samples_in_a_spell) {
        g_set_error(error, RF_VOLTAGE_LOG_ERROR, RF_VOLTAGE_LOG_ERROR_SHORT,
                    "%s: the voltage log has %zu samples; at least %u are needed", name, n,
                    2 * least_samples_in_a_spell);
        return false;
    }
    for (size_t i = 1; i < n; i++)
        if (!(time_s[i] > time_s[i - 1])) {
            g_set_error(error, RF_VOLTAGE_LOG_ERROR, RF_VOLTAGE_LOG_ERROR_TIME,
                        "%s: the voltage log's time doesn't rise from %.6g s to %.6g s (samples %zu and "
                        "%zu); it has to",
                        name, time_s[i - 1], time_s[i], i, i + 1);
            return false;
        }
    return true;
}

RfVoltageLog *rf_voltage_log_from_samples(const double *time_s, const double *voltage_V, size_t n,
                                          const char *name, GError **error)
{
    if (!check_samples(time_s, n, name, error)) return NULL;
    Samples samples = take_samples(time_s, voltage_V, n);
    g_autoptr(GArray) rests = find_rests(&samples);
    if (rests->len == 0) {
        g_set_error(error, RF_VOLTAGE_LOG_ERROR, RF_VOLTAGE_LOG_ERROR_SHORT,
                    "%s: the voltage never rests for %u samples; levels are needed between the switches",
                    name, least_samples_in_a_spell);
        return NULL;
    }
    RfVoltageLog *log = g_new0(RfVoltageLog, 1);
    log->spells = g_array_new(false, false, sizeof(RfLogSpell));
    log->switches = g_array_new(false, false, sizeof(RfLogSwitch));
    log->noise_V = samples.noise_V;
    log->interval_s = median_step(time_s, n, false);
    for (unsigned i = 0; i < rests->len; i++) {
        Rest rest = g_array_index(rests, Rest, i);
        RfLogSpell spell = spell_of(&samples, rest);
        g_array_append_val(log->spells, spell);
        if (i == 0) continue;
        RfLogSwitch change = switch_between(&samples, g_array_index(rests, Rest, i - 1), rest);
        g_array_append_val(log->switches, change);
    }
    name_levels(&samples, log->spells);
    return log;
}

static bool find_columns(const RfTable *table, size_t column[2], double scale[2], GError **error)
{
    static const char *const bases[2][3] = {{"time", "t", "clock"}, {"voltage", "u", "v"}};
    static const char *const units[] = {"s", "V"}, *const names[] = {"time_s", "voltage_V"};
    for (int k = 0; k < 2; k++) {
        int found = -1;
        for (int i = 0; i < 3 && found < 0; i++)
            found = rf_table_find_quantity(table, bases[k][i], units[k], &scale[k]);
        if (found < 0) return rf_table_require(table, names[k], &column[k], error);
        column[k] = (size_t)found;
    }
    return true;
}

RfVoltageLog *rf_voltage_log_read(const char *path, GError **error)
{
    size_t column[2];
    double scale[2];
    g_autoptr(RfTable) table = rf_table_read(path, error);
    if (!table || !find_columns(table, column, scale, error)) return NULL;
    size_t n = rf_table_rows(table);
    g_autofree double *time_s = g_new(double, n + 1), *voltage_V = g_new(double, n + 1);
    for (size_t i = 0; i < n; i++) {
        if (!rf_table_number(table, i, column[0], &time_s[i], error) ||
            !rf_table_number(table, i, column[1], &voltage_V[i], error))
            return NULL;
        time_s[i] *= scale[0];
        voltage_V[i] *= scale[1];
    }
    return rf_voltage_log_from_samples(time_s, voltage_V, n, path, error);
}
