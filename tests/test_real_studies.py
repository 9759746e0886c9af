"""The shared studies as they stand, against a second computation from the raw files."""

import json
from datetime import datetime, timedelta

import independent
import numpy as np
import pandas as pd
import pytest
from study_maker import ONLY_WHERE_ASKED, StudyFolder

from climarisk.outputs.tables import OUTPUT_FILES, write_outputs
from climarisk.pipeline import run_study
from climarisk.results import FIELD_FRAMES, VARIABLES
from climarisk.store import Store

STUDIES = ("pernambuco", "lakeside", "high_plains")
CONTRACT = {
    "map.html",
    "distributions_monthly.csv",
    "distributions_hourly.csv",
    "distributions_seasonal.csv",
    "risk_monthly.csv",
    "risk_hourly.csv",
    "risk_seasonal.csv",
    "risk_yearly.csv",
    "margins_monthly.csv",
    "near_saturation_monthly.csv",
    "near_saturation_hourly.csv",
    "near_saturation_seasonal.csv",
    "trends.csv",
    "extremes.csv",
    "fields.gpkg",
    "fields.geojson",
    "study.json",
}
#: What a run without scenarios writes: the contract, which is named here, and all that came since.
FILES = set(OUTPUT_FILES) - ONLY_WHERE_ASKED
PERCENTILES = [f"p{q:02d}" for q in independent.PERCENTS]
#: Cells (month, hour) with an hour whose only pressure is a sea-level one: the program inverts it
#: as the station's own record shows, the second computation by the formula.
CALIBRATED = {"LLEB": {(4, 9)}}


@pytest.fixture(scope="module")
def store(tmp_path_factory):
    return Store(tmp_path_factory.mktemp("hours"))


@pytest.fixture(scope="module")
def results(shared, store):
    """The three studies run as they stand; a warning is an error."""
    return {name: run_study(shared / "studies" / name, store=store) for name in STUDIES}


@pytest.fixture(scope="module", params=list(independent.CASES))
def pair(request, shared, results):
    """A field's result and its second computation: (field, result, (hours, years, ...))."""
    study = independent.CASES[request.param][0]
    return request.param, results[study], independent.case(request.param, shared)


def own_rows(table, **ids):
    for column, value in ids.items():
        table = table[table[column] == value]
    return table.set_index(["month", "hour"]).sort_index()


def second_rows(figures, columns):
    table = pd.DataFrame.from_dict(figures, orient="index", columns=columns).astype(float)
    table.index = pd.MultiIndex.from_tuples(table.index, names=["month", "hour"])
    return table.sort_index()


def distributions(pair, variable):
    """Return the program's rows and the second computation's, month x hour."""
    field, result, (hours, years, _, _) = pair
    second = second_rows(
        independent.distributions(hours, variable, years),
        ["n_hours", "n_years", "coverage", "mean", *PERCENTILES],
    )
    return own_rows(result.distributions_hourly, field=field, variable=variable), second


def test_density_altitude_agrees_with_the_second_computation(pair):
    own, second = distributions(pair, "density_altitude")
    assert len(own) == len(second) == 288
    for column in ("n_hours", "n_years", "coverage"):
        np.testing.assert_array_equal(own[column], second[column])
    assert (second["n_hours"] > 0).any()
    # What the project promises: 8 ft in the mean, 25 ft in the percentiles.
    np.testing.assert_allclose(own["mean"], second["mean"], rtol=0, atol=8)
    np.testing.assert_allclose(own[PERCENTILES], second[PERCENTILES], rtol=0, atol=25)
    # What both reach, since they use the same formulas.
    same = ~own.index.isin(CALIBRATED.get(pair[0], set()))
    assert same.sum() >= 287
    np.testing.assert_allclose(own["mean"], second["mean"], rtol=0, atol=0.5)
    np.testing.assert_allclose(own[PERCENTILES][same], second[PERCENTILES][same], rtol=0, atol=0.5)


