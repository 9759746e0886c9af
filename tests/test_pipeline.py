"""The whole flow on small invented studies: what must and what must not change its tables."""

import re
from itertools import pairwise

import numpy as np
import pandas as pd
import pytest
from study_maker import (
    FIELDS,
    RUNWAYS,
    SYNTHETIC_STATIONS,
    TABLE_AIRCRAFT,
    asos_text,
    make_study,
    study_toml,
)

from climarisk.errors import InputError
from climarisk.icing import bands
from climarisk.pipeline import run_study
from climarisk.results import (
    DISTRIBUTIONS_HOURLY_COLUMNS,
    DISTRIBUTIONS_MONTHLY_COLUMNS,
    DISTRIBUTIONS_SEASONAL_COLUMNS,
    FIELD_FRAMES,
    ICING_HOURLY_COLUMNS,
    ICING_MONTHLY_COLUMNS,
    MARGINS_MONTHLY_COLUMNS,
    NEAR_SATURATION_HOURLY_COLUMNS,
    NEAR_SATURATION_MONTHLY_COLUMNS,
    NEAR_SATURATION_SEASONAL_COLUMNS,
    POWER_MONTHLY_COLUMNS,
    RISK_HOURLY_COLUMNS,
    RISK_MONTHLY_COLUMNS,
    RISK_SEASONAL_COLUMNS,
    RISK_YEARLY_COLUMNS,
    STATION_USE_COLUMNS,
    VARIABLES,
    WEIGHTS_HOURLY_COLUMNS,
    WEIGHTS_MONTHLY_COLUMNS,
    WEIGHTS_SEASONAL_COLUMNS,
    WINDOWS_MONTHLY_COLUMNS,
)
from climarisk.store import Store

TABLES = {
    "distributions_monthly": DISTRIBUTIONS_MONTHLY_COLUMNS,
    "distributions_hourly": DISTRIBUTIONS_HOURLY_COLUMNS,
    "distributions_seasonal": DISTRIBUTIONS_SEASONAL_COLUMNS,
    "risk_monthly": RISK_MONTHLY_COLUMNS,
    "risk_hourly": RISK_HOURLY_COLUMNS,
    "risk_seasonal": RISK_SEASONAL_COLUMNS,
    "risk_yearly": RISK_YEARLY_COLUMNS,
    "margins_monthly": MARGINS_MONTHLY_COLUMNS,
    "near_saturation_monthly": NEAR_SATURATION_MONTHLY_COLUMNS,
    "near_saturation_hourly": NEAR_SATURATION_HOURLY_COLUMNS,
    "near_saturation_seasonal": NEAR_SATURATION_SEASONAL_COLUMNS,
    "weights_monthly": WEIGHTS_MONTHLY_COLUMNS,
    "weights_hourly": WEIGHTS_HOURLY_COLUMNS,
    "weights_seasonal": WEIGHTS_SEASONAL_COLUMNS,
    "windows_monthly": WINDOWS_MONTHLY_COLUMNS,
    "icing_monthly": ICING_MONTHLY_COLUMNS,
    "icing_hourly": ICING_HOURLY_COLUMNS,
    "power_monthly": POWER_MONTHLY_COLUMNS,
}
KEYS = ["field", "aircraft", "variable", "season", "month", "hour", "year", "check", "band"]


@pytest.fixture(scope="module")
def plain(tmp_path_factory):
    """The small synthetic study as it stands."""
    return run_study(make_study(tmp_path_factory.mktemp("plain") / "study").file)


@pytest.fixture(scope="module")
def from_files(tmp_path_factory):
    """The small study over archive files as it stands."""
    return run_study(make_study(tmp_path_factory.mktemp("files") / "study", "files").file)


def tables_of(result, rename=None, **only):
    """Return the tables of a result, ids renamed, restricted to rows of some ids, in one order."""
    tables = {}
    for name in TABLES:
        table = getattr(result, name)
        for column, value in only.items():
            if column in table:
                table = table[table[column] == value]
        for column, names in (rename or {}).items():
            if column in table:
                table = table.assign(**{column: table[column].replace(names)})
        tables[name] = table.sort_values([k for k in KEYS if k in table]).reset_index(drop=True)
    return tables


def assert_same_tables(got, expected, **tolerance):
    exact = tolerance or {"check_exact": True}
    for name in TABLES:
        pd.testing.assert_frame_equal(got[name], expected[name], **exact)


