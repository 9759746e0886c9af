"""Floor 0: the exception tree, the unit factors, the order of the findings."""

from __future__ import annotations

import dataclasses
import inspect

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from climarisk import errors, units
from climarisk.findings import Finding, sort_findings

TREE = [e for _, e in inspect.getmembers(errors, inspect.isclass) if issubclass(e, Exception)]


@pytest.mark.parametrize("error", TREE)
def test_every_error_is_ours_and_exits_with_one(error):
    assert issubclass(error, errors.ClimariskError)
    # STYLE 13: 1 is an expected failure, 2 usage, 130 interrupted.
    assert error.exit_code == 1


def test_the_base_is_no_builtin_a_caller_might_swallow():
    assert errors.ClimariskError.__bases__ == (Exception,)


def test_an_input_error_keeps_every_problem():
    error = errors.InputError(p for p in ["one", "two"])
    assert error.problems == ("one", "two")
    assert str(error) == "one\ntwo"
    assert errors.InputError("one").problems == ("one",)


@pytest.mark.parametrize(
    ("factor", "exact"),
    [
        # International yard and pound agreement, 1959: 1 ft = 0.3048 m.
        (units.METRES_PER_FOOT, 0.3048),
        # First International Extraordinary Hydrographic Conference, 1929: 1852 m.
        (units.METRES_PER_NAUTICAL_MILE, 1852.0),
        (units.KELVIN_AT_0C, 273.15),  # SI Brochure, 9th edition, 2.3.1
        (units.MS_PER_KT, 1852.0 / 3600.0),
        (units.FEET_PER_NAUTICAL_MILE, 1852.0 / 0.3048),
    ],
)
def test_factors_are_the_exact_ones(factor, exact):
    assert factor == exact


def test_inches_of_mercury_are_those_of_nist():
    # NIST SP 811 (2008), appendix B.8: inch of mercury, conventional, 3.386 389 E+03 Pa
    # (from memory).
    assert pytest.approx(33.86389, abs=5e-6) == units.HPA_PER_INHG


@pytest.mark.parametrize(
    ("fahrenheit", "celsius"),
    # Ice point, steam point, and the point where both scales agree (definition of the scale).
    [(32.0, 0.0), (212.0, 100.0), (-40.0, -40.0)],
)
def test_fahrenheit_at_the_points_that_define_the_scale(fahrenheit, celsius):
    assert units.fahrenheit_to_celsius(fahrenheit) == celsius


def test_fahrenheit_takes_arrays_and_keeps_nan():
    result = units.fahrenheit_to_celsius(np.array([[50.0, np.nan]]))
    assert result.shape == (1, 2)
    assert result[0, 0] == pytest.approx(10.0, abs=1e-12)
    assert np.isnan(result[0, 1])


def finding(severity="note", subject="field", id="A", check="c", message="m") -> Finding:
    return Finding(severity, subject, id, check, message)


def test_a_finding_has_the_five_keys_of_the_contract():
    # DESIGN 5: {severity, subject, id, check, message}.
    assert list(finding().as_dict()) == ["severity", "subject", "id", "check", "message"]
    assert str(finding("reject", "station", "S", "x", "is off.")) == "reject: station S: is off."


def test_a_finding_cannot_be_changed():
    with pytest.raises(dataclasses.FrozenInstanceError):
        finding().severity = "note"


FINDINGS = st.builds(
    Finding,
    st.sampled_from(["note", "caution", "reject"]),
    st.sampled_from(["station", "field", "aircraft", "study"]),
    st.text(max_size=2),
    st.text(max_size=2),
    st.text(max_size=2),
)


@given(st.lists(FINDINGS, max_size=12), st.randoms(use_true_random=False))
def test_findings_are_worst_first_without_repeats_in_a_stable_order(findings, random):
    ordered = sort_findings(findings)
    assert set(ordered) == set(findings)
    assert len(ordered) == len(set(ordered))
    ranks = [("reject", "caution", "note").index(f.severity) for f in ordered]
    assert ranks == sorted(ranks)
    shuffled = [*findings, *findings]
    random.shuffle(shuffled)
    assert sort_findings(shuffled) == ordered
