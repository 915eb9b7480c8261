"""Writes a small catalog of the present schema version beside this file; run it once for each new version.

PYTHONPATH=.:tests/catalog python tests/old_catalogs/make.py
"""

from pathlib import Path

import numpy as np
from catalog_samples import geometry, result_tables, with_study

from catalog import as_built, migrate, processes, revisions
from catalog.chunks import store_chunk
from catalog.migrate import newest_version
from catalog.queue import claim, finish

WORKER = "bench:1:made"
SMALLEST_BLOCK = "16384"  # bytes: many small tables would else take a block each of four times the size
MEASURED = "upper_front_pivot,120.5,330,275\nright.upper_front_pivot,120,-330.5,275\n"
RESOLVED = {"cnc-upright": {"zone": {"diameter": 0.1}, "looser": None}}


def main() -> None:
    path = Path(__file__).parent / f"v{newest_version():04}.duckdb"
    if path.exists():
        raise SystemExit(f"{path.name} is there already; a saved catalog is not made again.")
    migrate.BLOCK_BYTES = SMALLEST_BLOCK
    catalog, [study, _] = with_study(path, n=2)
    with catalog.write() as con:
        claim(con, WORKER, study_id=study)
        values = np.array([[1.0, 2.0], [3.0, 4.0]])
        store_chunk(
            con, study, WORKER, stage="after", chunk_no=0, first_build=0, values=values, status=np.zeros(2)
        )
        finish(con, study, WORKER, tables=result_tables())
        processes.keep(con, study, RESOLVED)
        measured = as_built.parse_measured(MEASURED, source="car.csv", geometry=geometry())
        as_built.add(con, revisions.find(con, "example-front"), measured, car="No. 1", by="tester")
    print(path.name, path.stat().st_size // 1024, "KiB")


if __name__ == "__main__":
    main()
