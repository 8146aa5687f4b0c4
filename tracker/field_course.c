#include "tracker/field_course.h"

#include <math.h>

bool rf_field_course_is_known(const RfFieldCourse *course)
{
    return course && course->n > 0;
}

/* Index of the change that rules at an instant; before the first, the first. */
static size_t ruling_change(const RfFieldCourse *course, double time_s)
{
    size_t low = 0, high = course->n;
    while (high - low > 1) {
        size_t middle = low + (high - low) / 2;
        if (course->changes[middle].time_s <= time_s)
            low = middle;
        else
            high = middle;
    }
    return low;
}

int rf_field_course_state(const RfFieldCourse *course, double time_s)
{
    return rf_field_course_is_known(course) ? course->changes[ruling_change(course, time_s)].state : 0;
}

double rf_field_course_integral_s(const RfFieldCourse *course, double start_s, double end_s)
{
    if (!rf_field_course_is_known(course)) return 0;
    if (end_s < start_s) return -rf_field_course_integral_s(course, end_s, start_s);
    double sum_s = 0, from_s = start_s;
    for (size_t i = ruling_change(course, start_s); from_s < end_s; i++) {
        double until_s = i + 1 < course->n ? fmin(course->changes[i + 1].time_s, end_s) : end_s;
        sum_s += course->changes[i].state * (until_s - from_s);
        from_s = until_s;
    }
    return sum_s;
}
