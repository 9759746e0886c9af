"""The national-service hourly CSV."""

from __future__ import annotations

import pytest
from archive_samples import INMET_HEADER, INMET_META, checks, inmet, inmet_rows

from climarisk.archives.inmet import parse_inmet, read_inmet
from climarisk.errors import ArchiveError

KT_PER_MS = 3600.0 / 1852.0  # international knot, 1852 m per hour (exact)


def test_parse_inmet_takes_the_hourly_columns_not_the_extremes():
    file = parse_inmet(inmet())
    first = file.hours.iloc[0]
    assert str(file.hours.index[0]) == "2020-01-31 20:00:00+00:00"
    assert first["temperature_c"] == 20.1
    assert first["dew_point_c"] == 10.9
    assert first["station_pressure_hpa"] == 930.5
    assert first["relative_humidity_pct"] == 80.0
    assert first["wind_direction_deg"] == 144.0
    assert first["wind_speed_kt"] == pytest.approx(0.5 * KT_PER_MS, abs=1e-12)
    assert (file.station_id, file.station_name) == ("X999", "SERRA ALTA")
    assert (file.latitude, file.longitude, file.elevation_m) == (-8.5, -36.25, 683.95)
    assert not file.typical_year


@pytest.mark.parametrize(
    ("date", "hour"),
    [
        ("%Y-%m-%d", "%H:00"),
        ("%Y/%m/%d", "%H00 UTC"),
        ("%d/%m/%Y", "%H:00 UTC"),
        ("%Y-%m-%d", "%H00"),
        ("%d/%m/%Y", "%H"),
    ],
)
def test_parse_inmet_every_way_to_write_the_time(date, hour):
    reference = parse_inmet(inmet()).hours
    file = parse_inmet(inmet(rows=inmet_rows(date, hour)))
    assert file.hours.equals(reference)
    assert file.notes == ()


@pytest.mark.parametrize(
    "spoil",
    [
        lambda b: b,
        lambda b: b.decode("latin-1").encode("utf-8-sig"),
        lambda b: b.decode("latin-1").encode("ascii", "replace"),
        lambda b: b.decode("latin-1").encode("ascii", "ignore"),
        # Each accent a replacement character, or UTF-8 read as Latin-1 and saved again.
        lambda b: b.decode("ascii", "replace").encode(),
        lambda b: b.decode("latin-1").encode().decode("latin-1").encode(),
        lambda b: b.replace(b"\n", b"\r\n"),
        lambda b: b.replace(b";\n", b"\n"),
    ],
    ids=["latin-1", "utf-8", "question", "dropped", "replaced", "mojibake", "crlf", "no-trailing"],
)
def test_parse_inmet_damaged_header_words_give_the_same_hours(spoil):
    reference = parse_inmet(inmet())
    file = parse_inmet(spoil(inmet()))
    assert file.hours.equals(reference.hours)
    assert file.notes == ()
    assert (file.station_id, file.elevation_m) == ("X999", 683.95)


def test_parse_inmet_without_metadata_and_header_uses_positions():
    reference = parse_inmet(inmet()).hours
    file = parse_inmet(inmet(meta=""))
    assert file.hours.equals(reference) and file.station_id is None and file.elevation_m is None
    bare = parse_inmet(inmet(meta="", header=None))
    assert bare.hours.equals(reference)
    assert checks(bare) == ["columns-by-position"]


def test_parse_inmet_unreadable_names_use_positions_and_are_told():
    header = ";".join(["Data", "Hora UTC", *[f"coluna {i}" for i in range(17)], ""])
    file = parse_inmet(inmet(header=header))
    assert file.hours.equals(parse_inmet(inmet()).hours)
    assert checks(file) == ["columns-by-position"]


def test_parse_inmet_unreadable_names_in_another_order_raise():
    with pytest.raises(ArchiveError, match="column of the temperature cannot be found"):
        parse_inmet(inmet(header="Data;Hora;a;b;c;d;e", rows=["2020/01/01;0000 UTC;1;2;3;4;5"]))


