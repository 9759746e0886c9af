"""The global hourly archive.

Columns, units and quality codes: NOAA NCEI, GHCNh version 1 documentation.
"""

from __future__ import annotations

import math

import pytest
from archive_samples import checks, ghcnh, ghcnh_header, ghcnh_row

from climarisk.archives.ghcnh import parse_ghcnh
from climarisk.errors import ArchiveError


def test_parse_ghcnh_units_and_station():
    file = parse_ghcnh(ghcnh())
    row = file.hours.iloc[0]
    assert str(file.hours.index[0]) == "2024-02-29 00:00:00+00:00"
    assert row[["temperature_c", "dew_point_c", "relative_humidity_pct"]].tolist() == [
        10.5,
        1.5,
        54.0,
    ]
    assert row[["station_pressure_hpa", "qnh_hpa", "sea_level_pressure_hpa"]].tolist() == [
        838.1,
        1015.2,
        1013.2,
    ]
    assert row["wind_speed_kt"] == pytest.approx(5.0 * 3600.0 / 1852.0, abs=1e-12)
    assert (file.station_id, file.station_name) == ("USW00094765", "HIGH STRIP")
    assert (file.latitude, file.longitude, file.elevation_m) == (39.5, -104.5, 1650.0)


def test_parse_ghcnh_date_column_gives_the_same_hours():
    assert parse_ghcnh(ghcnh(dated=True)).hours.equals(parse_ghcnh(ghcnh()).hours)


@pytest.mark.parametrize(
    ("code", "source", "kept"),
    [
        *(("", "335", True), ("0", "335", True), ("1", "335", True), ("4", "335", True)),
        *(("5", "335", True), ("9", "335", True)),
        *(("2", "335", False), ("3", "335", False), ("6", "335", False), ("7", "335", False)),
        # Letters of an editor in the older sources are failed checks elsewhere.
        *(("A", "335", True), ("C", "335", True), ("C", "401", False), ("U", "", False)),
        *(("L", "335", False), ("o", "401", False), ("S", "401", False), ("2", "401", False)),
    ],
)
def test_parse_ghcnh_quality_code(code, source, kept):
    rows = [ghcnh_row(0, {"station_level_pressure": code}, source), ghcnh_row(1)]
    file = parse_ghcnh(ghcnh(rows))
    assert math.isnan(file.hours["station_pressure_hpa"].iloc[0]) is not kept
    assert file.hours["temperature_c"].iloc[0] == 10.5
    assert checks(file) == ([] if kept else ["doubtful-values"])


def test_parse_ghcnh_suspect_temperature_leaves_the_hour_out():
    rows = [ghcnh_row(0, {"temperature": "3"}), ghcnh_row(1)]
    file = parse_ghcnh(ghcnh(rows))
    assert [t.hour for t in file.hours.index] == [1]
    assert "1 values that the source marks" in file.notes[0][2]


def test_parse_ghcnh_missing_codes_are_nan_but_999_hpa_is_a_pressure():
    row = ghcnh_row(0).replace("|54|", "|999|").replace("|838.1|", "|-9999|")
    row = row.replace("|1013.2|", "|999.0|").replace("|5.0|", "||")
    hours = parse_ghcnh(ghcnh([row])).hours.iloc[0]
    assert hours[["relative_humidity_pct", "station_pressure_hpa", "wind_speed_kt"]].isna().all()
    assert hours["sea_level_pressure_hpa"] == 999.0


def test_parse_ghcnh_several_stations_raise():
    rows = [ghcnh_row(0), ghcnh_row(1).replace("USW00094765", "USW00000001")]
    with pytest.raises(ArchiveError, match="2 stations"):
        parse_ghcnh(ghcnh(rows))


def test_parse_ghcnh_without_quality_columns_is_read():
    data = "Station_ID|DATE|temperature|dew_point_temperature\nX|2024-01-01T03:00:00|1.0|0.5\n"
    assert len(parse_ghcnh(data.encode()).hours) == 1
    assert "temperature_Quality_Code" in ghcnh_header()
