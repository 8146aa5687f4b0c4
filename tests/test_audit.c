#include "cli/audit.h"

#include "cli/audit_findings.h"
#include "cli/digit_slip.h"
#include "cli/line_crossings.h"
#include "cli/report_html.h"
#include "cli/write_audit.h"
#include "physics/constants.h"
#include "physics/drag.h"
#include "physics/velocity_charge.h"

#include <glib/gstdio.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_randist.h>
#include <json-glib/json-glib.h>
#include <math.h>
#include <string.h>
#include <time.h>

/* ---- a cell in which every speed is known ---- */

static const double step_mm = 0.1, rate_hz = 25, length_s = 150, leg_s = 7.3, voltage_V = 300;

typedef struct {
    double fall, rise; /* divisions per second: field off, field on */
} Droplet;

static const Droplet droplets[] = {{0.62, 0.55}, {0.25, 0.31}, {0.45, 0.4},
                                   {0.36, 0.5},  {0.55, 0.66}, {0.3, 0.22}};

static bool is_on(double time_s)
{
    return (int)(time_s / leg_s) % 2 == 1;
}

static void add_switches(RfResults *results)
{
    for (unsigned i = 1; i * leg_s < length_s; i++) {
        RfSwitchRow row = {.number = i,
                           .time_s = {i * leg_s, 0.004},
                           .from = i % 2 ? RF_FIELD_OFF : RF_FIELD_TOP_PLUS,
                           .to = i % 2 ? RF_FIELD_TOP_PLUS : RF_FIELD_OFF};
        g_array_append_val(results->switches, row);
    }
}

/* scatter: of one frame's Brownian step, in divisions. */
static void add_path(RfResults *results, unsigned number, Droplet droplet, double scatter, gsl_rng *random)
{
    double level = 10 + 3.7 * number;
    for (int i = 0; i < (int)(length_s * rate_hz); i++) {
        double time_s = i / rate_hz;
        RfPathRow row = {.droplet = number,
                         .frame = i,
                         .seen = true,
                         .time_s = time_s,
                         .y_mm = level * step_mm,
                         .u_y_mm = 1e-4};
        g_array_append_val(results->paths, row);
        level += (is_on(time_s) ? -droplet.rise : droplet.fall) / rate_hz + gsl_ran_gaussian(random, scatter);
    }
}

static RfResults *empty_cell(void)
{
    RfResults *results = rf_results_new();
    results->scale = (RfScaleRow){
        .found = true, .px_per_mm_x = 500, .px_per_mm_y = 500, .has_lines = true, .line_step_mm = step_mm};
    add_switches(results);
    return results;
}

static RfResults *cell(void)
{
    RfResults *results = empty_cell();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(random, 20);
    for (unsigned i = 0; i < G_N_ELEMENTS(droplets); i++)
        add_path(results, i + 1, droplets[i], 0.014, random);
    gsl_rng_free(random);
    return results;
}

/* ---- a person ---- */

typedef struct {
    double bias_s, spread_s, clock_s;
    gsl_rng *random;
    GString *text;
    GPtrArray *expected; /* static words, one per entry */
    GArray *acts[2][3];  /* RfPassage: fall and rise, one to three divisions */
} Person;

static Person *person_new(const RfResults *results, double bias_s, double spread_s, double clock_s,
                          unsigned long seed)
{
    Person *person = g_new0(Person, 1);
    *person = (Person){.bias_s = bias_s, .spread_s = spread_s, .clock_s = clock_s};
    person->random = gsl_rng_alloc(gsl_rng_mt19937);
    gsl_rng_set(person->random, seed);
    person->text = g_string_new("entry,label,motion,divisions,time_s,voltage_V,start_s\n");
    person->expected = g_ptr_array_new();
    g_autoptr(RfLineCrossings) crossings = rf_line_crossings_new(results);
    for (int rise = 0; rise < 2; rise++)
        for (int n = 0; n < 3; n++)
            person->acts[rise][n] = rf_line_crossings_passages(crossings, n + 1, rise);
    return person;
}

static void person_free(Person *person)
{
    for (int rise = 0; rise < 2; rise++)
        for (int n = 0; n < 3; n++) g_array_unref(person->acts[rise][n]);
    g_ptr_array_unref(person->expected);
    g_string_free(person->text, TRUE);
    gsl_rng_free(person->random);
    g_free(person);
}
G_DEFINE_AUTOPTR_CLEANUP_FUNC(Person, person_free)

