"""Exact sums of many floats, integers or fractions, each times a whole number."""

from fractions import Fraction
from typing import NamedTuple

import numpy as np
from scipy.sparse import csr_array

from dec.arrays import AnyArray, FloatArray, IntArray, frozen
from dec.errors import InputError
from dec.topology.compiled import compiled
from dec.topology.edges import index_type

__all__ = ["Terms", "exact_sum"]

_HALF = 26
_ROOM = 2**35  # halves of at most 27 bits, times factors whose sizes add up to less than this, stay inside int64
_LARGEST_INT = 2**63 - 1


class Terms(NamedTuple):
    """Which values are added, and how often: the sum over rows r of ``weights[r] * (signs[k] * values[indices[k]])``.

    Attributes
    ----------
    weights : int64 array, shape (n_rows,)
        Below 2**53 in size.
    indptr : int array, shape (n_rows + 1,)
        Row r has the entries k from ``indptr[r]`` to ``indptr[r + 1]``.
    indices : int array, shape (m,)
    signs : int8 array, shape (m,)
    """

    weights: IntArray
    indptr: AnyArray
    indices: AnyArray
    signs: AnyArray

    @classmethod
    def of_chain(cls, coefficients: IntArray) -> "Terms":
        """Each value times its own coefficient."""
        used = np.flatnonzero(coefficients)
        itype = index_type(len(coefficients) + 1)
        rows = np.arange(len(used) + 1, dtype=itype)
        return cls(coefficients[used], rows, used.astype(itype), np.ones(len(used), np.int8))

    @classmethod
    def of_rows(cls, coefficients: IntArray, matrix: csr_array) -> "Terms":
        """Each row of the matrix times its own coefficient, row by row, nothing combined beforehand."""
        if 4 * np.count_nonzero(coefficients) < len(coefficients):  # else taking rows out costs more than it saves
            used = np.flatnonzero(coefficients)
            coefficients, matrix = coefficients[used], matrix[used]
        return cls(coefficients, matrix.indptr, matrix.indices, matrix.data)

    @property
    def weight(self) -> int:
        """Sizes of all factors added up; rounded upward where it is large."""
        largest_sign = max(-int(self.signs.min(initial=0)), int(self.signs.max(initial=0)))
        return int(np.abs(self.weights).astype(np.float64) @ np.diff(self.indptr) * 1.0000001) * largest_sign + 1

    def factors(self) -> IntArray:
        """The whole number that each entry is taken times; int64 array of shape (m,)."""
        return np.repeat(self.weights, np.diff(self.indptr)) * self.signs


def exact_sum(terms: Terms, values: AnyArray) -> int | Fraction:
    """The exact value of a sum.

    Parameters
    ----------
    terms : Terms
    values : float64, int64 or object array, shape (n,)
        Objects are int and Fraction.

    Returns
    -------
    int or Fraction

    Raises
    ------
    InputError
        If a float that counts is nan or infinite; the message names the first.

    Notes
    -----
    A float64 is a whole number of at most 53 bits times a power of two. Its two halves are added up by exponent in
    64-bit integers that provably cannot overflow, so a long sum costs little more than in floating point. Source:
    Demmel and Hida, Accurate floating point summation, SIAM J. Sci. Comput. 25 (2003), the idea.

    Examples
    --------
    >>> exact_sum(Terms.of_chain(np.array([1, 1, 1, 1])), np.array([1.0, 1e100, 1.0, -1e100]))
    Fraction(2, 1)
    """
    if values.dtype == np.float64:
        return _float_sum(terms, values)
    if values.dtype == np.int64:
        return _integer_sum(terms, values)
    total = (terms.factors().astype(object) * values[terms.indices]).sum() if len(terms.indices) else 0
    return total if isinstance(total, Fraction) else int(total)


def _integer_sum(terms: Terms, values: IntArray) -> int:
    if not len(terms.indices):
        return 0
    factors, reached = terms.factors(), values[terms.indices]
    largest = max(-int(reached.min()), int(reached.max()))
    if terms.weight * largest <= _LARGEST_INT:
        return int(factors @ reached)
    if terms.weight < 2**31:
        high, low = factors @ (reached >> 32), factors @ (reached & (2**32 - 1))
        return (int(high) << 32) + int(low)
    return int((factors.astype(object) * reached.astype(object)).sum())


def _float_sum(terms: Terms, values: FloatArray) -> Fraction:
    finite = np.isfinite(values)
    if not finite.all():
        reached = terms.indices[~finite[terms.indices] & (terms.factors() != 0)]
        if len(reached):
            cell = int(reached.min())
            message = f"values must be finite to be added, got {values[cell]} on cell {cell}"
            raise InputError(message)
    bits = np.ascontiguousarray(values).view(np.int64)
    for part in (*terms, bits):  # all of them read-only: one type, one compilation
        frozen(part)
    digits = (_add_by_exponent if terms.weight < _ROOM else _add_widely)(*terms, bits)
    total = 0
    for at in np.flatnonzero(digits.any(axis=0)).tolist():
        whole = sum(int(digit) << _HALF * place for place, digit in enumerate(digits[:, at]))
        whole <<= max((at & 2047) - 1, 0)
        total += -whole if at & 2048 else whole
    return Fraction(total, 2**1074)


@compiled
def _add_by_exponent(
    weights: IntArray, indptr: AnyArray, indices: AnyArray, signs: AnyArray, bits: IntArray
) -> IntArray:
    """Return the low and the high halves of the mantissas added up; column = sign bit and exponent."""
    digits = np.zeros((2, 4096), np.int64)
    block = np.empty(4096, np.int64)
    row = 0
    for start in range(0, len(indices), 4096):
        stop = min(start + 4096, len(indices))
        for k in range(start, stop):  # on its own, so that the processor fetches many values at once
            block[k - start] = bits[indices[k]]
        for k in range(start, stop):
            while k >= indptr[row + 1]:
                row += 1
            b = block[k - start]
            x = (b >> 52) & 4095
            leading = np.int64((x & 2047) != 0) << 26
            factor = weights[row] * signs[k]
            digits[0, x] += factor * (b & 67108863)
            digits[1, x] += factor * ((b >> 26) & 67108863 | leading)
    return digits


@compiled
def _add_widely(weights: IntArray, indptr: AnyArray, indices: AnyArray, signs: AnyArray, bits: IntArray) -> IntArray:
    """Return the same in five digits of 26 bits, carried at every term: right for any factors below 2**60."""
    digits = np.zeros((5, 4096), np.int64)
    row = 0
    for k in range(len(indices)):
        while k >= indptr[row + 1]:
            row += 1
        b = bits[indices[k]]
        x = (b >> 52) & 4095
        low = b & 67108863
        high = (b >> 26) & 67108863 | (np.int64((x & 2047) != 0) << 26)
        factor = weights[row] * signs[k]
        factor_low, factor_high = factor & 67108863, factor >> 26
        carry = digits[0, x] + factor_low * low
        digits[0, x] = carry & 67108863
        carry = (carry >> 26) + digits[1, x] + factor_high * low + factor_low * high
        digits[1, x] = carry & 67108863
        carry = (carry >> 26) + digits[2, x] + factor_high * high
        digits[2, x] = carry & 67108863
        carry = (carry >> 26) + digits[3, x]
        digits[3, x] = carry & 67108863
        digits[4, x] += carry >> 26
    return digits
