"""The completeness rules at their edges, and what is told of patchy months and closed hours."""

import dataclasses
import json

import numpy as np
import pytest

from climarisk import rules
from climarisk.clock import hour_grid, local_clock
from climarisk.fields import Field
from climarisk.outputs.tables import write_outputs
from climarisk.pipeline import run_study
from climarisk.stations import Station

FIELD = Field("F", "Field", 46.0, 11.0, 500.0, "Etc/GMT-1")
CLOCK = local_clock(FIELD, hour_grid(2020, 2021), 2020, 2021)
STATION = Station("S", "S", 46.0, 11.0, 500.0, "synthetic")
ALL = CLOCK.in_period


def without(days, month=3, year=0):
    """Return every hour of two years but those of some days of one month (1-12)."""
    lost = (CLOCK.year == year) & (CLOCK.month == month - 1) & np.isin(CLOCK.day_of_month, days)
    return ALL & ~lost


# ---- WMO-No. 1203: 11 days missing, or 5 in a row --------------------------------------------


def test_complete_months_are_not_patchy():
    assert rules.patchy_months(ALL, CLOCK) == (0, 24)
    assert rules.patchy_months(np.zeros_like(ALL), CLOCK) == (0, 0)


@pytest.mark.parametrize(
    ("days", "patchy"),
    [
        (range(1, 20, 2), 0),  # ten single days
        (range(1, 22, 2), 1),  # eleven
        (range(10, 14), 0),  # four in a row
        (range(10, 15), 1),  # five
        (range(1, 6), 1),  # five at the beginning
        (range(27, 32), 1),  # five at the end
        (range(28, 32), 0),
        ([1, 2, 3, 4, 28, 29, 30, 31], 0),  # two gaps of four
    ],
)
def test_month_is_patchy_from_11_missing_days_or_5_in_a_row(days, patchy):
    # WMO-No. 1203 (2017), from memory: 11 or more days missing, or 5 or more consecutive ones.
    assert rules.patchy_months(without(list(days)), CLOCK) == (patchy, 24)


def test_gap_across_two_months_counts_in_each_for_itself():
    known = without([28, 29, 30, 31], 3) & without([1, 2, 3, 4], 4)
    assert rules.patchy_months(known, CLOCK) == (0, 24)


def test_month_without_any_hour_is_not_a_month_with_data():
    whole = without(list(range(1, 32)))
    assert rules.patchy_months(whole, CLOCK) == (0, 23)
    single_hour = whole | (
        (CLOCK.year == 0) & (CLOCK.month == 2) & (CLOCK.day_of_month == 9) & (CLOCK.hour == 6)
    )
    assert rules.patchy_months(single_hour, CLOCK) == (1, 24)


def test_one_hour_makes_a_day():
    assert rules.patchy_months(ALL & (CLOCK.hour == 12), CLOCK) == (0, 24)


def test_month_rule_agrees_with_a_plain_loop():
    draw = np.random.default_rng(4)
    days = int(CLOCK.day[ALL].max()) + 1
    lost = draw.random(days) < np.repeat(draw.uniform(0.0, 0.5, 43), 17)[:days]
    known = ALL & ~lost[np.clip(CLOCK.day, 0, days - 1)]
    patchy = some = 0
    for year in (0, 1):
        for month in range(12):
            inside = ALL & (CLOCK.year == year) & (CLOCK.month == month)
            flags = [not lost[d] for d in np.unique(CLOCK.day[inside])]
            text = "".join("x" if f else "." for f in flags)
            some += "x" in text
            patchy += "x" in text and (text.count(".") >= 11 or "....." in text)
    assert 3 < patchy < 22
    assert rules.patchy_months(known, CLOCK) == (patchy, some)


# ---- years -----------------------------------------------------------------------------------


def test_notes_of_the_years_at_their_edges():
    years = np.array([0, 1, 7, 8, 14, 15, 30])
    notes = list(rules.years_notes(years))
    assert notes[0] == "" and notes[5] == notes[6] == ""
    assert notes[1] == notes[2] != notes[3] == notes[4]
    assert "8 years" in notes[2] and "15 years" in notes[3]
    # No interval below 5 years, 5-9 marked: the project's own, after test_interval_coverage.py.
    notes = list(rules.interval_notes(np.array([0, 4, 5, 9, 10])))
    assert notes[0] == notes[4] == ""
    assert "no interval" in notes[1] and "fewer than 10" in notes[2] == notes[3]


