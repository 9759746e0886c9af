"""What the transfer error does to a field's tables, end to end."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from study_maker import RUNWAYS, make_study, study_toml

from climarisk.atmosphere import density_altitude_ft, pressure_altitude_ft, virtual_temperature_c
from climarisk.clock import hour_grid, local_clock
from climarisk.performance import TableAir, density_ratio, margins
from climarisk.pipeline import evaluate, field_tables
from climarisk.progress import quiet
from climarisk.region import Region
from climarisk.scene import shifted
from climarisk.study import read_study
from climarisk.transfer import air_at_field, candidates, on_grid
from climarisk.transfer_error import planning_error
from climarisk.verify import lapse_for
from climarisk.weather import load_weather

FIELDS = """\
id,name,latitude,longitude,elevation_m,timezone,stations
OWN,On its station (invented),46.51,11.02,480,Europe/Rome,
NEAR,Near a station (invented),46.50,11.10,700,Europe/Rome,
FAR,Far from any (invented),46.85,11.40,1000,Europe/Rome,
"""
TABLES = (
    "distributions_monthly",
    "distributions_hourly",
    "risk_monthly",
    "risk_hourly",
    "risk_seasonal",
)
PLANNED = planning_error()
NONE = replace(PLANNED, scale=np.zeros((12, 2)))


@pytest.fixture(scope="module")
def scene(tmp_path_factory):
    """A study of six years, its stations on the grid, and its fields' tables with and without."""
    made = make_study(tmp_path_factory.mktemp("uncertain") / "study")
    made.write("study.toml", study_toml("synthetic", 2015, 2020)).write("fields.csv", FIELDS)
    head = RUNWAYS.splitlines()[0]
    lengths = {"OWN": 930, "NEAR": 980, "FAR": 1060}  # short enough for some hours, not for all
    rows = [f"{f},09,90,,,,,{m},0,grass,yes,yes" for f, m in lengths.items()]
    study = read_study(made.write("runways.csv", "\n".join([head, *rows]) + "\n").file)
    weather = load_weather(study, None, quiet)
    grid = hour_grid(study.first_year, study.last_year)
    airs = [on_grid(s.station, s.hours, grid, s.elevation_trusted) for s in weather.stations]
    tables = {
        (field.id, with_error): field_tables(
            study, field, Region(grid, tuple(airs), PLANNED if with_error else NONE)
        )
        for field in study.fields
        for with_error in (True, False)
    }
    return study, weather, grid, airs, tables


def risk_of(tables, name="risk_monthly", aircraft="trainer"):
    table = tables.frames[name]
    return table[table["aircraft"] == aircraft].reset_index(drop=True)


def variable_of(tables, variable="density_altitude", name="distributions_monthly"):
    table = tables.frames[name]
    return table[table["variable"] == variable].reset_index(drop=True)


def test_field_on_its_station_is_the_same_to_the_last_digit_with_any_error(scene):
    tables = scene[-1]
    for name in TABLES:
        pd.testing.assert_frame_equal(
            tables["OWN", True].frames[name],
            tables["OWN", False].frames[name],
            check_exact=True,
        )
    row = tables["OWN", True].frames["estimates"].iloc[0]
    assert (row["own_station"], row["transfer_error_k"], row["transfer_error_ft"]) == (1.0, 0, 0)


def test_error_never_changes_which_hours_enter(scene):
    tables = scene[-1]
    for field in ("NEAR", "FAR"):
        for name in TABLES:
            for column in ("n_hours", "n_years", "coverage"):
                a, b = (tables[field, e].frames[name] for e in (True, False))
                if column in a:
                    pd.testing.assert_series_equal(a[column], b[column], check_exact=True)


@pytest.mark.parametrize("field", ["NEAR", "FAR"])
def test_carried_air_has_wider_percentiles_and_wider_intervals(scene, field):
    tables = scene[-1]
    spread, plain = (variable_of(tables[field, e], "temperature") for e in (True, False))
    assert (spread["p90"] - spread["p10"] > plain["p90"] - plain["p10"]).all()
    assert (spread["p95"] - spread["p05"] > plain["p95"] - plain["p05"]).all()
    # The last percent is a few warm days: it rises on average, if not in every month.
    assert (spread["p99"] - plain["p99"]).mean() > 0 > (spread["p01"] - plain["p01"]).mean()
    np.testing.assert_allclose(spread["mean"], plain["mean"], atol=1e-9)  # no bias
    feet = variable_of(tables[field, True])
    known = feet["n_hours"] > 0
    # A kelvin is worth 108-130 ft (METHODS 2.7).
    ratio = feet.loc[known, "transfer_error"] / spread.loc[known, "transfer_error"]
    assert ratio.between(105, 130).all()
    wide, narrow = (risk_of(tables[field, e]) for e in (True, False))
    some = (narrow["shortfall"] > 0.01) & (narrow["shortfall"] < 0.99)
    assert some.sum() >= 3
    width = (wide["ci_high"] - wide["ci_low"])[some], (narrow["ci_high"] - narrow["ci_low"])[some]
    assert (width[0] > width[1]).all()


