"""Reading a schedule: what its rows mean, and every problem told with file and line."""

from __future__ import annotations

import datetime as dt

import pytest

from climarisk import flights as module
from climarisk.aircraft import AircraftProfile
from climarisk.errors import InputError
from climarisk.fields import Field
from climarisk.flights import read_flights
from climarisk.seasons import read_seasons

FIELDS = [Field(id_, id_, 46.5, 11.0, 500.0, "Europe/Rome") for id_ in ("LOWA", "HIGH")]
PLANE = AircraftProfile("trainer", "Trainer", "invented", "natural", True, 760.0, 740.0, 520.0)
HEAD = "flight,field,aircraft,operation,time,dates,season,weekdays,mass_kg,repeats\n"
NAMED = {"flying summer": ["06-15", "09-15"], "deep winter": ["12-15", "02-10"]}


def read(tmp_path, *rows, head=HEAD, year=2027):
    path = tmp_path / "flights.csv"
    path.write_text(head + "\n".join(rows) + "\n", encoding="utf-8")
    seasons = {s.name: s for s in read_seasons(NAMED, path, [])}
    return read_flights(path, FIELDS, {"trainer": PLANE}, seasons, year)


def one(tmp_path, row, **more):
    flights, problems = read(tmp_path, row, **more)
    assert problems == []
    return flights[0]


def test_every_column_is_read(tmp_path):
    flight = one(
        tmp_path, "AB 1,LOWA,trainer,landing,07:05,2027-07-03 2027-06-30,,,612.5,3", year=2030
    )
    assert (flight.id, flight.field, flight.aircraft) == ("AB 1", "LOWA", "trainer")
    assert (flight.operation, flight.time) == ("landing", dt.time(7, 5))
    assert flight.dates == (dt.date(2027, 6, 30), dt.date(2027, 7, 3))
    assert (flight.mass_kg, flight.repeats) == (612.5, 3)
    assert flight.when == "2027-07-03 2027-06-30"


def test_optional_columns_may_be_absent(tmp_path):
    head = "flight,field,aircraft,operation,time,dates\n"
    flight = one(tmp_path, "A,LOWA,trainer,both,9:30,2028-02-29", head=head)
    assert (flight.mass_kg, flight.repeats) == (None, 1)
    assert (flight.dates, flight.time) == ((dt.date(2028, 2, 29),), dt.time(9, 30))


def test_interval_holds_both_ends(tmp_path):
    flight = one(tmp_path, "A,LOWA,trainer,both,09:30,2027-06-29/2027-07-02,,,,")
    assert [d.isoformat()[5:] for d in flight.dates] == ["06-29", "06-30", "07-01", "07-02"]


# 1 June 2027 is a Tuesday (perpetual calendar; `datetime` counts Monday as 0).
@pytest.mark.parametrize(
    ("weekdays", "days"),
    [
        ("Mon Wed Fri", [2, 4, 7, 9, 11, 14]),
        ("Mon-Fri", [1, 2, 3, 4, 7, 8, 9, 10, 11, 14]),
        ("sat-mon", [5, 6, 7, 12, 13, 14]),
        ("Tue,THU", [1, 3, 8, 10]),
    ],
)
def test_weekdays_choose_the_days_of_an_interval(tmp_path, weekdays, days):
    row = f'A,LOWA,trainer,both,09:30,2027-06-01/2027-06-14,,"{weekdays}",,'
    assert [d.day for d in one(tmp_path, row).dates] == days


def test_season_is_its_days_in_the_planning_year(tmp_path):
    flight = one(tmp_path, "A,LOWA,trainer,both,09:30,,flying summer,,,", year=2031)
    assert flight.dates[0] == dt.date(2031, 6, 15) and flight.dates[-1] == dt.date(2031, 9, 15)
    assert len(flight.dates) == 16 + 31 + 31 + 15
    assert flight.when == "flying summer 2031"


@pytest.mark.parametrize(("year", "january_on"), [(2027, 41), (2028, 41)])
def test_season_over_new_year_is_both_its_ends_in_one_year(tmp_path, year, january_on):
    dates = one(tmp_path, "A,LOWA,trainer,both,09:30,,deep winter,,,", year=year).dates
    assert {d.year for d in dates} == {year}
    assert len(dates) == january_on + 17  # 31 + 10 days, then 15 to 31 December
    assert dt.date(year, 2, 10) in dates and dt.date(year, 2, 11) not in dates
    assert dt.date(year, 12, 15) in dates and dt.date(year, 12, 14) not in dates


ROW = "A,LOWA,trainer,both,09:30,2027-07-01,,,,"


