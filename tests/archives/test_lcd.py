"""Full-record local climatological data.

Units, local standard time and marks: NOAA NCEI, Local Climatological Data (LCD) Dataset
Documentation.  1 inHg = 3386.389 Pa: NIST SP 811, section B.8.
"""

from __future__ import annotations

import math

import pytest
from archive_samples import LCD_HEADER, checks, lcd

from climarisk.archives import parse_archive
from climarisk.archives.lcd import parse_lcd, read_lcd
from climarisk.errors import ArchiveError

# NIST SP 811, section B.8: inch of mercury, conventional; and half its last printed digit.
HPA_PER_INHG = 33.86389
HALF_DIGIT = 0.000005 / HPA_PER_INHG

REST = '"FM-15","29.92","33","35","93","29.93","29.31","010","10"'
METRIC = '"FM-15","1013.2","0.6","1.7","93","1013.5","992.6","010","4.6"'


def test_parse_lcd_times_are_local_standard_time_of_the_coordinates():
    # 00:53 Eastern Standard Time, UTC-5, is 05:53 UTC, nearest to 06:00.
    hours = parse_lcd(lcd()).hours
    assert str(hours.index[0]) == "2022-01-01 06:00:00+00:00"
    # In July too: no daylight saving.
    july = parse_lcd(lcd([f"2022-07-01T00:53:00|{REST}"])).hours
    assert str(july.index[0]) == "2022-07-01 06:00:00+00:00"


def test_parse_lcd_given_offset_is_used():
    hours = parse_lcd(lcd([f"2022-07-01T00:53:00|{REST}"]), utc_offset_hours=-7.0).hours
    assert str(hours.index[0]) == "2022-07-01 08:00:00+00:00"


def test_parse_lcd_given_zone_is_used_without_daylight_saving():
    data = lcd([f"2022-07-01T00:53:00|{REST}"]).replace(b"43.62707", b"")
    hours = parse_archive(data, "lcd", "a", zone="America/Denver").hours
    assert str(hours.index[0]) == "2022-07-01 08:00:00+00:00"
    with pytest.raises(ArchiveError, match="a: 'Mars/Base' is not a time zone"):
        parse_archive(data, "lcd", "a", zone="Mars/Base")


def test_parse_lcd_older_edition_units():
    file = parse_lcd(lcd())
    row = file.hours.iloc[0]
    assert row["temperature_c"] == pytest.approx(35.0 / 21.0, abs=1e-12)  # 3 degF * 5/9
    assert row["dew_point_c"] == pytest.approx(5.0 / 9.0, abs=1e-12)
    assert row["station_pressure_hpa"] == pytest.approx(29.31 * HPA_PER_INHG, rel=HALF_DIGIT)
    assert row["qnh_hpa"] == pytest.approx(29.92 * HPA_PER_INHG, rel=HALF_DIGIT)
    assert row["sea_level_pressure_hpa"] == pytest.approx(29.93 * HPA_PER_INHG, rel=HALF_DIGIT)
    # 10 statute miles (1609.344 m) per hour.
    assert row["wind_speed_kt"] == pytest.approx(16093.44 / 1852.0, abs=1e-12)
    assert (file.station_id, file.station_name) == ("72611694765", "VALLEY AIRPORT, NH US")
    assert file.elevation_m == 168.9


def test_parse_lcd_newer_edition_units():
    row = parse_lcd(lcd([f"2022-01-01T00:53:00|{METRIC}"])).hours.iloc[0]
    assert row[["temperature_c", "dew_point_c", "station_pressure_hpa"]].tolist() == [
        1.7,
        0.6,
        992.6,
    ]
    assert row["wind_speed_kt"] == pytest.approx(4.6 * 3600.0 / 1852.0, abs=1e-12)


@pytest.mark.parametrize("pressure", ["", "101320", "1.01"])
def test_parse_lcd_undecided_units_raise(pressure):
    rest = f'"FM-15","{pressure}","33","35","93","{pressure}","{pressure}","010","10"'
    with pytest.raises(ArchiveError, match="pressure.*use a column mapping"):
        parse_lcd(lcd([f"2022-01-01T00:53:00|{rest}"]))


def test_parse_lcd_time_column_may_be_called_datetime():
    other = lcd(header=LCD_HEADER.replace("DATE", "datetime")).replace(b"T0", b" 0")
    assert parse_lcd(other).hours.equals(parse_lcd(lcd()).hours)


