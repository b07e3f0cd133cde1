"""From the unit of a file to the unit used inside.

UDUNITS, by way of cf-units, knows the units of the trade; on top of it come the spellings that
files use and UDUNITS does not know, and the few cases where a quantity is given per mass in one
file and as a thickness in the next.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

from gridcool.errors import InputDataError
from gridcool.variables import InputVariable

# Spellings that UDUNITS does not know, or takes for something else ("C" is coulomb to it).
SPELLINGS = {
    "fraction": "1",
    "dimensionless": "1",
    "unitless": "1",
    "none": "1",
    "-": "1",
    "0-1": "1",
    "(0-1)": "1",
    "(0 - 1)": "1",
    "per cent": "%",
    "pct": "%",
    "okta": "0.125",
    "oktas": "0.125",
    "tenths": "0.1",
    "tenth": "0.1",
    "c": "degC",
    "deg c": "degC",
    "deg_c": "degC",
    "degree c": "degC",
    "°c": "degC",
    "deg k": "K",
    "du": "1e-5 m",
    "dobson": "1e-5 m",
    "dobsons": "1e-5 m",
    "dobson unit": "1e-5 m",
    "dobson units": "1e-5 m",
    "atm-cm": "cm",
    "atm cm": "cm",
    "matm-cm": "1e-5 m",
}

# How many of the inside unit are one of another kind of unit.
# Ozone: 1 DU is 10 µm of ozone at standard temperature and pressure, 2.1415e-5 kg m-2 and
# 4.4615e-4 mol m-2 (from Loschmidt's constant 2.6868e25 m-3 and 48 g mol-1).
# Water: a thickness of liquid water of 1000 kg m-3. Elevation: geopotential over 9.80665 m s-2.
KINDS = {
    "ozone": {"m": 1e5, "kg m-2": 1 / 2.1415e-5, "mol m-2": 1 / 4.4615e-4},
    "precipitable_water": {"kg m-2": 1.0, "m": 1000.0},
    "elevation": {"m": 1.0, "m2 s-2": 1 / 9.80665},
}

# What values mean when they do not fit the unit they came with, the most common first.
SUGGESTIONS = {
    "albedo": ("percent", "0.001", "1e-4"),
    "cloud_fraction": ("percent", "tenths", "oktas", "0.001"),
    "temperature_range": ("0.1 K", "degF"),
    "temperature_maximum": ("K", "degF", "0.1 degC", "0.1 K"),
    "temperature_minimum": ("K", "degF", "0.1 degC", "0.1 K"),
    "precipitable_water": ("0.1 kg m-2", "cm"),
    "aerosol_optical_depth": ("0.001",),
    "ozone": ("m", "cm", "kg m-2", "mol m-2"),
    "surface_shortwave": ("J m-2 day-1", "kJ m-2 day-1", "MJ m-2 day-1", "0.1 W m-2"),
}


@dataclass(frozen=True)
class Conversion:
    """``inside = found * factor + offset``."""

    found: str | None
    target: str
    factor: float = 1.0
    offset: float = 0.0
    overridden: bool = False

    @property
    def description(self) -> str:
        """What was found and what is done to it."""
        if self.found is None:
            return "none declared" + (f", taken as {self.target}" if self.target else "")
        origin = "given in the settings" if self.overridden else "as declared"
        if self.factor == 1.0 and self.offset == 0.0:
            return f"{self.found}, {origin}"
        shift = f" {'+' if self.offset > 0 else '-'} {abs(self.offset):g}" if self.offset else ""
        return f"{self.found}, {origin}; turned into {self.target} (x {self.factor:g}{shift})"


def conversion_for(
    known: InputVariable | None, declared: str | None, given: str | None
) -> Conversion:
    """How values become those used inside.

    A unit given in the settings goes before the one declared in the file; a declared unit is
    believed; without any, the values are taken to be in the unit used inside, and the range check
    tells whether they can be.

    Parameters
    ----------
    known : InputVariable or None
        None for an input of a free name, whose values stay as they are.
    declared, given : str or None
        Unit in the file and unit in the settings.

    Raises
    ------
    InputDataError
        If the unit is not understood or measures another quantity.
    """
    declared = (declared or "").strip() or None
    found = given or declared
    if known is None:
        return Conversion(found, found or "", overridden=given is not None)
    if found is None:
        return Conversion(None, known.units)
    factor, offset = _linear(known, found)
    return Conversion(found, known.units, factor, offset, given is not None)


def suggestion(
    known: InputVariable, minimum: float, maximum: float, applied: Conversion
) -> str | None:
    """The unit under which impossible values would be common ones, if there is one.

    ``minimum`` and ``maximum`` are those after ``applied``.
    """
    if known.difference and minimum > 150:
        return None
    raw = [(value - applied.offset) / applied.factor for value in (minimum, maximum)]
    for unit in SUGGESTIONS.get(known.name, ()):
        factor, offset = _linear(known, unit)
        low, high = (value * factor + offset for value in raw)
        if known.usual[0] <= low + 1e-6 and high <= known.usual[1] + 1e-6:
            return unit
    return None


def ratio_conversion(numerator: str | None, divisor: str | None) -> float:
    """Factor that brings a ratio of two variables to a pure number.

    Raises
    ------
    InputDataError
        If the two units do not measure the same quantity.
    """
    if not numerator or not divisor or numerator == divisor:
        return 1.0
    pair = _udunits(numerator, divisor)
    if pair is None:
        raise InputDataError(
            f'it is in "{numerator}" and its divisor in "{divisor}", which do not measure the '
            "same quantity; name two variables of one kind."
        )
    return pair[0]


def _linear(known: InputVariable, found: str) -> tuple[float, float]:
    for target, each in KINDS.get(known.name, {known.units: 1.0}).items():
        pair = _udunits(found, target)
        if pair is None:
            continue
        factor, offset = pair
        return factor * each, 0.0 if known.difference else offset * each
    wanted = "a pure number" if known.units == "1" else known.units
    raise InputDataError(
        f'its unit "{found}" cannot be turned into {wanted}; give the right one as '
        f'units = "..." in [inputs.{known.name}].'
    )


def _udunits(found: str, target: str) -> tuple[float, float] | None:
    """Factor and offset from one unit to another, None if there is no way."""
    import cf_units

    multiple, unit = _split(found)
    with cf_units.suppress_errors():
        try:
            source, wanted = cf_units.Unit(unit), cf_units.Unit(target)
        except ValueError:
            return None
    if not source.is_convertible(wanted):
        return None
    zero, one = (float(source.convert(value, wanted)) for value in (0.0, 1.0))
    # Rounding of UDUNITS: 273.15 K minus 1 K is not exactly 272.15 K.
    return float(f"{(one - zero) * multiple:.12g}"), round(zero, 9)


def _split(text: str) -> tuple[float, str]:
    """A leading multiple and the unit behind it: UDUNITS reads "0.1 degC" from absolute zero."""
    unit = SPELLINGS.get(text.strip().lower(), text.strip())
    match = re.fullmatch(r"([-+]?\d*\.?\d+(?:[eE][-+]?\d+)?)\s+(\S.*)", unit)
    if match is None:
        return 1.0, unit
    rest = match[2].strip()
    return float(match[1]), SPELLINGS.get(rest.lower(), rest)