def table_of(result, name, **ids):
    table = getattr(result, name)
    for column, value in ids.items():
        table = table[table[column] == value]
    return table.reset_index(drop=True)


# ---- shape of the result ---------------------------------------------------------------------


def test_tables_hold_every_row_of_the_contract_in_the_studys_order(plain):
    n_fields, n_aircraft, n_seasons = 3, 2, 2
    rows = {
        "distributions_monthly": n_fields * len(VARIABLES) * 12,
        "distributions_hourly": n_fields * len(VARIABLES) * 288,
        "distributions_seasonal": n_fields * len(VARIABLES) * n_seasons,
        "risk_monthly": n_fields * n_aircraft * 12,
        "risk_hourly": n_fields * n_aircraft * 288,
        "risk_seasonal": n_fields * n_aircraft * n_seasons,
        "risk_yearly": n_fields * n_aircraft * 12 * 2,
        # Three checks of the tourer; climb and a limit besides of the trainer.
        "margins_monthly": n_fields * 12 * (3 + 5),
        "near_saturation_monthly": n_fields * 12,
        "near_saturation_hourly": n_fields * 288,
        "near_saturation_seasonal": n_fields * n_seasons,
        "weights_monthly": n_fields * n_aircraft * 12,
        "weights_hourly": n_fields * n_aircraft * 288,
        "weights_seasonal": n_fields * n_aircraft * n_seasons,
        "windows_monthly": n_fields * n_aircraft * 12,
        "icing_monthly": n_fields * 12 * len(bands("chart")),
        "icing_hourly": n_fields * 288 * len(bands("chart")),
        "power_monthly": n_fields * n_aircraft * 12,
    }
    # Every frame of a field is held by these tests, three lists of what was used apart.
    assert set(FIELD_FRAMES) == set(TABLES) | {"station_use", "pressure_sources", "estimates"}
    for name, columns in TABLES.items():
        table = getattr(plain, name)
        assert list(table.columns) == columns
        assert len(table) == rows[name]
        assert list(dict.fromkeys(table["field"])) == ["LOW", "MID", "TOP"]
        keys = [c for c in KEYS if c in table]
        assert not table.duplicated(keys).any()
    assert list(plain.station_use.columns) == STATION_USE_COLUMNS
    assert plain.distributions_monthly.groupby("variable")["unit"].first().to_dict() == VARIABLES


def test_every_figure_is_possible(plain, from_files):
    for result in (plain, from_files):
        for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
            table = getattr(result, name)
            for column in ("shortfall", "outside_table", "days_affected"):
                assert table[column].dropna().between(0, 1).all()
            known = table[table["n_hours"] > 0]
            assert (known["outside_table"] <= known["shortfall"]).all()
            assert (known["days_affected"] >= known["shortfall"] - 1e-12).all()
            assert ((known["limiting"] != "") == (known["shortfall"] > 0)).all()
            assert (known["margin_p10"] <= known["margin_p50"]).all()
        for name in ("distributions_monthly", "distributions_hourly", "distributions_seasonal"):
            table = getattr(result, name)
            assert table["coverage"].between(0, 1).all()
            percentiles = table[[c for c in table if re.fullmatch(r"p\d\d", c)]].dropna()
            assert (np.diff(percentiles, axis=1) >= 0).all()
            humidity = table[table["variable"] == "relative_humidity"]
            assert humidity["p99"].max() <= 100 + 1e-9
            assert (table["mean"].isna() == (table["n_hours"] == 0)).all()
        for name in ("near_saturation_monthly", "near_saturation_hourly"):
            table = getattr(result, name)
            known = table[table["n_hours"] > 0]
            assert known["share_1k"].between(0, 1).all() and known["share_2_5k"].between(0, 1).all()
            assert (known["share_1k"] <= known["share_2_5k"]).all()


def test_window_of_all_hours_pools_the_hourly_cells(study_folder):
    study = study_folder().change("study.toml", "window = [6, 20]", 'window = "all"')
    result = run_study(study.file)
    hourly, monthly = result.risk_hourly, result.risk_monthly
    pooled = hourly.assign(short=hourly["shortfall"] * hourly["n_hours"])
    pooled = pooled.groupby(["field", "aircraft", "month"])[["n_hours", "short"]].sum()
    keyed = monthly.set_index(["field", "aircraft", "month"]).sort_index()
    assert (pooled["n_hours"] == keyed["n_hours"]).all()
    np.testing.assert_allclose(pooled["short"] / pooled["n_hours"], keyed["shortfall"], atol=1e-12)


