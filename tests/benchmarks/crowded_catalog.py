"""A catalog of many geometries and finished studies, made by SQL alone, for timing questions to it."""

from catalog.store import Catalog

GEOMETRIES, STUDIES_EACH, MEASURES, SOURCES = 1000, 3, 12, 16


def make(path, *, geometries=GEOMETRIES) -> Catalog:
    """Some geometries with STUDIES_EACH finished Sobol' studies each."""
    store = Catalog(path)
    studies = geometries * STUDIES_EACH
    with store.write() as con:
        con.execute(f"INSERT INTO kept.geometries SELECT i, 'g' || i FROM range(1, {geometries + 1}) t(i)")
        con.execute(
            "INSERT INTO kept.revisions SELECT i, i, 1, 'h' || i, 'double-wishbone', 'front', 'x', 'mm', 'left', '', now(), 'x', '',"
            f" '', '{{}}' FROM range(1, {geometries + 1}) t(i)"
        )
        con.execute(
            "INSERT INTO kept.studies (id, title, state, method, size, seed, sides, revision_id, text, version, created, by_whom,"
            " finished, done_builds, ranked, final_stage) SELECT i, 's', 'done', 'sobol', 512, 1, 'mirrored',"
            f" 1 + (i - 1) // {STUDIES_EACH}, '', '1', now(), 'x', now(), 1, true, 'after' FROM range(1, {studies + 1}) t(i)"
        )
        con.execute(
            'INSERT INTO kept.ranking (study_id, stage, measure_no, measure, unit, source, "rank", st, linear_share, tied, verdict)'
            " SELECT s, st, m, 'measure ' || m, 'mm', 'chassis.p' || ((k + s) % 16), k + 1, 0.5 / (k + 1), 0.5 / (k + 1), false, 'hold'"
            f" FROM range(1, {studies + 1}) a(s), (VALUES ('before'), ('after')) b(st), range({MEASURES}) c(m), range({SOURCES}) d(k)"
        )
        con.execute(
            "INSERT INTO kept.verdicts (study_id, source, verdict, good_share) SELECT s, 'chassis.p' || k,"
            f" CASE WHEN k % 2 = 0 THEN 'hold' ELSE 'open' END, 0.9 FROM range(1, {studies + 1}) a(s), range({SOURCES}) d(k)"
        )
    return store