static double took_s(const RfPassage *act)
{
    return act->end_s - act->start_s;
}

/* A clean act, or one with exactly one switch well inside. */
static const RfPassage *pick(Person *person, int *rise, int *n, unsigned switches)
{
    for (;;) {
        *rise = (int)gsl_rng_uniform_int(person->random, 2);
        *n = (int)gsl_rng_uniform_int(person->random, 3) + 1;
        const GArray *acts = person->acts[*rise][*n - 1];
        const RfPassage *act =
            &g_array_index(acts, RfPassage, gsl_rng_uniform_int(person->random, acts->len));
        double after_s = fmod(act->start_s, leg_s), before_s = leg_s - fmod(act->end_s, leg_s);
        bool is_clear = after_s > 0.3 && leg_s - after_s > 0.3 && before_s > 0.3 && leg_s - before_s > 0.3;
        if (act->is_first && act->switches == switches && is_clear && took_s(act) > 0.8 &&
            took_s(act) < (switches ? 30 : 9))
            return act;
    }
}

/* What really happened lies within the recording's own uncertainty of what was tracked. */
static double by_hand(Person *person, const RfPassage *act)
{
    return took_s(act) + person->bias_s + gsl_ran_gaussian(person->random, person->spread_s) +
           gsl_ran_gaussian(person->random, act->sigma_s);
}

static void write_entry(Person *person, unsigned label, const RfPassage *act, int rise, int n, double time_s,
                        RfFinding finding)
{
    double start_s = act->start_s + gsl_ran_gaussian(person->random, 0.1) + person->clock_s;
    g_ptr_array_add(person->expected, (char *)(uintptr_t)rf_finding_to_string(finding));
    g_string_append_printf(person->text, "%u,%c,%s,%d,%.2f,%.0f,%.2f\n", person->expected->len,
                           'A' + (int)label - 1, rise ? "rise" : "fall", n, time_s,
                           is_on(act->start_s) ? voltage_V : 0, start_s);
}

static void note_sound(Person *person, unsigned count)
{
    for (unsigned i = 0; i < count; i++) {
        int rise, n;
        const RfPassage *act = pick(person, &rise, &n, 0);
        write_entry(person, act->droplet, act, rise, n, by_hand(person, act), RF_FINDING_AGREES);
    }
}

/* Does any passage of that kind begin near that time and take about so long? */
static bool is_excused(const Person *person, int rise, int n, double start_s, double time_s, unsigned only,
                       double within_s)
{
    if (n < 1 || n > 3) return false;
    const GArray *acts = person->acts[rise][n - 1];
    for (guint i = 0; i < acts->len; i++) {
        const RfPassage *act = &g_array_index(acts, RfPassage, i);
        if ((only == 0 || act->droplet == only) && fabs(act->start_s - start_s) < 0.6 &&
            fabs(took_s(act) - time_s) < within_s)
            return true;
    }
    return false;
}

static bool may_be_slip(double written_s, double true_s, double within_s)
{
    g_autofree char *text = g_strdup_printf("%.2f", written_s);
    g_autoptr(GArray) slips = g_array_new(FALSE, FALSE, sizeof(RfDigitSlip));
    rf_digit_slip_find(text, 1, 0, slips);
    for (guint i = 0; i < slips->len; i++)
        if (fabs(g_array_index(slips, RfDigitSlip, i).time_s - true_s) < within_s) return true;
    return false;
}

static void note_miscount(Person *person)
{
    for (;;) {
        int rise, n;
        const RfPassage *act = pick(person, &rise, &n, 0);
        int wrong = n == 1 ? 2 : n == 3 ? 2 : 1 + 2 * (int)gsl_rng_uniform_int(person->random, 2);
        double time_s = by_hand(person, act), margin_s = 6 * person->spread_s;
        if (is_excused(person, rise, wrong, act->start_s, time_s, 0, margin_s) ||
            may_be_slip(time_s, took_s(act) * wrong / n, 0.5))
            continue;
        write_entry(person, act->droplet, act, rise, wrong, time_s, RF_FINDING_LINE_MISCOUNT);
        return;
    }
}

