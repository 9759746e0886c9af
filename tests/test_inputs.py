"""Reading TOML and CSV: what is tolerated, and the sentence for what is not."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from climarisk.errors import InputError
from climarisk.inputs import (
    MAX_INPUT_BYTES,
    Identifier,
    Strict,
    Text,
    decode,
    load_toml,
    metres,
    nearest,
    one_of_units,
    read_bytes,
    read_table,
    repeated,
    sha256,
    validate,
)

TABLE = 'id,name,note\nA,"One, two",\nB,Zwei ß,x\n'


class Inner(Strict):
    depth_m: float


class Outer(Strict):
    id: Identifier
    title: Text = ""
    inner: list[Inner] = []


def table(tmp_path: Path, content: str | bytes):
    path = tmp_path / "table.csv"
    path.write_bytes(content.encode() if isinstance(content, str) else content)
    return read_table(path, ["id", "name"], ["note"])


@pytest.mark.parametrize(
    "content",
    [
        TABLE,
        "\ufeff" + TABLE,
        TABLE.replace("\n", "\r\n"),
        TABLE.replace("\n", "\r"),
        TABLE.rstrip("\n"),
        TABLE.replace("id,name,note", " id , name , note "),
    ],
    ids=["plain", "byte-order mark", "CRLF", "CR", "no last line end", "spaces in header"],
)
def test_a_table_reads_the_same_whatever_its_line_ends_and_marks(tmp_path, content):
    rows, problems = table(tmp_path, content)
    assert problems == []
    assert rows == [
        (2, {"id": "A", "name": "One, two", "note": None}),
        (3, {"id": "B", "name": "Zwei ß", "note": "x"}),
    ]


def test_blank_lines_are_skipped_and_line_numbers_stay_those_of_the_file(tmp_path):
    rows, problems = table(tmp_path, "id,name\n\n , \nA,x\n")
    assert problems == []
    assert [number for number, _ in rows] == [4]


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        ("", "the file is empty"),
        ("\n \n", "the file is empty"),
        ("id,name,note\n", "there is a header but no row"),
        ("id,name\nA\n", "line 2: 1 cells came where the header has 2"),
        ("id,name\nA,b,c\n", "line 2: 3 cells came where the header has 2"),
        ('id,name\nA,"b\n', "not a readable CSV file"),
        ('id,name\nA,"b"c\n', "not a readable CSV file"),
        (f"id,name\nA,{'x' * 200_000}\n", "not a readable CSV file"),
        ("id,nam\nA,b\n", "the column 'nam' is not known; did you mean 'name'?"),
        ("id\nA\n", "the column 'name' is missing"),
        ("id,name,name\nA,b,c\n", "the column 'name' comes twice"),
        ("id,name,\nA,b,\n", "the column '' is not known"),
        ("id;name;note\nA;b;c\n", "the columns are separated by ';'"),
    ],
)
def test_a_spoilt_table_gives_no_rows_for_it_and_names_the_file(tmp_path, content, sentence):
    rows, problems = table(tmp_path, content)
    assert rows == []
    assert any(sentence in p for p in problems)
    assert all(p.startswith(str(tmp_path / "table.csv")) for p in problems)


def test_every_damaged_row_is_told_not_only_the_first(tmp_path):
    rows, problems = table(tmp_path, "id,name\nA\nB,x\nC,y,z\n")
    assert [number for number, _ in rows] == [3]
    assert [p.split(": ")[0].rsplit(" ", 1)[1] for p in problems] == ["2", "4"]


@pytest.mark.parametrize(
    "content", ["id,näme\n".encode("latin-1"), "id,name\n".encode("utf-16")], ids=str
)
def test_text_that_is_not_utf8_is_refused_with_the_line(tmp_path, content):
    with pytest.raises(InputError, match=r"table\.csv, line 1: the text is not UTF-8"):
        table(tmp_path, content)


def test_the_line_of_the_first_bad_byte_is_counted():
    with pytest.raises(InputError, match=r"line 3: the text is not UTF-8 \(byte 4\)"):
        decode(b"a\nb\n\xff", Path("x.csv"))


def test_an_absent_file_a_folder_and_a_giant_are_refused(tmp_path):
    with pytest.raises(InputError, match="there is no such file"):
        read_bytes(tmp_path / "absent")
    with pytest.raises(InputError, match="cannot be read"):
        read_bytes(tmp_path)
    giant = tmp_path / "giant"
    with giant.open("wb") as stream:
        stream.truncate(MAX_INPUT_BYTES + 1)
    with pytest.raises(InputError, match="at most 50,000,000 are read"):
        read_bytes(giant)


def test_a_nul_in_a_path_is_refused_as_input(tmp_path):
    with pytest.raises(InputError):
        read_bytes(tmp_path / "a\0b")


def test_sha256_is_the_published_digest_of_abc():
    # FIPS 180-4 example "abc" (the digest from memory).
    assert sha256(b"abc") == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"


def toml(tmp_path: Path, content: str):
    path = tmp_path / "x.toml"
    path.write_text(content, encoding="utf-8", newline="")
    return load_toml(path)


def test_toml_reads_with_a_byte_order_mark_and_crlf(tmp_path):
    assert toml(tmp_path, "\ufeffa = 1\r\nb = [1, nan]\r\n")["a"] == 1


@pytest.mark.parametrize(
    ("content", "sentence"),
    [
        ("hello world", r"x\.toml: this is not valid TOML: .*line 1"),
        ("a = 1\na = 2\nb = 3\n", r"x\.toml: this is not valid TOML: .*line 2"),
        ("a = " + "[" * 5000 + "]" * 5000, r"x\.toml: the TOML is nested too deeply"),
    ],
    ids=["not TOML", "key twice", "nested"],
)
def test_bad_toml_is_one_sentence_with_the_place(tmp_path, content, sentence):
    with pytest.raises(InputError, match=sentence) as caught:
        toml(tmp_path, content)
    assert len(caught.value.problems) == 1


def test_a_number_of_5000_digits_is_refused_as_input(tmp_path):
    with pytest.raises(InputError):
        toml(tmp_path, "a = " + "9" * 5000)


def test_nearest_names_the_closest_else_all_of_them():
    assert nearest("radius_m", ["title", "radius_km"]) == "did you mean 'radius_km'?"
    assert nearest("zzz", ["title", "seed"]) == "known: title, seed"
    assert nearest("zzz", []) == "known: none"
    assert nearest("zzz", [f"k{i:02d}" for i in range(23)]).endswith("k19 and 3 more")


@given(st.text(max_size=40), st.lists(st.text(max_size=10), max_size=30))
def test_nearest_always_gives_a_hint(word, known):
    assert nearest(word, known).startswith(("did you mean ", "known: "))


@pytest.mark.parametrize(
    ("row", "expected"),
    [
        ({"top_m": 100.0}, 100.0),
        # International foot 0.3048 m (1959 agreement).
        ({"top_ft": 1000.0}, 304.8),
        ({"top_m": None, "top_ft": 10.0}, 3.048),
        ({}, None),
        ({"top_m": 0.0}, 0.0),
    ],
)
def test_metres_come_from_either_unit(row, expected):
    assert metres(row, "top") == pytest.approx(expected, abs=1e-12)


def test_metres_refuses_both_units():
    with pytest.raises(ValueError, match="top_m and top_ft are both given"):
        metres({"top_m": 1.0, "top_ft": 1.0}, "top")


def test_exactly_one_unit_column_must_be_there():
    path = Path("f.csv")
    names = ("z_m", "z_ft")
    assert one_of_units(names, ["id", "z_m"], path, "height") == []
    (none,) = one_of_units(names, ["id"], path, "height")
    (both,) = one_of_units(names, ["z_ft", "z_m"], path, "height")
    assert "exactly one of z_m and z_ft must give the height; none is there" in none
    assert "z_m and z_ft are there" in both


def test_repeated_gives_each_repeat_once_in_order():
    assert repeated("abcbaab") == ["b", "a"]
    assert repeated("abc") == []


@pytest.mark.parametrize("bad", ["", " ", "a b", "a\tb", "x" * 81, "a\nb", "a\0b", "a\x7fb"])
def test_an_identifier_is_one_printable_word(bad):
    problems: list[str] = []
    assert validate(Outer, {"id": bad}, "f", problems) is None
    assert len(problems) == 1
    assert problems[0].startswith("f: 'id' is ")


@pytest.mark.parametrize("formula", ["=1+1", "+A1", "-A1", "@SUM"])
def test_an_identifier_that_a_spreadsheet_would_run_is_refused(formula):
    problems: list[str] = []
    assert validate(Outer, {"id": formula}, "f", problems) is None
    assert "a spreadsheet takes for a formula" in problems[0]


@pytest.mark.parametrize("good", ["A", "x" * 80, "a,b", "../../up", "{{7*7}}", "Ä-1", "1=1"])
def test_an_identifier_may_hold_any_other_sign(good):
    problems: list[str] = []
    checked = validate(Outer, {"id": f"  {good} "}, "f", problems)
    assert problems == []
    assert checked is not None
    assert checked.id == good


@pytest.mark.parametrize("bad", ["a\nb", "a\x1bb", "x" * 501])
def test_free_text_is_one_line_of_bounded_length(bad):
    problems: list[str] = []
    assert validate(Outer, {"id": "a", "title": bad}, "f", problems) is None
    assert len(problems) == 1


def test_an_unknown_key_names_the_nearest_known_one_at_its_own_depth():
    problems: list[str] = []
    validate(Outer, {"id": "a", "titel": "", "inner": [{"depth_ft": 1}]}, "f.toml", problems)
    assert problems == [
        "f.toml: 'inner.0.depth_m' is missing; add it.",
        "f.toml: 'inner.0.depth_ft' is not known here; did you mean 'depth_m'?",
        "f.toml: 'titel' is not known here; did you mean 'title'?",
    ]


def test_a_long_offending_value_is_cut_in_the_sentence():
    problems: list[str] = []
    validate(Outer, {"id": ["x" * 1000]}, "f", problems)
    assert len(problems[0]) < 200


def test_checked_input_cannot_be_changed_and_holds_no_nan():
    checked = Outer(id="a")
    with pytest.raises(ValidationError):
        checked.id = "b"
    with pytest.raises(ValidationError):
        Inner(depth_m=float("nan"))
