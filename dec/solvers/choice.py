"""One ordered table: which method suits a problem, by what was measured of it, and why."""

from collections.abc import Callable
from dataclasses import dataclass

from dec.errors import InputError
from dec.solvers.diagonal import DiagonalGradients
from dec.solvers.direct import Cholmod, Direct
from dec.solvers.elimination import Elimination
from dec.solvers.method import Method
from dec.solvers.multigrid import Multigrid
from dec.solvers.petsc import Petsc
from dec.solvers.problem import LinearProblem

__all__ = ["TABLE", "Choice", "Row", "choose", "method_named"]


@dataclass(frozen=True, slots=True)
class Choice:
    """A method and the sentence that says why it was chosen."""

    method: Method
    because: str


@dataclass(frozen=True, slots=True)
class Row:
    """One line of the table.

    Attributes
    ----------
    applies : function of a LinearProblem and a number of columns
        Measures no more than it needs.
    method : Method
    why : function of a LinearProblem and a number of columns
        The sentence, with the figures that decided.
    """

    applies: Callable[[LinearProblem, int], bool]
    method: Method
    why: Callable[[LinearProblem, int], str]


SMALL = 5_000  # an exact factor costs less than loading compiled loops, whatever the graph
MIDDLING = 20_000  # the same, unless the graph mixes fast and the factor fills
FEW_STEPS = 40.0
MANY_COLUMNS = 16

# The first row that applies is taken. Limits were measured on the problems of tests/bench; beside each its reason.
TABLE = (
    Row(
        lambda p, _: p.n <= SMALL,
        Direct(),
        lambda p, _: f"{p.n} unknowns are at most {SMALL}: an exact factor takes well under a second",
    ),
    Row(
        lambda p, _: p.facts.steps_with_diagonal <= FEW_STEPS,
        DiagonalGradients(),
        lambda p, _: f"the graph mixes fast: a probe foresees about {p.facts.steps_with_diagonal:.0f} cheap steps",
    ),
    Row(
        lambda p, _: p.n <= MIDDLING,
        Direct(),
        lambda p, _: f"{p.n} unknowns are at most {MIDDLING}, and plain conjugate gradients would take many steps",
    ),
    Row(
        lambda p, _: p.share_deficient > 0.5,
        Multigrid("smoothed_aggregation"),
        lambda p, _: f"{p.share_deficient:.0%} of the rows add up to less than zero, so it is no graph with grounds",
    ),
    Row(
        lambda _, m: m >= MANY_COLUMNS,
        Elimination(samples=2),
        lambda p, m: f"{p.n} unknowns and {m} right-hand sides: a better factor is worth its time{_left_out(p)}",
    ),
    Row(
        lambda _p, _m: True,
        Elimination(),
        lambda p, _: f"{p.n} unknowns, and plain conjugate gradients would take many steps{_left_out(p)}",
    ),
)

_NAMED: dict[str, Callable[[], Method]] = {
    "direct": Direct, "cholmod": Cholmod, "multigrid": Multigrid, "elimination": Elimination,
    "gradients": DiagonalGradients, "petsc": Petsc,
}  # fmt: skip


def choose(problem: LinearProblem, n_columns: int = 1) -> Choice:
    """The method that suits a problem, without solving it.

    Parameters
    ----------
    problem : LinearProblem
    n_columns : int
        Right-hand sides that one preparation will serve.

    Returns
    -------
    Choice
        Only of methods that are always installed, so that every machine chooses alike.

    Examples
    --------
    >>> problem = LinearProblem.of_matrix([[2.0, -1.0], [-1.0, 2.0]])
    >>> choose(problem)
    Choice(method=Direct(), because='2 unknowns are at most 5000: an exact factor takes well under a second')
    """
    row = next(row for row in TABLE if row.applies(problem, n_columns))
    return Choice(row.method, row.why(problem, n_columns))


def method_named(method: "str | Method", problem: LinearProblem, n_columns: int = 1) -> Choice:
    """The method that was asked for by name or as an object; "auto" chooses.

    Parameters
    ----------
    method : str or Method
    problem : LinearProblem
    n_columns : int

    Returns
    -------
    Choice

    Raises
    ------
    InputError
        If there is no such method.

    Examples
    --------
    >>> problem = LinearProblem.of_matrix([[2.0, -1.0], [-1.0, 2.0]])
    >>> method_named("multigrid", problem).because
    'asked for'
    """
    if not isinstance(method, str):
        if not (hasattr(method, "prepare") and hasattr(method, "name")):
            message = f"method must be a name or a method object, got {method!r}; names are auto, {', '.join(_NAMED)}"
            raise InputError(message)
        return Choice(method, "asked for")
    if method == "auto":
        return choose(problem, n_columns)
    if method not in _NAMED:
        message = f"method must be one of auto, {', '.join(_NAMED)}, got {method!r}"
        raise InputError(message)
    return Choice(_NAMED[method](), "asked for")


def _left_out(problem: LinearProblem) -> str:
    share = problem.facts.share_positive
    return f"; {share:.0%} positive off-diagonal entries are left out of the preconditioner alone" if share else ""
