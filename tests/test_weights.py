"""The weight that holds: against plain loops over `margins`, worked examples and laws."""

from __future__ import annotations

import csv
import re
from calendar import monthrange
from dataclasses import replace
from fractions import Fraction
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from study_maker import make_study

from climarisk.aircraft import AircraftProfile, PerformanceTable, ScaledFigures
from climarisk.atmosphere import density_altitude_ft, isa_pressure_hpa
from climarisk.clock import hour_grid, local_clock
from climarisk.fields import SURFACES, Field, RunwayDirection
from climarisk.largest_mass import largest_mass
from climarisk.performance import CHECKS, Margins, TableAir, density_ratio, margins
from climarisk.region import region_of
from climarisk.reporting import lighter_gaps
from climarisk.risk import RESAMPLES, Hours, expanded_tail, level_weights, risk_tables, year_weights
from climarisk.scene import scene_of, scored
from climarisk.seasons import Season
from climarisk.study import read_study
from climarisk.units import METRES_PER_FOOT
from climarisk.weather import load_weather
from climarisk.weights import (
    MassHours,
    holding_mass,
    mass_levels,
    weighed,
    weight_tables,
)

with (Path(__file__).parent / "reference" / "performance_check_values.csv").open(
    encoding="utf-8", newline=""
) as stream:
    PUBLISHED = {row["id"]: row for row in csv.DictReader(stream)}

#: Checks of each operation, as rows of `Margins.checks`.
ROWS = {"both": [0, 1, 2, 3, 4, 5, 6], "takeoff": [0, 1, 3, 4, 5, 6], "landing": [2, 5, 6]}


# ---- makers ----------------------------------------------------------------------------------


def air(pressure_altitude_ft, temperature_c):
    """Return dry air at pressure altitudes and temperatures, as the tables and limits need it."""
    pa, t = np.broadcast_arrays(
        np.atleast_1d(pressure_altitude_ft).astype(float), np.asarray(temperature_c, float)
    )
    pressure, dry = isa_pressure_hpa(pa * METRES_PER_FOOT), np.zeros(pa.shape)
    return TableAir(
        pa, t, t, density_altitude_ft(pressure, t, dry), density_ratio(pressure, t, dry)
    )


def direction(length=1000.0, **changes):
    way = RunwayDirection(
        "09", 90.0, length, length, length, length, 0.0, "paved", takeoff=True, landing=True
    )
    return replace(way, **changes)


def strip(*ways):
    return Field("F", "Field", 46.5, 7.5, 500.0, "Etc/GMT", (), ways)


def flat(mass_kg, speed_kt=None, **values):
    """Return a table of one row and one column, taken in all air colder and lower than that."""
    grids = {name: np.array([[value]], float) for name, value in values.items()}
    axes = np.array([20_000.0]), np.array([60.0])
    return PerformanceTable(mass_kg, *axes, grids, speed_kt)


def flat_takeoff(mass_kg, roll, to_50ft):
    return flat(mass_kg, ground_roll_m=roll, distance_50ft_m=to_50ft)


SIMPLE = AircraftProfile(
    "a", "Invented", "invented", "natural", True, 1200.0, 1000.0, 600.0,
    takeoff=(flat_takeoff(800, 300, 500), flat_takeoff(1000, 400, 600)),
    landing=(flat(800, distance_50ft_m=450),),
)  # fmt: skip
STILL = air(0.0, 15.0)


def mass_of(profile, field, operation="both", place=STILL):
    return largest_mass(profile, field, place, operation)[0]


# ---- brute force: plain loops over margins ---------------------------------------------------


def random_tables(draw, quantities, monotone, blanks, same_axes):
    """Return one to three tables whose values rise (fall, if of a rate) with the axes and mass."""
    masses = np.sort(draw.choice(np.arange(700, 1160, 20), draw.integers(1, 4), replace=False))
    tables = []
    for mass in masses:
        pa = np.array([0.0, 3000.0, 7000.0]) + (0 if same_axes else draw.integers(0, 500))
        t = np.array([0.0, 15.0, 35.0]) + (0 if same_axes else draw.integers(0, 3))
        heavier = (mass / 900.0) ** 2 if monotone else draw.uniform(0.8, 1.3)
        values = {}
        for name, start in quantities.items():
            growth = 1 + pa[:, None] / 9000 + (t[None, :] - 10) / 80
            values[name] = start / heavier / growth if name == "rate_ft_min" else start * growth
            values[name] *= heavier if name != "rate_ft_min" else 1.0
            if blanks:
                values[name][draw.random(values[name].shape) < 0.1] = np.nan
        tables.append(
            PerformanceTable(float(mass), pa, t, values, 70.0 if "rate_ft_min" in values else None)
        )
    return tuple(tables)


