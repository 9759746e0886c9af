"""The summary a run ends with: short, clean, true to the frames, and no data named as such."""

from __future__ import annotations

import math
import unicodedata
from dataclasses import replace
from pathlib import Path

import pytest
from sample_result import EMPTY_FIELD, LONG_NAME, sample_result

from climarisk.findings import Finding
from climarisk.outputs.summary import bases_lines, columns, cut, schedule_lines, summary_lines

FOLDER = Path("maps") / "strips"
FILES = [
    FOLDER / name
    for name in ("map.html", "tables.xlsx", "report.html", "risk_monthly.csv", "study.json")
]
MONTHS = (
    *("January", "February", "March", "April", "May", "June"),
    *("July", "August", "September", "October", "November", "December"),
)


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def lines(result) -> list[str]:
    return summary_lines(result, FOLDER, FILES)


def with_shares(result, shares: dict[tuple[str, str, int], float], others: float):
    """The result with every monthly share replaced; None is no data."""
    risk = result.risk_monthly.copy()
    keys = zip(risk["field"], risk["aircraft"], risk["month"], strict=True)
    risk["shortfall"] = [shares.get(key, others) for key in keys]
    return replace(result, risk_monthly=risk)


def without_slopes(result):
    """The result with every runway level."""
    fields = tuple(
        replace(field, runways=tuple(replace(way, slope_pct=0.0) for way in field.runways))
        for field in result.fields
    )
    return replace(result, fields=fields)


def below(lines: list[str], head: str) -> list[str]:
    """The indented lines below the one that begins so."""
    (start,) = [n for n, line in enumerate(lines) if line.startswith(head)]
    found = []
    for line in lines[start + 1 :]:
        if not line.startswith("  "):
            break
        found.append(line)
    return found


# ---------------------------------------------------------------- shape


@pytest.mark.parametrize(("fields", "aircraft"), [(6, 1), (6, 2), (8, 3), (12, 5), (12, 9)])
def test_summary_is_short_narrow_and_plain(fields, aircraft):
    lines = summary_lines(sample_result(fields, aircraft), FOLDER, FILES)
    assert len(lines) <= 27
    assert aircraft > 4 or len(lines) <= 25
    for line in lines:
        assert columns(line) <= 80, line
        assert line.isprintable(), line
        assert line == line.rstrip()


def test_same_result_gives_the_same_lines(result, lines):
    assert summary_lines(sample_result(), FOLDER, FILES) == lines


# ---------------------------------------------------------------- worst cells


@pytest.mark.parametrize(
    ("aircraft", "head"),
    [("aircraft-0", "Two-seat trainer (invented): "), ("aircraft-1", "Tourer <b onclick=pw")],
)
def test_worst_cells_are_those_of_the_frame(result, lines, aircraft, head):
    worst = {}
    for row in result.risk_monthly.itertuples():
        if row.aircraft == aircraft and not math.isnan(row.shortfall):
            worst.setdefault(row.field, []).append((row.shortfall, -row.month, row))
    best = sorted((max(found) for found in worst.values()), reverse=True)[:3]
    shown = below(lines, head)
    names = {field.id: field.name for field in result.fields}
    assert len(shown) == 3
    for line, (share, _, row) in zip(shown, best, strict=True):
        assert line.split("%")[0].strip() == str(math.floor(share * 100 + 0.5))
        low, high = row.ci_low, row.ci_high
        interval = f"({math.floor(low * 100 + 0.5)}-" if low == low else "(too few years)"
        assert interval in line
        assert high != high or f"{math.floor(high * 100 + 0.5)} %)" in line
        assert f" {MONTHS[row.month - 1]} at {names[row.field][:12]}" in line
        assert line.endswith(f": {row.limiting}")


def test_each_aircraft_shows_three_distinct_fields_among_few_and_one_among_many():
    few = summary_lines(sample_result(8, 2), FOLDER, FILES)
    assert len(below(few, "Two-seat trainer")) == 3
    three = summary_lines(sample_result(8, 3), FOLDER, FILES)
    assert len(below(three, "Tourer")) == 2
    many = summary_lines(sample_result(8, 7), FOLDER, FILES)
    assert "2 aircraft more: see the map." in many
    assert sum(" at " in line and line[:8].endswith("%") for line in many) == 5


