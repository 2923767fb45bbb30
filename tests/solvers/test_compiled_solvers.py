"""Every compiled loop of the linear engine does the same whether it is interpreted or compiled."""

import importlib
import subprocess
import sys

import numpy as np
import pytest

from dec.solvers.diagonal import DiagonalGradients
from dec.solvers.elimination import Elimination

from .linear_cases import random_graph, right_side

MODULES = ("dec.solvers.factor", "dec.solvers.numbering", "dec.solvers.gradients", "dec.solvers.block_gradients")


def solve_all():
    """Runs every loop: one column and several, with and without a factor, singular parts and grounded ones."""
    problem = random_graph(900, 2000, 5, -2, 2, [3])
    assert problem.singular.any()
    assert not problem.singular.all()
    for method in (Elimination(samples=2), DiagonalGradients()):
        prepared = method.prepare(problem)
        prepared.solve(right_side(problem), rtol=0.5)
        prepared.solve(right_side(problem, 2), rtol=0.5)


def kernels():
    found = {}
    for name in MODULES:
        module = importlib.import_module(name)
        own = {k: f for k, f in vars(module).items() if hasattr(f, "interpreted") and f.__module__ == name}
        found |= {f"{name}.{k}": f for k, f in own.items()}
    return found


# every loop that Python calls, and the module that calls it
OUTER = {
    "dec.solvers.factor.half_edges": "elimination",
    "dec.solvers.factor.eliminate": "elimination",
    "dec.solvers.numbering.depth_first": "elimination",
    "dec.solvers.numbering.reordered": "elimination",
    "dec.solvers.numbering.permuted": "diagonal",
    "dec.solvers.gradients.forward": "gradients",
    "dec.solvers.gradients.backward": "gradients",
    "dec.solvers.gradients.turn": "gradients",
    "dec.solvers.gradients.scaled_square": "gradients",
    "dec.solvers.gradients.turn_scaled": "gradients",
    "dec.solvers.gradients.multiply": "gradients",
    "dec.solvers.gradients.advance": "gradients",
    "dec.solvers.block_gradients.scale_block": "block_gradients",
    "dec.solvers.block_gradients.multiply_block": "block_gradients",
    "dec.solvers.block_gradients.forward_block": "block_gradients",
    "dec.solvers.block_gradients.backward_block": "block_gradients",
    "dec.solvers.block_gradients.turn_block": "block_gradients",
    "dec.solvers.block_gradients.advance_block": "block_gradients",
}


def copied(arg):
    if isinstance(arg, np.ndarray):
        copy = arg.copy()
        copy.setflags(write=arg.flags.writeable)
        return copy
    return type(arg)(*map(copied, arg)) if isinstance(arg, tuple) else arg


def arrays(values):
    if isinstance(values, np.ndarray):
        return [values]
    return [a for v in values for a in arrays(v)] if isinstance(values, tuple | list) else []


@pytest.mark.parametrize("name", OUTER)
def test_interpreted_and_compiled_agree_and_leave_the_same_arrays(name, monkeypatch):
    kernel = kernels()[name]
    calls = []

    def record(*args):
        calls.append([copied(a) for a in args])
        return kernel(*args)

    record.interpreted = kernel.interpreted
    module = importlib.import_module(f"dec.solvers.{OUTER[name]}")
    monkeypatch.setattr(module, kernel.__name__, record)
    solve_all()
    args = max(calls, key=lambda call: sum(a.size for a in arrays(call)))
    one, other = ([copied(a) for a in args] for _ in range(2))
    monkeypatch.setattr("dec.topology.compiled.SMALL", 10**9)
    plain = kernel(*one)
    monkeypatch.setattr("dec.topology.compiled.SMALL", 0)
    machine = kernel(*other)
    assert "numba" in sys.modules
    assert type(plain) is not int or plain == machine
    assert not isinstance(plain, float) or machine == pytest.approx(plain, rel=1e-9)
    pairs = zip(arrays([plain, *one]), arrays([machine, *other]), strict=True)
    for a, b in pairs:
        assert a.dtype == b.dtype
        np.testing.assert_allclose(a, b, rtol=1e-9, atol=1e-12)  # compiled sums may use fused multiply-add


def test_every_kernel_is_reached_from_one_that_is_tested_here():
    reached, stack = set(), [kernels()[name].interpreted for name in OUTER]
    while stack:
        code = stack.pop()
        reached.add(f"{code.__module__}.{code.__name__}")
        names = [n for n in code.__code__.co_names if hasattr(code.__globals__.get(n), "interpreted")]
        stack += [code.__globals__[n].interpreted for n in names]
    assert reached == set(kernels())


def test_small_problems_are_solved_without_loading_numba():
    source = (
        "import sys, numpy as np\n"
        "from dec.solvers.problem import LinearProblem\n"
        "from dec.solvers.choice import choose\n"
        "p = LinearProblem.of_graph(np.arange(99), np.arange(1, 100), 100, np.ones(99))\n"
        "choose(p).method.prepare(p).solve(np.eye(1, 100)[0] - 0.01)\n"
        "print(sorted(m for m in ('numba', 'pyamg', 'matplotlib', 'pandas') if m in sys.modules))\n"
    )
    done = subprocess.run([sys.executable, "-c", source], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