@pytest.mark.parametrize(
    ("row", "told"),
    [
        (ROW.replace("LOWA", "LOWB"), "'LOWB' is no field of the study; did you mean 'LOWA'?"),
        (ROW.replace("trainer", "trainr"), "'trainr' is no aircraft of the study; did you mean"),
        (ROW.replace("both", "hover"), "'operation' is 'hover'"),
        (ROW.replace("09:30", "25:00"), "'time' is '25:00'; give the local clock time as HH:MM"),
        (ROW.replace("09:30", "09:60"), "'time' is '09:60'"),
        (ROW.replace("09:30", "9.30"), "'time' is '9.30'"),
        (ROW.replace("09:30", ""), "'time' is missing"),
        (ROW.replace("07-01", "02-29"), "'2027-02-29' is no date"),
        (ROW.replace("2027-07-01", "20270701"), "'20270701' is no date"),
        (ROW.replace("2027-07-01", "1066-10-14"), "outside the years 1800 to 2200"),
        (ROW.replace("2027-07-01", "2027-07-01 2027-07-01"), "holds 2027-07-01 twice"),
        (ROW.replace("2027-07-01", "2027-07-02/2027-07-01"), "ends before it begins"),
        (ROW.replace("2027-07-01", "2027-07-01/"), "an interval is two dates"),
        (ROW.replace("2027-07-01", "2027-07-01/2027-07-02/2027-07-03"), "an interval is two dates"),
        (ROW.replace("2027-07-01", "2000-01-01/2027-07-01"), "has 10,044 days; at most 5,000"),
        (ROW.replace("2027-07-01", ""), "neither is there"),
        (ROW.replace("-01,,", "-01,flying summer,"), "both are there"),
        (ROW.replace("2027-07-01,,", ",flying sumer,"), "did you mean 'flying summer'?"),
        (ROW.replace("-01,,", "-01,,Mon"), "leave it empty beside single dates"),
        ("A,LOWA,trainer,both,09:30,2027-07-01/2027-07-02,,Mon,,", "is a Mon; correct"),
        ("A,LOWA,trainer,both,09:30,2027-07-01/2027-07-09,,Munday,,", "'weekdays' holds 'Munday'"),
        ("A,LOWA,trainer,both,09:30,2027-07-01/2027-07-09,,Mon-Wed-Fri,,", "a range has two ends"),
        (ROW[:-1] + "761,", "'mass_kg' is 761; for 'trainer' it must be above the empty"),
        (ROW[:-1] + "520,", "mass of 520 kg and at most 760 kg"),
        (ROW[:-1] + "heavy,", "'mass_kg' is 'heavy'"),
        (ROW[:-1] + "nan,", "'mass_kg' is 'nan'"),
        (ROW + "0", "'repeats' is '0'"),
        (ROW + "1.5", "'repeats' is '1.5'"),
        (ROW + "x", "'repeats' is 'x'; give a whole number of flights, 1 to 1,000"),
        (ROW + "1001", "'repeats' is '1001'; give a whole number of flights, 1 to 1,000"),
        (ROW[:-1] + "-5,", "'mass_kg' is -5; for 'trainer' it must be above the empty"),
        (ROW[:-1] + "6_0_0,", "'mass_kg' is '6_0_0'; give a mass in kilograms above 0"),
        (ROW.replace("09:30", "08:00:00"), "'time' is '08:00:00'; give the local clock time as"),
        *((ROW.replace("2027-07-01", text), f"{text!r}; write the date as 2027-06-15,")
          for text in ("06/15/2027", "15/06/2027", "06/15", "2027/06/15", "2027-6-1/2027-6-3",
                       "06/15/2027 06/16/2027", "06/15/2027 - 06/20/2027", "2027-06-14 06/15")),
        (ROW.replace("2027-07-01", "15.06.2027"), "'15.06.2027' is no date; give dates that"),
        (ROW.replace("2027-07-01", "2027-02-29 2027-07-01 2027-13-01"),
         "'2027-02-29' and '2027-13-01' are no dates"),
        (ROW.replace("2027-07-01", "a b c d e"), "'a', 'b', 'c' and 2 more are no dates"),
        (ROW.replace("2027-07-01", "2027-06-31/2027-09-31"),
         "'2027-06-31' and '2027-09-31' are no dates"),
        ("=A" + ROW[1:], "a spreadsheet takes for a formula"),
        (ROW[1:], "'flight' is missing"),
    ],
)  # fmt: skip
def test_problem_is_told_with_file_and_line(tmp_path, row, told):
    flights, problems = read(tmp_path, "OK" + ROW[1:], row)
    assert len(problems) == 1 and told in problems[0]
    assert f"{tmp_path / 'flights.csv'}, line 3: " in problems[0]
    assert [f.id for f in flights] == ["OK"]


def test_mass_may_be_the_maximum(tmp_path):
    assert one(tmp_path, ROW[:-1] + "760,").mass_kg == 760.0