def random_case(seed):
    """Return an aircraft, a field, air, and whether lighter holds wherever heavier does."""
    draw = np.random.default_rng(seed)
    monotone, blanks, same_axes = draw.random() < 0.7, draw.random() < 0.3, draw.random() < 0.7
    kind = {"monotone": monotone, "blanks": blanks, "same_axes": same_axes}
    figures = ScaledFigures(
        900.0, 290.0 if draw.random() < 0.7 else None, 450.0, 480.0, 900.0, 14_000.0, 72.0
    )
    maximum_kg = float(draw.choice([680.0, 1000.0, 1075.0, 1200.0]))
    made = {
        "takeoff": random_tables(draw, {"ground_roll_m": 300, "distance_50ft_m": 500}, **kind),
        "landing": random_tables(draw, {"distance_50ft_m": 450}, **kind),
        "climb": random_tables(draw, {"rate_ft_min": 800}, **kind),
    }
    tables = {name: value if draw.random() < 0.75 else () for name, value in made.items()}
    profile = replace(
        SIMPLE,
        maximum_kg=maximum_kg,
        empty_kg=min(float(draw.choice([600.0, 810.0])), maximum_kg - 80.0),
        **tables,
        scaled=figures,
        takeoff_factor=float(draw.choice([1.0, 1.25])),
        landing_factor=float(draw.choice([1.0, 1.43])),
        climb_rate_ft_min=float(draw.choice([300.0, 500.0])) if draw.random() < 0.5 else None,
        climb_gradient_pct=float(draw.choice([4.0, 6.5])) if draw.random() < 0.5 else None,
        limit_temperature_c=33.0 if draw.random() < 0.3 else None,
        limit_density_altitude_ft=7000.0 if draw.random() < 0.3 else None,
    )
    ways = []
    for _ in range(draw.integers(1, 4)):
        tora = draw.uniform(350, 900)
        ways.append(
            direction(
                tora,
                toda_m=tora * draw.uniform(1.0, 1.3),
                lda_m=draw.uniform(500, 1000),
                slope_pct=float(draw.choice([-2.0, 0.0, 3.0])),
                surface=str(draw.choice(SURFACES[:4])),
            )
        )
    place = air(draw.uniform(-500, 7800, 12), draw.uniform(-10, 40, 12))
    return profile, strip(*ways), place, monotone and not blanks and same_axes


def short_at(profile, field, place, mass_kg, operation):
    """Return which hours fall short at one mass, from the margins themselves."""
    found = margins(replace(profile, planning_kg=mass_kg), field, place)
    short = (found.checks[ROWS[operation]] < 0).any(axis=0)
    if operation == "both":
        np.testing.assert_array_equal(short, found.shortfall)
    return short


def one_hour(place, i):
    parts = ("pressure_altitude_ft", "table_temperature_c", "temperature_c")
    parts += ("density_altitude_ft", "density_ratio")
    return TableAir(*(getattr(place, part)[i : i + 1] for part in parts))


def scanned_masses(profile):
    """Return masses up to the maximum: every tabulated one, and a step of 7 kg."""
    tabulated = [t.mass_kg for op in ("takeoff", "landing", "climb") for t in getattr(profile, op)]
    marks = {*tabulated, profile.scaled.mass_kg, profile.maximum_kg, profile.empty_kg}
    marks |= set(np.arange(profile.empty_kg, profile.maximum_kg, 7.0))
    return sorted(m for m in marks if profile.empty_kg <= m <= profile.maximum_kg)


def brute_force(profile, field, place, operation):
    """Return the largest mass that holds, hour by hour, by scanning and bisection."""
    masses = scanned_masses(profile)
    short = np.array([short_at(profile, field, place, m, operation) for m in masses])
    answer = []
    for i in range(short.shape[1]):
        held = [k for k in range(len(masses)) if not short[k, i]]
        if not held:
            answer.append(-np.inf)
            continue
        low, hour = masses[held[-1]], one_hour(place, i)
        high = masses[held[-1] + 1] if held[-1] + 1 < len(masses) else low
        while high - low > 1e-7:
            middle = (low + high) / 2
            if short_at(profile, field, hour, middle, operation)[0]:
                high = middle
            else:
                low = middle
        answer.append(low)
    return np.array(answer), np.array(masses), short


@pytest.mark.parametrize("seed", range(45))
def test_largest_mass_is_that_of_a_scan_with_bisection(seed):
    profile, field, place, lighter_holds = random_case(seed)
    operation = ("both", "takeoff", "landing")[seed % 3]
    answer = largest_mass(profile, field, place, operation)
    expected, masses, short = brute_force(profile, field, place, operation)
    np.testing.assert_array_equal(np.isneginf(answer), np.isneginf(expected))
    some = np.isfinite(expected)
    # Bisection to 1e-7 kg.
    np.testing.assert_allclose(answer[some], expected[some], rtol=0, atol=2e-7)
    for i in np.flatnonzero(some):
        assert not short_at(profile, field, one_hour(place, i), answer[i], operation)[0]
    above = masses[:, None] > np.maximum(answer, 0) * (1 + 1e-9)
    assert short[above].all()
    if lighter_holds:
        assert not short[masses[:, None] <= answer].any()


