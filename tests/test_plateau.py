"""A plateau at 2000 m whose station gives sea-level pressure only, from the files to the tables.

Read as an altimeter setting it makes the density altitude wrong by hundreds of feet (METHODS 2.4),
too high on hot afternoons and too low on cold nights.
"""

import json

import numpy as np
import pytest
from study_maker import make_study, study_toml

from climarisk.outputs.tables import write_outputs
from climarisk.pipeline import run_study

G, R, LAPSE = 9.80665, 287.05287, 0.0065  # ISO 2533
EXPONENT = G / (R * LAPSE)
HEIGHT_M, BASE_M = 2000.0, 300.0
HOURS = 24 * 730  # 2021 and 2022
TIME = np.datetime64("2021-01-01T00") + np.arange(HOURS).astype("timedelta64[h]")
LOCAL = TIME - np.timedelta64(7, "h")
MONTH = LOCAL.astype("datetime64[M]").astype(int) % 12
HOUR = LOCAL.astype(int) % 24

MAPPING = """\
source = "invented weather"
delimiter = ";"
missing = [-9999]
[time]
columns = ["time"]
format = "%Y-%m-%dT%H"
zone = "UTC"
[columns.temperature]
column = "air"
unit = "degC"
[columns.dew_point]
column = "dew"
unit = "degC"
"""


def qnh(p, height_m):
    """Return the altimeter setting by the standard atmosphere (ICAO Doc 7488/3)."""
    return 1013.25 * ((p / 1013.25) ** (1 / EXPONENT) + LAPSE * height_m / 288.15) ** EXPONENT


def from_qnh(setting, height_m):
    root = (setting / 1013.25) ** (1 / EXPONENT) - LAPSE * height_m / 288.15
    return 1013.25 * root**EXPONENT


def vapour_hpa(dew, p):
    """Return the vapour pressure of Buck 1981 (METHODS 3.1)."""
    return (1.0007 + 3.46e-6 * p) * 6.1121 * np.exp(17.502 * dew / (240.97 + dew))


def density_altitude_ft(p, t, e):
    virtual_k = (t + 273.15) / (1 - 0.37802 * e / p)
    return 145442.156 * (1 - ((p / 1013.25) / (virtual_k / 288.15)) ** 0.234969041)


