"""From the bytes of a coordinate file to what the gemmi library makes of them."""

import gzip
import hashlib
import zlib
from dataclasses import dataclass
from pathlib import Path

import gemmi

from structmap.errors import (
    CoordinateFormatError,
    FileProblemError,
    NoPolymerError,
    UnknownModelError,
)

GZIP_START = b"\x1f\x8b"
WANTED = "give an mmCIF, PDB or mmJSON file"


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class ParsedFile:
    """A coordinate file after parsing.

    Attributes
    ----------
    path : Path
        Where it lies.
    sha256 : str
        SHA-256 of its bytes on disk.
    text : str
        Its text, unpacked.
    format : gemmi.CoorFormat
        What it was read as.
    content : gemmi.Structure
        With entities and subchains set up.
    """

    path: Path
    sha256: str
    text: str
    format: gemmi.CoorFormat
    content: gemmi.Structure


def parse_file(path: Path) -> ParsedFile:
    """Read and parse a coordinate file.

    Parameters
    ----------
    path : Path
        File in mmCIF, PDB or mmJSON, gzipped or not; the content decides, not the name.

    Returns
    -------
    ParsedFile
        The file after parsing.

    Raises
    ------
    FileProblemError
        If the file is missing, unreadable, empty, damaged or binary.
    CoordinateFormatError
        If its text cannot be parsed.
    NoPolymerError
        If it holds no atoms.
    """
    raw = _read_bytes(path)
    text = _decode(path, _unpack(path, raw))
    form = _recognise(text)
    try:
        content = gemmi.read_structure_string(text, format=form)
    except (ValueError, RuntimeError, IndexError) as error:
        raise CoordinateFormatError(path, _one_line(error)) from error
    if not any(model.count_atom_sites() for model in content):
        raise NoPolymerError(path, "atoms")
    content.setup_entities()
    digest = hashlib.sha256(raw).hexdigest()
    return ParsedFile(path=path, sha256=digest, text=text, format=form, content=content)


def find_model(parsed: ParsedFile, number: int) -> gemmi.Model:
    """Return the model of that number.

    Parameters
    ----------
    parsed : ParsedFile
        The file after parsing.
    number : int
        As in the file.

    Returns
    -------
    gemmi.Model
        The model.

    Raises
    ------
    UnknownModelError
        If there is none.
    """
    numbers = [model.num for model in parsed.content]
    if number not in numbers:
        raise UnknownModelError(parsed.path, number, min(numbers), max(numbers))
    return parsed.content[numbers.index(number)]


def _read_bytes(path: Path) -> bytes:
    if path.is_dir():
        raise FileProblemError(path, "this is a folder", WANTED)
    try:
        raw = path.read_bytes()
    except FileNotFoundError as error:
        raise FileProblemError(
            path, "there is no such file", "check the name"
        ) from error
    except OSError as error:
        problem = f"the file cannot be read ({error.strerror})"
        raise FileProblemError(path, problem, "check its permissions") from error
    if not raw.strip():
        raise FileProblemError(path, "the file is empty", WANTED)
    return raw


def _unpack(path: Path, raw: bytes) -> bytes:
    if not raw.startswith(GZIP_START):
        return raw
    try:
        return gzip.decompress(raw)
    except (OSError, EOFError, zlib.error) as error:
        raise FileProblemError(
            path, "the gzip file is damaged or cut short", "download it again"
        ) from error


def _decode(path: Path, content: bytes) -> str:
    if b"\x00" in content:
        raise FileProblemError(path, "the file is binary, not text", WANTED)
    if not content.strip():
        raise FileProblemError(path, "the file is empty", WANTED)
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError:
        return content.decode("latin-1")


def _recognise(text: str) -> gemmi.CoorFormat:
    for line in text.splitlines():
        start = line.strip()
        if not start or start.startswith("#"):
            continue
        if start.startswith("{"):
            return gemmi.CoorFormat.Mmjson
        if start.lower().startswith("data_"):
            return gemmi.CoorFormat.Mmcif
        break
    return gemmi.CoorFormat.Pdb


def _one_line(error: Exception) -> str:
    return " ".join(str(error).split())[:160]