def test_random_cases_reach_every_kind_of_answer():
    seen = set()
    for seed in range(45):
        profile, field, place, lighter_holds = random_case(seed)
        answer = largest_mass(profile, field, place)
        tabulated = {t.mass_kg for op in (profile.takeoff, profile.landing) for t in op}
        seen |= {"never" for m in answer if m == -np.inf}
        seen |= {"maximum" for m in answer if m == profile.maximum_kg}
        seen |= {"between" for m in answer if np.isfinite(m) and m not in tabulated}
        seen |= {f"scaled {op}" for op in ("takeoff", "landing") if not getattr(profile, op)}
        seen |= {"lighter holds" if lighter_holds else "lighter may not hold"}
    assert len(seen) == 7


@settings(max_examples=60, deadline=None)
@given(
    roll=st.lists(st.floats(100, 900), min_size=3, max_size=3),
    extra=st.lists(st.floats(0, 500), min_size=3, max_size=3),
    land=st.lists(st.floats(100, 900), min_size=2, max_size=2),
    tora=st.floats(100, 900),
    stop=st.floats(0, 400),
    lda=st.floats(100, 900),
)
def test_no_rounding_makes_the_returned_mass_fall_short(roll, extra, land, tora, stop, lda):
    # Tables that need not rise with mass: one way through them all.
    profile = replace(
        SIMPLE,
        takeoff=tuple(
            flat_takeoff(m, r, r + e) for m, r, e in zip((700, 850, 1100), roll, extra, strict=True)
        ),
        landing=tuple(flat(m, distance_50ft_m=d) for m, d in zip((750, 1150), land, strict=True)),
    )
    field = strip(direction(tora, toda_m=tora + stop, lda_m=lda))
    mass = mass_of(profile, field)
    if np.isfinite(mass):
        assert not short_at(profile, field, STILL, mass, "both")[0]
    heavier = [m for m in np.linspace(700, 1100, 81) if m > max(mass, 0) * (1 + 1e-9)]
    for m in heavier:
        # Closer to a limit than rounding can tell is neither here nor there.
        found = margins(replace(profile, planning_kg=m), field, STILL)
        assert found.shortfall[0] or found.margin[0] < 1e-9


# ---- worked examples -------------------------------------------------------------------------


def test_published_interpolation_read_backwards():
    # FAA-H-8083-25 Fig. 10-20 reads 1,115 and 1,230 ft at 2,000 and 3,000 as 1,172.5 half-way;
    # here the axis is mass, and a runway of 1,172.5 ft carries the mass half-way.
    row = PUBLISHED["FAA-PHAK-INTERP"]
    low, low_ft, high, high_ft, half = (float(x) for x in re.findall(r"-?\d+\b", row["inputs"]))
    feet = METRES_PER_FOOT
    profile = replace(
        SIMPLE,
        maximum_kg=high,
        takeoff=(
            flat_takeoff(low, low_ft * feet, low_ft * feet),
            flat_takeoff(high, high_ft * feet, high_ft * feet),
        ),
    )
    runway = strip(direction(float(row["expected"]) * feet))
    assert mass_of(profile, runway, "takeoff") == pytest.approx(half, rel=1e-11)


def test_a_tenth_more_mass_for_21_percent_more_runway():
    # FAA-H-8083-25, Aircraft Performance: 10 % more mass needs at least 21 % more distance.
    figures = ScaledFigures(800.0, 300.0, 500.0, 300.0)
    profile = replace(SIMPLE, takeoff=(), landing=(), scaled=figures)
    ratio = float(PUBLISHED["FAA-PHAK-WT"]["expected"])
    for tora, toda in ((300.0, 900.0), (900.0, 500.0)):
        sea_level = air(0.0, 15.0)
        sigma = min(sea_level.density_ratio[0], 1.0)
        assert sigma == pytest.approx(1.0, abs=1e-6)
        longer = direction(tora * ratio, toda_m=toda * ratio, lda_m=2000.0)
        expected = 800.0 * 1.10
        # The density of the sea-level standard atmosphere to 1e-6.
        assert mass_of(profile, strip(longer)) == pytest.approx(expected, rel=2e-6)


def test_scaled_landing_grows_with_mass_itself():
    # Exponent 1: kinetic energy grows with mass, and so does the braking force (METHODS 5.3).
    figures = ScaledFigures(800.0, 100.0, 100.0, 300.0)
    profile = replace(SIMPLE, takeoff=(), landing=(), scaled=figures)
    cold = air(-1000.0, -10.0)  # denser than sea level: no credit
    runway = strip(direction(2000.0, lda_m=300.0 * 1.25))
    assert mass_of(profile, runway, place=cold) == pytest.approx(1000.0, rel=1e-11)
    short = strip(direction(2000.0, lda_m=299.9))
    assert mass_of(profile, short, place=cold) == -np.inf


