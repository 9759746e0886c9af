"""Hiding stations: what the report says of weather whose truth is known, and of real stations."""

from __future__ import annotations

import csv
import io
import xml.etree.ElementTree as ET
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from study_maker import SCALED_AIRCRAFT

from climarisk.atmosphere import density_altitude_ft, dew_point_c, isa_pressure_hpa
from climarisk.clock import hour_grid
from climarisk.errors import InputError, OutputError
from climarisk.lapse import table_lapse
from climarisk.observations import COLUMNS
from climarisk.outputs.verification import csv_text, plain_text, svg_text, write_verification
from climarisk.progress import quiet
from climarisk.stations import distance_km
from climarisk.study import Study, read_study
from climarisk.timing import Misdating
from climarisk.transfer import VAPOUR_DECAY_PER_KM
from climarisk.verification import VerificationReport, singled_out, verify_study
from climarisk.weather import StationHours, Weather, load_weather

SVG = "{http://www.w3.org/2000/svg}"
YEAR = 2021
GRID = hour_grid(YEAR, YEAR)
TIMES = pd.DatetimeIndex(GRID.astype("datetime64[h]"), tz="UTC", name="time").as_unit("s")
MONTH, HOUR = TIMES.month.to_numpy() - 1, TIMES.hour.to_numpy()
INSIDE = TIMES.year == YEAR


def study_of(folder: Path, stations: list[tuple], fields: str = "") -> Study:
    """A study on disk of one invented aircraft; stations are (id, latitude, longitude, m), UTC."""
    (folder / "aircraft").mkdir(parents=True)
    (folder / "aircraft" / "tourer.toml").write_text(SCALED_AIRCRAFT)
    fields = fields or "FAR,Far strip,46.3,11.3,700,UTC,\n"
    head = "id,name,latitude,longitude,elevation_m,timezone"
    (folder / "fields.csv").write_text(f"{head},stations\n{fields}")
    runways = "".join(
        f"{line.split(',')[0]},09,90,800,0,paved,yes,yes\n" for line in fields.splitlines()
    )
    (folder / "runways.csv").write_text(
        f"field,runway,heading_deg,length_m,slope_pct,surface,takeoff,landing\n{runways}"
    )
    rows = "".join(f"{i},Station {i},{lat},{lon},{z},UTC\n" for i, lat, lon, z in stations)
    (folder / "stations.csv").write_text(f"{head}\n{rows}")
    (folder / "study.toml").write_text(
        'title = "Known truth (invented)"\nfields = "fields.csv"\nrunways = "runways.csv"\n'
        f'aircraft = ["aircraft/*.toml"]\n[period]\nfirst_year = {YEAR}\nlast_year = {YEAR}\n'
        '[weather]\nsource = "synthetic"\nstations = "stations.csv"\nradius_km = 100\n'
    )
    return read_study(folder / "study.toml")


def weather_of(study: Study, temperatures_c: list[np.ndarray]) -> Weather:
    """Weather that is exactly what is given, without quality control."""
    stations = []
    for station, temperature in zip(study.stations, temperatures_c, strict=True):
        pressure = isa_pressure_hpa(station.elevation_m)
        decayed = np.exp(-VAPOUR_DECAY_PER_KM[MONTH] * station.elevation_m / 1000.0)
        table = pd.DataFrame(np.nan, index=TIMES, columns=list(COLUMNS))
        table["temperature_c"] = temperature
        table["dew_point_c"] = dew_point_c(5.0 * decayed, pressure)
        stations.append(
            StationHours(
                station=station,
                hours=table,
                elevation_trusted=True,
                elevation=None,
                derived=np.zeros(len(table), bool),
                hashes=(),
                sources=("invented",),
            )
        )
    return Weather(tuple(stations), ())


