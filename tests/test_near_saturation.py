"""Shares of hours near saturation: plain loops, other libraries' dew points, whole studies."""

from __future__ import annotations

from calendar import monthrange
from dataclasses import replace

import numpy as np
import pytest
from study_maker import MAPPING, make_study

from climarisk.atmosphere import dew_point_c, dew_point_from_rh_c, isa_pressure_hpa
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.near_saturation import SPREADS_K, near_saturation
from climarisk.pipeline import field_tables, run_study
from climarisk.progress import quiet
from climarisk.region import Region
from climarisk.seasons import Season
from climarisk.study import read_study
from climarisk.transfer import air_at_field, candidates, on_grid
from climarisk.transfer_error import planning_error
from climarisk.verify import lapse_for
from climarisk.weather import load_weather

FIELD = Field("F", "Field", 46.5, 11.0, 500.0, "Europe/Rome")
YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
SUMMER = Season("summer", frozenset(d for d in YEAR if (6, 15) <= d <= (9, 15)))
ACROSS = Season("across", frozenset(d for d in YEAR if d >= (12, 15) or d <= (2, 10)))
SHARES = ["share_1k", "share_2_5k"]


def scene(first_year, last_year, window="all", field=FIELD):
    grid = hour_grid(first_year, last_year)
    clock = local_clock(field, grid, first_year, last_year)
    return clock, in_window(window, field, grid, clock)


def gappy(clock, n_levels=1, seed=3):
    """Return invented spreads to a tenth with single gaps and two missing stretches."""
    draw = np.random.default_rng(seed)
    n = len(clock.hour)
    spread = np.round(draw.gamma(2.0, 1.5, n), 1)
    spread[draw.random(n) < 0.12] = np.nan
    spread[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)] = np.nan
    spread[(clock.month == 1) & (clock.hour == 5)] = np.nan
    moves = {1: [0.0], 3: [-1.23, 0.12, 1.34]}[n_levels]
    return np.array([np.maximum(spread + move, 0.0) for move in moves])


def counting_cells(spread, clock):
    """Return the (year, month, hour) cells with a value on 80 % of the days, by a plain count."""
    days: dict[tuple[int, int, int], int] = {}
    for value, inside, *cell in zip(
        spread[0].tolist(),
        clock.in_period.tolist(),
        clock.year.tolist(),
        clock.month.tolist(),
        clock.hour.tolist(),
        strict=True,
    ):
        if inside and value == value:
            days[tuple(cell)] = days.get(tuple(cell), 0) + 1
    return {
        (y, m, h)
        for (y, m, h), n in days.items()
        if 5 * n >= 4 * monthrange(clock.first_year + y, m + 1)[1]
    }


def plain_shares(spread, clock, inside, key, doubt_k=0.0):
    """Return {key: (hours, years, share <= 1 K, share <= 2.5 K)} by plain loops."""
    cells, groups = counting_cells(spread, clock), {}
    year, month, hour = clock.year.tolist(), clock.month.tolist(), clock.hour.tolist()
    day = clock.day_of_month.tolist()
    for i in range(len(hour)):
        known = clock.in_period[i] and spread[0, i] == spread[0, i]
        if known and inside[i] and (year[i], month[i], hour[i]) in cells:
            name = key(month[i] + 1, day[i], hour[i])
            if name is not None:
                groups.setdefault(name, []).append(i)
    table = {}
    for name, places in groups.items():
        values = [float(row[i]) for i in places for row in spread]
        near = [sum(v <= limit + doubt_k for v in values) / len(values) for limit in (1.0, 2.5)]
        table[name] = (len(places), len({year[i] for i in places}), *near)
    return table


def figures(table, *keys):
    """Return {key: (hours, years, shares)} of the rows that have hours."""
    return {
        tuple(row[k] for k in keys): (row["n_hours"], row["n_years"], *(row[c] for c in SHARES))
        for row in table[table["n_hours"] > 0].to_dict("records")
    }


# ---- plain loops -----------------------------------------------------------------------------


def test_spreads_are_one_and_two_and_a_half_kelvins():
    # Common practice for fog and low stratus, no source.
    assert SPREADS_K == {"share_1k": 1.0, "share_2_5k": 2.5}


