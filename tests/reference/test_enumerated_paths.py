"""The enumeration against a published worked example."""

import numpy as np
import pytest

from tests.reference.enumerated_paths import LIKELIHOOD, START, TRANSITION, enumerate_paths, marginals


def test_the_printed_example_comes_back():
    paths = enumerate_paths(LIKELIHOOD, START, TRANSITION)
    assert max(paths, key=paths.get) == (0, 0, 1)
    assert paths[0, 0, 1] == pytest.approx(0.01512)
    share, total = marginals(paths, 3, 2)
    assert total == pytest.approx(0.03628)
    np.testing.assert_allclose(share.sum(axis=1), 1.0)
