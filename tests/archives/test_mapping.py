"""Column mappings."""

from __future__ import annotations

import copy
from pathlib import Path

import pytest
from archive_samples import checks
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.archives.mapping import parse_mapped, parse_mapping, read_mapping
from climarisk.errors import ArchiveError, InputError

MAPPINGS = Path(__file__).parent / "mappings"
BASE = {
    "time": {"columns": ["Date"], "format": "%Y-%m-%d %H:%M", "zone": "UTC"},
    "columns": {"temperature": {"column": "T", "unit": "degC"}},
}


def mapping(**changes):
    """`BASE` with the keys of ``time`` and ``columns`` merged and the others replaced."""
    content = copy.deepcopy(BASE)
    for key, value in changes.items():
        if isinstance(value, dict) and key in content:
            content[key] |= value
        else:
            content[key] = value
    return parse_mapping(content, "m.toml")


def times(text, **changes):
    """UTC times of the hours read from `text`."""
    file = parse_mapped(text.encode(), mapping(**changes), "a.csv")
    return [str(t)[:16] for t in file.hours.index]


def test_parse_mapped_reads_by_name():
    file = parse_mapped(b"Date,x,T\n2020-07-01 12:00,9,21.5\n", mapping(source="Somebody"), "a")
    assert file.hours["temperature_c"].tolist() == [21.5]
    assert file.source == "Somebody" and file.notes == ()


@pytest.mark.parametrize(
    ("quantity", "column", "unit", "came", "expected"),
    [
        ("temperature", "temperature_c", "degF", "59", 15.0),  # definition of the scale
        ("temperature", "temperature_c", "K", "273.15", 0.0),  # definition of the scale
        ("dew_point", "dew_point_c", "degC", "-3", -3.0),
        ("relative_humidity", "relative_humidity_pct", "%", "54", 54.0),
        ("relative_humidity", "relative_humidity_pct", "fraction", "0.54", 54.0),
        ("station_pressure", "station_pressure_hpa", "Pa", "83700", 837.0),
        ("station_pressure", "station_pressure_hpa", "kPa", "83.7", 837.0),
        ("station_pressure", "station_pressure_hpa", "hPa", "837", 837.0),
        # NIST SP 811, section B.8: 1 inHg = 3.386389e3 Pa, 1 mmHg = 1.333224e2 Pa.
        ("qnh", "qnh_hpa", "inHg", "30", 30 * 33.86389),
        ("sea_level_pressure", "sea_level_pressure_hpa", "mmHg", "760", 760 * 1.333224),
        ("wind_speed", "wind_speed_kt", "m/s", "10", 36000.0 / 1852.0),
        ("wind_speed", "wind_speed_kt", "km/h", "18.52", 10.0),
        ("wind_speed", "wind_speed_kt", "mph", "10", 16093.44 / 1852.0),
        ("wind_speed", "wind_speed_kt", "kt", "10", 10.0),
        ("wind_direction", "wind_direction_deg", "deg", "270", 270.0),
    ],
)
def test_parse_mapped_unit(quantity, column, unit, came, expected):
    text = f"Date,T,V\n2020-07-01 12:00,20,{came}\n".encode()
    columns = {quantity: {"column": "V", "unit": unit}}
    value = parse_mapped(text, mapping(columns=columns), "a").hours[column].iloc[0]
    # Half the last printed digit of 1.333224, the coarser of the two factors with a source.
    assert value == pytest.approx(expected, rel=0.5e-6 / 1.333224, abs=1e-9)


def test_parse_mapped_alternatives_positions_and_no_header():
    columns = {"temperature": {"column": ["Temp", "T"], "unit": "degC"}}
    assert times("Date,T\n2020-07-01 12:00,1\n", columns=columns) == ["2020-07-01 12:00"]
    columns = {"temperature": {"column": 3, "unit": "degC"}}
    text = "x,2020-07-01 12:00,21.5\n"
    file = parse_mapped(
        text.encode(), mapping(header=False, time={"columns": [2]}, columns=columns), "a"
    )
    assert file.hours["temperature_c"].tolist() == [21.5]


def test_parse_mapped_skipped_rows_comments_decimal_comma_and_white_space():
    text = "a title\n\n# note\nDate Clock T\n# note\n2020-07-01 12:00 -,5\n2020-07-01 13:00 x99\n"
    changes = {"skip_rows": 1, "comment": "#", "decimal": ",", "delimiter": "whitespace"}
    changes |= {"missing": ["x99"], "time": {"columns": ["Date", "Clock"]}}
    file = parse_mapped(text.encode(), mapping(**changes), "a")
    assert file.hours["temperature_c"].tolist() == [-0.5] and file.notes == ()


def test_parse_mapped_missing_code_is_told_by_value():
    text = "Date,T\n2020-07-01 12:00,-9999.0\n2020-07-01 13:00,-9999\n2020-07-01 14:00,5\n"
    assert times(text, missing=[-9999]) == ["2020-07-01 14:00"]


