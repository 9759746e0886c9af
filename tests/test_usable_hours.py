"""Hours offered by the calendar and the sun, and those of them that are usable."""

from __future__ import annotations

import csv
import re
from calendar import monthrange
from datetime import date
from pathlib import Path

import numpy as np
import pytest
from study_maker import make_study, study_toml

from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.performance import CHECKS, Margins
from climarisk.pipeline import run_study
from climarisk.risk import Hours, risk_tables
from climarisk.seasons import Season

YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
ALL_YEAR = Season("year", YEAR)
SUMMER = Season("summer", frozenset(d for d in YEAR if (6, 15) <= d <= (9, 15)))
ACROSS = Season("across", frozenset(d for d in YEAR if d >= (12, 15) or d <= (2, 10)))
REFERENCE = Path(__file__).parent / "reference" / "daylight_check_values.csv"


def place(latitude=46.5, longitude=7.5, zone="Etc/GMT"):
    return Field("F", "Field", latitude, longitude, 500.0, zone)


def margins_of(margin):
    """Return margins whose first check has these."""
    checks = np.full((len(CHECKS), len(margin)), np.inf, np.float32)
    checks[0] = margin
    return Margins(margin, margin < 0, margin < -0.9, np.zeros(len(margin), np.int8), checks)


def tables(first_year, last_year, window="all", field=None, margin=None, seasons=(ALL_YEAR,)):
    """Return the risk tables where `margin` tells the margin of the hours of a clock."""
    field = field or place()
    grid = hour_grid(first_year, last_year)
    clock = local_clock(field, grid, first_year, last_year)
    values = np.full(len(grid), 0.5) if margin is None else margin(clock)
    known = np.flatnonzero(np.isfinite(values) & clock.in_period)
    central = margins_of(values[known])
    hours = Hours(clock, known, central, in_window(window, field, grid, clock), 0.9)
    return risk_tables(hours, seasons)


def gappy(clock):
    """Return margins with gaps, a July cut short and no value at 5 h in February."""
    draw = np.random.default_rng(4)
    margin = draw.normal(0.1, 0.2, len(clock.hour))
    margin[draw.random(len(margin)) < 0.1] = np.nan
    margin[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)] = np.nan
    margin[(clock.month == 1) & (clock.hour == 5)] = np.nan
    return margin


# ---- hours offered: the calendar -------------------------------------------------------------


def test_month_offers_its_days_times_the_hours_of_the_window():
    # 2018-2020: two Februaries of 28 days and one of 29 (Gregorian calendar).
    days = [31, 85 / 3, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31]
    for window, hours in (("all", 24), ((6, 20), 15), ((9, 9), 1), ((21, 3), 7)):
        monthly, hourly, seasonal = tables(2018, 2020, window)
        np.testing.assert_allclose(monthly["hours_offered"], np.array(days) * hours, rtol=1e-14)
        # Month x hour cells take every hour, whatever the window.
        np.testing.assert_allclose(hourly["hours_offered"], np.repeat(days, 24), rtol=1e-14)
        assert seasonal["hours_offered"][0] == pytest.approx((365 + 365 + 366) / 3 * hours)


def test_leap_february_is_offered_whole_in_a_study_of_one_year():
    monthly, hourly, _ = tables(2020, 2020)
    assert monthly["hours_offered"][1] == 29 * 24 == 696
    assert set(hourly[hourly["month"] == 2]["hours_offered"]) == {29.0}
    assert tables(2021, 2021)[0]["hours_offered"][1] == 28 * 24 == 672


def test_season_offers_its_days_across_new_year_too():
    _, _, seasonal = tables(2018, 2020, (6, 20), seasons=(SUMMER, ACROSS))
    # 15 June to 15 September: 16 + 31 + 31 + 15 days; 15 December to 10 February: 17 + 31 + 10.
    assert (date(2019, 9, 15) - date(2019, 6, 15)).days + 1 == 93
    assert (date(2020, 2, 10) - date(2019, 12, 15)).days + 1 == 58
    assert seasonal["hours_offered"].tolist() == [93 * 15, 58 * 15]


@pytest.mark.parametrize("zone", ["Asia/Kolkata", "Pacific/Kiritimati", "America/St_Johns"])
def test_zone_does_not_change_what_the_calendar_offers(zone):
    # UTC+5:30, +14 and -3:30 (IANA): the local year has 8760 hours there as elsewhere.
    monthly, _, seasonal = tables(2019, 2019, field=place(zone=zone))
    assert monthly["hours_offered"].tolist() == [24 * monthrange(2019, m)[1] for m in range(1, 13)]
    assert seasonal["hours_offered"].tolist() == [8760]


def test_hours_offered_do_not_depend_on_the_record():
    for window in ("all", (6, 20), "daylight"):
        full = tables(2018, 2020, window, seasons=(SUMMER, ACROSS))
        holes = tables(2018, 2020, window, margin=gappy, seasons=(SUMMER, ACROSS))
        none = tables(
            2018,
            2020,
            window,
            margin=lambda c: np.full(len(c.hour), np.nan),
            seasons=(SUMMER, ACROSS),
        )
        for whole, partly, empty in zip(full, holes, none, strict=True):
            assert whole["hours_offered"].equals(partly["hours_offered"])
            assert whole["hours_offered"].equals(empty["hours_offered"])
            assert (whole["n_hours"] > partly["n_hours"]).all()


