"""Input that is far too big, deep or odd: each refused in bounded time and memory, with a line or three, nothing written.

    python -m tests.hard.big

Every case is a process of its own whose time and greatest memory are measured. A file of 1 GB takes its place on disk.
"""

import argparse
import os
import re
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from tests.hard.shop import Shop
from tests.study.small_studies import DEMO, study_text

MOST_S, MOST_MIB = 10.0, 400
LINKS = 1_000_000
_MEASURED = """
import resource, sys
from study.commands import main
sys.argv = ["holdtight", *sys.argv[2:]]
try:
    main()
finally:
    kib = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    try:  # what the process that started this one had is no part of it
        kib = next(line.split()[1] for line in open("/proc/self/status") if line.startswith("VmHWM"))
    except OSError:
        pass
    open({said!r}, "w").write(str(kib))
"""


def files(folder: Path) -> dict[str, Path]:
    """Every odd file by what is odd about it."""
    geometry, table = DEMO.read_text(encoding="utf-8"), (DEMO.parent / "rear-five-link.csv").read_text(encoding="utf-8")
    shutil.copy(DEMO, folder)
    five = (DEMO.parent / "rear-five-link.toml").read_text(encoding="utf-8")
    study = study_text("camber_deg")
    names = iter(range(1000))

    def kept(text, ending=".toml", encoding="utf-8"):
        path = folder / f"odd-{next(names)}{ending}"
        path.write_bytes(text if isinstance(text, bytes) else text.encode(encoding))
        return path

    def grown(head, ending, size=2**30):
        path = kept(head, ending)
        with path.open("r+b") as file:
            file.truncate(size)  # zeros that take no room
        return path

    def repeated(head, line, ending):
        path = kept(head, ending)
        with path.open("ab") as file:
            for _ in range(2**30 // (len(line) * 4096)):
                file.write(line * 4096)
        return path

    def with_table(path):
        return kept(five.replace("rear-five-link.csv", path.name))

    links = "".join(f"[links.l{i}]\ninner = [{i}, 2, 3]\nouter = [4, 5, {i}]\n" for i in range(LINKS))
    huge = {f"1e308 as {name}": re.sub(was, r"\g<1>1e308", geometry, count=1) for name, was in _HUGE.items()}
    found = {
        "geometry of 1 GB": repeated(geometry.encode(), b"# nothing\n", ".toml"),
        "geometry with 1 GB of zeros": grown(geometry, ".toml"),
        "study of 1 GB": repeated(study.encode(), b"# nothing\n", ".study.toml"),
        "points of 1 GB": with_table(repeated(table.encode(), b"a,1,2,3\n", ".csv")),
        "points with 1 GB in one line": with_table(grown(table, ".csv")),
        "a million links": kept(geometry + links),
        "as many links as a file may hold": kept(geometry + links[:900_000].rpartition("[links")[0]),
        "100,000 measures": kept(study + '[[measures]]\nof = "toe_deg"\n' * 100_000, ".study.toml"),
        "as many measures as a file may hold": kept(study + '[[measures]]\nof = "toe_deg"\n' * 29_000, ".study.toml"),
        "as many errors as a file may hold": kept(study.replace("[errors]\n", "[errors]\n" + "".join(f'"chassis.p{i}" = {{ plus_minus = 1.0 }}\n' for i in range(20_000))), ".study.toml"),
        "brackets 400,000 deep": kept(geometry + "\nx = " + "[" * 400_000),
        "tables 100,000 deep": kept(geometry + "\nx = " + "{a=" * 100_000 + "1" + "}" * 100_000),
        "a name of 900,000 letters": kept(geometry.replace("[points]", f"[points]\n{'n' * 900_000} = [1, 2, 3]", 1)),
        "a number of 900,000 digits": kept(geometry + "\nx = " + "9" * 900_000),
        "UTF-16": kept(geometry, encoding="utf-16"), "Latin-1": kept("# é\n" + geometry, encoding="latin-1"),
        "every byte": kept(bytes(range(256)) * 1000), "an odd study": kept("\u202e" + study, ".study.toml"),
        "a link to itself": _link(folder / "circle.toml", folder / "circle.toml"),
        "a link to endless zeros": _link(folder / "zeros.toml", Path("/dev/zero")),
        "a study that never ends": _link(folder / "zeros.study.toml", Path("/dev/zero")),
        "a folder": folder, "a pipe": _pipe(folder / "pipe.toml"), "a pipe as study": _pipe(folder / "pipe.study.toml"),
    }  # fmt: skip
    return found | {name: kept(text) for name, text in huge.items()}


_HUGE = {
    "a coordinate": r"(lower_ball_joint\s*= \[)[-\d.]+", "a height": r"(lower_ball_joint\s*= \[[-\d.]+, [-\d.]+, )[-\d.]+",
    "a wheelbase": r"(wheelbase = )[\d.]+", "a radius": r"(loaded_radius = )[\d.]+",
}  # fmt: skip


def _link(path, target):
    path.symlink_to(target)
    return path


def _pipe(path):
    os.mkfifo(path)
    return path


def measured(shop: Shop, words) -> tuple[int, str, str, float, float]:
    """(exit code, output, errors, seconds, MiB at most) of a command."""
    said = shop.folder / ".memory"
    command = [sys.executable, "-c", _MEASURED.format(said=str(said)), "-", *map(str, words)]
    environment = os.environ | {"HOLDTIGHT_CATALOG": str(shop.store.path), "PYTHONPATH": str(Path(__file__).parents[2])}
    start = time.monotonic()
    try:
        done = subprocess.run(command, capture_output=True, text=True, env=environment, timeout=60, cwd=shop.folder)
    except subprocess.TimeoutExpired:
        return 99, "", "did not end within 60 s", 60.0, 0.0
    return done.returncode, done.stdout, done.stderr, time.monotonic() - start, int(said.read_text()) / 1024


def big(shop: Shop) -> None:
    shop.do("add", "front-wishbone.toml")
    whole = shop.store.path.read_bytes()
    with tempfile.TemporaryDirectory(dir=shop.folder) as place:
        for name, path in files(Path(place)).items():
            commands = ("run", "queue") if ".study" in path.name else ("evaluate", "add")
            for command in commands:
                _refused(shop, f"{name}, {command}", measured(shop, (command, path)))
    shop.expect("catalog as it was", shop.store.path.read_bytes() == whole)
    shop.expect("no file left", {p.name for p in shop.folder.iterdir()} <= {"front-wishbone.toml", "shop.duckdb", ".memory"}, os.listdir(shop.folder))
    shop.expect_sound()


def _refused(shop, case, done):
    code, out, err, seconds, mib = done
    lines = (err.strip() or out.strip()).splitlines()
    print(f"{seconds:6.1f} s {mib:5.0f} MiB  {case}: {(lines or [''])[0][:150]}")
    shop.expect("refused with exit code 2", code == 2, f"{case}: exit {code}")
    shop.expect("in one to three lines", 1 <= len(lines) <= 3 and "Traceback" not in err and len(err) < 4000, f"{case}: {err[:300]}")
    shop.expect("in bounded time", seconds < MOST_S, f"{case}: {seconds:.1f} s")
    shop.expect("in bounded memory", mib < MOST_MIB, f"{case}: {mib:.0f} MiB")


def main() -> int:
    argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter).parse_args()
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))
    from tests.hard.shop import in_a_shop

    return in_a_shop(big)


if __name__ == "__main__":
    sys.exit(main())
