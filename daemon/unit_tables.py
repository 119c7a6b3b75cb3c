"""The units that people write, with their factors to SI, and how else they are spelled.

Factors are exact by definition where they can be (international foot and pound, US gallon);
NIST SP 811, appendix B, lists the same values rounded.
"""

from __future__ import annotations

from typing import Literal

Kind = Literal[
    "temperature",  # K
    "temperature difference",  # K
    "pressure",  # Pa, gauge or absolute
    "pressure difference",  # Pa
    "volume",  # m3
    "flow",  # m3/s
    "duration",  # s
    "fraction",  # 1
    "length",  # m
    "mass",  # kg
    "voltage",  # V
]

ZERO_CELSIUS_K = 273.15
FOOT_M = 0.3048
INCH_M = 0.0254
POUND_KG = 0.45359237
PSI_PA = POUND_KG * 9.80665 / INCH_M**2
US_GALLON_M3 = 231 * INCH_M**3
US_FLUID_OUNCE_M3 = US_GALLON_M3 / 128
CUBIC_FOOT_M3 = FOOT_M**3

# SI = (value + before) * times / over: whole numbers where they are, so that "5 ml" is 5e-06 m3
Unit = tuple[float, float, float]  # (times, over, before)


def _unit(times: float = 1.0, over: float = 1.0, before: float = 0.0) -> Unit:
    return times, over, before


_PRESSURES: dict[str, Unit] = {
    "bar": _unit(1e5),
    "psi": _unit(PSI_PA),
    "kPa": _unit(1e3),
    "MPa": _unit(1e6),
    "Pa": _unit(),
    "hPa": _unit(100.0),
    "mbar": _unit(100.0),
    "inHg": _unit(3386.389),  # conventional, SP 811
    "mmHg": _unit(133.3224),  # conventional, SP 811
}
UNITS: dict[Kind, dict[str, Unit]] = {
    "temperature": {
        "degC": _unit(before=ZERO_CELSIUS_K),
        "degF": _unit(over=1.8, before=459.67),
        "K": _unit(),
    },
    "temperature difference": {"K": _unit(), "degC": _unit(), "degF": _unit(over=1.8)},
    "pressure": _PRESSURES,
    "pressure difference": _PRESSURES,
    "volume": {
        "L": _unit(over=1e3),
        "ml": _unit(over=1e6),
        "gal": _unit(US_GALLON_M3),
        "oz": _unit(US_FLUID_OUNCE_M3),
        "ft3": _unit(CUBIC_FOOT_M3),
        "m3": _unit(),
    },
    "flow": {
        "L/min": _unit(over=60e3),
        "L/s": _unit(over=1e3),
        "cfm": _unit(CUBIC_FOOT_M3, over=60.0),
        "m3/h": _unit(over=3600.0),
        "m3/min": _unit(over=60.0),
        "m3/s": _unit(),
    },
    "duration": {
        "s": _unit(),
        "min": _unit(60.0),
        "h": _unit(3600.0),
        "days": _unit(86400.0),
        "weeks": _unit(604800.0),
        "years": _unit(31557600.0),  # 365.25 days
        "ms": _unit(over=1e3),
    },
    "fraction": {"%": _unit(over=100.0), "": _unit()},
    "length": {
        "m": _unit(),
        "cm": _unit(over=100.0),
        "mm": _unit(over=1e3),
        "ft": _unit(FOOT_M),
        "in": _unit(INCH_M),
    },
    "mass": {"kg": _unit(), "g": _unit(over=1e3), "lb": _unit(POUND_KG)},
    "voltage": {"V": _unit(), "mV": _unit(over=1e3)},
}
EXAMPLES: dict[Kind, str] = {
    "temperature": '"20 degC" or "68 degF"',
    "temperature difference": '"3 K" or "5 degF"',
    "pressure": '"8 bar" or "120 psi" (gauge), "9 bar abs"',
    "pressure difference": '"0.2 bar" or "3 psi"',
    "volume": '"100 L" or "60 gal"',
    "flow": '"150 L/min" or "5.6 cfm"',
    "duration": '"30 min" or "2 h"',
    "fraction": '"5 %" or 0.05',
    "length": '"12 m" or "40 ft"',
    "mass": '"2 kg" or "5 lb"',
    "voltage": '"4.5 V"',
}
# Other spellings, in lower case; the units' own names are found in any case, but for "mPa".
SPELLINGS = {
    "°c": "degC", "℃": "degC", "c": "degC", "celsius": "degC", "deg c": "degC",
    "°f": "degF", "℉": "degF", "f": "degF", "fahrenheit": "degF", "deg f": "degF",
    "kelvin": "K", "bars": "bar", "millibar": "mbar",
    "litre": "L", "litres": "L", "liter": "L", "liters": "L", "cc": "ml", "cm3": "ml",
    "gallon": "gal", "gallons": "gal", "us gal": "gal", "fl oz": "oz", "floz": "oz",
    "cu ft": "ft3", "cuft": "ft3", "cf": "ft3",
    "lpm": "L/min", "ft3/min": "cfm", "cu ft/min": "cfm", "lps": "L/s",
    "second": "s", "seconds": "s", "sec": "s", "minute": "min", "minutes": "min", "mins": "min",
    "hour": "h", "hours": "h", "hr": "h", "hrs": "h", "day": "days", "d": "days", "week": "weeks",
    "year": "years",
    "percent": "%", "inch": "in", "inches": "in", "lbs": "lb",
}  # fmt: skip
