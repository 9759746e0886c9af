"""What holds for every archive reader."""

from __future__ import annotations

import gzip

import archive_samples as samples
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.archives import FORMATS, parse_archive
from climarisk.archives.text import text_lines
from climarisk.errors import ArchiveError, InputError
from climarisk.observations import COLUMNS

NAMES = sorted(FORMATS)


def test_formats_every_sample_is_there():
    assert set(samples.ALL) == set(FORMATS)
    assert all(f.version >= 1 and f.source for f in FORMATS.values())


@pytest.mark.parametrize("archive", NAMES)
def test_parse_sample_gives_canonical_table(archive):
    file = parse_archive(samples.ALL[archive](), archive, "a.txt")
    assert list(file.hours.columns) == list(COLUMNS)
    assert len(file.hours) > 0
    assert str(file.hours.index.tz) == "UTC"
    assert file.hours.index.is_monotonic_increasing and file.hours.index.is_unique
    assert file.source
    assert file.notes == ()


@pytest.mark.parametrize("archive", NAMES)
def test_parse_gzip_equals_plain(archive):
    data = samples.ALL[archive]()
    plain = parse_archive(data, archive, "a")
    half = len(data) // 2
    # Two members in one file, as rotated logs have them.
    packed = gzip.compress(data[:half]) + gzip.compress(data[half:])
    assert parse_archive(packed, archive, "a").hours.equals(plain.hours)


@pytest.mark.parametrize("archive", NAMES)
@pytest.mark.parametrize(
    "data", [b"", b"  \r\n\n", gzip.compress(b"")], ids=["none", "blank", "gz"]
)
def test_parse_empty_file_raises(archive, data):
    with pytest.raises(ArchiveError, match=r"a\.csv: the file is empty"):
        parse_archive(data, archive, "a.csv")


@pytest.mark.parametrize("archive", NAMES)
def test_parse_file_of_another_format_raises(archive):
    others = [make() for name, make in samples.ALL.items() if name != archive]
    for data in [*others, b"hello\nworld\n", b"\x00\x01\x02" * 50, "žluťoučký kůň".encode()]:
        with pytest.raises(ArchiveError, match=r"^a\.csv"):
            parse_archive(data, archive, "a.csv")


@pytest.mark.parametrize("archive", [name for name in NAMES if name != "isd-lite"])
def test_parse_header_without_data_raises(archive):
    make = samples.ALL[archive]
    with pytest.raises(ArchiveError, match="no line of data|not a file of the format"):
        parse_archive(make(rows=[]), archive, "a")


@pytest.mark.parametrize("archive", NAMES)
def test_parse_one_damaged_line_is_skipped_and_told(archive):
    data = samples.ALL[archive]()
    lines = data.rstrip(b"\n").split(b"\n")
    at = len(lines) - 2
    damaged = b"\n".join([*lines[:at], lines[at][: len(lines[at]) // 3], *lines[at + 1 :]])
    whole, file = parse_archive(data, archive, "a"), parse_archive(damaged, archive, "a")
    assert len(file.hours) == len(whole.hours) - 1
    ((severity, check, message),) = file.notes
    assert (severity, check) == ("caution", "damaged-lines")
    assert message.startswith("a: 1 of ") and message.endswith(f"line {at + 1}.")


@pytest.mark.parametrize("archive", NAMES)
def test_parse_number_that_is_none_is_a_damaged_line(archive):
    data = samples.ALL[archive]()
    first = parse_archive(data, archive, "a").hours
    good = {"inmet": b";23,1;", "epw": b",10.5,", "tmy3": b",-3,", "isd-lite": b"  -44 "}
    good |= {"lcd": b',"35",', "asos": b",59.00,", "ghcnh": b"|10.5|"}
    old = good[archive]
    assert old in data
    new = data.replace(old, old[:1] + b"1x!7" + old[-1:], 1)
    file = parse_archive(new, archive, "a")
    assert len(file.hours) == len(first) - 1
    assert [check for _, check, _ in file.notes] == ["damaged-lines"]


@pytest.mark.parametrize("archive", NAMES)
def test_parse_more_than_half_damaged_raises(archive):
    lines = samples.ALL[archive]().rstrip(b"\n").split(b"\n")
    data = b"\n".join([*lines, *[b"garbage;,|" * 3] * 30])
    with pytest.raises(ArchiveError, match=r"lines cannot be read as .*the first is line \d+"):
        parse_archive(data, archive, "a")


def test_parse_archive_unknown_name_names_the_nearest():
    with pytest.raises(InputError, match="did you mean 'isd-lite'"):
        parse_archive(b"x", "isd_lite", "a")


def test_text_lines_gzip_beyond_the_cap_raises():
    data = gzip.compress(b"0" * 5000)
    assert text_lines(data, "a", max_bytes=5000) == ["0" * 5000]
    with pytest.raises(ArchiveError, match="more than 4,999 bytes"):
        text_lines(data, "a", max_bytes=4999)
    with pytest.raises(ArchiveError, match="more than 9,999 bytes"):
        text_lines(data + data, "a", max_bytes=9999)


def test_text_lines_damaged_gzip_raises():
    data = gzip.compress(b"1 2 3\n" * 100)
    with pytest.raises(ArchiveError, match="end too early"):
        text_lines(data[:-9], "a")
    with pytest.raises(ArchiveError, match="damaged"):
        text_lines(data[:10] + b"\xff" * 30, "a")


def test_text_lines_every_line_end_and_mark_is_taken_off():
    assert text_lines(b"\xef\xbb\xbfa\r\nb\rc\nd", "a") == ["a", "b", "c", "d"]
    # NEL is a letter position of Latin-1 text, not a line end.
    assert text_lines(b"a\x85b\xe9", "a") == ["a\x85b\xe9"]


def test_read_absent_file_raises(tmp_path):
    from climarisk.archives.inmet import read_inmet

    for path in (tmp_path / "none.csv", tmp_path):
        with pytest.raises(ArchiveError, match="cannot be read"):
            read_inmet(path)


FRAGMENTS = st.sampled_from(
    [
        *(";", ",", "|", "\t", " ", "\n", "\r\n", '"', "#", "-9999", "99.9", "1e99", "-,5", "NaN"),
        *("LOCATION", "2020/01/01", "1/1/1999", "24:00", "0000 UTC", "2020-01-01T00:00", "s", "V"),
        *("2016 01 01 00 -44 -83 10256 260 67 4 -9999 -9999\n", "9" * 400, "é", "\u2028", "inf"),
    ]
)


@pytest.mark.parametrize("archive", NAMES)
@settings(max_examples=60, deadline=None)
@given(data=st.binary(max_size=300))
def test_parse_random_bytes_raises_only_archive_errors(archive, data):
    with pytest.raises(ArchiveError):
        parse_archive(data, archive, "a")


@pytest.mark.parametrize("archive", NAMES)
@settings(max_examples=100, deadline=None)
@given(tail=st.lists(FRAGMENTS, max_size=30), cut=st.integers(0, 2000))
def test_parse_sample_cut_and_followed_by_fragments_raises_only_archive_errors(archive, tail, cut):
    data = samples.ALL[archive]()[:cut] + "".join(tail).encode()
    try:
        file = parse_archive(data, archive, "a")
    except ArchiveError as error:
        assert str(error).startswith("a")
    else:
        assert file.hours.index.is_unique
