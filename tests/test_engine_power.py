"""Engine power: the worked table, laws that must hold, plain loops."""

from __future__ import annotations

import csv
import re
from calendar import monthrange
from dataclasses import replace
from pathlib import Path

import numpy as np
import psychrolib
import pytest
from ambiance import Atmosphere
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk import engine_power as ep
from climarisk.aircraft import AircraftProfile
from climarisk.atmosphere import (
    RHO0,
    density_altitude_ft,
    dew_point_from_rh_c,
    isa_density,
    isa_pressure_hpa,
    isa_temperature_k,
    moist_density,
    vapour_pressure_hpa,
)
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.units import KELVIN_AT_0C, METRES_PER_FOOT

REFERENCE = Path(__file__).parent / "reference" / "power_check_values.csv"
COMPILED = Path(__file__).parents[2] / "shared" / "methods" / "check_values.csv"
with REFERENCE.open(encoding="utf-8", newline="") as stream:
    ROWS = list(csv.DictReader(stream))
COMPILED_QUANTITIES = {"na_power_ratio_gagg_ferrar", "sae_j1349_correction_factor"}

NATURAL = AircraftProfile(
    "n",
    "Invented",
    "invented",
    "natural",
    True,
    maximum_kg=800.0,
    planning_kg=700.0,
    empty_kg=500.0,
)
TURBO = replace(
    NATURAL, id="t", aspiration="turbocharged", carburettor=False, critical_altitude_ft=8000.0
)
UNRATED = replace(TURBO, id="u", critical_altitude_ft=None)
DIESEL = replace(NATURAL, id="d", aspiration="diesel", carburettor=False)
ELECTRIC = replace(DIESEL, id="e", aspiration="electric")


def inputs(row):
    """Return the numbers of a row's inputs by name."""
    return {k: float(v) for k, v in re.findall(r"(\w+)=(-?[\d.]+)", row["inputs"])}


def air_of(given):
    """Return pressure, temperature and vapour pressure of a row."""
    pressure, temperature = given["p"], given["T"]
    if "e" in given:
        return pressure, temperature, given["e"]
    if given["RH"] == 0:
        return pressure, temperature, 0.0
    dew_point = dew_point_from_rh_c(temperature, given["RH"])
    return pressure, temperature, vapour_pressure_hpa(dew_point, pressure)


def standard(height_ft, warmer_k=0.0):
    """Return pressure and temperature of the standard atmosphere, warmed."""
    metres = height_ft * METRES_PER_FOOT
    return isa_pressure_hpa(metres), isa_temperature_k(metres) - KELVIN_AT_0C + warmer_k


QUANTITIES = {
    "na_power_ratio_gagg_ferrar": lambda g: ep.gagg_ferrar(g["sigma"]),
    "sae_j1349_correction_factor": lambda g: ep.j1349_factor(*air_of(g)),
    "density_ratio": lambda g: moist_density(*air_of(g)) / RHO0,
    "dry_density_ratio": lambda g: (
        (ep.power_share(NATURAL, *air_of(g)) + 1 / 7.55) / (1 + 1 / 7.55)
    ),
    "gagg_ferrar_on_density": lambda g: ep.gagg_ferrar(moist_density(*air_of(g)) / RHO0),
    "gagg_ferrar_on_dry_density": lambda g: ep.power_share(NATURAL, *air_of(g)),
    "j1349_share_of_isa_sea_level": lambda g: ep.sae_j1349_share(*air_of(g)),
    "gagg_ferrar_at_standard_altitude": lambda g: ep.power_share(NATURAL, *standard(g["H"])),
}


# ---- published and worked figures ------------------------------------------------------------


@pytest.mark.parametrize("row", [pytest.param(row, id=row["id"]) for row in ROWS])
def test_power_agrees_with_the_reference_row(row):
    value = float(QUANTITIES[row["quantity"]](inputs(row)))
    assert value == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


