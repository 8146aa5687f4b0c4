#include "physics/physics_error.h"

G_DEFINE_QUARK(rf - physics - error - quark, rf_physics_error)