def daily_weather(seed: int = 3) -> np.ndarray:
    """Season, day and passing weather at sea level, degC: warm enough for the vapour above."""
    draw = np.random.default_rng(seed)
    passing = np.zeros(len(GRID))
    shock = draw.normal(size=len(GRID))
    for i in range(1, len(GRID)):
        passing[i] = 0.97 * passing[i - 1] + shock[i]
    season = -8.0 * np.cos(2 * np.pi * (TIMES.day_of_year - 15) / 365.25)
    return 30.0 + season + 4.0 * np.sin(2 * np.pi * (HOUR - 9) / 24) + passing


def row(table: pd.DataFrame, kind: str = "all", group: str = "all", **where) -> pd.Series:
    for name, value in {"group_kind": kind, "group": group, **where}.items():
        table = table[table[name] == value]
    assert len(table) == 1
    return table.iloc[0]


PAIR = [("LOW", 46.5, 11.0, 500), ("HIGH", 46.6, 11.2, 900)]
LAPSE = table_lapse(southern=False)[MONTH, HOUR]


def pair(folder: Path, warmer_above_k: float = 0.0) -> tuple[Study, Weather]:
    """Two stations under the tabulated lapse, which is what two stations are carried by."""
    study = study_of(folder, PAIR)
    base = daily_weather()
    return study, weather_of(study, [base - LAPSE * 0.5, base - LAPSE * 0.9 + warmer_above_k])


def test_verify_of_air_that_follows_the_lapse_finds_no_error(tmp_path):
    report = verify_study(*pair(tmp_path))
    for station in ("LOW", "HIGH"):
        s = row(report.scores, station=station)
        errors = [s[c] for c in ("bias_k", "mae_k", "rmse_k", "dew_point_mae_k")]
        assert np.abs(errors).max() < 1e-9
        assert abs(s["bias_ft"]) < 1e-6 and s["mae_ft"] < 1e-6
        assert s["n_hours"] == s["n_hours_ft"] == INSIDE.sum() == 8760
        assert (s["hit_rate"], s["false_alarm_rate"], s["coverage_80"]) == (1.0, 0.0, 1.0)
        # Both references by hand: 400 m at the wrong rate, and at no rate at all.
        assert s["mae_fixed_k"] == pytest.approx(np.abs(LAPSE[INSIDE] - 6.5).mean() * 0.4)
        assert s["mae_nearest_k"] == pytest.approx(LAPSE[INSIDE].mean() * 0.4)
        assert s["skill_fixed"] == s["skill_nearest"] == pytest.approx(1.0)


def test_bias_is_estimated_minus_measured_in_kelvins_and_feet(tmp_path):
    report = verify_study(*pair(tmp_path, warmer_above_k=1.0))
    high, low = row(report.scores, station="HIGH"), row(report.scores, station="LOW")
    assert (high["bias_k"], low["bias_k"]) == (pytest.approx(-1.0), pytest.approx(1.0))
    # Density altitude rises by about 120 ft/K at sea level (common practice, no source); the
    # exact figure at the standard pressure of 900 m follows from the atmosphere.
    measured = (daily_weather() - LAPSE * 0.9 + 1.0)[INSIDE]
    vapour = (5.0 * np.exp(-VAPOUR_DECAY_PER_KM[MONTH] * 0.9))[INSIDE]
    pressure = isa_pressure_hpa(900.0)
    true_ft = density_altitude_ft(pressure, measured, vapour)
    off_ft = density_altitude_ft(pressure, measured - 1.0, vapour) - true_ft
    assert high["bias_ft"] == pytest.approx(off_ft.mean(), abs=1e-6)
    assert -135 < high["bias_ft"] < -105


def test_groups_are_months_halves_and_heights(tmp_path):
    report = verify_study(*pair(tmp_path, warmer_above_k=1.0))
    scores = report.scores[report.scores["station"] == "HIGH"].set_index(["group_kind", "group"])
    hours = scores["n_hours"]
    assert hours[("month", "02")] == 28 * 24
    assert hours[("half-day", "day")] == 365 * 8  # 10 to 17 h, both included
    assert hours[("half-day", "night")] == 365 * 16
    assert hours[("month and half-day", "07 day")] == 31 * 8
    assert list(hours["height"].index) == ["300-500 m"]
    for kind in ("month", "half-day", "height", "month and half-day"):
        assert hours[kind].sum() == 8760


