"""Physical constants in the units of absorption-line work (cgs and Mpc), each with its source.

Values come from `astropy.constants` (CODATA, IAU), so that none is typed in by hand.
"""

from __future__ import annotations

from typing import Final

import numpy as np
from astropy import constants, units

C_CGS: Final = float(constants.c.to_value("cm/s"))
"""Speed of light [cm / s], exact (SI)."""

KM_CM: Final = 1e5
"""One kilometre [cm], exact."""

ANGSTROM_CM: Final = 1e-8
"""One Angstrom [cm], exact."""

PLANCK_CGS: Final = float(constants.h.to_value("erg s"))
"""Planck's constant [erg s]."""

MPC_CM: Final = float(units.Mpc.to("cm"))
"""One megaparsec [cm] (IAU 2015 resolution B2)."""

SOLAR_MASS: Final = float(constants.M_sun.to_value("g"))
"""Solar mass [g] (IAU 2015 resolution B3 divided by the CODATA value of G)."""

M_HYDROGEN: Final = float(
    (constants.m_p + constants.m_e - constants.Ryd * constants.h / constants.c).to_value("g")
)
"""Mass of the hydrogen atom, 1.67353e-24 [g]: proton and electron less 1 Rydberg (CODATA)."""

_CHARGE_SQUARED = constants.e.si**2 / (4.0 * np.pi * constants.eps0)  # e^2 of the Gaussian system

LINE_AREA: Final = float(
    (np.pi * _CHARGE_SQUARED / (constants.m_e * constants.c)).to_value("cm2 Hz")
)
"""pi e^2 / (m_e c) = 0.0265401 [cm^2 Hz]: a line's cross-section over frequency is f times this."""
