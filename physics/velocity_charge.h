/* Radius and charge of a droplet from its velocities alone: the classical route, for published tables, hand timings and
 * planning. Not the best estimate from a recording (the spread of the path is thrown away here).
 * One straight line in the voltage serves every way of measuring: v(V) = v_g + q V/(k d). Rise and fall, two polarities
 * without an off state and a nearly balanced droplet differ only in their voltages. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "calib/units.h"
#include "physics/medium.h"

typedef struct {
    double voltage_V; /* top plate against bottom plate */
    RfValue fall_m_s; /* positive downward; sigma > 0, this droplet's own */
} RfFallAtVoltage;

typedef enum {
    RF_VELOCITY_CHARGE_DONE,       /* radius and charge */
    RF_VELOCITY_CHARGE_NO_FIELD,   /* one voltage only, zero: radius, no charge */
    RF_VELOCITY_CHARGE_NO_FALL,    /* field-off speed not positive: neither */
    RF_VELOCITY_CHARGE_UNRESOLVED, /* one voltage only, not zero: neither */
} RfVelocityChargeOutcome;

typedef struct {
    RfVelocityChargeOutcome outcome;
    RfValue settling_m_s; /* v_g */
    RfValue slope_m_s_V;  /* q/(k d) */
    double covariance;    /* of the two, m^2/(s^2 V) */
    double chi_squared;   /* of the line, from the stated sigmas */
    unsigned degrees_of_freedom;
    RfValue radius_m;       /* valid if DONE or NO_FIELD */
    RfValue charge_coulomb; /* valid if DONE; positive falls faster under positive voltage */
    double radius_charge_covariance;
} RfVelocityCharge;

/* Weighted least squares (GSL) in the voltage, then drag and settling; sigma by first-order propagation of the
 * velocities' own sigmas only: everything in the medium is common and belongs in the budget. A single zero-voltage
 * velocity gives a radius. Refuses n = 0 and sigmas that aren't positive. */
bool rf_velocity_charge_find(const RfMedium *medium, const RfFallAtVoltage *falls, size_t n,
                             RfVelocityCharge *result, GError **error);
