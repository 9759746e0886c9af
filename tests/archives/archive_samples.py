"""Small files of each format, made here in the shape of the real ones."""

from __future__ import annotations

from datetime import datetime, timedelta

INMET_HEADER = (
    "Data;Hora UTC;PRECIPITAÇÃO TOTAL, HORÁRIO (mm);"
    "PRESSAO ATMOSFERICA AO NIVEL DA ESTACAO, HORARIA (mB);"
    "PRESSÃO ATMOSFERICA MAX.NA HORA ANT. (AUT) (mB);"
    "PRESSÃO ATMOSFERICA MIN. NA HORA ANT. (AUT) (mB);RADIACAO GLOBAL (Kj/m²);"
    "TEMPERATURA DO AR - BULBO SECO, HORARIA (°C);TEMPERATURA DO PONTO DE ORVALHO (°C);"
    "TEMPERATURA MÁXIMA NA HORA ANT. (AUT) (°C);TEMPERATURA MÍNIMA NA HORA ANT. (AUT) (°C);"
    "TEMPERATURA ORVALHO MAX. NA HORA ANT. (AUT) (°C);"
    "TEMPERATURA ORVALHO MIN. NA HORA ANT. (AUT) (°C);"
    "UMIDADE REL. MAX. NA HORA ANT. (AUT) (%);UMIDADE REL. MIN. NA HORA ANT. (AUT) (%);"
    "UMIDADE RELATIVA DO AR, HORARIA (%);VENTO, DIREÇÃO HORARIA (gr) (° (gr));"
    "VENTO, RAJADA MAXIMA (m/s);VENTO, VELOCIDADE HORARIA (m/s);"
)
INMET_META = (
    "REGIAO:;NE\nUF:;PE\nESTAÇÃO:;SERRA ALTA\nCODIGO (WMO):;X999\nLATITUDE:;-8,5\n"
    "LONGITUDE:;-36,25\nALTITUDE:;683,95\nDATA DE FUNDACAO:;20/11/04\n"
)


def inmet_rows(date: str = "%Y/%m/%d", hour: str = "%H00 UTC", count: int = 10) -> list[str]:
    """Lines of hourly values; the hourly values differ from the extremes beside them."""
    start = datetime(2020, 1, 31, 20)
    rows = []
    for i in range(count):
        t = start + timedelta(hours=i)
        rows.append(
            f"{t.strftime(date)};{t.strftime(hour)};0;93{i % 10},5;999,1;888,1;;2{i % 10},1;"
            f"1{i % 10},9;55,5;-55,5;44,4;-44,4;99;11;8{i % 10};144;9,7;,5;"
        )
    return rows


def inmet(
    meta: str = INMET_META, header: str | None = INMET_HEADER, rows: list[str] | None = None
) -> bytes:
    """An hourly CSV of the national service, Latin-1."""
    lines = [*([header] if header else []), *(inmet_rows() if rows is None else rows)]
    return (meta + "\n".join(lines) + "\n").encode("latin-1")


EPW_HEADER = (
    "LOCATION,High Strip,CO,USA,TMY3,999999,39.5,-104.5,-7.0,1650.0\n"
    "DESIGN CONDITIONS,0\nTYPICAL/EXTREME PERIODS,0\nGROUND TEMPERATURES,0\n"
    "HOLIDAYS/DAYLIGHT SAVINGS,No,0,0,0\nCOMMENTS 1,made for a test\nCOMMENTS 2,\n"
    "DATA PERIODS,1,1,Data,Sunday, 1/ 1,12/31\n"
)


def epw_row(year: int, month: int, day: int, hour: int, minute: int = 0, **values: str) -> str:
    """A data line of an EPW file."""
    v = {"t": "10.5", "td": "1.5", "rh": "54", "p": "83700", "dir": "180", "speed": "5.0"} | values
    zeros = ",".join(["0"] * 10)
    return (
        f"{year},{month},{day},{hour},{minute},?9?9?9,{v['t']},{v['td']},{v['rh']},{v['p']},"
        f"{zeros},{v['dir']},{v['speed']},2,2,777.7,20306,9,999999999,30,0.0440,0,88,0.220,999.0,99.0"
    )


def epw(rows: list[str] | None = None) -> bytes:
    """An EPW file with carriage returns."""
    rows = [epw_row(1995, 1, 1, h) for h in range(1, 25)] if rows is None else rows
    return (EPW_HEADER + "\n".join(rows) + "\n").replace("\n", "\r\n").encode()