def test_aircraft_that_are_left_out_are_not_the_worst_ones():
    result = sample_result(6, 7)
    shares = {("field-0", "aircraft-6", 8): 0.9}
    lines = summary_lines(with_shares(result, shares, 0.0), FOLDER, FILES)
    assert any(line.startswith("    90 %") and "August at Quiet Plateau" in line for line in lines)


def test_scaled_aircraft_is_marked(lines):
    (line,) = [line for line in lines if line.startswith("Tourer")]
    assert "(scaled, no table):" in line


# ---------------------------------------------------------------- usable and no data


def test_field_counts_as_usable_only_with_all_twelve_months_below_the_first_band(result):
    # bands of the sample: 1, 5, 20 %
    shares = {("field-1", "aircraft-0", 3): math.nan}  # eleven good months
    shares |= {("field-2", "aircraft-0", 3): 0.01}  # on the edge is the next band
    shares |= {(EMPTY_FIELD, "aircraft-0", month): math.nan for month in range(1, 13)}
    level = without_slopes(result)
    changed = with_shares(level, shares, 0.0099)
    line = next(x for x in summary_lines(changed, FOLDER, FILES) if x.startswith("Two-seat"))
    assert line.endswith(": < 1 % all year at Quiet Plateau and 2 more")
    one = with_shares(level, {("field-0", "aircraft-0", m): 0.0 for m in range(1, 13)}, 0.2)
    line = next(x for x in summary_lines(one, FOLDER, FILES) if x.startswith("Two-seat"))
    assert line.endswith(": < 1 % all year at Quiet Plateau")
    for share, where in ((0.0, "all 6 fields"), (0.01, "no field")):
        lines = summary_lines(with_shares(level, {}, share), FOLDER, FILES)
        assert f"Two-seat trainer (invented): < 1 % all year at {where}" in lines
        assert not any("steep" in line for line in lines)


def test_steep_fields_are_never_counted_as_usable(result):
    # The sample's fields 0 and 3 slope 3.5 %.
    lines = summary_lines(with_shares(result, {}, 0.0), FOLDER, FILES)
    assert "Two-seat trainer (invented): < 1 % all year at all 4 fields not steep" in lines
    assert "2 steep fields need a procedure of their own: no figure there is a pass." in lines
    (one,) = [
        line for line in summary_lines(sample_result(3), FOLDER, FILES) if "steep field" in line
    ]
    assert one == "1 steep field needs a procedure of its own: no figure there is a pass."


def test_rare_hours_are_not_called_none(result):
    changed = with_shares(result, {("field-0", "aircraft-0", 7): 0.00004}, 0.0)
    assert below(summary_lines(changed, FOLDER, FILES), "Two-seat")[0].startswith("   < 1 %")
    never = below(summary_lines(with_shares(result, {}, 0.0), FOLDER, FILES), "Two-seat")
    assert never == ["  no hour falls short where there are data"]


def test_nothing_known_is_no_data_and_never_safe(result):
    lines = summary_lines(with_shares(result, {}, math.nan), FOLDER, FILES)
    assert "Two-seat trainer (invented): no data at any field" in lines
    text = "\n".join(lines)
    assert "all year" not in text
    assert "no hour falls short" not in text
    assert "No data at all: " in text


def test_fields_without_data_are_named_and_cells_counted(result, lines):
    assert "No data at all: Meadow 5. That does not mean no risk." in lines
    known = sum(share == share for share in result.risk_hourly["shortfall"])
    cells = 6 * 2 * 12 * 24
    assert len(result.risk_hourly) == cells
    years = "from 14 years of the 15"  # the sample's hours; its period is 2010 to 2024
    text = f"Data: {known:,} of {cells:,} month x hour cells, {years}; {cells - known:,} empty."
    assert text in lines


