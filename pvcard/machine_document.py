"""The text of a machine description: from bytes to TOML tables, and back to the line of a key."""

from __future__ import annotations

import hashlib
import re
import tomllib
from dataclasses import dataclass, field
from pathlib import Path as FilePath
from typing import Any

from pvcard.errors import MachineError
from pvcard.machine_checks import Path

_HEADER = re.compile(r"^\s*(\[\[?)\s*([^\[\]]+?)\s*\]\]?\s*(#.*)?$")
_KEY = re.compile(r"""^\s*(["']?[\w. -]+?["']?)\s*=""")


@dataclass
class Document:
    """One description while it is being read; `notes` grows with what the user should know."""

    file: str
    text: str
    sha256: str
    data: dict[str, Any]
    notes: list[str] = field(default_factory=list)

    def at(self, path: Path) -> Any:
        """What stands at a path, None where there is nothing."""
        found: Any = self.data
        for step in path:
            try:
                found = found[step]
            except (KeyError, IndexError, TypeError):
                return None
        return found

    def place(self, path: Path) -> str:
        """Line and name of a key, as a person would say them."""
        words: list[str] = []
        for index, step in enumerate(path):
            if isinstance(step, int):
                name = self.at((*path[: index + 1], "name"))
                number = self.at((*path[: index + 1], "number"))
                label = name if isinstance(name, str) and name.strip() else number
                words[-1] += f" {label if label is not None else f'number {step + 1}'}:"
            else:
                words.append(step if not words or words[-1].endswith(":") else f".{step}")
        text = "".join(
            f" {word}" if i and not word.startswith(".") else word for i, word in enumerate(words)
        )
        line = line_of(self.text, path)
        return f"line {line}, {text.rstrip(':')}" if line else text.rstrip(":")

    def error(
        self,
        path: Path,
        problem: str,
        *,
        found: str | None = None,
        expected: str | None = None,
        advice: str | None = None,
    ) -> MachineError:
        """Return an error that names the file, the line and the key."""
        return MachineError(
            problem,
            file=self.file,
            place=self.place(path),
            found=found,
            expected=expected,
            advice=advice,
        )


def line_of(text: str, path: Path) -> int | None:
    """Line in which a key stands, or else the header of the table that should hold it.

    Parameters
    ----------
    text : TOML
    path : keys and, for arrays of tables, indices: ("cylinder", 0, "bore")

    Returns
    -------
    line : counted from 1; None where neither is seen
    """
    counts: dict[tuple[str | int, ...], int] = {}
    table: Path = ()
    best: tuple[int, int] | None = None
    for number, line in enumerate(text.splitlines(), start=1):
        header = _HEADER.match(line)
        if header:
            table = _table_path(header.group(2), header.group(1) == "[[", counts)
            here = table
        else:
            key = _KEY.match(line)
            if not key:
                continue
            here = (*table, *(part.strip(" \"'") for part in key.group(1).split(".")))
        depth = min(len(here), len(path))
        if path[:depth] == here[:depth] and depth > (best[1] if best else 0):
            best = (number, depth)
    return best[0] if best else None


def _table_path(name: str, several: bool, counts: dict[Path, int]) -> Path:
    path: Path = ()
    parts = [part.strip(" \"'") for part in name.split(".")]
    for index, part in enumerate(parts):
        path = (*path, part)
        if several and index == len(parts) - 1:
            counts[path] = counts.get(path, -1) + 1
        if path in counts:
            path = (*path, counts[path])
    return path


def load_document(path: str | FilePath) -> Document:
    """Read a file into TOML tables.

    Parameters
    ----------
    path : UTF-8 with or without a byte-order mark, Latin-1 or UTF-16

    Returns
    -------
    document : nothing in it is checked yet
    """
    file = FilePath(path)
    if file.is_dir():
        raise MachineError(
            "this is a folder, not a machine description",
            file=str(path),
            expected="a TOML file such as machine.toml",
        )
    try:
        raw = file.read_bytes()
    except FileNotFoundError:
        raise MachineError(
            "there is no such file",
            file=str(path),
            expected="a machine description such as machine.toml",
            advice=_neighbours(file),
        ) from None
    except OSError as problem:
        raise MachineError(
            f"the file cannot be read ({problem.strerror})", file=str(path)
        ) from None
    return parse_document(_decoded(raw, str(path)), str(path), hashlib.sha256(raw).hexdigest())


def parse_document(text: str, file: str, sha256: str = "") -> Document:
    """Return the TOML tables of a text.

    Parameters
    ----------
    text : TOML
    file : named in errors
    sha256 : of the bytes read; without it that of the text in UTF-8

    Returns
    -------
    document : nothing in it is checked yet
    """
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as problem:
        raise _syntax_error(problem, text, file) from None
    except RecursionError:
        raise MachineError("the tables are nested too deeply", file=file) from None
    digest = sha256 or hashlib.sha256(text.encode()).hexdigest()
    return Document(file=file, text=text, sha256=digest, data=data)


def _neighbours(file: FilePath) -> str | None:
    try:
        names = sorted(other.name for other in file.parent.glob("*.toml"))[:5]
    except OSError:
        return None
    return f"In that folder there is {', '.join(names)}" if names else None


def _decoded(raw: bytes, file: str) -> str:
    if raw.startswith((b"\xff\xfe", b"\xfe\xff")):
        return raw.decode("utf-16", errors="replace").replace("\r\n", "\n")
    if b"\x00" in raw:
        raise MachineError(
            "this is not a text file", file=file, expected="a TOML file such as machine.toml"
        )
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = raw.decode("latin-1")
    return text.replace("\r\n", "\n").replace("\r", "\n")


def _syntax_error(problem: tomllib.TOMLDecodeError, text: str, file: str) -> MachineError:
    message = str(problem)
    position = re.search(r"\(at (line (\d+), column \d+|end of document)\)", message)
    place, found, advice = None, None, None
    if position:
        place = position.group(1)
        message = message[: position.start()].strip()
    lines = text.splitlines()
    if position and position.group(2) and int(position.group(2)) <= len(lines):
        found = repr(lines[int(position.group(2)) - 1].strip()[:80])
    if not re.search(r"^\s*\[", text, re.MULTILINE):
        advice = (
            "It holds no [machine] table. Was the export given instead of the machine description?"
        )
    elif found and re.search(r"=\s*[\d.+-]+\s*[A-Za-z%]", found):
        advice = 'A value with a unit is written in quotes, for example bore = "280 mm"'
    elif "overwrite" in message or "twice" in message or "Cannot declare" in message:
        advice = (
            "The key or table stands in the file twice; several cylinders are written [[cylinder]]"
        )
    elif found and "=" in found and found.count('"') % 2:
        advice = "A quotation mark is missing"
    return MachineError(
        f"not valid TOML: {message[:1].lower()}{message[1:]}",
        file=file,
        place=place,
        found=found,
        advice=advice,
    )