@pytest.mark.parametrize("n_levels", [1, 3])
@pytest.mark.parametrize("window", ["all", (6, 20), (21, 3), "daylight"])
def test_shares_equal_a_plain_loop(window, n_levels):
    clock, inside = scene(2018, 2020, window)
    spread = gappy(clock, n_levels)
    monthly, hourly, seasonal = near_saturation(spread, clock, inside, [SUMMER, ACROSS])
    case = spread, clock
    assert figures(monthly, "month") == plain_shares(*case, inside, lambda m, d, h: (m,))
    # Month x hour cells take all hours, whatever the window.
    everything = np.ones(len(inside), bool)
    expected = plain_shares(*case, everything, lambda m, d, h: (m, h))
    assert figures(hourly, "month", "hour") == expected
    assert {years for _, years, _, _ in expected.values()} >= {2, 3}
    assert (2, 5) not in expected and len(expected) > 280
    for season in (SUMMER, ACROSS):
        got = figures(seasonal[seasonal["season"] == season.name], "season")
        days = season.days
        assert got == plain_shares(
            *case,
            inside,
            lambda m, d, h, days=days, name=season.name: (name,) if (m, d) in days else None,
        )


@pytest.mark.parametrize("window", ["all", (6, 20), "daylight"])
def test_coverage_equals_a_plain_count(window):
    clock, inside = scene(2018, 2020, window)
    spread = gappy(clock)
    monthly, hourly, seasonal = near_saturation(spread, clock, inside, [SUMMER, ACROSS])
    cells = counting_cells(spread, clock)
    hours = [
        (y, m, h, (m + 1, d))
        for y, m, h, d, ok in zip(
            clock.year.tolist(),
            clock.month.tolist(),
            clock.hour.tolist(),
            clock.day_of_month.tolist(),
            (inside & clock.in_period).tolist(),
            strict=True,
        )
        if ok
    ]
    for month in range(12):
        touched = {(y, m, h) for y, m, h, _ in hours if m == month}
        assert monthly["coverage"][month] == len(touched & cells) / len(touched)
    for row in hourly.itertuples():
        years = [y for y in range(3) if (y, row.month - 1, row.hour) in cells]
        assert (row.n_years, row.coverage) == (len(years), len(years) / 3)
    for row, season in zip(seasonal.itertuples(), (SUMMER, ACROSS), strict=True):
        own = [(y, m, h) in cells for y, m, h, day in hours if day in season.days]
        assert row.coverage == sum(own) / len(own)


def test_tables_have_a_row_for_every_cell_in_order():
    clock, inside = scene(2020, 2020)
    monthly, hourly, seasonal = near_saturation(gappy(clock), clock, inside, [ACROSS, SUMMER])
    assert monthly["month"].tolist() == list(range(1, 13))
    cells = [[m, h] for m in range(1, 13) for h in range(24)]
    assert hourly[["month", "hour"]].to_numpy().tolist() == cells
    assert seasonal["season"].tolist() == ["across", "summer"]


# ---- no data ---------------------------------------------------------------------------------


def test_no_data_has_no_share_and_is_never_zero():
    clock, inside = scene(2019, 2020)
    nothing = np.full((1, len(inside)), np.nan)
    for table in near_saturation(nothing, clock, inside, [SUMMER, ACROSS]):
        assert (table[["n_hours", "n_years", "coverage"]] == 0).all().all()
        assert table[SHARES].isna().all().all()


def test_month_outside_the_window_has_no_share():
    # Polar night: no hour of December is civil daylight at 85 N.
    clock, inside = scene(2019, 2019, "daylight", replace(FIELD, latitude=85.0, timezone="Etc/GMT"))
    dry = np.full((1, len(inside)), 9.0)
    monthly, _, _ = near_saturation(dry, clock, inside, [SUMMER])
    assert monthly["n_hours"][11] == 0 and monthly[SHARES].iloc[11].isna().all()
    assert monthly["n_hours"][5] == 720 and (monthly[SHARES].iloc[5] == 0.0).all()


