"""The store of parsed hours: one Parquet file per archive file, keyed by content.

The key covers the file's bytes, the format, the version of its reader and the column
mapping, so an entry never goes stale.  Entries are written to a temporary name and moved
into place; pages carry checksums; a damaged entry reads as absent and is told.
"""

from __future__ import annotations

import hashlib
import json
import os
import tempfile
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from climarisk.errors import StoreError
from climarisk.observations import COLUMNS, ArchiveFile

#: Raised when the layout of an entry changes; older entries are then not found.
LAYOUT = 1
_META = b"climarisk"
_META_FIELDS = (
    "source",
    "station_id",
    "station_name",
    "latitude",
    "longitude",
    "elevation_m",
    "typical_year",
)


def default_folder() -> Path:
    """The user's cache folder for climarisk, or ``CLIMARISK_STORE`` where it is set."""
    from platformdirs import user_cache_path

    override = os.environ.get("CLIMARISK_STORE")
    return Path(override) if override else user_cache_path("climarisk") / "hours"


def key_of(*parts: str) -> str:
    """The key of an entry made from the parts that shaped it."""
    return hashlib.sha256(json.dumps([LAYOUT, *parts]).encode()).hexdigest()


@dataclass
class Store:
    """A folder of parsed archive files.

    Parameters
    ----------
    folder : Path
        Made when the first entry is written.
    damaged : list of str
        Keys of the entries found damaged, filled as they are met.
    """

    folder: Path
    damaged: list[str] = field(default_factory=list)

    def _path(self, key: str, suffix: str = ".parquet") -> Path:
        return self.folder / key[:2] / f"{key}{suffix}"

    def get(self, key: str) -> ArchiveFile | None:
        """The entry of `key`, or None if there is none or it is damaged."""
        import pyarrow.parquet as pq

        path = self._path(key)
        if not path.is_file():
            return None
        try:
            table = pq.read_table(path, page_checksum_verification=True)
            meta = json.loads(table.schema.metadata[_META])
            hours = table.to_pandas().set_index("time")
            hours.index = hours.index.as_unit("s")
            if list(hours.columns) != list(COLUMNS) or meta.pop("rows") != len(hours):
                raise ValueError("the entry has other columns or rows than it says")
            notes = tuple(tuple(note) for note in meta.pop("notes"))
            return ArchiveFile(hours=hours, notes=notes, **meta)
        except Exception:  # any damage, whatever the library calls it
            self.damaged.append(key)
            return None

    def put(self, key: str, entry: ArchiveFile) -> None:
        """Write an entry; an entry of the same key is replaced.

        Raises
        ------
        StoreError
            The folder cannot be written.
        """
        import pyarrow as pa
        import pyarrow.parquet as pq

        meta = {name: getattr(entry, name) for name in _META_FIELDS}
        meta |= {"notes": [list(note) for note in entry.notes], "rows": len(entry.hours)}
        table = pa.Table.from_pandas(entry.hours.reset_index(), preserve_index=False)
        table = table.replace_schema_metadata(
            {**(table.schema.metadata or {}), _META: json.dumps(meta, sort_keys=True).encode()}
        )
        self._write(
            self._path(key),
            lambda name: pq.write_table(table, name, compression="zstd", write_page_checksum=True),
        )

    def get_list(self, key: str) -> list[dict[str, Any]] | None:
        """A list kept by `put_list`, or None if there is none or it is damaged."""
        path = self._path(key, ".json")
        if not path.is_file():
            return None
        try:
            entry = json.loads(path.read_text(encoding="utf-8"))
            if entry["sha256"] != key_of(json.dumps(entry["items"], sort_keys=True)):
                raise ValueError("the entry does not fit its checksum")
            return list(entry["items"])
        except Exception:  # any damage
            self.damaged.append(key)
            return None

    def put_list(self, key: str, items: list[dict[str, Any]]) -> None:
        """Keep a list of plain values.

        Raises
        ------
        StoreError
            The folder cannot be written.
        """
        entry = {"sha256": key_of(json.dumps(items, sort_keys=True)), "items": items}
        text = json.dumps(entry, sort_keys=True)
        self._write(
            self._path(key, ".json"), lambda name: Path(name).write_text(text, encoding="utf-8")
        )

    def _write(self, path: Path, write: Callable[[str], Any]) -> None:
        """Write a file under a temporary name and move it into place."""
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            handle, name = tempfile.mkstemp(dir=path.parent, suffix=".part")
            os.close(handle)
            try:
                write(name)
                Path(name).replace(path)
            finally:
                Path(name).unlink(missing_ok=True)
        except OSError as error:
            raise StoreError(
                f"{self.folder}: the store cannot be written ({error.strerror or error}); "
                "free some space or choose another folder with --store."
            ) from None


class ReadOnlyStore(Store):
    """A store that is looked up and never written."""

    def put(self, key: str, entry: ArchiveFile) -> None:
        """Keep nothing."""

    def put_list(self, key: str, items: list[dict[str, Any]]) -> None:
        """Keep nothing."""