def test_scaled_profile_without_ground_roll_has_50ft_held_against_tora():
    figures = ScaledFigures(800.0, None, 500.0, 300.0)
    profile = replace(SIMPLE, takeoff=(), landing=(), scaled=figures)
    cold = air(-1000.0, -10.0)
    runway = strip(direction(500.0 * 1.21, toda_m=3000.0, lda_m=3000.0))
    assert mass_of(profile, runway, place=cold) == pytest.approx(880.0, rel=1e-11)


def test_scaled_climb_is_unknown_above_its_reference_mass():
    figures = ScaledFigures(900.0, None, None, None, 800.0, 14_000.0)
    profile = replace(SIMPLE, scaled=figures, climb_rate_ft_min=500.0)
    long = strip(direction(3000.0))
    assert mass_of(profile, long, "takeoff") == 900.0
    assert mass_of(profile, long, "landing") == mass_of(profile, long) == 800.0
    assert mass_of(replace(profile, climb_rate_ft_min=801.0), long, "takeoff") == -np.inf


# ---- the edges of the tables -----------------------------------------------------------------


def test_runway_that_just_fits_a_table_gives_exactly_its_mass():
    landing = (flat(1000, distance_50ft_m=450),)
    profile = replace(SIMPLE, landing=landing)
    assert mass_of(profile, strip(direction(300.0, toda_m=500.0, lda_m=450.0))) == 800.0
    assert mass_of(profile, strip(direction(400.0, toda_m=600.0, lda_m=450.0))) == 1000.0
    assert mass_of(profile, strip(direction(299.99, toda_m=500.0, lda_m=450.0))) == -np.inf
    # Landing fits to the metre at every mass; take-off alone decides between the tables.
    half = mass_of(profile, strip(direction(350.0, toda_m=600.0, lda_m=450.0)))
    assert half == pytest.approx(900.0, rel=1e-11)


def test_heaviest_table_of_a_needed_operation_bounds_the_mass():
    long = strip(direction(5000.0))
    assert mass_of(SIMPLE, long) == 800.0  # landing is tabulated at 800 kg alone
    assert mass_of(SIMPLE, long, "takeoff") == 1000.0
    assert mass_of(SIMPLE, long, "landing") == 800.0


def test_a_maximum_below_the_lightest_table_takes_that_table():
    light = replace(SIMPLE, maximum_kg=700.0)
    assert mass_of(light, strip(direction(5000.0))) == 700.0
    assert mass_of(light, strip(direction(299.0))) == -np.inf


def test_an_empty_mass_above_what_holds_cannot_be_met():
    profile = replace(SIMPLE, landing=(flat(1000, distance_50ft_m=450),))
    runway = strip(direction(350.0, toda_m=900.0, lda_m=900.0))
    assert mass_of(profile, runway) == pytest.approx(900.0)
    assert mass_of(replace(profile, empty_kg=890.0), runway) == pytest.approx(900.0)
    assert mass_of(replace(profile, empty_kg=910.0), runway) == -np.inf


@pytest.mark.parametrize(
    ("blank", "expected"), [(800, 1000.0), (1000, 900.0), (900, 1000.0)], ids=str
)
def test_blank_table_closes_what_lies_beside_it_and_no_more(blank, expected):
    values = {800: 300.0, 900: 300.0, 1000: 300.0, blank: np.nan}
    tables = tuple(flat_takeoff(m, v, v) for m, v in sorted(values.items()))
    profile = replace(SIMPLE, takeoff=tables, landing=(flat(1000, distance_50ft_m=100),))
    assert mass_of(profile, strip(direction(2000.0))) == expected
    # Where 900 kg falls short as well, only a whole pair of tables leaves anything.
    harder = replace(profile, takeoff=(tables[0], flat_takeoff(900, 500, 500), tables[2]))
    found = mass_of(harder, strip(direction(400.0, lda_m=2000.0)))
    assert found == {800: 1000.0, 1000: pytest.approx(850.0), 900: 1000.0}[blank]


def test_tables_that_ask_less_of_a_heavier_aircraft_give_the_largest_that_holds():
    # 800 kg fits, the middle does not, and 1,000 kg does again from half-way up.
    tables = (
        flat_takeoff(800, 300, 300),
        flat_takeoff(900, 500, 500),
        flat_takeoff(1000, 300, 300),
    )
    heavy = (flat(1000, distance_50ft_m=100),)
    profile = replace(SIMPLE, takeoff=tables, landing=heavy)
    assert mass_of(profile, strip(direction(400.0))) == 1000.0
    assert mass_of(replace(profile, maximum_kg=960.0), strip(direction(400.0))) == 960.0
    lower = mass_of(replace(profile, maximum_kg=940.0), strip(direction(400.0)))
    assert lower == pytest.approx(850.0)


