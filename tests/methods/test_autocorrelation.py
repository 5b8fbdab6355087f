"""Autocorrelation and effective size of an autoregressive stream, whose true values are known."""

import numpy as np
import pytest
from scipy.signal import lfilter

from pbm.methods.autocorrelation import autocorrelation, effective_size


@pytest.mark.parametrize("r", [0.0, 0.3, 0.7])
def test_an_autoregressive_stream_has_powers_of_r_and_the_effective_size_of_the_formula(r: float):
    z = lfilter([1.0], [1.0, -r], np.random.default_rng(3).standard_normal(200_000))
    found = autocorrelation(z)
    assert found[:4] == pytest.approx([r, r**2, r**3, r**4], abs=0.01)
    assert effective_size(len(z), found) == pytest.approx(len(z) * (1 - r) / (1 + r), rel=0.08)


def test_values_that_do_not_vary_have_none():
    assert len(autocorrelation(np.full(50, 2.0))) == 0
    assert effective_size(50, np.zeros(0)) == 50


def test_few_values_have_as_many_lags_as_there_are():
    assert len(autocorrelation(np.array([1.0, 2.0, 4.0]))) == 2
    assert len(autocorrelation(np.array([1.0]))) == 0