def test_parse_mapped_encoding():
    text = "Date,Température\n2020-07-01 12:00,5\n".encode("latin-1")
    columns = {"temperature": {"column": "Température", "unit": "degC"}}
    assert len(parse_mapped(text, mapping(encoding="latin-1", columns=columns), "a").hours) == 1
    with pytest.raises(ArchiveError, match="the text is not 'utf-8'"):
        parse_mapped(text, mapping(encoding="utf-8", columns=columns), "a")


def test_parse_mapped_fixed_offset():
    text = "Date,T\n2020-07-01 00:00,5\n"
    assert times(text, time={"zone": "+01:00"}) == ["2020-06-30 23:00"]
    assert times(text, time={"zone": "-03:30"}) == ["2020-07-01 04:00"]  # 03:30 to the next hour


def test_parse_mapped_iana_zone_drops_the_hours_of_clock_change():
    # Central European time: 2020-03-29 02:00 became 03:00; 2020-10-25 03:00 became 02:00 (IANA).
    hours = ["2020-03-29 01:00", "2020-03-29 02:00", "2020-03-29 03:00", "2020-07-01 12:00"]
    hours += ["2020-10-25 01:00", "2020-10-25 02:00", "2020-10-25 03:00"]
    text = "Date,T\n" + "".join(f"{h},5\n" for h in hours)
    file = parse_mapped(text.encode(), mapping(time={"zone": "Europe/Rome"}), "a")
    expected = ["2020-03-29 00:00", "2020-03-29 01:00", "2020-07-01 10:00"]
    expected += ["2020-10-24 23:00", "2020-10-25 02:00"]
    assert [str(t)[:16] for t in file.hours.index] == expected
    assert checks(file) == ["clock-change"] and "2 lines" in file.notes[0][2]


def test_parse_mapped_hour_label():
    text = "Date,T\n2020-12-31 23:00,5\n2020-12-31 24:00,6\n2020-12-31 22:00,6\n"
    assert times(text, time={"hour_label": "end"})[-1] == "2021-01-01 00:00"
    assert times(text)[-1] == "2020-12-31 23:00"
    assert times(text, time={"hour_label": "start"}) == ["2020-12-31 23:00", "2021-01-01 00:00"]


def test_parse_mapped_separate_time_columns():
    time = {"year": "Y", "month": "M", "day": "D", "hour": "H", "zone": "UTC"}
    content = {"time": time, "columns": BASE["columns"]}
    text = (
        b"Y,M,D,H,T\n2020,2,29,6,1.5\n2020,2,30,6,1.5\n2020,3,1,6,1\n2020,3,1,24,1\n2020,3,1,7,1\n"
    )
    file = parse_mapped(text, parse_mapping(content), "a")
    assert [str(t)[:13] for t in file.hours.index] == [
        "2020-02-29 06",
        "2020-03-01 06",
        "2020-03-01 07",
    ]
    assert "2 of 5 lines are damaged and were skipped, the first is line 3" in file.notes[0][2]


@pytest.mark.parametrize(
    ("form", "came"),
    [
        ("%d.%m.%y %H:%M:%S", "01.07.20 14:00:00"),
        ("%d %b %Y %I:%M %p", "1 Jul 2020 2:00 pm"),
        ("%Y%m%d%H", "2020070114"),
        ("%Y/%j %H%M", "2020/183 1400"),  # 1 July is day 183 of a leap year
        ("%m/%d/%Y %Hh", "7/1/2020 14h"),
    ],
)
def test_parse_mapped_time_format(form, came):
    assert times(f"Date,T\n{came},5\n", time={"format": form}) == ["2020-07-01 14:00"]


def test_parse_mapped_column_not_in_the_file_names_the_nearest():
    with pytest.raises(ArchiveError, match="'T' of the mapping .temperature. is not in the header"):
        parse_mapped(b"Date,Temp\n2020-07-01 12:00,5\n", mapping(), "a")