def test_hours_outside_the_period_and_of_incomplete_years_do_not_enter():
    clock, inside = scene(2018, 2020)
    spread = np.where(clock.in_period, 5.0, 0.0)
    saturated = (clock.year == 1) & (clock.month == 6)
    spread[saturated] = np.where(clock.day_of_month[saturated] <= 24, 0.0, np.nan)
    monthly, hourly, _ = near_saturation(spread[None], clock, inside, [SUMMER])
    # 24 of 31 days are below 80 %: July 2019 does not count, foggy as it was.
    assert (monthly[SHARES] == 0.0).all().all()
    assert (monthly["n_hours"][6], monthly["n_years"][6]) == (2 * 744, 2)
    assert monthly["coverage"][6] == pytest.approx(2 / 3)
    assert set(hourly[hourly["month"] == 7]["n_hours"]) == {62}


# ---- edges and laws --------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("spread", "shares"),
    [(0.0, [1, 1]), (1.0, [1, 1]), (1.1, [0, 1]), (2.5, [0, 1]), (2.6, [0, 0])],
)
def test_the_limits_themselves_are_near_saturation(spread, shares):
    clock, inside = scene(2020, 2020)
    for table in near_saturation(np.full((1, len(inside)), spread), clock, inside, [SUMMER]):
        assert (table[SHARES] == shares).all().all()


def test_narrow_share_is_never_above_the_wide_one():
    clock, inside = scene(2018, 2020, (6, 20))
    for n_levels in (1, 3):
        for table in near_saturation(gappy(clock, n_levels), clock, inside, [SUMMER, ACROSS]):
            known = table[table["n_hours"] > 0]
            assert known[SHARES].map(lambda v: 0.0 <= v <= 1.0).all().all()
            assert (known["share_1k"] <= known["share_2_5k"]).all()
            assert (known["share_1k"] < known["share_2_5k"]).any()


def test_share_over_levels_is_the_mean_of_the_shares_at_each():
    clock, inside = scene(2018, 2020)
    spread = gappy(clock, 3)
    together = near_saturation(spread, clock, inside, [SUMMER, ACROSS])
    single = [near_saturation(row[None], clock, inside, [SUMMER, ACROSS]) for row in spread]
    for i, table in enumerate(together):
        for column in SHARES:
            mean = np.mean([tables[i][column] for tables in single], axis=0)
            np.testing.assert_allclose(table[column], mean, rtol=1e-12)
        for column in ("n_hours", "n_years", "coverage"):
            assert table[column].equals(single[0][i][column])


def test_season_that_is_a_month_has_the_months_figures():
    clock, inside = scene(2018, 2020, (6, 20))
    october = Season("October", frozenset(d for d in YEAR if d[0] == 10))
    monthly, _, seasonal = near_saturation(gappy(clock, 3), clock, inside, [october])
    columns = ["n_hours", "n_years", "coverage", *SHARES]
    assert seasonal[columns].iloc[0].tolist() == monthly[columns].iloc[9].tolist()


def test_seasons_that_part_the_year_add_up_to_its_months():
    clock, inside = scene(2018, 2020, "daylight")
    rest = Season("rest", YEAR - SUMMER.days - ACROSS.days)
    monthly, _, seasonal = near_saturation(
        gappy(clock), clock, inside, [SUMMER, ACROSS, rest, Season("year", YEAR)]
    )
    assert seasonal["n_hours"][:3].sum() == seasonal["n_hours"][3] == monthly["n_hours"].sum()
    for column in SHARES:
        near = (seasonal[column] * seasonal["n_hours"]).round().astype(int)
        assert near[:3].sum() == near[3] == (monthly[column] * monthly["n_hours"]).round().sum()


# ---- dew points of other libraries -----------------------------------------------------------

# A January whose day d has 4 + d degC and whose hour h has 77 + h % relative humidity.
TEMPERATURES, HUMIDITIES = np.arange(5.0, 36.0), np.arange(77.0, 101.0)


def metpy_dew_point():
    calc = pytest.importorskip("metpy.calc")
    from metpy.units import units

    t, rh = np.meshgrid(TEMPERATURES, HUMIDITIES, indexing="ij")
    return calc.dewpoint_from_relative_humidity(t * units.degC, rh * units.percent).m_as("degC")


def psychrolib_dew_point():
    psychrolib = pytest.importorskip("psychrolib")
    psychrolib.SetUnitSystem(psychrolib.SI)
    return np.array(
        [
            [psychrolib.GetTDewPointFromRelHum(t, rh / 100) for rh in HUMIDITIES]
            for t in TEMPERATURES
        ]
    )


