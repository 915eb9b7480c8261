"""The files of releases: each content kept once, found by its hash; the manifest lists the hashes of all others."""

import hashlib
from collections.abc import Mapping
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

MANIFEST = "manifest.sha256"


def sha256(content: bytes) -> str:
    """Hex digest."""
    return hashlib.sha256(content).hexdigest()


def manifest_of(files: Mapping[str, bytes]) -> bytes:
    """A line a file as `sha256sum --check` takes it, by path; the manifest itself is left out."""
    listed = sorted((path, content) for path, content in files.items() if path != MANIFEST)
    return "".join(f"{sha256(content)}  {path}\n" for path, content in listed).encode()


def keep(con: "DuckDBPyConnection", release_id: int, files: Mapping[str, bytes]) -> None:
    """Keep the files of a new release."""
    kept = {digest for (digest,) in con.execute("SELECT sha256 FROM kept.release_contents").fetchall()}
    for path, content in sorted(files.items()):
        digest = sha256(content)
        if digest not in kept:
            con.execute("INSERT INTO kept.release_contents VALUES (?, ?)", [digest, content])
            kept.add(digest)
        con.execute("INSERT INTO kept.release_files VALUES (?, ?, ?, ?)", [release_id, path, digest, len(content)])


def load(con: "DuckDBPyConnection", release_id: int, *, files_hash: str) -> dict[str, bytes] | None:
    """The files of a release by path; None where one is missing, added or altered, or the manifest is another."""
    query = """
        SELECT f.path, f.sha256, c.content FROM kept.release_files f
        LEFT JOIN kept.release_contents c ON c.sha256 = f.sha256 WHERE f.release_id = ? ORDER BY f.path
    """
    found = con.execute(query, [release_id]).fetchall()
    files = {path: content for path, _, content in found if content is not None}
    manifest = files.get(MANIFEST, b"")
    listed = _sound(found) and manifest == manifest_of(files)
    return files if listed and sha256(manifest) == files_hash else None


def of_study(con: "DuckDBPyConnection", study_id: int, *, version: str, under: str) -> dict[str, bytes]:
    """Files of the newest release of a study by that version of the program whose paths begin so; {} without one."""
    query = """
        SELECT f.path, f.sha256, c.content FROM kept.release_files f
        JOIN kept.release_contents c ON c.sha256 = f.sha256
        WHERE starts_with(f.path, ?) AND f.release_id =
            (SELECT max(id) FROM kept.releases WHERE study_id = ? AND version = ?)
    """
    found = con.execute(query, [under, study_id, version]).fetchall()
    return {path: content for path, _, content in found} if _sound(found) else {}


def _sound(found) -> bool:
    return all(content is not None and sha256(content) == digest for _, digest, content in found)
