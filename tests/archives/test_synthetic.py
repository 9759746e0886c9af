"""The weather generator: invented, repeatable, and shaped like weather."""

from __future__ import annotations

import hashlib
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from climarisk.archives.synthetic import SyntheticStation, generate
from climarisk.errors import InputError
from climarisk.observations import COLUMNS

SEED = 20260
FIRST, LAST = 2010, 2024
# ISO 2533:1975, table 1: standard acceleration of free fall and specific gas constant.
G0, R_AIR = 9.80665, 287.05287

SEA = SyntheticStation("SEA", "Shore", 46.0, 10.0, 0.0, 1.0)
HILL = SyntheticStation("HILL", "Hill 30 km away", 46.2, 10.27, 1000.0, 1.0)
VALLEY = SyntheticStation("VALLEY", "Valley", 46.1, 10.1, 600.0, 1.0, valley_inversion_c=6.0)
FAR = SyntheticStation("FAR", "700 km away", 52.3, 10.0, 100.0, 1.0)
SOUTH = SyntheticStation("SOUTH", "Southern plain", -33.0, -70.0, 500.0, -4.0)
HALF = SyntheticStation("HALF", "Half-hour zone", 28.0, 77.0, 200.0, 5.5)
STATIONS = (SEA, HILL, VALLEY, FAR, SOUTH, HALF)


@pytest.fixture(scope="module")
def weather():
    return generate(STATIONS, FIRST, LAST, SEED)


def local(archive_file, station):
    """Return the hours on local standard time, without the zone."""
    hours = archive_file.hours.copy()
    hours.index = hours.index.tz_localize(None) + pd.Timedelta(hours=station.utc_offset_hours)
    return hours


def at_hour(archive_file, station, hour):
    """Return one value per day of the air temperature at a local hour, season taken out."""
    temperature = local(archive_file, station)["temperature_c"]
    # A half-hour zone has no full local hours: the hour's number decides.
    chosen = temperature[temperature.index.hour == hour]
    chosen.index = chosen.index.normalize()
    month = chosen.index.month
    return chosen - chosen.groupby(month).transform("mean")


def digest(files):
    """Return one fingerprint of all tables."""
    text = "".join(name + files[name].hours.to_csv() for name in sorted(files))
    return hashlib.sha256(text.encode()).hexdigest()


def test_generate_gives_the_same_bytes_in_another_process():
    code = (
        "from test_synthetic import SEA, HILL, digest, generate\n"
        "print(digest(generate([SEA, HILL], 2019, 2020, 5)))"
    )
    environment = dict(os.environ, PYTHONHASHSEED="1", PYTHONPATH=os.pathsep.join(sys.path))
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=Path(__file__).parent,
        env=environment,
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
    )
    assert done.stdout.strip() == digest(generate([SEA, HILL], 2019, 2020, 5))


def test_generate_with_another_seed_gives_other_weather():
    assert digest(generate([SEA], 2019, 2019, 1)) != digest(generate([SEA], 2019, 2019, 2))


def test_generate_station_does_not_depend_on_its_company_or_order():
    alone = generate([HILL], 2019, 2020, SEED)["HILL"].hours
    together = generate([FAR, HILL, SEA], 2019, 2020, SEED)["HILL"].hours
    pd.testing.assert_frame_equal(alone, together)


def test_generate_returns_the_canonical_table_and_says_it_is_invented(weather):
    for station in STATIONS:
        file = weather[station.id]
        assert list(file.hours.columns) == list(COLUMNS)
        assert str(file.hours.index.tz) == "UTC" and file.hours.index.name == "time"
        assert file.hours.index.is_monotonic_increasing and file.hours.index.is_unique
        assert "invented weather, not observations" in file.source
        assert file.notes[0][0] == "note" and "invented" in file.notes[0][2]
        assert (file.station_id, file.elevation_m) == (station.id, station.elevation_m)


