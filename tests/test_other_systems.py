"""Other systems than this one: paths, consoles, pipes, line ends, and what Windows does otherwise, as far as it can be played."""

import ast
import errno
import io
import json
import os
import re
import shutil
import socket
import subprocess
import sys

import duckdb
import pytest

from catalog import keeping, migrate, queue
from catalog.store import Catalog, CatalogBusy, CatalogNotWritable
from study import commands
from study.release_folder import write_folder
from tests.study.command_line import command
from tests.study.small_studies import DEMO, ROOT, TOE, study_text

OLD = ROOT / "tests" / "old_catalogs" / "v0001.duckdb"
GEOMETRY, POINTS, STUDY = "Vorderachse à l'avant.toml", "Punkte d'été n° 1.csv", "Étude d'été.toml"
MADE = (("queue", STUDY), ("work",), ("as-built", "add", "front-wishbone", "car.csv", "--car", "7"))
ASCII = {"LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONCOERCECLOCALE": "0"}
FAULTS = ("Traceback", "Exception ignored", "fault of the program", "Error:")
ONE_BY_ONE = """
import json, sys
from study.commands import main
for words in json.loads(sys.argv[1]):
    sys.argv = ["holdtight", *words]
    try:
        main()
    except SystemExit as end:
        assert not end.code, words
"""
NO_HOME = """
import os, pwd, vl_convert
os.environ.pop("HOME", None)
pwd.getpwuid = {}.__getitem__
vl_convert.javascript_bundle = lambda: "0;"
"""


class Stuck(io.StringIO):
    """An output that takes nothing. Windows says EINVAL of a pipe that nobody reads."""

    def __init__(self, number):
        super().__init__()
        self.number = number

    def write(self, text):
        raise OSError(self.number, os.strerror(self.number))


def started(folder, *words, encoding="utf-8", stdout=subprocess.PIPE, **more):
    """A Python process in a folder, without the settings of this one: (exit code, output, errors)."""
    settings = {name: os.environ[name] for name in ("PATH", "HOME", "LANG", "SYSTEMROOT") if name in os.environ}
    settings |= {"PYTHONPATH": str(ROOT), "PYTHONIOENCODING": encoding, "NO_COLOR": "1", "TERM": "dumb"}
    settings |= {"TMPDIR": str(folder), "XDG_CACHE_HOME": str(folder)} | more
    done = subprocess.run([sys.executable, *words], cwd=folder, stdout=stdout, stderr=subprocess.PIPE, env=settings)
    return done.returncode, (done.stdout or b"").decode(encoding), done.stderr.decode(encoding)


def holdtight(folder, *words, **more):
    return started(folder, "-m", "study.commands", *map(str, words), **more)


def shown(folder, *asked, before="", **more):
    """What several commands print, run one after the other in a process of their own."""
    code, out, err = started(folder, "-c", before + ONE_BY_ONE, json.dumps([[*map(str, words)] for words in asked]), **more)
    assert code == 0 and not any(fault in err for fault in FAULTS) and "\x1b" not in out + err, err
    return out


def write(folder, *, ends="\n", mark=b""):
    """The demo with its points in a CSV beside it, a study, and a measured car: names and texts with accents."""
    head, rest = DEMO.read_text(encoding="utf-8").replace('note = "', 'note = "Träger Łódź. ').split("[points]")
    points, rest = rest.split("[wheel]")
    points = re.sub(r" *= *\[|, *", ",", points.strip().replace("]", ""))
    study = study_text("camber_deg", geometry=GEOMETRY, alignment=TOE, title="Étude ±1 – première")
    car = "name,x,y,z\nlower_front_pivot,152.5,286,124\nlower_rear_pivot,-158,291.5,125\n"
    geometry = f'{head}points_file = "{POINTS}"\n\n[wheel]{rest}'
    for name, text in ((GEOMETRY, geometry), (POINTS, points), (STUDY, study), ("car.csv", car)):
        (folder / name).write_bytes(mark + text.replace("\n", ends).encode())