static void note_exchange_of_digits(Person *person)
{
    for (;;) {
        int rise, n;
        const RfPassage *act = pick(person, &rise, &n, 0);
        int hundredths = (int)lround(100 * by_hand(person, act));
        int slipped = hundredths % 10 + 100 * (hundredths / 10 % 10) + 10 * (hundredths / 100);
        double time_s = slipped / 100.0, margin_s = 8 * person->spread_s;
        if (hundredths > 999 || fabs(time_s - took_s(act)) < margin_s || time_s < 0.3 ||
            is_excused(person, rise, n, act->start_s, time_s, 0, margin_s) ||
            is_excused(person, rise, n + 1, act->start_s, time_s, act->droplet, margin_s) ||
            is_excused(person, rise, n - 1, act->start_s, time_s, act->droplet, margin_s))
            continue;
        write_entry(person, act->droplet, act, rise, n, time_s, RF_FINDING_DIGIT_SLIP);
        return;
    }
}

static void note_other_droplet(Person *person)
{
    for (;;) {
        int rise, n;
        const RfPassage *act = pick(person, &rise, &n, 0);
        unsigned label = 1 + (unsigned)gsl_rng_uniform_int(person->random, G_N_ELEMENTS(droplets));
        double time_s = by_hand(person, act), margin_s = 6 * person->spread_s;
        if (label == act->droplet || is_excused(person, rise, n, act->start_s, time_s, label, margin_s) ||
            is_excused(person, rise, n + 1, act->start_s, time_s, label, margin_s) ||
            is_excused(person, rise, n - 1, act->start_s, time_s, label, margin_s))
            continue;
        write_entry(person, label, act, rise, n, time_s, RF_FINDING_OTHER_DROPLET);
        return;
    }
}

static void note_disagreement(Person *person)
{
    for (;;) {
        int rise, n;
        const RfPassage *act = pick(person, &rise, &n, 0);
        double sign = gsl_rng_uniform(person->random) < 0.5 ? -1 : 1, margin_s = 6 * person->spread_s;
        double time_s = took_s(act) + person->bias_s + sign * 9 * person->spread_s;
        if (time_s < 0.4 || may_be_slip(time_s, took_s(act), margin_s) ||
            is_excused(person, rise, n, act->start_s, time_s, 0, margin_s) ||
            is_excused(person, rise, n + 1, act->start_s, time_s, act->droplet, margin_s) ||
            is_excused(person, rise, n - 1, act->start_s, time_s, act->droplet, margin_s))
            continue;
        write_entry(person, act->droplet, act, rise, n, time_s, RF_FINDING_DISAGREES);
        return;
    }
}

static void note_switched_inside(Person *person)
{
    for (;;) {
        int rise, n;
        const RfPassage *act =
            pick(person, &rise, &n, 2); /* falls, rises and falls again: on its way for long */
        double time_s = by_hand(person, act), margin_s = 6 * person->spread_s;
        if (is_excused(person, rise, n + 1, act->start_s, time_s, act->droplet, margin_s) ||
            is_excused(person, rise, n - 1, act->start_s, time_s, act->droplet, margin_s))
            continue;
        write_entry(person, act->droplet, act, rise, n, time_s, RF_FINDING_SWITCHED_INSIDE);
        return;
    }
}

static void note_after_the_end(Person *person)
{
    const RfPassage later = {.start_s = length_s + 20, .end_s = length_s + 22.5};
    write_entry(person, 1, &later, 0, 1, took_s(&later), RF_FINDING_UNMATCHED);
}

/* ---- auditing it ---- */

static void audit(RfResults *results, const char *text, const RfMedium *medium)
{
    g_autofree char *path = NULL;
    g_autoptr(GError) error = NULL;
    int fd = g_file_open_tmp("timings-XXXXXX.csv", &path, &error);
    g_assert_no_error(error);
    g_close(fd, NULL);
    g_assert_true(g_file_set_contents(path, text, -1, NULL));
    g_assert_true(rf_audit_timings(path, results, medium, &error));
    g_assert_no_error(error);
    g_unlink(path);
}

static const RfAuditRow *row_at(const RfResults *results, guint i)
{
    g_assert_cmpuint(i, <, results->audit->len);
    return &g_array_index(results->audit, RfAuditRow, i);
}

/* Findings that differ from what was planted; `sound`: among the sound entries, or among the mistakes. */
static unsigned count_unlike(const RfResults *results, const Person *person, bool sound)
{
    unsigned unlike = 0;
    g_assert_cmpuint(results->audit->len, ==, person->expected->len);
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = row_at(results, i);
        const char *expected = g_ptr_array_index(person->expected, i);
        if (g_str_equal(row->finding, expected) || g_str_equal(expected, "agrees") != sound) continue;
        unlike++;
        g_test_message("entry %u: %s, expected %s: %s", row->entry, row->finding, expected, row->evidence);
    }
    return unlike;
}

