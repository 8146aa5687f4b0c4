#include "cli/line_crossings.h"

#include <math.h>

/* A gap that no one can look across, an end that no one waits for, the share of a division within which crossings of one
 * line belong together, and how near an end a switch is that changes nothing of note. */
static const double longest_gap_s = 0.5, longest_passage_s = 120, together_divisions = 0.35,
                    switch_margin_s = 0.03;
/* What no droplet does between two frames, and where no reticle reaches: such a path is broken. */
static const double most_step_divisions = 20, most_level = 1e6;

typedef struct {
    double time_s;
    double level, u_level; /* divisions along gravity */
    int64_t frame;
} Place;

typedef struct {
    unsigned droplet;
    GArray *places; /* Place */
} Course;

struct RfLineCrossings {
    GArray *courses;  /* Course */
    GArray *switches; /* RfSwitchRow */
    double step_mm, end_s;
};

static void course_clear(void *item)
{
    g_array_unref(((Course *)item)->places);
}

/* How far the smoother moved the point along gravity. */
static double smoothing_mm(const RfPathRow *row, const RfScaleRow *scale, double gravity_rad)
{
    if (row->u_smooth_x_px <= 0 || row->u_smooth_y_px <= 0) return 0;
    double x_mm = (row->smooth_x_px - row->x_px) / scale->px_per_mm_x;
    double y_mm = (row->smooth_y_px - row->y_px) / scale->px_per_mm_y;
    return y_mm * cos(gravity_rad) - x_mm * sin(gravity_rad);
}

static Place place_of(const RfPathRow *row, const RfResults *results)
{
    const RfScaleRow *scale = &results->scale;
    double y_mm = row->y_mm + smoothing_mm(row, scale, results->gravity_axis_deg * G_PI / 180);
    return (Place){
        .time_s = row->time_s,
        .level = (y_mm - scale->line_offset_mm - scale->line_slope * row->x_mm) / scale->line_step_mm,
        .u_level = row->u_y_mm / scale->line_step_mm,
        .frame = row->frame,
    };
}

RfLineCrossings *rf_line_crossings_new(const RfResults *results)
{
    if (!results->scale.has_lines || !results->scale.found) return NULL;
    RfLineCrossings *crossings = g_new0(RfLineCrossings, 1);
    crossings->courses = g_array_new(FALSE, FALSE, sizeof(Course));
    g_array_set_clear_func(crossings->courses, course_clear);
    crossings->switches = g_array_ref(results->switches);
    crossings->step_mm = results->scale.line_step_mm;
    Course *course = NULL;
    for (guint i = 0; i < results->paths->len; i++) {
        const RfPathRow *row = &g_array_index(results->paths, RfPathRow, i);
        if (!course || course->droplet != row->droplet) {
            Course fresh = {row->droplet, g_array_new(FALSE, FALSE, sizeof(Place))};
            g_array_append_val(crossings->courses, fresh);
            course = &g_array_index(crossings->courses, Course, crossings->courses->len - 1);
        }
        Place place = place_of(row, results);
        g_array_append_val(course->places, place);
        crossings->end_s = MAX(crossings->end_s, row->time_s);
    }
    return crossings;
}

void rf_line_crossings_free(RfLineCrossings *crossings)
{
    if (!crossings) return;
    g_array_unref(crossings->courses);
    g_array_unref(crossings->switches);
    g_free(crossings);
}

/* ---- one crossing ---- */

/* The course seen so that the motion asked for goes upwards in level. */
typedef struct {
    const Place *places;
    guint n;
    double sign;
} View;

static double level_at(const View *view, guint i)
{
    return view->sign * view->places[i].level;
}

static bool is_gap(const View *view, guint i)
{
    return view->places[i + 1].time_s - view->places[i].time_s > longest_gap_s;
}

static double time_between(const View *view, guint i, double level)
{
    double a = level_at(view, i), b = level_at(view, i + 1);
    double from_s = view->places[i].time_s, to_s = view->places[i + 1].time_s;
    return from_s + (to_s - from_s) * (level - a) / (b - a);
}

/* Root mean square of one frame's step about the mean motion, in divisions, over half a second about row i. */
static double step_scatter(const View *view, guint i)
{
    guint a = i, b = i + 1;
    while (a > 0 && view->places[i].time_s - view->places[a].time_s < 0.25) a--;
    while (b + 1 < view->n && view->places[b].time_s - view->places[i].time_s < 0.25) b++;
    double mean = (level_at(view, b) - level_at(view, a)) / (b - a), squares = 0;
    for (guint k = a; k < b; k++) {
        double off = level_at(view, k + 1) - level_at(view, k) - mean;
        squares += off * off;
    }
    return sqrt(squares / (b - a));
}

/* Of one crossing: localisation, and what a Brownian path seen once per frame hides: it overshoots a level by about
 * 0.58 of a step before it is seen there (D. Siegmund, Sequential Analysis, 1985, ch. 10), with a scatter of about as much. The
 * overshoot itself is the same at both ends and drops out of the interval. */
