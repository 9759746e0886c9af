"""The study as a whole: its file, its seasons and window, and every problem at once."""

from __future__ import annotations

import datetime as dt

import pytest
from study_maker import FIELDS, study_toml

from climarisk.errors import InputError
from climarisk.seasons import DEFAULT_SEASONS
from climarisk.study import read_study


def problems_of(study) -> tuple[str, ...]:
    with pytest.raises(InputError) as caught:
        read_study(study.file)
    return caught.value.problems


def only_problem(study, file: str = "study.toml") -> str:
    problems = problems_of(study)
    assert len(problems) == 1, problems
    assert problems[0].startswith(str(study.folder / file))
    return problems[0]


def changed(study_folder, old: str, new: str):
    return study_folder().change("study.toml", old, new)


def season(study_folder, first: str, last: str):
    new = f'["{first}", "{last}"]'
    study = read_study(changed(study_folder, '["06-15", "09-15"]', new).file)
    return study, study.seasons[0].days


def test_a_study_has_the_values_of_its_file(study_folder):
    study = read_study(study_folder("synthetic").file)
    assert study.title == "Small study (invented)"
    assert (study.first_year, study.last_year, study.source) == (2021, 2022, "synthetic")
    assert (study.radius_km, study.window, study.confidence) == (60, (6, 20), 0.90)
    assert study.bands == (0.01, 0.05, 0.20)
    assert [f.id for f in study.fields] == ["LOW", "MID", "TOP"]
    assert [a.id for a in study.aircraft] == ["tourer", "trainer"], "by file name"
    assert [s.id for s in study.stations] == ["VALE", "PASS"]
    assert study.name == "study"


def test_the_defaults_are_those_of_the_contract(study_folder):
    study = read_study(
        study_folder().write("study.toml", study_toml("synthetic").split("radius_km")[0]).file
    )
    assert study.radius_km == 100
    assert study.window == "daylight"
    assert study.bands == (0.01, 0.05, 0.20)
    assert study.confidence == 0.90
    assert study.humidity_in_tables is True
    assert [s.name for s in study.seasons] == ["DJF", "MAM", "JJA", "SON"]


def test_the_default_seasons_share_out_the_leap_year(study_folder):
    study = read_study(
        study_folder().write("study.toml", study_toml("synthetic").split("[seasons]")[0]).file
    )
    days = [day for s in study.seasons for day in s.days]
    assert len(days) == len(set(days)) == 366
    assert {m for m, _ in study.seasons[0].days} == {12, 1, 2} == set(DEFAULT_SEASONS["DJF"])


def test_the_folder_stands_for_its_study_file(study_folder):
    study = study_folder()
    assert read_study(study.folder).title == read_study(str(study.file)).title


def test_every_input_is_listed_for_the_provenance(study_folder):
    study = study_folder("files")
    names = [p.relative_to(study.folder).as_posix() for p in read_study(study.file).inputs]
    assert names == [
        "study.toml",
        "fields.csv",
        "runways.csv",
        "aircraft/tourer.toml",
        "aircraft/trainer.toml",
        "stations.csv",
        "mapping.toml",
    ]


# ---------------------------------------------------------------- seasons


def test_a_season_holds_both_its_ends(study_folder):
    _, days = season(study_folder, "06-15", "09-15")
    # 15 June to 15 September: 16 + 31 + 31 + 15 days.
    assert len(days) == 93
    assert {(6, 15), (9, 15)} <= days
    assert not {(6, 14), (9, 16)} & days


def test_a_season_may_cross_new_year(study_folder):
    study, days = season(study_folder, "11-20", "02-10")
    first, last = dt.date(2023, 11, 20), dt.date(2024, 2, 10)
    expected = {
        (d.month, d.day)
        for d in (first + dt.timedelta(days=i) for i in range((last - first).days + 1))
    }
    assert days == expected
    assert study.settings()["seasons"]["flying summer"] == ["11-20", "02-10"]


