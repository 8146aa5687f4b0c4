/* Before recording: what can be expected of droplets of every size and charge under the conditions at hand. Pure.
 * The uncertainties are bounds (physics/expectation.h): no estimator does better. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "physics/expectation.h"

/* An integer is named with confidence below this; droplets that stay above are a waste of time. Unitless, in e. */
#define RF_PLAN_GOOD_U_E 0.15
/* Whoever switches by hand needs this long to see a droplet come, switch and see it turn. */
#define RF_PLAN_CROSSING_LEAST_S 2.0
/* Nobody watches one droplet for longer. */
#define RF_PLAN_WATCH_MOST_S 3600.0

typedef struct {
    RfMedium medium;
    RfObservation observation; /* its voltage is positive; blur as the camera's */
} RfPlanConditions;

typedef enum {
    RF_PLAN_PICK,
    RF_PLAN_TOO_UNCERTAIN, /* u(q) stays above RF_PLAN_GOOD_U_E in the time given */
    RF_PLAN_TOO_FAST,      /* crosses the view in less than RF_PLAN_CROSSING_LEAST_S */
    RF_PLAN_TOO_HEAVY,     /* the field can't lift it, and it leaves the view before the time is over */
} RfPlanAdvice;

const char *rf_plan_advice_to_string(RfPlanAdvice advice); /* "pick", "too fast" */

/* The two signs of charge times voltage. */
typedef struct {
    double fall_m_s;                                      /* with the field on, positive downward */
    double in_view_s;                                     /* to cross the view once */
    double u_charge_fall_coulomb, u_charge_joint_coulomb; /* radius from the fall; from fall and spread */
} RfPlanOn;

typedef struct {
    double radius_m;
    int units; /* |charge| in e */
    double fall_off_m_s, in_view_off_s, diffusion_m2_s;
    double spread_share; /* of the information on the radius */
    RfPlanOn down, up;   /* field along gravity (q V > 0), and against it */
    double
        watch_s; /* off and on together, until u(q) is RF_PLAN_GOOD_U_E for both signs; RF_PLAN_WATCH_MOST_S: longer */
    RfPlanAdvice advice;
} RfPlanRow;

RfPlanRow rf_plan_row(const RfPlanConditions *conditions, double radius_m, int units);

extern const double rf_plan_radii_m[];
extern const unsigned rf_plan_radii;
enum { RF_PLAN_UNITS_MOST = 10 };

/* Every radius of the list with 1 to RF_PLAN_UNITS_MOST units: RfPlanRow, by radius, then units. (returns new) */
GArray *rf_plan_rows(const RfPlanConditions *conditions);

/* How many of these are worth picking. */
unsigned rf_plan_picks(const GArray *rows);

/* Of a quarter to twice the voltage, the one that makes most droplets worth picking; the lowest of equals. */
enum { RF_PLAN_VOLTAGES = 6 };
typedef struct {
    double voltage_V[RF_PLAN_VOLTAGES];
    unsigned picks[RF_PLAN_VOLTAGES];
    unsigned best;
} RfPlanVoltages;
RfPlanVoltages rf_plan_voltages(const RfPlanConditions *conditions);
