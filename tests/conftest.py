"""What holds for every test: nobody touches the global random state."""

import random

import numpy as np
import pytest


@pytest.fixture(autouse=True)
def _global_random_state_is_left_alone():
    before_numpy = np.random.get_state()[1].tobytes()  # noqa: NPY002
    before = random.getstate()
    yield
    assert np.random.get_state()[1].tobytes() == before_numpy  # noqa: NPY002
    assert random.getstate() == before