def test_rates_of_a_given_limit_count_hits_misses_and_false_alarms(tmp_path):
    study, weather = pair(tmp_path, warmer_above_k=1.0)
    vapour = (5.0 * np.exp(-VAPOUR_DECAY_PER_KM[MONTH] * 0.5))[INSIDE]
    truth = (daily_weather() - LAPSE * 0.5)[INSIDE]
    above = density_altitude_ft(isa_pressure_hpa(500.0), truth, vapour) > 4000.0
    said = density_altitude_ft(isa_pressure_hpa(500.0), truth + 1.0, vapour) > 4000.0
    report = verify_study(study, weather, limit_ft=4000.0)
    low = row(report.scores, station="LOW")
    assert above.any() and not above.all() and low["limit_ft"] == 4000.0
    assert low["hit_rate"] == pytest.approx((above & said).sum() / above.sum())
    assert low["false_alarm_rate"] == pytest.approx((said & ~above).sum() / said.sum())
    assert low["false_alarm_rate"] > 0
    assert "above a density altitude of 4,000 ft" in plain_text(report)
    # A limit that no hour passes has neither hits nor false alarms: empty, not zero.
    none = row(verify_study(study, weather, limit_ft=60_000.0).scores, station="LOW")
    assert np.isnan(none["hit_rate"]) and np.isnan(none["false_alarm_rate"])


@pytest.mark.parametrize("limit", [float("nan"), float("inf"), -1e9])
def test_a_limit_that_is_no_density_altitude_is_refused(tmp_path, limit):
    with pytest.raises(InputError, match="density-altitude limit"):
        verify_study(*pair(tmp_path), limit_ft=limit)


RING = [
    (f"S{i}", 46.5 + 0.2 * np.sin(i * 0.9), 11.0 + 0.3 * np.cos(i * 0.9), 600) for i in range(7)
]


def test_verify_of_known_noise_finds_its_size_and_covers_as_stated(tmp_path):
    noise_k = 1.6
    study = study_of(tmp_path, RING)
    draw = np.random.default_rng(11)
    base = daily_weather()
    weather = weather_of(
        study, [base + draw.normal(0.0, noise_k, len(GRID)) for _ in study.stations]
    )
    report = verify_study(study, weather)
    assert not report.stations["singled_out"].any()
    for s in study.stations:
        # Own noise less the weighted mean of the others': variance s^2 (1 + sum w^2), with
        # weights 1 / (d + 5 km) at equal height; the mean absolute value of a normal variable
        # is sqrt(2 / pi) of its standard deviation.  A year's hours leave it 0.8 % uncertain.
        weights = np.array(
            [
                1.0 / (distance_km(s.latitude, s.longitude, o.latitude, o.longitude) + 5.0)
                for o in study.stations
                if o is not s
            ]
        )
        sd_k = noise_k * np.sqrt(1.0 + ((weights / weights.sum()) ** 2).sum())
        found = row(report.scores, station=s.id)
        assert found["rmse_k"] == pytest.approx(sd_k, rel=0.03)
        assert found["mae_k"] == pytest.approx(sd_k * np.sqrt(2.0 / np.pi), rel=0.03)
        assert found["bias_k"] == pytest.approx(0.0, abs=0.08)
        assert found["coverage_80"] == pytest.approx(0.80, abs=0.03)
        assert found["n_cells"] == 288
        # Blending smooths, so the central 90th percentile comes out too low.
        assert found["cell_p90_bias_k_central"] < -0.1
        assert found["cell_p90_bias_k"] > found["cell_p90_bias_k_central"]