def test_every_reference_row_is_exercised():
    assert {row["quantity"] for row in ROWS} == set(QUANTITIES)
    assert {row["tolerance_kind"] for row in ROWS} == {"abs"}
    assert len({row["id"] for row in ROWS}) == len(ROWS)


def test_reference_rows_are_the_compiled_ones():
    if not COMPILED.exists():
        pytest.skip("the compiled table of check values is not beside this checkout")
    kept = ("id", "quantity", "inputs", "expected", "unit", "tolerance", "status")
    with COMPILED.open(encoding="utf-8", newline="") as stream:
        compiled = [r for r in csv.DictReader(stream) if r["quantity"] in COMPILED_QUANTITIES]
    ours = [r for r in ROWS if r["quantity"] in COMPILED_QUANTITIES]
    assert [[r[k] for k in kept] for r in ours] == [[r[k] for k in kept] for r in compiled]


def test_the_general_form_of_the_formula_is_the_same():
    # METHODS 4 (from memory): (sigma - C) / (1 - C) with C about 0.117.
    sigma = np.linspace(0.3, 1.2, 19)
    c = 1 / 8.55
    assert c == pytest.approx(0.117, abs=5e-4)
    assert ep.gagg_ferrar(sigma) == pytest.approx((sigma - c) / (1 - c), abs=1e-12)


def test_the_share_of_dry_air_is_the_oxygen_of_another_library():
    # NACA TR-426 (abstract): power goes with the mass of oxygen.  PsychroLib's humid volume per
    # kg of dry air gives the dry density; its gas constants differ by some 1e-4.
    psychrolib.SetUnitSystem(psychrolib.SI)
    for t, e, p in ((30.0, 21.24, 1013.25), (15.0, 8.0, 850.0), (38.0, 40.0, 990.0)):
        ratio = 0.621945 * e / (p - e)
        dry = 1 / psychrolib.GetMoistAirVolume(t, ratio, p * 100)
        sigma = dry / 1.225
        expected = sigma - (1 - sigma) / 7.55
        assert ep.power_share(NATURAL, p, t, e) == pytest.approx(expected, rel=4e-4)


@pytest.mark.parametrize("height_m", [0.0, 1500.0, 3000.0])
def test_a_natural_engine_in_another_librarys_standard_air(height_m):
    sky = Atmosphere(height_m * 6_356_766.0 / (6_356_766.0 - height_m))  # geometric height
    sigma = float(sky.density[0]) / float(Atmosphere(0.0).density[0])
    share = ep.power_share(NATURAL, *standard(height_m / METRES_PER_FOOT))
    assert share == pytest.approx(sigma - (1 - sigma) / 7.55, abs=1e-6)


# ---- what must hold --------------------------------------------------------------------------


@pytest.mark.parametrize("share", [ep.power_share, ep.optimistic_share])
@pytest.mark.parametrize("profile", [NATURAL, TURBO, ELECTRIC], ids=lambda p: p.aspiration)
def test_the_share_is_one_in_standard_sea_level_air(share, profile):
    assert float(share(profile, 1013.25, 15.0)) == pytest.approx(1.0, abs=1e-12)


def test_j1349_is_one_where_it_is_said_to_be():
    assert float(ep.j1349_factor(990.0, 25.0)) == pytest.approx(1.0, abs=1e-12)
    for height in (0.0, 8000.0, 15_000.0):
        share = ep.sae_j1349_share(*standard(height), standard_altitude_ft=height)
        assert float(share) == pytest.approx(1.0, abs=1e-12)


@settings(deadline=None, max_examples=80)
@given(st.floats(600, 1050), st.floats(-40, 45), st.floats(0, 1), st.sampled_from([NATURAL, TURBO]))
def test_the_bracket_never_turns_over_and_humidity_never_helps(p, t, rh, profile):
    e = rh * vapour_pressure_hpa(t, p)
    careful, other = (f(profile, p, t, e) for f in (ep.power_share, ep.optimistic_share))
    assert other >= careful > 0
    assert ep.humidity_power_pct(profile, p, t, e) >= -1e-9
    assert ep.humidity_ft(p, t, e) >= -1e-6
    assert ep.power_share(profile, p, t + 1, e) <= careful
    assert ep.power_share(profile, p + 1, t, e) >= careful