def test_each_direction_is_held_to_both_its_distances():
    profile = replace(SIMPLE, landing=(flat(1000, distance_50ft_m=100),))
    long_roll = direction(1000.0, toda_m=520.0)  # 840 kg
    long_climb = direction(330.0, toda_m=2000.0)  # 860 kg
    assert mass_of(profile, strip(long_roll)) == pytest.approx(840.0)
    assert mass_of(profile, strip(long_climb)) == pytest.approx(860.0)
    assert mass_of(profile, strip(long_roll, long_climb)) == pytest.approx(860.0)
    closed = replace(long_climb, takeoff=False)
    assert mass_of(profile, strip(long_roll, closed)) == pytest.approx(840.0)


def test_scaled_distance_that_just_fits_leaves_the_masses_below_its_reference():
    # Take-off fits to the metre up to 900 kg, landing up to half-way between its tables.
    figures = ScaledFigures(900.0, 300.0, 500.0)
    landing = (flat(700, distance_50ft_m=400), flat(900, distance_50ft_m=500))
    profile = replace(SIMPLE, takeoff=(), landing=landing, scaled=figures)
    runway = strip(direction(300.0, toda_m=500.0, lda_m=450.0))
    assert mass_of(profile, runway, place=air(-1000.0, -10.0)) == pytest.approx(800.0, rel=1e-11)


def test_climb_holds_to_the_harder_of_rate_and_gradient():
    # 60 kt are a nautical mile a minute: 100 x 600 / 6076.12 % at 600 ft/min (definition).
    climb = (flat(800, 60.0, rate_ft_min=800), flat(1000, 60.0, rate_ft_min=400))
    easy = replace(SIMPLE, climb=climb, landing=(flat(1000, distance_50ft_m=100),))
    long = strip(direction(5000.0))
    gradient = 100 * 600 / (1852 / 0.3048)
    for rate_asked, gradient_asked, mass in (
        (500.0, None, 950.0),
        (500.0, 1.0, 950.0),
        (None, gradient, 900.0),
        (500.0, gradient, 900.0),
        (700.0, gradient, 850.0),
    ):
        profile = replace(easy, climb_rate_ft_min=rate_asked, climb_gradient_pct=gradient_asked)
        # The density of the sea-level standard atmosphere to 1e-6.
        assert mass_of(profile, long) == pytest.approx(mass, rel=1e-6)


def test_tables_a_hair_apart_in_mass_never_return_a_mass_that_falls_short():
    # A hundred times the distance for a tenth of a gram: beyond what a float of kilograms tells.
    tables = (flat_takeoff(1000.0, 300, 300), flat_takeoff(1000.0001, 30_000, 30_000))
    profile = replace(SIMPLE, takeoff=tables)
    for tora in np.linspace(301.0, 9999.0, 40):
        runway = strip(direction(tora))
        mass = mass_of(profile, runway, "takeoff")
        assert 1000.0 <= mass < 1000.0001
        assert not short_at(profile, runway, STILL, mass, "takeoff")[0]


def test_passed_limits_cannot_be_met_at_any_mass():
    place = air([0.0, 0.0, 9000.0], [20.0, 35.0, 20.0])
    long = strip(direction(5000.0))
    hot = replace(SIMPLE, limit_temperature_c=34.9)
    np.testing.assert_array_equal(largest_mass(hot, long, place), [800.0, -np.inf, 800.0])
    high = replace(SIMPLE, limit_density_altitude_ft=8000.0)
    np.testing.assert_array_equal(largest_mass(high, long, place), [800.0, 800.0, -np.inf])
    for operation in ("takeoff", "landing"):
        assert largest_mass(hot, long, place, operation)[1] == -np.inf
    exactly = replace(SIMPLE, limit_temperature_c=35.0)
    assert largest_mass(exactly, long, place)[1] == 800.0


def test_planning_mass_does_not_matter():
    profile, field, place, _ = random_case(3)
    first = largest_mass(profile, field, place)
    np.testing.assert_array_equal(
        first, largest_mass(replace(profile, planning_kg=650.0), field, place)
    )


# ---- laws ------------------------------------------------------------------------------------


MONOTONE = [seed for seed in range(45) if random_case(seed)[3]]


@pytest.mark.parametrize("seed", MONOTONE)
def test_both_operations_carry_what_the_harder_one_does(seed):
    # Holds wherever lighter is never worse and both operations reach as heavy.
    profile, field, place, _ = random_case(seed)
    each = [largest_mass(profile, field, place, operation) for operation in ("takeoff", "landing")]
    weakest = np.minimum(*each)
    together = largest_mass(profile, field, place)
    np.testing.assert_array_equal(np.isneginf(together), np.isneginf(weakest))
    some = np.isfinite(weakest)
    np.testing.assert_allclose(together[some], weakest[some], rtol=1e-11)