def test_window_takes_the_hours_it_names(plain):
    hourly, monthly = plain.risk_hourly, plain.risk_monthly
    inside = hourly[hourly["hour"].between(6, 20)]
    pooled = inside.groupby(["field", "aircraft", "month"])["n_hours"].sum()
    keyed = monthly.set_index(["field", "aircraft", "month"]).sort_index()
    assert (pooled == keyed["n_hours"]).all()


def test_season_pools_the_days_it_names(plain):
    # 15 June to 15 September: July and August whole, so the season holds their hours and more.
    summer = table_of(plain, "risk_seasonal", season="flying summer")
    whole = plain.risk_monthly[plain.risk_monthly["month"].isin([7, 8])]
    whole = whole.groupby(["field", "aircraft"])["n_hours"].sum()
    keyed = summer.set_index(["field", "aircraft"])["n_hours"].sort_index()
    most = whole + 2 * (16 + 15) * 15  # 31 more days of 15 hours in each of two years
    assert ((keyed > whole) & (keyed <= most)).all()
    # 15 December to 10 February is the season across New Year: colder, so never worse.
    winter = table_of(plain, "risk_seasonal", season="deep winter")
    assert (winter["shortfall"] <= summer["shortfall"]).all()
    assert (winter["n_hours"] > 0).all()


# ---- findings --------------------------------------------------------------------------------


def told(result, subject, identifier):
    return {
        (f.severity, f.check): f.message
        for f in result.findings
        if (f.subject, f.id) == (subject, identifier)
    }


def test_steep_runway_needs_a_site_specific_procedure(plain):
    # AMC2 CAT.POL.A.305: published slope factors hold to 2 %.
    assert "needs a site-specific procedure" in told(plain, "field", "TOP")["caution", "slope"]
    assert ("caution", "slope") not in told(plain, "field", "MID")  # 1.5 %


def test_undeclared_distances_and_scaled_figures_are_told(plain):
    assert ("note", "undeclared-distances") in told(plain, "field", "MID")
    assert ("note", "undeclared-distances") not in told(plain, "field", "LOW")
    assert ("caution", "scaled") in told(plain, "aircraft", "tourer")
    assert told(plain, "aircraft", "trainer") == {}


def test_mass_beyond_the_tables_is_told_and_every_hour_is_outside(study_folder):
    study = study_folder().change("aircraft/trainer.toml", "maximum_kg = 760", "maximum_kg = 790")
    study.change("aircraft/trainer.toml", "planning_kg = 740", "planning_kg = 780")
    result = run_study(study.file)
    assert ("caution", "mass-beyond-table") in told(result, "aircraft", "trainer")
    trainer = table_of(result, "risk_hourly", aircraft="trainer")
    known = trainer[trainer["n_hours"] > 0]
    assert (known["outside_table"] == 1.0).all() and (known["shortfall"] == 1.0).all()


def test_field_without_a_station_is_told_and_has_no_figures(study_folder, plain):
    study = study_folder().change("fields.csv", "46.60,11.20,1700", "48.60,11.20,1700")
    result = run_study(study.file)
    assert ("reject", "no-station") in told(result, "field", "TOP")
    for name in TABLES:
        table = table_of(result, name, field="TOP")
        used = table["n_hours" if "n_hours" in table else "n_years"]
        assert (used == 0).all() and (len(table) > 0 or name == "risk_yearly")
        figures = ["mean", "p50", "shortfall", "ci_low", "margin_p50", "usable_hours", "share_1k"]
        figures += ["mass_kg", "never_met", "first_hour", "days_with_run", "share", "power_p50"]
        figures = [c for c in figures if c in table]
        assert table[figures].isna().all().all()
        assert "outcome" not in table or (table["outcome"] == "").all()
        if "hours_offered" in table:
            assert (table["hours_offered"] > 0).all()
    for field in ("LOW", "MID"):
        assert_same_tables(tables_of(result, field=field), tables_of(plain, field=field))


