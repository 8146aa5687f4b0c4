/* When the field was on, as far as anyone knows: what lets a path predict its own reversals.
 * Plain signs only: how strong the field was is in each droplet's own response. Not for voltages. */
#pragma once

#include <stdbool.h>
#include <stddef.h>

typedef struct {
    double time_s;
    int state; /* -1, 0 or +1 from time_s on */
} RfFieldChange;

/* Changes in rising order of time; the first one's state also holds before it. No changes: field unknown. */
typedef struct {
    const RfFieldChange *changes; /* (borrowed) */
    size_t n;
} RfFieldCourse;

/* Whether anything is known; NULL is legal and means unknown. */
bool rf_field_course_is_known(const RfFieldCourse *course);

/* State at an instant; 0 if unknown. */
int rf_field_course_state(const RfFieldCourse *course, double time_s);

/* Integral of the state over time, signed: negative if end_s < start_s and the field is positive; 0 if
 * unknown. Cost grows with the logarithm of the number of changes. */
double rf_field_course_integral_s(const RfFieldCourse *course, double start_s, double end_s);