def test_j1349_is_the_favourable_one_in_hot_air_alone():
    # From standard temperature at sea level, 9 K above it at 1000 m and 18 K at 3000 m, as the
    # docstring says; METHODS 4 compares hot air only.
    for height_m, crossing_k in ((0.0, 0.0), (1000.0, 9.0), (3000.0, 18.0)):
        p, t = standard(height_m / METRES_PER_FOOT)
        for away_k, favourable in ((crossing_k - 1, False), (crossing_k + 1, True)):
            air = p, t + away_k
            above = ep.sae_j1349_share(*air) > ep.power_share(NATURAL, *air)
            assert bool(above) is favourable


def test_the_bracket_is_two_to_three_percent_wide_in_hot_air():
    # METHODS 4: the spread is 2-3 % of power in its hot sea-level rows.
    for rh in (0.0, 50.0, 100.0):
        air = air_of({"p": 1013.25, "T": 30.0, "RH": rh})
        width = ep.optimistic_share(NATURAL, *air) - ep.power_share(NATURAL, *air)
        assert 0.02 < float(width) < 0.03


def test_humidity_costs_more_power_than_density():
    # METHODS 4: saturated air at 30 degC costs about 4.5 % power but 1.6 % density.
    air = air_of({"p": 1013.25, "T": 30.0, "RH": 100.0})
    points = ep.power_share(NATURAL, *air[:2]) - ep.power_share(NATURAL, *air)
    assert 100 * float(points) == pytest.approx(4.5, abs=0.05)
    density = 1 - moist_density(*air) / moist_density(*air[:2])
    assert 100 * density == pytest.approx(1.6, abs=0.05)
    relative = 100 * points / ep.power_share(NATURAL, *air[:2])
    assert ep.humidity_power_pct(NATURAL, *air) == pytest.approx(float(relative), rel=1e-12)


def test_the_loss_to_humidity_is_proportional_to_the_share_of_vapour():
    # NBS RP118 (abstract): the loss goes with the volumetric share of vapour.
    share = np.array([0.005, 0.01, 0.02, 0.04])
    lost = ep.humidity_power_pct(NATURAL, 900.0, 30.0, share * 900.0)
    assert lost / share == pytest.approx(np.full(4, lost[0] / share[0]), rel=1e-9)


@pytest.mark.parametrize(
    ("pressure_altitude_ft", "temperature_c", "humidity_pct", "expected_ft"),
    [
        # METHODS 3.4, whole feet computed for the compiled methods.
        (0, 10, 50, 79),
        (0, 30, 100, 540),
        (4000, 25, 50, 225),
        (8000, 20, 100, 376),
        (10000, 40, 50, 621),
    ],
)
def test_the_feet_of_humidity_are_those_of_the_table(
    pressure_altitude_ft, temperature_c, humidity_pct, expected_ft
):
    pressure = isa_pressure_hpa(pressure_altitude_ft * METRES_PER_FOOT)
    air = air_of({"p": float(pressure), "T": float(temperature_c), "RH": float(humidity_pct)})
    assert float(ep.humidity_ft(*air)) == pytest.approx(expected_ft, abs=0.5)


# ---- engines ---------------------------------------------------------------------------------


def test_a_turbocharged_engine_is_flat_up_to_its_critical_altitude():
    for height in (0.0, 4000.0, 7999.0, 8000.0):
        assert float(ep.power_share(TURBO, *standard(height))) == pytest.approx(1.0, abs=1e-12)
    # Colder or denser than standard gives no more than full power.
    assert float(ep.power_share(TURBO, *standard(3000.0, -30.0))) == 1.0
    above = float(ep.power_share(TURBO, *standard(12_000.0)))
    ratio = isa_density(12_000 * METRES_PER_FOOT) / isa_density(8000 * METRES_PER_FOOT)
    assert above == pytest.approx(ratio - (1 - ratio) / 7.55, abs=1e-12)
    assert above > float(ep.power_share(NATURAL, *standard(12_000.0)))