def test_shares_of_stations_and_pressures_add_up(plain, from_files):
    for result in (plain, from_files):
        assert (result.station_use.groupby("field")["share_of_hours"].sum() - 1).abs().max() < 1e-12
        assert (result.pressure_sources.groupby("field")["share"].sum() - 1).abs().max() < 1e-12
    kinds = from_files.station_use.set_index(["field", "station"])["pressure_kind"]
    assert kinds["LOW", "VALE"] == "QNH"
    assert kinds["TOP", "PASS"] == "station pressure"


# ---- what must not change the tables ---------------------------------------------------------


def test_same_study_gives_the_same_result_every_time(study_folder, plain):
    again = run_study(study_folder().file)
    assert_same_tables(tables_of(again), tables_of(plain))
    assert again.provenance == plain.provenance
    assert again.findings == plain.findings


def test_store_does_not_change_the_result(study_folder, tmp_path, from_files):
    study = study_folder("files")
    store = Store(tmp_path / "kept")
    for _ in ("parsed and stored", "from the store"):
        result = run_study(study.file, store=store)
        assert_same_tables(tables_of(result), tables_of(from_files))
        assert result.provenance == from_files.provenance
    assert not store.damaged


def test_another_aircraft_changes_no_other_row(study_folder, plain):
    study = study_folder()
    heavier = TABLE_AIRCRAFT.replace('"trainer"', '"another"').replace("740", "760")
    result = run_study(study.write("aircraft/a_first.toml", heavier).file)
    assert {p.id for p in result.aircraft} == {"another", "tourer", "trainer"}
    for aircraft in ("trainer", "tourer"):
        assert_same_tables(
            tables_of(result, aircraft=aircraft), tables_of(plain, aircraft=aircraft)
        )


def test_another_field_changes_no_other_row(study_folder, plain):
    study = study_folder()
    study.write("fields.csv", FIELDS + "XTRA,Extra,46.52,11.05,900,,\n")
    study.write("runways.csv", RUNWAYS + "XTRA,09,90,,,,,500,0,grass,yes,yes\n")
    result = run_study(study.file)
    for field in ("LOW", "MID", "TOP"):
        assert_same_tables(tables_of(result, field=field), tables_of(plain, field=field))


def test_unused_station_changes_no_row(study_folder, plain):
    far = "FAR,Far (invented),48.50,11.00,300\n"
    study = study_folder().write("stations.csv", SYNTHETIC_STATIONS + far)
    result = run_study(study.file)
    assert_same_tables(tables_of(result), tables_of(plain))
    assert "FAR" not in set(result.station_use["station"])


def test_order_of_fields_and_stations_changes_no_row(study_folder, plain):
    def turned(text):
        head, *rows = text.splitlines(keepends=True)
        return head + "".join(reversed(rows))

    study = study_folder().write("fields.csv", turned(FIELDS))
    study.write("stations.csv", turned(SYNTHETIC_STATIONS)).write("runways.csv", turned(RUNWAYS))
    assert_same_tables(tables_of(run_study(study.file)), tables_of(plain))


def test_renamed_ids_change_only_names(study_folder, from_files):
    study = study_folder("files")
    fields = {"LOW": "Z3", "MID": "Z1", "TOP": "A9"}
    aircraft = {"trainer": "zz-top", "tourer": "aa-first"}
    for old, new in fields.items():
        for name in ("fields.csv", "runways.csv"):
            text = (study.folder / name).read_text()
            study.write(name, re.sub(rf"^{old},", f"{new},", text, flags=re.M))
    for old, new in aircraft.items():
        study.change(f"aircraft/{old}.toml", f'id = "{old}"', f'id = "{new}"')
    study.change("stations.csv", "PASS,", "AAA,")
    result = run_study(study.file)
    renamed = tables_of(from_files, rename={"field": fields, "aircraft": aircraft})
    assert_same_tables(tables_of(result), renamed)
    use = from_files.station_use.replace({"station": {"PASS": "AAA"}, "field": fields})
    pd.testing.assert_frame_equal(result.station_use, use)


def in_feet(text, columns):
    """Return a CSV text with the named columns of metres given in feet."""
    head, *rows = text.splitlines()
    names = head.split(",")
    places = [names.index(c) for c in columns]
    lines = [",".join(n.replace("_m", "_ft") if n in columns else n for n in names)]
    for row in rows:
        cells = row.split(",")
        for i in places:
            cells[i] = repr(float(cells[i]) / 0.3048) if cells[i] else ""
        lines.append(",".join(cells))
    return "\n".join(lines) + "\n"


