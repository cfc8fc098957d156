"""Files written whole or not at all, and never over another one unasked."""

from __future__ import annotations

import os
import tempfile
from collections.abc import Mapping
from pathlib import Path

from synth.quantities import RestpointError


class FileRefused(RestpointError):
    """A file that cannot or must not be written; nothing was."""


def refuse(paths: Mapping[str, Path], force: bool) -> None:
    """Refuse file names that cannot be used, before any work is done for them.

    Parameters
    ----------
    paths : mapping of str to Path
        Files to be written, by the option that names them.
    force : bool
        Whether existing files may be replaced.

    Raises
    ------
    FileRefused
        If two options name one file, a folder is missing, or a file exists.
    """
    seen: dict[Path, str] = {}
    for option, path in paths.items():
        place = path.absolute()
        if place in seen:
            reason = f"which {seen[place]} writes already, accepted is another file name"
            raise FileRefused(f"{option}: read {str(path)!r}, {reason}")
        seen[place] = option
        if not place.parent.is_dir():
            raise FileRefused(f"{option}: read {str(path)!r}, accepted is a file name in a folder that exists")
        if place.is_dir():
            raise FileRefused(f"{option}: read {str(path)!r}, which is a folder, accepted is a file name")
        if place.exists() and not force:
            raise FileRefused(f"{option}: {str(path)!r} exists already, accepted is a new file name, or add --force")


def refuse_folder(option: str, folder: Path) -> None:
    """Refuse a folder that cannot be used; one that is missing will be made.

    Parameters
    ----------
    option : str
        The option that names it.
    folder : Path
        Where files are to be written.

    Raises
    ------
    FileRefused
        If it is a file, or the folder that it would lie in is missing.
    """
    place = folder.absolute()
    if place.exists() and not place.is_dir():
        raise FileRefused(f"{option}: read {str(folder)!r}, which is a file, accepted is a folder")
    if not place.parent.is_dir():
        raise FileRefused(f"{option}: read {str(folder)!r}, accepted is a folder in one that exists")


def write(texts: Mapping[str, tuple[Path, str | bytes]]) -> None:
    """Write files, all of them or none.

    Parameters
    ----------
    texts : mapping of str to (Path, str or bytes)
        Path and content by the option that names the file; text is written as UTF-8.

    Raises
    ------
    FileRefused
        If one cannot be written; the others are not written either.
    """
    scratch: list[tuple[str, Path]] = []
    option, path = "", Path()
    try:
        for option, (path, text) in texts.items():  # noqa: B007  the error below names it
            handle, name = tempfile.mkstemp(dir=path.absolute().parent, prefix=f".{path.name[:50]}.")
            scratch.append((name, path))
            with os.fdopen(handle, "wb") as file:
                file.write(text if isinstance(text, bytes) else text.encode("utf-8"))
                file.flush()
                os.fsync(file.fileno())
            os.chmod(name, 0o644)
        while scratch:
            name, path = scratch[0]
            os.replace(name, path)
            scratch.pop(0)
    except OSError as error:
        raise FileRefused(f"{option}: cannot write {str(path)!r}: {error.strerror}, nothing was written") from error
    finally:
        for name, _ in scratch:
            os.unlink(name)