def test_parse_mapped_empty_and_wrong_files_raise():
    for data in (b"", b"\n", b"Date,T\n", b"Date,T\nhello,world\n", b"Date,T\n\x00\n"):
        with pytest.raises(ArchiveError, match=r"^a\.csv"):
            parse_mapped(data, mapping(), "a.csv")
    with pytest.raises(ArchiveError, match="no header line"):
        parse_mapped(b"Date,T\n", mapping(skip_rows=5), "a")


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"delimeter": ";"}, "'delimeter' is not known here; did you mean 'delimiter'"),
        ({"time": {"zon": "UTC"}}, "'time.zon' is not known here; did you mean 'zone'"),
        ({"columns": {"temprature": {"column": 1}}}, "did you mean 'temperature'"),
        ({"columns": {"qnh": {"column": 1, "units": "hPa"}}}, "did you mean 'unit'"),
        ({"columns": {"temperature": {"column": "T", "unit": "C"}}}, "allowed: degC, degF, K"),
        ({"columns": {"temperature": {"column": "T"}}}, "unit is None"),
        ({"columns": {"temperature": {"column": 0, "unit": "K"}}}, "greater than or equal to 1"),
        ({"columns": {"temperature": {"column": True, "unit": "K"}}}, "temperature"),
        ({"delimiter": ";;"}, "give one character"),
        ({"delimiter": ",", "decimal": ","}, "same character"),
        ({"encoding": "base64"}, "give a text encoding"),
        ({"time": {"zone": "Mars/Base"}}, "an IANA name"),
        ({"time": {"zone": "+99:00"}}, "an IANA name"),
        ({"time": {"zone": None}}, "'zone' is missing"),
        ({"time": {"format": "%Y-%m %H"}}, "date is not complete"),
        ({"time": {"format": "%Y-%m-%d"}}, "hour is not clear"),
        ({"time": {"format": "%Y-%m-%d %I:%M"}}, "hour is not clear"),
        ({"time": {"format": "%Y-%m-%d %H %Q"}}, "'%Q' is not known"),
        ({"time": {"format": "%Y-%m-%d %H %H"}}, "comes twice"),
        ({"time": {"format": "unix seconds", "zone": "+01:00"}}, "unix seconds are UTC"),
        ({"time": {"format": None}}, "'format' is missing"),
        ({"time": {"year": "Y"}}, "either 'columns'"),
        ({"time": {"columns": None}}, "all of year, month, day and hour"),
        ({"time": {"hour_label": "middle"}}, "'instant', 'end' or 'start'"),
        ({"header": False}, "columns must be positions"),
        ({"skip_rows": -1}, "skip_rows"),
    ],
)
def test_parse_mapping_wrong_content_raises(changes, message):
    with pytest.raises(InputError, match=r"^m\.toml") as caught:
        mapping(**changes)
    assert message in str(caught.value)


def test_parse_mapping_nothing_tells_all_that_is_missing():
    with pytest.raises(InputError) as caught:
        parse_mapping({}, "m.toml")
    assert len(caught.value.problems) == 2


def test_read_mapping_bad_toml_raises(tmp_path):
    path = tmp_path / "m.toml"
    path.write_text("delimiter = ")
    with pytest.raises(InputError, match="not valid TOML"):
        read_mapping(path)
    with pytest.raises(InputError, match="no such file"):
        read_mapping(tmp_path / "none.toml")


@settings(max_examples=100, deadline=None)
@given(
    data=st.binary(max_size=200),
    head=st.sampled_from([b"", b"Date,T\n", b"Date,T\n2020-01-01 00:00,1\n"]),
)
def test_parse_mapped_random_bytes_raise_only_archive_errors(data, head):
    try:
        parse_mapped(head + data, mapping(time={"zone": "Europe/Rome"}), "a")
    except ArchiveError as error:
        assert str(error).startswith("a")


VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8),
    lambda inner: (
        st.lists(inner, max_size=3)
        | st.dictionaries(
            st.sampled_from(["column", "unit", "zone", "format", "x"]), inner, max_size=3
        )
    ),
    max_leaves=6,
)


@settings(max_examples=100, deadline=None)
@given(
    content=st.dictionaries(
        st.sampled_from(["delimiter", "decimal", "encoding", "missing", "time", "columns", "z"]),
        VALUES,
    )
)
def test_parse_mapping_random_content_raises_only_input_errors(content):
    try:
        parse_mapping({**BASE, **content}, "m.toml")
    except InputError as error:
        assert all(p.startswith("m.toml") for p in error.problems)


def test_parse_mapped_real_alpine_files_agree_with_a_plain_csv_count(stations):
    alpine = read_mapping(MAPPINGS / "alpine.toml")

    def read(number):
        path = stations / "alpine" / f"meteo{number:04}.txt"
        return parse_mapped(path.read_bytes(), alpine, path.name)

    # Lines, temperatures and humidities counted with the csv module alone; 15/10/2010 00:00
    # at UTC+1 is 23:00 UTC of the day before.
    first = read(1).hours
    assert len(first) == 8761 and first["relative_humidity_pct"].count() == 8761
    assert str(first.index[0]) == "2010-10-14 23:00:00+00:00"
    assert first.iloc[0][["temperature_c", "relative_humidity_pct"]].tolist() == [5.7, 85.376]
    assert first.loc["2011-05-11 07:00+00:00"]["temperature_c"] == 13.1
    gappy = read(14).hours
    assert (len(gappy), gappy["relative_humidity_pct"].count()) == (8612, 7511)
    assert checks(read(3)) == ["no-temperature"] and len(read(3).hours) == 0


def test_parse_mapped_real_california_files_agree_with_a_plain_csv_count(stations):
    california = read_mapping(MAPPINGS / "california.toml")
    path = stations / "california" / "viejas.csv"
    file = parse_mapped(path.read_bytes(), california, path.name)
    hours = file.hours
    assert len(hours) == 61166 and hours["wind_direction_deg"].count() == 59994
    assert str(hours.index[0]) == "2012-01-01 00:00:00+00:00"  # 1325376000
    row = hours.loc["2016-07-29 00:00+00:00"]  # 1469750400
    assert row[["temperature_c", "relative_humidity_pct", "wind_direction_deg"]].tolist() == [
        32.78,
        16.0,
        243.0,
    ]
    assert row["wind_speed_kt"] == pytest.approx(4.47 * 3600.0 / 1852.0, abs=1e-9)
    assert file.notes == ()