def test_the_interval_of_a_station_comes_from_the_others_alone(tmp_path):
    # Two quiet neighbours and a restless station 60 km off.  The neighbours' errors are below
    # 1 K, its own is 4 K: an interval that knew of them would hold most of its hours.
    places = [("A", 46.5, 11.0, 600), ("B", 46.52, 11.05, 600), ("C", 46.5, 11.8, 600)]
    study = study_of(tmp_path, places)
    draw = np.random.default_rng(2)
    base = daily_weather()
    restless = base + draw.normal(0.0, 4.0, len(GRID))
    quiet_air = [base + draw.normal(0.0, 0.2, len(GRID)) for _ in "AB"]
    report = verify_study(study, weather_of(study, [*quiet_air, restless]))
    assert row(report.scores, station="C")["coverage_80"] < 0.4
    assert row(report.scores, station="A")["coverage_80"] > 0.95


def test_the_reference_is_the_nearest_station_that_reports_unadjusted(tmp_path):
    # The nearest in distance is 500 m lower, so it weighs less; it is silent before July.
    places = [("X", 46.5, 11.0, 900), ("NEAR", 46.51, 11.05, 400), ("NEXT", 46.5, 11.2, 800)]
    study = study_of(tmp_path, places)
    base = daily_weather()
    near = np.where(MONTH >= 6, base - 1.0, np.nan)
    report = verify_study(study, weather_of(study, [base - 6.0, near, base - 4.5]))
    first = row(report.scores, "month", "03", station="X")
    second = row(report.scores, "month", "09", station="X")
    assert first["mae_nearest_k"] == pytest.approx(1.5)
    assert second["mae_nearest_k"] == pytest.approx(5.0)
    # From NEAR, X is the nearest and weighs most.
    assert row(report.scores, station="NEAR")["mae_nearest_k"] == pytest.approx(5.0)
    # At 6.5 K/km NEXT alone gives base - 4.5 - 0.65.
    assert first["mae_fixed_k"] == pytest.approx(0.85)
    assert row(report.scores, "height", "100-300 m", station="X")["n_hours"] > 0


def test_a_misdated_station_is_singled_out_and_left_out_of_the_mean(tmp_path):
    study = study_of(tmp_path, RING[:5])
    draw = np.random.default_rng(5)
    base = daily_weather()
    air = [base + draw.normal(0.0, 0.5, len(GRID)) for _ in study.stations]
    air[2] = np.roll(air[2], 24)
    report = verify_study(study, weather_of(study, air))
    stations = report.stations.set_index("station")
    assert list(stations.index[stations["singled_out"]]) == ["S2"]
    assert "24 h late" in stations.loc["S2", "reason"]
    kept, whole = row(report.totals, over="kept"), row(report.totals, over="all")
    assert (kept["n_stations"], whole["n_stations"]) == (4, 5)
    mae = report.scores[report.scores["group_kind"] == "all"].set_index("station")["mae_k"]
    assert kept["mae_k"] == pytest.approx(mae.drop("S2").mean())
    assert whole["mae_k"] == pytest.approx(mae.mean())
    assert mae["S2"] > 2 * kept["mae_k"]
    text = plain_text(report)
    assert "Singled out: S2 Station S2" in text and "1 of them is singled out" in text
    # One white-filled mark for it in the picture and one in the legend.
    marks = [e.get("fill") for e in ET.fromstring(svg_text(report)).iter(f"{SVG}path")]
    assert marks == ["#ffffff"] * 2


def test_singled_out_needs_more_than_twice_the_median_of_two_others():
    assert set(singled_out({"A": 1.0, "B": 1.0, "C": 2.0}, {})) == set()
    assert set(singled_out({"A": 1.0, "B": 1.0, "C": 2.01}, {})) == {"C"}
    assert singled_out({"A": 1.0, "B": 9.0}, {}) == {}
    assert "36 h early" in singled_out({"A": 1.0}, {"A": Misdating(-36, 0.2, 0.8)})["A"]


