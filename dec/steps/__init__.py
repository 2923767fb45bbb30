"""Calculus in steps: along a uniform line, in time for instance.

The derivative here is the difference quotient with step h, ``(f(x + h) - f(x)) / h``, and the integral is h times a
sum; every rule of the usual calculus has its exact counterpart, with no step too large. Arrays have one row a step and
one column a series, (n,) or (n, m).

Exact data (integers, Fractions, decimal text) give exact results: int64 where nothing can leave it, else Python
integers and Fractions. Floats give floats. The two are not mixed by accident: next to exact values a step written as a
float is refused; ``"0.1"`` or ``Fraction(1, 10)`` is taken.
"""

from dec.steps.differences import antidifference, check_telescoping, definite_sum, difference
from dec.steps.equations import LinearEquation
from dec.steps.forward import ForwardSeries, forward_series
from dec.steps.growth import cosine, growth, sine
from dec.steps.meters import MeterChange, MeterFlows, meter_flows
from dec.steps.models import decay, interest, leapfrog, oscillation
from dec.steps.parts import Parts, check_summation_by_parts, summation_by_parts
from dec.steps.powers import falling_power
from dec.steps.readings import Filled, extend, fill
from dec.steps.totals import meter_totals

__all__ = [
    "Filled", "ForwardSeries", "LinearEquation", "MeterChange", "MeterFlows", "Parts", "antidifference",
    "check_summation_by_parts", "check_telescoping", "cosine", "decay", "definite_sum", "difference", "extend",
    "falling_power", "fill", "forward_series", "growth", "interest", "leapfrog", "meter_flows", "meter_totals",
    "oscillation", "sine", "summation_by_parts",
]  # fmt: skip