def tmy3(rows: list[str] | None = None, station: str | None = None) -> bytes:
    """A typical-year file in the CSV layout."""
    station = station or '724666,"HIGH STRIP, CO",CO,-7,39.742,-105.179,1829,,,'
    header = (
        "Date (MM/DD/YYYY),Time (HH:MM),ETR (W/m^2),Dry-bulb (C),Dry-bulb source,Dew-point (C),"
        "Dew-point source,RHum (%),RHum source,Pressure (mbar),Pressure source,Wdir (degrees),"
        "Wdir source,Wspd (m/s),Wspd source"
    )
    if rows is None:
        rows = [tmy3_row("1/1/1999", f"{h}:00") for h in range(1, 25)]
    return "\n".join([station, header, *rows]).encode()


def tmy3_row(date: str, time: str, t: str = "-3", p: str = "806") -> str:
    """A data line of the CSV layout."""
    return f"{date},{time},0,{t},A,-4,A,92,A,{p},A,170,A,2.1,A"


def isd_lite(count: int = 6) -> bytes:
    """A light fixed-width file."""
    return b"".join(
        b"2016 01 01 %02d   -44   -83 %5d   260    67     4 -9999 -9999\n" % (i, 10256 + i)
        for i in range(count)
    )


LCD_HEADER = (
    '"STATION","DATE","LATITUDE","LONGITUDE","ELEVATION","NAME","REPORT_TYPE",'
    '"HourlyAltimeterSetting","HourlyDewPointTemperature","HourlyDryBulbTemperature",'
    '"HourlyRelativeHumidity","HourlySeaLevelPressure","HourlyStationPressure",'
    '"HourlyWindDirection","HourlyWindSpeed"'
)
LCD_PLACE = '72611694765,{time},43.62707,-72.30537,168.9,"VALLEY AIRPORT, NH US"'


def lcd(rows: list[str] | None = None, header: str = LCD_HEADER) -> bytes:
    """A local climatological data file; `rows` are the fields after the name."""
    if rows is None:
        rows = [
            f'2022-01-01T{h:02}:53:00|"FM-15","29.92","33","35","93","29.93","29.31","010","10"'
            for h in range(4)
        ]
    split = (row.split("|", 1) for row in rows)
    lines = [f"{LCD_PLACE.format(time=time)},{rest}" for time, rest in split]
    return "\n".join([header, *lines, ""]).encode()


def asos(rows: list[str] | None = None, header: str = "", delimiter: str = ",") -> bytes:
    """An archive of airport reports."""
    header = header or "station,valid,tmpf,dwpf,relh,drct,sknt,alti,mslp"
    if rows is None:
        rows = [f"XYZ,2020-07-01 {h:02}:53,59.00,50.00,72.0,180,10,30.00,1015.5" for h in range(4)]
    text = "#DEBUG: made for a test\n#DEBUG: second line\n" + "\n".join([header, *rows]) + "\n"
    return text.replace(",", delimiter).encode()


GHCNH_QUANTITIES = (
    *("temperature", "dew_point_temperature", "station_level_pressure", "sea_level_pressure"),
    *("wind_direction", "wind_speed", "relative_humidity", "altimeter"),
)
GHCNH_VALUES = ("10.5", "1.5", "838.1", "1013.2", "180", "5.0", "54", "1015.2")


def ghcnh_header(dated: bool = False) -> str:
    """The header of a file of the global hourly archive."""
    place = ["Latitude", "Longitude", "Elevation"]
    time = ["DATE"] if dated else ["Year", "Month", "Day", "Hour", "Minute"]
    parts = ("", "_Measurement_Code", "_Quality_Code", "_Report_Type", "_Source_Code")
    columns = [f"{q}{p}" for q in GHCNH_QUANTITIES for p in (*parts, "_Source_Station_ID")]
    return "|".join(["Station_ID", "Station_name", *time, *place, *columns])


def ghcnh_row(
    hour: int, codes: dict[str, str] | None = None, source: str = "335", dated: bool = False
) -> str:
    """A data line; `codes` gives the quality code of a quantity."""
    codes = codes or {}
    time = [f"2024-02-29T{hour:02}:00:00"] if dated else ["2024", "02", "29", str(hour), "0"]
    cells = []
    for quantity, value in zip(GHCNH_QUANTITIES, GHCNH_VALUES, strict=True):
        cells += [value, "", codes.get(quantity, "1"), "FM15", source, "X"]
    return "|".join(["USW00094765", "HIGH STRIP", *time, "39.5", "-104.5", "1650.0", *cells])


def ghcnh(rows: list[str] | None = None, dated: bool = False) -> bytes:
    """A file of the global hourly archive."""
    rows = [ghcnh_row(h, dated=dated) for h in range(4)] if rows is None else rows
    return "\n".join([ghcnh_header(dated), *rows]).encode()


ALL = {
    "inmet": inmet,
    "epw": epw,
    "tmy3": tmy3,
    "isd-lite": isd_lite,
    "lcd": lcd,
    "asos": asos,
    "ghcnh": ghcnh,
}


def checks(file) -> list[str]:
    """Names of the notes of an archive file."""
    return [check for _, check, _ in file.notes]