@pytest.mark.parametrize("seed", MONOTONE[:8])
def test_longer_runways_cooler_air_and_smaller_factors_never_carry_less(seed):
    profile, field, place, _ = random_case(seed)
    mass = largest_mass(profile, field, place)

    def at_least(better):
        assert (better >= np.maximum(mass, 0) * (1 - 1e-11))[np.isfinite(mass)].all()

    longer = [
        replace(d, tora_m=d.tora_m * 1.1, toda_m=d.toda_m * 1.1, lda_m=d.lda_m * 1.1)
        for d in field.runways
    ]
    at_least(largest_mass(profile, replace(field, runways=tuple(longer)), place))
    more = (*field.runways, direction(200.0))
    at_least(largest_mass(profile, replace(field, runways=more), place))
    cooler = air(place.pressure_altitude_ft, place.temperature_c - 3.0)
    at_least(largest_mass(profile, field, cooler))
    lower = air(place.pressure_altitude_ft - 500.0, place.temperature_c)
    at_least(largest_mass(profile, field, lower))
    easier = replace(profile, takeoff_factor=1.0, landing_factor=1.0, climb_rate_ft_min=None)
    if easier.climb_gradient_pct is not None or profile.climb_rate_ft_min is None:
        at_least(largest_mass(easier, field, place))


# ---- the share of hours ----------------------------------------------------------------------


def test_the_share_is_taken_as_it_is_written():
    # In binary 0.07 * 100 = 7.000000000000001 and 0.55 * 100 = 55.00000000000001.
    assert 0.07 * 100 > 7 and 0.55 * 100 > 55
    for share, n, k in ((0.9, 10, 9), (0.07, 100, 7), (0.55, 100, 55), (0.9, 11, 10), (1.0, 7, 7)):
        masses = np.arange(1.0, n + 1)
        assert holding_mass(masses[::-1], share) == n - k + 1


@settings(max_examples=150, deadline=None)
@given(
    masses=st.lists(
        st.sampled_from([-np.inf, 700.0, 755.5, 800.0, 1000.0]), min_size=1, max_size=60
    ),
    percent=st.integers(1, 100),
)
def test_holding_mass_is_the_largest_that_holds_in_the_share(masses, percent):
    needed = Fraction(percent, 100) * len(masses)
    holding = [m for m in masses if sum(hour >= m for hour in masses) >= needed]
    assert holding_mass(np.array(masses), percent / 100) == max(holding)


@settings(max_examples=50, deadline=None)
@given(
    masses=st.lists(st.floats(600, 1200), min_size=1, max_size=40),
    shares=st.tuples(st.integers(1, 1000), st.integers(1, 1000)),
)
def test_a_larger_share_never_carries_more(masses, shares):
    low, high = sorted(shares)
    values = np.array(masses)
    assert holding_mass(values, high / 1000) <= holding_mass(values, low / 1000)


def test_no_hours_hold_no_mass():
    assert np.isnan(holding_mass(np.empty((3, 0)), 0.9))


# ---- the tables ------------------------------------------------------------------------------

YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
SEASONS = (
    Season("year", YEAR),
    Season("across", frozenset(d for d in YEAR if d >= (12, 15) or d <= (2, 10))),
)


@cache
def sample(n_years=6, n_levels=3, persistence=0.4):
    """Return made-up masses of a record with gaps, warmer in summer and in some years."""
    field = strip(direction())
    grid = hour_grid(2015, 2014 + n_years)
    clock = local_clock(field, grid, 2015, 2014 + n_years)
    draw = np.random.default_rng(8)
    absent = draw.random(len(grid)) < 0.1
    absent |= (clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)
    absent |= (clock.month == 1) & (clock.hour == 5)
    known = np.flatnonzero(~absent & clock.in_period)
    summer = -np.cos(2 * np.pi * (clock.month[known] + 0.5) / 12)
    yearly = draw.normal(0, 12, n_years)[clock.year[known]]
    noise = draw.normal(0, 25, len(known))
    levels = np.linspace(15, -15, n_levels)[:, None] if n_levels > 1 else np.zeros((1, 1))
    masses = 990 - 165 * summer + yearly + noise + levels
    masses = np.where(masses > SIMPLE.maximum_kg - 100, SIMPLE.maximum_kg, masses)
    masses = np.where(masses < 826, -np.inf, masses)
    inside = (clock.hour >= 6) & (clock.hour <= 20)
    return MassHours(clock, known, masses, inside, 0.9, persistence)


def risk_of(hours):
    """Return the risk tables of the same hours, for what both kinds of table share."""
    short = hours.masses[0] < 900
    checks = np.zeros((len(CHECKS), len(short)), np.float32)
    central = Margins(
        np.where(short, -0.1, 0.1), short, np.zeros(len(short), bool),
        np.zeros(len(short), np.int8), checks,
    )  # fmt: skip
    return risk_tables(Hours(hours.clock, hours.known, central, hours.inside, 0.9), SEASONS)


