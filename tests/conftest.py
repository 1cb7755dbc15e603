"""Held over all tests: iterations on laws converge within the steps that issue 5 grants them."""

import pytest

MOST_STEPS = 12


@pytest.fixture(autouse=True, scope="session")
def few_steps():
    """Let every case of the whole test set fail that takes more steps (the program itself allows more)."""
    from coldseam.solution import nonlinear

    allowed = nonlinear.MOST_STEPS
    assert allowed >= MOST_STEPS
    nonlinear.MOST_STEPS = MOST_STEPS
    yield
    nonlinear.MOST_STEPS = allowed