def test_the_29th_of_february_is_in_where_its_neighbours_are(study_folder):
    assert (2, 29) in season(study_folder, "02-01", "03-31")[1]
    assert (2, 29) not in season(study_folder, "03-01", "02-28")[1]


@pytest.mark.parametrize(
    ("first", "last", "count", "text"),
    [
        ("01-01", "12-31", 366, ["01-01", "12-31"]),
        ("07-04", "07-04", 1, ["07-04", "07-04"]),
        ("02-29", "02-29", 1, ["02-29", "02-29"]),
        ("12-31", "01-01", 2, ["12-31", "01-01"]),
        ("06-15", "06-14", 366, ["01-01", "12-31"]),
    ],
)
def test_the_bounds_of_a_season_come_back_as_given(study_folder, first, last, count, text):
    study, days = season(study_folder, first, last)
    assert len(days) == count
    assert study.settings()["seasons"]["flying summer"] == text


@pytest.mark.parametrize(
    "date",
    ["06-31", "02-30", "13-01", "00-10", "06-00", "15-06", "2021-06-15", "June", "", "06", "--"],
)
def test_a_date_that_does_not_exist_is_told_with_the_season(study_folder, date):
    study = changed(study_folder, '["06-15", "09-15"]', f'["{date}", "09-15"]')
    assert f"[seasons] 'flying summer': {date!r} is no date" in only_problem(study)


@pytest.mark.parametrize("value", ['["06-15"]', '"06-15"', "[6, 9]", "[2021-06-15, 2021-09-15]"])
def test_a_season_is_a_pair_of_texts(study_folder, value):
    study = changed(study_folder, '["06-15", "09-15"]', value)
    assert all("'seasons.flying summer" in p for p in problems_of(study))


def test_two_seasons_of_the_same_name_are_told(study_folder):
    only_problem(changed(study_folder, '"deep winter"', '" flying summer"'))


@pytest.mark.parametrize("old", ["Small study (invented)", "flying summer"])
def test_a_title_and_a_season_have_a_name(study_folder, old):
    only_problem(changed(study_folder, f'"{old}"', '" "'))


@pytest.mark.parametrize("name", ["=1+1", "+summer", "-summer", "@summer"])
def test_a_season_whose_name_a_spreadsheet_takes_for_a_formula_is_told(study_folder, name):
    told = only_problem(changed(study_folder, '"flying summer"', f'"{name}"'))
    assert "takes for a formula" in told


# ---------------------------------------------------------------- hours, bands, period


@pytest.mark.parametrize(
    ("text", "window"),
    [
        ('"all"', "all"),
        ('"daylight"', "daylight"),
        ("[6, 20]", (6, 20)),
        ("[20, 6]", (20, 6)),
        ("[0, 23]", (0, 23)),
        ("[5, 5]", (5, 5)),
    ],
)
def test_the_hours_window_has_three_forms(study_folder, text, window):
    study = read_study(changed(study_folder, "[6, 20]", text).file)
    assert study.window == window
    assert study.settings()["window"] == (list(window) if isinstance(window, tuple) else window)


BAD_WINDOWS = [
    "[6, 24]",
    "[-1, 20]",
    "[6]",
    "[6, 12, 20]",
    "[6.5, 20]",
    '"night"',
    "[[6], 20]",
    "6",
]


@pytest.mark.parametrize("text", BAD_WINDOWS)
def test_another_window_is_refused(study_folder, text):
    study = changed(study_folder, "[6, 20]", text)
    assert all("study.toml: " in p and "hours.window" in p for p in problems_of(study))


@pytest.mark.parametrize("text", BAD_WINDOWS)
def test_another_window_is_one_plain_sentence(study_folder, text):
    sentence = only_problem(changed(study_folder, "[6, 20]", text))
    assert "constrained" not in sentence