@pytest.mark.parametrize(
    ("years", "first", "words"),
    [
        ((1, 2), 2010, "from 1 to 2 years of the 15."),
        ((1, 1), 2010, "from 1 year of the 15."),
        ((15, 15), 2010, "from all 15 years."),
        ((1, 1), 2024, "from its one year."),
    ],
)
def test_years_behind_the_cells_are_told(result, years, first, words):
    risk = result.risk_hourly.dropna(subset="shortfall").assign(n_years=years[0])
    risk.loc[risk.index[:7], "n_years"] = years[1]
    changed = replace(result, risk_hourly=risk, settings=result.settings | {"first_year": first})
    (line,) = [x for x in summary_lines(changed, FOLDER, FILES) if x.startswith("Data: ")]
    assert line.endswith(f" month x hour cells, {words}")


def test_fields_with_some_months_only_are_named(result, lines):
    # In the sample field 1 has no February and no April.
    (line,) = [line for line in lines if line.startswith("Some months only: ")]
    assert line.endswith(" (10 of 12).")
    assert "{{7*7}}" in line
    shares = {("field-4", "aircraft-1", month): math.nan for month in range(1, 12)}
    changed = summary_lines(with_shares(result, shares, 0.0), FOLDER, FILES)
    assert "Some months only: ${7*7}`+alert(1)+` (1 of 12)." in changed
    known = summary_lines(with_shares(result, {}, 0.0), FOLDER, FILES)
    assert not any(line.startswith("Some months only") for line in known)


def test_months_that_tie_are_told_as_such(result):
    def first(months):
        shares = {("field-4", "aircraft-0", month): 1.0 for month in months}
        lines = summary_lines(with_shares(result, shares, 0.0), FOLDER, FILES)
        return below(lines, "Two-seat")[0]

    assert " every month at ${7*7}" in first(range(1, 13))
    assert " Jan, Apr at ${7*7}" in first((1, 4))
    assert " Jun and 3 more at ${7*7}" in first((6, 7, 8, 9))
    assert " October at ${7*7}" in first((10,))


def test_equal_names_are_told_apart_by_their_ids(result):
    long = "A field with a name that is much too long for a line of a terminal"
    alike = ("Same", "same", "Same\x00", long, long, "Other")
    fields = tuple(replace(f, name=n) for f, n in zip(result.fields, alike, strict=True))
    aircraft = tuple(replace(profile, name="Same") for profile in result.aircraft)
    changed = with_shares(replace(result, fields=fields, aircraft=aircraft), {}, math.nan)
    share = {(field.id, "aircraft-0", 7): 0.5 for field in fields}
    text = "\n".join(summary_lines(with_shares(changed, share, math.nan), FOLDER, FILES))
    assert "Same (aircraft-0): " in text and "Same (aircraft-1) (scaled, no table): " in text
    for which, name in (("0", "Same"), ("1", "same"), ("2", "Same")):
        assert f"July at {name} (field-{which})" in text
    share = {(field.id, "aircraft-0", 7): 0.5 for field in fields[3:]}
    lines = below(
        summary_lines(with_shares(changed, share, math.nan), FOLDER, FILES), "Same (aircraft-0"
    )
    assert "\u2026 (field-3): " in lines[0] and "\u2026 (field-4): " in lines[1]
    assert all(columns(line) <= 80 for line in lines)


def test_one_field_is_one_field():
    assert ": 1 field x 1 aircraft, " in summary_lines(sample_result(1, 1), FOLDER, FILES)[0]


def test_many_fields_without_data_are_counted(result):
    lines = summary_lines(with_shares(result, {}, math.nan), FOLDER, FILES)
    (line,) = [line for line in lines if line.startswith("No data at all: ")]
    listed, _, rest = line.removeprefix("No data at all: ").partition(" and ")
    shown = listed.count(", ") + 1
    assert rest == f"{6 - shown} more. That does not mean no risk."


# ---------------------------------------------------------------- findings


def finding_lines(result, findings) -> list[str]:
    lines = summary_lines(replace(result, findings=tuple(findings)), FOLDER, FILES)
    (start,) = [n for n, line in enumerate(lines) if line.startswith("Findings")]
    return [line for line in lines[start:] if not line.startswith(("Map", "Beside"))]