def test_months_add_up_to_the_seasons_that_part_the_year_and_cells_to_the_months():
    rest = Season("rest", YEAR - SUMMER.days - ACROSS.days)
    monthly, hourly, seasonal = tables(
        2018, 2020, (6, 20), margin=gappy, seasons=(SUMMER, ACROSS, rest, ALL_YEAR)
    )
    offered = seasonal["hours_offered"]
    assert offered[:3].sum() == pytest.approx(offered[3], rel=1e-14)
    assert monthly["hours_offered"].sum() == pytest.approx(offered[3], rel=1e-14)
    inside = hourly[hourly["hour"].between(6, 20)].groupby("month")["hours_offered"].sum()
    np.testing.assert_allclose(inside, monthly["hours_offered"], rtol=1e-14)


@pytest.mark.parametrize(
    ("window", "inside"),
    [
        ("all", range(24)),
        ((6, 20), range(6, 21)),
        ((9, 9), [9]),
        ((21, 3), [21, 22, 23, 0, 1, 2, 3]),
    ],
)
def test_cells_say_which_hours_of_the_day_a_window_of_full_hours_holds(window, inside):
    _, hourly, _ = tables(2018, 2020, window, margin=gappy)
    expected = [1.0 if hour in inside else 0.0 for hour in range(24)] * 12
    assert hourly["in_window"].tolist() == expected


def test_hours_of_the_cells_inside_the_window_are_those_of_the_month():
    monthly, hourly, _ = tables(2018, 2020, "daylight", margin=gappy)
    assert hourly["in_window"].between(0, 1).all()
    inside = (hourly["hours_offered"] * hourly["in_window"]).groupby(hourly["month"]).sum()
    np.testing.assert_allclose(inside, monthly["hours_offered"], rtol=1e-12)
    # Noon is always day at 46.5 N and midnight never; at dawn some days of March are.
    by_cell = hourly.set_index(["month", "hour"])["in_window"]
    assert (by_cell[:, 12] == 1.0).all() and (by_cell[:, 0] == 0.0).all()
    dawn = by_cell[3]
    assert dawn.between(0, 1, inclusive="neither").any()


# ---- hours offered: the sun ------------------------------------------------------------------

PLACES = [(46.5, 7.5), (-44.5, 169.0), (0.0, 37.0), (60.2, 11.1), (39.22, -106.87)]


@pytest.mark.parametrize(("latitude", "longitude"), PLACES)
def test_daylight_hours_of_each_month_agree_with_the_solar_position_algorithm(latitude, longitude):
    # pvlib's NREL SPA (Reda and Andreas 2004), geometric centre of the sun, -6 degrees (civil
    # twilight, ICAO Annex 1); the low-precision position agrees with it to 0.02 degrees.
    solarposition = pytest.importorskip("pvlib.solarposition")
    import pandas as pd

    offset = round(longitude / 15)
    monthly, hourly, _ = tables(
        2023, 2024, "daylight", place(latitude, longitude, f"Etc/GMT{-offset:+d}")
    )
    local = pd.date_range("2023-01-01", "2024-12-31 23:00", freq="h", tz="UTC")
    times = local - pd.Timedelta(hours=offset)
    elevation = solarposition.get_solarposition(times, latitude, longitude)["elevation"].to_numpy()
    for month in range(1, 13):
        own = elevation[local.month == month]
        least, most = (own >= -6 + 0.02).sum() / 2, (own >= -6 - 0.02).sum() / 2
        assert most - least <= 3  # those 0.02 degrees decide about few hours of the 300 to 700
        assert least <= monthly["hours_offered"][month - 1] <= most
    assert (hourly["hours_offered"] >= 28).all()  # no window there


with REFERENCE.open(encoding="utf-8", newline="") as stream:
    ROWS = list(csv.DictReader(stream))
RISES = [row for row in ROWS if row["quantity"] == "civilrise"]


@pytest.mark.parametrize("row", RISES, ids=lambda row: row["id"])
def test_daylight_hours_of_a_day_are_the_full_hours_between_its_published_twilights(row):
    # The table of reference values names pvlib's NREL SPA as its source, to half a minute.
    latitude, longitude, day = re.match(
        r"lat=(\S+); lon=(\S+); date=(\S+) UTC day", row["inputs"]
    ).groups()
    key = row["id"].replace("civilrise", "civilset")
    (setting,) = (r for r in ROWS if r["id"] == key)
    offset = round(float(longitude) / 15)
    rise, end = (float(r["expected"]) + 60 * offset for r in (row, setting))
    assert 0 < rise < end < 24 * 60, "one local day holds both"
    # The reference is good to half a minute, which decides about the hours next to it.
    least, most = (
        sum(rise + doubt <= 60 * hour <= end - doubt for hour in range(24)) for doubt in (0.5, -0.5)
    )
    assert 8 <= least <= most <= least + (row["id"].startswith("SUN-E0-24-06"))
    year, month, dom = (int(part) for part in day.split("-"))
    one_day = Season("day", frozenset({(month, dom)}))
    field = place(float(latitude), float(longitude), f"Etc/GMT{-offset:+d}")
    _, _, seasonal = tables(year, year, "daylight", field, seasons=(one_day,))
    assert least <= seasonal["hours_offered"][0] <= most