@pytest.mark.parametrize("variable", ["temperature", "relative_humidity"])
def test_other_variables_agree_with_the_second_computation(pair, variable):
    own, second = distributions(pair, variable)
    np.testing.assert_array_equal(own["n_hours"], second["n_hours"])
    # Tenths are the resolution of the archives.
    columns = ["mean", *PERCENTILES]
    np.testing.assert_allclose(own[columns], second[columns], rtol=0, atol=0.01)


def test_shortfall_shares_equal_the_second_computation(pair):
    field, result, (hours, _, runways, fleet) = pair
    assert {a["id"] for a in fleet} == {a.id for a in result.aircraft}
    for aircraft in fleet:
        columns = ["n_hours", "n_years", "shortfall", "outside_table"]
        second = second_rows(independent.shortfall_cells(hours, aircraft, runways), columns)
        own = own_rows(result.risk_hourly, field=field, aircraft=aircraft["id"])
        for column in columns:
            np.testing.assert_array_equal(own[column], second[column])


def test_near_saturation_shares_equal_the_second_computation(pair, shared):
    field, result, (hours, _, _, _) = pair
    inside = independent.window(field, shared)
    own = result.near_saturation_monthly
    own = own[own["field"] == field].set_index("month")
    second = pd.DataFrame.from_dict(
        independent.near_saturation_months(hours, inside), orient="index", dtype=float
    )
    assert list(own.index) == list(second.index) == list(range(1, 13))
    for place, column in enumerate(("n_hours", "n_years", "share_1k", "share_2_5k")):
        np.testing.assert_array_equal(own[column], second[place], err_msg=column)
    assert (second[3].dropna() > 0).any() and (second[2].dropna() < 1).all()


def test_shares_and_margins_of_each_check_equal_the_second_computation(pair, shared):
    field, result, (hours, _, runways, fleet) = pair
    inside = independent.window(field, shared)
    for aircraft in fleet:
        own = result.margins_monthly
        own = own[(own["field"] == field) & (own["aircraft"] == aircraft["id"])]
        own = own.set_index(["month", "check"])
        second = pd.DataFrame.from_dict(
            independent.check_months(hours, aircraft, runways, inside), orient="index", dtype=float
        )
        assert list(own.index) == list(second.index) and len(own) == 12 * 5
        np.testing.assert_array_equal(own["n_hours"], second[0])
        np.testing.assert_array_equal(own["shortfall"], second[1])
        # The same formulas; a field 0.13 m from its station's elevation differs by 1 Pa.
        columns = ["margin_p10", "margin_p50"]
        np.testing.assert_allclose(own[columns], second[[2, 3]], rtol=0, atol=1e-5)
        limits = own.index.get_level_values("check").str.endswith("limit")
        assert own.loc[limits, columns].isna().all().all()


def test_hours_offered_and_usable_equal_the_second_computation(pair, shared):
    field, result, (hours, years, runways, fleet) = pair
    inside = independent.window(field, shared)
    hour, offered = datetime(years[0], 1, 1), dict.fromkeys(range(1, 13), 0)
    while hour.year <= years[1]:
        offered[hour.month] += inside(hour)
        hour += timedelta(hours=1)
    offered = np.array(list(offered.values())) / (years[1] - years[0] + 1)
    for aircraft in fleet:
        own = own_months(result.risk_monthly, field=field, aircraft=aircraft["id"])
        np.testing.assert_allclose(own["hours_offered"], offered, rtol=1e-14)
    scored = [(t, independent.shortfall(air, fleet[0], runways)) for t, air in hours]
    own = own_months(result.risk_monthly, field=field, aircraft=fleet[0]["id"])
    for month, dated in independent.months(scored, inside).items():
        fine = [not short for _, (short, _) in dated]
        usable = offered[month - 1] * sum(fine) / len(fine) if fine else np.nan
        assert own.loc[month, "usable_hours"] == pytest.approx(usable, rel=1e-12, nan_ok=True)


