"""Delimited archive text of airport weather reports."""

from __future__ import annotations

import pytest
from archive_samples import asos, checks

from climarisk.archives.asos import parse_asos
from climarisk.errors import ArchiveError

# NIST SP 811, section B.8: inch of mercury, conventional; and half its last printed digit.
HPA_PER_INHG = 33.86389
HALF_DIGIT = 0.000005 / HPA_PER_INHG

HEADER = "station,valid,tmpf,dwpf,relh,drct,sknt,alti,mslp"


def test_parse_asos_units():
    file = parse_asos(asos())
    row = file.hours.iloc[0]
    # 59 degF is 15 degC, 50 degF is 10 degC (definition of the scale).
    assert row["temperature_c"] == pytest.approx(15.0, abs=1e-12)
    assert row["dew_point_c"] == pytest.approx(10.0, abs=1e-12)
    assert row[["relative_humidity_pct", "sea_level_pressure_hpa"]].tolist() == [72.0, 1015.5]
    assert row["qnh_hpa"] == pytest.approx(30.0 * HPA_PER_INHG, rel=HALF_DIGIT)
    assert row[["wind_direction_deg", "wind_speed_kt"]].tolist() == [180.0, 10.0]
    assert row.isna().sum() == 1 and file.station_id == "XYZ"
    assert str(file.hours.index[0]) == "2020-07-01 01:00:00+00:00"


def test_parse_asos_tab_and_degrees_celsius():
    header = "station,valid,lon,lat,elevation,tmpc,dwpc,alti"
    rows = [f"XYZ,2020-07-01 {h:02}:53,-104.5,39.5,1650.00,15.00,10.00,30.00" for h in range(4)]
    file = parse_asos(asos(rows, header, "\t"))
    assert file.hours["temperature_c"].tolist() == [15.0] * 4
    assert (file.latitude, file.longitude, file.elevation_m) == (39.5, -104.5, 1650.0)


def test_parse_asos_missing_words_are_nan():
    rows = ["XYZ,2020-07-01 00:53,59.00,M,null,VRB,,M,M", "XYZ,2020-07-01 01:53,M,M,M,M,M,M,M"]
    rows += ["XYZ,2020-07-01 02:53,59.00,50.00,72.0,180,T,30.00,M"]
    file = parse_asos(asos(rows))
    assert len(file.hours) == 2 and file.notes == ()
    assert file.hours.iloc[0].notna().sum() == 1


def test_parse_asos_report_with_humidity_and_pressure_wins_over_a_nearer_one():
    rows = ["XYZ,2020-07-01 00:40,59.00,50.00,72.0,180,10,30.00,M"]
    rows += ["XYZ,2020-07-01 01:00,61.00,M,M,180,10,30.00,M"]
    hours = parse_asos(asos(rows)).hours
    assert hours["temperature_c"].tolist() == pytest.approx([15.0])


def test_parse_asos_repeated_report_is_told():
    rows = ["XYZ,2020-07-01 00:53,59.00,50.00,72.0,180,10,30.00,M"] * 2
    assert checks(parse_asos(asos(rows))) == ["repeated-reports"]


def test_parse_asos_several_stations_raise():
    rows = [f"{s},2020-07-01 00:53,59.00,50.00,72.0,180,10,30.00,M" for s in ("XYZ", "ABC")]
    with pytest.raises(ArchiveError, match=r"2 stations \(ABC, XYZ\).*one file per station"):
        parse_asos(asos(rows))


@pytest.mark.parametrize(
    ("header", "comment"),
    [
        (HEADER.replace("valid", "valid(America/Denver)"), b""),
        (HEADER, b"# Timezone: America/Denver\n"),
        (HEADER, b"#tz=America/Denver\n"),
    ],
)
def test_parse_asos_named_zone_is_clock_time(header, comment):
    # 2020-03-08 02:00 MST became 03:00 MDT; 2020-11-01 02:00 MDT became 01:00 MST (IANA).
    times = ["2020-03-08 01:00", "2020-03-08 02:30", "2020-07-01 00:00", "2020-11-01 01:30"]
    rows = [f"XYZ,{t},59.00,50.00,72.0,180,10,30.00,M" for t in times]
    file = parse_asos(comment + asos(rows, header))
    assert [str(t)[:16] for t in file.hours.index] == ["2020-03-08 08:00", "2020-07-01 06:00"]
    assert checks(file) == ["clock-change"] and "2 lines were left out" in file.notes[0][2]


@pytest.mark.parametrize("zone", ["UTC", "GMT", "Etc/UTC"])
def test_parse_asos_zone_named_utc_is_utc(zone):
    file = parse_asos(asos(header=HEADER.replace("valid", f"valid({zone})")))
    assert file.hours.equals(parse_asos(asos()).hours)


def test_parse_asos_unknown_zone_raises():
    with pytest.raises(ArchiveError, match="is not a time zone"):
        parse_asos(asos(header=HEADER.replace("valid", "valid(Mars/Base)")))


def test_parse_asos_comma_in_the_report_text_is_no_damage():
    rows = ["XYZ,2020-07-01 00:53,59.00,50.00,72.0,180,10,30.00,M,XYZ 010053Z 18010KT, RMK"]
    assert len(parse_asos(asos(rows, HEADER + ",metar")).hours) == 1