def test_polar_night_offers_nothing_and_midnight_sun_everything():
    # At 85 N the sun stays 18 degrees below the horizon in December and above it in June.
    monthly, _, _ = tables(2019, 2019, "daylight", place(85.0, 0.0))
    december, june = monthly.iloc[11], monthly.iloc[5]
    assert december["hours_offered"] == 0 and np.isnan(december["shortfall"])
    assert june["hours_offered"] == 720 == june["usable_hours"]


# ---- usable hours ----------------------------------------------------------------------------


@pytest.mark.parametrize("window", ["all", (6, 20), "daylight"])
def test_usable_hours_are_the_offered_ones_at_the_share_that_does_not_fall_short(window):
    for table in tables(2018, 2020, window, margin=gappy, seasons=(SUMMER, ACROSS)):
        for row in table.itertuples():
            if row.n_hours == 0:
                assert np.isnan(row.usable_hours) and row.hours_offered > 0
                continue
            assert row.usable_hours == pytest.approx(row.hours_offered * (1 - row.shortfall))
            assert 0 < row.usable_hours < row.hours_offered
        assert (table["n_hours"] > 0).sum() >= len(table) - 6


def test_all_hours_are_usable_without_a_shortfall_and_none_with_nothing_else():
    for margin, share in ((0.1, 1.0), (-0.1, 0.0)):
        for table in tables(2019, 2020, margin=lambda c, m=margin: np.full(len(c.hour), m)):
            assert (table["usable_hours"] == share * table["hours_offered"]).all()


def test_missing_hours_are_usable_as_often_as_the_known_ones():
    # July noon: of 31 days 25 are known (81 %, so they count), five of them fall short.
    def margin(clock):
        value = np.where(clock.day_of_month <= 5, -0.1, 0.1)
        return np.where(clock.day_of_month <= 25, value, np.nan)

    _, hourly, _ = tables(2019, 2019, margin=margin)
    row = hourly[(hourly["month"] == 7) & (hourly["hour"] == 12)].iloc[0]
    assert (row["n_hours"], row["hours_offered"]) == (25, 31)
    assert row["usable_hours"] == pytest.approx(31 * 20 / 25)


def test_usable_hours_carry_the_error_of_the_transfer():
    # As estimated nothing falls short; at one of three equally likely levels everything does.
    clock = local_clock(place(), hour_grid(2019, 2019), 2019, 2019)
    known = np.flatnonzero(clock.in_period)
    levels = [margins_of(np.full(len(known), m)) for m in (-0.1, 0.1, 0.3)]
    everything = np.ones(len(clock.hour), bool)
    hours = Hours(clock, known, levels[1], everything, 0.9, levels)
    for table in risk_tables(hours, [SUMMER]):
        assert (table["shortfall_central"] == 0.0).all()
        np.testing.assert_allclose(table["usable_hours"], table["hours_offered"] * 2 / 3)


def test_month_of_no_known_hour_has_no_usable_hours_and_not_all_of_them():
    monthly, _, _ = tables(2019, 2020, margin=lambda c: np.where(c.month == 6, np.nan, 0.1))
    july, august = monthly.iloc[6], monthly.iloc[7]
    assert july["hours_offered"] == august["hours_offered"] == 744
    assert np.isnan(july["usable_hours"]) and august["usable_hours"] == 744


def test_whole_study_offers_every_aircraft_the_same_hours(tmp_path):
    study = make_study(tmp_path / "study").write("study.toml", study_toml("synthetic", 2020, 2021))
    study.change("study.toml", "window = [6, 20]", 'window = "daylight"')
    result = run_study(study.file)
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        table = getattr(result, name)
        both = [
            table[table["aircraft"] == a]["hours_offered"].tolist() for a in ("trainer", "tourer")
        ]
        assert both[0] == both[1]
        known = table[table["n_hours"] > 0]
        assert len(known)
        expected = known["hours_offered"] * (1 - known["shortfall"])
        np.testing.assert_allclose(known["usable_hours"], expected, rtol=1e-14)
        assert table.loc[table["n_hours"] == 0, "usable_hours"].isna().all()
    monthly = result.risk_monthly.set_index(["field", "aircraft", "month"])["hours_offered"]
    # At 46.5 N civil daylight lasts 9.7 h at the winter and 17.1 h at the summer solstice
    # (reference rows SUN-A45N), so December offers some 10 and June some 17 hours a day.
    assert 9.3 * 31 < monthly["LOW", "trainer", 12] < 10.7 * 31
    assert 16.3 * 30 < monthly["LOW", "trainer", 6] < 17.7 * 30
