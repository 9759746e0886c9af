"""EPW and TMY3 files.

Meaning of the hour label: US DOE, EnergyPlus Auxiliary Programs, EPW data dictionary (hour 1
is 00:01 to 01:00); NREL/TP-581-43156, table 1-2 (time stamp is the end of the hour, LST).
"""

from __future__ import annotations

import math

import pytest
from archive_samples import EPW_HEADER, checks, epw, epw_row, tmy3, tmy3_row

from climarisk.archives.typical_year import parse_epw, parse_tmy3, read_epw, read_tmy3
from climarisk.errors import ArchiveError


def test_parse_epw_hour_label_is_the_end_of_the_hour_in_standard_time():
    hours = parse_epw(epw()).hours
    # 1995-01-01 hour 1 ends at 01:00 LST, UTC-7, that is 08:00 UTC; hour 24 ends at 07:00 UTC.
    assert str(hours.index[0]) == "1995-01-01 08:00:00+00:00"
    assert str(hours.index[-1]) == "1995-01-02 07:00:00+00:00"
    assert len(hours) == 24


def test_parse_epw_units_and_station():
    file = parse_epw(epw())
    row = file.hours.iloc[0]
    assert (row["temperature_c"], row["dew_point_c"]) == (10.5, 1.5)
    assert (row["relative_humidity_pct"], row["wind_direction_deg"]) == (54.0, 180.0)
    assert row["station_pressure_hpa"] == 837.0
    assert row["wind_speed_kt"] == pytest.approx(5.0 * 3600.0 / 1852.0, abs=1e-12)
    assert math.isnan(row["qnh_hpa"]) and math.isnan(row["sea_level_pressure_hpa"])
    assert (file.station_id, file.station_name) == ("999999", "High Strip")
    assert (file.latitude, file.longitude, file.elevation_m) == (39.5, -104.5, 1650.0)
    assert "TMY3" in file.source


def test_parse_epw_minute_zero_and_sixty_are_the_same():
    rows = [epw_row(1995, 1, 1, h, 60) for h in range(1, 25)]
    assert parse_epw(epw(rows)).hours.equals(parse_epw(epw()).hours)


def test_parse_epw_missing_codes_are_nan():
    missing = {"td": "99.9", "rh": "999", "p": "999999", "dir": "999", "speed": "999"}
    rows = [epw_row(1995, 1, 1, 1, **missing), epw_row(1995, 1, 1, 2, t="99.9")]
    rows += [epw_row(1995, 1, 1, 3)]
    hours = parse_epw(epw(rows)).hours
    assert len(hours) == 2
    assert hours.iloc[0].notna().sum() == 1 and hours.iloc[0]["temperature_c"] == 10.5


def test_parse_epw_months_of_different_years_are_typical_and_need_not_be_in_order():
    rows = [epw_row(1999, 1, 31, 24), epw_row(1985, 2, 1, 1), epw_row(1985, 2, 28, 24)]
    rows += [epw_row(2001, 3, 1, 1)]
    file = parse_epw(epw(rows))
    assert file.typical_year and file.notes == ()
    assert [t.year for t in file.hours.index] == [1985, 1985, 1999, 2001]


def test_parse_epw_no_29_february_in_a_common_year_is_damage_but_in_a_leap_year_is_read():
    rows = [epw_row(1996, 2, 29, 12), epw_row(1996, 3, 1, 1), epw_row(1995, 2, 29, 12)]
    file = parse_epw(epw(rows))
    assert len(file.hours) == 2 and checks(file) == ["damaged-lines"]


def test_parse_epw_part_of_one_year_is_no_typical_year_but_a_whole_year_is():
    assert not parse_epw(epw([epw_row(2012, 6, d, 12) for d in range(1, 31)])).typical_year
    # The last label of June ends in July: it must not count as a month.
    assert parse_epw(epw([epw_row(2012, m, 28, 24) for m in range(1, 13)])).typical_year


def test_parse_epw_impossible_time_zone_raises():
    data = epw().replace(b"-7.0", b"-70.0", 1)
    with pytest.raises(ArchiveError, match="line 1: the time zone is '-70.0'"):
        parse_epw(data)
    assert EPW_HEADER.startswith("LOCATION")


