"""Reading the text files of a study: TOML and CSV, every problem told as a sentence.

Readers here collect problems instead of stopping at the first; whoever reads the study
raises them together.
"""

from __future__ import annotations

import csv
import difflib
import hashlib
import io
import tomllib
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Annotated, Any, TypeVar

from pydantic import AfterValidator, BaseModel, ConfigDict, ValidationError

from climarisk.errors import InputError
from climarisk.units import METRES_PER_FOOT

#: Input files larger than this are refused: no study file comes near it.
MAX_INPUT_BYTES = 50_000_000


class Strict(BaseModel):
    """Base of the TOML models: unknown keys are errors, values are never coerced."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False, strict=True)


class Row(BaseModel):
    """Base of the CSV rows: unknown columns are errors, numbers are read from text."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False)


def _printable(text: str) -> str:
    if any(ord(c) < 32 or ord(c) == 127 for c in text):
        raise ValueError("holds a control character; use plain text on one line")
    if len(text) > 500:
        raise ValueError(f"is {len(text)} characters long; at most 500 are allowed")
    return text.strip()


def _name(text: str) -> str:
    text = _printable(text)
    if not text:
        raise ValueError("is empty; give it a name")
    return text


def _identifier(text: str) -> str:
    text = _name(text)
    if any(c.isspace() for c in text) or len(text) > 80:
        raise ValueError("must have no spaces and at most 80 characters")
    return _label(text)


def _label(text: str) -> str:
    text = _name(text)
    if text[0] in "=+-@":
        raise ValueError("begins with = + - or @, which a spreadsheet takes for a formula")
    return text


#: One line of free text.
Text = Annotated[str, AfterValidator(_printable)]
#: One line of text that is not empty.
Name = Annotated[str, AfterValidator(_name)]
#: A name that stands in the CSV files.
Label = Annotated[str, AfterValidator(_label)]
#: An identifier: one word.
Identifier = Annotated[str, AfterValidator(_identifier)]

M = TypeVar("M", bound=BaseModel)


def read_bytes(path: Path) -> bytes:
    """The bytes of an input file.

    Raises
    ------
    InputError
        The file is absent, unreadable or larger than `MAX_INPUT_BYTES`.
    """
    try:
        if path.exists() and not path.is_file():
            raise InputError(f"{path}: the file cannot be read (it is no regular file).")
        size = path.stat().st_size
        if size > MAX_INPUT_BYTES:
            raise InputError(
                f"{path}: the file has {size:,} bytes; at most {MAX_INPUT_BYTES:,} are read. "
                "Check that it is the file you mean."
            )
        return path.read_bytes()
    except FileNotFoundError:
        raise InputError(f"{path}: there is no such file; check the name and the folder.") from None
    except OSError as error:
        raise InputError(f"{path}: the file cannot be read ({error.strerror or error}).") from None
    except ValueError as error:  # a NUL in the name
        raise InputError(f"{str(path)!r}: this cannot be a file name ({error}).") from None


def sha256(data: bytes) -> str:
    """Hexadecimal SHA-256 of `data`."""
    return hashlib.sha256(data).hexdigest()


def decode(data: bytes, path: Path) -> str:
    """`data` as UTF-8 text, a byte-order mark removed.

    Raises
    ------
    InputError
        The bytes are not UTF-8.
    """
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputError(
            f"{path}, line {line}: the text is not UTF-8 (byte {error.start}); "
            "save the file as UTF-8."
        ) from None


def load_toml(path: Path) -> dict[str, Any]:
    """The content of a TOML file.

    Raises
    ------
    InputError
        The file is absent, not UTF-8 or not TOML.
    """
    try:
        return tomllib.loads(decode(read_bytes(path), path))
    except ValueError as error:  # TOMLDecodeError among them
        raise InputError(f"{path}: this is not valid TOML: {error}.") from None
    except RecursionError:
        raise InputError(f"{path}: the TOML is nested too deeply; see the README.") from None


def nearest(word: str, known: Iterable[str]) -> str:
    """A hint naming the nearest known word, or all of them."""
    known = [str(k) for k in known]
    close = difflib.get_close_matches(str(word), known, n=1, cutoff=0.5)
    if close:
        return f"did you mean {close[0]!r}?"
    if len(known) > 20:
        return f"known: {', '.join(known[:20])} and {len(known) - 20} more"
    return f"known: {', '.join(known) if known else 'none'}"


def _keys_at(model: type[BaseModel], location: Sequence[Any]) -> list[str]:
    """Keys allowed at a place inside nested models, for the hint on an unknown key."""
    current: Any = model
    for step in location:
        fields = getattr(current, "model_fields", None)
        if isinstance(step, int) or not fields:
            continue
        by_key = {(f.alias or name): f.annotation for name, f in fields.items()}
        current = _model_in(by_key.get(step))
    fields = getattr(current, "model_fields", {})
    return [f.alias or name for name, f in fields.items()]


def _model_in(annotation: Any) -> Any:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for argument in getattr(annotation, "__args__", ()):
        found = _model_in(argument)
        if found is not None:
            return found
    return None