def own_months(table, **ids):
    for column, value in ids.items():
        table = table[table[column] == value]
    return table.set_index("month").sort_index()


@pytest.mark.parametrize("study", STUDIES)
def test_no_field_is_without_figures(results, study):
    result = results[study]
    for field in result.fields:
        table = result.distributions_hourly
        table = table[table["field"] == field.id]
        for variable in VARIABLES:
            assert table[table["variable"] == variable]["mean"].notna().any()
        for aircraft in result.aircraft:
            risk = result.risk_hourly
            risk = risk[(risk["field"] == field.id) & (risk["aircraft"] == aircraft.id)]
            assert risk["shortfall"].notna().any()


@pytest.mark.parametrize("study", STUDIES)
def test_second_run_reads_the_store_and_gives_the_same(shared, store, results, study):
    again = run_study(shared / "studies" / study, store=store)
    for name in FIELD_FRAMES:
        pd.testing.assert_frame_equal(
            getattr(again, name), getattr(results[study], name), check_exact=True
        )
    assert again.provenance == results[study].provenance
    assert not store.damaged


def rejects(result, subject="station"):
    """Return {(id, check)} of the rejections of a result's study.json."""
    return {
        (f["id"], f["check"])
        for f in result.provenance["findings"]
        if f["severity"] == "reject" and f["subject"] == subject
    }


def test_high_plains_tells_the_constant_pressure_and_the_wrong_elevation(results, tmp_path):
    files = write_outputs(results["high_plains"], tmp_path / "out")
    assert {p.name for p in files} == FILES >= CONTRACT
    written = json.loads((tmp_path / "out" / "study.json").read_text())
    told = {
        (f["id"], f["check"]): f["message"]
        for f in written["findings"]
        if f["subject"] == "station" and f["severity"] != "note"
    }
    # Some typical-year months hold pressures made from sea-level ones: told for five stations.
    made = {key for key in told if key[1] == "pressure-from-sea-level"}
    assert {i for i, _ in made} == {"724640", "724660", "724760", "725640", "725650"}
    accused = {("724677", "constant-pressure"), ("726810", "elevation")}
    assert set(told) - made == accused
    assert "constant all through the record" in told["724677", "constant-pressure"]
    assert "701 m stated" in told["726810", "elevation"]
    assert rejects(results["high_plains"]) == accused
    trusted = {s["id"]: s["elevation_trusted"] for s in written["stations"]}
    assert [i for i, yes in trusted.items() if not yes] == ["726810"]


def test_high_plains_says_which_pressure_is_climatological(results):
    sources = results["high_plains"].pressure_sources
    stand_in = sources[sources["source"].str.startswith("climatological")]
    assert set(stand_in["field"]) == {"HGUC", "HBOI"}
    np.testing.assert_allclose(stand_in.groupby("field")["share"].sum(), 1.0, rtol=1e-12)
    assert (sources.groupby("field")["share"].sum() - 1).abs().max() < 1e-12
    # Nothing measures pressure within 500 km of Boise; around Gunnison five stations do.
    kinds = stand_in.groupby("field")["source"].agg(set)
    assert kinds["HBOI"] == {"climatological"}
    assert "climatological QNH with neighbours' anomalies" in kinds["HGUC"]
    error = results["high_plains"].estimates.set_index("field")["pressure_error_ft"]
    # 3-5 hPa from day to day at 33-40 ft each (METHODS 2.7), against a barometer's few tens.
    assert error[["HGUC", "HBOI"]].between(3 * 33, 5.5 * 42).all()
    assert (error.drop(["HGUC", "HBOI"]) < 100).all()


