"""What was asked of a network, all in one record, and which questions contradict themselves."""

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from dec.audit.given.preset_table import PRESETS, Preset
from dec.audit.given.what_if import WhatIf
from dec.errors import InputError

__all__ = ["ALPHA", "FIGURES", "Asked", "clash", "unfit_preset"]

ALPHA = 0.05
FIGURES = ("auto", "all", "estimate")
_LAW_OF = {"reading sd": "balance", "vertex limit": "balance", "loop limit": "loops"}
_SIZES = ("supply", "storage", "fixed")
_TESTS = {"sidak": False, "robust": False, "figures": "auto", "alpha": ALPHA}


@dataclass(frozen=True, slots=True)
class Asked:
    """The question; fields as the parameters of `dec.balance` and `dec.loops`, `law` "balance" or "loop"."""

    value: str
    sd: object = None
    readings: Any = None
    open: str | Iterable[Any] | None = None
    supply: object = None
    supply_sd: object = None
    storage: object = None
    storage_sd: object = None
    fixed: object = None
    fixed_sd: object = None
    common: str | None = None
    common_sd: object = None
    alpha: float = ALPHA
    limit: float | str | None = None
    unit: str | None = None
    preset: Any = None
    length: str | None = None
    length_unit: str | None = None
    transition: Any = None
    sidak: bool = False
    robust: bool = False
    figures: str = "auto"
    decimal: str = "."
    what_if: WhatIf = field(default_factory=WhatIf)
    law: str | None = None

    def __post_init__(self) -> None:
        if isinstance(self.open, Iterator):  # which gives its ids once, and a what-if asks for them again
            object.__setattr__(self, "open", tuple(self.open))
        self._refuse_kinds()
        if self.figures not in FIGURES:
            message = f"figures must be one of {', '.join(FIGURES)}, got {self.figures!r}"
            raise InputError(message)
        found = clash({name: getattr(self, name) for name in self.__slots__})
        if found is not None:
            raise InputError(found)

    def _refuse_kinds(self) -> None:
        """Refuse what is of another kind than its name says, before anything is made of it."""
        for name in ("value", "common", "length", "length_unit", "unit", "figures", "decimal"):
            given = getattr(self, name)
            if given is not None and not isinstance(given, str):
                message = f"{name} must be a text, got {given!r:.80}"
                raise InputError(message)
        for name in ("sidak", "robust"):
            if not isinstance(getattr(self, name), bool):
                message = f"{name} must be True or False, got {getattr(self, name)!r:.80}"
                raise InputError(message)
        for name in ("sd", "supply_sd", "storage_sd", "fixed_sd", "common_sd", "transition"):
            if callable(getattr(self, name)):
                message = f"{name} must be a number, a text, or numbers, got a function"
                raise InputError(message)
        if self.decimal not in {".", ","}:
            message = f'decimal must be "." or ",", got {self.decimal!r}'
            raise InputError(message)


def clash(given: Mapping[str, Any], say: Callable[[str], str] = str) -> str | None:
    """What contradicts itself in a question, or would be passed over in silence; None where nothing does.

    Parameters
    ----------
    given : mapping of name to value
        Names as the fields of `Asked`; None, or no entry, where something was not given.
    say : function of a name
        How the caller writes that name, for messages.

    Examples
    --------
    >>> clash({"value": "flow", "common": "crew", "sd": 0.1})
    'common names groups that share an error, and common_sd, how large it is, is missing; give both or neither'
    """
    there = {name for name, value in given.items() if value is not None}
    for what in _SIZES:
        if f"{what}_sd" in there and what not in there:
            return (
                f"{say(f'{what}_sd')} says how well {say(what)} is known, but there is no {say(what)}; give both or "
                "neither"
            )
    if "common_sd" in there and "common" not in there:
        return (
            f"{say('common_sd')} is the size of an error that groups share, and {say('common')}, the column of groups, "
            "is missing; give both or neither"
        )
    if "common" in there and "common_sd" not in there:
        return (
            f"{say('common')} names groups that share an error, and {say('common_sd')}, how large it is, is missing; "
            "give both or neither"
        )
    return _preset_clash(given, there, say) or _test_clash(given, there, say)


