"""The demo geometry and small studies on it, for the tests of the build model."""

from functools import cache
from pathlib import Path

from catalog.geometry_file import read_geometry
from study.response import Response
from study.study_file import parse_study

STUDIES = Path(__file__).parents[2] / "studies"
REFERENCES = Path(__file__).parents[1] / "references"


@cache
def wishbone():
    return read_geometry(STUDIES / "front-wishbone.toml")


@cache
def spatial_corner():
    return read_geometry(REFERENCES / "spatial-corner.toml")


def study(
    *,
    errors='"tie_rod.length" = { length = 0.5 }',
    alignment="",
    measures='[[measures]]\nof = "toe_deg"\n',
    method="spread",
    sides="mirrored",
    more="",
):
    """A study from the inside of its tables."""
    text = f'title = "t"\ngeometry = "g.toml"\nmethod = "{method}"\nseed = 3\nsides = "{sides}"\n{more}\n[errors]\n{errors}\n'
    if alignment:
        text += f"[alignment]\n{alignment}\n"
    return parse_study(text + measures, source="test")


def response(geometry, *, stage="after", stepless=False, **keys):
    return Response(geometry, study(**keys), stage=stage, stepless=stepless)
