"""Integrals decided exactly, and the two theorems checked with them."""

from fractions import Fraction

import numpy as np

from dec.arrays import ObjectArray
from dec.calculus.chain import Chain
from dec.calculus.cochain import Cochain
from dec.calculus.sums import Terms, exact_sum
from dec.errors import InputError, TopologyError
from dec.findings import Finding

__all__ = ["check_line_integral", "check_stokes", "exact_integral"]


def exact_integral(chain: Chain, cochain: Cochain) -> Fraction | ObjectArray:
    """The exact value of the sum of the given numbers over a chain.

    Parameters
    ----------
    chain : Chain
    cochain : Cochain
        Of the same degree and complex. A float64 is a whole number times a power of two, so its sums have one exact
        value; that is what comes back, not the value of the decimal text the floats once had.

    Returns
    -------
    Fraction, or an object array of Fractions, one a column, where the cochain has columns

    Raises
    ------
    TopologyError
        If chain and cochain live on different cells.
    InputError
        If a value that counts is nan or infinite; the message names the first.

    Notes
    -----
    How floats are added is said in `dec.calculus.sums.exact_sum`.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_edges([0] * 4, [1] * 4)
    >>> exact_integral(K.chain(1, [1, 1, 1, 1]), K.cochain(1, [1.0, 1e100, 1.0, -1e100]))
    Fraction(2, 1)
    """
    _refuse_unfit(chain, cochain, 0)
    terms = Terms.of_chain(chain.coefficients)
    if cochain.values.ndim == 1:
        return Fraction(exact_sum(terms, cochain.values))
    result = np.empty(cochain.values.shape[1], dtype=object)
    result[:] = [Fraction(exact_sum(terms, column)) for column in cochain.values.T]
    return result


def check_stokes(chain: Chain, cochain: Cochain) -> Finding:
    """Whether the sum over the boundary equals the sum of the derivative over the chain, decided exactly.

    Parameters
    ----------
    chain : Chain of degree k + 1
    cochain : Cochain of degree k
        One column.

    Returns
    -------
    Finding
        ``left`` is the sum over the boundary, ``right`` the sum of the derivative, cell by cell and never rounded;
        ``difference`` is zero when it holds.

    Raises
    ------
    TopologyError
        If degrees or complexes do not fit.
    InputError
        If a value that counts is nan or infinite, or the cochain has columns.

    Notes
    -----
    Source: the generalised Stokes theorem; Desbrun, Kanso and Tong, Discrete Differential Forms for Computational
    Modeling, 2006, section 3 (discrete form).

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_faces([[0, 1, 2]])
    >>> finding = check_stokes(K.region([0]), K.cochain(1, [0.1, 0.2, 0.3]))
    >>> finding.holds, finding.left == finding.right
    (True, True)
    """
    left, right = _both_sides(chain, cochain)
    name = "sum over the boundary equals sum of the derivative"
    return Finding(name, left == right, left - right, Fraction(0), left=left, right=right)


def check_line_integral(path: Chain, potential: Cochain) -> Finding:
    """Whether differences added up along a path give end value minus start value, decided exactly.

    Parameters
    ----------
    path : Chain of degree 1
        May run against edges and visit a vertex more than once.
    potential : Cochain of degree 0
        One column.

    Returns
    -------
    Finding
        ``left`` adds differences edge by edge, ``right`` is end minus start: exactly zero for a closed path.

    Raises
    ------
    TopologyError, InputError
        As `check_stokes`.

    Examples
    --------
    >>> from dec.calculus.complex import Complex
    >>> K = Complex.from_edges([0, 1, 2], [1, 2, 0])
    >>> check_line_integral(K.path([0, 1, 2], closed=True), K.cochain(0, [0.1, 0.7, 1e16])).left
    Fraction(0, 1)
    """
    if getattr(path, "degree", 1) != 1:
        message = f"a path has degree 1, got a chain of degree {path.degree}"
        raise TopologyError(message)
    right, left = _both_sides(path, potential)
    name = "differences along the path add up to end minus start"
    return Finding(name, left == right, left - right, Fraction(0), left=left, right=right)


def _both_sides(chain: Chain, cochain: Cochain) -> tuple[Fraction, Fraction]:
    """Return the sum over the boundary and the sum of the derivative."""
    _refuse_unfit(chain, cochain, 1)
    if cochain.values.ndim == 2:
        message = f"one column at a time: the cochain has {cochain.n_columns}, give cochain.column(j)"
        raise InputError(message)
    over_cells = Terms.of_rows(chain.coefficients, cochain.complex.coboundary(cochain.degree))
    over_boundary = Terms.of_chain(chain.boundary().coefficients)
    right = Fraction(exact_sum(over_cells, cochain.values))
    return Fraction(exact_sum(over_boundary, cochain.values)), right


def _refuse_unfit(chain: object, cochain: object, step: int) -> None:
    if not isinstance(chain, Chain) or not isinstance(cochain, Cochain):
        message = f"a chain and a cochain are needed, got {type(chain).__name__} and {type(cochain).__name__}"
        raise TopologyError(message)
    if chain.complex is not cochain.complex:
        message = "these live on different complexes; build both from the same Complex object"
        raise TopologyError(message)
    if chain.degree != cochain.degree + step:
        fitting = f"a chain of degree {cochain.degree + step}"
        message = f"a cochain of degree {cochain.degree} needs {fitting}, got {chain.degree}"
        raise TopologyError(message)
