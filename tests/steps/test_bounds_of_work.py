"""What would not end in reasonable time is refused at once."""

import pytest

from dec import steps
from dec.errors import InputError


@pytest.mark.parametrize(
    "ask",
    [
        lambda: steps.falling_power(3, 10**9), lambda: steps.falling_power(3, -(10**9)),
        lambda: steps.falling_power(2.5, 10**7), lambda: steps.growth(1, 10**10), lambda: steps.cosine(1, 10**9),
        lambda: steps.extend([1, 4, 9, 16], after=10**8), lambda: steps.extend([1, 4, 9, 16], before=10**8),
    ],
)  # fmt: skip
def test_endless_work_is_refused(ask):
    with pytest.raises(InputError, match="at most 100,000"):
        ask()
