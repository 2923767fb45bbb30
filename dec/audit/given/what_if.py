"""Readings as they would be if a meter were turned, had another unit, or were left out; the data stay as they are."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from decimal import Decimal
from fractions import Fraction

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.audit.given.readings import Readings, Repeats
from dec.calculus.columns import Decimals, reads_as_number
from dec.calculus.complex import Complex
from dec.errors import InputError

__all__ = ["WhatIf"]

# As for readings as they are given: squares of what lies between stay inside float64.
_SMALLEST, _LARGEST = 1e-100, 1e100
_MOST_EXPONENT = 300
_ROOM = 2**62


@dataclass(frozen=True, slots=True)
class WhatIf:
    """A question about readings.

    Attributes
    ----------
    turned : tuple of str
        Ids of edges whose readings count the other way.
    scaled : mapping of str to str, int, float or Fraction
        Ids of edges, and what their readings are multiplied by.
    left_out : tuple of str
        Ids of edges taken as not measured.
    """

    turned: tuple[str, ...] = ()
    scaled: Mapping[str, object] | None = None
    left_out: tuple[str, ...] = ()

    @classmethod
    def of(cls, turned: Iterable[str], scaled: Mapping[str, object] | None, left_out: Iterable[str]) -> "WhatIf":
        """The question, from any iterables; one id as a plain text is taken as that one."""
        if scaled is not None and not isinstance(scaled, Mapping):
            message = f"scaled must map ids to factors, got {scaled!r:.80}"
            raise InputError(message)
        ids = []
        for name, given in (("turned", turned), ("left_out", left_out)):
            if isinstance(given, Mapping) or not isinstance(given, Iterable):
                message = f"{name} must list ids of edges, got {given!r:.80}"
                raise InputError(message)
            ids.append((given,) if isinstance(given, str) else tuple(given))
        return cls(ids[0], dict(scaled or {}), ids[1])

    def applied(self, network: Complex, readings: Readings) -> Readings:
        """The readings as asked for.

        Parameters
        ----------
        network : Complex
        readings : Readings

        Returns
        -------
        Readings
            Standard deviations grow with a factor's size: what was read in another unit is as unsure in that unit.

        Raises
        ------
        InputError
            If an id is no edge, its edge is not measured, or a factor is not a finite number other than 0.
        """
        if not (self.turned or self.scaled or self.left_out):
            return readings
        asked = [(str(name), _factor(name, factor)) for name, factor in (self.scaled or {}).items()]
        factors = [*((str(name), Fraction(-1)) for name in self.turned), *asked]
        edges = _numbers(network, [name for name, _ in factors] + [str(name) for name in self.left_out], readings)
        changed, out = edges[: len(factors)], edges[len(factors) :]
        factor = np.ones(len(readings.value))
        factor[changed] = [float(factor) for _, factor in factors]
        value = readings.value * factor
        sd = None if readings.sd is None else readings.sd * np.abs(factor)
        for edge, (name, _) in zip(changed.tolist(), factors, strict=True):
            _refuse_unusable(name, float(value[edge]), None if sd is None else float(sd[edge]))
        decimals = _multiplied(readings.decimals, changed.tolist(), [factor for _, factor in factors])
        value[out] = np.nan
        present, integers = readings.measured.copy(), decimals.integers.copy()
        present[out], integers[out] = False, 0
        repeats = None if readings.repeats is None else _repeated(readings.repeats, factor, out, readings.value)
        return replace(readings, value=value, sd=sd, decimals=Decimals(integers, decimals.places, present),
                       repeats=repeats)  # fmt: skip

    def to_dict(self) -> dict[str, object]:
        """The question as plain objects."""
        scaled = {name: float(_factor(name, factor)) for name, factor in (self.scaled or {}).items()}
        return {"turned": list(self.turned), "scaled": scaled, "left_out": list(self.left_out)}


def _factor(name: object, given: object) -> Fraction:
    try:
        texts = str(given).split("/")
    except ValueError:  # more digits than Python prints
        texts, given = ["?"], "more digits than can be printed"
    if isinstance(given, bool) or len(texts) > 2 or not all(map(reads_as_number, texts)):
        message = f"the factor of {name!r} must be a number other than 0, as 0.001 or 1/3.6, got {given!r}"
        raise InputError(message)
    parts = [Decimal(text) for text in [*texts, "1"][:2]]
    if not all(parts):
        message = f"the factor of {name!r} must be a number other than 0, got {given!r}"
        raise InputError(message)
    fits = all(abs(p.adjusted()) <= _MOST_EXPONENT for p in parts)  # before a fraction of huge numbers is made
    if not (fits and _SMALLEST <= abs(Fraction(parts[0]) / Fraction(parts[1])) <= _LARGEST):
        message = f"the factor of {name!r} must lie within 1e-100 and 1e100, got {given!r}; choose a unit that fits"
        raise InputError(message)
    return Fraction(parts[0]) / Fraction(parts[1])


def _refuse_unusable(name: str, value: float, sd: float | None) -> None:
    if abs(value) > _LARGEST or (sd is not None and not _SMALLEST <= sd <= _LARGEST):
        what = f"{value:g}" if sd is None else f"{value:g} with an sd of {sd:g}"
        message = (
            f"what-if makes the reading of {name!r} {what}, out of the range 1e-100 to 1e100; choose another factor"
        )
        raise InputError(message)


def _numbers(network: Complex, names: list[str], readings: Readings) -> IntArray:
    ids = network.edge_ids
    every = {str(name): e for e, name in enumerate(range(network.counts[1]) if ids is None else ids)} if names else {}
    found = []
    for name in names:
        if name not in every:
            message = f"what-if names {name!r}, which is no edge; edges are named by their ids as text"
            raise InputError(message)
        if not readings.measured[every[name]]:
            message = f"what-if names {name!r}, which is not measured; name an edge with a reading"
            raise InputError(message)
        found.append(every[name])
    if len(set(found)) < len(found):
        twice = next(name for name in names if names.count(name) > 1)
        message = f"what-if names {twice!r} twice; ask for one change of an edge at a time"
        raise InputError(message)
    return np.array(found, dtype=np.int64)


def _multiplied(given: Decimals, edges: list[int], factors: list[Fraction]) -> Decimals:
    """Return the readings with some multiplied; a product without end is rounded at its 20th digit or later."""
    integers = given.integers.astype(object)
    products = [integers[edge] * factor for edge, factor in zip(edges, factors, strict=True)]
    more = max(map(_places, products), default=0)
    integers = integers * 10**more
    for edge, product in zip(edges, products, strict=True):
        integers[edge] = round(product * 10**more)
    small = max((abs(int(i)) for i in integers), default=0) < _ROOM
    return Decimals(integers.astype(np.int64) if small else integers, given.places + more, given.present)


def _places(number: Fraction) -> int:
    """Return how many decimal places a number has; of one without end, so many that 20 digits are kept."""
    rest, twos, fives = number.denominator, 0, 0
    while rest % 2 == 0:
        rest, twos = rest // 2, twos + 1
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    return max(twos, fives) if rest == 1 else 20 + len(str(number.denominator // abs(number.numerator)))


def _repeated(repeats: Repeats, factor: FloatArray, out: IntArray, mean: FloatArray) -> Repeats:
    """Return the rows behind the readings, scaled as these are, without those of edges that are left out."""
    kept, every = ~np.isin(repeats.edge, out), factor[repeats.edge]
    edge, size = repeats.edge[kept], np.abs(every[kept])
    chi_square = repeats.chi_square
    if not kept.all() and repeats.sd is not None:
        chi_square = float((((repeats.value - mean[repeats.edge]) / repeats.sd)[kept] ** 2).sum())
    return replace(
        repeats, edge=edge, sensor=repeats.sensor[kept], raw=repeats.raw[kept],
        mounted=repeats.mounted[kept] * np.sign(every[kept]).astype(np.int64), factor=repeats.factor[kept] * size,
        value=repeats.value[kept] * every[kept], sd=None if repeats.sd is None else repeats.sd[kept] * size,
        dof=len(edge) - len(np.unique(edge)), chi_square=chi_square,
    )  # fmt: skip