# ---- hours and months without reports --------------------------------------------------------


def told(known, clock=CLOCK):
    return {f.check: f.message for f in rules.reporting_findings(STATION, known & ALL, clock)}


def test_station_that_is_closed_at_night_is_told():
    message = told((CLOCK.hour >= 6) & (CLOCK.hour <= 20))["reporting-hours"]
    assert "closed at night" in message and "6-20 local standard time" in message


def test_station_with_a_few_night_reports_is_still_closed_at_night():
    day = (CLOCK.hour >= 6) & (CLOCK.hour <= 20)
    some = np.random.default_rng(1).random(len(day))
    assert "reporting-hours" in told(day | (some < 0.05))
    assert told(day | (some < 0.2)) == {}


def test_three_hourly_station_is_told_its_hours_but_not_called_closed():
    message = told(CLOCK.hour % 3 == 0)["reporting-hours"]
    assert "closed" not in message and "0, 3, 6, 9" in message


def test_station_that_reports_round_the_clock_is_not_told_whatever_its_gaps():
    assert told(np.ones_like(ALL)) == {}
    assert told(np.random.default_rng(1).random(len(ALL)) < 0.5) == {}
    assert told(np.zeros_like(ALL)) == {}


def test_station_without_winters_is_told_its_months():
    summer = (CLOCK.month >= 4) & (CLOCK.month <= 8)
    message = told(summer)["reporting-months"]
    assert "1-4, 10-12" in message
    one_year = local_clock(FIELD, hour_grid(2020, 2020), 2020, 2020)
    known = (one_year.month >= 4) & one_year.in_period
    assert rules.reporting_findings(STATION, known, one_year) == []


def test_hours_are_those_of_local_standard_time():
    field = Field("F", "F", 40.0, -105.0, 500.0, "America/Denver")
    clock = local_clock(field, hour_grid(2020, 2021), 2020, 2021)
    known = (clock.hour >= 7) & (clock.hour <= 19) & clock.in_period
    (finding,) = rules.reporting_findings(STATION, known, clock)
    assert "7-19 local standard time" in finding.message
    assert (finding.severity, finding.subject, finding.id) == ("note", "station", "S")


# ---- in the outputs --------------------------------------------------------------------------


def test_rules_stand_in_study_json_with_their_thresholds(study_folder, tmp_path):
    result = run_study(study_folder().file)
    write_outputs(result, tmp_path / "out")
    written = json.loads((tmp_path / "out" / "study.json").read_text())["rules"]
    assert set(written) == {"days", "month", "years", "reporting"}
    # The completeness rule of the project (METHODS 8): 80 % of the days; WMO: 11 and 5 days.
    assert written["days"]["share_of_days"] == 0.8
    assert (written["month"]["missing_days"], written["month"]["consecutive_days"]) == (11, 5)
    assert (written["years"]["interval"], written["years"]["settled_interval"]) == (5, 10)
    for rule in written.values():
        assert rule["effect"] and rule["source"]


def test_rules_cannot_be_changed_by_accident():
    for rule in (rules.DAYS, rules.MONTH, rules.YEARS, rules.REPORTING):
        with pytest.raises(dataclasses.FrozenInstanceError):
            rule.effect = "none"


def test_night_closed_station_of_a_study_is_told(study_folder):
    study = study_folder("files")
    for year in (2021, 2022):
        head, *rows = (study.folder / f"archive/vale_{year}.csv").read_text().splitlines()
        # Rome is UTC+1: 5-18 UTC is 6-19 local standard time.
        kept = [r for r in rows if 5 <= int(r.split(",")[1][11:13]) <= 18]
        study.write(f"archive/vale_{year}.csv", "\n".join([head, *kept]) + "\n")
    result = run_study(study.file)
    closed = {f.id: f.message for f in result.findings if f.check == "reporting-hours"}
    assert set(closed) == {"VALE"}
    assert "closed at night: it reports only at 6-19" in closed["VALE"]
    own = result.distributions_hourly.query("field == 'LOW' and variable == 'temperature'")
    assert set(own.loc[own["n_hours"] > 0, "hour"]) == set(range(6, 20))