def test_feet_and_metres_give_the_same_tables(study_folder, from_files):
    study = study_folder("files")
    lengths = ["tora_m", "toda_m", "asda_m", "lda_m", "length_m"]
    study.write("fields.csv", in_feet(FIELDS, ["elevation_m"]))
    study.write("runways.csv", in_feet(RUNWAYS, lengths))
    stations = (study.folder / "stations.csv").read_text()
    study.write("stations.csv", in_feet(stations, ["elevation_m"]))

    def scaled(match):
        name, grid = match.group(1), match.group(2)
        factor, suffix = (0.3048, "m") if name.startswith("pressure") else (1 / 0.3048, "ft")
        numbers = re.sub(r"\d+", lambda m: repr(int(m.group()) * factor), grid)
        return f"{name}_{suffix} = {numbers}"

    text = re.sub(
        r"(pressure_altitude|ground_roll|distance_50ft)_(?:ft|m) = (\[.*\])", scaled, TABLE_AIRCRAFT
    )
    assert "pressure_altitude_m" in text and "ground_roll_ft" in text
    study.write("aircraft/trainer.toml", text)
    got, expected = tables_of(run_study(study.file)), tables_of(from_files)
    assert_same_tables(got, expected, rtol=1e-9, atol=1e-9)
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        for column in ("n_hours", "shortfall", "outside_table", "days_affected", "limiting"):
            pd.testing.assert_series_equal(got[name][column], expected[name][column])


# ---- what must change them one way only ------------------------------------------------------


def assert_never_lower(worse, better):
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        a, b = tables_of(worse)[name], tables_of(better)[name]
        assert (a["shortfall"].dropna() >= b["shortfall"].dropna() - 1e-12).all()
        assert (a["n_hours"] == b["n_hours"]).all()


def test_dry_tables_never_raise_the_shortfall(study_folder, plain):
    study = study_folder().change("study.toml", "[risk]", "[risk]\nhumidity_in_tables = false")
    dry = run_study(study.file)
    assert_never_lower(plain, dry)
    assert (plain.risk_hourly["margin_p50"] <= dry.risk_hourly["margin_p50"] + 1e-12).all()


def test_higher_field_never_has_a_lower_density_altitude(study_folder, plain):
    study = study_folder().change("fields.csv", "11.20,1700", "11.20,1900")
    higher = run_study(study.file)
    new, old = (
        table_of(r, "distributions_hourly", field="TOP", variable="density_altitude")
        for r in (higher, plain)
    )
    # 200 m in a column of at most 10 K/km: at least 400 ft more.
    assert (new["p50"] - old["p50"]).min() > 400
    assert_never_lower(higher, plain)


def test_larger_factor_never_lowers_the_shortfall(study_folder, plain):
    study = study_folder().change("aircraft/trainer.toml", "factor = 1.33", "factor = 1.5")
    assert_never_lower(run_study(study.file), plain)


# ---- periods ---------------------------------------------------------------------------------


def test_study_of_one_year(study_folder):
    study = study_folder().write("study.toml", study_toml("synthetic", 2021, 2021))
    result = run_study(study.file)
    for name in ("risk_monthly", "risk_hourly"):
        table = getattr(result, name)
        assert set(table["n_years"]) <= {0, 1}
        assert table[["ci_low", "ci_high"]].isna().all().all()
        assert table["shortfall"].notna().any()
    assert any(f.check == "few-years" for f in result.findings)


def cut_after(text, stamp):
    """Return archive text without the reports after a time."""
    head, *rows = text.splitlines(keepends=True)
    return head + "".join(r for r in rows if r.split(",")[1] <= stamp)


@pytest.mark.parametrize(
    ("last", "counts"), [("2022-06-24 22:59", True), ("2022-06-23 22:59", False)]
)
def test_record_ending_in_the_middle_of_a_month(study_folder, last, counts):
    # Rome is UTC+1: the archive ends with 23:00 local; 24 of 30 days are just 80 %.
    study = study_folder("files")
    study.write("archive/vale_2022.csv", cut_after(asos_text(2022, 2022), last))
    result = run_study(study.file)
    own = table_of(result, "distributions_hourly", field="LOW", variable="density_altitude")
    noon = own[own["hour"] == 12].set_index("month")
    assert noon.loc[5, "n_years"] == 2
    assert noon.loc[6, "n_years"] == (2 if counts else 1)
    assert noon.loc[6, "n_hours"] == (30 + 24 if counts else 30)
    assert noon.loc[7, "n_years"] == 1
    assert noon.loc[7, "coverage"] == 0.5


