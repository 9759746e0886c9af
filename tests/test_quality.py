"""Quality control: each check rejects what it is for, and healthy weather passes untouched."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from climarisk import quality
from climarisk.archives import parse_archive
from climarisk.archives.synthetic import SyntheticStation, generate
from climarisk.atmosphere import isa_pressure_hpa
from climarisk.observations import COLUMNS, join_files
from climarisk.stations import Station, read_stations


def station(identifier="S", elevation_m=800.0, latitude=40.0, longitude=-105.0, **changes):
    return Station(identifier, identifier, latitude, longitude, elevation_m, "synthetic", **changes)


def weather(elevation_m=800.0, years=(2019, 2019), seed=3, latitude=40.0, **climate):
    """Return a year of invented hours without anything wrong in them, gaps apart."""
    one = SyntheticStation("S", "S", latitude, -105.0, elevation_m, -7.0, **climate)
    return generate([one], *years, seed)["S"].hours


def flat(n_hours, start="2020-01-01", **columns):
    """Return consecutive hours with the given columns and nothing else."""
    index = pd.date_range(start, periods=n_hours, freq="h", tz="UTC", unit="s", name="time")
    table = pd.DataFrame(np.nan, index=index, columns=list(COLUMNS))
    for name, values in columns.items():
        table[name] = values
    return table


def controlled(hours, where=None):
    """Return the checked hours and the findings as {check: finding}."""
    checked, findings = quality.control(where or station(), hours)
    assert {f.severity for f in findings} <= {"reject"}
    return checked, {f.check: f for f in findings}


def daily_wave(n_hours, mean=10.0, amplitude=5.0):
    hours = np.arange(n_hours)
    return mean + amplitude * np.sin(2 * np.pi * hours / 24) + 0.01 * (hours % 7)


# ---- healthy weather -------------------------------------------------------------------------

CLIMATES = {
    "mid-latitude": {},
    "arctic": {"latitude": 78.0, "mean_temperature_sea_level_c": -25.0, "diurnal_amplitude_c": 1.0},
    "humid tropics": {
        "latitude": 2.0,
        "mean_temperature_sea_level_c": 27.0,
        "seasonal_amplitude_c": 1.0,
        "day_to_day_sd_c": 0.6,
        "relative_humidity_pct": 90.0,
    },
    "desert": {
        "mean_temperature_sea_level_c": 28.0,
        "diurnal_amplitude_c": 10.0,
        "relative_humidity_pct": 10.0,
    },
    "valley floor": {"valley_inversion_c": 12.0, "day_to_day_sd_c": 6.0},
}


@pytest.mark.parametrize("climate", CLIMATES.values(), ids=CLIMATES)
@pytest.mark.parametrize("elevation_m", [0.0, 2500.0])
def test_healthy_weather_is_untouched(climate, elevation_m):
    hours = weather(elevation_m, **climate)
    checked, findings = controlled(hours)
    assert not findings
    pd.testing.assert_frame_equal(checked, hours)


def test_control_does_not_change_its_argument():
    hours = flat(10, temperature_c=99.0)
    before = hours.copy()
    quality.control(station(), hours)
    pd.testing.assert_frame_equal(hours, before)


def test_nothing_at_all_passes():
    checked, findings = controlled(flat(0))
    assert checked.empty and not findings
    assert not controlled(flat(500))[1]


# ---- single values ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("column", "wrong"),
    [
        ("temperature_c", 61.0),
        ("temperature_c", -91.0),
        ("dew_point_c", 39.0),
        ("relative_humidity_pct", 0.0),
        ("relative_humidity_pct", 106.0),
        ("station_pressure_hpa", 440.0),
        ("station_pressure_hpa", 9999.0),
        ("qnh_hpa", 859.0),
        ("sea_level_pressure_hpa", 1091.0),
        ("wind_speed_kt", 999.0),
        ("wind_direction_deg", 990.0),
    ],
)
def test_impossible_value_is_rejected_alone(column, wrong):
    fair = {
        "temperature_c": daily_wave(50),
        "dew_point_c": daily_wave(50, mean=3.0),
        "relative_humidity_pct": daily_wave(50, mean=60.0),
        "station_pressure_hpa": daily_wave(50, mean=920.0, amplitude=1.0),
        "qnh_hpa": daily_wave(50, mean=1013.0, amplitude=1.0),
        "sea_level_pressure_hpa": daily_wave(50, mean=1013.0, amplitude=1.0),
        "wind_direction_deg": 270.0,
        "wind_speed_kt": 5.0,
    }
    hours = flat(50, **fair)
    hours.iloc[20, hours.columns.get_loc(column)] = wrong
    checked, findings = controlled(hours)
    assert list(findings) == ["range"]
    assert f"1 of 50 hours of {quality._WORDS[column]}" in findings["range"].message
    assert "2020-01-01 20:00 UTC" in findings["range"].message
    lost = hours.copy()
    lost.iloc[20, hours.columns.get_loc(column)] = np.nan
    compared = [c for c in COLUMNS if c != "dew_point_c"]  # the dew point is filled from the RH
    pd.testing.assert_frame_equal(checked[compared], lost[compared])


@pytest.mark.parametrize(
    ("column", "value"),
    [
        # WMO World Weather and Climate Extremes Archive, from memory.
        ("temperature_c", 56.7),
        ("temperature_c", -89.2),
        ("sea_level_pressure_hpa", 870.0),
        ("sea_level_pressure_hpa", 1083.8),
    ],
)
def test_record_extremes_are_possible(column, value):
    checked, findings = controlled(flat(3, **{column: [np.nan, value, np.nan]}))
    assert not findings
    assert checked[column].iloc[1] == value


def test_station_pressure_no_weather_can_bring_is_rejected():
    pressure = daily_wave(200, mean=850.0, amplitude=2.0)
    pressure[50] = 1013.0  # a sea-level value that slipped in
    checked, findings = controlled(flat(200, station_pressure_hpa=pressure))
    assert np.isnan(checked["station_pressure_hpa"].iloc[50])
    assert list(findings) == ["range"]
    assert checked["station_pressure_hpa"].notna().sum() == 199


@pytest.mark.parametrize(("column", "jump"), [("temperature_c", 15.5), ("dew_point_c", -20.5)])
def test_spike_is_rejected_and_its_neighbours_stay(column, jump):
    values = daily_wave(100, mean=10.0, amplitude=3.0)
    values[40] = (values[39] + values[41]) / 2 + jump
    checked, findings = controlled(flat(100, **{column: values}))
    assert list(findings) == ["step"]
    assert np.flatnonzero(checked[column].isna()).tolist() == [40]


def test_front_is_no_spike():
    # A cold front: 20 K down within the hour and no way back; and a foehn gust of two hours.
    values = np.r_[np.full(20, 28.0), np.full(20, 8.0)] + daily_wave(40, 0.0, 1.0)
    values[10:12] += 16.0
    checked, findings = controlled(flat(40, temperature_c=values))
    assert not findings
    assert checked["temperature_c"].notna().all()


def test_peak_between_neighbours_that_disagree_is_no_spike():
    # The ridge of a front: 24 K up, 16 K down within two hours, and a new level after it.
    values = daily_wave(40, 0.0, 1.0)
    values[20] += 24.0
    values[21:] += 8.0
    assert not controlled(flat(40, temperature_c=values))[1]


def test_spike_needs_its_neighbouring_hours():
    hours = flat(60, temperature_c=daily_wave(60, 10.0, 1.0))
    hours.iloc[30, 0] += 25.0
    gap = hours.drop(hours.index[[29, 31]])
    assert not controlled(gap)[1]


# ---- stuck sensors and default values --------------------------------------------------------


@pytest.mark.parametrize("column", ["temperature_c", "dew_point_c", "relative_humidity_pct"])
def test_stuck_value_is_rejected_beyond_its_limit(column):
    limit = quality.STUCK_HOURS[column]
    for length, rejected in ((limit, 0), (limit + 1, limit + 1)):
        values = daily_wave(1000, mean=30.0)
        values[200 : 200 + length] = 17.25
        checked, findings = controlled(flat(1000, **{column: values}))
        assert checked[column].isna().sum() == rejected
        assert list(findings) == (["stuck"] if rejected else [])


@pytest.mark.parametrize("column", ["station_pressure_hpa", "qnh_hpa", "sea_level_pressure_hpa"])
def test_stuck_pressure_of_days_is_rejected(column):
    values = daily_wave(1000, mean=1000.0, amplitude=2.0)
    values[200:280] = 1000.5
    checked, findings = controlled(flat(1000, **{column: values}))
    assert np.flatnonzero(checked[column].isna()).tolist() == list(range(200, 280))
    assert list(findings) == ["stuck"]


def test_stuck_run_goes_on_over_missing_hours_and_ends_at_a_gap_of_a_day():
    values = daily_wave(400)
    values[100:160] = 12.34
    values[110:120] = np.nan
    assert controlled(flat(400, temperature_c=values))[0]["temperature_c"].notna().sum() == 340
    values = daily_wave(400)
    values[100:160] = 12.34
    values[115:145] = np.nan  # two short runs, 30 h apart
    assert not controlled(flat(400, temperature_c=values))[1]


def test_rare_reports_of_one_value_are_not_stuck():
    # Three synoptic reports a day of a whole degree: too thin to call the sensor stuck.
    values = np.full(96, np.nan)
    values[::8] = 1.0
    assert not controlled(flat(96, temperature_c=values))[1]


def test_saturated_fog_of_days_is_not_a_stuck_humidity():
    # Common practice, no source: sensors read 100 % for days in fog or low stratus.
    humidity = daily_wave(24 * 30, mean=70.0, amplitude=20.0)
    humidity[100:300] = 100.0
    hours = flat(24 * 30, temperature_c=daily_wave(24 * 30), relative_humidity_pct=humidity)
    checked, findings = controlled(hours)
    assert not findings
    np.testing.assert_allclose(
        checked["dew_point_c"].iloc[100:300], checked["temperature_c"].iloc[100:300], atol=1e-9
    )


def test_humidity_of_100_percent_for_two_months_is_a_broken_sensor():
    # Fog of days is weather; 100 % through sixty warm afternoons with 10 K of daily range is not.
    humidity = daily_wave(24 * 200, mean=60.0, amplitude=20.0)
    humidity[500 : 500 + 24 * 60] = 100.0
    hours = flat(24 * 200, temperature_c=daily_wave(24 * 200), relative_humidity_pct=humidity)
    checked, findings = controlled(hours)
    assert findings
    assert checked["relative_humidity_pct"].iloc[500 : 500 + 24 * 60].isna().all()


def test_humidity_sensor_stuck_for_much_of_the_record_is_not_used_at_all():
    humidity = daily_wave(24 * 100, mean=60.0, amplitude=20.0)
    humidity[: 24 * 30] = 10.0  # the floor of a broken sensor, 30 of 100 days
    hours = flat(24 * 100, temperature_c=daily_wave(24 * 100), relative_humidity_pct=humidity)
    checked, findings = controlled(hours)
    assert checked["relative_humidity_pct"].isna().all()
    assert checked["dew_point_c"].isna().all()
    assert "stuck at 10 %" in findings["stuck"].message
    assert checked["temperature_c"].notna().all()


def test_humidity_floor_of_a_few_days_costs_those_days():
    humidity = daily_wave(24 * 100, mean=60.0, amplitude=20.0)
    humidity[500:600] = 10.0
    checked, findings = controlled(flat(24 * 100, relative_humidity_pct=humidity))
    assert checked["relative_humidity_pct"].isna().sum() == 100
    assert list(findings) == ["stuck"]


def test_constant_pressure_of_a_month_is_a_default_value():
    hours = flat(24 * 366, station_pressure_hpa=daily_wave(24 * 366, 850.0, 3.0))
    march = hours.index.month == 3
    hours.loc[march, "station_pressure_hpa"] = 843.0
    checked, findings = controlled(hours)
    assert checked.loc[march, "station_pressure_hpa"].isna().all()
    assert checked.loc[~march, "station_pressure_hpa"].notna().all()
    assert list(findings) == ["constant-pressure"]
    assert "1 months" in findings["constant-pressure"].message


def test_constant_pressure_of_the_whole_record_is_told_as_such():
    hours = flat(24 * 366, station_pressure_hpa=768.0, temperature_c=daily_wave(24 * 366))
    checked, findings = controlled(hours)
    assert checked["station_pressure_hpa"].isna().all()
    assert "all through the record" in findings["constant-pressure"].message
    assert checked["temperature_c"].notna().all()


def test_constant_pressure_is_rejected_in_the_short_months_at_the_ends_too():
    checked, findings = controlled(flat(24 * 64, "2020-01-30", station_pressure_hpa=768.0))
    assert checked["station_pressure_hpa"].isna().all()
    assert list(findings) == ["constant-pressure"]


def test_defaults_that_change_from_month_to_month_are_all_rejected():
    # Typical-year files fill in the standard pressure of the elevation, one value a month.
    hours = flat(24 * 366)
    hours["station_pressure_hpa"] = 840.0 + hours.index.month
    checked, findings = controlled(hours)
    assert checked["station_pressure_hpa"].isna().all()
    assert list(findings) == ["constant-pressure"]
    assert "12 months" in findings["constant-pressure"].message


def test_constant_pressure_of_a_local_month_is_rejected_to_the_last_hour():
    # A month in the file's local time is 7 h late in UTC: the calendar month of the check is not
    # the file's.
    hours = flat(24 * 366, station_pressure_hpa=daily_wave(24 * 366, 850.0, 3.0))
    local_month = (hours.index - pd.Timedelta(hours=7)).month
    hours.loc[local_month == 3, "station_pressure_hpa"] = 843.0
    checked, findings = controlled(hours)
    assert findings
    assert checked.loc[local_month == 3, "station_pressure_hpa"].isna().all()
    assert checked.loc[local_month != 3, "station_pressure_hpa"].notna().all()


def test_constant_pressure_of_a_typical_year_month_is_rejected_to_the_last_hour():
    # Typical year at UTC-7: March is of 2001, with a default pressure; April is of 1998.
    march = flat(24 * 31, "2001-03-01 07:00", station_pressure_hpa=843.0)
    april = flat(24 * 30, "1998-04-01 07:00", station_pressure_hpa=daily_wave(24 * 30, 850.0, 3.0))
    checked, findings = controlled(pd.concat([april, march]))
    assert list(findings) == ["constant-pressure"]
    assert checked["station_pressure_hpa"].notna().sum() == len(april)


def test_a_few_equal_pressures_are_weather():
    values = daily_wave(24 * 31, 1000.0, 2.0)
    values[100:150] = 1000.5
    assert not controlled(flat(24 * 31, station_pressure_hpa=values))[1]


# ---- humidity --------------------------------------------------------------------------------


def test_dew_point_above_the_temperature_is_rejected_beyond_rounding():
    temperature = daily_wave(30)
    dew_point = temperature - 4.0
    dew_point[3] = temperature[3] + 0.4
    dew_point[7] = temperature[7] + 0.6
    checked, findings = controlled(flat(30, temperature_c=temperature, dew_point_c=dew_point))
    assert np.isnan(checked["dew_point_c"].iloc[7])
    assert checked["temperature_c"].notna().all()  # the dew point goes, not the temperature
    assert checked["dew_point_c"].iloc[3] == temperature[3]  # rounding is cut to saturation
    assert list(findings) == ["dew-point-above-temperature"]
    assert "1 of 30 hours" in findings["dew-point-above-temperature"].message


def test_dew_point_without_a_temperature_is_kept():
    hours = flat(3, temperature_c=[10.0, np.nan, 11.0], dew_point_c=[5.0, 5.5, 6.0])
    assert controlled(hours)[0]["dew_point_c"].tolist() == [5.0, 5.5, 6.0]


def test_dew_point_is_filled_from_the_humidity_only_where_it_is_missing():
    # WMO-No. 8: at 25 degC and 50 % the dew point is 13.9 degC (Magnus over water).
    hours = flat(
        3,
        temperature_c=[25.0, 25.1, 25.2],
        dew_point_c=[np.nan, 3.0, np.nan],
        relative_humidity_pct=[50.0, 51.0, 104.0],
    )
    got = controlled(hours)[0]["dew_point_c"]
    assert got.iloc[0] == pytest.approx(13.9, abs=0.05)
    assert got.iloc[1] == 3.0
    assert got.iloc[2] == pytest.approx(25.2)  # above saturation within the sensor's error


# ---- elevation from the barometer ------------------------------------------------------------


def checked_elevations(*pairs):
    stations, tables = zip(*pairs, strict=True)
    checks, findings = quality.check_elevations(stations, tables)
    return checks, {f.id: f.severity for f in findings}


def at(true_m, identifier="S", stated_m=None, latitude=40.0, longitude=-105.0, seed=3, **changes):
    """Return a station with a year of hours that belong to an elevation it may not state."""
    stated = true_m if stated_m is None else stated_m
    return (
        station(identifier, stated, latitude, longitude, **changes),
        weather(true_m, seed=seed, latitude=latitude),
    )


@pytest.mark.parametrize("elevation_m", [0.0, 600.0, 1500.0, 3000.0])
def test_healthy_station_is_not_accused(elevation_m):
    checks, severities = checked_elevations(at(elevation_m))
    assert severities == {}
    assert abs(checks["S"].implied_m - elevation_m) < quality.ELEVATION_CAUTION_M
    assert checks["S"].neighbours == 0


@pytest.mark.parametrize(
    ("off_m", "severity"),
    [(0, None), (40, None), (75, "caution"), (-75, "caution"), (150, "reject"), (-150, "reject")],
)
def test_wrong_elevation_is_told_by_how_far_it_is_off(off_m, severity):
    # The true elevation is made from the standard atmosphere itself, so it is known exactly.
    hours = flat(24 * 60, temperature_c=15.0 - 0.0065 * 500 + daily_wave(24 * 60, 0.0, 3.0))
    hours["station_pressure_hpa"] = isa_pressure_hpa(500.0) + daily_wave(24 * 60, 0.0, 1.0) - 0.03
    hours["dew_point_c"] = -60.0
    one = station(elevation_m=500.0 + off_m)
    checks, severities = checked_elevations((one, hours))
    assert severities == ({} if severity is None else {"S": severity})
    assert checks["S"].implied_m == pytest.approx(500.0, abs=2.0)


def test_wrong_station_among_neighbours_is_the_only_one_accused():
    places = [("A", 300.0, 0.0), ("B", 1200.0, 0.5), ("C", 1900.0, 1.0), ("D", 800.0, 1.5)]
    pairs = [at(z, i, longitude=-105.0 + dx) for i, z, dx in places]
    assert checked_elevations(*pairs)[1] == {}
    wrong = at(1200.0, "W", 1400.0, longitude=-104.2)
    checks, severities = checked_elevations(*pairs, wrong)
    assert severities == {"W": "reject"}
    assert checks["W"].neighbours == 4
    assert checks["A"].neighbours == 3  # the wrong one no longer serves as a neighbour
    assert checks["W"].implied_m == pytest.approx(1200.0, abs=20.0)


@pytest.mark.parametrize("off_m", [-250.0, 250.0])
@pytest.mark.parametrize(("right_m", "wrong_m"), [(400.0, 1500.0), (1500.0, 400.0)])
@pytest.mark.parametrize(("right", "wrong"), [("A", "B"), ("B", "A")])
def test_of_two_stations_that_contradict_each_other_the_wrong_one_is_accused(
    right, wrong, right_m, wrong_m, off_m
):
    pairs = [at(right_m, right), at(wrong_m, wrong, wrong_m + off_m, longitude=-104.5)]
    for order in (1, -1):
        assert checked_elevations(*pairs[::order])[1] == {wrong: "reject"}


def test_standard_atmosphere_fits_its_own_elevation_at_any_height_among_neighbours():
    pairs = []
    for i, z in enumerate((0.0, 1000.0, 2000.0, 3500.0)):
        wave = daily_wave(24 * 30, 0.0, 1.0)
        hours = flat(24 * 30, temperature_c=15.0 - 0.0065 * z + wave - wave.mean())
        hours["station_pressure_hpa"] = isa_pressure_hpa(z) + 0.01 * (wave - wave.mean())
        hours["dew_point_c"] = -80.0
        pairs.append((station(f"S{i}", z, longitude=-105.0 + i / 2), hours))
    checks, severities = checked_elevations(*pairs)
    assert severities == {}
    for one, _ in pairs:
        # The mean of the column's ends for its logarithmic mean: (L z / T)^2 / 12 of z, 2.0 m at
        # 3500 m.
        assert checks[one.id].implied_m == pytest.approx(one.elevation_m, abs=2.2)


@pytest.mark.xfail(strict=True, reason="the majority of the neighbours is believed")
def test_two_stations_wrong_alike_do_not_outvote_the_right_one():
    pairs = [
        at(400.0, "R"),
        at(900.0, "V", 1050.0, longitude=-104.8),
        at(1500.0, "W", 1650.0, longitude=-104.5),
    ]
    _, severities = checked_elevations(*pairs)
    assert "R" not in severities


def test_stations_beyond_500_km_are_no_neighbours():
    # One degree of latitude is 111 km: 4 degrees are near, 5 are not.
    for degrees, neighbours in ((4.0, 1), (5.0, 0)):
        pairs = [at(500.0, "A"), at(500.0, "B", latitude=40.0 + degrees)]
        assert checked_elevations(*pairs)[0]["A"].neighbours == neighbours


def test_neighbours_carry_a_mean_pressure_that_is_not_the_standard_one():
    # A trough of 990 hPa all through the record: no station is at fault.
    pairs = []
    for i, z in enumerate((100.0, 700.0, 1300.0)):
        one, hours = at(z, f"S{i}", longitude=-105.0 + i)
        hours = hours.assign(station_pressure_hpa=hours["station_pressure_hpa"] * 0.99)
        pairs.append((one, hours))
    assert checked_elevations(*pairs)[1] == {}


@pytest.mark.parametrize(
    ("name", "latitude", "mean_sea_level_hpa"),
    [
        # Mean sea-level pressure of the year, from memory, to some 3 hPa: the circumpolar trough
        # of the southern ocean is no barometer error.
        ("Antarctic coast", -66.0, 987.0),
        ("southern ocean island", -54.5, 1000.0),
    ],
)
def test_healthy_lone_station_under_the_circumpolar_trough_is_not_rejected(
    name, latitude, mean_sea_level_hpa
):
    one, hours = at(40.0, latitude=latitude)
    pressure = hours["station_pressure_hpa"]
    sea_level = pressure.mean() * 1013.25 / isa_pressure_hpa(40.0)
    hours = hours.assign(station_pressure_hpa=pressure * mean_sea_level_hpa / sea_level)
    assert checked_elevations((one, hours))[1].get("S") != "reject"


def test_elevation_verified_by_the_user_is_told_and_used():
    one, hours = at(1200.0, stated_m=1400.0)
    assert checked_elevations((one, hours))[1] == {"S": "reject"}
    vouched = replace(one, elevation_verified=True)
    checks, findings = quality.check_elevations([vouched], [hours])
    assert [f.severity for f in findings] == ["caution"]
    assert "elevation_verified" in findings[0].message
    assert checks["S"].implied_m == pytest.approx(1200.0, abs=30.0)


def test_rejection_says_what_to_do():
    _, findings = quality.check_elevations(*[[x] for x in at(1200.0, stated_m=1400.0)])
    message = findings[0].message
    assert findings[0].subject == "station" and findings[0].check == "elevation"
    assert "1400 m stated" in message and "below" in message
    assert "stations.csv" in message


def test_station_without_a_station_pressure_is_not_judged():
    one, hours = at(1200.0, stated_m=2000.0)
    for bare in (hours.assign(station_pressure_hpa=np.nan), hours.iloc[:100]):
        assert checked_elevations((one, bare)) == ({}, {})


def real_station(one):
    """Return the hours of a station's files as one table, unchecked."""
    files = [parse_archive(p.read_bytes(), one.archive, p.name) for p in one.files]
    return join_files(files)[0]