@pytest.mark.parametrize(
    "bands",
    [
        "[0.05, 0.01]",
        "[0.05, 0.05]",
        "[]",
        "[0.0, 0.5]",
        "[0.5, 1.0]",
        "[0.1, nan]",
        "0.05",
        "[-1]",
        "[0.00001, 0.5]",
        "[0.01, 0.02, 0.03, 0.04, 0.05, 0.06, 0.07, 0.08, 0.09]",
    ],
)
def test_band_edges_rise_between_zero_and_one(study_folder, bands):
    assert "'risk.bands" in only_problem(changed(study_folder, "[0.01, 0.05, 0.20]", bands))


@pytest.mark.parametrize("value", ["0.49", "1", "1.5", "-0.9", "nan", "inf", '"high"'])
def test_confidence_is_a_share_from_a_half_up(study_folder, value):
    study = changed(study_folder, "confidence = 0.90", f"confidence = {value}")
    assert "'risk.confidence' is " in only_problem(study)


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("first_year = 2021", "first_year = 2023", "last_year 2022 is before first_year 2023"),
        ("first_year = 2021", "first_year = 1799", "'period.first_year' is 1799"),
        ("last_year = 2022", "last_year = 2201", "'period.last_year' is 2201"),
        ("last_year = 2022", "last_year = " + "9" * 60, "'period.last_year' is 999"),
        ("last_year = 2022", "last_year = 2022.5", "'period.last_year' is 2022.5"),
        ("last_year = 2022", "last_year = nan", "'period.last_year' is nan"),
        ("last_year = 2022\n", "", "'period.last_year' is missing"),
        ("[period]", "[[period]]", "'period' is [{"),
        ("radius_km = 60", "radius_km = 0", "'weather.radius_km' is 0"),
        ("radius_km = 60", "radius_km = -5", "'weather.radius_km' is -5"),
        ("radius_km = 60", "radius_km = inf", "'weather.radius_km' is inf"),
        ("radius_km = 60", "radius_km = [60]", "'weather.radius_km' is [60]"),
        ('"synthetic"', '"internet"', "'weather.source' is 'internet'"),
        ('aircraft = ["aircraft/*.toml"]', "aircraft = []", "'aircraft' is []"),
        ('aircraft = ["aircraft/*.toml"]', 'aircraft = "a.toml"', "'aircraft' is 'a.toml'"),
        ('["aircraft/*.toml"]', '["planes/*.toml"]', "aircraft: no file fits 'planes/*.toml'"),
        ('["aircraft/*.toml"]', '["/etc/*.toml"]', "must be relative to the study folder"),
        ('stations = "stations.csv"\n', "", "source 'synthetic' needs stations"),
        ("radius_km", "radius_m", "'weather.radius_m' is not known here; did you mean 'radius_km'"),
        ("[hours]", "[hour]", "'hour' is not known here; did you mean 'hours'"),
        ('title = "', 'titel = "x"\ntitle = "', "'titel' is not known here; did you mean 'title'"),
        ('"Small study (invented)"', "5", "'title' is 5"),
        ('"Small study (invented)"', '"a\\nb"', "holds a control character"),
        ("radius_km = 60", "radius_km = 60\nradius_km = 60", "not valid TOML"),
    ],
)
def test_a_bad_setting_is_one_sentence(study_folder, old, new, sentence):
    assert sentence in only_problem(changed(study_folder, old, new))


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("radius_km = 60", 'radius_km = "60"'),
        ("radius_km = 60", "radius_km = true"),
        ("first_year = 2021", 'first_year = "2021"'),
        ("confidence = 0.90", 'confidence = "0.9"'),
        ("confidence = 0.90", 'confidence = 0.9\nhumidity_in_tables = "no"'),
        ("[0.01, 0.05, 0.20]", '["0.05"]'),
        ("[6, 20]", "[true, false]"),
        ("[6, 20]", '["6", "20"]'),
    ],
)
def test_a_setting_of_another_type_is_told(study_folder, old, new):
    only_problem(changed(study_folder, old, new))


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ('"fields.csv"', '"fields\\u0000.csv"'),
        ('"runways.csv"', '"runways\\u0000.csv"'),
        ('"stations.csv"', '"stations\\u0000.csv"'),
        ('"aircraft/*.toml"', '""'),
        ('"aircraft/*.toml"', '"."'),
        ('"aircraft/*.toml"', '"**.toml"'),
    ],
)
def test_a_path_that_pathlib_refuses_is_told(study_folder, old, new):
    assert len(problems_of(changed(study_folder, old, new))) == 1


