"""Several errors at once: what is found is what least squares gives with them, and no pair or triple does better."""

from itertools import combinations

import numpy as np
import pandas as pd
import pytest

from dec.audit.adjusted.evidence import Evidence
from dec.audit.questions import balance, loops
from dec.audit.record import Audit
from dec.audit.tested.several_errors import several_errors
from dec.audit.tested.single_errors import CRITICAL, single_errors
from dec.calculus.dataset import Dataset

from .dense_reference import is_parallel
from .measured_networks import Measured, measured, nearly_right, possible_errors, well_checked, with_readings


class Dense:
    """M and M y as float matrices between all errors that readings can contradict, one of each class first."""

    def __init__(self, net: Measured, audit: Audit) -> None:
        exact = net.exact
        errors = possible_errors(net, audit)
        self.names = list(errors)
        seen = np.array([[float(x) for x in exact.seen(h)] for h in errors.values()])
        self.rows = seen
        spread = np.array([[float(x) for x in row] for row in exact.spread])
        self.weight = seen @ spread @ seen.T
        self.score = seen @ np.array([float(x) for x in exact.weighed])
        self.kinds = []
        rows = [exact.seen(h) for h in errors.values()]
        for k, row in enumerate(rows):
            if not any(is_parallel(row, rows[j]) for j in self.kinds):
                self.kinds.append(k)

    def fitted(self, chosen: list[int]) -> tuple[np.ndarray, np.ndarray]:
        """Estimates beside each other and their covariance; by least squares, so that dependent errors do no harm."""
        spread = np.linalg.pinv(self.weight[np.ix_(chosen, chosen)], rcond=1e-10, hermitian=True)
        return spread @ self.score[chosen], spread

    def explained(self, chosen: list[int]) -> float:
        return float(self.score[chosen] @ self.fitted(chosen)[0])

    def same_span(self, one: list[int], other: list[int]) -> bool:
        sizes = {np.linalg.matrix_rank(self.rows[k], tol=1e-9) for k in (one, other, [*one, *other])}
        return len(sizes) == 1

    def alike_beside(self, chosen: list[int], k: int) -> set[tuple[str, str]]:
        """Errors that do as well in the place of one of those chosen: all of them together span no more."""
        across = self.rows[chosen]
        size = np.linalg.matrix_rank(across, tol=1e-9)
        rest = self.rows[[c for c in chosen if c != k]]
        return {
            name for j, name in enumerate(self.names)
            if j != k and np.linalg.matrix_rank(np.vstack([across, self.rows[j]]), tol=1e-9) == size
            and np.linalg.matrix_rank(np.vstack([rest, self.rows[j]]), tol=1e-9) == size
        }  # fmt: skip

    def loudest_beside(self, chosen: list[int]) -> float:
        estimate, spread = self.fitted(chosen)
        across = self.weight[:, chosen]
        weight = np.diag(self.weight) - np.einsum("ij,jk,ik->i", across, spread, across)
        free = weight > 1e-8 * np.diag(self.weight)
        score = self.score - across @ estimate
        return float(np.max(np.abs(score[free]) / np.sqrt(weight[free]), initial=0.0))


def compare(net: Measured) -> tuple[Dense, list[int]] | None:
    """Return the dense figures and what was found, or None where nothing stood out."""
    audit = net.audit()
    said = audit.extra["errors"]
    assert (said is None) == (not audit.suspects)
    if said is None:
        return None
    dense, critical = Dense(net, audit), audit.asked["critical"]
    chosen = [dense.names.index((row["kind"], row["id"])) for row in said["found"]]
    estimate, spread = dense.fitted(chosen)
    size = np.sqrt(np.diag(spread))
    for row, found, sd in zip(said["found"], estimate, size, strict=True):
        wanted = found if row["kind"] == "vertex" else row["value"] - found
        assert row["estimate"] == pytest.approx(wanted, rel=1e-7, abs=1e-7)
        assert row["sd"] == pytest.approx(sd, rel=1e-7)
        assert row["statistic"] == pytest.approx(abs(found) / sd, rel=1e-7)
        assert row["statistic"] > critical
    order = [row["statistic"] for row in said["found"]]
    assert order == sorted(order, reverse=True)
    assert said["dof"] == audit.dof - len(chosen)
    left = audit.chi_square - dense.explained(chosen)
    assert said["chi_square"] == pytest.approx(left, rel=1e-7, abs=1e-9 * (1 + audit.chi_square))
    if said["dof"] == 0:
        assert (said["limit"], said["holds"]) == (None, None)
    else:
        assert said["holds"] == (said["chi_square"] <= said["limit"])
    if said["why_stopped"] == "no further error stands out":
        assert dense.loudest_beside(chosen) <= critical * (1 + 1e-9)
    edges = [row["id"] for row in said["found"] if row["kind"] == "edge"]
    alike = [[(other["kind"], other["id"]) for other in row["inseparable_from"]] for row in said["found"]]
    assert [set(names) for names in alike] == [dense.alike_beside(chosen, k) for k in chosen]
    if (
        len(edges) == len(chosen) and "common" not in net.arguments
    ):  # as large an error as you like is as good as no reading
        without = audit.what_if(left_out=edges)
        assert without.dof == said["dof"]
        assert without.chi_square == pytest.approx(said["chi_square"], rel=1e-7, abs=1e-9 * (1 + audit.chi_square))
        follows = without.edges.set_index("id")["adjusted"]
        for row in said["found"]:
            assert follows[row["id"]] == pytest.approx(row["estimate"], rel=1e-7, abs=1e-7)
    return dense, chosen


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("size", ["", "3"])
def test_errors_found_are_those_of_least_squares_beside_each_other(law: str, size: str):
    found = [compare(measured(law, seed, size)) for seed in range(1000, 1030)]
    assert sum(each is not None for each in found) > 10