static void assert_within(RfValue found, double planted, double sigmas)
{
    g_test_message("%.4f(%.4f), planted %.4f", found.value, found.sigma, planted);
    g_assert_cmpfloat(found.sigma, >, 0);
    g_assert_cmpfloat(fabs(found.value - planted), <, sigmas * found.sigma);
}

static void every_mistake_by_its_name(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0.04, 0.09, 0, 5);
    note_sound(person, 60);
    for (int i = 0; i < 5; i++) {
        note_miscount(person);
        note_exchange_of_digits(person);
        note_other_droplet(person);
        note_disagreement(person);
        note_switched_inside(person);
    }
    note_after_the_end(person);
    audit(results, person->text->str, NULL);
    g_assert_cmpuint(count_unlike(results, person, false), ==, 0);
    g_assert_cmpuint(count_unlike(results, person, true), <=, 1); /* of 60, once in a hundred allowed */
    assert_within(results->person.bias_s, 0.04, 2);
    assert_within(results->person.spread_s, 0.09, 2);
}

typedef struct {
    double bias_s, spread_s, clock_s;
} Habit;

static double pull2(RfValue found, double planted)
{
    double pull = (found.value - planted) / found.sigma;
    g_test_message("%.4f(%.4f), planted %.4f: %+.2f sigma", found.value, found.sigma, planted, pull);
    return pull * pull;
}

/* At most one sound entry in a hundred is called unsound, and bias and spread come back with honest uncertainties: the
 * squares of their pulls add up as chi squared does (99 % for 8 of each: 20.1). */
static void sound_entries_stay_sound(void)
{
    static const Habit habits[] = {{0.05, 0.1, 0},  {-0.08, 0.06, 5000}, {0.1, 0.2, -12.5},
                                   {0, 0.05, 0},    {0.2, 0.15, 30.7},   {0.02, 0.12, 0},
                                   {-0.1, 0.09, 0}, {0.15, 0.25, 2}};
    unsigned unsound = 0;
    double bias2 = 0, spread2 = 0;
    for (guint i = 0; i < G_N_ELEMENTS(habits); i++) {
        g_autoptr(RfResults) results = cell();
        g_autoptr(Person) person =
            person_new(results, habits[i].bias_s, habits[i].spread_s, habits[i].clock_s, 100 + i);
        note_sound(person, 120);
        audit(results, person->text->str, NULL);
        unsound += count_unlike(results, person, true);
        bias2 += pull2(results->person.bias_s, habits[i].bias_s);
        spread2 += pull2(results->person.spread_s, habits[i].spread_s);
        assert_within(results->person.clock_offset_s, habits[i].clock_s, 3);
    }
    g_test_message("%u of 960 sound entries called unsound; pulls squared: bias %.1f, spread %.1f of 8",
                   unsound, bias2, spread2);
    g_assert_cmpuint(unsound, <=, 9);
    g_assert_cmpfloat(bias2, <, 20.1);
    g_assert_cmpfloat(spread2, <, 20.1);
}

/* One reaction scatters by 0.07 s, a start-stop interval by sqrt(2) 0.07 = 0.10 s, without bias: S. Faux and J. Godolphin, Manual
 * timing in physics experiments: Error and uncertainty, Am. J. Phys. 87 (2019) 110, from 4304 timings (abstract; authors
 * from memory, unverified). */
static void two_reactions_make_an_interval(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0, 0.07 * sqrt(2), 0, 9);
    note_sound(person, 300);
    audit(results, person->text->str, NULL);
    assert_within(results->person.spread_s, 0.10, 2);
}

