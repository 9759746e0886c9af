"""The store of parsed hours: nothing is read twice, nothing stale or damaged is used."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from climarisk import weather
from climarisk.errors import StoreError
from climarisk.observations import COLUMNS, ArchiveFile
from climarisk.pipeline import run_study
from climarisk.store import ReadOnlyStore, Store, default_folder, key_of

KEY = key_of("a")


def entry(**more) -> ArchiveFile:
    index = pd.date_range("2021-01-01", periods=4, freq="h", tz="UTC", name="time", unit="s")
    hours = pd.DataFrame({c: np.arange(4.0) + i for i, c in enumerate(COLUMNS)}, index=index)
    hours.iloc[1, 2] = np.nan
    notes = (("note", "check", "said “so” {{7*7}}"),)
    return ArchiveFile(hours, "source", "S1", None, 46.5, None, 0.1 + 0.2, True, notes, **more)


def entries(folder: Path) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in folder.rglob("*") if p.is_file()}


@pytest.fixture
def reads(monkeypatch) -> list[str]:
    """Names of the archive files parsed as text, as they are parsed."""
    seen: list[str] = []
    parse = weather.parse_archive

    def counted(data, archive, name, **more):
        seen.append(name)
        return parse(data, archive, name, **more)

    monkeypatch.setattr(weather, "parse_archive", counted)
    return seen


def run(study, folder: Path) -> tuple[pd.DataFrame, Store]:
    store = Store(folder)
    return run_study(study.file, store).distributions_hourly, store


# ---------------------------------------------------------------- one entry


def assert_same_hours(back: ArchiveFile, put: ArchiveFile) -> None:
    """The same instants and values; the resolution of the index is another test's matter."""
    table = back.hours.set_axis(back.hours.index.as_unit("s"), axis=0)
    pd.testing.assert_frame_equal(table, put.hours, check_freq=False)


def test_an_entry_comes_back_equal(store_folder):
    store = Store(store_folder)
    store.put(KEY, entry())
    back = store.get(KEY)
    assert_same_hours(back, entry())
    for name in ("source", "station_id", "station_name", "latitude", "longitude"):
        assert getattr(back, name) == getattr(entry(), name)
    assert (back.elevation_m, back.typical_year, back.notes) == (0.1 + 0.2, True, entry().notes)
    assert store.damaged == []


def test_an_entry_keeps_the_resolution_of_its_index(store_folder):
    Store(store_folder).put(KEY, entry())
    assert Store(store_folder).get(KEY).hours.index.unit == entry().hours.index.unit == "s"


def test_an_entry_without_hours_comes_back_empty(store_folder):
    store = Store(store_folder)
    whole = entry()
    store.put(KEY, ArchiveFile(whole.hours.iloc[:0], "source"))
    back = store.get(KEY)
    assert len(back.hours) == 0
    assert list(back.hours.columns) == list(COLUMNS)
    assert str(back.hours.index.tz) == "UTC"


def test_an_absent_entry_is_none_and_makes_no_folder(store_folder):
    store = Store(store_folder)
    assert store.get(KEY) is None
    assert store.damaged == []
    assert not store_folder.exists()


def test_keys_differ_by_every_part_and_by_where_it_is_cut():
    keys = {key_of("a"), key_of("b"), key_of("a", ""), key_of("", "a"), key_of("a", "b"), key_of()}
    assert len(keys) == 6
    assert key_of("ab", "c") != key_of("a", "bc")
    assert all(len(k) == 64 and set(k) <= set("0123456789abcdef") for k in keys)


