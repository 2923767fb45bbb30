"""A preset put to use: the accuracy of readings, or how far loops and vertices may miss."""

from collections.abc import Callable

import numpy as np

from dec.arrays import FloatArray, IntArray
from dec.audit.adjusted.closures import Closures
from dec.audit.given.asked import Asked
from dec.audit.given.model import Model
from dec.audit.given.presets import Preset, kilometres, loop_limits, meter_class, preset, vertex_limits
from dec.audit.given.readings import Readings
from dec.audit.names import edge_names
from dec.calculus.columns import reads_as_number
from dec.calculus.dataset import Dataset
from dec.errors import InputError
from dec.topology.graphs import fundamental_loops

__all__ = ["chosen_rule", "line_lengths", "loop_allowances", "meter_accuracy", "vertex_allowances"]

_CHUNK = 10_000


def chosen_rule(asked: Asked) -> Preset | None:
    """The preset that was named, with figures set anew where the name says so: "levelling-12mm,mm_per_sqrt_km=9".

    Raises
    ------
    InputError
        If there is no such preset, it has no such figure, or one is no number.
    """
    if asked.preset is None or isinstance(asked.preset, Preset):
        return asked.preset
    name, *changes = str(asked.preset).split(",")
    figures = {}
    for change in changes:
        figure, _, text = change.partition("=")
        if not reads_as_number(text):
            message = f"a figure of a preset is set as figure=number, got {change!r}"
            raise InputError(message)
        if figure.strip() in figures:
            message = f"preset {name.strip()} is given {figure.strip()} twice; set each figure once"
            raise InputError(message)
        figures[figure.strip()] = float(text)
    return preset(name.strip(), **figures)


def meter_accuracy(asked: Asked, rule: Preset | None) -> object:
    """What stands for `sd`: that itself, or the rule of a meter class.

    A transitional flow may have a floor after it, as "1.6+0.02" or "Q2+0.02", which is added to every standard
    deviation.

    Raises
    ------
    InputError
        If the transitional flow is no number.
    """
    if rule is None or rule.sets != "reading sd":
        return asked.sd
    if not isinstance(asked.transition, str):
        return meter_class(rule, asked.transition)
    border, plus, floor = asked.transition.rpartition("+")
    if not (plus and border and reads_as_number(floor)) or reads_as_number(asked.transition):
        border, floor = asked.transition, "0"
    return meter_class(rule, border, floor=float(floor))


def line_lengths(net: Dataset, asked: Asked, rule: Preset | None, readings: Readings) -> FloatArray | None:
    """Lengths of the levelled lines in km; None where no rule of loops was named. float64 array of shape (n1,).

    Raises
    ------
    InputError
        If a length that is needed is missing or cannot be meant.
    """
    if asked.length is None or rule is None or rule.sets != "loop limit":
        return None
    return kilometres(net, asked.length, asked.length_unit, readings.measured)


def loop_allowances(
    asked: Asked, rule: Preset | None, lengths: FloatArray | None, model: Model, found: Closures
) -> FloatArray | None:
    """How far each loop of the basis may miss; None where no rule of loops was named.

    Raises
    ------
    InputError
        If the unit of the differences is missing.
    """
    if rule is None or lengths is None:
        return None
    tail, head = found.group[model.tail], found.group[model.head]

    def allowed(chords: IntArray) -> FloatArray:
        walks = fundamental_loops(tail, head, found.forest, chords)
        return loop_limits(rule, lengths[walks.edges], walks.offsets, unit=asked.unit, heading=asked.value)

    return _in_chunks(found.chords, allowed)


def vertex_allowances(
    net: Dataset, asked: Asked, rule: Preset | None, model: Model, group: IntArray, n_groups: int
) -> FloatArray | None:
    """How far what enters and what leaves each group of vertices may differ; None where no such rule was named.

    Raises
    ------
    InputError
        If a count is negative, which the message names by its edge and line, or the unit is not that of hourly counts.
    """
    if rule is None or rule.sets != "vertex limit":
        return None
    flow = np.where(model.measured & (group[model.tail] != group[model.head]), model.readings.value, 0.0)
    if (flow < 0).any():
        edge = int(np.argmax(flow < 0))
        place = "" if asked.readings is not None else f"{net.column(asked.value, 1).place(edge)}: "
        message = (
            f"{place}counts must not be negative under preset {rule.name}, got {flow[edge]:g} on edge "
            f"{edge_names(net.complex, np.array([edge]))[0]}; count each direction on an edge of its own"
        )
        raise InputError(message)
    entering: FloatArray = np.bincount(group[model.head], weights=flow, minlength=n_groups).astype(np.float64)
    leaving: FloatArray = np.bincount(group[model.tail], weights=flow, minlength=n_groups).astype(np.float64)
    if model.known is not None:
        np.add.at(entering, group, np.maximum(model.known.value, 0.0))
        np.add.at(leaving, group, np.maximum(-model.known.value, 0.0))
    return vertex_limits(rule, entering, leaving, unit=asked.unit)


def _in_chunks(chords: IntArray, allowed: Callable[[IntArray], FloatArray]) -> FloatArray:
    parts = [allowed(chords[i : i + _CHUNK]) for i in range(0, len(chords), _CHUNK)]
    return np.concatenate([np.empty(0), *parts])
