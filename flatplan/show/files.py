"""Files written whole or not at all: a temporary file beside the final one, then renamed over it."""

from __future__ import annotations

import os
import secrets
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from flatplan.records import quoted

__all__ = ["write_all", "write_bytes", "write_text"]


def checked_path(path: Any, name: str = "path") -> Path:
    """``path`` as a `Path` that a file can be written to: its folder exists and it is no folder itself.

    Raises
    ------
    TypeError
        Neither text nor a path.
    FileNotFoundError
        The folder it lies in does not exist.
    IsADirectoryError
        It is a folder.
    """
    if not isinstance(path, (str, os.PathLike)):
        raise TypeError(f"{name}: got {type(path).__name__}; it takes the name of a file to write.")
    given = os.fspath(path)
    if not isinstance(given, str) or not given or "\0" in given:
        raise TypeError(f"{name}: got {quoted(given)}; it takes the name of a file to write.")
    file = Path(given)
    if not file.parent.is_dir():
        raise FileNotFoundError(f"{name}: got {quoted(given)}, whose folder does not exist; make the folder first.")
    if file.is_dir():
        raise IsADirectoryError(f"{name}: got {quoted(given)}, which is a folder; it takes the name of a file to write.")
    return file


def write_bytes(path: Any, data: bytes) -> Path:
    """Write ``data`` to ``path`` so that a reader sees the old file or the whole new one, never a part.

    Parameters
    ----------
    path : str or path
        In a folder that exists.
    data : bytes

    Returns
    -------
    pathlib.Path

    Raises
    ------
    TypeError
        A path that is none, or data that are not bytes.
    OSError
        The folder is missing or cannot be written to, or the disk is full; nothing is left behind.
    """
    file = checked_path(path)
    if not isinstance(data, (bytes, bytearray, memoryview)):
        raise TypeError(f"data: got {type(data).__name__}; it takes bytes.")
    temporary = _beside(file)
    try:
        _write(temporary, data)
        os.replace(temporary, file)
    finally:
        temporary.unlink(missing_ok=True)
    return file


def _beside(file: Path) -> Path:
    """A name for a temporary file: in the same folder, because a rename is atomic only within one file system."""
    return file.with_name(f".{file.name[:80]}.{secrets.token_hex(8)}.part")


def _write(temporary: Path, data: bytes) -> None:
    # "x" refuses an existing file and leaves the permissions to the user's own mask
    with open(temporary, "xb") as stream:
        stream.write(data)
        stream.flush()
        os.fsync(stream.fileno())


def write_all(folder: Any, files: Mapping[str, bytes]) -> list[Path]:
    """Write several files under one folder; none takes its name before all are safely on the disk.

    Parameters
    ----------
    folder : str or path
        Made, with the folders above it, where it is missing.
    files : mapping of str to bytes
        Plain file names, without a folder, and contents.

    Returns
    -------
    list of pathlib.Path
        In the order given.

    Raises
    ------
    TypeError
        A folder that is none, or contents that are not bytes.
    ValueError
        A name that is not a plain file name.
    OSError
        The folder cannot be written to, or the disk is full; no file is left incomplete, and a folder made here is taken away.
    """
    if not isinstance(folder, (str, os.PathLike)) or not os.fspath(folder):
        raise TypeError(f"folder: got {quoted(folder)}; it takes the name of a folder.")
    for name, data in files.items():
        if not isinstance(name, str) or not name or name in (".", "..") or any(sign in name for sign in "/\\\0"):
            raise ValueError(f"files: got {quoted(name)}; it takes plain file names, without a folder.")
        if not isinstance(data, (bytes, bytearray, memoryview)):
            raise TypeError(f"files[{quoted(name)}]: got {type(data).__name__}; it takes bytes.")
    place = Path(folder)
    missing = [parent for parent in (place, *place.parents) if not parent.exists()]
    place.mkdir(parents=True, exist_ok=True)
    final = [checked_path(place / name) for name in files]
    temporary = [_beside(file) for file in final]
    done = False
    try:
        for part, data in zip(temporary, files.values(), strict=True):
            _write(part, data)
        for part, file in zip(temporary, final, strict=True):
            os.replace(part, file)
        done = True
    finally:
        for part in temporary:
            part.unlink(missing_ok=True)
        if not done:
            _take_away(missing)
    return final


def _take_away(folders: list[Path]) -> None:
    """Remove folders that were made for nothing, innermost first; one that holds files by now stays."""
    for made in folders:
        if made.is_dir() and not any(made.iterdir()):
            made.rmdir()


def write_text(path: Any, text: str) -> Path:
    """Write ``text`` to ``path`` as UTF-8 with plain line feeds, whole or not at all.

    Parameters
    ----------
    path : str or path
        In a folder that exists.
    text : str

    Returns
    -------
    pathlib.Path

    Raises
    ------
    TypeError
        A path that is none, or a text that is none.
    OSError
        The folder is missing or cannot be written to, or the disk is full; nothing is left behind.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_text(folder + "/rates.csv", "step,rate\\n").read_bytes()
    b'step,rate\\n'
    """
    if not isinstance(text, str):
        raise TypeError(f"text: got {type(text).__name__}; it takes text.")
    return write_bytes(path, text.encode("utf-8"))