@pytest.mark.parametrize("station", STATIONS, ids=lambda s: s.id)
def test_generate_covers_the_whole_local_years_with_a_few_gaps(weather, station):
    index = local(weather[station.id], station).index
    wanted = pd.date_range(f"{FIRST}-01-01", f"{LAST + 1}-01-01", freq="h", inclusive="left")
    nearest = (index + pd.Timedelta(minutes=30)).floor("h")
    present = wanted.isin(nearest)
    assert 0.97 < present.mean() < 0.995
    run = pd.Series(~present).groupby(np.cumsum(present)).sum().max()
    assert 24 <= run <= 24 * 14


def test_generate_begins_and_ends_with_the_local_years():
    # Seed without a gap at either end; the half-hour zone reaches half an hour beyond.
    files = generate(STATIONS, 2019, 2020, 3)
    for station in STATIONS:
        index = local(files[station.id], station).index
        assert pd.Timestamp(2018, 12, 31, 22) <= index[0] <= pd.Timestamp(2019, 1, 1, 0)
        assert pd.Timestamp(2020, 12, 31, 23) <= index[-1] <= pd.Timestamp(2021, 1, 1, 1)


@pytest.mark.parametrize(
    ("station", "warm", "cold"), [(SEA, 7, 1), (FAR, 7, 1), (SOUTH, 1, 7)], ids=lambda v: str(v)
)
def test_generate_warmest_month_follows_the_hemisphere(weather, station, warm, cold):
    # Warmest July and coldest January in the north, reversed in the south: common knowledge.
    temperature = local(weather[station.id], station)["temperature_c"]
    by_month = temperature.groupby(temperature.index.month).mean()
    assert by_month.idxmax() == warm
    assert by_month.idxmin() == cold


@pytest.mark.parametrize("station", [SEA, HILL, SOUTH, HALF], ids=lambda s: s.id)
def test_generate_warmest_hour_is_the_afternoon_and_coldest_is_dawn(weather, station):
    # Afternoon maximum and minimum about sunrise: common practice, no source.
    temperature = local(weather[station.id], station)["temperature_c"]
    by_hour = temperature.groupby(temperature.index.hour).mean()
    assert by_hour.idxmax() in (13, 14, 15, 16)
    assert by_hour.idxmin() in (3, 4, 5, 6, 7)


def test_generate_humidity_is_between_5_and_100_percent(weather):
    # Saturation over water: WMO-No. 8 (2018), Volume I, Annex 4.B, equation 4.B.1.
    def saturation(celsius):
        return 6.112 * np.exp(17.62 * celsius / (243.12 + celsius))

    dry = replace(SEA, id="DRY", relative_humidity_pct=10.0, diurnal_amplitude_c=10.0)
    wet = replace(SEA, id="WET", relative_humidity_pct=95.0)
    files = weather | generate([dry, wet], 2019, 2020, SEED)
    for file in files.values():
        hours = file.hours.dropna(subset=["dew_point_c"])
        assert (hours["dew_point_c"] <= hours["temperature_c"]).all()
        humidity = saturation(hours["dew_point_c"]) / saturation(hours["temperature_c"])
        # 0.1 degC steps move the humidity by less than 1 % of itself.
        assert humidity.min() > 0.0495
        assert humidity.quantile(0.9) - humidity.quantile(0.1) > 0.05


def test_generate_values_are_rounded_as_stations_report(weather):
    hours = weather["HILL"].hours
    for column in ("temperature_c", "dew_point_c", "station_pressure_hpa"):
        tenths = hours[column].dropna().to_numpy() * 10
        assert np.abs(tenths - np.round(tenths)).max() < 1e-6
    assert set(hours["wind_direction_deg"].dropna()) <= {10.0 * n for n in range(1, 37)}
    assert hours["wind_direction_deg"].isna().equals(hours["wind_speed_kt"] == 0)


