"""What PETSc needs beyond the table of all methods: its memory given back, its failures made ours."""

import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from dec.errors import AccuracyError, InputError
from dec.solvers.petsc import Petsc

from .linear_cases import graph, right_side, square

pytest.importorskip("petsc4py", reason="petsc4py is not installed")


def megabytes():
    status = Path("/proc/self/status").read_text(encoding="utf-8")
    return int(re.search(r"VmRSS:\s*(\d+)", status)[1]) / 1024


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="no process status to read")
@pytest.mark.parametrize("kind", ["gamg", "hypre"])
def test_a_hundred_solves_hold_no_more_memory_than_a_few(kind):
    """Objects that only Python lets go stay with PETSc: it took 4 MB a solve of this size."""
    problem = graph(*square(100), 10_000, None, [0])
    b = right_side(problem)

    def solve(times):
        for _ in range(times):
            Petsc(kind).prepare(problem).solve(b)

    solve(5)
    before = megabytes()
    solve(20)
    assert megabytes() - before < 20


class Failing:
    """A solver that fails as PETSc does: with several lines."""

    def setTolerances(self, **_):  # noqa: N802  # PETSc's name
        """Take anything."""

    def solve(self, *_):
        """Fail."""
        message = "error code 77\n[0] KSPSolve() at itfunc.c:406\n[0] the reason"
        raise RuntimeError(message)

    def getPC(self):  # noqa: N802  # PETSc's name
        """Stand for the preconditioner too."""
        return self

    def getType(self):  # noqa: N802  # PETSc's name
        """Name the kind."""
        return "gamg"


def test_what_petsc_reports_becomes_one_line_of_ours():
    problem = graph(*square(6), 36)
    ready = Petsc().prepare(problem)
    with pytest.raises(AccuracyError, match=r"^petsc could not use its multigrid gamg \(.*the reason\); take another"):
        replace(ready, solver=Failing(), failure=RuntimeError).solve(right_side(problem))


def test_a_kind_that_petsc_was_not_built_with_is_refused():
    method = Petsc()
    object.__setattr__(method, "kind", "nowhere")
    with pytest.raises(InputError, match='built without "nowhere"'):
        method.prepare(graph(*square(3), 9))


def test_small_and_large_units_solve_alike_to_the_last_bit():
    tail, head = square(20)
    b = right_side(graph(tail, head, 400))
    one, other = (
        Petsc().prepare(graph(tail, head, 400, np.full(len(tail), weight))).solve(b * weight)
        for weight in (1.0, 2.0**-700)
    )
    assert np.array_equal(one.x, other.x)
