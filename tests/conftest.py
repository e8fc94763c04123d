"""What holds for every test: nobody touches the global random state; records computed once."""

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


@pytest.fixture(scope="session")
def nasty_record():
    from support.memos import nasty_record as build  # noqa: PLC0415 - only where it is asked for

    return build()


@pytest.fixture(scope="session")
def small_record():
    from support.memos import small_record as build  # noqa: PLC0415 - only where it is asked for

    return build()
