"""Series of every kind for hypothesis, and the definitions written out in Fractions."""

from fractions import Fraction

import numpy as np
from hypothesis import strategies as st

NUMBERS = {
    "small": st.integers(-50, 50),
    "int64": st.integers(-(2**63), 2**63 - 1),
    "long": st.integers(-(2**90), 2**90),
    "fraction": st.fractions(max_denominator=30),
}
STEPS = st.one_of(
    st.just(1), st.integers(2, 5), st.fractions(min_value=Fraction(1, 50), max_value=9, max_denominator=50)
)


def as_series(rows):
    """int64 where that holds all of them, objects otherwise; as a caller would have them."""
    array = np.array(rows, dtype=object)
    fits = all(isinstance(v, int) and -(2**63) <= v < 2**63 for v in array.ravel().tolist())
    return array.astype(np.int64) if fits else array


@st.composite
def exact_series(draw, least=1, most=8, columns=None):
    kind = NUMBERS[draw(st.sampled_from(sorted(NUMBERS)))]
    n = draw(st.integers(least, most))
    width = draw(st.sampled_from([None, 1, 3])) if columns is None else columns
    size = n * (width or 1)
    values = draw(st.lists(kind, min_size=size, max_size=size))
    array = as_series(values)
    return array if width is None else array.reshape(n, width)


def float_series(least=1, most=12):
    """Of any size there is, 600 orders of magnitude."""
    number = st.floats(allow_nan=False, allow_infinity=False)
    return st.lists(number, min_size=least, max_size=most).map(lambda v: np.array(v, dtype=float))


def columns_of(array):
    """Columns as lists of Fractions, one for plain values."""
    table = np.asarray(array, dtype=object)
    table = table[:, None] if table.ndim == 1 else table
    return [[Fraction(v) for v in column] for column in table.T.tolist()]


def is_plain(array):
    """Whether nothing in an exact array could wrap or round: int64, or Python integers and Fractions."""
    return array.dtype == np.int64 or all(type(v) in (int, Fraction) for v in array.ravel().tolist())
