"""Warmer air and parts of the period, held against the study itself."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from study_maker import FIELDS, study_toml

from climarisk.climatology import completeness, monthly_distribution
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.errors import InputError
from climarisk.pipeline import evaluate, run_study
from climarisk.progress import quiet
from climarisk.region import region_of
from climarisk.risk import risk_tables
from climarisk.scenarios import SCENARIO_COLUMNS, compare, scenarios, sensitivity, with_mass
from climarisk.scene import scene_of, scored
from climarisk.study import read_study
from climarisk.transfer import on_grid
from climarisk.weather import load_weather

RELATIVE, VAPOUR = "relative humidity", "vapour pressure"


@pytest.fixture(scope="module")
def scene(tmp_path_factory):
    """The small study over files with one field on its station, and its result."""
    from study_maker import make_study

    made = make_study(tmp_path_factory.mktemp("scenarios") / "study", "files")
    made.write("fields.csv", FIELDS.replace("46.50,11.00,500", "46.51,11.02,480"))
    study = read_study(made.file)
    weather = load_weather(study, None, quiet)
    return made, study, weather, evaluate(study, weather)


def variants_of(scene, warmer=(), holds=RELATIVE, years=()):
    _, study, weather, base = scene
    return compare(base, scenarios(study, warmer, holds, years), weather)


# ---- warmer air ------------------------------------------------------------------------------


def es(t):
    """Return the saturation vapour pressure of Buck 1981 over water, hPa (METHODS 3.1)."""
    return 6.1121 * np.exp(17.502 * t / (240.97 + t))


def density_altitude(p, t, e):
    """Return the ISA altitude, ft, of moist air by the ideal gas law (METHODS 1 and 3.2)."""
    virtual_k = (t + 273.15) / (1 - 0.37802 * e / p)
    ratio = (p / 1013.25) / (virtual_k / 288.15)
    return 145442.156 * (1 - ratio**0.234969041)


@pytest.mark.parametrize("holds", [RELATIVE, VAPOUR])
@pytest.mark.parametrize("kelvin", [2.0, -1.5])
def test_warmer_air_is_that_of_a_recomputation_by_hand(scene, kelvin, holds):
    _, study, weather, _ = scene
    field = next(f for f in study.fields if f.id == "LOW")
    grid = hour_grid(study.first_year, study.last_year)
    (vale,) = (s for s in weather.stations if s.station.id == "VALE")
    own = on_grid(vale.station, vale.hours, grid, vale.elevation_trusted)
    t, e, p = own.temperature_c + kelvin, own.vapour_pressure_hpa, own.pressure_hpa
    saturated = (1.0007 + 3.46e-6 * p) * es(t)
    kept = e * es(t) / es(own.temperature_c) if holds == RELATIVE else np.minimum(e, saturated)
    by_hand = density_altitude(p, t, kept)
    clock = local_clock(field, grid, study.first_year, study.last_year)
    used = completeness(np.isfinite(by_hand), clock).used & in_window((6, 20), field, grid, clock)
    table = variants_of(scene, [kelvin], holds)
    table = table[(table["field"] == "LOW") & (table["aircraft"] == "trainer")]
    assert list(table["month"]) == list(range(1, 13))
    for row in table.itertuples():
        pool = by_hand[used & (clock.month == row.month - 1)]
        assert row.n_hours == len(pool) > 400
        # The program caps at the saturation of the standard pressure: 0.02 ft here.
        for figure, share in (
            (row.density_altitude_p50_ft, 0.5),
            (row.density_altitude_p90_ft, 0.9),
        ):
            assert figure == pytest.approx(
                np.quantile(pool, share, method="median_unbiased"), abs=0.1
            )


def test_warmer_air_moves_the_density_altitude_by_the_published_slope(scene):
    table = variants_of(scene, [2.0])
    own = table[table["field"] == "LOW"]
    # METHODS 2.7: 122-129 ft per kelvin at unchanged relative humidity (of 50 %; 480-600 m).
    assert own["density_altitude_p50_change_ft"].between(2 * 118, 2 * 132).all()
    dry = variants_of(scene, [2.0], VAPOUR)
    own = dry[dry["field"] == "LOW"]
    # 118.3 ft per kelvin at ISA and 108.9 at ISA + 20, so 0.47 less for each kelvin; the months'
    # medians lie between ISA - 14 and ISA + 15.
    assert own["density_altitude_p50_change_ft"].between(2 * 111, 2 * 125).all()


@pytest.mark.parametrize("holds", [RELATIVE, VAPOUR])
def test_warmer_air_never_lowers_the_shortfall(scene, holds):
    table = variants_of(scene, [0.5, 2.0, 4.0], holds)
    assert (table["shortfall_change"].dropna() >= -1e-12).all()
    assert (table["density_altitude_p50_change_ft"].dropna() > 0).all()
    shares = table.pivot_table(
        index=["field", "aircraft", "month"], columns="scenario", values="shortfall", sort=False
    )
    assert (np.diff(shares.to_numpy(), axis=1) >= -1e-12).all()
    assert (shares.iloc[:, -1] > shares.iloc[:, 0]).any()


def test_colder_air_never_raises_the_shortfall(scene):
    assert (variants_of(scene, [-3.0])["shortfall_change"].dropna() <= 1e-12).all()


def test_unchanged_air_changes_nothing(scene):
    table = variants_of(scene, [0.0])
    for column in SCENARIO_COLUMNS:
        if column.endswith(("_change", "_change_ft")):
            assert (table[column].dropna() == 0.0).all()


def test_same_hours_enter_however_warm(scene):
    base = scene[3].risk_monthly
    for column in ("n_hours", "n_years"):
        assert list(variants_of(scene, [3.0])[column]) == list(base[column])


# ---- parts of the period ---------------------------------------------------------------------


def test_part_of_the_period_is_a_study_of_those_years(scene, tmp_path):
    from study_maker import make_study

    made = make_study(tmp_path / "study", "files")
    made.write("fields.csv", (scene[0].folder / "fields.csv").read_text())
    made.write("study.toml", study_toml("files", 2022, 2022))
    alone = run_study(made.file)
    table = variants_of(scene, years=["2022-2022"])
    assert set(table["scenario"]) == {"2022-2022"}
    keys = ["field", "aircraft", "month"]
    columns = [*keys, "n_hours", "n_years", "shortfall", "ci_low", "ci_high"]
    pd.testing.assert_frame_equal(
        table[columns].reset_index(drop=True), alone.risk_monthly[columns], check_exact=True
    )
    air = alone.distributions_monthly.query("variable == 'density_altitude'")
    expected = alone.risk_monthly[keys].merge(air[["field", "month", "p50", "p90"]], how="left")
    np.testing.assert_array_equal(table["density_altitude_p50_ft"], expected["p50"])
    np.testing.assert_array_equal(table["density_altitude_p90_ft"], expected["p90"])


def test_whole_period_is_the_study_itself(scene):
    table = variants_of(scene, years=["2021-2022"])
    assert (table["shortfall_change"].dropna() == 0.0).all()
    assert list(table["shortfall"].fillna(-1)) == list(
        scene[3].risk_monthly["shortfall"].fillna(-1)
    )


def test_halves_hold_the_hours_of_the_whole(scene):
    table = variants_of(scene, years=["2021-2021", "2022-2022"])
    halves = table.groupby(["field", "aircraft", "month"], sort=False)["n_hours"].sum()
    assert list(halves) == list(scene[3].risk_monthly["n_hours"])


# ---- the table and what is refused -----------------------------------------------------------


def test_variants_come_in_the_order_asked_for_with_their_names(scene):
    table = variants_of(scene, [2.0, -1.0], VAPOUR, ["2021-2021"])
    assert list(table.columns) == SCENARIO_COLUMNS
    assert list(dict.fromkeys(table["scenario"])) == [
        "air +2 K, vapour pressure unchanged",
        "air -1 K, vapour pressure unchanged",
        "2021-2021",
    ]
    assert len(table) == 3 * 3 * 2 * 12
    base = scene[3].risk_monthly.set_index(["field", "aircraft", "month"])["shortfall"]
    keyed = table[table["scenario"] == "2021-2021"].set_index(["field", "aircraft", "month"])
    change = keyed["shortfall"] - base
    np.testing.assert_allclose(keyed["shortfall_change"], change, rtol=1e-12)


@pytest.mark.parametrize("kelvin", [10.1, -11.0, float("nan"), float("inf")])
def test_impossible_warming_is_refused(scene, kelvin):
    with pytest.raises(InputError, match="--warmer .*between -10 and 10 K"):
        scenarios(scene[1], [kelvin], RELATIVE, [])
    assert len(scenarios(scene[1], [10.0, -10.0], RELATIVE, [])) == 2


@pytest.mark.parametrize(
    "text", ["2021", "2021-", "a-b", "2022-2021", "2020-2021", "2021-2023", "2021-2022-2023", ""]
)
def test_impossible_years_are_refused(scene, text):
    with pytest.raises(InputError, match="--years"):
        scenarios(scene[1], [], RELATIVE, [text])


def test_variant_is_the_study_but_for_what_it_changes(scene):
    study = scene[1]
    warmer, part = scenarios(study, [2.0], VAPOUR, ["2022-2022"])
    assert replace(warmer.study, warmer_k=0.0, warmer_holds=study.warmer_holds) == study
    assert (warmer.study.warmer_k, warmer.study.warmer_holds) == (2.0, VAPOUR)
    assert (part.study.first_year, part.study.last_year) == (2022, 2022)
    assert replace(part.study, first_year=2021) == study


# ---- other masses and factors ----------------------------------------------------------------


def without(scene, **profile):
    """The study with every aircraft changed."""
    study = scene[1]
    return replace(study, aircraft=tuple(replace(a, **profile) for a in study.aircraft))


def long_way(study, weather):
    """The monthly figures of a study by the tables of a run, field by field."""
    region = region_of(study, weather)
    rows = []
    for field in study.fields:
        scene = scene_of(study, field, region)
        levels, sd = scene.levels["density_altitude"], scene.sds["density_altitude"]
        air = monthly_distribution(levels, scene.clock, scene.inside, sd)
        for profile in study.aircraft:
            table = risk_tables(scored(scene, profile), study.seasons)[0]
            table[["p50", "p90"]] = air[["p50", "p90"]]
            rows.append(table.assign(field=field.id, aircraft=profile.id))
    return pd.concat(rows, ignore_index=True)


@pytest.fixture(scope="module")
def tried(scene):
    """The sensitivity of the small study, scenario by scenario."""
    _, study, weather, base = scene
    asked = sensitivity(study)
    table = compare(base, asked, weather)
    return asked, [table[table["scenario"] == s.name] for s in asked]


@pytest.mark.parametrize("number", [1, 4, 6])
def test_scenario_is_a_run_of_its_study_to_the_last_bit(scene, tried, number):
    asked, tables = tried
    table, expected = tables[number], long_way(asked[number].study, scene[2])
    for column in ("field", "aircraft", "month", "n_hours", "n_years"):
        assert list(table[column]) == list(expected[column])
    for column in ("shortfall", "ci_low", "ci_high"):
        np.testing.assert_array_equal(table[column], expected[column])
    for p in ("p50", "p90"):
        np.testing.assert_array_equal(table[f"density_altitude_{p}_ft"], expected[p])
    change = expected["shortfall"] - scene[3].risk_monthly["shortfall"]
    np.testing.assert_allclose(table["shortfall_change"], change, rtol=0, atol=1e-12)


def test_sensitivity_is_air_masses_and_factors(scene, tried):
    asked, tables = tried
    assert [s.name for s in asked] == [
        "air +1 K, relative humidity unchanged",
        "air +2 K, relative humidity unchanged",
        "air +3 K, relative humidity unchanged",
        "mass -5 %",
        # 740 kg x 1.05 = 777 kg, the maximum is 760; 1100 kg x 1.05 = 1155 of 1200 kg.
        "mass +5 %, stopped at the maximum mass: trainer",
        "factors 1.0",
        "regulatory factors (take-off 1.25, landing 1/0.7)",
    ]
    assert [len(t) for t in tables] == [3 * 2 * 12] * 7
    masses = [[a.planning_kg for a in s.study.aircraft] for s in asked[3:5]]
    assert masses == [pytest.approx([1045.0, 703.0]), pytest.approx([1155.0, 760.0])]
    plain, regulatory = (s.study.aircraft for s in asked[5:])
    assert {(a.takeoff_factor, a.landing_factor) for a in plain} == {(1.0, 1.0)}
    # Regulation (EU) 965/2012: CAT.POL.A.305, 1.25 of the take-off distance within TORA without
    # stopway and clearway; CAT.POL.A.330, landing within 70 % of the landing distance available.
    assert {(a.takeoff_factor, a.landing_factor) for a in regulatory} == {(1.25, 1 / 0.70)}


def test_less_mass_and_smaller_factors_never_raise_the_shortfall(tried):
    light, heavy, plain = tried[1][3:6]
    for table, sign in ((light, -1), (plain, -1), (heavy, 1)):
        assert (sign * table["shortfall_change"].dropna() >= -1e-12).all()
    assert (heavy["shortfall_change"] > 0.01).any()


def test_mass_and_factors_leave_the_air_alone(tried):
    for table in tried[1][3:]:
        assert (table["density_altitude_p50_change_ft"].dropna() == 0.0).all()
        assert (table["density_altitude_p90_change_ft"].dropna() == 0.0).all()


@pytest.mark.parametrize(
    ("planning", "change", "kg", "told"),
    [
        (750.0, 0.05, 760.0, ", stopped at the maximum mass: tourer trainer"),
        (760.0, 0.05, 760.0, ", stopped at the maximum mass: tourer trainer"),
        (530.0, -0.05, 520.0, ", stopped at the empty mass: tourer trainer"),
        (700.0, -0.05, 665.0, ""),
    ],
)
def test_mass_stays_between_empty_and_maximum(scene, planning, change, kg, told):
    study = without(scene, planning_kg=planning, empty_kg=520.0, maximum_kg=760.0)
    made = with_mass(study, change)
    assert made.name == f"mass {100 * change:+g} %{told}"
    assert [a.planning_kg for a in made.study.aircraft] == pytest.approx([kg, kg])


def test_mass_above_the_heaviest_table_is_told(scene):
    study = without(scene, planning_kg=755.0, maximum_kg=900.0)
    assert with_mass(study, 0.05).name == "mass +5 %, above the heaviest table: trainer"


def test_years_without_a_station_are_refused(scene):
    _, study, weather, base = scene
    first = [s.hours.index < pd.Timestamp("2021-12-31", tz="UTC") for s in weather.stations]
    stations = [
        replace(s, hours=s.hours[kept], derived=s.derived[kept])
        for s, kept in zip(weather.stations, first, strict=True)
    ]
    empty = replace(weather, stations=tuple(stations))
    with pytest.raises(InputError, match="no field of the study has a usable station in 2022-2022"):
        compare(base, scenarios(study, [], RELATIVE, ["2022-2022"]), empty)