@pytest.mark.parametrize("library", [metpy_dew_point, psychrolib_dew_point])
def test_shares_by_humidity_agree_with_the_dew_points_of_another_library(library):
    # PsychroLib (ASHRAE Handbook 2017, Hyland-Wexler) and MetPy against Buck 1981.
    clock, inside = scene(2019, 2019, field=replace(FIELD, timezone="Etc/GMT"))
    january = clock.in_period & (clock.month == 0)
    t = TEMPERATURES[clock.day_of_month[january] - 1]
    rh = HUMIDITIES[clock.hour[january]]
    ours = np.full(len(inside), np.nan)
    ours[january] = t - dew_point_from_rh_c(t, rh)
    theirs = TEMPERATURES[:, None] - library()
    # The formulas differ by 0.015 K here; MetPy goes there by one formula and back by another,
    # so that its saturated air has a spread of its own of up to 0.07 K.
    doubt = 0.015 + np.abs(theirs[:, -1:])
    assert doubt.max() < 0.1
    _, hourly, _ = near_saturation(ours[None], clock, inside, [SUMMER])
    own = hourly[hourly["month"] == 1]
    for column, limit in (("share_1k", 1.0), ("share_2_5k", 2.5)):
        near = (own[column] * 31).round().to_numpy()
        least, most = ((theirs <= limit + s * doubt).sum(axis=0) for s in (-1, 1))
        assert ((least <= near) & (near <= most)).all()
        # The doubt decides about few of the 744 hours; most are near for sure or not at all.
        assert (most - least).sum() <= 40
        assert least.sum() > 100 and (31 - most).sum() > 100


def test_saturated_air_is_always_near_saturation_and_half_saturated_air_never():
    clock, inside = scene(2019, 2019)
    t = 15.0 + 20.0 * np.sin(np.arange(len(inside)) / 500.0)
    for rh, share in ((100.0, 1.0), (50.0, 0.0)):
        spread = np.maximum(t - dew_point_from_rh_c(t, np.full_like(t, rh)), 0.0)
        # 100 % is by definition a dew point equal to the temperature (WMO-No. 8).
        assert rh < 100.0 or spread.max() < 1e-9
        for table in near_saturation(spread[None], clock, inside, [SUMMER]):
            assert (table[SHARES] == share).all().all()


# ---- whole studies ---------------------------------------------------------------------------

AT_PASS = """\
id,name,latitude,longitude,elevation_m,timezone,stations
TOP,At the pass (invented),46.58,11.18,{elevation_m},Etc/GMT,PASS
"""


def study_of_spreads(study_folder, spreads, elevation_m=1500):
    """Write a study of one field on its station that reports these spreads (K) by year."""
    study = study_folder("files").write("fields.csv", AT_PASS.format(elevation_m=elevation_m))
    runways = (study.folder / "runways.csv").read_text().splitlines()
    study.write("runways.csv", "\n".join(r for r in runways if r[:3] in ("fie", "TOP")) + "\n")
    head, *rows = (study.folder / "archive" / "pass.txt").read_text().splitlines()
    lines = [head]
    for row in rows:
        day, clock, air, _, pressure = row.split(";")
        dew = round(float(air) * 10) - round(spreads[day[:4]] * 10)
        lines.append(f"{day};{clock};{air};{dew / 10:.1f};{pressure}")
    study.write("archive/pass.txt", "\n".join(lines) + "\n").write("mapping.toml", MAPPING)
    return study


@pytest.mark.parametrize("elevation_m", [1500, 1490])
@pytest.mark.parametrize(
    ("near", "far", "column"),
    [(0.0, 1.1, "share_1k"), (1.0, 1.1, "share_1k"), (2.5, 2.6, "share_2_5k")],
)
def test_reported_tenths_at_the_limit_count_every_time(
    study_folder, near, far, column, elevation_m
):
    # Archives report tenths (or whole degrees), so spreads of exactly 1.0 and 2.5 K are common;
    # no rounding on the way through the vapour pressure may decide about them.
    study = study_of_spreads(study_folder, {"2021": near, "2022": far}, elevation_m)
    result = run_study(study.file)
    for table in (result.near_saturation_monthly, result.near_saturation_hourly):
        assert (table["n_hours"] > 0).all()
        assert (table[column] == 0.5).all()  # 2021 and 2022 have equally many hours
    other = "share_2_5k" if column == "share_1k" else "share_1k"
    expected = 1.0 if other == "share_2_5k" else 0.0
    assert (result.near_saturation_monthly[other] == expected).all()


