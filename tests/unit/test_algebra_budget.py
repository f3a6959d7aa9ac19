"""Limits in seconds: they ring, nest, ring again when swallowed, and leave nothing behind."""

import signal
import time

import pytest

from hjsolve.algebra.budget import limit
from hjsolve.errors import OutOfTime


def spin(seconds):
    stop = time.monotonic() + seconds
    while time.monotonic() < stop:
        pass


def test_it_rings_and_is_quiet_afterwards():
    began = time.monotonic()
    with pytest.raises(OutOfTime), limit(0.05):
        spin(5)
    assert time.monotonic() - began < 2
    spin(0.6)
    assert signal.getitimer(signal.ITIMER_REAL) == (0.0, 0.0)


def test_a_swallowed_ring_comes_again():
    rings = 0
    with limit(0.05):
        while rings < 3:
            try:
                spin(5)
            except OutOfTime:
                rings += 1
    assert rings == 3


def test_an_inner_limit_does_not_outlast_the_outer():
    began = time.monotonic()
    with pytest.raises(OutOfTime), limit(0.1), limit(5):
        spin(10)
    assert time.monotonic() - began < 3


def test_the_outer_goes_on_after_the_inner_rang():
    with limit(20):
        with pytest.raises(OutOfTime), limit(0.05):
            spin(5)
        spin(0.6)
    assert signal.getitimer(signal.ITIMER_REAL) == (0.0, 0.0)


def test_many_short_limits_do_no_harm():
    for _ in range(60):
        try:
            with limit(0.002):
                spin(0.004)
        except OutOfTime:
            pass
    spin(0.6)
