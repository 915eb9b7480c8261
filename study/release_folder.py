"""The folder that a release is handed out in: only its own files, only inside it, never mixed with others."""

import re
from collections.abc import Mapping
from pathlib import Path

from catalog.errors import InputError, WorkError

LEFT_BEHIND = (".DS_Store", "Thumbs.db", "desktop.ini")  # by those who only look at a folder
_PATH = re.compile(r"[A-Za-z0-9_-]+(?:\.[A-Za-z0-9_-]+)*(?:/[A-Za-z0-9_-]+(?:\.[A-Za-z0-9_-]+)*)*")


class FolderTaken(InputError):
    """The folder holds something else already."""


class FolderNotWritten(WorkError):
    """The folder cannot be written."""


def default_folder(drawing: str, issue: str) -> Path:
    """releases/DRAWING-ISSUE, in letters that every system takes."""
    from study.charts.exports import safe_stem

    return Path("releases") / safe_stem(f"{drawing}-{issue}")


def check_folder(folder: Path) -> None:
    """Raise FolderTaken unless the folder is new or empty."""
    if folder.exists() and not folder.is_dir():
        raise FolderTaken(f"{folder}: is a file; name a folder with --out")
    if folder.is_dir() and any(path.name not in LEFT_BEHIND for path in folder.iterdir()):
        raise FolderTaken(f"{folder}: is not empty, and a release is not mixed with other files; name a new folder with --out")


def write_folder(folder: Path, files: Mapping[str, bytes]) -> list[Path]:
    """Write the files into a folder that is new, empty, or holds just them already. Nothing is written outside it.

    Raises FolderTaken, FolderNotWritten.
    """
    for path in files:
        if not _PATH.fullmatch(path):
            raise FolderNotWritten(f"{path!r}: is no file name of a release; restore a copy of the catalog")
    targets = {folder / path: content for path, content in files.items()}
    try:
        if _holds(folder, targets):
            return list(targets)
        check_folder(folder)
        for target, content in targets.items():
            target.parent.mkdir(parents=True, exist_ok=True)
            with target.open("xb") as file:
                file.write(content)
    except OSError as error:
        raise FolderNotWritten(f"{folder}: cannot be written: {error.strerror}; name another folder with --out") from None
    return list(targets)


def _holds(folder, targets):
    """Whether the folder holds these files, alike to the last byte, and no others."""
    if not folder.is_dir():
        return False
    there = [path for path in folder.rglob("*") if path.is_symlink() or not (path.is_dir() or path.name in LEFT_BEHIND)]
    return set(there) == set(targets) and all(
        not path.is_symlink() and path.read_bytes() == content for path, content in targets.items()
    )