@pytest.fixture(scope="module")
def shop(tmp_path_factory):
    """A folder with a finished study in holdtight.duckdb, all made by commands."""
    folder = tmp_path_factory.mktemp("Chez l'ami, été 1")
    write(folder)
    shown(folder, *MADE)
    return folder


# --- paths and folders


def test_paths_with_blanks_accents_and_apostrophes(shop, tmp_path):
    copy, csv, parquet = (tmp_path / f"d'été {name}" for name in ("1.duckdb", "2.csv", "3.parquet"))
    exports = [("export", "points", "--out", out, "--catalog", copy) for out in (csv, parquet)]
    assert "nothing is wrong" in shown(shop, ("backup", copy), *exports, ("check", "--catalog", copy))
    assert len(duckdb.read_parquet(str(parquet)).fetchall()) == len(csv.read_text(encoding="utf-8").splitlines()) - 1
    assert sorted(tmp_path.iterdir()) == [copy, csv, parquet]


def test_the_name_of_a_catalog_is_taken_or_refused_in_words(shop):
    """An accent in a locale without it; and bytes that are no text, as no other system than this has them."""
    shutil.copy(shop / "holdtight.duckdb", shop / "été.duckdb")
    code, out, err = holdtight(shop, "studies", "--catalog", "été.duckdb", **ASCII)
    assert code == 0 and "front-wishbone@1" in out, err
    if sys.platform == "linux":
        shutil.copy(shop / "holdtight.duckdb", shop / os.fsdecode(b"caf\xe9.duckdb"))
        code, _, err = holdtight(shop, "studies", "--catalog", os.fsdecode(b"caf\xe9.duckdb"))
        assert code == 2 and not any(fault in err for fault in FAULTS), err


def test_what_a_file_manager_leaves_behind_does_not_count(tmp_path):
    for name in (".DS_Store", "Thumbs.db", "desktop.ini"):
        (tmp_path / name).write_bytes(b"icons")
    files = {"note.txt": b"x", "charts/a.svg": b"y"}
    assert write_folder(tmp_path, files) == write_folder(tmp_path, files)


@pytest.mark.skipif(os.name == "nt", reason="plays a login that the system does not know")
def test_a_sheet_needs_no_home_and_no_cache(shop):
    (shop / "file").touch()
    sheet = shop / "Blätter d'été" / "Blatt n° 1.html"
    assert str(sheet) in shown(shop, ("sheet", 1, "--out", sheet), before=NO_HOME, XDG_CACHE_HOME=str(shop / "file"))
    assert "Étude ±1" in sheet.read_text(encoding="utf-8")


# --- consoles and pipes


@pytest.mark.parametrize(("encoding", "settings"), [("ascii", ASCII), ("cp1252", {})], ids=["ascii", "cp1252"])
def test_a_console_with_few_letters_gets_readable_tables(shop, encoding, settings):
    """A sign that is missing there is written out: "?1 ? 16" is no tolerance."""
    out = shown(shop, ("critical", 1), ("evaluate", DEMO), ("processes",), ("measures",), encoding=encoding, **settings)
    assert all(word in out for word in ("chassis.lower_front_pivot", "half_track_mm", "iso-13920-D"))
    assert "?" not in out, [line for line in out.splitlines() if "?" in line][:5]
    code, out, err = holdtight(shop, "evaluate", "Łódź où.toml", encoding=encoding, **settings)
    assert code == 2 and out == "" and re.fullmatch(r"holdtight: .* does not exist; check the path\.\s*", err), err


@pytest.mark.parametrize("words", [("show", "front-wishbone", "--text"), ("sql", "--csv", "SELECT note FROM geometries")], ids=["show", "sql"])
def test_what_is_data_is_utf_8_in_a_file(shop, words):
    with (shop / "out").open("wb") as file:
        assert holdtight(shop, *words, encoding="cp1252", stdout=file)[0] == 0
    assert "Träger Łódź".encode() in (shop / "out").read_bytes()


