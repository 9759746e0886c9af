"""The evidence folder: complete, the same twice, and a check that finds what was changed."""

from __future__ import annotations

import csv
import errno
import io
import json
import os
import re
import shutil
import sqlite3
import zipfile
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import pytest
from study_maker import FIELDS, RUNWAYS, make_study, study_toml

from climarisk.errors import InputError, OutputError
from climarisk.outputs.evidence import check as evidence_check
from climarisk.outputs.evidence import folder as evidence
from climarisk.outputs.evidence import numbers as evidence_numbers
from climarisk.outputs.evidence.check import check_evidence, is_repeatable
from climarisk.outputs.evidence.folder import (
    digest_of,
    files_in,
    make_evidence,
    refuse_foreign,
    write_zip,
)
from climarisk.outputs.evidence.method import method_page
from climarisk.outputs.evidence.numbers import number_problems
from climarisk.outputs.evidence.planning import hours_of_text
from climarisk.outputs.evidence.tables import Tables
from climarisk.outputs.evidence.words import FILES, HELD_BY_DIGEST, check_words
from climarisk.outputs.tables import OUTPUT_FILES
from climarisk.scenarios import sensitivity
from climarisk.study import read_study
from climarisk.weather import Weather

FLIGHTS = """\
flight,field,aircraft,operation,dates,season,weekdays,time,mass_kg,repeats
Hot,LOW,trainer,both,2027-07-01/2027-07-14,,Mon-Fri,15:30,760,2
Afternoon,MID,trainer,takeoff,2027-07-05/2027-07-11,,,15:30,,1
Winter,MID,trainer,landing,2027-01-04 2027-01-11,,,13:00,650,3
Autumn,LOW,trainer,both,2027-10-02,,,12:00,,1
"""
HOSTILE = "<script>alert(1)</script> & {{ 1 }} @@style@@"


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    """A tiny study of five years, two fields, an aircraft and a schedule, and its evidence."""
    folder = tmp_path_factory.mktemp("evidence")
    study = make_study(folder / "study")
    title = f'title = "{HOSTILE}"'
    text = study_toml("synthetic", 2018, 2022).replace('title = "Small study (invented)"', title)
    study.write("study.toml", text.replace("[period]", 'schedule = "flights.csv"\n[period]'))
    study.write("fields.csv", "".join(FIELDS.splitlines(True)[:3]).replace(",VALE", ","))
    study.write("runways.csv", "".join(RUNWAYS.splitlines(True)[:5]))
    study.write("flights.csv", FLIGHTS)
    (study.folder / "aircraft" / "tourer.toml").unlink()
    result, files = make_evidence(study.file, folder / "evidence")
    return study, folder / "evidence", result, files


@pytest.fixture
def copy(made, tmp_path):
    """A copy of the evidence to spoil."""
    return shutil.copytree(made[1], tmp_path / "evidence")


def refile(folder):
    """Bring manifest and zip up to date, as a careful forger would."""
    path = folder / "manifest.json"
    manifest = json.loads(path.read_text())
    for item in manifest["files"]:
        item["bytes"] = (folder / item["file"]).stat().st_size
        item["sha256"] = digest_of(folder / item["file"])
    path.write_text(json.dumps(manifest))
    write_zip(folder)


def change_manifest(folder, change):
    path = folder / "manifest.json"
    manifest = json.loads(path.read_text())
    change(manifest)
    path.write_text(json.dumps(manifest))


def rows_of(path):
    return list(csv.DictReader(io.StringIO(path.read_text(encoding="utf-8"))))


