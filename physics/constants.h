/* Constants of nature and of definition, each with its source. Not for properties of materials (air.h,
 * oil.h). e and k_B are exact since the SI of 2019 (CODATA 2018 recommended values). */
#pragma once

#define RF_ELEMENTARY_CHARGE_COULOMB 1.602176634e-19 /* CODATA 2018, exact */
#define RF_BOLTZMANN_J_K 1.380649e-23                /* CODATA 2018, exact */
#define RF_STANDARD_GRAVITY_M_S2 9.80665             /* 3rd CGPM (1901), by definition */
#define RF_ZERO_CELSIUS_KELVIN 273.15                /* by definition */