def test_parse_inmet_columns_in_another_order_are_found_by_name():
    header = "Data Medicao;Hora Medicao;UMIDADE RELATIVA DO AR, HORARIA(%);"
    header += "TEMPERATURA DO AR - BULBO SECO, HORARIA(°C);"
    header += "PRESSAO ATMOSFERICA AO NIVEL DA ESTACAO, HORARIA(mB);"
    meta = "Nome: SERRA ALTA\nCodigo Estacao: X999\nLatitude: -8.5\nLongitude: -36.25\n"
    meta += "Altitude: 683.95\nData Inicial: 2020-01-01\n\n"
    file = parse_inmet(inmet(meta=meta, header=header, rows=["2020-01-01;0100;81;22,5;930,5;"]))
    row = file.hours.iloc[0]
    assert (row["relative_humidity_pct"], row["temperature_c"]) == (81.0, 22.5)
    assert row["station_pressure_hpa"] == 930.5
    assert (file.station_id, file.station_name, file.elevation_m) == ("X999", "SERRA ALTA", 683.95)
    assert str(file.hours.index[0]) == "2020-01-01 01:00:00+00:00"


def test_parse_inmet_missing_codes_and_bare_fractions():
    rows = inmet_rows()
    cells = rows[0].split(";")
    cells[3], cells[7], cells[8], cells[15] = "-9999", "-,5", "-9999,0", ""
    empty = ";".join([*rows[1].split(";")[:2], *[""] * 17, ""])
    file = parse_inmet(inmet(rows=[";".join(cells), empty, *rows[2:]]))
    first = file.hours.iloc[0]
    assert first["temperature_c"] == -0.5
    assert first[["station_pressure_hpa", "dew_point_c", "relative_humidity_pct"]].isna().all()
    # The empty hour is no damage: it has no air temperature and so no row.
    assert len(file.hours) == 9 and file.notes == ()


def test_parse_inmet_no_temperature_at_all_gives_no_hours_and_says_so():
    empty = [";".join([*row.split(";")[:2], *[""] * 17, ""]) for row in inmet_rows()]
    file = parse_inmet(inmet(rows=empty))
    assert len(file.hours) == 0
    assert checks(file) == ["no-temperature"]


def test_parse_inmet_unknown_elevation_is_none():
    assert parse_inmet(inmet(meta=INMET_META.replace("683,95", "-9999"))).elevation_m is None
    assert parse_inmet(inmet(meta=INMET_META.replace("683,95", ""))).elevation_m is None


def test_parse_inmet_no_such_date_is_a_damaged_line():
    rows = inmet_rows()
    rows[3] = rows[3].replace("2020/01/31", "2020/02/30")
    file = parse_inmet(inmet(rows=rows))
    assert checks(file) == ["damaged-lines"] and len(file.hours) == 9
    assert INMET_HEADER.count(";") == 19


def test_parse_inmet_damaged_first_line_is_not_taken_for_the_header():
    rows = inmet_rows()
    rows[0] = "x" + rows[0]
    file = parse_inmet(inmet(rows=rows))
    assert file.hours.equals(parse_inmet(inmet()).hours.iloc[1:])
    assert checks(file) == ["damaged-lines"] and file.notes[0][2].endswith("line 10.")


def test_read_inmet_real_files_agree_with_a_plain_csv_count(stations):
    # Counted and summed with the csv module alone.
    file = read_inmet(stations / "inmet" / "dados_garanhuns_2020.CSV")
    hours = file.hours
    assert hours["temperature_c"].count() == 8784
    assert hours["dew_point_c"].count() == 6493
    assert hours["temperature_c"].sum() == pytest.approx(189778.1, abs=0.01)
    assert hours["station_pressure_hpa"].sum() == pytest.approx(8106363.6, abs=0.01)
    assert hours["relative_humidity_pct"].sum() == 532466.0
    assert hours["wind_speed_kt"].sum() == pytest.approx(21682.4 * KT_PER_MS, abs=0.01)
    noon = hours.loc["2020-07-15 15:00+00:00"]
    assert noon.drop("wind_speed_kt").dropna().tolist() == [22.0, 21.5, 97.0, 925.4, 135.0]
    assert (file.station_id, file.elevation_m, file.latitude) == ("A322", 827.78, -8.91095)
    palmares = read_inmet(stations / "inmet" / "dados_palmares_2020.CSV").hours
    assert palmares["wind_speed_kt"].iloc[0] == pytest.approx(0.9 * KT_PER_MS, abs=1e-12)


def test_read_inmet_every_real_file_is_read_without_damage(stations):
    for path in sorted((stations / "inmet").iterdir()):
        file = read_inmet(path)
        assert "damaged-lines" not in checks(file), path.name
        assert "columns-by-position" not in checks(file), path.name
        assert file.elevation_m is not None