def test_fields_on_their_station_have_no_transfer_error(results):
    for study in STUDIES:
        table = results[study].estimates.set_index("field")
        own = table[table["own_station"] == 1.0]
        assert len(own) >= 2
        assert (own[["transfer_error_k", "transfer_error_ft"]] == 0.0).all().all()
        risk = results[study].risk_monthly
        risk = risk[risk["field"].isin(own.index) & (risk["n_hours"] > 0)]
        assert (risk["transfer_error_ft"] == 0.0).all()
        np.testing.assert_allclose(risk["shortfall"], risk["shortfall_central"], rtol=1e-12)
        carried = table[table["own_station"] < 1.0]
        assert (carried["transfer_error_ft"] > 0).all()


@pytest.mark.parametrize("study", STUDIES)
def test_well_dated_networks_are_not_accused(results, study):
    assert not [f for f in results[study].findings if f.check == "timing"]


@pytest.mark.parametrize("study", ["pernambuco", "lakeside"])
def test_healthy_studies_accuse_no_station_and_no_field(results, study):
    assert rejects(results[study]) == set()
    assert rejects(results[study], "field") == set()
    trusted = [s["elevation_trusted"] for s in results[study].provenance["stations"]]
    assert all(trusted)


def test_transferred_field_lies_between_its_stations(results):
    # The strip at 1010 m is above both stations it may use: cooler and higher than either, by
    # 3 to 8 K/km of published lapse over 160 to 180 m.
    hourly = results["pernambuco"].distributions_hourly
    means = hourly.groupby(["field", "variable"])["mean"].mean()
    for lower in ("PCAR", "PGAR"):
        assert -2.0 < means["PHIG", "temperature"] - means[lower, "temperature"] < 0.0
        rise_ft = means["PHIG", "pressure_altitude"] - means[lower, "pressure_altitude"]
        assert 158 / 0.3048 - 40 < rise_ft < 183 / 0.3048 + 40


# ---- delimited text through the column mappings ----------------------------------------------

STUDY = """\
title = "Mapped archives"
fields = "fields.csv"
runways = "runways.csv"
aircraft = ["aircraft.toml"]
[period]
first_year = {first}
last_year = {last}
[weather]
stations = "stations.csv"
radius_km = 60
"""


def mapped_study(folder, shared, mapping, stations, fields, years):
    """Write a small study over mapped archive files and the mapping of the tests."""
    study = StudyFolder(folder)
    study.write("study.toml", STUDY.format(first=years[0], last=years[1]))
    head = "id,name,latitude,longitude,elevation_m"
    study.write("stations.csv", "\n".join([head + ",archive,files", *stations]) + "\n")
    study.write("fields.csv", "\n".join([head, *fields]) + "\n")
    rows = [f"{f.split(',')[0]},09,90,900,paved,yes,yes" for f in fields]
    head = "field,runway,heading_deg,length_m,surface,takeoff,landing"
    study.write("runways.csv", "\n".join([head, *rows]) + "\n")
    study.write("mapping.toml", mapping.read_bytes())
    trainer = shared / "studies" / "high_plains" / "aircraft" / "two_seat_trainer.toml"
    return run_study(study.write("aircraft.toml", trainer.read_bytes()).file)


@pytest.fixture(scope="module")
def mappings(request):
    return request.path.parent / "archives" / "mappings"


@pytest.fixture(scope="module")
def alpine(tmp_path_factory, shared, mappings):
    table = pd.read_csv(shared / "stations" / "alpine" / "stations.csv")
    stations = [
        f"{row.file[5:9]},{row.file},{row.lat},{row.lon},{row.elev},mapping.toml,"
        f"{shared / 'stations' / 'alpine' / row.file}"
        for row in table.itertuples()
    ]
    fields = ["VAL,Valley,46.6276,10.7748,718", "HUT,Hut,46.77,10.79,3220"]
    return mapped_study(
        tmp_path_factory.mktemp("alpine"),
        shared,
        mappings / "alpine.toml",
        stations,
        fields,
        (2010, 2011),
    )