@pytest.mark.parametrize("study", ["pernambuco", "lakeside"])
def test_real_weather_in_whole_units_is_not_stuck(shared, study):
    # Airport reports come in whole degrees and hectopascals; their equal values are weather.
    stations, _ = read_stations(shared / "studies" / study / "stations.csv", "files")
    for one in stations:
        _, findings = quality.control(one, real_station(one).round())
        assert not [f for f in findings if f.check == "stuck"]


def test_healthy_tropical_uplands_are_not_accused(shared):
    # Five stations of the Brazilian service at 11-852 m: they read 6 hPa above the standard.
    folder = shared / "studies" / "pernambuco"
    stations, problems = read_stations(folder / "stations.csv", "files")
    assert not problems
    tables = [quality.control(one, real_station(one))[0] for one in stations]
    checks, findings = quality.check_elevations(stations, tables)
    assert findings == []
    assert len(checks) == 5
    for one, table in zip(stations, tables, strict=True):
        # Each alone, without a neighbour to compare with, is not rejected either.
        _, alone = quality.check_elevations([one], [table])
        assert not [f for f in alone if f.severity == "reject"]
    upland = next(t for s, t in zip(stations, tables, strict=True) if s.id == "A341")
    above = upland["station_pressure_hpa"].mean() - isa_pressure_hpa(852.0)
    assert above == pytest.approx(6.0, abs=2.0)