def truth():
    """Return temperature, dew point, station and sea-level pressure, and the column's temperature.

    Hot summers, cold winters; pressure aloft a little higher in summer, with weather of some
    days; the service reduces with the mean temperature of now and 12 h ago (METHODS 2.3).
    """
    n = np.arange(HOURS)
    season = np.cos(2 * np.pi * (n / 24 - 200) / 365.25)
    day = np.cos(2 * np.pi * (HOUR - 15) / 24)
    draw = np.random.default_rng(20)
    weather = np.interp(n, np.arange(0, HOURS + 60, 60), draw.normal(0, 1, HOURS // 60 + 1))
    t = 3.0 + 15.0 * season + 8.0 * day - 2.0 * weather
    dew = np.minimum(-6.0 + 8.0 * season + weather, t - 3.0)
    p = 796.0 + 3.0 * season + 4.0 * weather
    t12 = (t + np.concatenate((t[:12], t[:-12]))) / 2
    column_k = t12 + 273.15 + LAPSE * HEIGHT_M / 2 + 0.12 * vapour_hpa(dew, p)
    return t, dew, p, p * np.exp(G * HEIGHT_M / (R * column_k)), t12


T, DEW, P, SEA_LEVEL, T12 = truth()
TRUE_FT = density_altitude_ft(P, T, vapour_hpa(DEW, P))
MISREAD_FT = density_altitude_ft(from_qnh(SEA_LEVEL, HEIGHT_M), T, vapour_hpa(DEW, P))


def text(columns):
    lines = [";".join(["time", "air", "dew", *columns])]
    for i in range(HOURS):
        cells = [f"{v[i]:.1f}" if np.isfinite(v[i]) else "-9999" for v in (T, DEW)]
        cells += [f"{v[i]:.1f}" if np.isfinite(v[i]) else "-9999" for v in columns.values()]
        lines.append(";".join([str(TIME[i]), *cells]))
    return "\n".join(lines) + "\n"


def base_text():
    """Return an airport 1700 m below in the same air, with its altimeter setting."""
    mean_k = T12 + 273.15 + LAPSE * (HEIGHT_M - BASE_M) / 2
    p = P * np.exp(G * (HEIGHT_M - BASE_M) / (R * mean_k))
    setting = qnh(p, BASE_M) / 33.86389
    air = T + LAPSE * (HEIGHT_M - BASE_M)
    lines = ["station,valid,tmpc,dwpc,alti"]
    for i in range(HOURS):
        when = str(TIME[i]).replace("T", " ") + ":00"
        lines.append(f"BASE,{when},{air[i]:.1f},{DEW[i] + 5:.1f},{setting[i]:.3f}")
    return "\n".join(lines) + "\n"


def run(folder, columns, kinds, base=False):
    """Run a study of a field on the plateau's station; `kinds` are the mapping's pressures."""
    study = make_study(folder)
    study.write("study.toml", study_toml("files", 2021, 2022))
    mapping = MAPPING
    for name, column in kinds.items():
        mapping += f'[columns.{name}]\ncolumn = "{column}"\nunit = "hPa"\n'
    study.write("plateau.toml", mapping).write("archive/plateau.txt", text(columns))
    stations = "id,name,latitude,longitude,elevation_m,archive,files\n"
    stations += "PLAT,Plateau (invented),39.5,-105.0,2000,plateau.toml,archive/plateau.txt\n"
    if base:
        stations += "BASE,Plain (invented),40.6,-105.0,300,asos,archive/base.csv\n"
        study.write("archive/base.csv", base_text())
    study.write("stations.csv", stations)
    head = "id,name,latitude,longitude,elevation_m,timezone,stations\n"
    study.write("fields.csv", head + "P,Plateau strip (invented),39.5,-105.0,2000,Etc/GMT+7,\n")
    head = "field,runway,heading_deg,length_m,surface,takeoff,landing\n"
    study.write("runways.csv", head + "P,09,90,1200,paved,yes,yes\n")
    return run_study(study.file)


def at(month, hour):
    return (month - 1 == MONTH) & (hour == HOUR)


def cell(result, month, hour):
    table = result.distributions_hourly.query("variable == 'density_altitude'")
    row = table[(table["month"] == month) & (table["hour"] == hour)].iloc[0]
    return row, at(month, hour)


#: Hot afternoon, cold morning.
EXTREMES = ((7, 15), (1, 6))


def test_sea_level_pressure_read_as_an_altimeter_setting_is_wrong_by_hundreds_of_feet():
    for (month, hour), sign in zip(EXTREMES, (1, -1), strict=True):
        off = sign * (MISREAD_FT - TRUE_FT)[at(month, hour)].mean()
        # METHODS 2.4 at 2000 m: +690 ft at ISA+25 and -298 at ISA-10 for the present
        # temperature; the mean of now and 12 h ago lies 8 K nearer in summer and 6 K in winter.
        assert off > 200 if sign < 0 else off > 300


def sources(result):
    return dict(
        zip(result.pressure_sources["source"], result.pressure_sources["share"], strict=True)
    )


def test_sea_level_pressure_alone_is_not_used_and_the_error_is_stated(tmp_path):
    result = run(tmp_path / "study", {"slp": SEA_LEVEL}, {"sea_level_pressure": "slp"})
    assert set(sources(result)) == {"climatological"}
    stated = result.estimates["pressure_error_ft"].iloc[0]
    # 5 hPa of QNH, some 33 ft of density altitude each (METHODS 2.2).
    assert stated == pytest.approx(5 * 33, rel=0.05)
    told = [f.message for f in result.findings if (f.subject, f.check) == ("field", "pressure")]
    assert len(told) == 1
    assert "standard 1013.25 hPa" in told[0] and "sea-level pressure above 1500 m" in told[0]
    for month, hour in EXTREMES:
        row, here = cell(result, month, hour)
        off = abs(row["mean"] - TRUE_FT[here].mean())
        assert off < 2 * stated
        assert off < 0.75 * abs((MISREAD_FT - TRUE_FT)[here].mean())
    files = write_outputs(result, tmp_path / "out")
    written = json.loads(next(p for p in files if p.name == "study.json").read_text())
    assert [f for f in written["findings"] if f["check"] == "pressure" and f["id"] == "P"]


def test_an_airport_of_the_region_brings_the_error_down(tmp_path):
    result = run(tmp_path / "study", {"slp": SEA_LEVEL}, {"sea_level_pressure": "slp"}, base=True)
    shares = sources(result)
    assert shares["climatological QNH with neighbours' anomalies"] > 0.99
    told = [f.message for f in result.findings if (f.subject, f.check) == ("field", "pressure")]
    assert len(told) == 1 and "the QNH of BASE" in told[0]
    stated = result.estimates["pressure_error_ft"].iloc[0]
    assert 20 < stated < 250
    for month, hour in EXTREMES:
        row, here = cell(result, month, hour)
        off = abs(row["mean"] - TRUE_FT[here].mean())
        assert off < min(stated, 60)  # 60 ft: a fifth of the misreading
        assert abs(row["p90"] - np.quantile(TRUE_FT[here], 0.9)) < min(2 * stated, 100)


def test_a_year_of_both_pressures_calibrates_the_other_year(tmp_path):
    both = np.where(np.arange(HOURS) < 24 * 365, P, np.nan)
    columns = {"slp": SEA_LEVEL, "station": both}
    kinds = {"sea_level_pressure": "slp", "station_pressure": "station"}
    result = run(tmp_path / "study", columns, kinds)
    shares = sources(result)
    assert set(shares) == {"station pressure", "sea-level pressure, calibrated"}
    assert shares["sea-level pressure, calibrated"] == pytest.approx(0.5, abs=0.01)
    stated = result.estimates["pressure_error_ft"].iloc[0]
    assert stated < 20
    for month, hour in EXTREMES:
        row, here = cell(result, month, hour)
        assert abs(row["mean"] - TRUE_FT[here].mean()) < min(2 * stated, 15)
    assert not [f for f in result.findings if (f.subject, f.check) == ("field", "pressure")]


def test_station_pressure_gives_the_truth(tmp_path):
    result = run(tmp_path / "study", {"station": P}, {"station_pressure": "station"})
    assert sources(result) == {"station pressure": 1.0}
    for month, hour in EXTREMES:
        row, here = cell(result, month, hour)
        # Tenths of a kelvin and of a hectopascal, in the mean of 60 hours: under 2 ft.
        assert row["mean"] == pytest.approx(TRUE_FT[here].mean(), abs=3)
        assert row["p90"] == pytest.approx(
            np.quantile(TRUE_FT[here], 0.9, method="median_unbiased"), abs=8
        )
