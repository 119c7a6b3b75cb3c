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

# SI = (value + before) * factor
Unit = tuple[float, float]  # (factor, before)

_PRESSURES: dict[str, Unit] = {
    "bar": (1e5, 0.0),
    "psi": (PSI_PA, 0.0),
    "kPa": (1e3, 0.0),
    "MPa": (1e6, 0.0),
    "Pa": (1.0, 0.0),
    "hPa": (100.0, 0.0),
    "mbar": (100.0, 0.0),
    "inHg": (3386.389, 0.0),  # conventional, SP 811
    "mmHg": (133.3224, 0.0),  # conventional, SP 811
}
UNITS: dict[Kind, dict[str, Unit]] = {
    "temperature": {
        "degC": (1.0, ZERO_CELSIUS_K),
        "degF": (1 / 1.8, 459.67),
        "K": (1.0, 0.0),
    },
    "temperature difference": {"K": (1.0, 0.0), "degC": (1.0, 0.0), "degF": (1 / 1.8, 0.0)},
    "pressure": _PRESSURES,
    "pressure difference": _PRESSURES,
    "volume": {
        "L": (1e-3, 0.0),
        "ml": (1e-6, 0.0),
        "gal": (US_GALLON_M3, 0.0),
        "oz": (US_FLUID_OUNCE_M3, 0.0),
        "ft3": (CUBIC_FOOT_M3, 0.0),
        "m3": (1.0, 0.0),
    },
    "flow": {
        "L/min": (1e-3 / 60, 0.0),
        "L/s": (1e-3, 0.0),
        "cfm": (CUBIC_FOOT_M3 / 60, 0.0),
        "m3/h": (1 / 3600, 0.0),
        "m3/min": (1 / 60, 0.0),
        "m3/s": (1.0, 0.0),
    },
    "duration": {
        "s": (1.0, 0.0),
        "min": (60.0, 0.0),
        "h": (3600.0, 0.0),
        "days": (86400.0, 0.0),
        "weeks": (604800.0, 0.0),
        "ms": (1e-3, 0.0),
    },
    "fraction": {"%": (0.01, 0.0), "": (1.0, 0.0)},
    "length": {
        "m": (1.0, 0.0),
        "cm": (0.01, 0.0),
        "mm": (1e-3, 0.0),
        "ft": (FOOT_M, 0.0),
        "in": (INCH_M, 0.0),
    },
    "mass": {"kg": (1.0, 0.0), "g": (1e-3, 0.0), "lb": (POUND_KG, 0.0)},
    "voltage": {"V": (1.0, 0.0), "mV": (1e-3, 0.0)},
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
    "percent": "%", "inch": "in", "inches": "in", "lbs": "lb",
}  # fmt: skip