def test_findings_are_counted_in_one_line(lines):
    assert "Findings, all in study.json: 2 rejections, 1 caution, 2 notes." in lines
    assert sum(line.startswith(("Findings", "  reject", "  caution")) for line in lines) == 1


def test_no_findings_and_notes_only(result):
    assert finding_lines(result, []) == ["Findings: none."]
    note = Finding("note", "study", "study", "c", "only a note")
    assert finding_lines(result, [note]) == ["Findings, all in study.json: 1 note."]


# ---------------------------------------------------------------- files


def test_files_are_where_they_were_written(result, lines):
    assert lines[-2:] == [
        f"Map: {FOLDER / 'map.html'}",
        "Beside it: report.html (to print), tables.xlsx (workbook), 1 CSV table.",
    ]
    deep = Path("a" * 90) / "b"
    last = summary_lines(result, deep, [deep / "map.html", deep / "risk_monthly.csv"])[-2:]
    assert last == [f"Map: {deep / 'map.html'}", "Beside it: 1 CSV table."]


def test_pages_of_bases_and_schedule_are_named_in_the_order_of_their_reading(result):
    names = ["a.csv", "schedule.html", "tables.xlsx", "bases.html", "report.html", "map.html"]
    lines = summary_lines(result, FOLDER, [FOLDER / name for name in names])
    at = next(n for n, line in enumerate(lines) if line.startswith("Beside it"))
    assert " ".join(line.strip() for line in lines[at:]) == (
        "Beside it: report.html (to print), bases.html (bases), schedule.html (flights), "
        "tables.xlsx (workbook), 1 CSV table."
    )
    assert all(columns(line) <= 80 for line in lines[at:])
    alone = bases_lines(result, FOLDER, [FOLDER / "bases.html", FOLDER / "bases.csv"])
    assert alone[-1] == "Beside it: bases.html (bases), 1 CSV table."
    frames = {n: getattr(result, n) for n in ("schedule_flights", "schedule_seasons")}
    flights = schedule_lines(frames, 0.9, FOLDER, [FOLDER / "schedule.html"])
    assert flights[-2:] == [f"Files: {FOLDER}", "Beside it: schedule.html (flights)."]


# ---------------------------------------------------------------- names


def test_hostile_names_are_cleaned(result):
    hostile = "\x1b[31mred\x07\r\nnew\u202eline\u2066\u2028[bold]\ud800\ufeff"
    fields = tuple(replace(field, name=hostile) for field in result.fields)
    aircraft = tuple(replace(profile, name=hostile) for profile in result.aircraft)
    changed = replace(result, title=hostile, fields=fields, aircraft=aircraft)
    for line in summary_lines(changed, FOLDER, FILES):
        assert line.isprintable()
        assert not {unicodedata.category(c) for c in line} & {"Cc", "Cf", "Cs", "Zl", "Zp"}
        assert columns(line) <= 80


@pytest.mark.parametrize(
    ("text", "width", "expected"),
    [
        ("short", 5, "short"),
        ("longer", 5, "long\u2026"),
        ("a b  c\td\ne", 20, "a b c d e"),
        ("over\u202ethere", 20, "overthere"),
        ("one\u2028two", 20, "one two"),
        ("\u6771\u4eac\u90fd", 6, "\u6771\u4eac\u90fd"),
        ("\u6771\u4eac\u90fd", 5, "\u6771\u4eac\u2026"),
        ("\u6771\u4eac\u90fd", 4, "\u6771\u2026"),
        ("e\u0301e\u0301", 2, "e\u0301e\u0301"),
        ("end of it", 8, "end of\u2026"),
    ],
)
def test_cut_counts_columns(text, width, expected):
    # Unicode Standard Annex 11: East Asian wide characters take two columns.
    assert cut(text, width) == expected
    assert columns(expected) <= width


def test_cut_ends_a_pile_of_marks():
    assert len(cut("z" + "\u0301" * 5000, 20)) <= 42


def test_long_name_is_cut_with_an_ellipsis(result, lines):
    (line, _) = [line for line in lines if LONG_NAME[:12] in line]
    assert "\u2026: " in line
    assert 79 <= columns(line) <= 80  # a blank before the ellipsis is cut too