def test_period_without_any_data_is_refused_in_a_sentence(study_folder):
    study = study_folder("files").write("study.toml", study_toml("files", 1995, 1996))
    with pytest.raises(InputError, match="no field of the study has a usable station in 1995-1996"):
        run_study(study.file)


def test_longer_period_than_the_record_shows_in_the_coverage(study_folder, from_files):
    study = study_folder("files").write("study.toml", study_toml("files", 2019, 2022))
    longer = run_study(study.file)
    new, old = (
        tables_of(longer)["distributions_hourly"],
        tables_of(from_files)["distributions_hourly"],
    )
    same = [c for c in new if c != "coverage"]
    # The first hours of 2021 in UTC-positive zones belong to a December that does not count.
    pd.testing.assert_frame_equal(new[same], old[same], check_exact=True)
    np.testing.assert_allclose(new["coverage"], old["coverage"] / 2)


# ---- places ----------------------------------------------------------------------------------

EDGES = """\
id,name,latitude,longitude,elevation_m,timezone,stations
G0,On the prime meridian,0,0,10,,
E180,On the date line from the west,-17,180,10,,
W180,On the date line from the east,-17,-180,10,,
NP,North pole,90,0,10,Etc/GMT,
SP,South pole,-90,0,2800,,
"""
EDGE_STATIONS = """\
id,name,latitude,longitude,elevation_m,timezone
S0,S,0.1,-0.1,10,Etc/GMT
S180,S,-17.1,-179.9,10,Etc/GMT-12
SN,S,89.9,120,10,Etc/GMT
SS,S,-89.9,-60,2750,Etc/GMT
"""


@pytest.fixture(scope="module")
def edges(tmp_path_factory):
    study = make_study(tmp_path_factory.mktemp("edges") / "study")
    study.change("study.toml", "window = [6, 20]", 'window = "daylight"')
    study.write("fields.csv", EDGES).write("stations.csv", EDGE_STATIONS)
    rows = [f"{i},09,90,,,,,900,0,paved,yes,yes\n" for i in ("G0", "E180", "W180", "NP", "SP")]
    return run_study(
        study.write("runways.csv", RUNWAYS.splitlines()[0] + "\n" + "".join(rows)).file
    )


def test_fields_at_the_edges_of_the_map_find_their_station(edges):
    pairs = edges.station_use[["field", "station"]].to_numpy().tolist()
    assert pairs == [["G0", "S0"], ["E180", "S180"], ["W180", "S180"], ["NP", "SN"], ["SP", "SS"]]
    assert (edges.station_use["distance_km"] < 25).all()


def test_both_sides_of_the_date_line_have_the_same_distribution(edges):
    # One place with two longitudes: the local day may differ by one, the seasons may not.
    east, west = (
        table_of(edges, "distributions_monthly", field=f, variable="density_altitude")
        for f in ("E180", "W180")
    )
    assert (east["n_hours"] > 0).all()
    np.testing.assert_allclose(east["mean"], west["mean"], atol=60)


def test_poles_have_daylight_in_their_summer_only(edges):
    for field, summer, winter in (("NP", 6, 12), ("SP", 12, 6)):
        table = table_of(edges, "distributions_monthly", field=field, variable="temperature")
        table = table.set_index("month")
        assert table.loc[summer, "n_hours"] > 1200
        assert table.loc[winter, "n_hours"] == 0
        assert np.isnan(table.loc[winter, "mean"])
        risk = table_of(edges, "risk_monthly", field=field, aircraft="trainer").set_index("month")
        assert np.isnan(risk.loc[winter, "shortfall"])


def test_progress_counts_up_to_the_end(study_folder):
    told = []
    run_study(study_folder("files").file, progress=lambda *a: told.append(a))
    by_stage = {}
    for stage, done, total in told:
        by_stage.setdefault(stage, []).append((done, total))
    assert set(by_stage) >= {"reading archives", "checking stations", "scoring fields"}
    for steps in by_stage.values():
        assert all(b >= a for (a, _), (b, _) in pairwise(steps))
        assert steps[-1][0] == steps[-1][1]
