"""Constants with source and year: defining constants first, then those that belong to a model."""

from __future__ import annotations

# Defining constants
SPEED_OF_LIGHT_M_S = 299792458.0  # SI, 1983
TT_MINUS_TAI_S = 32.184  # IAU 1991
AU_M = 149597870700.0  # IAU 2012 B2
L_G = 6.969290134e-10  # 1 - d(TT)/d(TCG), IAU 2000 B1.9
TAI_MINUS_GPS_S = 19  # GPS time runs 19 s behind TAI since 1980 (common practice)

# WGS84 (NIMA TR8350.2, 3rd edition 2000)
WGS84_A_M = 6378137.0
WGS84_F = 1.0 / 298.257223563
WGS84_E2 = WGS84_F * (2.0 - WGS84_F)
GRS80_F = 1.0 / 298.257222101  # Moritz 2000

# Earth
GM_EARTH_M3_S2 = 3.986004415e14  # TT-compatible, EGM2008 (Pavlis et al. 2012)
EARTH_RADIUS_M = 6378136.3  # reference radius of EGM2008
J2_1 = 1.0826261739e-3  # EGM2008 tide-free, -sqrt(5) C20
W0_M2_S2 = 62636856.0  # geoid potential, IERS Conventions 2010, table 1.1
OMEGA_EARTH_RAD_S = 7.292115e-5  # mean, IERS Conventions 2010; Earth rotation itself comes from the rotation angle

# Sun and Moon, IERS Conventions 2010, table 1.1 (the Moon from its mass ratio 0.0123000371)
GM_SUN_M3_S2 = 1.32712442099e20
GM_MOON_M3_S2 = 0.0123000371 * 3.986004418e14