static void en_and_limits_by_their_definition(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0.05, 0.1, 0, 7);
    note_sound(person, 80);
    audit(results, person->text->str, NULL);
    double sum = 0, squares = 0;
    unsigned n = 0;
    for (guint i = 0; i < results->audit->len; i++) {
        const RfAuditRow *row = row_at(results, i);
        double u =
            2 * hypot(row->hand_time_s.sigma, row->tracked_time_s.sigma); /* k = 2, ISO 13528:2015, 9.7 */
        g_assert_cmpfloat_with_epsilon(row->en_number, row->difference_s / u, 1e-9);
        if (!g_str_equal(row->finding, "agrees")) continue;
        sum += row->difference_s;
        squares += row->difference_s * row->difference_s;
        n++;
    }
    double mean = sum / n, s = sqrt((squares - n * mean * mean) / (n - 1));
    const RfAgreement *limits = &results->person.agreement;
    g_assert_cmpfloat_with_epsilon(limits->lower, mean - 1.96 * s, 1e-9);
    g_assert_cmpfloat_with_epsilon(limits->upper, mean + 1.96 * s, 1e-9);
    g_assert_cmpfloat(limits->lower_interval.low, <, limits->lower);
    g_assert_cmpfloat(limits->lower_interval.high, >, limits->lower);
}

static void without_a_clock_by_label_and_speed(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0.03, 0.08, 0, 3);
    note_sound(person, 120);
    g_autoptr(GRegex) last_column = g_regex_new(",[^,\n]*$", G_REGEX_MULTILINE, 0, NULL);
    g_autofree char *text = g_regex_replace_literal(last_column, person->text->str, -1, 0, "", 0, NULL);
    audit(results, text, NULL);
    g_assert_false(results->person.has_clock);
    g_assert_cmpuint(count_unlike(results, person, true), <=, 2);
    assert_within(results->person.bias_s, 0.03, 2);
}

/* ---- what it costs ---- */

static RfMedium air(void)
{
    return (RfMedium){.viscosity_pa_s = 1.83e-5,
                      .mean_free_path_m = 6.7e-8,
                      .slip = {1.165, 0.483, 0.997},
                      .oil_density_kg_m3 = 886,
                      .air_density_kg_m3 = 1.18,
                      .temperature_kelvin = 296,
                      .gravity_m_s2 = 9.81,
                      .plate_gap_m = 6e-3};
}

static void assert_json_says(const RfResults *results)
{
    g_autofree char *text = rf_write_audit_json(results);
    g_autoptr(JsonParser) parser = json_parser_new();
    g_assert_true(json_parser_load_from_data(parser, text, -1, NULL));
    JsonObject *root = json_node_get_object(json_parser_get_root(parser));
    JsonObject *person = json_object_get_object_member(root, "person");
    g_assert_cmpint(json_object_get_int_member(person, "sound"), ==, results->person.sound);
    g_assert_cmpfloat_with_epsilon(json_object_get_double_member(person, "bias_s"),
                                   results->person.bias_s.value, 1e-6);
    g_assert_cmpuint(json_array_get_length(json_object_get_array_member(root, "charges")), ==,
                     results->hand_charges->len);
}

static void charge_from_the_stopwatch(void)
{
    const RfMedium medium = air();
    const double radius_m = 0.62e-6, charge = -4 * RF_ELEMENTARY_CHARGE_COULOMB;
    double settling = rf_drag_settling_speed_m_s(&medium, radius_m);
    double pushed =
        settling + charge * voltage_V / (rf_drag_coefficient_kg_s(&medium, radius_m) * medium.plate_gap_m);
    const Droplet droplet = {settling * 1e3 / step_mm, -pushed * 1e3 / step_mm};
    g_autoptr(RfResults) results = empty_cell();
    gsl_rng *random = gsl_rng_alloc(gsl_rng_mt19937);
    add_path(results, 1, droplet, 0, random);
    gsl_rng_free(random);
    RfDropletRow row = {.droplet = 1,
                        .spell = 1,
                        .end_s = length_s,
                        .charge_C = {charge, 1e-21},
                        .has_charge = true,
                        .reason = g_strdup("")};
    g_array_append_val(results->droplets, row);
    g_autoptr(Person) person = person_new(results, 0.15, 0.02, 0, 11);
    note_sound(person, 40);
    audit(results, person->text->str, &medium);
    g_assert_cmpuint(results->hand_charges->len, ==, 1);
    const RfHandChargeRow *found = &g_array_index(results->hand_charges, RfHandChargeRow, 0);
    g_test_message("raw %.4g C, corrected %.4g C, true %.4g C", found->raw_C.value, found->corrected_C.value,
                   charge);
    g_assert_cmpfloat_with_epsilon(found->corrected_C.value / charge, 1, 0.01);
    g_assert_cmpfloat(found->raw_C.value / charge, <, 0.97); /* timed too long: too slow, too little charge */
    g_assert_true(results->person.has_charge_effect);
    assert_json_says(results);
    g_assert_cmpfloat(results->person.charge_effect.value, <, -0.03);
    g_assert_cmpfloat(results->person.velocity_effect.value, <, -0.03);
}