def test_all_problems_of_all_rows_are_told(tmp_path):
    wrong = "B,NONE,glider,both,24:00,,,,,"
    _, problems = read(tmp_path, wrong, ROW, ROW)
    assert len(problems) == 5
    assert "line 4: the flight 'A' stands in line 3 too" in problems[-1]


def test_all_problems_of_a_row_come_out_together(tmp_path):
    every = "=B,NONE,glider,hover,24:00,2027-02-29 1066-10-14,sumer,Munday Tu-Xyz,-5,x"
    _, problems = read(tmp_path, every)
    told = [
        "'flight' is '=B': begins with", "'NONE' is no field", "'glider' is no aircraft",
        "'operation' is 'hover'; give takeoff, landing or both", "'time' is '24:00'",
        "exactly one of 'dates' and 'season' must be filled in; both are there",
        "'2027-02-29' is no date", "'1066-10-14' in 'dates': outside the years 1800 to 2200",
        "'sumer' is no season", "'weekdays' holds 'Munday'", "'weekdays' holds 'Tu'",
        "'weekdays' holds 'Xyz'", "'mass_kg' is '-5'; give a mass", "'repeats' is 'x'; give",
    ]  # fmt: skip
    where = f"{tmp_path / 'flights.csv'}, line 2: "
    assert [p[: len(where)] for p in problems] == [where] * len(told)
    for problem, part in zip(problems, told, strict=True):
        assert part in problem and "Input should" not in problem
    _, problems = read(tmp_path, ",,,,,,,,,")  # a blank line is left out
    assert len(problems) == 1
    _, problems = read(tmp_path, ",,,,,2027-07-01,,,,")
    assert [p.removeprefix(where) for p in problems] == [
        f"{name!r} is missing; add it."
        for name in ("flight", "field", "aircraft", "operation", "time")
    ]


def test_row_with_other_problems_is_told_as_a_double_too(tmp_path):
    _, problems = read(tmp_path, ROW, ROW.replace("LOWA", "NONE"))
    assert len(problems) == 2
    assert "stands in line 2 too" in problems[0] and "'NONE' is no field" in problems[1]


def test_numbers_and_times_as_spreadsheets_write_them(tmp_path):
    early, padded = (one(tmp_path, ROW.replace("09:30", t)) for t in ("8:00", "08:00"))
    assert early.time == padded.time == dt.time(8, 0)
    loaded = one(tmp_path, ROW[:-1] + "612.50,3.0")
    assert (loaded.mass_kg, loaded.repeats) == (612.5, 3)
    assert one(tmp_path, ROW + "1000").repeats == 1000


def test_unknown_column_is_told_with_the_nearest_one(tmp_path):
    _, problems = read(tmp_path, ROW, head=HEAD.replace("season", "seasn"))
    assert problems == [
        f"{tmp_path / 'flights.csv'}: the column 'seasn' is not known; did you mean 'season'?"
    ]


def test_schedule_without_a_row_and_absent_file_are_told(tmp_path):
    _, problems = read(tmp_path)
    assert "no row" in problems[0]
    with pytest.raises(InputError, match="there is no such file"):
        read_flights(tmp_path / "none.csv", FIELDS, {}, {}, 2027)


def test_too_many_rows_dates_and_problems_are_told(tmp_path, monkeypatch):
    monkeypatch.setattr(module, "MOST_ROWS", 3)
    flights, problems = read(tmp_path, *[f"{i}{ROW[1:]}" for i in range(4)])
    assert flights == [] and "the schedule has 4 rows; at most 3 are read" in problems[0]
    monkeypatch.setattr(module, "MOST_ROWS", 1000)
    monkeypatch.setattr(module, "MOST_DATES_OF_ALL", 3)
    _, problems = read(tmp_path, *[f"{i}{ROW[1:]}" for i in range(4)])
    assert len(problems) == 1 and "have 4 dates together; at most 3" in problems[0]
    _, problems = read(tmp_path, *["A,x,y,both,09:30,2027-07-01,,,,"] * 300)
    assert len(problems) == 201 and problems[-1].endswith(": 699 problems more.")


def test_text_of_a_row_never_escapes_as_another_error(tmp_path):
    long = "9" * 400
    rows = [
        f"A,LOWA,trainer,both,{long},2027-07-01,,,,",
        f"B,LOWA,trainer,both,09:30,{long}-01-01,,,,",
        f"C,LOWA,trainer,both,09:30,2027-07-01,,,{long},",
        "D,LOWA,trainer,both,٠٩:٣٠,2027-07-01,,,,",
        "E,LOWA,trainer,both,09:30,٢٠٢٧-07-01,,,,",
    ]
    flights, problems = read(tmp_path, *rows)
    assert flights == [] and len(problems) == 5