def test_generate_anomalies_correlate_more_between_near_than_far_stations(weather):
    noon = {s.id: at_hour(weather[s.id], s, 12) for s in (SEA, HILL, FAR)}
    table = pd.DataFrame(noon).dropna()
    correlation = table.corr()
    assert correlation.loc["SEA", "HILL"] > 0.8
    assert abs(correlation.loc["SEA", "FAR"]) < 0.4
    assert correlation.loc["SEA", "HILL"] < 0.999


def test_generate_station_pressure_implies_the_stated_elevation(weather):
    # Hypsometric equation: AMS Glossary, "hypsometric equation"; dry air, which is 0.1-0.5 %
    # short of virtual temperature, hence up to 5 m at 1000 m.
    sea, hill = weather["SEA"].hours.mean(), weather["HILL"].hours.mean()
    middle_k = 273.15 + 0.5 * (sea["temperature_c"] + hill["temperature_c"])
    ratio = sea["station_pressure_hpa"] / hill["station_pressure_hpa"]
    assert R_AIR * middle_k / G0 * np.log(ratio) == pytest.approx(1000.0, abs=30.0)


def test_generate_station_1000_m_higher_is_cooler_by_4_to_8_k_at_midday(weather):
    low, high = (local(weather[s.id], s)["temperature_c"] for s in (SEA, HILL))
    difference = (low - high).dropna()
    midday = difference[difference.index.hour.isin([11, 12, 13])]
    by_month = midday.groupby(midday.index.month).mean()
    assert by_month.between(4.0, 8.0).all()
    night = difference[difference.index.hour.isin([3, 4, 5])].mean()
    # Night lapse is weaker than day lapse: Rolland 2003; Blandford et al. 2008, JAMC 47:249.
    assert night < midday.mean() - 1.0


def test_generate_valley_station_is_colder_on_clear_nights_only():
    slope = replace(VALLEY, valley_inversion_c=0.0)
    valley_hours = local(generate([VALLEY], 2020, 2022, SEED)["VALLEY"], VALLEY)["temperature_c"]
    slope_hours = local(generate([slope], 2020, 2022, SEED)["VALLEY"], slope)["temperature_c"]
    difference = slope_hours - valley_hours
    night = difference[difference.index.hour == 4]
    assert difference[difference.index.hour == 14].abs().max() == 0.0
    assert night.quantile(0.9) > 3.0
    assert night.quantile(0.1) < 2.0


def test_generate_years_differ_by_the_stated_spread():
    calm = replace(SEA, year_to_year_sd_c=0.0)
    varied = replace(SEA, year_to_year_sd_c=2.0)
    spreads = []
    for station in (calm, varied):
        temperature = local(generate([station], FIRST, LAST, SEED)["SEA"], station)["temperature_c"]
        spreads.append(temperature.groupby(temperature.index.year).mean().loc[FIRST:LAST].std())
    # 95 % interval of a standard deviation from 15 values: 0.73 to 1.58 times it (chi-square).
    assert 0.0 < spreads[0] < 0.6
    assert 2.0 * 0.73 < spreads[1] < 2.0 * 1.58


@pytest.mark.parametrize("station", STATIONS, ids=lambda s: s.id)
def test_generate_day_to_day_anomalies_remember_the_day_before(weather, station):
    series = at_hour(weather[station.id], station, 12).asfreq("D")
    assert 0.5 < series.autocorr(1) < 0.85


def test_generate_refuses_what_is_out_of_range_and_names_everything():
    bad = replace(SEA, latitude=123.0, relative_humidity_pct=float("nan"))
    with pytest.raises(InputError, match="first year no later") as caught:
        generate([bad, SEA], 2020, 2010, 1)
    text = str(caught.value)
    assert "SEA: latitude is 123.0; allowed is -90 to 90" in text
    assert "relative_humidity_pct is nan" in text
    assert "the id comes more than once" in text