def test_hours_years_and_coverage_are_those_of_the_risk_tables():
    hours = sample()
    for ours, theirs in zip(weight_tables(hours, SIMPLE, SEASONS), risk_of(hours), strict=True):
        keys = [k for k in ("month", "hour", "season") if k in theirs]
        for column in (*keys, "n_hours", "n_years", "coverage"):
            assert ours[column].tolist() == theirs[column].tolist(), column


def counting_masses(hours):
    """Return the masses of every (month, hour) by year, of the years that count, in plain loops."""
    clock, cells, days = hours.clock, {}, {}
    for i, place in enumerate(hours.known):
        key = tuple(int(x[place]) for x in (clock.month, clock.hour, clock.year))
        cells.setdefault(key, []).append(i)
        days.setdefault(key, set()).add(int(clock.day[place]))
    return {
        key: chosen
        for key, chosen in cells.items()
        # DESIGN 6: a year counts with values on at least 80 % of the month's days.
        if len(days[key]) >= 0.8 * monthrange(2015 + key[2], key[0] + 1)[1]
    }


def plain_mass(values, holds_in):
    """Return the largest mass that holds in the share, by counting."""
    ordered = sorted(values, reverse=True)
    needed = Fraction(str(holds_in)) * len(ordered)
    for k, mass in enumerate(ordered, start=1):
        if k >= needed:
            return mass
    return None


@pytest.mark.parametrize("holds_in", [0.9, 0.5, 1.0])
def test_masses_of_the_tables_are_those_of_plain_counting(holds_in):
    hours = sample()
    monthly, hourly, _ = weight_tables(hours, SIMPLE, SEASONS, holds_in)
    counting = counting_masses(hours)
    words = {-np.inf: "cannot be met", SIMPLE.maximum_kg: "maximum mass"}

    def check(row, chosen):
        values = hours.masses[:, chosen].reshape(-1).tolist()
        assert row.n_hours == len(chosen)
        expected = plain_mass(values, holds_in)
        if expected is None:
            assert np.isnan(row.mass_kg) and np.isnan(row.never_met) and row.outcome == ""
            return
        assert row.outcome == words.get(expected, "mass")
        never = sum(v == -np.inf for v in values) / len(values)
        assert row.never_met == pytest.approx(never, abs=1e-12)
        if expected == -np.inf:
            assert np.isnan(row.mass_kg) and np.isnan(row.useful_load_kg)
        else:
            assert row.mass_kg == expected
            assert row.useful_load_kg == expected - SIMPLE.empty_kg

    for row in hourly.itertuples():
        cell = [i for k, v in counting.items() if k[:2] == (row.month - 1, row.hour) for i in v]
        check(row, cell)
    for row in monthly.itertuples():
        inside = [k for k in counting if k[0] == row.month - 1 and 6 <= k[1] <= 20]
        check(row, [i for k in inside for i in counting[k]])
    assert (monthly["holds_in"] == holds_in).all()
    assert hourly[(hourly["month"] == 2) & (hourly["hour"] == 5)]["n_hours"].item() == 0


def test_tables_show_every_outcome():
    monthly, hourly, seasonal = weight_tables(sample(), SIMPLE, SEASONS)
    assert set(monthly["outcome"]) == {"mass", "maximum mass", "cannot be met"}
    assert set(hourly["outcome"]) == {"mass", "maximum mass", "cannot be met", ""}
    assert seasonal["season"].tolist() == ["year", "across"]
    columns = ["n_hours", "n_years", "coverage", "holds_in", "mass_kg", "useful_load_kg"]
    columns += ["outcome", "never_met"]
    interval = ["ci_low_kg", "ci_high_kg", "interval_note"]
    assert monthly.columns.tolist() == ["month", *columns, *interval]
    assert hourly.columns.tolist() == ["month", "hour", *columns]
    assert seasonal.columns.tolist() == ["season", *columns, *interval]


def exact_bounds(hours, month, holds_in):
    """Return the interval of one month from every resample's own order statistic, unbinned."""
    chosen = [
        i for k, v in counting_masses(hours).items() if k[0] == month and 6 <= k[1] <= 20 for i in v
    ]
    masses, n_levels = hours.masses[:, chosen], len(hours.masses)
    year = hours.clock.year[hours.known[chosen]]
    years = year_weights(hours.clock.n_years)
    levels = level_weights(n_levels, hours.persistence)
    order = np.argsort(-masses, axis=None, kind="stable")
    ordered = masses.reshape(-1)[order]
    drawn = []
    for resample in range(RESAMPLES):
        weight = (levels[resample][:, None] * years[resample][year][None, :]).reshape(-1)[order]
        reached = np.cumsum(weight)
        enough = reached >= holds_in * reached[-1] * (1 - 1e-9)
        drawn.append(ordered[np.flatnonzero(enough)[0]])
    drawn.sort()
    tail = expanded_tail(len(np.unique(year)), hours.confidence)
    low, high = tail * (RESAMPLES - 1), (1 - tail) * (RESAMPLES - 1)
    return drawn[int(np.floor(low))], drawn[int(np.ceil(high))]


