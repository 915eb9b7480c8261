"""The chart library as text, for pages without network. Put together once, then kept in the user's cache."""

import hashlib
import os
import subprocess
import sys
import tempfile
from functools import cache
from pathlib import Path

_helper: subprocess.Popen | None = None


def cache_file() -> Path:
    """Where the library of the installed version is kept."""
    import vl_convert

    base = os.environ.get("XDG_CACHE_HOME") or os.environ.get("LOCALAPPDATA") or Path.home() / ".cache"
    return Path(base) / "holdtight" / f"chart-library-{vl_convert.__version__}.js"


def prepare() -> None:
    """Start filling the cache in a process of its own where it is empty, so that no sheet waits for it.

    Putting the library together takes two seconds and lets no other thread run meanwhile.
    """
    global _helper
    if _helper is None and _kept() is None:
        _helper = subprocess.Popen(
            [sys.executable, "-c", "from study.sheet_library import library; library()"],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            cwd=Path(__file__).parent.parent,
        )


@cache
def library() -> str:
    """The script that draws charts, safe to stand inside a script element."""
    if _helper is not None:
        _wait(_helper)
    text = _kept()
    if text is None:
        import vl_convert

        text = vl_convert.javascript_bundle().replace("</script", "<\\/script")
        _keep(text)
    return text


def _wait(helper: subprocess.Popen) -> None:
    try:
        helper.wait(timeout=30)
    except subprocess.TimeoutExpired:
        helper.kill()


def _kept() -> str | None:
    """The kept text when it is whole: its first line is the hash of the rest."""
    try:
        head, _, text = cache_file().read_text(encoding="utf-8").partition("\n")
    except (OSError, RuntimeError, UnicodeDecodeError):
        return None
    return text if head == _hash(text) else None


def _keep(text: str) -> None:
    """Written beside and moved into place; a cache that cannot be written is done without."""
    try:
        path = cache_file()
        path.parent.mkdir(parents=True, exist_ok=True)
        with tempfile.NamedTemporaryFile(
            "w", encoding="utf-8", newline="", dir=path.parent, delete=False
        ) as file:
            file.write(f"{_hash(text)}\n{text}")
        os.replace(file.name, path)
    except (OSError, RuntimeError):
        return


def _hash(text: str) -> str:
    return hashlib.sha256(text.encode()).hexdigest()
