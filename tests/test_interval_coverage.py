"""Intervals by resampling whole years against a synthetic climate whose share is known.

The climate: one value a day for a month of 30 days, first-order autoregressive within the year
(r = 0.7, standard deviation 3 K), on a mean that varies between years by 1 K.  The standard
deviation of a single day about the long-term mean is the root of 3**2 + 1**2.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from climarisk import risk

R, WITHIN_K, BETWEEN_K, DAYS = 0.7, 3.0, 1.0, 30
REPETITIONS = 4000


def hot_days(n_years, share, seed):
    """Return days above the limit in each repetition and year; the limit has the true share."""
    draw = np.random.default_rng(seed)
    day = draw.normal(size=(REPETITIONS, n_years, DAYS))
    for d in range(1, DAYS):
        day[..., d] = R * day[..., d - 1] + np.sqrt(1 - R * R) * day[..., d]
    value = WITHIN_K * day + BETWEEN_K * draw.normal(size=(REPETITIONS, n_years, 1))
    return (value > np.hypot(WITHIN_K, BETWEEN_K) * stats.norm.isf(share)).sum(axis=2)


def coverage(n_years, share, confidence=0.90):
    """Return the share of repetitions whose interval holds the true share."""
    hot = hot_days(n_years, share, seed=n_years)
    low, high = risk._intervals(
        hot, np.full(hot.shape, DAYS), np.full(REPETITIONS, n_years), confidence
    )
    return float(np.mean((low <= share) & (share <= high)))


def test_synthetic_climate_has_the_share_it_is_said_to_have():
    """A mean over 60 000 year-months, whose standard error is below 0.0005."""
    assert hot_days(30, 0.10, seed=1).mean() / DAYS == pytest.approx(0.10, abs=0.002)


@pytest.mark.parametrize("share", [0.05, 0.10, 0.20, 0.50])
def test_nominal_90_percent_interval_covers_85_percent_at_fifteen_years(share):
    assert coverage(15, share) >= 0.85


@pytest.mark.parametrize("n_years", [5, 8, 10, 20, 30])
def test_nominal_90_percent_interval_of_a_tenth_covers_85_percent_at_other_lengths(n_years):
    assert coverage(n_years, 0.10) >= 0.85


def test_interval_is_not_needlessly_wide():
    """At most the nominal share and three standard errors of the repetitions."""
    assert coverage(15, 0.50) <= 0.90 + 3 * np.sqrt(0.9 * 0.1 / REPETITIONS)


@pytest.mark.parametrize(("n_years", "confidence"), [(5, 0.95), (15, 0.90), (40, 0.80)])
def test_expanded_tail_turns_the_normal_interval_into_the_t_interval(n_years, confidence):
    """z(tail) sqrt((n - 1) / n) = t(n - 1): Hesterberg (2014), arXiv 1411.5279."""
    z = stats.norm.isf(risk.expanded_tail(n_years, confidence))
    t = stats.t.isf((1 - confidence) / 2, n_years - 1)
    assert z * np.sqrt((n_years - 1) / n_years) == pytest.approx(t)


def test_expanded_tail_approaches_the_plain_one_with_many_years():
    assert risk.expanded_tail(100_000, 0.90) == pytest.approx(0.05, abs=1e-5)
    tails = [risk.expanded_tail(n, 0.90) for n in (5, 8, 10, 15, 20, 30)]
    assert tails == sorted(tails) and tails[-1] < 0.05