@pytest.mark.parametrize("words", [("studies", "--json"), ("measures",), ("sql", "--csv", "FROM range(300000)")], ids=["short", "table", "long"])
def test_a_reader_that_went_away_is_no_fault(shop, words):
    reading, writing = os.pipe()
    os.close(reading)
    code, _, err = holdtight(shop, *words, stdout=writing)
    os.close(writing)
    assert code in (0, 1) and err == ""


@pytest.mark.parametrize(
    ("name", "stream", "words", "code", "told"),
    [
        ("stdout", None, "studies", 0, ""), ("stdout", None, "sql --csv", 0, ""), ("stderr", None, "work", 0, ""),
        ("stdout", Stuck(errno.EINVAL), "studies --json", 1, ""), ("stdout", Stuck(errno.ENOSPC), "studies --json", 1, "No space left"),
    ],
    ids=["no-output", "no-output-csv", "no-errors", "gone", "full"],
)  # fmt: skip
def test_a_stream_that_is_not_there_or_takes_nothing_is_no_fault(shop, monkeypatch, capsys, name, stream, words, code, told):
    monkeypatch.chdir(shop)
    monkeypatch.setattr("tempfile.tempdir", str(shop))
    monkeypatch.setattr(sys, "argv", ["holdtight", *words.split()])
    monkeypatch.setattr(sys, name, stream)
    with pytest.raises(SystemExit) as end:
        commands.main()
    said = capsys.readouterr().err
    assert (end.value.code or 0) == code and told in said and bool(told) == bool(said) and "fault" not in said


# --- line ends