def test_the_power_of_a_turbocharged_engine_has_no_step():
    heights = np.linspace(7000, 9000, 2001)
    share = ep.power_share(TURBO, *standard(heights))
    assert np.abs(np.diff(share)).max() < 1e-4
    assert (np.diff(share) <= 0).all()
    # A hot day ends full power below the pressure altitude of the same number.
    assert float(ep.power_share(TURBO, *standard(7500.0, 25.0))) < 1.0


def test_humidity_takes_nothing_from_a_charged_engine_below_its_critical_altitude():
    p, t = standard(2000.0)
    assert float(ep.humidity_power_pct(TURBO, p, t, 10.0)) == 0.0
    assert float(ep.humidity_power_pct(TURBO, *standard(10_000.0), 5.0)) > 0.0
    # Full power in dry air, less with vapour: only the part beyond the critical density counts.
    p, t = standard(8000.0)
    part = float(ep.humidity_power_pct(TURBO, p, t, 5.0))
    assert part == pytest.approx(100 * (1 - float(ep.power_share(TURBO, p, t, 5.0))), rel=1e-9)


@pytest.mark.parametrize("profile", [DIESEL, UNRATED], ids=["diesel", "no critical altitude"])
def test_what_cannot_be_computed_is_not(profile):
    air = np.array([1000.0, 850.0]), np.array([15.0, 30.0]), np.array([5.0, 10.0])
    for share in (ep.power_share, ep.optimistic_share, ep.humidity_power_pct):
        assert np.isnan(share(profile, *air)).all()
        assert share(profile, *air).shape == (2,)
    assert ep.power_method(profile).startswith("not computed: ")


def test_an_electric_motor_loses_nothing_to_the_air():
    air = np.array([1000.0, 700.0]), np.array([15.0, 40.0]), np.array([5.0, 30.0])
    for share in (ep.power_share, ep.optimistic_share):
        assert share(ELECTRIC, *air).tolist() == [1.0, 1.0]
    assert ep.humidity_power_pct(ELECTRIC, *air).tolist() == [0.0, 0.0]


@pytest.mark.parametrize("profile", [NATURAL, TURBO, ELECTRIC], ids=lambda p: p.aspiration)
def test_unknown_air_gives_no_power(profile):
    for air in ((np.nan, 15.0, 5.0), (1000.0, np.nan, 5.0), (1000.0, 15.0, np.nan)):
        for share in (ep.power_share, ep.optimistic_share, ep.humidity_power_pct):
            assert np.isnan(share(profile, *air))


def test_methods_say_what_was_done_or_what_is_missing():
    says = {p.id: ep.power_method(p) for p in (NATURAL, TURBO, UNRATED, DIESEL, ELECTRIC)}
    assert len(set(says.values())) == 5
    assert "density of the dry air" in says["n"]
    assert "critical altitude of 8000 ft" in says["t"]
    assert "critical_altitude_ft under [engine]" in says["u"]
    assert "table" in says["d"]
    assert "propeller" in says["e"]


# ---- the table -------------------------------------------------------------------------------

FIELD = Field("F", "Field", 46.5, 11.0, 900.0, "Europe/Rome")
FLEET = (NATURAL, TURBO, UNRATED, DIESEL, ELECTRIC, replace(NATURAL, id="n2"))
FIGURES = {
    "power_p10": 0.1,
    "power_p50": 0.5,
    "power_p90": 0.9,
    "optimistic_p50": 0.5,
    "humidity_power_pct_p50": 0.5,
    "humidity_power_pct_p90": 0.9,
    "humidity_ft_p50": 0.5,
    "humidity_ft_p90": 0.9,
}


