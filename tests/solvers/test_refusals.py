"""What the engine refuses in one sentence: numbers out of range, exponents, tolerances, and meshes for networks."""

import numpy as np
import pytest

from dec.calculus.complex import Complex, grid
from dec.calculus.dataset import Dataset, Input
from dec.errors import InputError
from dec.solvers.network import solve_network
from dec.solvers.poisson import solve_poisson


@pytest.mark.parametrize(
    ("asked", "found"),
    [
        ({"source": [1e150, 0, -1e150], "exponent": 1.85}, r"sources up to 1e\+150, .* an exponent of 1.85"),
        ({"source": [1e200, 0, -1e200]}, r"sources up to 1e\+200"),
        ({"source": [1.1e308, 0, -1.1e308]}, r"sources up to 1.1e\+308"),
        ({"source": [0, 0, 0], "fixed": {0: 1.5e308, 2: -1.5e308}}, r"fixed potentials up to 1.5e\+308"),
        ({"source": [0, 0, 0], "fixed": {0: 1e200, 2: 0}, "conductance": [1e200] * 3}, r"from 1e\+200 to 1e\+200"),
    ],
)
def test_numbers_whose_products_leave_the_range_of_float64_are_refused_in_one_sentence(asked, found):
    K = Complex.from_edges([0, 1, 0], [1, 2, 2])
    with pytest.raises(InputError, match=rf"^float64 .* must hold .*{found}.* larger unit$"):
        solve_poisson(K, **asked)


@pytest.mark.parametrize("n_edges", [0, 1])
@pytest.mark.parametrize("exponent", [0, 0.99, 2.5, np.nan])
def test_an_exponent_outside_one_to_two_is_refused_even_where_no_edge_uses_it(exponent, n_edges):
    K = Complex.from_edges([0] * n_edges, [1] * n_edges, 2)
    with pytest.raises(InputError, match=rf"exponent must be 1 to 2 .* got {float(exponent)}{' at edge 0' * n_edges}$"):
        solve_poisson(K, [0, 0], exponent=exponent)


@pytest.mark.parametrize("rtol", [0, 0.0, 1, -1e-8, np.nan, np.inf, True, "1e-8", None])
def test_a_tolerance_that_is_no_number_between_zero_and_one_is_refused(rtol):
    with pytest.raises(InputError, match=r"rtol must be a number between 0 and 1, got"):
        solve_poisson(Complex.from_edges([0, 1], [1, 2]), [1, 0, -1], rtol=rtol)


def test_columns_are_asked_of_a_network_and_a_mesh_is_told_what_solve_takes():
    part = Dataset(grid((3, 3)), inputs=(Input("plate.vtu", "", 0),))
    with pytest.raises(InputError, match=r"solve takes an edge table .* and a node table .* plate.vtu is a mesh"):
        solve_network(part, "load")