def test_line_ends_and_byte_order_marks_change_no_result(shop, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    write(tmp_path, ends="\r\n", mark=b"\xef\xbb\xbf")
    assert [command(*words).code for words in MADE] == [0, 0, 0]
    found = []
    for folder in (shop, tmp_path):
        with Catalog(folder / "holdtight.duckdb").read() as con:
            query = "SELECT r.content_hash, s.result_hash, a.content_hash FROM kept.revisions r, kept.studies s, kept.as_built a"
            found += con.execute(query).fetchall()
    assert len(found) == 2 and found[0] == found[1] and all(found[0])


# --- what Windows does otherwise


REFUSALS = {
    "held": ('Cannot open file "a": Kein Zugriff.\r\n\nFile is already open in \nC:\\p.exe (PID 4242)', CatalogBusy, "process 4242"),
    "held-unnamed": ("IO Error: The process cannot access the file because it is being used by another process.", CatalogBusy, "another process"),
    "denied": ('IO Error: Cannot open file "a": Access is denied.\r\n', CatalogNotWritable, "may not be written"),
    "no-locks": ("IO Error: File locks are not supported for this file system, cannot open the file", CatalogNotWritable, "lock"),
}


@pytest.mark.parametrize("refusal", REFUSALS)
def test_a_catalog_that_cannot_be_opened_is_not_called_damaged(tmp_path, monkeypatch, refusal):
    said, error, told = REFUSALS[refusal]

    def refuse(*_, **__):
        raise duckdb.IOException(said)

    catalog = Catalog(shutil.copy(OLD, tmp_path / "a.duckdb"), wait_s=0.05)
    monkeypatch.setattr(duckdb, "connect", refuse)
    with pytest.raises(error, match=told), catalog.write():
        pass


@pytest.mark.skipif(os.name == "nt", reason="plays the sharing of files by locks")
def test_a_backup_copies_a_file_that_is_not_held_for_writing(shop, tmp_path, monkeypatch):
    lock = "import fcntl, sys\nfcntl.lockf(open(sys.argv[1], 'rb'), fcntl.LOCK_SH | fcntl.LOCK_NB)\n"
    monkeypatch.setattr(keeping, "_COPY", lock + keeping._COPY)
    assert keeping.backup(Catalog(shop / "holdtight.duckdb"), tmp_path / "b.duckdb") > 0


def test_an_old_catalog_is_brought_up_where_an_open_file_cannot_be_replaced(tmp_path, monkeypatch):
    def refuse(*_):
        raise PermissionError(errno.EACCES, "it is open")

    catalog = Catalog(shutil.copy(OLD, tmp_path / "a.duckdb"))
    monkeypatch.setattr(migrate, "WINDOWS", True, raising=False)
    monkeypatch.setattr(migrate, "_copy", refuse)
    monkeypatch.setattr(os, "replace", refuse)
    with catalog.read() as con:
        assert migrate.schema_version(con) == migrate.newest_version()
    assert [path.name for path in tmp_path.iterdir()] == ["a.duckdb"]


def test_asking_for_a_sign_of_life_interrupts_nobody(monkeypatch):
    sent = []
    monkeypatch.setattr(os, "kill", lambda *given: sent.append(given))
    with monkeypatch.context() as other:
        other.setattr(os, "name", "nt")
        dead = queue._known_dead(f"{socket.gethostname()}:{os.getpid()}:x")
    assert not dead and not sent  # there, os.kill(process, 0) is Ctrl-C


def test_words_are_taken_as_they_are_typed(monkeypatch):
    """Else *, ~ and %NAME% of every word would be expanded on Windows, those of a query too."""
    given = {}
    monkeypatch.setattr(commands, "app", lambda **options: given.update(options))
    commands.main()
    assert given.get("windows_expand_args") is False


# --- the sources


POSIX = """
fcntl resource pwd grp termios tty pty posix syslog curses os.fork os.forkpty os.getuid os.geteuid os.getgid os.getegid os.setsid os.killpg
os.mkfifo os.chown os.uname os.nice os.sysconf os.waitpid os.getloadavg os.sched_getaffinity os.statvfs signal.SIGKILL signal.SIGHUP
signal.SIGALRM signal.SIGUSR1 signal.SIGQUIT signal.SIGCHLD signal.SIGPIPE signal.pause signal.alarm signal.setitimer signal.sigwait
time.tzset socket.AF_UNIX fnmatch.fnmatch fnmatch.filter
"""
SOURCES = {path.relative_to(ROOT).as_posix(): path for top in ("catalog", "study") for path in sorted((ROOT / top).rglob("*.py"))}
OPENS = re.compile(r"(^|(?<!os)\.)open$|\.(read|write)_text$|NamedTemporaryFile$|^subprocess\.\w+$")


def nodes(path, *kinds):
    return [node for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))) if isinstance(node, kinds)]


def test_nothing_is_used_that_only_posix_has():
    for name, path in SOURCES.items():
        used = {ast.unparse(node) for node in nodes(path, ast.Attribute) if isinstance(node.value, ast.Name)}
        for node in nodes(path, ast.Import, ast.ImportFrom):
            module = getattr(node, "module", None)
            used |= {module, *(f"{module}.{alias.name}" if module else alias.name for alias in node.names)}
        text = path.read_text(encoding="utf-8")
        assert not used & {*POSIX.split()}, name
        assert "os.kill" not in used or re.search(r"os\.name|WINDOWS", text), f"{name}: os.kill(process, 0) is Ctrl-C on Windows"
        assert not re.search(r"""["']/(dev|proc|tmp|etc|bin|usr)/""", text), name


def test_every_text_has_an_encoding_and_line_ends_of_its_own():
    found = []
    for name, path in SOURCES.items():
        for call in nodes(path, ast.Call):
            called, words = ast.unparse(call.func), {word.arg for word in call.keywords}
            mode = "".join(str(word.value) for word in call.args[:2] if isinstance(word, ast.Constant))
            if not OPENS.search(called) or "b" in mode or called.startswith("subprocess.") and "text" not in words:
                continue
            found += [] if "encoding" in words else [f"{name}:{call.lineno}: {called} without encoding"]
            if re.search("(open|write_text)$", called) and (set(mode) & set("wax") or "write" in called) and "newline" not in words:
                found.append(f"{name}:{call.lineno}: {called} writes other line ends on Windows")
    assert found == []