@pytest.fixture(scope="module")
def case():
    """Return three gappy years at a high hot field: air at three levels, clock."""
    grid = hour_grid(2019, 2021)
    clock = local_clock(FIELD, grid, 2019, 2021)
    draw, n = np.random.default_rng(4), len(grid)
    t = 14 - 12 * np.cos(2 * np.pi * np.arange(n) / 8766) + draw.normal(0, 5, n)
    p = draw.normal(740, 6, n)
    e = draw.uniform(0.2, 1.0, n) * vapour_pressure_hpa(t, p)
    for values in (t, p, e):
        values[draw.random(n) < 0.04] = np.nan
    t[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)] = np.nan
    p[clock.month == 10] = np.nan
    levels = t + np.array([[-2.0], [0.2], [1.8]])
    return ep.EngineAir(p, e, t, levels), grid, clock


def plain_month(air, clock, inside, month, profile):
    """Return (hours, years, coverage, figures) of a month by plain loops."""
    known = np.isfinite(air.pressure_hpa) & np.isfinite(air.vapour_pressure_hpa)
    known &= np.isfinite(air.temperature_c) & clock.in_period & (clock.month == month)
    days: dict = {}
    offered = set()
    year, hour = clock.year.tolist(), clock.hour.tolist()
    for i in np.flatnonzero(known).tolist():
        days[year[i], hour[i]] = days.get((year[i], hour[i]), 0) + 1
    counting = {c for c, k in days.items() if 5 * k >= 4 * monthrange(2019 + c[0], month + 1)[1]}
    for i in np.flatnonzero(inside & clock.in_period & (clock.month == month)).tolist():
        offered.add((year[i], hour[i]))
    used = [i for i in np.flatnonzero(known & inside).tolist() if (year[i], hour[i]) in counting]
    lists: dict = {name: [] for name in FIGURES}
    p, e, t = (
        x[used].tolist() for x in (air.pressure_hpa, air.vapour_pressure_hpa, air.temperature_c)
    )
    for level in air.temperature_levels_c:
        moved = level[used]
        most = vapour_pressure_hpa(moved, np.array(p)).tolist()
        for x in zip(p, moved.tolist(), map(min, e, most), strict=True):
            lists["power_p50"].append(plain_share(profile, *x))
            lists["optimistic_p50"].append(max(lists["power_p50"][-1], plain_j1349(profile, *x)))
    lists["power_p10"] = lists["power_p90"] = lists["power_p50"]
    for x in zip(p, t, e, strict=True):
        share, dry = plain_share(profile, *x), plain_share(profile, x[0], x[1], 0.0)
        lists["humidity_power_pct_p50"].append((1 - share / dry) * 100)
        gained = density_altitude_ft(*x) - density_altitude_ft(*x[:2])
        lists["humidity_ft_p50"].append(float(gained))
    for name in ("humidity_power_pct", "humidity_ft"):
        lists[f"{name}_p90"] = lists[f"{name}_p50"]
    # numpy's "median_unbiased" is definition 8 of Hyndman and Fan.
    figures = {
        name: np.quantile(lists[name], q, method="median_unbiased") if used else np.nan
        for name, q in FIGURES.items()
    }
    share = len(offered & counting) / len(offered)
    return len(used), len({year[i] for i in used}), share, figures


def plain_share(profile, p, t, e):
    """Return the power of one hour."""
    if profile.aspiration in ("diesel", "electric"):
        return {"diesel": np.nan, "electric": 1.0}[profile.aspiration]
    sigma = (p - e) / (t + 273.15) * 288.15 / 1013.25
    if profile.aspiration == "natural":
        return 1.1324503311258278 * sigma - 0.13245033112582782  # 1 + 1/7.55 and 1/7.55
    if profile.critical_altitude_ft is None:
        return np.nan
    sigma /= (1 - 0.0065 * profile.critical_altitude_ft * 0.3048 / 288.15) ** 4.2558797
    return min(1.0, sigma - (1 - sigma) / 7.55)


