"""Writing a folder of files: all of them or none."""

import os
import shutil
import tempfile
from collections.abc import Mapping
from pathlib import Path

from structmap.errors import FileProblemError


def write_folder(folder: Path, files: Mapping[str, str | bytes]) -> None:
    """Write files into a folder, all or nothing.

    Everything is written into a folder beside the target first and moved into place at
    the end. Files of the same names are replaced; others in the folder stay.

    Parameters
    ----------
    folder : Path
        Made when it does not exist.
    files : mapping of str to str or bytes
        Name (with ``/`` for a folder inside) and content; text is written as UTF-8 with
        the line ends it has.

    Raises
    ------
    FileProblemError
        If the folder cannot be made or written.
    """
    folder = Path(folder)
    try:
        folder.parent.mkdir(parents=True, exist_ok=True)
        if folder.exists() and not folder.is_dir():
            raise FileProblemError(
                folder, "is a file, not a folder", "name another folder"
            )
        beside = Path(tempfile.mkdtemp(prefix=f".{folder.name}-", dir=folder.parent))
    except OSError as error:
        raise _not_writable(folder, error) from error
    try:
        for name, content in files.items():
            _write(beside / name, content)
        _move_into_place(beside, folder, list(files))
    except OSError as error:
        raise _not_writable(folder, error) from error
    finally:
        shutil.rmtree(beside, ignore_errors=True)


def write_file(path: Path, content: str | bytes) -> None:
    """Write one file, whole or not at all.

    Parameters
    ----------
    path : Path
        Replaced when it exists; its folder must exist.
    content : str or bytes
        What to write.

    Raises
    ------
    FileProblemError
        If it cannot be written.
    """
    path = Path(path)
    beside = path.with_name(f".{path.name}.part")
    try:
        _write(beside, content)
        beside.replace(path)
    except OSError as error:
        raise _not_writable(path, error) from error
    finally:
        if beside.is_file():
            beside.unlink()


def _write(path: Path, content: str | bytes) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    data = content.encode("utf-8") if isinstance(content, str) else content
    with path.open("wb") as handle:
        handle.write(data)
        handle.flush()
        os.fsync(handle.fileno())


def _move_into_place(beside: Path, folder: Path, names: list[str]) -> None:
    folder.mkdir(exist_ok=True)
    for name in names:
        target = folder / name
        target.parent.mkdir(parents=True, exist_ok=True)
        (beside / name).replace(target)


def _not_writable(path: Path, error: OSError) -> FileProblemError:
    return FileProblemError(
        path,
        f"cannot be written ({error.strerror or error})",
        "choose a place you may write to",
    )
