"""The sheet of a study: one HTML file that needs nothing else, to read on a screen and to print in grey."""

from study.charts import tables as tb
from study.charts.tables import Tables, plain
from study.sheet_hold import hold_these
from study.sheet_library import library
from study.sheet_measures import measures
from study.sheet_page import Figures, Html, document, join, tag
from study.sheet_sections import curves, demand, matrix, together, where
from study.sheet_sides import left_right
from study.sheet_summary import title_block
from study.sheet_tables import cautions, notes, statistics, studied, tolerance_table, worst_builds

__all__ = ["render"]

_SKIPS = (
    ("hold", "What to hold"),
    ("measures", "Measure by measure"),
    ("tolerances", "Tolerances"),
    ("cautions", "Cautions"),
)


def render(
    tables: Tables, *, study: dict, geometry: dict, tolerances: list[dict] = (), alignment: list[dict] = ()
) -> str:
    """The whole page as text.

    tables      result tables, each may be missing: ranking, stats, histogram, curves, demand, worst,
                correlations
    study       the study's row; used where there: id, title, geometry, method, size, seed, sides, state,
                builds, dropped_blocks, withheld, unassembled, version, text, perfect, notes, seconds, stages,
                wanted_share, open_together (sources whose loosening passed together),
                open_together_good_share
    geometry    as in `study.charts.places`; `datums` (text) is shown when given
    tolerances  one row a drawing feature: source ("part.feature"), zone_text, distribution_text, process
    alignment   one row an adjuster in workshop order: adjuster, by, within_text, step_text, range_text

    Everything given is escaped. NaN and infinities are shown as missing. `study.sheet_library.prepare`,
    called while the study runs, spares the first sheet of an installation two seconds.
    """
    tables, study = plain(tables), plain(study)
    stage, figures = tb.last_stage(tables), Figures()
    sections = [
        hold_these(tables, study, stage),
        where(tables, geometry, figures, stage),
        matrix(tables, figures, stage),
        measures(tables, figures),
        curves(tables, figures),
        left_right(tables, study, geometry, figures, stage),
        demand(tables, figures),
        tolerance_table(list(tolerances), tables, stage),
        worst_builds(tables),
        statistics(tables),
        together(tables, figures),
        studied(study, geometry, list(alignment)),
        notes(study),
        cautions(),
    ]
    title = study.get("title") or "Tolerance sheet"
    body = join(
        [
            _skips(sections),
            tag("div", cls="rule", aria_hidden="true"),
            title_block(study, geometry, stage),
            tag("main", *sections),
            _foot(study),
        ],
        "\n",
    )
    return document(title, body=body, figures=figures, library=library())


def _skips(sections: list[Html]) -> Html:
    present = [(name, words) for name, words in _SKIPS if any(f'id="{name}"' in text for text in sections)]
    return tag(
        "nav",
        *(tag("a", words, href=f"#{name}") for name, words in present),
        cls="skip",
        aria_label="Skip to",
    )


def _foot(study: dict) -> Html:
    version = f"holdtight {study['version']}" if study.get("version") else "holdtight"
    return tag("footer", f"Made with {version}. Open tables print with the sheet, closed ones do not.")