def plain_j1349(profile, p, t, e):
    """Return the favourable power of one hour by SAE J1349."""
    if profile.aspiration not in ("natural", "turbocharged"):
        return plain_share(profile, p, t, e)
    height = (profile.critical_altitude_ft or 0.0) * 0.3048
    ratio = 1 - 0.0065 * height / 288.15
    there = 1013.25 * ratio**5.2558797, 288.15 * ratio
    top = 1.18 * (990 / there[0] * ((there[1] - 273.15 + 273) / 298) ** 0.5) - 0.18
    share = top / (1.18 * (990 / (p - e) * ((t + 273) / 298) ** 0.5) - 0.18)
    if profile.aspiration == "turbocharged":
        return min(1.0, share) if profile.critical_altitude_ft is not None else np.nan
    return share


@pytest.mark.parametrize("window", ["all", (7, 19)])
def test_the_table_equals_plain_loops(case, window):
    air, grid, clock = case
    inside = in_window(window, FIELD, grid, clock)
    table = ep.power_tables(air, clock, inside, FLEET)
    columns = ["aircraft", "month", "n_hours", "n_years", "coverage", "method", *FIGURES]
    assert list(table.columns) == columns
    assert table["aircraft"].tolist() == [p.id for p in FLEET for _ in range(12)]
    assert table["month"].tolist() == list(range(1, 13)) * len(FLEET)
    for profile in FLEET[:5]:
        part = table[table["aircraft"] == profile.id].set_index("month")
        for month in (0, 6, 10):
            n, years, coverage, figures = plain_month(air, clock, inside, month, profile)
            row = part.loc[month + 1]
            assert (row["n_hours"], row["n_years"]) == (n, years)
            assert row["coverage"] == pytest.approx(coverage, abs=1e-12)
            for name, value in figures.items():
                # The exponents above are written to eight digits.
                assert row[name] == pytest.approx(value, rel=1e-6, abs=1e-8, nan_ok=True), name
    assert set(table.loc[table["month"] == 7, "n_years"]) == {2}


def test_the_table_leaves_empty_what_does_not_count(case):
    air, _, clock = case
    table = ep.power_tables(air, clock, np.ones(len(clock.hour), bool), FLEET)
    november = table[table["month"] == 11]
    assert (november["n_hours"] == 0).all() and (november["coverage"] == 0).all()
    assert november[list(FIGURES)].isna().all(axis=None)
    for profile in (UNRATED, DIESEL):
        part = table[(table["aircraft"] == profile.id) & (table["n_hours"] > 0)]
        assert part[[c for c in FIGURES if not c.startswith("humidity_ft")]].isna().all(axis=None)
        # The feet belong to the air, whatever the engine.
        assert part[["humidity_ft_p50", "humidity_ft_p90"]].notna().all(axis=None)
        assert set(part["method"]) == {ep.power_method(profile)}


def test_engines_that_are_alike_have_the_same_rows(case):
    air, _, clock = case
    table = ep.power_tables(air, clock, np.ones(len(clock.hour), bool), FLEET)
    first, second = (table[table["aircraft"] == name] for name in ("n", "n2"))
    rest = ["month", "n_hours", "method", *FIGURES]
    assert first[rest].reset_index(drop=True).equals(second[rest].reset_index(drop=True))
    whole = table.dropna(subset="power_p50")
    assert (whole["power_p10"] <= whole["power_p90"]).all()
    assert (whole["power_p50"] <= whole["optimistic_p50"]).all()


def test_no_hours_at_all_give_an_empty_table(case):
    air, _, clock = case
    table = ep.power_tables(air, clock, np.zeros(len(clock.hour), bool), FLEET)
    assert (table["n_hours"] == 0).all()
    assert table[list(FIGURES)].isna().all(axis=None)