def test_two_stations_verify_each_other(tmp_path):
    report = verify_study(*pair(tmp_path, warmer_above_k=1.0))
    assert row(report.totals, over="kept")["n_stations"] == 2
    assert row(report.totals, over="kept")["mae_k"] == pytest.approx(1.0)
    text = plain_text(report)
    assert "Each of 2 stations was hidden in turn" in text
    assert "learned by hiding 2 stations" in text and "lapse: the day/night table" in text


def test_one_station_cannot_be_verified_and_every_file_says_so(tmp_path):
    study = study_of(tmp_path / "study", PAIR[:1], "OWN,At the station,46.5,11.0,500,UTC,\n")
    report = verify_study(study, weather_of(study, [daily_weather()]))
    assert len(report.scores) == len(report.totals) == 0
    text = plain_text(report)
    assert "This study cannot be verified: it has one station" in text
    assert "its own station gives every hour; nothing is estimated" in text
    assert "Cannot be verified: LOW Station LOW" in text
    files = write_verification(report, tmp_path / "out")
    assert [f.name for f in files] == [f"verification.{end}" for end in ("csv", "svg", "txt")]
    assert len(files[0].read_text().splitlines()) == 1
    picture = ET.fromstring(files[1].read_text())
    assert "cannot be verified" in picture.findtext(f"{SVG}desc")
    assert "2021-2021" not in text + files[1].read_text()


def test_stations_that_nothing_can_stand_in_for_are_told(tmp_path):
    places = [
        *PAIR,
        ("LONE", 48.9, 14.0, 700),
        ("MUTE", 46.55, 11.1, 600),
        ("BAD", 46.5, 11.2, 700),
    ]
    study = study_of(tmp_path, places)
    base = daily_weather()
    silent = np.full(len(GRID), np.nan)
    weather = weather_of(study, [base - LAPSE * 0.5, base - LAPSE * 0.9, base, silent, base])
    bad = replace(weather.stations[4], elevation_trusted=False)
    report = verify_study(study, replace(weather, stations=(*weather.stations[:4], bad)))
    reasons = report.stations[~report.stations["verified"]].set_index("station")["reason"]
    assert set(reasons.index) == {"LONE", "MUTE", "BAD"}
    assert "no other station within 100 km" in reasons["LONE"]
    assert "no usable air temperature" in reasons["MUTE"]
    assert "elevation is contradicted" in reasons["BAD"]


def test_fields_are_told_how_far_to_trust_them(tmp_path):
    fields = (
        "OWN,At the station,46.5,11.0,500,UTC,\n"
        "NEAR,Near strip,46.55,11.1,650,UTC,\n"
        "FAR,Far strip,46.5,12.05,800,UTC,\n"
        "NONE,Nowhere,40.0,20.0,800,UTC,\n"
    )
    study = study_of(tmp_path, PAIR, fields)
    base = daily_weather()
    report = verify_study(study, weather_of(study, [base - LAPSE * 0.5, base - LAPSE * 0.9 + 1]))
    table = report.fields.set_index("field")
    assert table.loc["OWN", "transfer_error_k"] == 0.0
    near, far = table.loc["NEAR"], table.loc["FAR"]
    assert near["stations"] == far["stations"] == 2 and near["verified_stations"] == 2
    assert near["transfer_error_k"] > 0.5 and near["caution"] == ""
    # About 120 ft/K, less where it is higher and warmer (common practice, no source).
    assert 90 < near["transfer_error_ft"] / near["transfer_error_k"] < 130
    lines = plain_text(report).replace("\n  ", " ").splitlines()
    told = {line[2:].split(" ")[0]: line for line in lines if line.startswith("- ")}
    assert "estimated from 2 stations, +-" in told["NEAR"]
    assert "low confidence" in told["FAR"].lower() and "low confidence" not in told["NEAR"].lower()
    assert "no figures" in told["NONE"]


