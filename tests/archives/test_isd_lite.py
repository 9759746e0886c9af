"""The light fixed-width hourly subset.

Scaling and units: NOAA NCEI, Integrated Surface Data Lite format document.
"""

from __future__ import annotations

import pytest
from archive_samples import checks, isd_lite

from climarisk.archives.isd_lite import parse_isd_lite, read_isd_lite

LINE = b"2016 01 01 00   -44   -83 10256   260    67     4 -9999 -9999\n"


def test_parse_isd_lite_scales_and_puts_the_pressure_to_sea_level():
    file = parse_isd_lite(LINE, "725300-2016")
    row = file.hours.iloc[0]
    assert row[["temperature_c", "dew_point_c", "sea_level_pressure_hpa"]].tolist() == [
        -4.4,
        -8.3,
        1025.6,
    ]
    assert row["wind_speed_kt"] == pytest.approx(6.7 * 3600.0 / 1852.0, abs=1e-12)
    assert row[["station_pressure_hpa", "qnh_hpa", "relative_humidity_pct"]].isna().all()
    assert file.station_id == "725300" and file.elevation_m is None


def test_parse_isd_lite_missing_code_is_nan():
    data = isd_lite() + LINE.replace(b" 00 ", b" 09 ").replace(b"10256", b"-9999")
    hours = parse_isd_lite(data).hours
    assert hours["sea_level_pressure_hpa"].isna().tolist() == [False] * 6 + [True]


def test_parse_isd_lite_cut_last_line_is_told():
    file = parse_isd_lite(isd_lite(6) + b"2016 01 01 06   -44   -83 10")
    assert len(file.hours) == 6
    assert "1 of 7 lines are damaged and were skipped, the first is line 7" in file.notes[0][2]


@pytest.mark.parametrize(
    "old,new", [(b" 05 ", b" 25 "), (b" 05 ", b" 24 "), (b"16 01 01 05", b"16 13 01 05")]
)
def test_parse_isd_lite_no_such_time_is_a_damaged_line(old, new):
    file = parse_isd_lite(isd_lite(6).replace(old, new))
    assert len(file.hours) == 5 and checks(file) == ["damaged-lines"]


def test_read_isd_lite_real_files_agree_with_a_plain_split(stations):
    # Lines, temperatures and their sum in tenths, pressures: counted with str.split alone.
    facts = {
        "725300-2016.gz": (8782, 1000101, 8671),
        "725300-2017.gz": (8759, 1008410, 8635),
        "725300-2018.gz": (8758, 925699, 8643),
    }
    for name, (count, tenths, pressures) in facts.items():
        hours = read_isd_lite(stations / "isd_lite" / name).hours
        assert len(hours) == count
        assert hours["temperature_c"].sum() * 10.0 == pytest.approx(tenths, abs=0.01)
        assert hours["sea_level_pressure_hpa"].count() == pressures
    assert hours.loc["2018-07-04 18:00+00:00"]["temperature_c"] == 32.2


def test_read_isd_lite_real_damaged_files_are_read(stations):
    one = read_isd_lite(stations / "isd_lite" / "only_one_row")
    assert len(one.hours) == 1 and one.hours["temperature_c"].iloc[0] == 19.4
    many = read_isd_lite(stations / "isd_lite" / "max_17_missing_rows")
    # 8701 lines, 8575 with a temperature.
    assert len(many.hours) == 8575 and many.notes == ()