# ---------------------------------------------------------------- across files


@pytest.mark.parametrize("name", ["fields.csv", "runways.csv", "stations.csv"])
def test_an_absent_file_and_a_folder_in_its_place_are_told(study_folder, name):
    study = study_folder()
    (study.folder / name).unlink()
    assert "there is no such file" in only_problem(study, name)
    (study.folder / name).mkdir()
    assert "cannot be read" in only_problem(study, name)


def test_two_profiles_of_the_same_id_are_told(study_folder):
    study = study_folder().change("aircraft/tourer.toml", '"tourer"', '"trainer"')
    assert "two aircraft profiles have the id 'trainer'" in only_problem(study)


def test_a_profile_that_two_patterns_find_is_read_once(study_folder):
    study = changed(study_folder, '["aircraft/*.toml"]', '["aircraft/*.toml", "*/trainer.toml"]')
    assert len(read_study(study.file).aircraft) == 2


def test_a_pin_to_an_unknown_station_names_the_nearest_known_one(study_folder):
    study = study_folder().change("fields.csv", ",VALE", ",VALA PASS")
    sentence = only_problem(study, "fields.csv")
    assert "the field 'LOW' is pinned to the station 'VALA'" in sentence
    assert "did you mean 'VALE'?" in sentence


def test_every_problem_of_every_file_is_told_at_once(study_folder):
    study = study_folder("files")
    study.change("study.toml", '["06-15", "09-15"]', '["06-31", "09-15"]')
    study.change("runways.csv", "1.5,grass", "1.5,tarmac")
    study.change("aircraft/trainer.toml", "[160, 190, 235]", "[160, 240, 235]")
    study.change("aircraft/tourer.toml", "planning_kg", "planing_kg")
    study.change("stations.csv", "archive/vale_*.csv", "archive/vail_*.csv")
    study.change("mapping.toml", 'zone = "UTC"\n', "")
    problems = problems_of(study)
    for name in ("study.toml", "runways.csv", "trainer.toml", "tourer.toml", "stations.csv"):
        assert any(name in p for p in problems), name
    assert sum("mapping.toml" in p for p in problems) == 1


@pytest.mark.parametrize(
    ("file", "old", "new"),
    [("fields.csv", "46.50", "146.50"), ("stations.csv", "46.51", "146.51")],
)
def test_one_bad_cell_brings_no_second_false_sentence(study_folder, file, old, new):
    only_problem(study_folder().change(file, old, new), file)


@pytest.mark.parametrize("name", ["fields [1].csv", "fields ü.csv", "{{7*7}}.csv", "a;b,c.csv"])
def test_a_file_may_have_any_name(study_folder, name):
    study = study_folder(name="study [x] {y} %s")
    study.write(name, FIELDS).change("study.toml", '"fields.csv"', f'"{name}"')
    assert len(read_study(study.file).fields) == 3


def test_aircraft_and_archives_are_found_in_a_folder_with_brackets(study_folder):
    study = read_study(study_folder("files", name="study [1] *x*").file)
    assert [len(s.files) for s in study.stations] == [2, 1]
    assert len(study.aircraft) == 2


def test_ids_may_hold_commas_and_dots_and_are_kept(study_folder):
    study = study_folder()
    for name in ("fields.csv", "runways.csv"):
        text = (study.folder / name).read_text()
        study.write(name, text.replace("LOW,", '"../L,OW",'))
    assert read_study(study.file).fields[0].id == "../L,OW"