def explain(error: ValidationError, model: type[BaseModel], where: str) -> list[str]:
    """The problems of a validation as sentences that start with `where`."""
    sentences = []
    for item in error.errors():
        place = ".".join(str(step) for step in item["loc"])
        kind, message = item["type"], item["msg"].removeprefix("Value error, ")
        if kind == "extra_forbidden":
            hint = nearest(str(item["loc"][-1]), _keys_at(model, item["loc"][:-1]))
            sentences.append(f"{where}: {place!r} is not known here; {hint}")
        elif kind == "missing":
            sentences.append(f"{where}: {place!r} is missing; add it.")
        elif not place:
            sentences.append(f"{where}: {message}")
        else:
            came = repr(item["input"])
            came = came if len(came) <= 60 else came[:57] + "..."
            sentences.append(f"{where}: {place!r} is {came}: {message}")
    return sentences


def validate(model: type[M], data: Mapping[str, Any], where: str, problems: list[str]) -> M | None:
    """`data` as a `model`, or None with the problems appended to `problems`."""
    try:
        return model.model_validate(data)
    except ValidationError as error:
        problems.extend(explain(error, model, where))
        return None


def metres(row: Mapping[str, Any], name: str) -> float | None:
    """The length `name` of a row in metres, from ``name_m`` or ``name_ft``; None if neither.

    Raises
    ------
    ValueError
        Both are given.
    """
    in_metres, in_feet = row.get(f"{name}_m"), row.get(f"{name}_ft")
    if in_metres is not None and in_feet is not None:
        raise ValueError(f"{name}_m and {name}_ft are both given; give exactly one of them")
    return in_metres if in_feet is None else in_feet * METRES_PER_FOOT


def one_of_units(names: Iterable[str], columns: Iterable[str], path: Path, name: str) -> list[str]:
    """Problems with a quantity whose column name carries the unit: exactly one must be there."""
    present = [c for c in names if c in set(columns)]
    if len(present) == 1:
        return []
    came = "none is there" if not present else f"{' and '.join(present)} are there"
    return [f"{path}: exactly one of {' and '.join(names)} must give the {name}; {came}."]


def read_table(
    path: Path, required: Sequence[str], optional: Sequence[str]
) -> tuple[list[tuple[int, dict[str, str | None]]], list[str]]:
    """Rows of a CSV file with a header: ``(line number, {column: text or None})``.

    Empty cells are None.  Returns the rows and the problems found; no rows come back with
    a problem in the header.

    Raises
    ------
    InputError
        The file is absent or not text.
    """
    text = decode(read_bytes(path), path)
    try:
        reader = csv.reader(io.StringIO(text, newline=""), strict=True)
        lines = [(reader.line_num, cells) for cells in reader if any(c.strip() for c in cells)]
    except csv.Error as error:
        return [], [f"{path}: this is not a readable CSV file ({error}); check the quotes."]
    if not lines:
        return [], [f"{path}: the file is empty; a header line and one row at least are needed."]
    header = [c.strip() for c in lines[0][1]]
    problems = _header_problems(header, path, required, optional)
    if problems:
        return [], problems
    rows: list[tuple[int, dict[str, str | None]]] = []
    for number, cells in lines[1:]:
        if len(cells) != len(header):
            problems.append(
                f"{path}, line {number}: {len(cells)} cells came where the header has "
                f"{len(header)}; put text that holds a comma in quotes."
            )
            continue
        rows.append((number, {k: (v.strip() or None) for k, v in zip(header, cells, strict=True)}))
    if not rows and not problems:
        problems.append(f"{path}: there is a header but no row; add one row at least.")
    return rows, problems


def _header_problems(
    header: list[str], path: Path, required: Sequence[str], optional: Sequence[str]
) -> list[str]:
    known = [*required, *optional]
    if len(header) == 1 and header[0].count(";") >= 2:
        return [f"{path}: the columns are separated by ';'; separate them by commas."]
    problems = [
        f"{path}: the column {c!r} is not known; {nearest(c, known)}"
        for c in header
        if c not in known
    ]
    problems += [
        f"{path}: the column {c!r} is missing; add it." for c in required if c not in header
    ]
    problems += [
        f"{path}: the column {c!r} comes twice; keep one."
        for c in sorted({c for c in header if header.count(c) > 1})
    ]
    return problems


def matching(folder: Path, pattern: str) -> list[Path]:
    """Files in or beside a folder that fit a pattern, sorted; a literal name goes first.

    Raises
    ------
    ValueError
        The text cannot be a pattern.
    """
    try:
        asked = Path(pattern)
        if pattern and (folder / asked).is_file():
            return [folder / asked]
        base = Path(asked.anchor) if asked.is_absolute() else folder
        parts = asked.parts[1:] if asked.is_absolute() else asked.parts
        fixed = next((i for i, part in enumerate(parts) if any(c in part for c in "*?[")), None)
        if fixed is None:
            return []
        found = base.joinpath(*parts[:fixed]).glob(str(Path(*parts[fixed:])))
        return sorted(p for p in found if p.is_file())
    except (OSError, ValueError, IndexError, NotImplementedError) as error:
        raise ValueError(f"{pattern[:60]!r} is no usable file pattern ({error})") from None


def repeated(values: Iterable[str]) -> list[str]:
    """The values that come more than once, in order of their first repeat."""
    seen: set[str] = set()
    twice: list[str] = []
    for value in values:
        if value in seen and value not in twice:
            twice.append(value)
        seen.add(value)
    return twice