def test_parse_tmy3_hour_label_units_and_station():
    file = parse_tmy3(tmy3())
    assert str(file.hours.index[0]) == "1999-01-01 08:00:00+00:00"
    assert str(file.hours.index[-1]) == "1999-01-02 07:00:00+00:00"
    row = file.hours.iloc[0]
    assert row[["temperature_c", "dew_point_c"]].tolist() == [-3.0, -4.0]
    assert row[["relative_humidity_pct", "station_pressure_hpa"]].tolist() == [92.0, 806.0]
    assert row["wind_speed_kt"] == pytest.approx(2.1 * 3600.0 / 1852.0, abs=1e-12)
    assert (file.station_id, file.station_name, file.elevation_m) == (
        "724666",
        "HIGH STRIP, CO",
        1829.0,
    )


def test_parse_tmy3_both_ways_to_write_the_time():
    rows = [tmy3_row("01/01/1999", f"{h:02}:00") for h in range(1, 24)]
    rows += [tmy3_row("01/01/1999", "24:00:00")]
    assert parse_tmy3(tmy3(rows)).hours.equals(parse_tmy3(tmy3()).hours)


def test_parse_tmy3_missing_code_is_nan():
    rows = [tmy3_row("1/1/1999", "1:00", p="-9900"), tmy3_row("1/1/1999", "2:00", t="-9900")]
    rows += [tmy3_row("1/1/1999", "3:00")]
    hours = parse_tmy3(tmy3(rows)).hours
    assert len(hours) == 2 and math.isnan(hours["station_pressure_hpa"].iloc[0])


def test_read_epw_real_file_agrees_with_a_plain_csv_count(stations):
    # Counted and summed with the csv module alone.
    file = read_epw(stations / "epw" / "USA_CO_Denver.Intl.AP.725650_TMY3.epw")
    hours = file.hours
    assert len(hours) == 8760 and file.typical_year and file.notes == ()
    assert hours["temperature_c"].sum() == pytest.approx(95268.0, abs=0.01)
    assert hours["station_pressure_hpa"].sum() == pytest.approx(7311107.0, abs=0.01)
    # Line 1994,2,1,15: -3.3 degC, 83800 Pa, wind 110 degrees 6.2 m/s; 15:00 LST is 22:00 UTC.
    row = hours.loc["1994-02-01 22:00+00:00"]
    assert row[["temperature_c", "dew_point_c"]].tolist() == [-3.3, -12.2]
    assert row[["station_pressure_hpa", "wind_direction_deg"]].tolist() == [838.0, 110.0]
    gunnison = read_epw(stations / "epw" / "USA_CO_Gunnison.County.AWOS.724677_TMY3.epw")
    assert set(gunnison.hours["station_pressure_hpa"]) == {768.0}


def test_read_epw_every_real_file_has_its_8760_hours(stations):
    for path in sorted((stations / "epw").iterdir()):
        file = read_epw(path)
        assert len(file.hours) == 8760 and file.typical_year and file.notes == (), path.name


def test_read_tmy3_real_files_agree_with_a_plain_csv_count(stations):
    june = read_tmy3(stations / "tmy3_csv" / "201206ty.csv")
    assert len(june.hours) == 720 and not june.typical_year and june.notes == ()
    assert june.hours["temperature_c"].sum() == pytest.approx(17160.2, abs=0.01)
    row = june.hours.loc["2012-06-01 22:00+00:00"]
    assert row.drop("wind_speed_kt").dropna().tolist() == [23.8, 4.2, 28.1, 816.0, 28.0]
    assert len(read_tmy3(stations / "tmy3_csv" / "201208ty.csv").hours) == 744
    year = read_tmy3(stations / "tmy3_csv" / "724666TY.csv")
    assert len(year.hours) == 8760 and year.typical_year and year.notes == ()
    assert sorted(set(year.hours.index.year)) == [1991, 1996, 1997, 1998, 1999, 2001, 2002, 2004]
    assert year.hours.loc["1997-01-01 07:00+00:00"]["temperature_c"] == 4.0
    assert (year.elevation_m, june.elevation_m) == (1829.0, 1829.0)


def test_parse_epw_number_too_large_for_a_date_is_a_damaged_line():
    rows = [epw_row(1995, 1, 10**12, 1), *(epw_row(1995, 1, 1, h) for h in range(1, 25))]
    file = parse_epw(epw(rows))
    assert len(file.hours) == 24 and checks(file) == ["damaged-lines"]
