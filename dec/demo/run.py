"""Run the main job on the built-in example and compare what is found with what was planted."""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from importlib.resources import as_file, files
from pathlib import Path
from typing import Any

import numpy as np
from rich.console import RenderableType
from rich.text import Text

from dec.audit.condition import Condition, check
from dec.audit.output import result_bytes
from dec.audit.questions import balance
from dec.audit.record import Audit
from dec.calculus.complex import Complex
from dec.calculus.dataset import Dataset
from dec.errors import OutputError
from dec.files.read import read
from dec.files.writing import write_atomically
from dec.report.terminal import audit_view, check_view

__all__ = ["Outcome", "run"]

_FILES = ("pipes.csv", "nodes.csv", "bracket.vtu")
# The meter that stands the wrong way round, and the facet that is turned for the last part.
_METER, _FACET = "P21", 700
_TURNED = "neighbouring faces are turned alike"


@dataclass(frozen=True)
class Outcome:
    """What the example gave.

    Attributes
    ----------
    town : Audit
        Balance of the water meters.
    bracket : Condition
        Soundness of the mesh as it came.
    air : Audit
        Balance of the air stream through the bracket's skin.
    turned : Condition
        Soundness with one facet turned round.
    """

    town: Audit
    bracket: Condition
    air: Audit
    turned: Condition

    @property
    def found(self) -> dict[str, bool]:
        """Each thing that must come out, and whether it did."""
        first = self.town.suspects[0] if self.town.suspects else None
        failed = [f.name for f in self.turned.findings if not f.holds]
        return {
            f"the town's meters do not balance, and meter {_METER} is the first suspect, hinted as reversed":
                self.town.holds is False and first is not None and first.id == _METER and bool(first.hint),
            "the bracket is sound as it came": self.bracket.holds,
            "the air stream through its skin balances": self.air.holds is True,
            f"with facet {_FACET} turned round, that facet and nothing else is found":
                failed == [_TURNED] and self.turned.data.complex.turning_proposal().tolist() == [_FACET],
        }  # fmt: skip

    @property
    def as_planted(self) -> bool:
        """Whether exactly the planted faults were found."""
        return all(self.found.values())

    def to_dict(self) -> dict[str, Any]:
        """All four results as plain Python objects."""
        return {
            "schema": "dec.demo/1", "as_planted": self.as_planted, "found": self.found, "town": self.town.to_dict(),
            "bracket": self.bracket.to_dict(), "air": self.air.to_dict(), "turned": self.turned.to_dict(),
        }  # fmt: skip

    def view(self) -> Iterator[RenderableType]:
        """The example for reading at a terminal."""
        yield Text("1  The water meters of a made-up town, one hour: does what flows in flow out again?\n", "bold")
        yield from audit_view(self.town.to_dict())
        yield Text("\n2  A machined bracket with two holes, as a mesh: is it sound?\n", "bold")
        yield from check_view(self.bracket.to_dict())
        yield Text("\n3  Air streams past the bracket: is the flow through its closed skin zero?\n", "bold")
        yield from audit_view(self.air.to_dict())
        yield Text(f"\n4  The same bracket with facet {_FACET} turned round: is it found?\n", "bold")
        yield from check_view(self.turned.to_dict())
        yield Text("\nFound as planted?", "bold")
        for statement, came_out in self.found.items():
            yield Text(f"  {'yes' if came_out else 'NO '}  {statement}")


def run(directory: str | None = None, *, force: bool = False) -> Outcome:
    """Audit the built-in example.

    Parameters
    ----------
    directory : str or None
        A folder to write the example's files and results to; made if it is not there.
    force : bool
        Whether files of the same names may be replaced.

    Returns
    -------
    Outcome

    Raises
    ------
    OutputError
        If a file is in the way or cannot be written; checked before anything is written.
    """
    if directory is not None:
        _refuse_taken(Path(directory), force=force)
    with as_file(files("dec.demo") / "data") as data:
        net = read(data / "pipes.csv", data / "nodes.csv")
        part = read(data / "bracket.vtu")
        contents = {name: (data / name).read_bytes() for name in _FILES}
    town = balance(net, "flow", "sd", "open", "demand", unit="L/s")
    air = balance(part, field="air", unit="mm2 m/s")
    outcome = Outcome(town, check(part), air, check(_with_turned_facet(part)))
    if directory is not None:
        _write(Path(directory), contents, outcome, force=force)
    return outcome


def _with_turned_facet(part: Dataset) -> Dataset:
    assert part.complex.faces is not None
    faces = np.array(part.complex.faces.flat).reshape(-1, 3)
    faces[_FACET] = faces[_FACET, ::-1]
    turned = Complex.from_faces(faces, part.complex.counts[0], points=part.complex.points)
    return Dataset(turned, inputs=part.inputs, notes=(f"facet {_FACET} turned round for this example",))


def _results(outcome: Outcome) -> Mapping[str, bytes]:
    return {
        "adjusted.csv": result_bytes(outcome.town, "adjusted.csv"),
        "town.json": (outcome.town.to_json(indent=1) + "\n").encode(),
        "bracket.json": (outcome.air.to_json(indent=1) + "\n").encode(),
    }


def _refuse_taken(directory: Path, *, force: bool) -> None:
    if directory.exists() and not directory.is_dir():
        message = f"{directory}: must be a folder, it is a file"
        raise OutputError(message)
    taken = [name for name in (*_FILES, "adjusted.csv", "town.json", "bracket.json") if (directory / name).exists()]
    if taken and not force:
        message = f"{directory / taken[0]} exists; use --force to replace it, or name an empty folder"
        raise OutputError(message)


def _write(directory: Path, contents: Mapping[str, bytes], outcome: Outcome, *, force: bool) -> None:
    try:
        directory.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        message = f"{directory}: the folder cannot be made ({error.strerror})"
        raise OutputError(message) from None
    for name, data in _all(contents, _results(outcome)):
        write_atomically(directory / name, data, force=force)


def _all(*groups: Mapping[str, bytes]) -> Iterable[tuple[str, bytes]]:
    for group in groups:
        yield from group.items()
