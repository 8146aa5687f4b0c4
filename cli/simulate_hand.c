#include "cli/simulate_hand.h"

#include "physics/constants.h"

#include <gsl/gsl_randist.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { TRIES = 4000, CHOICES = 400, FOLLOWED = 8, LETTERS = 25 /* Z is nobody */, MOST_DIVISIONS = 3 };

static const double longest_s = 12, shortest_s = 0.8, away_from_switch_s = 0.3;
static const double plain = 5; /* spreads: a planted mistake is at least so large */

typedef enum {
    AGREES,
    OTHER_DROPLET,
    LINE_MISCOUNT,
    DIGIT_SLIP,
    SWITCHED_INSIDE,
    DISAGREES,
    UNMATCHED
} Finding;
static const char *const finding_names[] = {"agrees",     "other droplet",         "line miscount",
                                            "digit slip", "field switched inside", "disagrees",
                                            "unmatched"};

typedef struct { /* one passage from line to line */
    const RfTrueDroplet *droplet;
    double start_s, end_s;
    int divisions;
    bool is_fall;
    bool has_switch;
} Act;

typedef struct {
    const RfRecord *record;
    const RfWorld *world;
    const RfScene *scene;
    const RfView *view;
    gsl_rng *random;
    GArray *followed; /* const RfTrueDroplet *: the few that stay longest; a person follows no more */
    GArray *starts;   /* double: of the acts written so far; nothing is timed twice */
    GArray *letters;  /* unsigned: droplets in order of first use */
    GString *timings, *truth;
    int entry;
} Notebook;

static double pick(Notebook *book, double low, double high)
{
    return low + (high - low) * gsl_rng_uniform(book->random);
}

static int pick_int(Notebook *book, int choices)
{
    return (int)gsl_rng_uniform_int(book->random, (unsigned long)choices);
}

/* First passage through `line` from row *i on, and the row before it; false if out of sight first. */
static bool find_passage(const Notebook *book, const GArray *seen, unsigned last, double line, unsigned *i,
                         double *time_s)
{
    for (; *i < last; ++*i) {
        const RfSeenAt *a = &g_array_index(seen, RfSeenAt, *i), *b = a + 1;
        if (!a->is_visible || !b->is_visible || a->is_repeated || b->is_repeated) return false;
        double fa = rf_simulate_view_fall_spacings(book->view, a->reference_px) - line;
        double fb = rf_simulate_view_fall_spacings(book->view, b->reference_px) - line;
        if ((fa <= 0) == (fb <= 0)) continue;
        *time_s = a->time_s + (b->time_s - a->time_s) * fa / (fa - fb);
        return true;
    }
    return false;
}

static double speed_m_s(const Notebook *book, const RfTrueDroplet *droplet, double time_s)
{
    const RfWorld *world = book->world;
    const RfBody *body = rf_simulate_record_life(book->record, droplet)->body;
    double radius_m = rf_simulate_motion_radius_m(body, time_s);
    double push = rf_simulate_motion_units_at(body, time_s) * RF_ELEMENTARY_CHARGE_COULOMB *
                  rf_simulate_world_field_at(world, time_s)->voltage_v;
    return rf_drag_settling_speed_m_s(&world->medium, radius_m) +
           push / (rf_drag_coefficient_kg_s(&world->medium, radius_m) * world->medium.plate_gap_m);
}

static bool has_change_between(const Notebook *book, const Act *act)
{
    const RfBody *body = rf_simulate_record_life(book->record, act->droplet)->body;
    return rf_simulate_motion_units_at(body, act->start_s) != rf_simulate_motion_units_at(body, act->end_s);
}

/* Is a switch inside, and clear of both ends? *is_unclear: one so near an end that nobody could say. */
static bool has_switch_between(const Notebook *book, const Act *act, bool *is_unclear)
{
    bool has_switch = false;
    *is_unclear = false;
    for (unsigned i = 1; i < book->world->field->len; i++) {
        double at_s = g_array_index(book->world->field, RfFieldFrom, i).time_s;
        if (at_s <= act->start_s - away_from_switch_s || at_s >= act->end_s + away_from_switch_s) continue;
        if (at_s > act->start_s + away_from_switch_s && at_s < act->end_s - away_from_switch_s)
            has_switch = true;
        else
            *is_unclear = true;
    }
    return has_switch;
}

static bool is_taken(const Notebook *book, double start_s)
{
    for (unsigned i = 0; i < book->starts->len; i++)
        if (fabs(g_array_index(book->starts, double, i) - start_s) < 1e-6) return true;
    return false;
}