def test_alpine_tells_the_stuck_humidities_and_the_empty_station(alpine):
    stuck = {f.id: f.message for f in alpine.findings if f.check == "stuck"}
    assert {"0011", "0016"} <= set(stuck)
    for identifier in ("0011", "0016"):
        assert "relative humidity" in stuck[identifier]
        assert "10 %" in stuck[identifier]
    assert rejects(alpine) >= {("0011", "stuck"), ("0016", "stuck")}
    empty = [f for f in alpine.findings if f.id == "0003" and f.severity != "note"]
    assert empty and "0003" not in set(alpine.station_use.query("share_of_hours > 0")["station"])


MISDATED = {"0001", "0005", "0008"}


def test_alpine_daily_means_show_which_stations_are_misdated(shared):
    # Second computation from the raw files: day-to-day changes of the daily means against the
    # median of all other stations, moved by up to four days.
    daily = {}
    for path in sorted((shared / "stations" / "alpine").glob("meteo*.txt")):
        table = pd.read_csv(path, na_values=[-9999])
        when = pd.to_datetime(table["Date"], format="%d/%m/%Y %H:%M")
        daily[path.stem[5:]] = table["AirT"].set_axis(when).resample("D").mean()
    changes = pd.DataFrame(daily).diff().drop(columns="0003")  # without any temperature
    best = {}
    for station in changes:
        others = changes.drop(columns=station).median(axis=1)
        fits = {k: changes[station].corr(others.shift(k)) for k in range(-4, 5)}
        best[station] = max(fits, key=fits.get)
    assert {s for s, lag in best.items() if lag != 0} == MISDATED


def test_alpine_tells_the_three_misdated_stations(alpine):
    told = {f.id: f for f in alpine.findings if f.check == "timing"}
    assert set(told) == MISDATED
    assert {f.severity for f in told.values()} == {"reject"}
    used = alpine.station_use.query("share_of_hours > 0")
    assert not MISDATED & set(used["station"])
    # The others fit a lapse and show how far carried air is from the truth.
    estimates = alpine.estimates.set_index("field")
    assert (estimates["lapse_stations"] >= 10).all()
    assert (estimates["verified_stations"] >= 5).all()
    assert estimates["transfer_error_k"].between(0.5, 3.0).all()


def test_alpine_has_figures_without_any_pressure(alpine):
    assert set(alpine.pressure_sources["source"]) == {"climatological"}
    table = alpine.distributions_hourly
    valley = table[(table["field"] == "VAL") & (table["variable"] == "density_altitude")]
    july_afternoon = valley[(valley["month"] == 7) & (valley["hour"] == 15)].iloc[0]
    # 718 m is 2356 ft; warmer than standard on a July afternoon, so some 1000 to 3000 ft more.
    assert 3300 < july_afternoon["p50"] < 5400
    assert july_afternoon["n_years"] == 1


def test_california_runs_through_its_mapping(tmp_path, shared, mappings):
    folder = shared / "stations" / "california"
    stations = [
        f"viejas,Viejas,32.8,-116.7,715,mapping.toml,{folder / 'viejas.csv'}",
        f"lucky,Lucky Five,32.9,-116.5,1445,mapping.toml,{folder / 'luckyfive.csv'}",
    ]
    fields = ["LOW,Low,32.8,-116.7,715", "HIGH,High,32.9,-116.5,1445"]
    result = mapped_study(
        tmp_path, shared, mappings / "california.toml", stations, fields, (2012, 2018)
    )
    table = result.distributions_monthly
    table = table[table["variable"] == "temperature"].set_index(["field", "month"])
    assert table["mean"].notna().all()
    # 730 m higher by day at 5-9 K/km.
    difference = table.loc[("LOW", 7), "mean"] - table.loc[("HIGH", 7), "mean"]
    assert 0 < difference < 0.73 * 9
    assert not [f for f in result.findings if f.severity == "reject" and f.subject == "field"]