def test_a_spreadsheet_byte_order_mark_and_crlf_change_nothing(study_folder):
    plain = read_study(study_folder("files", "plain").file)
    study = study_folder("files", "marked")
    for path in [*study.folder.glob("*.csv"), *study.folder.rglob("*.toml")]:
        path.write_bytes(b"\xef\xbb\xbf" + path.read_bytes().replace(b"\n", b"\r\n"))
    marked = read_study(study.file)
    assert marked.fields == plain.fields
    assert marked.settings() == plain.settings()
    assert [a.planning_kg for a in marked.aircraft] == [a.planning_kg for a in plain.aircraft]


@pytest.mark.parametrize("name", ["pernambuco", "high_plains", "lakeside"])
def test_the_shared_studies_read_without_a_problem(shared, name):
    study = read_study(shared / "studies" / name)
    assert study.fields
    assert all(f.runways for f in study.fields)
    assert all(s.files for s in study.stations)


# What the planning answers ask for


def with_tables(study_folder, tables: str):
    study = study_folder()
    return study.write("study.toml", study.file.read_text(encoding="utf-8") + "\n" + tables)


def test_planning_has_the_defaults_of_the_readme(study_folder):
    planning = read_study(study_folder().file).planning
    assert (planning.holds_in, planning.target, planning.consecutive_hours) == (0.90, 0.05, 4)
    assert planning.carburettor_icing == "chart"
    assert planning.fleet == {"tourer": 1.0, "trainer": 1.0}


@pytest.mark.parametrize(("last", "year"), [(2022, 2027), (2026, 2027), (2030, 2031)])
def test_the_planning_year_follows_the_record_and_never_lies_before_today_s_clocks(
    study_folder, last, year
):
    study = changed(study_folder, "last_year = 2022", f"last_year = {last}")
    assert read_study(study.file).planning.year == year


def test_the_planning_year_of_the_call_goes_before_that_of_the_file(study_folder):
    study = with_tables(study_folder, "[planning]\nyear = 2029\n")
    assert read_study(study.file).planning.year == 2029
    assert read_study(study.file, year=2031).planning.year == 2031


def test_a_fleet_leaves_out_what_it_does_not_name(study_folder):
    study = with_tables(study_folder, "[fleet]\ntrainer = 6\n")
    assert read_study(study.file).planning.fleet == {"tourer": 0.0, "trainer": 6.0}


def test_an_unknown_aircraft_in_the_fleet_is_told_with_the_nearest(study_folder):
    study = with_tables(study_folder, "[fleet]\ntrainr = 6\n")
    problems = problems_of(study)
    assert any("'trainr'" in p and "did you mean 'trainer'?" in p for p in problems)


def test_a_fleet_of_nothing_is_refused(study_folder):
    study = with_tables(study_folder, "[fleet]\ntrainer = 0\n")
    assert "holds no aircraft" in only_problem(study)


@pytest.mark.parametrize(
    "key",
    [
        "holds_in = 0.4",
        "holds_in = 1.1",
        "target = 0",
        "target = 1",
        "consecutive_hours = 0",
        "consecutive_hours = 25",
        "consecutive_hours = 2.5",
        'carburettor_icing = "chrt"',
        "year = 1500",
    ],
)
def test_a_planning_value_out_of_its_range_is_refused(study_folder, key):
    study = with_tables(study_folder, f"[planning]\n{key}\n")
    assert key.split(" = ")[0] in only_problem(study)


def test_a_schedule_that_is_not_there_is_told(study_folder):
    study = changed(study_folder, "[period]", 'schedule = "flights.csv"\n[period]')
    assert "flights.csv" in only_problem(study, "flights.csv")


@pytest.mark.parametrize("year", [-5, 0, 1799, 2201, 99999])
def test_a_planning_year_of_the_call_out_of_range_is_refused(study_folder, year):
    with pytest.raises(InputError, match=f"planning year {year}: a year from 1800 to 2200"):
        read_study(study_folder().file, year=year)