def change_cell(path, column, change, chosen=lambda row: True):
    """Change one cell of the first row that is chosen and has a value."""
    rows = rows_of(path)
    row = next(r for r in rows if r[column] and chosen(r))
    row[column] = change(row[column])
    with path.open("w", newline="") as file:
        writer = csv.DictWriter(file, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


# ---- what is written -------------------------------------------------------------------------


def test_evidence_holds_what_a_run_writes_and_what_a_reviewer_asks(made):
    study, folder, _, files = made
    names = {f.relative_to(folder).as_posix() for f in files}
    assert names == set(files_in(folder))
    run = set(OUTPUT_FILES)
    inputs = {f"inputs/{n}" for n in files_in(study.folder)}
    assert names >= run | inputs
    assert {n for n in names if not n.startswith("inputs/")} - run == {
        *("README.txt", "manifest.json", "method.html", "evidence.zip"),
        *("inputs.csv", "coverage.csv", "station_use.csv"),
        *("verification.txt", "verification.csv", "verification.svg"),
    }


def test_every_file_is_told_in_the_readme(made):
    _, folder, _, _ = made
    text = (folder / "README.txt").read_text()
    for name in files_in(folder):
        if not name.startswith("inputs/"):
            assert re.search(rf"^{re.escape(name)} +\S", text, re.MULTILINE), name
    assert {n for n in OUTPUT_FILES if n not in FILES} == set()


def test_copied_study_is_the_study_byte_for_byte(made):
    study, folder, _, _ = made
    for name in files_in(study.folder):
        assert (folder / "inputs" / name).read_bytes() == (study.folder / name).read_bytes()


def test_manifest_has_size_and_digest_of_every_file(made):
    _, folder, _, _ = made
    manifest = json.loads((folder / "manifest.json").read_text())
    listed = {i["file"]: (i["bytes"], i["sha256"]) for i in manifest["files"]}
    assert set(listed) == set(files_in(folder)) - {"manifest.json", "evidence.zip"}
    for name, told in listed.items():
        assert told == ((folder / name).stat().st_size, digest_of(folder / name))
    assert manifest["runnable"] is is_repeatable(folder) is True
    assert set(manifest["libraries"]) >= {"numpy", "pandas", "GDAL", "zlib", "tzdata"}


def test_zip_holds_the_folder_sorted_with_fixed_dates_and_modes(made):
    _, folder, _, _ = made
    with zipfile.ZipFile(folder / "evidence.zip") as archive:
        members = archive.infolist()
        names = [m.filename for m in members]
        assert names == sorted(set(files_in(folder)) - {"evidence.zip"})
        assert {m.date_time for m in members} == {(1980, 1, 1, 0, 0, 0)}
        assert {m.external_attr >> 16 for m in members} == {0o100644}
        assert all(archive.read(n) == (folder / n).read_bytes() for n in names)


def test_zip_of_the_same_files_has_the_same_bytes(made, copy):
    (copy / "evidence.zip").unlink()
    for path in copy.rglob("*"):
        os.utime(path, (1, 1))
        path.chmod(0o700)
    write_zip(copy)
    assert (copy / "evidence.zip").read_bytes() == (made[1] / "evidence.zip").read_bytes()


def test_readme_commands_in_order_repeat_and_check_the_evidence(made, copy, command, monkeypatch):
    text = (copy / "README.txt").read_text()
    commands = [line.split() for line in text.splitlines() if line.startswith("    climarisk ")]
    assert [c[:2] for c in commands] == [["climarisk", "evidence"]] * 2
    monkeypatch.chdir(copy)
    repeated = command(*commands[0][1:])
    assert (repeated.code, repeated.errors) == (0, [])
    again = copy.parent / "again"
    assert files_in(again) == files_in(copy) == files_in(made[1])
    for name in files_in(copy):
        assert (again / name).read_bytes() == (copy / name).read_bytes(), name
    # That a run gives the same is known by now; the check compares the one just made.
    monkeypatch.setattr(evidence_check, "make_evidence", lambda _, to, *a, **k: again.rename(to))
    checked = command(*commands[1][1:])
    assert not again.exists()
    assert (checked.code, checked.errors) == (0, [])
    assert "run again, the study gives the same" in checked.out


def test_no_file_names_a_place_on_this_machine(made):
    study, folder, _, _ = made
    for name in files_in(folder):
        data = (folder / name).read_bytes()
        for place in (study.folder.parent, folder.parent):
            assert str(place).encode() not in data, name


def test_scenarios_are_the_sensitivity_of_the_study(made):
    study, folder, result, _ = made
    names = [r["scenario"] for r in rows_of(folder / "scenarios.csv")]
    assert list(dict.fromkeys(names)) == [s.name for s in sensitivity(read_study(study.file))]
    assert result.scenarios is None  # the map stays that of a plain run


def test_tables_are_those_of_a_run(made):
    _, folder, result, _ = made
    told = [float(r["shortfall"]) for r in rows_of(folder / "risk_monthly.csv")]
    assert told == pytest.approx(list(result.risk_monthly["shortfall"]), abs=1e-9)


# ---- the method statement --------------------------------------------------------------------


class Page(HTMLParser):
    """Tags, policy and text of a page."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.attributes, self.words = set(), [], []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.add(tag)
        self.attributes += [(tag, *a) for a in attrs]

    def handle_data(self, data):
        self.words.append(data)


def test_method_statement_has_no_script_and_loads_nothing(made):
    page = Page((made[1] / "method.html").read_text(encoding="utf-8"))
    assert page.tags.isdisjoint({"script", "img", "iframe", "object", "form", "base", "svg"})
    (policy,) = (v for _, name, v in page.attributes if name == "content" and "default-src" in v)
    assert policy.startswith("default-src 'none'; style-src 'sha256-")
    assert "unsafe" not in policy
    assert not [a for a in page.attributes if a[1] == "style" or a[1].startswith("on")]
    assert not [v for _, name, v in page.attributes if name in ("src", "href") and v != "data:,"]
    assert HOSTILE in page.words


def test_method_statement_tells_sources_factors_and_what_is_recalled(made):
    words = " ".join(Page((made[1] / "method.html").read_text(encoding="utf-8")).words)
    for told in (
        "ISO 2533:1975",
        "Buck (1981)",
        "Hyndman and Fan (1996)",
        "CAT.POL.A.305",
        "CAT.POL.A.330",
        "Safety Sense Leaflet 7c",
        "from memory, not read",
        "From memory",
        "Still air is assumed",
        "invented (seed 0)",
        "not a take-off or landing calculation",
    ):
        assert told in words, told
    # Factors of UK CAA Safety Sense Leaflet 7c (2013) for grass, from memory: 1.20 and 1.15.
    row = words[words.index("wet-grass") :][:40]
    assert re.search(r"wet-grass\s+1\.3\s+1\.35", row)


def test_method_statement_tells_planning_and_the_chart(made):
    words = " ".join(Page((made[1] / "method.html").read_text(encoding="utf-8")).words)
    for told in (
        "Fields are ranked as bases by usable hours a month",
        "The mass that holds is looked for up to the maximum mass",
        "on the 31 days around it",
        "Reconstruction from memory of the carburettor-icing charts",
        "The main figures and sources that are recalled",
        "Error of a barometer, 0.15 hPa",
        "-90 to 60 degC",
    ):
        assert told in words, told


def test_chart_is_recalled_only_where_it_is_used(made):
    study = read_study(made[0].file)
    planning = replace(study.planning, carburettor_icing="physical")
    page = method_page(replace(study, planning=planning), made[2])
    assert "Carburettor-icing zones" in method_page(study, made[2])
    assert "Carburettor-icing zones" not in page


# ---- the folder ------------------------------------------------------------------------------


def test_earlier_evidence_is_replaced_whole(made, copy):
    (copy / "risk_monthly.csv").write_text("spoilt")
    refuse_foreign(copy)


@pytest.mark.parametrize("prepared", ["other", "extra", "file", "study"])
def test_folder_with_anything_else_is_refused(made, copy, prepared):
    study = made[0]
    folder = {"other": copy.parent / "other", "study": study.folder}.get(prepared, copy)
    if prepared == "other":
        folder.mkdir()
        (folder / "letter.txt").write_text("keep")
    if prepared == "extra":
        (folder / "inputs" / "letter.txt").write_text("keep")
    if prepared == "file":
        folder = copy / "README.txt"
    before = {n: digest_of(folder / n) for n in files_in(folder)}
    with pytest.raises(OutputError, match="--out"):
        make_evidence(study.file, folder)
    assert {n: digest_of(folder / n) for n in files_in(folder)} == before


@pytest.fixture
def write(made, monkeypatch):
    """Write an evidence with hardly anything in it."""
    monkeypatch.setattr(evidence, "compare", lambda *a: made[2].risk_monthly)
    monkeypatch.setattr(
        evidence, "write_outputs", lambda result, folder: folder.mkdir(exist_ok=True)
    )
    monkeypatch.setattr(evidence, "write_verification", lambda report, folder: None)
    study = read_study(made[0].file)
    return lambda folder: evidence.write_evidence(study, Weather((), ()), made[2], None, folder)


@pytest.mark.parametrize("relative", [False, True])
@pytest.mark.parametrize("target", ["evidence", "empty", "absent"])
def test_link_to_a_folder_is_written_through_and_stays(copy, write, monkeypatch, relative, target):
    place = copy.parent / target
    if target == "empty":
        place.mkdir()
    link = copy.parent / "link"
    link.symlink_to(target if relative else place)
    monkeypatch.chdir(copy.parent)
    files = write(Path("link") if relative else link)
    assert link.is_symlink() and place.is_dir() and not place.is_symlink()
    assert set(files_in(place)) == {
        f.relative_to("link" if relative else link).as_posix() for f in files
    }
    assert "map.html" not in files_in(place)  # the earlier evidence is gone


@pytest.mark.parametrize("out", [".", "..", "../evidence", "absolute"])
@pytest.mark.parametrize("inside", [".", "inputs"])
def test_folder_that_is_worked_in_is_refused(copy, write, monkeypatch, out, inside):
    monkeypatch.chdir(copy / inside)
    folder = copy if out == "absolute" else Path(out)
    if (out, inside) == ("../evidence", "inputs"):
        folder = Path("..") / ".." / "evidence"
    before = {n: digest_of(copy / n) for n in files_in(copy)}
    with pytest.raises(OutputError, match="replaced as a whole.*choose another with --out"):
        write(folder)
    assert {n: digest_of(copy / n) for n in files_in(copy)} == before
    assert Path.cwd() == copy / inside


@pytest.mark.parametrize(
    ("error", "told"),
    [
        (OSError(errno.ENOSPC, "No space left on device"), "Free some space, or choose another"),
        (OSError(errno.EBUSY, "Device or resource busy"), "in use .* choose another"),
    ],
)
def test_failed_writing_leaves_the_earlier_evidence(copy, write, monkeypatch, error, told):
    before = {n: digest_of(copy / n) for n in files_in(copy)}

    def failing(folder):
        raise error

    monkeypatch.setattr(evidence, "write_zip", failing)
    with pytest.raises(OutputError, match=f"{error.strerror}.*stands as it was.*{told}"):
        write(copy)
    assert {n: digest_of(copy / n) for n in files_in(copy)} == before
    assert [p.name for p in copy.parent.iterdir()] == ["evidence"]


# ---- the check: files ------------------------------------------------------------------------


def test_numbers_of_an_untouched_evidence_fit(made):
    assert number_problems(made[1]) == []


def test_untouched_evidence_holds(made):
    assert check_evidence(made[1], rerun=False) == []


@pytest.mark.parametrize("name", ["report.html", "inputs/fields.csv", "fields.gpkg", "README.txt"])
def test_changed_file_is_named(copy, name):
    data = bytearray((copy / name).read_bytes())
    data[len(data) // 2] ^= 1
    (copy / name).write_bytes(data)
    (problem,) = check_evidence(copy)
    assert name in problem and "changed" in problem


def test_missing_longer_and_additional_files_are_named(copy):
    (copy / "map.html").unlink()
    (copy / "trends.csv").write_text("longer")
    (copy / "inputs" / "more.txt").write_text("")
    told = check_evidence(copy)
    assert len(told) == 3
    for name, what in (
        ("map.html", "missing"),
        ("trends.csv", "bytes"),
        ("inputs/more.txt", "no part"),
    ):
        assert any(name in t and what in t for t in told), name


def test_unpacked_zip_holds_and_a_packed_one_is_to_be_unpacked(made, tmp_path):
    packed = made[1] / "evidence.zip"
    with pytest.raises(InputError, match="unpack it and name the folder"):
        check_evidence(packed)
    with pytest.raises(InputError, match="name the folder that holds it"):
        check_evidence(made[1] / "manifest.json")
    with zipfile.ZipFile(packed) as archive:
        archive.extractall(tmp_path / "unpacked")
    assert check_evidence(tmp_path / "unpacked", rerun=False) == []
    (tmp_path / "unpacked" / "evidence.zip").symlink_to(packed)
    (problem,) = check_evidence(tmp_path / "unpacked", rerun=False)
    assert "evidence.zip" in problem and "link" in problem


def test_words_of_the_check_tell_what_was_not_reckoned_again(made):
    alone = "held by their SHA-256 alone"
    assert alone in check_words(False) and "--study" in check_words(False)
    assert alone not in check_words(True)
    assert "run again, the study gives the same" in check_words(True)
    readme = " ".join((made[1] / "README.txt").read_text().split())
    assert f"Without that run, {HELD_BY_DIGEST} are held by their digest alone" in readme
    assert HELD_BY_DIGEST in check_words(False)
    assert "by day of the schedule" in readme


def spoilt_zip(folder, change):
    """Write the zip anew with its members changed."""
    with zipfile.ZipFile(folder / "evidence.zip") as archive:
        members = {n: archive.read(n) for n in archive.namelist()}
    change(members)
    with zipfile.ZipFile(folder / "evidence.zip", "w", zipfile.ZIP_DEFLATED) as archive:
        for name, data in members.items():
            archive.writestr(name, data)


@pytest.mark.parametrize(
    ("change", "told"),
    [
        (lambda m: m.update({"study.json": m["study.json"][:-2] + b" \n"}), "study.json"),
        (lambda m: m.update({"study.json": m["study.json"] + b" "}), "study.json"),
        (lambda m: m.update({"../out.txt": b""}), "does not hold"),
        (lambda m: m.pop("study.json"), "does not hold"),
    ],
)
def test_zip_that_differs_from_the_folder_is_told(copy, change, told):
    spoilt_zip(copy, change)
    (problem,) = check_evidence(copy, rerun=False)
    assert problem.startswith("evidence.zip") and told in problem
    assert not (copy.parent / "out.txt").exists()


@pytest.mark.parametrize("data", [b"", b"no zip", b"PK\x05\x06" + bytes(18)])
def test_broken_zip_is_told(copy, data):
    (copy / "evidence.zip").write_bytes(data)
    (problem,) = check_evidence(copy, rerun=False)
    assert "evidence.zip" in problem


def test_zip_with_damaged_bytes_is_told(copy):
    data = bytearray((copy / "evidence.zip").read_bytes())
    for place in range(2000, 3000):
        data[place] ^= 0x55
    (copy / "evidence.zip").write_bytes(data)
    assert any("evidence.zip" in p for p in check_evidence(copy, rerun=False))


def test_file_that_cannot_be_read_is_told(copy, monkeypatch):
    def refused(path):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(evidence_check, "digest_of", refused)
    assert "cannot be read (Permission denied)" in check_evidence(copy)[0]


# ---- the check: hostile folders --------------------------------------------------------------


@pytest.mark.parametrize(
    "name",
    [
        *("../secret.txt", "/etc/passwd", "a/../../secret.txt", "inputs\\..\\x", "C:/x", ""),
        *("./map.html", "manifest.json", "evidence.zip", "a\0b", "x" * 5000 + "/.."),
    ],
)
def test_manifest_that_names_files_elsewhere_is_refused(copy, name):
    (copy.parent / "secret.txt").write_text("secret")
    change_manifest(
        copy, lambda m: m["files"].append({"file": name, "bytes": 6, "sha256": "0" * 64})
    )
    with pytest.raises(InputError, match="no evidence folder.*cannot be") as refusal:
        check_evidence(copy)
    assert len(str(refusal.value)) < 600


@pytest.mark.parametrize("name", ["map.html", "inputs", "manifest.json"])
def test_links_are_never_followed(copy, name, monkeypatch):
    target = copy.parent / "outside"
    (copy / name).rename(target)
    (copy / name).symlink_to(target)
    opened = []
    monkeypatch.setattr(evidence_check, "digest_of", lambda p: opened.append(p) or digest_of(p))
    if name == "manifest.json":
        with pytest.raises(InputError, match="no evidence folder"):
            check_evidence(copy)
    else:
        assert any("link" in p for p in check_evidence(copy))
    assert not [p for p in opened if p.resolve().is_relative_to(target)]


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="this system has no named pipes")
def test_pipe_is_told_and_not_opened(copy):
    (copy / "map.html").unlink()
    os.mkfifo(copy / "map.html")
    (problem,) = check_evidence(copy)
    assert "map.html" in problem and "no regular file" in problem


@pytest.mark.parametrize(
    "text",
    [
        "",
        "[]",
        "null",
        "{}",
        '{"kind": "another"}',
        "\xff",
        "[" * 100_000,
        '{"kind": "climarisk evidence"}',
        '{"kind": "climarisk evidence", "files": []}',
        '{"kind": "climarisk evidence", "files": [1]}',
        '{"kind": "climarisk evidence", "files": [{"file": 1, "bytes": 1, "sha256": "a"}]}',
        '{"kind": "climarisk evidence", "files": [{"file": "a", "bytes": true, "sha256": "a"}]}',
        '{"kind": "climarisk evidence", "files": {"a": 1}}',
    ],
)
def test_folder_that_is_no_evidence_is_refused(tmp_path, text):
    (tmp_path / "manifest.json").write_bytes(text.encode("latin-1"))
    with pytest.raises(InputError, match="no evidence folder"):
        check_evidence(tmp_path)
    with pytest.raises(InputError, match="no such folder"):
        check_evidence(tmp_path / "nowhere")


def test_huge_manifest_and_huge_file_are_not_read(copy, monkeypatch):
    monkeypatch.setattr(evidence_check, "_MAX_FILE_BYTES", 100_000)
    assert any("too many" in p for p in check_evidence(copy))
    monkeypatch.setattr(evidence_check, "_MAX_MANIFEST_BYTES", 100)
    with pytest.raises(InputError, match="larger than 100 bytes"):
        check_evidence(copy)


@pytest.mark.parametrize(
    ("old", "new", "told"),
    [
        ('fields = "fields.csv"', 'fields = "../fields.csv"', "outside its folder"),
        ('fields = "fields.csv"', 'fields = "/etc/passwd"', "outside its folder"),
        ('"aircraft/*.toml"', '"../*.toml"', "outside its folder"),
        ('source = "synthetic"', 'source = "files"', "no study with invented weather"),
        ('source = "synthetic"', "source = [", "no study with invented weather"),
    ],
)
def test_copied_study_that_leaves_its_folder_is_not_run(copy, monkeypatch, old, new, told):
    path = copy / "inputs" / "study.toml"
    path.write_text(path.read_text().replace(old, new, 1))
    refile(copy)
    monkeypatch.setattr(evidence_check, "make_evidence", None)  # calling it would be a TypeError
    assert any(told in p and "not run" in p for p in check_evidence(copy))


@pytest.mark.parametrize("name", ["../study.toml", "map.html", "inputs/none.toml", None])
def test_manifest_with_another_study_is_told(copy, monkeypatch, name):
    change_manifest(copy, lambda m: m.update(study=name))
    write_zip(copy)
    monkeypatch.setattr(evidence_check, "make_evidence", None)
    assert any("as the study" in p for p in check_evidence(copy))


# ---- the check: numbers ----------------------------------------------------------------------


@pytest.fixture(scope="module")
def read(made):
    """The rows of every table."""
    tables = Tables(made[1])
    return {path.stem: tables.rows(path.stem) for path in made[1].glob("*.csv")}


def digit(text):
    """The text with its third digit changed."""
    place = [i for i, c in enumerate(text) if c.isdigit()][2]
    return text[:place] + str((int(text[place]) + 1) % 10) + text[place + 1 :]


def partly(row):
    """A row whose shortfall is neither nothing nor everything."""
    return 0.0 < float(row["shortfall"] or 0) < 0.9


def any_row(row):
    return True


def to(text):
    """Replace a cell, whatever is in it."""
    return lambda _: text


def more(by):
    return lambda text: f"{float(text) + by:g}"


def whole(row):
    """The row of the whole schedule."""
    return row["season"] == ""


PLANNING_CHANGES = [
    ("weights_monthly", "mass_kg", more(9999), any_row),
    ("weights_hourly", "mass_kg", more(9999), any_row),
    ("weights_seasonal", "mass_kg", more(9999), any_row),
    ("weights_monthly", "useful_load_kg", more(1), any_row),
    ("weights_hourly", "useful_load_kg", more(-1), any_row),
    ("weights_monthly", "outcome", to("cannot be met"), lambda r: r["outcome"] == "mass"),
    ("weights_hourly", "outcome", to("maximum mass"), lambda r: r["outcome"] == "mass"),
    ("weights_hourly", "outcome", to("mass"), lambda r: r["outcome"] == "cannot be met"),
    ("weights_hourly", "outcome", to(""), any_row),
    ("weights_monthly", "outcome", to("fine"), any_row),
    ("weights_monthly", "never_met", to("0.2"), lambda r: r["outcome"] == "mass"),
    ("weights_hourly", "never_met", to("0.01"), lambda r: r["outcome"] == "cannot be met"),
    ("weights_seasonal", "never_met", to(""), any_row),
    ("weights_monthly", "never_met", to("1.5"), any_row),
    ("weights_monthly", "holds_in", to("0.5"), any_row),
    ("weights_monthly", "ci_low_kg", to("759.5"), lambda r: float(r["ci_high_kg"] or 999) < 759),
    ("weights_monthly", "ci_high_kg", to("9999"), any_row),
    ("windows_monthly", "hours", to("06"), lambda r: r["n_clock_hours"] > "1"),
    ("windows_monthly", "hours", to("06-1O"), lambda r: r["n_clock_hours"] > "1"),
    ("windows_monthly", "n_clock_hours", to("24"), any_row),
    ("windows_monthly", "first_hour", to("5"), any_row),
    ("windows_monthly", "last_hour", to("23"), any_row),
    ("windows_monthly", "usable_low", to("-3"), any_row),
    ("windows_monthly", "usable_high", to("0"), lambda r: float(r["usable_hours"]) > 1),
    ("windows_monthly", "daylight_hours", to("900"), any_row),
    ("windows_monthly", "daylight_hours", to("3"), lambda r: float(r["usable_hours"]) > 5),
    ("windows_monthly", "hours_without_figures", to("3"), any_row),
    ("windows_monthly", "days_with_run", to("1.2"), any_row),
    ("windows_monthly", "target", to("0.5"), any_row),
    ("windows_monthly", "run_hours", to("1"), any_row),
    ("icing_hourly", "share", to("1.01"), any_row),
    ("icing_hourly", "share", to(""), any_row),
    ("power_monthly", "power_p50", to("0.1"), any_row),
    ("power_monthly", "power_p90", to(""), any_row),
    ("power_monthly", "optimistic_p50", to("0.5"), any_row),
    ("power_monthly", "humidity_ft_p90", to("-1"), any_row),
    ("power_monthly", "humidity_power_pct_p50", to("99"), any_row),
    ("bases", "usable_hours_month", digit, lambda r: r["aircraft"] == ""),
    ("bases", "ci_low", to("743"), any_row),
    ("bases", "year_p10", to("743"), any_row),
    ("bases", "icing_serious", to("1.1"), any_row),
    ("bases", "rank", to("2"), lambda r: r["rank"] == "1" and r["aircraft"] == ""),
    ("bases", "rank", to("3"), lambda r: r["aircraft"] != ""),
    ("bases", "field", to("LOW"), lambda r: r["field"] != "LOW"),
    ("base_differences", "difference_hours_month", digit, any_row),
    ("base_differences", "difference_hours_month", to(""), any_row),
    ("base_differences", "ci_low", to("700"), any_row),
    ("base_differences", "ci_high", to("-700"), any_row),
    ("base_differences", "aircraft", to("other"), any_row),
    ("base_differences", "second", to("LOW"), any_row),
    ("schedule_seasons", "affected", to("-77"), whole),
    ("schedule_seasons", "affected", digit, lambda r: float(r["affected"] or 0) > 1),
    ("schedule_seasons", "ci_low", to("50"), whole),
    ("schedule_seasons", "ci_high", to("0"), lambda r: float(r["affected"] or 0) > 1),
    ("schedule_seasons", "ci_high", to(""), whole),
    ("schedule_seasons", "year_low", to("900"), whole),
    ("schedule_seasons", "year_high", to("900"), whole),
    ("schedule_seasons", "worst_year", to("1999"), any_row),
    ("schedule_seasons", "n_years", to("99"), any_row),
    ("schedule_seasons", "flights", more(1), whole),
    ("schedule_seasons", "flights", more(1), lambda r: r["season"] != ""),
    ("schedule_seasons", "unknown_flights", more(1), whole),
    ("schedule_seasons", "season", to("spring"), any_row),
    ("schedule_days", "affected", more(0.5), any_row),
    ("schedule_days", "affected", to("-1"), any_row),
    ("schedule_days", "share", more(0.2), any_row),
    ("schedule_days", "flights", more(1), any_row),
    ("schedule_days", "weekday", to("Noday"), any_row),
    ("schedule_days", "date", to("2027-07-01"), lambda r: r["date"] != "2027-07-01"),
    ("schedule_days", "date", to("2027-14-01"), any_row),
    ("schedule_flights", "flight", to("Hot"), lambda r: r["flight"] != "Hot"),
    ("schedule_flights", "affected", more(0.5), any_row),
    ("schedule_flights", "affected", to(""), any_row),
    ("schedule_flights", "shortfall", digit, partly),
    ("schedule_flights", "ci_low", to("0.999"), any_row),
    ("schedule_flights", "flights", more(1), any_row),
    ("schedule_flights", "mass_kg", to("9999"), any_row),
    ("schedule_flights", "mass_that_holds_kg", to("9999"), any_row),
    ("schedule_flights", "useful_load_kg", more(1), any_row),
    ("schedule_flights", "outcome", to("cannot be met"), lambda r: r["mass_that_holds_kg"]),
    ("schedule_flights", "holds_in", to("0.5"), any_row),
    ("schedule_flights", "never_met", to("yes"), lambda r: r["never_met"] == "no"),
    ("schedule_flights", "nearest_shortfall", to("0.5"), any_row),
    ("schedule_flights", "nearest_shift_h", more(1), any_row),
    ("schedule_flights", "nearest_time", to("03:00"), any_row),
]


@pytest.mark.parametrize(
    ("table", "column", "change", "chosen"),
    [
        ("risk_monthly", "shortfall", digit, partly),
        ("risk_monthly", "n_hours", digit, partly),
        ("risk_monthly", "n_years", lambda t: str(int(t) - 1), partly),
        ("risk_monthly", "usable_hours", digit, partly),
        ("risk_monthly", "hours_offered", digit, partly),
        ("risk_monthly", "ci_low", lambda t: "0.99", partly),
        ("risk_monthly", "ci_high", lambda t: "0.0001", partly),
        ("risk_monthly", "ci_high", lambda t: "", partly),
        ("risk_monthly", "outside_table", lambda t: "1.5", partly),
        ("risk_monthly", "coverage", lambda t: "-0.1", partly),
        ("risk_monthly", "month", lambda t: "13", partly),
        ("risk_monthly", "field", lambda t: "OTHER", partly),
        ("risk_monthly", "shortfall", lambda t: "many", partly),
        ("risk_monthly", "shortfall", lambda t: "inf", partly),
        ("risk_monthly", "shortfall", lambda t: "", partly),
        ("risk_hourly", "shortfall", digit, partly),
        ("risk_hourly", "hour", lambda t: "5", lambda r: r["hour"] == "6"),
        ("risk_seasonal", "usable_hours", digit, partly),
        ("risk_yearly", "shortfall_hours", digit, lambda r: float(r["shortfall_hours"]) > 10),
        ("risk_yearly", "n_hours", digit, lambda r: True),
        ("risk_yearly", "year", lambda t: "1999", lambda r: True),
        ("margins_monthly", "shortfall", lambda t: "1", lambda r: r["shortfall"] == "0.0"),
        ("margins_monthly", "n_hours", digit, lambda r: True),
        ("distributions_monthly", "p50", lambda t: "-999", lambda r: True),
        ("distributions_hourly", "p75", lambda t: "99999", lambda r: True),
        ("distributions_monthly", "p90", digit, lambda r: r["variable"] == "density_altitude"),
        ("near_saturation_monthly", "share_1k", lambda t: "0.9", lambda r: True),
        ("scenarios", "shortfall_change", lambda t: "0.5", partly),
        ("scenarios", "shortfall", digit, partly),
        ("scenarios", "density_altitude_p90_ft", digit, lambda r: True),
        ("scenarios", "month", lambda t: "3", lambda r: r["month"] == "2"),
        ("bases", "usable_hours_month", digit, lambda r: r["aircraft"] != ""),
        ("windows_monthly", "usable_hours", lambda t: "745", lambda r: True),
        ("windows_monthly", "usable_low", lambda t: "745", lambda r: True),
        ("icing_monthly", "share", lambda t: "1.01", lambda r: True),
        *PLANNING_CHANGES,
        ("inputs", "sha256", digit, lambda r: r["copied"] == "yes"),
        ("coverage", "coverage", lambda t: "1.2", lambda r: True),
        ("coverage", "station", lambda t: "NONE", lambda r: True),
    ],
)
def test_changed_number_is_found(made, read, monkeypatch, table, column, change, chosen):
    rows = [dict(row) for row in read[table]]
    row = next(r for r in rows if r[column] and chosen(r))
    row[column] = change(row[column])
    changed = {**read, table: rows}
    monkeypatch.setattr(Tables, "rows", lambda _, name: changed[name])
    if not table.startswith("distributions"):  # the slowest check reads no other table
        checks = [c for c in evidence_numbers._CHECKS if c.__name__ != "_percentiles"]
        monkeypatch.setattr(evidence_numbers, "_CHECKS", checks)
    assert number_problems(made[1]) != []


def test_changed_number_is_named_though_its_digest_was_renewed(copy):
    path = copy / "risk_monthly.csv"
    row = next(r for r in rows_of(path) if partly(r))
    change_cell(path, "shortfall", lambda t: "0.123", partly)
    refile(copy)
    place = f"{row['field']} {row['aircraft']} {row['month']}"
    start = f"risk_monthly.csv, {place}: shortfall is 0.123, its years give "
    (told,) = (t for t in check_evidence(copy, rerun=False) if t.startswith(start))
    given = float(told.removeprefix(start).removesuffix("."))
    assert given == pytest.approx(float(row["shortfall"]), abs=1e-9)


def test_nonsense_of_a_careful_forger_is_told_as_such(copy):
    change_cell(copy / "schedule_seasons.csv", "affected", to("-77"), whole)
    change_cell(copy / "schedule_seasons.csv", "year_low", to("900"), whole)
    change_cell(copy / "weights_monthly.csv", "mass_kg", to("10759"))
    difference = rows_of(copy / "base_differences.csv")[0]
    change_cell(copy / "base_differences.csv", "first", to(difference["second"]))
    change_cell(copy / "base_differences.csv", "second", to(difference["first"]))
    refile(copy)
    found = check_evidence(copy, rerun=False)
    for start in (
        "schedule_seasons.csv, the whole: affected is -77",
        "weights_monthly.csv, ",
        f"base_differences.csv, {difference['second']} {difference['first']}: difference_hours",
    ):
        assert any(problem.startswith(start) for problem in found), start
    assert any("year_low 900 is above year_high" in problem for problem in found)


def test_masses_of_an_aircraft_whose_file_is_not_copied_are_held_against_one_another(copy):
    (copy / "inputs" / "aircraft" / "trainer.toml").unlink()
    rows = rows_of(copy / "weights_hourly.csv")
    assert "maximum mass" in {r["outcome"] for r in rows}

    def told():
        return [p for p in number_problems(copy) if p.startswith("weights_monthly.csv")]

    assert told() == []

    def below(row):
        return row["outcome"] == "mass"

    change_cell(copy / "weights_monthly.csv", "mass_kg", more(9999), below)
    change_cell(copy / "weights_monthly.csv", "useful_load_kg", more(9999), below)
    assert any("above the maximum mass" in problem for problem in told())
    change_cell(copy / "weights_monthly.csv", "useful_load_kg", more(1), below)
    assert any("elsewhere another" in problem for problem in told())


@pytest.mark.parametrize("name", ["weights_hourly", "base_differences", "schedule_days"])
def test_table_that_was_taken_out_is_told(copy, name):
    (copy / f"{name}.csv").unlink()
    assert f"{name}.csv is missing." in number_problems(copy)


@pytest.mark.parametrize(
    ("table", "columns"),
    [
        ("windows_monthly", ["clock_hours"]),
        ("bases", ["steep"]),
        ("schedule_flights", ["steep", "note"]),
    ],
)
def test_columns_that_no_figure_rests_on_may_be_absent(copy, table, columns):
    path = copy / f"{table}.csv"
    rows = [{c: v for c, v in row.items() if c not in columns} for row in rows_of(path)]
    with path.open("w", newline="") as file:
        writer = csv.DictWriter(file, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
    assert number_problems(copy) == []


@pytest.mark.parametrize(
    ("text", "hours"),
    [
        ("", []),
        ("06-10 18", [6, 7, 8, 9, 10, 18]),
        ("22-03", [22, 23, 0, 1, 2, 3]),
        ("00-23", list(range(24))),
    ],
)
def test_hours_are_read_from_their_text(text, hours):
    assert hours_of_text(text) == hours


@pytest.mark.parametrize("text", ["24", "06-10-12", "six"])
def test_text_that_tells_no_hours_is_refused(text):
    with pytest.raises(ValueError):
        hours_of_text(text)


@pytest.mark.parametrize("name", ["settings", "title", "version"])
def test_manifest_that_tells_another_study_is_found(copy, name):
    change_manifest(copy, lambda m: m.update({name: "another"}))
    write_zip(copy)
    assert any(name in p for p in check_evidence(copy, rerun=False))


@pytest.mark.parametrize("text", ["", "one,two\n1\n", 'a\n"b', "field\nLOW\n"])
def test_file_that_is_no_table_is_told_as_a_sentence(copy, text):
    (copy / "risk_monthly.csv").write_text(text)
    told = number_problems(copy)
    assert told and all(t.endswith(".") for t in told)


# ---- the check: once more --------------------------------------------------------------------


def handing(monkeypatch, made, change=lambda folder: None):
    """Let a run again give the first evidence, changed."""

    def again(study, folder, *_, **__):
        assert study.is_file()
        shutil.copytree(made[1], folder)
        change(folder)

    monkeypatch.setattr(evidence_check, "make_evidence", again)


def test_run_again_that_gives_the_same_holds(made, monkeypatch):
    handing(monkeypatch, made)
    assert check_evidence(made[1]) == []
    assert check_evidence(made[1], made[0].file) == []


def test_run_again_names_each_file_that_differs(made, monkeypatch):
    def change(folder):
        (folder / "trends.csv").write_text("other")
        (folder / "extremes.csv").unlink()
        (folder / "more.csv").write_text("")

    handing(monkeypatch, made, change)
    told = check_evidence(made[1])
    assert len(told) == 3
    assert any("another 'trends.csv'" in t for t in told)
    assert any("no 'extremes.csv'" in t for t in told)
    assert any("also gives 'more.csv'" in t for t in told)


def test_run_again_with_other_versions_compares_content(made, copy, monkeypatch):
    change_manifest(copy, lambda m: m["libraries"].update(pyogrio="0.0.1"))
    write_zip(copy)

    def repacked(folder):
        book = folder / "tables.xlsx"
        with zipfile.ZipFile(book) as old:
            parts = {n: old.read(n) for n in old.namelist()}
        with zipfile.ZipFile(book, "w", zipfile.ZIP_STORED) as new:
            for name, data in parts.items():
                new.writestr(name, data)
        with sqlite3.connect(folder / "fields.gpkg") as base:
            base.execute("PRAGMA user_version = 99")

    handing(monkeypatch, made, repacked)
    assert digest_of(copy / "fields.gpkg") == digest_of(made[1] / "fields.gpkg")
    assert check_evidence(copy) == []
    # With the same versions the bytes count.
    assert len(check_evidence(made[1])) == 2

    def moved(folder):
        with sqlite3.connect(folder / "fields.gpkg") as base:
            # Triggers of the layer call functions that only a geographic library has.
            for (name,) in base.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'"):
                base.execute(f'DROP TRIGGER "{name}"')
            base.execute("UPDATE fields SET name = 'x'")

    handing(monkeypatch, made, moved)
    told = check_evidence(copy)
    assert any("fields.gpkg" in t for t in told)
    assert any("pyogrio 0.0.1 then" in t for t in told)


def test_copied_study_that_cannot_be_run_is_told(copy):
    path = copy / "inputs" / "fields.csv"
    path.write_text(path.read_text().replace("46.50", "946.50"))
    refile(copy)
    told = check_evidence(copy)
    assert any("copied study cannot be run" in t and "/tmp" not in t for t in told)


def test_study_named_that_cannot_be_run_is_an_error(made, tmp_path):
    with pytest.raises(InputError, match="no such file"):
        check_evidence(made[1], tmp_path / "none.toml")