def test_parse_lcd_summaries_are_left_out_and_doubtful_values_not_used():
    rows = [
        f"2022-01-01T00:53:00|{REST}",
        '2022-01-01T01:53:00|"FM-15","29.92s","33","35","93s","29.93","29.31","VRB","10V"',
        '2022-01-01T02:53:00|"FM-15","29.92","33","35s","93","29.93","29.31","010","10"',
        '2022-01-01T03:53:00|"FM-15","*","NA","35","T","","29.31","","*"',
        '2022-01-01T23:59:00|"SOD  ","30.00","40","50","60","30.00","29.40","010","10"',
    ]
    file = parse_lcd(lcd(rows))
    assert [t.hour for t in file.hours.index] == [6, 7, 9]
    assert file.hours.iloc[1][["qnh_hpa", "relative_humidity_pct"]].isna().all()
    assert math.isnan(file.hours["wind_direction_deg"].iloc[1])
    assert file.hours["wind_speed_kt"].iloc[1] > 0.0
    assert file.hours.iloc[2].notna().sum() == 2
    assert checks(file) == ["summary-reports", "doubtful-values"]
    assert "1 daily and monthly summaries" in file.notes[0][2]
    assert "3 values" in file.notes[1][2]


def test_parse_lcd_the_report_nearest_the_hour_wins():
    other = REST.replace('"35"', '"50"')
    rows = [f"2022-01-01T00:31:00|{other}", f"2022-01-01T00:53:00|{REST}"]
    assert parse_lcd(lcd(rows)).hours.equals(parse_lcd(lcd(rows[1:])).hours)


def test_parse_lcd_without_coordinates_raises_unless_an_offset_is_given():
    data = lcd().replace(b"43.62707", b"").replace(b"-72.30537", b"")
    with pytest.raises(ArchiveError, match="no coordinates to tell its time zone"):
        parse_lcd(data)
    assert len(parse_lcd(data, utc_offset_hours=-5.0).hours) == 4
    with pytest.raises(ArchiveError, match="is no place"):
        parse_lcd(lcd().replace(b"43.62707", b"143.6"))


def test_parse_lcd_several_stations_raise():
    data = lcd() + lcd().split(b"\n")[1].replace(b"72611694765", b"11111111111")
    with pytest.raises(ArchiveError, match=r"2 stations \(11111111111, 72611694765\)"):
        parse_lcd(data)


def test_read_lcd_real_file_agrees_with_a_plain_csv_count(stations):
    # A plain loop over csv.DictReader gave the hours, the sum in degF and the marks.
    file = read_lcd(stations / "lcd" / "NCEI_Lebanon_hourly_2022.csv")
    hours = file.hours
    assert len(hours) == 8392
    fahrenheit = hours["temperature_c"] * 1.8 + 32.0
    assert fahrenheit.sum() == pytest.approx(406781.0, abs=0.01)
    assert str(hours.index[0]) == "2022-01-01 06:00:00+00:00"
    assert str(hours.index[-1]) == "2022-12-22 10:00:00+00:00"
    # 2022-07-20 13:53 local: 93 degF, 64 degF, 38 %, 29.10, 29.71, 29.67 inHg.
    row = hours.loc["2022-07-20 19:00+00:00"]
    assert row["temperature_c"] == pytest.approx(305.0 / 9.0, abs=1e-9)
    assert row["relative_humidity_pct"] == 38.0
    assert row["station_pressure_hpa"] == pytest.approx(29.10 * HPA_PER_INHG, rel=HALF_DIGIT)
    assert row["qnh_hpa"] == pytest.approx(29.71 * HPA_PER_INHG, rel=HALF_DIGIT)
    assert "365 daily and monthly summaries" in file.notes[0][2]
    assert "87 values" in file.notes[1][2]
    assert file.elevation_m == 168.9


def test_read_lcd_real_file_is_coldest_before_sunrise(stations):
    # Sunrise in July at 43.6 N is after 04 h local standard time, so the mean minimum falls
    # at 03 to 05 h: common practice, no source.
    hours = read_lcd(stations / "lcd" / "NCEI_Lebanon_hourly_2022.csv").hours
    july = hours.loc["2022-07", "temperature_c"]
    by_hour = july.groupby((july.index.hour - 5) % 24).mean()
    assert by_hour.idxmin() in (3, 4, 5)