PLANNED = planning_error()
FIELDS = """\
id,name,latitude,longitude,elevation_m,timezone,stations
OWN,On its station (invented),46.51,11.02,480,Europe/Rome,
FAR,Far from any (invented),46.85,11.40,1000,Europe/Rome,
"""


@pytest.fixture(scope="module")
def carried(tmp_path_factory):
    """A study, its stations on the grid, and its fields' tables with and without an error."""
    made = make_study(tmp_path_factory.mktemp("carried") / "study").write("fields.csv", FIELDS)
    runways = (made.folder / "runways.csv").read_text().replace("LOW", "OWN").replace("TOP", "FAR")
    kept = [r for r in runways.splitlines() if not r.startswith("MID")]
    study = read_study(made.write("runways.csv", "\n".join(kept) + "\n").file)
    grid = hour_grid(study.first_year, study.last_year)
    weather = load_weather(study, None, quiet)
    airs = [on_grid(s.station, s.hours, grid, s.elevation_trusted) for s in weather.stations]
    none = replace(PLANNED, scale=np.zeros((12, 2)))
    frames = {
        (field.id, error is PLANNED): field_tables(
            study, field, Region(grid, tuple(airs), error)
        ).frames
        for field in study.fields
        for error in (PLANNED, none)
    }
    return study, grid, airs, frames


def test_carried_air_is_counted_at_every_level_of_its_error(carried):
    study, grid, airs, frames = carried
    (field,) = (f for f in study.fields if f.id == "FAR")
    clock = local_clock(field, grid, study.first_year, study.last_year)
    lapse = lapse_for(field, airs, clock, study.radius_km)
    air = air_at_field(field, candidates(field, airs, study.radius_km), airs, clock, lapse)
    sd_k = PLANNED.sd_k(air.carried_m, clock.month, clock.hour, air.carried_km)
    # The vapour stays while the temperature moves, at most up to saturation: spread 0.
    known_hpa = np.where(np.isfinite(air.pressure_hpa), air.pressure_hpa, isa_pressure_hpa(1000.0))
    dew_point = dew_point_c(air.vapour_pressure_hpa, known_hpa)
    spread = np.array(
        [np.maximum(air.temperature_c + x * sd_k - dew_point, 0.0) for x in PLANNED.hour_levels]
    )
    assert len(spread) == 9
    inside = in_window(study.window, field, grid, clock)
    got = figures(frames["FAR", True]["near_saturation_monthly"], "month")
    # Thousandths are finer than any thermometer: they may fall on either side of the limit.
    least, most = (
        plain_shares(spread, clock, inside, lambda m, d, h: (m,), doubt) for doubt in (-1e-3, 1e-3)
    )
    assert set(got) == set(least) == {(m,) for m in range(1, 13)}
    for month, (n_hours, n_years, *shares) in got.items():
        assert (n_hours, n_years) == least[month][:2]
        for low, share, high in zip(least[month][2:], shares, most[month][2:], strict=True):
            assert low - 1e-12 <= share <= high + 1e-12
            assert high - low < 0.003
    # The shares move with the error, the hours that enter do not.
    plain = figures(frames["FAR", False]["near_saturation_monthly"], "month")
    assert {m: row[:2] for m, row in got.items()} == {m: row[:2] for m, row in plain.items()}
    assert got != plain


def test_error_of_the_transfer_changes_nothing_on_the_own_station(carried):
    frames = carried[-1]
    for name in ("monthly", "hourly", "seasonal"):
        table = f"near_saturation_{name}"
        assert frames["OWN", True][table].equals(frames["OWN", False][table])
        assert frames["OWN", True][table][SHARES].notna().all().all()


def test_humidity_and_near_saturation_rest_on_the_same_hours(carried):
    for frames in carried[-1].values():
        for name in ("monthly", "hourly", "seasonal"):
            humidity = frames[f"distributions_{name}"]
            humidity = humidity[humidity["variable"] == "relative_humidity"].reset_index(drop=True)
            for column in ("n_hours", "n_years", "coverage"):
                assert humidity[column].equals(frames[f"near_saturation_{name}"][column])