@pytest.mark.parametrize("n_levels", [1, 3])
@pytest.mark.parametrize("month", [3, 9])
def test_interval_encloses_the_exact_one_within_a_kilogram(n_levels, month):
    hours = sample(n_levels=n_levels)
    row = weight_tables(hours, SIMPLE, SEASONS)[0].iloc[month]
    low, high = exact_bounds(hours, month, 0.9)
    assert 0 <= low - row["ci_low_kg"] < 1.0
    assert 0 <= row["ci_high_kg"] - high < 1.0
    assert row["ci_low_kg"] < row["mass_kg"] < row["ci_high_kg"]
    assert row["interval_note"] == "fewer than 10 years"


def test_interval_says_which_bound_cannot_be_met():
    hours, seen = sample(), set()
    table = weight_tables(hours, SIMPLE, SEASONS)[0]
    for month, row in table.iterrows():
        low, high = exact_bounds(hours, month, 0.9)
        assert np.isnan(row["ci_low_kg"]) == (low == -np.inf)
        assert np.isnan(row["ci_high_kg"]) == (high == -np.inf)
        told = re.sub("^fewer than 10 years(; )?", "", row["interval_note"])
        words = {
            0: "",
            1: "the lower end cannot be met at any tabulated mass",
            2: "both ends of the interval cannot be met at any tabulated mass",
        }
        unmet = int(low == -np.inf) + int(high == -np.inf)
        assert told == words[unmet]
        seen.add(unmet)
    assert seen == {0, 1, 2}


def test_no_interval_below_five_years():
    monthly, _, seasonal = weight_tables(sample(n_years=4), SIMPLE, SEASONS)
    assert monthly["mass_kg"].notna().any()
    for table in (monthly, seasonal):
        assert table[["ci_low_kg", "ci_high_kg"]].isna().all(axis=None)
        assert set(table["interval_note"]) == {"no interval below 5 years"}


def test_a_record_without_hours_has_no_figure_and_no_note():
    hours = sample()
    empty = replace(hours, known=hours.known[:0], masses=hours.masses[:, :0])
    for table in weight_tables(empty, SIMPLE, SEASONS):
        assert table[["mass_kg", "useful_load_kg", "never_met"]].isna().all(axis=None)
        assert set(table["outcome"]) == {""}
        assert (table["n_hours"] == 0).all() and (table["coverage"] == 0).all()
        if "interval_note" in table:
            assert set(table["interval_note"]) == {""}


# ---- a whole field ---------------------------------------------------------------------------


def test_a_study_holds_at_its_planning_mass_exactly_where_nothing_falls_short(tmp_path):
    study = read_study(make_study(tmp_path / "study", "synthetic").file)
    weather = load_weather(study, None, lambda *_: None)
    region = region_of(study, weather)
    carried = 0
    for field in study.fields:
        scene = scene_of(study, field, region)
        for profile in study.aircraft:
            hours = weighed(scene, profile)
            risk = scored(scene, profile)
            levels = risk.levels or [risk.central]
            assert hours.masses.shape == (len(levels), len(scene.known))
            np.testing.assert_array_equal(hours.masses, mass_levels(scene, profile))
            # The tables of the made-up study are never kinder to more mass.
            short = np.array([m.shortfall for m in levels])
            np.testing.assert_array_equal(hours.masses < profile.planning_kg, short)
            carried += len(risk.levels)
    assert carried


def lighter_blank(heavy, light):
    """Return whether a lighter table says nothing where a heavier one has figures."""
    axes = np.array([0.0, 4000.0]), np.array([0.0, 30.0])
    tables = [
        PerformanceTable(mass, *axes, {"distance_50ft_m": np.array(grid)})
        for mass, grid in ((700.0, light), (800.0, heavy))
    ]
    return lighter_gaps(tables)


def test_blank_in_a_lighter_table_is_told_and_a_blank_in_a_heavier_one_is_natural():
    full = [[300.0, 400.0], [400.0, 550.0]]
    blank = [[300.0, 400.0], [400.0, np.nan]]
    assert lighter_blank(heavy=full, light=blank)
    assert not lighter_blank(heavy=blank, light=full)
    assert not lighter_blank(heavy=full, light=full)
    assert not lighter_blank(heavy=blank, light=blank)


def test_lighter_table_that_ends_before_a_heavier_one_is_told():
    values = {"distance_50ft_m": np.full((2, 2), 300.0)}
    short = PerformanceTable(700.0, np.array([0.0, 4000.0]), np.array([0.0, 30.0]), values)
    longer = PerformanceTable(800.0, np.array([0.0, 8000.0]), np.array([0.0, 30.0]), values)
    assert lighter_gaps([short, longer])
    assert not lighter_gaps([replace(longer, mass_kg=700.0), replace(short, mass_kg=800.0)])
    assert not lighter_gaps([short])
    assert not lighter_gaps([])