static double crossing_sigma_s(const View *view, guint i, double speed)
{
    double u_level = fmax(view->places[i].u_level, view->places[i + 1].u_level);
    return hypot(u_level, 0.58 * step_scatter(view, i)) / speed;
}

/* Was the line crossed this way before, without the path having been well behind it since? */
static bool is_first_passage(const View *view, guint i, double level)
{
    for (guint k = i; k > 0 && !is_gap(view, k - 1); k--) {
        if (level_at(view, k) < level - together_divisions) return true;
        if (level_at(view, k) >= level) return false;
    }
    return true;
}

/* ---- passages ---- */

static void describe_field(const RfLineCrossings *crossings, RfPassage *passage)
{
    passage->voltage_sign = 2;
    for (guint i = 0; i < crossings->switches->len; i++) {
        const RfSwitchRow *one = &g_array_index(crossings->switches, RfSwitchRow, i);
        bool is_before = one->time_s.value <= passage->start_s;
        RfFieldState state = is_before ? one->to : one->from;
        if (is_before || passage->voltage_sign > 1)
            passage->voltage_sign = state == RF_FIELD_OFF ? 0 : state == RF_FIELD_TOP_PLUS ? 1 : -1;
        double margin_s = switch_margin_s + 2 * one->time_s.sigma;
        if (one->time_s.value > passage->start_s + margin_s &&
            one->time_s.value < passage->end_s - margin_s && passage->switches++ == 0)
            passage->switch_s = one->time_s.value;
    }
}

static bool follow(const View *view, guint i, double level, double divisions, RfPassage *passage)
{
    double goal = level + divisions;
    guint k = i;
    for (; k + 1 < view->n && level_at(view, k + 1) < goal; k++)
        if (is_gap(view, k) || view->places[k].time_s > passage->start_s + longest_passage_s) return false;
    if (k + 1 >= view->n || is_gap(view, k)) return false;
    passage->end_s = time_between(view, k, goal);
    passage->last_frame = view->places[k + 1].frame;
    double speed = divisions / (passage->end_s - passage->start_s);
    passage->sigma_s = hypot(crossing_sigma_s(view, i, speed), crossing_sigma_s(view, k, speed));
    return true;
}

static void add_passages_of(const RfLineCrossings *crossings, unsigned index, double divisions, bool is_rise,
                            GArray *out)
{
    const Course *course = &g_array_index(crossings->courses, Course, index);
    const View view = {(const Place *)(const void *)course->places->data, course->places->len,
                       is_rise ? -1 : 1};
    for (guint i = 0; i + 1 < view.n; i++) {
        double a = level_at(&view, i), b = level_at(&view, i + 1);
        if (!(b > a && b - a < most_step_divisions && fabs(b) < most_level) || is_gap(&view, i)) continue;
        for (double level = floor(a) + 1; level <= b; level++) {
            RfPassage passage = {
                .droplet = course->droplet,
                .course = index,
                .line = (int)(view.sign * level),
                .start_s = time_between(&view, i, level),
                .first_frame = view.places[i].frame,
                .is_first = is_first_passage(&view, i, level),
            };
            if (!follow(&view, i, level, divisions, &passage)) continue;
            describe_field(crossings, &passage);
            g_array_append_val(out, passage);
        }
    }
}

static int by_start(const void *left, const void *right)
{
    const RfPassage *a = left, *b = right;
    if (a->start_s < b->start_s || a->start_s > b->start_s) return a->start_s < b->start_s ? -1 : 1;
    return a->course < b->course ? -1 : a->course > b->course;
}

GArray *rf_line_crossings_passages(const RfLineCrossings *crossings, double divisions, bool is_rise)
{
    GArray *out = g_array_new(FALSE, FALSE, sizeof(RfPassage));
    for (guint i = 0; i < crossings->courses->len; i++)
        add_passages_of(crossings, i, divisions, is_rise, out);
    g_array_sort(out, by_start);
    return out;
}

unsigned rf_line_crossings_courses(const RfLineCrossings *crossings)
{
    return crossings->courses->len;
}

unsigned rf_line_crossings_droplet(const RfLineCrossings *crossings, unsigned course)
{
    return g_array_index(crossings->courses, Course, course).droplet;
}

void rf_line_crossings_span(const RfLineCrossings *crossings, unsigned course, double *first_s,
                            double *last_s)
{
    const GArray *places = g_array_index(crossings->courses, Course, course).places;
    *first_s = g_array_index(places, Place, 0).time_s;
    *last_s = g_array_index(places, Place, places->len - 1).time_s;
}

double rf_line_crossings_end_s(const RfLineCrossings *crossings)
{
    return crossings->end_s;
}

double rf_line_crossings_step_mm(const RfLineCrossings *crossings)
{
    return crossings->step_mm;
}
