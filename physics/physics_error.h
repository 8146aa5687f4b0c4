/* Errors of this room: bad input only. What can't be measured is a result with a reason, never an error. */
#pragma once

#include <glib.h>

typedef enum {
    RF_PHYSICS_ERROR_RANGE,   /* a number outside what the physics or the formula allows */
    RF_PHYSICS_ERROR_TOO_FEW, /* not enough values for what was asked */
    RF_PHYSICS_ERROR_SHAPE,   /* inputs that don't belong together: a matrix that isn't positive definite, ...
                               */
} RfPhysicsErrorCode;

#define RF_PHYSICS_ERROR (rf_physics_error_quark())
GQuark rf_physics_error_quark(void);
