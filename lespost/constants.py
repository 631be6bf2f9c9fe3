"""Physical constants, each with its source. SI units throughout."""

from __future__ import annotations

from typing import Final

#: Acceleration of gravity used when neither recipe nor files state one [m s-2]; common practice, no source.
GRAVITY: Final = 9.81

#: Standard acceleration of gravity, exact by convention [m s-2] (3rd CGPM, 1901).
STANDARD_GRAVITY: Final = 9.80665

#: von Karman constant [1]; 0.40 is the value of the ocean boundary-layer literature (Large, McWilliams & Doney 1994).
VON_KARMAN: Final = 0.40

#: Angular velocity of the Earth [rad s-1] (IERS conventional value, rounded).
EARTH_ROTATION: Final = 7.292115e-5

#: Specific heat that converts conservative temperature to potential enthalpy [J kg-1 K-1] (TEOS-10).
SPECIFIC_HEAT_TEOS10: Final = 3991.86795711963

#: Reference density of sea water used when neither recipe nor files state one [kg m-3]; common practice, no source.
REFERENCE_DENSITY: Final = 1025.0

#: Density of air at the sea surface used when the recipe does not state one [kg m-3]; common practice, no source.
AIR_DENSITY: Final = 1.22