def test_farther_field_has_the_larger_error(scene):
    tables = scene[-1]
    sizes = [
        tables[f, True].frames["estimates"]["transfer_error_ft"].iloc[0]
        for f in ("OWN", "NEAR", "FAR")
    ]
    assert sizes[0] == 0 < sizes[1] < sizes[2]
    # Planning values: 0.9 K at no height to 1.5 K at 500 m, 108-130 ft each (METHODS 2.7).
    assert 0.9 * 108 < sizes[1] < 1.5 * 130


def test_air_that_moves_only_the_temperature_leaves_the_rest_alone(scene):
    tables = scene[-1]
    for variable in ("pressure_altitude", "dew_point", "vapour_pressure"):
        a, b = (variable_of(tables["FAR", e], variable) for e in (True, False))
        pd.testing.assert_frame_equal(a, b, check_exact=True)
    humidity = variable_of(tables["FAR", True], "relative_humidity", "distributions_hourly")
    assert humidity["p99"].max() <= 100 + 1e-6


def test_central_share_is_the_share_without_the_error(scene):
    tables = scene[-1]
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        wide, narrow = (risk_of(tables["FAR", e], name) for e in (True, False))
        np.testing.assert_array_equal(wide["shortfall_central"], narrow["shortfall"])
        np.testing.assert_array_equal(narrow["shortfall_central"], narrow["shortfall"])


def test_share_of_carried_air_is_that_of_a_brute_force_draw(scene):
    study, _, grid, airs, tables = scene
    field = next(f for f in study.fields if f.id == "FAR")
    profile = next(a for a in study.aircraft if a.id == "trainer")
    clock = local_clock(field, grid, study.first_year, study.last_year)
    chosen = candidates(field, airs, study.radius_km)
    air = air_at_field(field, chosen, airs, clock, lapse_for(field, airs, clock, study.radius_km))
    # Six Junes at eleven o'clock; every hour counts, since the weather has few gaps.
    cell = (clock.month == 5) & (clock.hour == 11) & clock.in_period
    known = np.isfinite(air.temperature_c) & np.isfinite(air.vapour_pressure_hpa)
    places = np.flatnonzero(cell & known & np.isfinite(air.pressure_hpa))
    share = np.sqrt(PLANNED.persistence + PLANNED.dispersion)  # of the planning error: all of it
    sd = PLANNED.sd_k(air.carried_m, clock.month, clock.hour)[places] * share
    here = replace(
        air,
        temperature_c=air.temperature_c[places],
        vapour_pressure_hpa=air.vapour_pressure_hpa[places],
        pressure_hpa=air.pressure_hpa[places],
    )
    draw, fallen = np.random.default_rng(17), []
    for _ in range(200):
        t, e = shifted(field, here, sd * draw.normal(0, 1, len(places)))
        p = here.pressure_hpa
        table_air = TableAir(
            pressure_altitude_ft(p),
            virtual_temperature_c(t, e, p),
            t,
            density_altitude_ft(p, t, e),
            density_ratio(p, t, e),
        )
        fallen.append(margins(profile, field, table_air).shortfall.mean())
    row = risk_of(tables["FAR", True], "risk_hourly")
    row = row[(row["month"] == 6) & (row["hour"] == 11)].iloc[0]
    assert row["n_hours"] == len(places)
    assert 0.02 < np.mean(fallen) < 0.98
    # Sampling: of 200 draws of the share, and of nine levels for all (a uniform 1/18 an hour).
    error = np.hypot(np.std(fallen) / 200**0.5, 1 / 9 / 12**0.5 / len(places) ** 0.5)
    assert row["shortfall"] == pytest.approx(np.mean(fallen), abs=3 * error)


def test_estimates_of_a_whole_run_say_how_sure_each_field_is(scene):
    study, weather, *_ = scene
    result = evaluate(study, weather)
    table = result.estimates.set_index("field")
    assert list(table.index) == ["OWN", "NEAR", "FAR"]
    assert (table.loc["OWN", ["transfer_error_k", "transfer_error_ft"]] == 0).all()
    assert table.loc["NEAR", "transfer_error_k"] > 0
    # Two stations that can serve each other's place were hidden, as far as height allows.
    assert (table["verified_stations"] == 0).all() or (table["verified_stations"] == 2).all()
    assert (table["lapse_stations"] == 0).all()  # two stations fit no lapse
    shares = result.station_use.groupby("field")["share_of_hours"].sum()
    np.testing.assert_allclose(shares, 1.0, rtol=1e-9)