@pytest.mark.parametrize("law", ["balance", "loop"])
@pytest.mark.parametrize("n_wrong", [1, 2, 3])
def test_planted_errors_are_found_and_no_other_set_of_that_size_explains_more(law: str, n_wrong: int):
    """Errors of 20 to 60 with an sd of 0.25 to 1; sets are compared by what they explain, all of them tried.

    Of triples another set may happen to explain the noise better than the planted one, or two alone nearly all.
    """
    tried, best, found_them = 0, 0, 0
    for seed in range(40):
        net = well_checked(law, seed)
        rng = np.random.default_rng(seed)
        reading = nearly_right(net, rng, 0.05)
        checked = [e for e in reading if net.exact.standing(e) == "checked"]
        wrong = rng.choice(checked, n_wrong, replace=False)
        for e in wrong:
            reading[e] += rng.choice([-1, 1]) * rng.uniform(20, 60)
        found = compare(with_readings(net, reading))
        assert found is not None
        if net.exact.dof <= n_wrong:
            continue
        dense, chosen = found
        planted = [dense.names.index(("edge", f"e{e}")) for e in wrong]
        tried += 1
        found_them += dense.same_span(chosen, planted)
        if len(chosen) == n_wrong:
            sets = [list(group) for group in combinations(dense.kinds, n_wrong)]
            best += dense.explained(chosen) >= max(map(dense.explained, sets)) * (1 - 1e-9)
        elif len(chosen) < n_wrong:
            best += dense.loudest_beside(chosen) <= CRITICAL
    assert tried >= 38
    assert best == tried
    assert found_them >= (tried if n_wrong < 3 else 0.85 * tried)


def grid(errors: dict[str, float], size: int = 5) -> tuple[Dataset, list[str]]:
    """Differences of heights 2 i + 3 j on a square grid."""
    rows = []
    for i in range(size):
        for j in range(size):
            for way, a, b in (("d", i + 1, j), ("r", i, j + 1)):
                if a < size and b < size:
                    name = f"{way}{i}{j}"
                    rows.append((name, f"{i}{j}", f"{a}{b}", 2.0 * (a - i) + 3.0 * (b - j) + errors.get(name, 0.0)))
    frame = pd.DataFrame(rows, columns=["id", "from", "to", "y"])
    return Dataset.from_frames(frame), frame["id"].tolist()


def compare_pair(size: int, errors: dict[str, float]) -> bool:
    """Two errors explain all, and the planted ones are in their span; return whether another edge was louder."""
    net, names = grid(errors, size)
    audit = loops(net, "y", sd=0.1)
    said = audit.extra["errors"]
    found = [row["id"] for row in said["found"]]
    assert len(found) == 2
    assert said["chi_square"] == pytest.approx(0.0, abs=1e-9)
    assert said["holds"] is True
    ends = net.complex
    design = np.zeros((len(names), ends.counts[0]))
    design[np.arange(len(names)), ends.tail] = -1.0
    design[np.arange(len(names)), ends.head] = 1.0
    seen = np.eye(len(names)) - design @ np.linalg.pinv(design)
    together = [names.index(name) for name in {*errors, *found}]
    assert np.linalg.matrix_rank(seen[:, together], tol=1e-9) == 2
    for row in said["found"]:
        if row["id"] in errors:
            continue
        assert set(errors) & {other["id"] for other in row["inseparable_from"]}
    if set(found) == set(errors):
        assert {row["id"]: row["value"] - row["estimate"] for row in said["found"]} == pytest.approx(errors, abs=1e-9)
    return audit.suspects[0].id not in errors


@pytest.mark.parametrize("sign", [1, -1])
def test_every_pair_on_a_grid_is_found_also_where_another_edge_is_louder_than_both(sign: int):
    """A pair that lies in one small loop may look like a third error at first, which is dropped again."""
    _, names = grid({}, 4)
    own = loops(grid({}, 4)[0], "y", sd=0.1).edges.set_index("id")["class"]
    masked = sum(
        compare_pair(4, {one: 50.0, other: sign * 35.0})
        for one, other in combinations(names, 2)
        if own[one] != own[other]
    )
    assert masked > 0