def test_a_field_s_error_is_that_of_a_run(tmp_path):
    from climarisk.pipeline import evaluate

    study = study_of(tmp_path, PAIR, "NEAR,Near strip,46.55,11.1,650,UTC,\n")
    base = daily_weather()
    weather = weather_of(study, [base - LAPSE * 0.5, base - LAPSE * 0.9 + 1])
    ours, theirs = verify_study(study, weather).fields, evaluate(study, weather).estimates
    for column in ("own_station", "stations", "transfer_error_k", "transfer_error_ft"):
        assert ours[column][0] == pytest.approx(theirs[column][0], rel=1e-12)


HOSTILE = '<script>alert("1")</script> \'&amp;]]> \x00\x1b\u202e\nnext'


@pytest.fixture(scope="module")
def hostile(tmp_path_factory) -> VerificationReport:
    study = study_of(tmp_path_factory.mktemp("hostile"), PAIR)
    base = daily_weather()
    weather = weather_of(study, [base - LAPSE * 0.5, base - LAPSE * 0.9 + 1])
    stations = tuple(
        replace(s, station=replace(s.station, id=f'{s.station.id}"/><script>', name=HOSTILE))
        for s in weather.stations
    )
    fields = tuple(replace(f, name=HOSTILE) for f in study.fields)
    study = replace(study, title=HOSTILE, fields=fields)
    return verify_study(study, Weather(stations, ()))


def test_hostile_names_stay_text_in_the_picture(hostile):
    root = ET.fromstring(svg_text(hostile))
    allowed = {"svg", "title", "desc", "rect", "text", "line", "polyline", "circle", "path", "g"}
    assert {e.tag.removeprefix(SVG) for e in root.iter()} <= allowed
    assert not any(name.lower().startswith("on") for e in root.iter() for name in e.attrib)
    shown = root.findtext(f"{SVG}title")
    assert '<script>alert("1")</script> \'&amp;]]>' in shown
    assert not set("\x00\x1b\u202e\n") & set(shown)


def test_hostile_names_stay_on_their_line_in_text_and_table(hostile, tmp_path):
    text = plain_text(hostile)
    assert not set("\x00\x1b\u202e") & set(text) and "\nnext" not in text
    rows = list(csv.DictReader(io.StringIO(csv_text(hostile))))
    assert {r["station"] for r in rows} == {'LOW"/><script>', 'HIGH"/><script>', ""}
    write_verification(hostile, tmp_path / "out")


def test_files_are_the_same_each_time_and_leave_others_alone(hostile, tmp_path):
    folder = tmp_path / "out"
    folder.mkdir()
    (folder / "mine.txt").write_text("kept")
    first = [f.read_bytes() for f in write_verification(hostile, folder)]
    assert first == [f.read_bytes() for f in write_verification(hostile, folder)]
    assert sorted(p.name for p in tmp_path.iterdir()) == ["out"]
    assert (folder / "mine.txt").read_text() == "kept" and len(list(folder.iterdir())) == 4


def test_a_folder_that_cannot_be_written_is_one_sentence(hostile, tmp_path):
    (tmp_path / "out").write_text("a file")
    with pytest.raises(OutputError, match="results cannot be written"):
        write_verification(hostile, tmp_path / "out")
    assert [p.name for p in tmp_path.iterdir()] == ["out"]


def test_the_table_has_the_report_s_figures(tmp_path):
    report = verify_study(*pair(tmp_path, warmer_above_k=1.0))
    rows = list(csv.DictReader(io.StringIO(csv_text(report))))
    scopes = [r["scope"] for r in rows]
    assert scopes.count("station") == len(report.scores)
    assert len(rows) == len(report.scores) + len(report.totals)
    first = next(r for r in rows if r["station"] == "HIGH" and r["group_kind"] == "all")
    assert (first["bias_k"], first["n_hours"], first["n_hours_ft"]) == ("-1.0", "8760", "8760")
    assert (first["singled_out"], first["n_stations"], first["n_cells"]) == ("no", "1", "288")
    # The stations' own limits differ, so a mean has none.
    assert all(r["limit_ft"] == "" for r in rows if r["scope"] != "station")


