"""Air and water: below the dew point, a cooled diode or window grows a film.

Pure formulas.
"""

import math

MAGNUS_A = 17.62
MAGNUS_B_C = 243.12
"""Magnus formula over water, -45 to 60 degC: WMO Guide to Instruments No. 8, annex 4.B; from memory."""
DEW_MARGIN_K = 3.0
"""How far above the dew point a setpoint must stay (design section 9)."""


def dew_point_c(temperature_c: float, humidity: float) -> float:
    """Return the dew point of air, degC.

    Parameters
    ----------
    temperature_c
        Of the air, degC.
    humidity
        Relative humidity, a ratio in (0, 1].

    Source
    ------
    Inverse of the Magnus formula with the constants above.
    """
    gamma = math.log(humidity) + MAGNUS_A * temperature_c / (MAGNUS_B_C + temperature_c)
    return MAGNUS_B_C * gamma / (MAGNUS_A - gamma)


def lowest_setpoint_c(temperature_c: float, humidity: float) -> float:
    """Return the lowest setpoint that is allowed in air of this temperature and humidity, degC."""
    return dew_point_c(temperature_c, humidity) + DEW_MARGIN_K
