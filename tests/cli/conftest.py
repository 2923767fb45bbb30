"""A small network on disk, and a way to run the command line inside the test process."""

from collections.abc import Callable
from pathlib import Path

import pytest

from dec.cli import main

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str]) -> Run:
    """Run dec with these words; exit code, standard output, standard error."""

    def call(*words: str | Path) -> tuple[int, str, str]:
        try:
            code = main([str(word) for word in words])
        except SystemExit as stop:
            code = int(stop.code or 0)
        captured = capsys.readouterr()
        return code, captured.out, captured.err

    return call


@pytest.fixture
def junction(tmp_path: Path) -> Path:
    """Three meters at one junction: 5.2 in, 3.0 and 2.1 out."""
    (tmp_path / "pipes.csv").write_text("id,from,to,flow,sd\nin,S,J,5.2,0.1\na,J,T,3.0,0.1\nb,J,U,2.1,0.1\n")
    (tmp_path / "nodes.csv").write_text("id,open,supply\nS,yes,\nJ,,0\nT,x,\nU,1,\n")
    return tmp_path