def unfit_preset(name: str, sets: str, law: str) -> str | None:
    """Why a preset does not fit a law, "balance" or "loop"; None where it does.

    Examples
    --------
    >>> unfit_preset("levelling-4mm", "loop limit", "balance")
    'preset levelling-4mm sets a loop limit; use dec loops (dec.loops) for it'
    """
    wanted = "balance" if law == "balance" else "loops"
    if _LAW_OF[sets] == wanted:
        return None
    if sets == "reading sd":
        return f"preset {name}: meter classes are for flows; use dec balance (dec.balance) for it, or give sd"
    return f"preset {name} sets a {sets}; use dec {_LAW_OF[sets]} (dec.{_LAW_OF[sets]}) for it"


def _preset_clash(given: Mapping[str, Any], there: set[str], say: Callable[[str], str]) -> str | None:
    if "preset" not in there:
        loose = next((what for what in ("length", "length_unit", "transition") if what in there), None)
        if loose is None:
            return None
        return f"{say(loose)} belongs to a preset ({say('preset')}), and none is named; name one, or leave it out"
    rule, name = _rule(given["preset"]), say("preset")
    unfit = unfit_preset(rule.name, rule.sets, given["law"]) if rule is not None and "law" in there else None
    if unfit is not None:
        return unfit
    if there & {"sd", "limit"}:
        return (
            f"{name} says how far readings may be out; leave {say('sd')} and {say('limit')} away beside "
            f"{_called(given['preset'])}"
        )
    if rule is None:
        return None
    if "transition" in there and rule.sets != "reading sd":
        return f"{say('transition')} belongs to presets of meter classes; leave it out beside {rule.name}"
    loose = next((what for what in ("length", "length_unit") if what in there), None)
    if loose is not None and rule.sets != "loop limit":
        return f"{say(loose)} belongs to presets of levelling loops; leave it out beside {rule.name}"
    if rule.sets == "reading sd" and "transition" not in there:
        return (
            f"preset {rule.name} needs the transitional flow of the meters; give {say('transition')}, as a number or a "
            "column, with a floor (1.6+0.02) where readings may be 0"
        )
    needed = {"length": "the lengths of the lines", "length_unit": "their unit", "unit": "the unit of the differences"}
    missing = [what for what in needed if what not in there] if rule.sets == "loop limit" else []
    if missing:
        means = " and ".join(f"{say(what)}, {needed[what]}" for what in missing)
        return f"preset {rule.name} needs the lengths of the lines and both units; give {means}; none is guessed"
    return None


def _test_clash(given: Mapping[str, Any], there: set[str], say: Callable[[str], str]) -> str | None:
    rule = _rule(given.get("preset"))
    if "sd" in there or ("preset" in there and (rule is None or rule.sets == "reading sd")):
        return None
    if "common" in there:
        return f"common errors ({say('common')}) need standard deviations of the readings beside them; give {say('sd')}"
    idle = next((what for what, usual in _TESTS.items() if what in there and _differs(given[what], usual)), None)
    if idle is None or (idle == "alpha" and not _is_chance(given["alpha"])):  # which is refused for what it is
        return None
    instead = next((what for what in ("limit", "preset") if what in there), None)
    why = f"{say(instead)} decides here" if instead else "none are given"
    return f"{say(idle)} belongs to tests with standard deviations ({say('sd')}), and {why}; leave it out"


def _differs(given: Any, usual: object) -> bool:
    return bool(np.ndim(given) == 0 and given != usual)


def _is_chance(alpha: object) -> bool:
    return isinstance(alpha, float) and 0 < alpha < 1


def _rule(preset: object) -> Preset | None:
    """Return the preset that is named, figures aside; None where there is none of that name."""
    return preset if isinstance(preset, Preset) else PRESETS.get(str(preset).partition(",")[0].strip())


def _called(preset: object) -> str:
    return preset.name if isinstance(preset, Preset) else repr(preset)