static bool try_act(Notebook *book, Act *act)
{
    if (book->followed->len == 0) return false;
    int choice = pick_int(book, (int)book->followed->len);
    act->droplet = g_array_index(book->followed, const RfTrueDroplet *, choice);
    const GArray *seen = rf_simulate_record_life(book->record, act->droplet)->seen;
    if (act->droplet->frames < 40) return false;
    unsigned i =
        act->droplet->first + (unsigned)pick_int(book, (int)(act->droplet->last - act->droplet->first));
    const RfSeenAt *at = &g_array_index(seen, RfSeenAt, i);
    act->is_fall = speed_m_s(book, act->droplet, at->time_s) > 0;
    act->divisions = 1 + pick_int(book, MOST_DIVISIONS);
    double here = rf_simulate_view_fall_spacings(book->view, at->reference_px);
    double first = act->is_fall ? ceil(here) : floor(here);
    double second = act->is_fall ? first + act->divisions : first - act->divisions;
    if (!find_passage(book, seen, act->droplet->last, first, &i, &act->start_s) ||
        !find_passage(book, seen, act->droplet->last, second, &i, &act->end_s))
        return false;
    double took_s = act->end_s - act->start_s;
    bool is_unclear;
    act->has_switch = has_switch_between(book, act, &is_unclear);
    return took_s >= shortest_s && took_s <= longest_s && !is_unclear && !has_change_between(book, act) &&
           !is_taken(book, act->start_s);
}

static bool find_act(Notebook *book, bool has_switch, Act *act)
{
    for (int i = 0; i < TRIES; i++)
        if (try_act(book, act) && act->has_switch == has_switch) return true;
    return false;
}

static char letter_of(Notebook *book, unsigned droplet)
{
    unsigned i = 0;
    while (i < book->letters->len && g_array_index(book->letters, unsigned, i) != droplet) i++;
    if (i == book->letters->len) g_array_append_val(book->letters, droplet);
    return (char)('A' + i % LETTERS);
}

static double noted_voltage(const Notebook *book, double time_s)
{
    double voltage_v = rf_simulate_world_field_at(book->world, time_s)->voltage_v;
    return voltage_v == 0 ? 0 : copysign(round(book->scene->voltage_v.value), voltage_v);
}

typedef struct {
    char label;
    int divisions;
    char *time_text; /* borrowed */
    const char *note;
} Noted;

static void write_entry(Notebook *book, const Act *act, Finding finding, Noted noted)
{
    double start_s = act->start_s + 0.05 + gsl_ran_gaussian(book->random, 0.1);
    book->entry++;
    g_array_append_val(book->starts, act->start_s);
    g_string_append_printf(book->timings, "%d,%c,%s,%d,%s,%.0f,%.2f\n", book->entry, noted.label,
                           act->is_fall ? "fall" : "rise", noted.divisions, noted.time_text,
                           noted_voltage(book, act->start_s), MAX(start_s, 0) + book->scene->hand_clock_s);
    g_string_append_printf(book->truth, "%d,%u,%.4f,%s,%d,%s\n", book->entry, act->droplet->number,
                           act->end_s - act->start_s, finding_names[finding], act->divisions, noted.note);
}

static double stopwatch(Notebook *book, const Act *act)
{
    double took_s = act->end_s - act->start_s + book->scene->hand_bias_s +
                    gsl_ran_gaussian(book->random, book->scene->hand_spread_s);
    return MAX(took_s, 0.01);
}

static char *two_places(double time_s)
{
    return g_strdup_printf("%.2f", time_s);
}

/* Slip k of a written time: neighbouring digits exchanged (0 to 1), or a digit taken for its like (2 and up). */
static bool slip_digit(char *text, int k)
{
    static const char likes[] = "1771388349946005";
    size_t length = strlen(text); /* d.dd or dd.dd */
    size_t places[4], n = 0;
    for (size_t i = 0; i < length && n < 4; i++)
        if (text[i] != '.') places[n++] = i;
    if (k < 2) {
        char held = text[places[k]];
        text[places[k]] = text[places[k + 1]];
        text[places[k + 1]] = held;
        return true;
    }
    char *digit = &text[places[(k - 2) % 2]];
    for (size_t i = 0; i + 1 < sizeof likes; i += 2)
        if (likes[i] == *digit) {
            *digit = likes[i + 1];
            return true;
        }
    return false;
}

static bool make_slip(Notebook *book, char *text, double true_s)
{
    int first = pick_int(book, 4);
    for (int k = 0; k < 4; k++) {
        g_autofree char *slipped = g_strdup(text);
        double least_s = MAX(plain * book->scene->hand_spread_s, 0.5);
        if (slip_digit(slipped, (first + k) % 4) && fabs(g_ascii_strtod(slipped, NULL) - true_s) > least_s) {
            strcpy(text, slipped);
            return true;
        }
    }
    return false;
}

