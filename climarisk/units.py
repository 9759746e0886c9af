"""Unit conversions, each factor once, exact where the definition is exact.

References
----------
International foot 0.3048 m (exact, 1959 agreement); nautical mile 1852 m (exact);
conventional millimetre of mercury 133.322387415 Pa (13.5951 g/cm3 x 9.80665 m/s2 x 1 mm,
NIST SP 811, section B.8), an inch being 25.4 mm; degree Fahrenheit
by definition of the scale.
"""

from __future__ import annotations

METRES_PER_FOOT = 0.3048
METRES_PER_NAUTICAL_MILE = 1852.0
HPA_PER_INHG = 25.4 * 133.322387415 / 100.0
KELVIN_AT_0C = 273.15
MS_PER_KT = METRES_PER_NAUTICAL_MILE / 3600.0
FEET_PER_NAUTICAL_MILE = METRES_PER_NAUTICAL_MILE / METRES_PER_FOOT


def fahrenheit_to_celsius(temperature_f):
    """Temperature in degC from degF (float or array)."""
    return (temperature_f - 32.0) * (5.0 / 9.0)
