"""The table of presets: what a trade has written down, each with its source; chosen by name, none a default."""

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Literal

from dec.arrays import float_array
from dec.errors import InputError

__all__ = ["PRESETS", "Preset", "preset"]

_CAUTION = "chosen by name, never a default; local codes, the contract and licensed practice decide what applies"

_LARGEST = 1e100

_FGCC = "Federal Geodetic Control Committee, Standards and Specifications for Geodetic Control Networks, 1984, loops"
_R49 = "OIML R 49-1, Water meters for cold potable water and hot water, maximum permissible errors"
_MID = "Directive 2014/32/EU (measuring instruments), annex IV, gas meters; the same zones in OIML R 137"
Basis = Literal["read", "read in a secondary text", "from memory"]
_SECOND_HAND: Basis = "read in a secondary text"


@dataclass(frozen=True, slots=True)
class Preset:
    """One rule of a trade.

    Attributes
    ----------
    name : str
    sets : "loop limit", "vertex limit" or "reading sd"
        What an audit takes from it.
    figures : mapping of name to float
        Its constants; the name says the unit.
    rule : str
        What it says, in words.
    source : str
        Where it is written.
    basis : "read", "read in a secondary text" or "from memory"
        How we know: compare with the source before much depends on it.
    """

    name: str
    sets: Literal["loop limit", "vertex limit", "reading sd"]
    figures: Mapping[str, float]
    rule: str
    source: str
    basis: Basis

    @property
    def sentence(self) -> str:
        """What it sets, by whose authority, and who decides; for the record.

        Examples
        --------
        >>> print(preset("counts-geh5").sentence[:86])
        counts-geh5: what enters and what leaves a vertex in an hour may differ by GEH 5 (sour
        """
        return f"{self.name}: {self.rule.format(**self.figures)} (source: {self.source}; {self.basis}); {_CAUTION}"


def _levelling(millimetres: float, source: str, basis: Basis) -> Preset:
    rule = "a loop may miss by {mm_per_sqrt_km:g} mm times the square root of its length in km"
    return Preset(
        f"levelling-{millimetres:g}mm",
        "loop limit",
        MappingProxyType({"mm_per_sqrt_km": millimetres}),
        rule,
        source,
        basis,
    )


def _counts(geh: float, source: str, basis: Basis) -> Preset:
    rule = "what enters and what leaves a vertex in an hour may differ by GEH {geh:g}"
    return Preset(f"counts-geh{geh:g}", "vertex limit", MappingProxyType({"geh": geh}), rule, source, basis)


def _meter(name: str, upper: float, lower: float, source: str) -> Preset:
    rule = (
        "a reading is within {upper_percent:g} % from the transitional flow on and within {lower_percent:g} % below "
        "it, anywhere with equal chance: sd is that over the square root of 3 (JCGM 100:2008 (GUM), section 4.3.7)"
    )
    figures = MappingProxyType({"upper_percent": upper, "lower_percent": lower})
    return Preset(name, "reading sd", figures, rule, source, "from memory")


_TABLE = (
    _levelling(4, f"first order of the United States in a survey text; recalled as class I of {_FGCC}", _SECOND_HAND),
    _levelling(5, f"{_FGCC}, first order class II", "from memory"),
    _levelling(6, f"{_FGCC}, second order class I (one text has 8)", "from memory"),
    _levelling(8, f"second order of the United States in a survey text; recalled as class II of {_FGCC}", _SECOND_HAND),
    _levelling(8.4, "United States Army, survey course, second order", "read"),
    _levelling(10, "German construction practice, the stricter of two figures", _SECOND_HAND),
    _levelling(12, f"third order of the United States in a survey text; recalled so of {_FGCC}", _SECOND_HAND),
    _levelling(15, "German construction practice, the wider of two figures", _SECOND_HAND),
    _counts(
        5, "Design Manual for Roads and Bridges, which asks it of 85 % of links; here of every vertex",
        _SECOND_HAND,
    ),
    _counts(3, "traffic manual of Texas, state facilities", "read"),
    _meter("water-meter-class1", 1, 3, f"{_R49}, class 1, water up to 30 degrees C, new meters"),
    _meter("water-meter-class2", 2, 5, f"{_R49}, class 2, water up to 30 degrees C, new meters"),
    _meter("gas-meter-class1", 1, 2, f"{_MID}, class 1.0, new meters"),
    _meter("gas-meter-class1.5", 1.5, 3, f"{_MID}, class 1.5, new meters"),
)  # fmt: skip
PRESETS: Mapping[str, Preset] = MappingProxyType({each.name: each for each in _TABLE})


def preset(name: str, **figures: float) -> Preset:
    """The preset of that name, with its figures as the source has them or as the caller sets them.

    Parameters
    ----------
    name : str
        A name in `PRESETS`.
    **figures : float
        Figures in place of those of the source; the preset then says so.

    Returns
    -------
    Preset

    Raises
    ------
    InputError
        If there is no such preset, it has no such figure, or the figure is not positive; the message lists what
        there is.

    Examples
    --------
    >>> dict(preset("levelling-12mm").figures)
    {'mm_per_sqrt_km': 12}
    >>> preset("levelling-12mm", mm_per_sqrt_km=9).source[:45]
    'set by the user: mm_per_sqrt_km 9 in place of'
    """
    if name not in PRESETS:
        close = difflib.get_close_matches(str(name), list(PRESETS), n=1)
        hint = f"; did you mean {close[0]!r}?" if close else ""
        message = f"preset must be one of {', '.join(PRESETS)}, got {name!r}{hint}"
        raise InputError(message)
    found = PRESETS[name]
    if not figures:
        return found
    changed = dict(found.figures)
    for figure, given in figures.items():
        if figure not in changed:
            message = f"preset {name} has the figures {', '.join(changed)}, got {figure!r}"
            raise InputError(message)
        number = float(float_array(given, figure, ndim=0, finite=False))
        if not 0 < number <= _LARGEST:
            message = f"{figure} of preset {name} must be positive, got {number:g}"
            raise InputError(message)
        changed[figure] = number
    told = ", ".join(f"{f} {changed[f]:g} in place of {found.figures[f]:g}" for f in figures)
    return replace(found, figures=MappingProxyType(changed), source=f"set by the user: {told} as in {found.source}")