/* Could a slip or a miscount explain it as well? Then it isn't a plain disagreement. */
static bool has_excuse(const Notebook *book, const char *text, const Act *act)
{
    double true_s = act->end_s - act->start_s, noted_s = g_ascii_strtod(text, NULL);
    double close_s = 3 * book->scene->hand_spread_s, one_s = true_s / act->divisions;
    for (int k = 0; k < 4; k++) {
        g_autofree char *slipped = g_strdup(text);
        if (slip_digit(slipped, k) && fabs(g_ascii_strtod(slipped, NULL) - true_s) < close_s) return true;
    }
    return fabs(fabs(noted_s - true_s) - one_s) < close_s;
}

static void note_plainly(Notebook *book, Finding finding)
{
    Act act;
    if (!find_act(book, finding == SWITCHED_INSIDE, &act)) return;
    g_autofree char *text = two_places(stopwatch(book, &act));
    write_entry(book, &act, finding, (Noted){letter_of(book, act.droplet->number), act.divisions, text, ""});
}

static void note_miscount(Notebook *book)
{
    Act act;
    for (int i = 0; i < CHOICES && find_act(book, false, &act); i++) {
        double one_s = (act.end_s - act.start_s) / act.divisions;
        if (one_s < plain * book->scene->hand_spread_s) continue;
        int wrong = act.divisions > 1 && pick_int(book, 2) ? act.divisions - 1 : act.divisions + 1;
        g_autofree char *text = two_places(stopwatch(book, &act));
        write_entry(book, &act, LINE_MISCOUNT,
                    (Noted){letter_of(book, act.droplet->number), wrong, text, ""});
        return;
    }
}

static void note_slip(Notebook *book)
{
    Act act;
    for (int i = 0; i < CHOICES && find_act(book, false, &act); i++) {
        g_autofree char *text = two_places(stopwatch(book, &act));
        if (!make_slip(book, text, act.end_s - act.start_s)) continue;
        write_entry(book, &act, DIGIT_SLIP,
                    (Noted){letter_of(book, act.droplet->number), act.divisions, text, ""});
        return;
    }
}

static void note_disagreement(Notebook *book)
{
    Act act;
    for (int i = 0; i < CHOICES && find_act(book, false, &act); i++) {
        double off_s =
            MAX(book->scene->hand_spread_s, 0.05) * pick(book, 6, 9) * (pick_int(book, 2) ? 1 : -1);
        double noted_s = act.end_s - act.start_s + off_s;
        g_autofree char *text = two_places(noted_s);
        if (noted_s < 0.3 || has_excuse(book, text, &act)) continue;
        write_entry(book, &act, DISAGREES,
                    (Noted){letter_of(book, act.droplet->number), act.divisions, text, ""});
        return;
    }
}

/* A droplet in view at the same time, which would have taken plainly longer or shorter. */
static const RfTrueDroplet *find_rival(Notebook *book, const Act *act)
{
    double span_m = act->divisions * book->world->spacing_m, true_s = act->end_s - act->start_s;
    for (unsigned d = 0; d < book->followed->len; d++) {
        const RfTrueDroplet *other = g_array_index(book->followed, const RfTrueDroplet *, d);
        if (other->number == act->droplet->number ||
            !rf_simulate_record_at(book->record, other, act->start_s) ||
            !rf_simulate_record_at(book->record, other, act->end_s))
            continue;
        double speed = speed_m_s(book, other, act->start_s);
        if ((speed > 0) != act->is_fall ||
            fabs(span_m / fabs(speed) - true_s) > MAX(plain * book->scene->hand_spread_s, 0.5))
            return other;
    }
    return NULL;
}

static void note_other_droplet(Notebook *book)
{
    Act act;
    for (int i = 0; i < CHOICES && find_act(book, false, &act); i++) {
        const RfTrueDroplet *rival = find_rival(book, &act);
        if (!rival) continue;
        char label = letter_of(book, rival->number);
        g_autofree char *note = g_strdup_printf("labelled %c", label);
        g_autofree char *text = two_places(stopwatch(book, &act));
        write_entry(book, &act, OTHER_DROPLET, (Noted){label, act.divisions, text, note});
        return;
    }
}

/* Written after the recording had ended. */
static void note_unmatched(Notebook *book)
{
    double took_s = pick(book, 1.2, 4);
    int divisions = 1 + pick_int(book, MOST_DIVISIONS);
    book->entry++;
    g_string_append_printf(book->timings, "%d,Z,fall,%d,%.2f,0,%.2f\n", book->entry, divisions, took_s,
                           book->record->last_s + pick(book, 10, 40) + book->scene->hand_clock_s);
    g_string_append_printf(book->truth, "%d,,%.4f,%s,%d,\n", book->entry, took_s, finding_names[UNMATCHED],
                           divisions);
}

