"""Every compiled loop gives the same whether it is interpreted or compiled."""

import importlib
import os
import pkgutil
import subprocess
import sys

import numpy as np
import pytest

import dec.calculus
import dec.topology
from dec.calculus.complex import Complex, grid
from dec.calculus.exact import exact_integral
from dec.topology import graphs, modular
from dec.topology.compiled import SMALL, compiled
from dec.topology.cut_pairs import cut_classes

N = 40


def big_graph():
    """A graph large enough to be compiled, with parallel edges, self-loops and several components."""
    random = np.random.default_rng(0)
    tail, head = random.integers(0, 4000, (2, 6000))
    tail[:50] = head[:50]
    return tail, head, 4000


def forest_of(tail, head, n):
    forest = graphs.spanning_forest(tail, head, n)
    return forest, np.flatnonzero(~forest.contains(len(tail)))


def use_loops():
    tail, head, n = big_graph()
    forest, outside = forest_of(tail, head, n)
    graphs.fundamental_loops(tail, head, forest, outside)


def use_potentials():
    tail, head, n = big_graph()
    graphs.tree_potentials(tail, head, forest_of(tail, head, n)[0], np.arange(len(tail)) * 3 - 7000)


def use_flows():
    tail, head, n = big_graph()
    graphs.tree_flows(tail, head, forest_of(tail, head, n)[0], np.arange(n) * 0.5 - 700)


def use_sums(size):
    K = Complex.from_edges(np.zeros(6000, np.int64), np.ones(6000, np.int64))
    random = np.random.default_rng(1)
    values = random.normal(size=6000) * 10.0 ** random.integers(-320, 300, 6000)
    exact_integral(K.chain(1, random.integers(-size, size, 6000)), K.cochain(1, values))


def use_holes():
    from dec.topology.holes import hole_walks

    K = grid((N, N), periodic=True)
    hole_walks(K.tail, K.head, K.incidences, K.sheets, K.forest, K.boundary_walks())


def use_elimination():
    matrix = np.random.default_rng(0).integers(-9, 10, (75, 75))
    matrix[7] = matrix[3] + matrix[5]
    modular.invertible_part(matrix, modular.prime_below(modular.LARGEST_PRIME))


# every kernel, and something that makes it run on arrays of more than 5,000 entries
KERNELS = {
    "dec.topology.searches.union": lambda: graphs.components(*big_graph()),
    "dec.topology.searches.breadth_first": lambda: graphs.spanning_forest(*big_graph()),
    "dec.topology.searches.low_links": lambda: graphs.bridges(*big_graph()),
    "dec.topology.searches.loop_lengths": use_loops,
    "dec.topology.searches.fill_loops": use_loops,
    "dec.topology.searches.climb": use_potentials,
    "dec.topology.searches.drain": use_flows,
    "dec.topology.cut_pairs.depth_first": lambda: cut_classes(*big_graph()),
    "dec.topology.cut_pairs.covering": lambda: cut_classes(*big_graph()),
    "dec.topology.surfaces._trace": lambda: grid((2, 3000)).boundary_loops(),
    "dec.topology.reductions._collapse": lambda: grid((12, 12, 12), periodic=True).betti(),
    "dec.topology.reductions._follow": lambda: grid((12, 12, 12), periodic=True).betti(),
    "dec.topology.modular._eliminate": use_elimination,
    "dec.topology.holes._heaviest_forest": use_holes,
    "dec.calculus.sums._add_by_exponent": lambda: use_sums(9),
    "dec.calculus.sums._add_widely": lambda: use_sums(2**50),
}


def all_kernels():
    names = set()
    for package in (dec.topology, dec.calculus):
        for info in pkgutil.iter_modules(package.__path__, package.__name__ + "."):
            module = importlib.import_module(info.name)
            names |= {f"{info.name}.{name}" for name, value in vars(module).items() if hasattr(value, "interpreted")}
    return names


# by compiled loops alone, and compared with them
CALLED_BY_OTHERS = {
    "dec.topology.cut_pairs.mark_path", "dec.topology.modular._inverse",
    *(f"dec.topology.reductions._{name}" for name in ("collect", "complete", "copy", "longer", "sign", "take_away")),
}  # fmt: skip


def test_no_compiled_loop_of_these_floors_is_left_out_here():
    assert all_kernels() == set(KERNELS) | CALLED_BY_OTHERS


@pytest.mark.parametrize("name", sorted(KERNELS))
def test_the_interpreted_and_the_compiled_loop_agree_and_leave_the_same_arrays(name, monkeypatch):
    module = importlib.import_module(name.rpartition(".")[0])
    kernel = getattr(module, name.rpartition(".")[2])
    calls = []

    def record(*args):
        calls.append([a.copy() if isinstance(a, np.ndarray) else a for a in args])
        return kernel(*args)

    record.interpreted = kernel.interpreted
    monkeypatch.setattr(module, kernel.__name__, record)
    KERNELS[name]()
    args = max(calls, key=lambda call: sum(a.size for a in call if isinstance(a, np.ndarray)))
    assert sum(a.size for a in args if isinstance(a, np.ndarray)) > SMALL
    one, other = ([a.copy() for a in args] for _ in range(2))
    plain, machine = kernel.interpreted(*one), kernel(*other)
    assert "numba" in sys.modules
    for a, b in zip(as_tuple(plain) + tuple(one), as_tuple(machine) + tuple(other), strict=True):
        assert a.dtype == b.dtype
        assert np.array_equal(a, b)


def as_tuple(result):
    return () if result is None else result if isinstance(result, tuple) else (result,)


def test_a_small_input_is_interpreted_and_a_large_one_compiled():
    ran = []

    def kernel(values):
        ran.append(len(values))  # compiled code could not do this
        return values.sum()

    run = compiled(kernel)
    assert run(np.arange(SMALL)) == SMALL * (SMALL - 1) // 2
    assert ran == [SMALL]
    assert run.interpreted is kernel


def test_a_loop_is_compiled_without_a_cache_where_none_can_be_written(monkeypatch):
    import numba

    asked = []

    def njit(*, cache=False, **_):
        asked.append(cache)
        if cache:
            message = "cannot cache function: no locator available"
            raise RuntimeError(message)
        return lambda kernel: kernel

    monkeypatch.setattr(numba, "njit", njit)
    run = compiled(lambda values: values.max())
    assert run(np.arange(SMALL + 1)) == SMALL
    assert asked == [True, False]


def test_a_damaged_cache_of_machine_code_is_passed_over(tmp_path):
    program = (
        "import numpy as np\nfrom dec.topology.graphs import components\n"
        "print(components(np.arange(9000), np.arange(1, 9001), 9001)[0])"
    )
    environment = {**os.environ, "NUMBA_CACHE_DIR": str(tmp_path)}
    for _ in range(2):
        done = subprocess.run(
            [sys.executable, "-c", program], env=environment, capture_output=True, text=True, check=False, timeout=300
        )
        assert (done.returncode, done.stdout) == (0, "1\n"), done.stderr
        kept = list(tmp_path.rglob("*.nbi"))
        assert kept
        for file in kept:
            file.write_bytes(b"")