def test_the_picture_holds_a_mark_for_every_station_and_month(tmp_path):
    report = verify_study(*pair(tmp_path, warmer_above_k=1.0))
    root = ET.fromstring(svg_text(report))
    tips = [e.findtext(f"{SVG}title") for e in root.iter(f"{SVG}g")]
    tips = [t for t in tips if t]
    assert sum("carried 400 m" in t for t in tips) == 2
    assert (
        sum(", day: 1.00 K" in t for t in tips) == sum(", night: 1.00 K" in t for t in tips) == 12
    )
    for e in root.iter(f"{SVG}text"):
        assert 0 <= float(e.get("x")) <= float(root.get("width"))
        assert 0 <= float(e.get("y")) <= float(root.get("height"))


# --- real stations -----------------------------------------------------------------------------


@pytest.fixture(scope="module")
def alpine(shared, tmp_path_factory) -> VerificationReport:
    folder = tmp_path_factory.mktemp("alpine")
    source = shared / "stations" / "alpine"
    mapping = Path(__file__).parent / "archives" / "mappings" / "alpine.toml"
    study_of(folder, PAIR, "STRIP,Strip,46.70,10.80,1500,Europe/Rome,\n")
    (folder / "alpine.toml").write_text(mapping.read_text())
    lines = ["id,name,latitude,longitude,elevation_m,archive,files"]
    for r in csv.DictReader(io.StringIO((source / "stations.csv").read_text(encoding="utf-8"))):
        number = Path(r["file"]).stem.removeprefix("meteo")
        lines.append(
            f"{number},Station {number},{r['lat']},{r['lon']},{r['elev']},alpine.toml,"
            f"{source / r['file']}"
        )
    (folder / "stations.csv").write_text("\n".join(lines) + "\n")
    text = (folder / "study.toml").read_text().replace("synthetic", "files")
    text = text.replace(f"first_year = {YEAR}", "first_year = 2010")
    text = text.replace(f"last_year = {YEAR}", "last_year = 2011")
    (folder / "study.toml").write_text(text)
    study = read_study(folder / "study.toml")
    return verify_study(study, load_weather(study, None, quiet))


#: What the work order asks of these stations, 0008 left out (it is 4 K off by any method).
def meets_the_figures(score: pd.Series) -> None:
    assert score["mae_k"] <= 1.40
    assert score["cell_median_mae_k"] <= 0.75
    assert score["cell_p90_mae_k"] <= 1.0
    assert -0.2 <= score["cell_p90_bias_k"] <= 0.2
    assert 0.75 <= score["coverage_80"] <= 0.85


def test_alpine_stations_meet_the_figures_without_those_singled_out(alpine):
    kept = row(alpine.totals, over="kept")
    assert kept["n_stations"] == 13
    meets_the_figures(kept)


def test_alpine_stations_meet_the_figures_with_0008_alone_left_out(alpine):
    scores = alpine.scores[alpine.scores["group_kind"] == "all"]
    others = scores[scores["station"] != "0008"]
    assert len(others) == 15
    meets_the_figures(others.mean(numeric_only=True))


def test_alpine_station_0008_is_singled_out_with_both_reasons(alpine):
    stations = alpine.stations.set_index("station")
    assert stations.loc["0008", "singled_out"]
    assert "dates look wrong" in stations.loc["0008", "reason"]
    assert "more than 2 times the median" in stations.loc["0008", "reason"]
    assert set(stations.index[stations["singled_out"]]) == {"0001", "0005", "0008"}
    assert "no usable air temperature" in stations.loc["0003", "reason"]


def test_alpine_beats_the_nearest_station_by_half(alpine):
    assert row(alpine.totals, over="kept")["skill_nearest"] > 0.5