static void note(Notebook *book, Finding finding)
{
    switch (finding) {
    case AGREES:
    case SWITCHED_INSIDE:
        note_plainly(book, finding);
        break;
    case OTHER_DROPLET:
        note_other_droplet(book);
        break;
    case LINE_MISCOUNT:
        note_miscount(book);
        break;
    case DIGIT_SLIP:
        note_slip(book);
        break;
    case DISAGREES:
        note_disagreement(book);
        break;
    case UNMATCHED:
        note_unmatched(book);
        break;
    }
}

static GArray *plan_entries(const RfScene *scene, gsl_rng *random)
{
    const struct {
        Finding finding;
        int count;
    } mistakes[] = {
        {OTHER_DROPLET, scene->other_droplets}, {LINE_MISCOUNT, scene->line_miscounts},
        {DIGIT_SLIP, scene->digit_slips},       {SWITCHED_INSIDE, scene->switched_inside},
        {DISAGREES, scene->disagreements},      {UNMATCHED, scene->unmatched},
    };
    GArray *plan = g_array_new(FALSE, FALSE, sizeof(Finding));
    for (size_t i = 0; i < G_N_ELEMENTS(mistakes); i++)
        for (int k = 0; k < mistakes[i].count; k++) g_array_append_val(plan, mistakes[i].finding);
    for (Finding sound = AGREES; plan->len < (unsigned)scene->entries;) g_array_append_val(plan, sound);
    if (plan->len > 1) gsl_ran_shuffle(random, plan->data, plan->len, sizeof(Finding));
    return plan;
}

static int longest_first(const void *a, const void *b)
{
    const RfTrueDroplet *left = *(const RfTrueDroplet *const *)a, *right = *(const RfTrueDroplet *const *)b;
    if (left->frames != right->frames) return left->frames > right->frames ? -1 : 1;
    return left->number < right->number ? -1 : 1;
}

static GArray *choose_followed(const RfRecord *record)
{
    GArray *followed = g_array_new(FALSE, FALSE, sizeof(const RfTrueDroplet *));
    for (unsigned d = 0; d < record->droplets->len; d++) {
        const RfTrueDroplet *droplet = &g_array_index(record->droplets, RfTrueDroplet, d);
        if (droplet->last - droplet->first > 40) g_array_append_val(followed, droplet);
    }
    g_array_sort(followed, longest_first);
    g_array_set_size(followed, MIN(followed->len, FOLLOWED));
    return followed;
}

RfHandRecord rf_simulate_hand_write(const RfRecord *record, const RfWorld *world, const RfScene *scene,
                                    const RfView *view)
{
    Notebook book = {.record = record, .world = world, .scene = scene, .view = view};
    book.random = rf_simulate_world_stream(scene, RF_STREAM_HAND);
    book.followed = choose_followed(record);
    book.starts = g_array_new(FALSE, FALSE, sizeof(double));
    book.letters = g_array_new(FALSE, FALSE, sizeof(unsigned));
    book.timings = g_string_new("entry,label,motion,divisions,time_s,voltage_V,start_s\n");
    book.truth = g_string_new("entry,droplet,true_time_s,finding,true_divisions,note\n");
    g_autoptr(GArray) plan = plan_entries(scene, book.random);
    for (unsigned i = 0; i < plan->len && record->droplets->len > 0; i++)
        note(&book, g_array_index(plan, Finding, i));
    gsl_rng_free(book.random);
    g_array_unref(book.followed);
    g_array_unref(book.starts);
    g_array_unref(book.letters);
    return (RfHandRecord){g_string_free(book.timings, FALSE), g_string_free(book.truth, FALSE)};
}

char *rf_simulate_hand_log(const RfRecord *record, const RfWorld *world, const RfScene *scene)
{
    GString *out = g_string_new("time_s,voltage_V\n");
    gsl_rng *random = rf_simulate_world_stream(scene, RF_STREAM_LOG);
    double time_s = -5; /* the logger was started before the camera, and stopped after it */
    while (time_s < record->last_s + 5) {
        double reading_v = rf_simulate_world_field_at(world, time_s)->voltage_v +
                           gsl_ran_gaussian(random, scene->log_noise_v);
        g_string_append_printf(out, "%.3f,%.1f\n", time_s + scene->log_offset_s, reading_v);
        time_s += scene->log_interval_s * (1 + gsl_ran_gaussian(random, 0.02));
    }
    gsl_rng_free(random);
    return g_string_free(out, FALSE);
}
