"""The one record for every check, and the error tree."""

import pickle
from fractions import Fraction

import pytest

from dec import errors
from dec.findings import Finding


def test_a_finding_is_true_when_it_holds_and_cannot_be_changed():
    held, failed = Finding("a", True), Finding("b", False, 3, 0, (1, 2))
    assert held
    assert not failed
    with pytest.raises(AttributeError):
        failed.holds = True


def test_the_difference_is_exact_and_none_where_nothing_is_compared():
    assert Finding("a", False, left=Fraction(1, 3), right=Fraction(1, 4)).difference == Fraction(1, 12)
    assert Finding("a", True).difference is None


def test_findings_survive_pickling():
    finding = Finding("a", False, Fraction(1, 3), 0, ("A",), Fraction(1, 3), Fraction(0))
    assert pickle.loads(pickle.dumps(finding)) == finding


@pytest.mark.parametrize(
    ("error", "built_in"),
    [
        (errors.InputError, ValueError),
        (errors.TopologyError, ValueError),
        (errors.UnsolvableError, ArithmeticError),
        (errors.AccuracyError, RuntimeError),
        (errors.OutputError, OSError),
    ],
)
def test_every_error_is_also_the_built_in_that_a_caller_would_catch(error, built_in):
    assert issubclass(error, errors.DecError)
    assert issubclass(error, built_in)
    assert str(error("what is wrong")) == "what is wrong"


def test_the_tree_names_every_error():
    assert all(name in errors.__doc__ for name in errors.__all__)


def test_an_accuracy_error_carries_the_partial_result():
    assert errors.AccuracyError("not reached", partial=[1, 2]).partial == [1, 2]