def test_the_search_stops_where_no_check_is_left():
    net = Dataset.from_frames(pd.DataFrame({"from": ["A", "A"], "to": ["B", "B"], "y": [1.0, 2.0]}))
    said = loops(net, "y", sd=0.1).extra["errors"]
    assert said["why_stopped"] == "no check is left"
    assert (len(said["found"]), said["dof"], said["limit"], said["holds"]) == (1, 0, None, None)
    assert said["found"][0]["inseparable_from"] == [{"kind": "edge", "id": "2"}]


def test_the_search_stops_at_ten():
    _, names = grid({}, 9)
    inside = [name for name in names if name[0] == "r" and 0 < int(name[1]) < 8 and int(name[2]) % 2][:14]
    net, _ = grid({name: 5.0 + k for k, name in enumerate(inside)}, 9)
    said = loops(net, "y", sd=0.1).extra["errors"]
    assert said["why_stopped"] == "10 errors are the most that are looked for"
    assert len(said["found"]) == 10
    assert said["holds"] is False


def test_the_search_stops_where_nothing_stands_out_any_more():
    net, _ = grid({"r22": 5.0})
    said = loops(net, "y", sd=0.1).extra["errors"]
    assert said["why_stopped"] == "no further error stands out"
    assert [row["id"] for row in said["found"]] == ["r22"]
    assert loops(grid({})[0], "y", sd=0.1).extra["errors"] is None


def test_an_error_that_two_others_together_explain_is_dropped():
    """Thrice apart: 0.7 (a + b) and a little is louder than a or b alone, and nothing once both are taken."""
    block = np.array([[1.0, 0, 0], [0, 1, 0], [0.7, 0.7, 0.1]])
    seen = np.kron(np.eye(3), block)
    misses = np.tile([50.0, 35.0, 0.0], 3)
    dense, score = seen @ seen.T, seen @ misses
    evidence = Evidence(
        9, score, np.diag(dense), lambda k: dense[:, k], lambda h: dense @ h, np.ones(9, dtype=bool), np.ones(9)
    )
    single = single_errors(evidence)
    assert np.argmax(single.statistic) % 3 == 2
    found = several_errors(evidence, single, float(misses @ misses), 9, 0.05, CRITICAL)
    assert sorted(found.error.tolist()) == [0, 1, 3, 4, 6, 7]
    assert found.estimate.tolist() == pytest.approx([50.0] * 3 + [35.0] * 3)
    assert (found.chi_square, found.dof) == (pytest.approx(0.0, abs=1e-9), 3)
    assert found.why_stopped == "no further error stands out"


def test_checks_among_several_readings_of_one_edge_are_left_as_they_are():
    """Two readings of line a, 0.4 apart with an sd of 0.1, give 8 of chi-square; line c is 5 out."""
    lines = pd.DataFrame({"id": list("abcd"), "from": list("PPPP"), "to": list("QQQQ")})
    table = pd.DataFrame({"edge": list("aabcd"), "y": [1.2, 0.8, 1.0, 6.0, 1.0]})
    audit = loops(Dataset.from_frames(lines), "y", sd=0.1, readings=table)
    said = audit.extra["errors"]
    assert [row["id"] for row in said["found"]] == ["c"]
    assert (audit.dof, said["dof"]) == (4, 3)
    assert said["chi_square"] == pytest.approx(8.0)
    assert said["holds"] is False
    assert audit.what_if(left_out="c").chi_square == pytest.approx(8.0)


def test_a_leak_and_a_wrong_meter_elsewhere_are_told_apart():
    """Two streets between source and sink, three rungs; a leak of 2 at B1 and a meter 5 too high at the far end."""
    ends = [("S", "A1"), ("S", "B1"), ("A1", "A2"), ("B1", "B2"), ("A2", "A3"), ("B2", "B3"), ("A3", "T"), ("B3", "T")]
    ends += [("A1", "B1"), ("A2", "B2"), ("A3", "B3")]
    flow = np.array([10.0, 10, 9, 11, 8, 12, 7, 13, 1, 1, 1])
    flow[[3, 5, 7]] -= 2.0
    flow[6] += 5.0
    frame = pd.DataFrame(ends, columns=["from", "to"]).assign(y=flow, id=[f"{a}-{b}" for a, b in ends])
    said = balance(Dataset.from_frames(frame), "y", sd=0.1, open=["S", "T"]).extra["errors"]
    found = {(row["kind"], row["id"]): row["estimate"] for row in said["found"]}
    leak = found.pop(("vertex", "B1"), None) or 10.0 - found.pop(("edge", "S-B1"))
    assert leak == pytest.approx(2.0)
    assert found == {("edge", "A3-T"): pytest.approx(7.0)}
