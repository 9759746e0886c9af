"""Aircraft profiles: the shape, the axes, the order and the masses of the tables."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from study_maker import SCALED_AIRCRAFT, TABLE_AIRCRAFT

from climarisk.aircraft import OPERATIONS, read_aircraft
from climarisk.errors import InputError

ROLL = "[[160, 190, 235], [220, 270, 330], [310, 380, 465]]"


def read(tmp_path: Path, content: str):
    path = tmp_path / "plane.toml"
    path.write_text(content, encoding="utf-8")
    return read_aircraft(path)


def changed(tmp_path: Path, *changes: tuple[str, str], base: str = TABLE_AIRCRAFT):
    for old, new in changes:
        assert old in base
        base = base.replace(old, new, 1)
    return read(tmp_path, base)


def only_problem(tmp_path: Path, *changes: tuple[str, str], base: str = TABLE_AIRCRAFT) -> str:
    profile, problems = changed(tmp_path, *changes, base=base)
    assert profile is None
    assert len(problems) == 1, problems
    assert problems[0].startswith(str(tmp_path / "plane.toml"))
    return problems[0]


def test_a_profile_has_the_figures_of_its_file(tmp_path):
    profile, problems = read(tmp_path, TABLE_AIRCRAFT)
    assert problems == []
    assert (profile.id, profile.source, profile.aspiration) == ("trainer", "invented", "natural")
    assert profile.carburettor is True
    assert (profile.maximum_kg, profile.planning_kg, profile.empty_kg) == (760, 740, 520)
    assert (profile.takeoff_factor, profile.landing_factor) == (1.33, 1.43)
    assert profile.climb_rate_ft_min == 300
    assert profile.limit_temperature_c == 45
    assert profile.limit_density_altitude_ft is None
    assert [t.mass_kg for t in profile.takeoff] == [680, 760]
    assert profile.climb[0].speed_kt == 66
    assert not profile.is_scaled


def test_rows_are_pressure_altitudes_and_columns_temperatures(tmp_path):
    profile, _ = read(tmp_path, TABLE_AIRCRAFT)
    table = profile.takeoff[0]
    assert table.pressure_altitude_ft.tolist() == [0, 4000, 8000]
    assert table.temperature_c.tolist() == [-10, 15, 40]
    # Row 2 is 4000 ft, column 3 is 40 degC: the cell of the file.
    assert table.values["ground_roll_m"][1, 2] == 330


def test_a_blank_cell_is_nan_and_stays_alone(tmp_path):
    profile, _ = read(tmp_path, TABLE_AIRCRAFT)
    blank = np.isnan(profile.takeoff[1].values["distance_50ft_m"])
    assert blank[2, 2]
    assert blank.sum() == 1


def test_blocks_are_ordered_by_mass(tmp_path):
    head, light, rest = TABLE_AIRCRAFT.split("[[takeoff]]")
    heavy, landing = rest.split("[[landing]]")
    text = f"{head}[[takeoff]]{heavy}[[takeoff]]{light}[[landing]]{landing}"
    profile, problems = read(tmp_path, text)
    assert problems == []
    assert [t.mass_kg for t in profile.takeoff] == [680, 760]
    assert [t.values["ground_roll_m"][0, 0] for t in profile.takeoff] == [160, 195]


def test_columns_in_feet_equal_the_same_lengths_in_metres(tmp_path):
    metric, _ = read(tmp_path, TABLE_AIRCRAFT)
    # International foot 0.3048 m (1959 agreement): the cells divided by it.
    cells = (metric.takeoff[0].values["ground_roll_m"] / 0.3048).tolist()
    feet, problems = changed(
        tmp_path,
        (f"ground_roll_m = {ROLL}", f"ground_roll_ft = {cells}"),
        (
            "pressure_altitude_ft = [0, 4000, 8000]",
            "pressure_altitude_m = [0, 1219.2, 2438.4]",
        ),
    )
    assert problems == []
    for name in ("pressure_altitude_ft", "temperature_c"):
        np.testing.assert_allclose(
            getattr(feet.takeoff[0], name), getattr(metric.takeoff[0], name), atol=1e-9
        )
    np.testing.assert_allclose(
        feet.takeoff[0].values["ground_roll_m"],
        metric.takeoff[0].values["ground_roll_m"],
        atol=1e-9,
    )


def test_landing_ground_roll_is_optional_and_read_where_given(tmp_path):
    profile, _ = read(tmp_path, TABLE_AIRCRAFT)
    assert list(profile.landing[0].values) == ["distance_50ft_m"]
    given = "[[160, 190, 235], [220, 270, 330], [310, 380, 465]]\ndistance_50ft_m = [[360"
    profile, problems = changed(tmp_path, ("distance_50ft_m = [[360", f"ground_roll_m = {given}"))
    assert problems == []
    assert set(profile.landing[0].values) == {"distance_50ft_m", "ground_roll_m"}


def test_an_axis_of_one_value_is_allowed(tmp_path):
    single = SCALED_AIRCRAFT + (
        "[[climb]]\nmass_kg = 1200\npressure_altitude_ft = [0]\ntemperature_c = [15]\n"
        "rate_ft_min = [[900]]\n"
    )
    profile, problems = read(tmp_path, single)
    assert problems == []
    assert profile.climb[0].values["rate_ft_min"].shape == (1, 1)


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("[0, 4000, 8000]", "[0, 8000, 4000]", "block 1: pressure_altitude_ft must rise"),
        ("[0, 4000, 8000]", "[0, 0, 8000]", "block 1: pressure_altitude_ft must rise"),
        ("[-10, 15, 40]", "[40, 15, -10]", "block 1: temperature_c must rise"),
        ("[-10, 15, 40]", "[-10, nan, 40]", "'takeoff.0.temperature_c.1' is nan"),
        ("[-10, 15, 40]", "[-10, 15, inf]", "'takeoff.0.temperature_c.2' is inf"),
        ("[-10, 15, 40]", "[]", "'takeoff.0.temperature_c' is []"),
        ("[-10, 15, 40]", "40", "'takeoff.0.temperature_c' is 40"),
        ("[160, 190, 235]", "[160, 190]", "ground_roll_m has 3 rows of [2, 3] values"),
        (", [310, 380, 465]]", "]", "ground_roll_m has 2 rows of [3] values"),
        (ROLL, "[]", "'takeoff.0.ground_roll_m' is []"),
        ("[160, 190, 235]", "160", "'takeoff.0.ground_roll_m.0' is 160"),
        ("[160, 190, 235]", "[[160], 190, 235]", "'takeoff.0.ground_roll_m.0.0' is [160]"),
        ("[160, 190, 235]", "[160, 190, inf]", "ground_roll_m must hold numbers"),
        (ROLL, "[[nan, nan, nan], [nan, nan, nan], [nan, nan, nan]]", "must hold numbers"),
        ("[160, 190, 235]", "[0, 190, 235]", "a distance of zero or less"),
        ("[160, 190, 235]", "[-160, 190, 235]", "a distance of zero or less"),
        (
            "[160, 190, 235]",
            "[160, 240, 235]",
            "ground_roll_m must not fall as temperature_c rises, but does after row 1, column 2",
        ),
        (
            "[310, 380, 465]",
            "[210, 380, 465]",
            "must not fall as pressure_altitude_ft rises, but does after row 2, column 1",
        ),
        (
            "[880, 715, 560]",
            "[880, 915, 560]",
            "[[climb]] block 1: rate_ft_min must not rise as temperature_c rises, but does after "
            "row 1, column 1",
        ),
        (f"ground_roll_m = {ROLL}\n", "", "block 1: ground_roll_m is missing"),
        ("pressure_altitude_ft = [0, 4000, 8000]\n", "", "pressure_altitude_ft is missing"),
        ("temperature_c = [-10, 15, 40]\n", "", "'takeoff.0.temperature_c' is missing"),
        ("mass_kg = 680\n", "", "'takeoff.0.mass_kg' is missing"),
    ],
)
def test_a_spoilt_table_is_one_sentence_with_file_and_place(tmp_path, old, new, sentence):
    assert sentence in only_problem(tmp_path, (old, new))


def test_equal_neighbours_are_allowed(tmp_path):
    assert changed(tmp_path, ("[160, 190, 235]", "[160, 160, 160]"))[1] == []


def test_two_blocks_and_two_faults_are_both_told(tmp_path):
    _, problems = changed(
        tmp_path, ("[160, 190, 235]", "[160, 150, 235]"), ("[880, 715, 560]", "[880, 915, 560]")
    )
    assert len(problems) == 2


def test_a_fall_across_a_blank_cell_is_told(tmp_path):
    assert "must not fall" in only_problem(tmp_path, ("[160, 190, 235]", "[160, nan, 150]"))


def test_a_ground_roll_longer_than_the_distance_to_50_ft_is_told(tmp_path):
    # By definition the distance to 50 ft contains the ground roll.
    _, problems = changed(tmp_path, ("[390, 475, 580]", "[390, 1086, 1090]"))
    assert len(problems) == 1


@pytest.mark.parametrize(
    ("name", "twin"),
    [
        (f"ground_roll_m = {ROLL}", f"ground_roll_ft = {ROLL}"),
        (
            "pressure_altitude_ft = [0, 4000, 8000]",
            "pressure_altitude_m = [0, 1000, 2000]",
        ),
    ],
)
def test_both_units_are_one_sentence(tmp_path, name, twin):
    assert "are both given" in only_problem(tmp_path, (name, f"{name}\n{twin}"))


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("speed_kt", "speed_kts", "'climb.0.speed_kts' is not known here; did you mean 'speed_kt'"),
        (
            "planning_kg = 740",
            "planning_kg = 740\nplaning = 1",
            "'mass.planing' is not known here; did you mean 'planning_kg'",
        ),
        ("[margins]", "[margin]", "'margin' is not known here; did you mean 'margins'"),
        ("takeoff_factor", "take_off_factor", "did you mean 'takeoff_factor'"),
        ("limits]\ntemperature_c", "limits]\ntemperature_f", "did you mean 'temperature_c'"),
    ],
)
def test_an_unknown_key_names_the_nearest_known_one(tmp_path, old, new, sentence):
    assert sentence in only_problem(tmp_path, (old, new))


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("planning_kg = 740", "planning_kg = 761", "empty < planning <= maximum"),
        ("planning_kg = 740", "planning_kg = 520", "empty < planning <= maximum"),
        ("empty_kg = 520", "empty_kg = 0", "'mass.empty_kg' is 0"),
        ("empty_kg = 520", "empty_kg = -1", "'mass.empty_kg' is -1"),
        ("empty_kg = 520", "empty_kg = nan", "'mass.empty_kg' is nan"),
        ("maximum_kg = 760", "maximum_kg = inf", "'mass.maximum_kg' is inf"),
        ("mass_kg = 680", "mass_kg = -680", "'takeoff.0.mass_kg' is -680"),
        ("mass_kg = 680", "mass_kg = 760", "[[takeoff]]: the mass 760 kg is tabulated twice"),
        (
            "[[195, 240, 295]",
            "[[150, 240, 295]",
            "[[takeoff]]: ground_roll_m is shorter at 760 kg than at 680 kg in places",
        ),
    ],
)
def test_bad_masses_are_one_sentence(tmp_path, old, new, sentence):
    assert sentence in only_problem(tmp_path, (old, new))


def test_planning_at_the_maximum_mass_is_allowed(tmp_path):
    profile, problems = changed(tmp_path, ("planning_kg = 740", "planning_kg = 760"))
    assert problems == []
    assert profile.planning_kg == profile.maximum_kg


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ('"natural"', '"turbo"', "'engine.aspiration' is 'turbo'"),
        ('id = "trainer"', 'id = "two words"', "'id' is 'two words'"),
        ('id = "trainer"', 'id = ""', "'id' is ''"),
        ('id = "trainer"', "id = 7", "'id' is 7"),
        ('source = "invented"\n', "", "'source' is missing"),
        ("takeoff_factor = 1.33", "takeoff_factor = 0.99", "'margins.takeoff_factor' is 0.99"),
        ("landing_factor = 1.43", "landing_factor = 5.1", "'margins.landing_factor' is 5.1"),
        ("climb_rate_ft_min = 300", "climb_rate_ft_min = 0", "'margins.climb_rate_ft_min' is 0"),
        ("temperature_c = 45", "temperature_c = 71", "'limits.temperature_c' is 71"),
    ],
)
def test_a_value_out_of_bounds_is_one_sentence(tmp_path, old, new, sentence):
    assert sentence in only_problem(tmp_path, (old, new))


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("carburettor = true", 'carburettor = "yes"'),
        ("carburettor = true", "carburettor = 1"),
        ("planning_kg = 740", 'planning_kg = "740"'),
        ("empty_kg = 520", "empty_kg = true"),
        ("[-10, 15, 40]", "[-10, true, 40]"),
        ("[160, 190, 235]", '["160", 190, 235]'),
        ("[160, 190, 235]", "[true, 190, 235]"),
    ],
)
def test_a_value_of_another_type_is_told(tmp_path, old, new):
    only_problem(tmp_path, (old, new))


def test_factors_default_to_one_and_no_climb_is_asked(tmp_path):
    profile, problems = read(tmp_path, TABLE_AIRCRAFT.split("[limits]")[0])
    assert problems == []
    assert (profile.takeoff_factor, profile.landing_factor) == (1.0, 1.0)
    assert (profile.climb_rate_ft_min, profile.climb_gradient_pct) == (None, None)


# ---------------------------------------------------------------- profiles without a table


def test_a_scaled_profile_needs_no_table_and_says_so(tmp_path):
    profile, problems = read(tmp_path, SCALED_AIRCRAFT)
    assert problems == []
    assert profile.is_scaled
    assert profile.takeoff == profile.landing == profile.climb == ()
    assert profile.scaled.takeoff_distance_50ft_m == 420


@pytest.mark.parametrize("operation", ["takeoff", "landing"])
def test_an_operation_without_any_figure_is_told(tmp_path, operation):
    figure = {"takeoff": "420", "landing": "400"}[operation]
    sentence = only_problem(
        tmp_path, (f"{operation}_distance_50ft_m = {figure}\n", ""), base=SCALED_AIRCRAFT
    )
    assert f"there is no [[{operation}]] table and no {operation}_distance_50ft_m" in sentence


def test_a_climb_that_is_asked_for_needs_figures(tmp_path):
    asked = SCALED_AIRCRAFT + "[margins]\nclimb_rate_ft_min = 300\n"
    assert "asks for a climb but there is no [[climb]] table" in only_problem(tmp_path, base=asked)
    rate = "landing_distance_50ft_m = 400\nclimb_rate_ft_min = 900\n"
    _, problems = changed(tmp_path, ("landing_distance_50ft_m = 400\n", rate), base=asked)
    assert len(problems) == 1, "the ceiling is missing"
    both = rate + "absolute_ceiling_ft = 16000\n"
    _, problems = changed(tmp_path, ("landing_distance_50ft_m = 400\n", both), base=asked)
    assert problems == []


def test_a_gradient_needs_the_speed(tmp_path):
    gradient = ("climb_rate_ft_min = 300", "climb_gradient_pct = 3")
    assert changed(tmp_path, gradient)[1] == []
    sentence = only_problem(tmp_path, gradient, ("speed_kt = 66\n", ""))
    assert "climb_gradient_pct needs speed_kt in each [[climb]] block" in sentence


def test_a_table_beside_single_figures_still_counts_as_scaled(tmp_path):
    takeoff = TABLE_AIRCRAFT.split("[[landing]]")[0].split("[[takeoff]]", 1)[1]
    profile, problems = read(tmp_path, f"{SCALED_AIRCRAFT}[[takeoff]]{takeoff}")
    assert problems == []
    assert len(profile.takeoff) == 2
    assert profile.is_scaled


@pytest.mark.parametrize("content", ["", "id = 1", "[mass"])
def test_an_unusable_file_never_crashes(tmp_path, content):
    try:
        profile, problems = read(tmp_path, content)
    except InputError as error:
        profile, problems = None, error.problems
    assert profile is None
    assert problems


def test_distances_rise_and_climb_falls_by_the_sign_table():
    # Distances grow and climb shrinks with altitude and temperature: common practice, no source.
    signs = {(o, q): s for o, quantities in OPERATIONS.items() for q, s in quantities.items()}
    assert {s for (o, _), s in signs.items() if o != "climb"} == {1}
    assert signs["climb", "rate_ft_min"] == -1


# ---- critical altitude of a turbocharged engine ----------------------------------------------

NATURAL = 'aspiration = "natural"'


@pytest.mark.parametrize("altitude", [0, 12_500, 60_000])
def test_a_turbocharged_engine_may_name_its_critical_altitude(tmp_path, altitude):
    engine = f'aspiration = "turbocharged"\ncritical_altitude_ft = {altitude}'
    profile, problems = changed(tmp_path, (NATURAL, engine))
    assert problems == []
    assert profile.critical_altitude_ft == altitude


@pytest.mark.parametrize("aspiration", ["natural", "turbocharged", "diesel", "electric"])
def test_no_critical_altitude_is_invented(tmp_path, aspiration):
    profile, problems = changed(tmp_path, (NATURAL, f'aspiration = "{aspiration}"'))
    assert problems == []
    assert profile.critical_altitude_ft is None


@pytest.mark.parametrize("aspiration", ["natural", "diesel", "electric"])
def test_a_critical_altitude_of_another_engine_is_refused(tmp_path, aspiration):
    engine = f'aspiration = "{aspiration}"\ncritical_altitude_ft = 12500'
    assert only_problem(tmp_path, (NATURAL, engine)) == (
        f"{tmp_path / 'plane.toml'}: [engine] critical_altitude_ft is 12500 but the aspiration is "
        f"{aspiration}; only a turbocharged engine has one: remove it."
    )


@pytest.mark.parametrize("altitude", ["-1", "60001", "nan", '"high"'])
def test_a_critical_altitude_outside_0_to_60000_ft_is_refused(tmp_path, altitude):
    engine = f'aspiration = "turbocharged"\ncritical_altitude_ft = {altitude}'
    assert "critical_altitude_ft" in only_problem(tmp_path, (NATURAL, engine))