def truncated(data: bytes) -> bytes:
    return data[: len(data) // 2]


def flipped(data: bytes) -> bytes:
    middle = len(data) // 3
    return data[:middle] + bytes([data[middle] ^ 0xFF]) + data[middle + 1 :]


@pytest.mark.parametrize(
    "damage",
    [truncated, flipped, lambda data: b"", lambda data: b"PAR1" * 20, lambda data: data[:-1]],
)
def test_a_damaged_entry_reads_as_absent_and_is_told(store_folder, damage):
    store = Store(store_folder)
    store.put(KEY, entry())
    (path,) = store_folder.rglob("*.parquet")
    path.write_bytes(damage(path.read_bytes()))
    assert store.get(KEY) is None
    assert store.damaged == [KEY]
    store.put(KEY, entry())
    assert store.get(KEY) is not None


def test_any_single_flipped_byte_is_seen_or_harmless(store_folder):
    store = Store(store_folder)
    store.put(KEY, entry())
    (path,) = store_folder.rglob("*.parquet")
    whole = path.read_bytes()
    for position in range(0, len(whole), 97):
        path.write_bytes(whole[:position] + bytes([whole[position] ^ 1]) + whole[position + 1 :])
        back = store.get(KEY)
        if back is not None:
            assert_same_hours(back, entry())


def test_an_entry_is_parquet_and_nothing_is_pickled(store_folder):
    Store(store_folder).put(KEY, entry())
    (content,) = entries(store_folder).values()
    # Apache Parquet format: the file begins and ends with the magic bytes PAR1.
    assert content[:4] == content[-4:] == b"PAR1"
    assert b"pickle" not in content


def test_writing_leaves_no_half_file(store_folder, monkeypatch):
    def full(*_, **__):
        raise OSError(28, "No space left on device")

    store = Store(store_folder)
    monkeypatch.setattr(Path, "replace", full)
    with pytest.raises(StoreError, match="cannot be written .No space left on device"):
        store.put(KEY, entry())
    assert entries(store_folder) == {}


def test_a_file_in_place_of_the_folder_is_a_store_error(tmp_path):
    (tmp_path / "f").write_text("x")
    with pytest.raises(StoreError, match="the store cannot be written"):
        Store(tmp_path / "f").put(KEY, entry())


def test_the_read_only_store_looks_up_and_keeps_nothing(store_folder):
    ReadOnlyStore(store_folder).put(KEY, entry())
    assert not store_folder.exists()
    Store(store_folder).put(KEY, entry())
    assert ReadOnlyStore(store_folder).get(KEY) is not None


def test_the_folder_follows_the_environment(monkeypatch, tmp_path):
    monkeypatch.setenv("CLIMARISK_STORE", str(tmp_path / "x"))
    assert default_folder() == tmp_path / "x"
    monkeypatch.delenv("CLIMARISK_STORE")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    assert "climarisk" in default_folder().parts


# ---------------------------------------------------------------- through a run


def test_a_second_run_reads_no_text_and_gives_the_same_figures(
    study_folder, store_folder, monkeypatch
):
    study = study_folder("files")
    first, _ = run(study, store_folder)
    before = entries(store_folder)
    assert len(before) == 3, "two yearly files and one mapped file"

    def refuse(*_, **__):
        raise AssertionError("a text was parsed")

    monkeypatch.setattr(weather, "parse_archive", refuse)
    second, _ = run(study, store_folder)
    pd.testing.assert_frame_equal(first, second)
    assert entries(store_folder) == before


def test_age_and_place_of_an_archive_do_not_matter(study_folder, store_folder, reads):
    study = study_folder("files")
    run(study, store_folder)
    reads.clear()
    for path in (study.folder / "archive").iterdir():
        os.utime(path, (1e9, 1e9))
    shutil.copytree(study.folder, study.folder.parent / "moved")
    shutil.move(study.folder / "archive", study.folder / "elsewhere")
    study.change("stations.csv", "archive/vale", "elsewhere/vale")
    study.change("stations.csv", "archive/pass", "elsewhere/pass")
    run(study, store_folder)
    run(type(study)(study.folder.parent / "moved"), store_folder)
    assert reads == []


def test_one_changed_byte_is_read_anew(study_folder, store_folder, reads):
    study = study_folder("files")
    run(study, store_folder)
    reads.clear()
    study.change("archive/vale_2022.csv", "2022-07-01 12:00,", "2022-07-01 12:01,")
    run(study, store_folder)
    assert reads == ["vale_2022.csv"]


@pytest.mark.parametrize(
    ("old", "new"), [('zone = "UTC"', 'zone = "+01:00"'), ("[-9999]", "[-9999, 1]")]
)
def test_a_changed_mapping_is_read_anew(study_folder, store_folder, reads, old, new):
    study = study_folder("files")
    run(study, store_folder)
    reads.clear()
    study.change("mapping.toml", old, new)
    run(study, store_folder)
    assert reads == ["pass.txt"]


def test_a_damaged_entry_is_rebuilt_and_the_figures_are_the_same(study_folder, store_folder, reads):
    study = study_folder("files")
    first, _ = run(study, store_folder)
    whole = entries(store_folder)
    reads.clear()
    damaged = sorted(store_folder.rglob("*.parquet"))[0]
    damaged.write_bytes(flipped(damaged.read_bytes()))
    second, store = run(study, store_folder)
    assert store.damaged == [damaged.stem]
    assert len(reads) == 1
    pd.testing.assert_frame_equal(first, second)
    assert entries(store_folder) == whole


def test_without_a_store_nothing_is_kept(study_folder, store_folder):
    run_study(study_folder("files").file)
    assert not store_folder.exists()