/* ---- tables that aren't as they should be ---- */

static void a_bad_cell_and_harmful_label(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0, 0.1, 0, 2);
    note_sound(person, 20);
    g_string_append(person->text, "21,<script>alert(1)</script>,fall,1,abc,0,3\n");
    audit(results, person->text->str, NULL);
    const RfAuditRow *bad = row_at(results, 20);
    g_assert_cmpstr(bad->finding, ==, "unmatched");
    g_assert_nonnull(strstr(bad->evidence, "line 22, column time_s: seen `abc`"));
    g_assert_cmpuint(results->person.unreadable, ==, 1);
    g_assert_cmpuint(results->warnings->len, ==, 1);
    g_autoptr(GString) page = rf_report_html_audit_new(results);
    g_assert_null(strstr(page->str, "<script>alert"));
    g_assert_nonnull(strstr(page->str, "&lt;script&gt;alert(1)"));
    g_autofree char *screen = rf_write_audit_summary(results, NULL, 80);
    g_assert_nonnull(strstr(screen, "of 21 entries agree"));
}

static void no_lines_no_audit(void)
{
    g_autoptr(RfResults) results = cell();
    results->scale.has_lines = false;
    g_autofree char *path = NULL;
    g_close(g_file_open_tmp("timings-XXXXXX.csv", &path, NULL), NULL);
    g_assert_true(g_file_set_contents(path, "motion,divisions,time_s\nfall,1,2\n", -1, NULL));
    g_autoptr(GError) error = NULL;
    g_assert_false(rf_audit_timings(path, results, NULL, &error));
    g_assert_nonnull(error);
    g_assert_nonnull(strstr(error->message, "reticle lines across gravity"));
    g_unlink(path);
}

static void no_droplet_at_all(void)
{
    g_autoptr(RfResults) results = empty_cell();
    audit(results, "label,motion,divisions,time_s,start_s\nA,fall,1,2,3\n", NULL);
    g_assert_cmpstr(row_at(results, 0)->finding, ==, "unmatched");
    g_assert_false(results->person.is_known);
}

static void a_long_record_is_read_whole(void)
{
    g_autoptr(RfResults) results = cell();
    g_autoptr(Person) person = person_new(results, 0.03, 0.1, 0, 4);
    note_sound(person, 100000);
    clock_t from = clock();
    audit(results, person->text->str, NULL);
    double cpu_s = (double)(clock() - from) / CLOCKS_PER_SEC;
    g_test_message("100 000 entries in %.2f s of processor time", cpu_s);
    g_assert_cmpuint(results->audit->len, ==, 100000);
    unsigned unsound = 0;
    for (guint i = 0; i < results->audit->len; i++)
        unsound += !g_str_equal(row_at(results, i)->finding, "agrees");
    g_test_message("%u of 100 000 sound entries called unsound", unsound);
    g_assert_cmpuint(unsound, <, 1000);
}

int main(int argc, char **argv)
{
    gsl_set_error_handler_off();
    g_test_init(&argc, &argv, NULL);
    g_test_add_func("/audit/findings/every-mistake-by-its-name", every_mistake_by_its_name);
    g_test_add_func("/audit/findings/sound-entries-stay-sound", sound_entries_stay_sound);
    g_test_add_func("/audit/findings/without-a-clock-by-label-and-speed", without_a_clock_by_label_and_speed);
    g_test_add_func("/audit/person/two-reactions-make-an-interval", two_reactions_make_an_interval);
    g_test_add_func("/audit/person/en-and-limits-by-their-definition", en_and_limits_by_their_definition);
    g_test_add_func("/audit/person/charge-from-the-stopwatch", charge_from_the_stopwatch);
    g_test_add_func("/audit/tables/a-bad-cell-and-harmful-label", a_bad_cell_and_harmful_label);
    g_test_add_func("/audit/tables/no-lines-no-audit", no_lines_no_audit);
    g_test_add_func("/audit/tables/no-droplet-at-all", no_droplet_at_all);
    g_test_add_func("/audit/tables/a-long-record-is-read-whole", a_long_record_is_read_whole);
    return g_test_run();
}
