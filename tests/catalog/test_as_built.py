"""Measured points: how a file is read, what is refused, and that a measurement stays as it was."""

from pathlib import Path

import pytest
from catalog_samples import ALL, MEASURES, SOLID_AXLE, geometry

from catalog import as_built
from catalog.as_built import AsBuiltError, parse_measured, read_measured
from catalog.errors import InputError
from catalog.geometry_file import read_geometry
from catalog.revisions import register
from catalog.store import Catalog
from catalog.toml_text import GeometryFileError

PLAIN = """# measured on the flat plate
upper_front_pivot, 120.4, 330.1, 274.8
right.upper_front_pivot, 120.1, -330.6, 275.3
lower_ball_joint, 5.2, 600.1, 120.3
jack_point, 1, 2, 3
"""


def measured(text, *, of=None):
    return parse_measured(text, source="car.csv", geometry=of or geometry())


def refused(text, *, of=None):
    with pytest.raises(InputError) as found:
        measured(text, of=of)
    assert len(str(found.value).splitlines()) == 1
    return str(found.value)


def slots(given):
    return [(p.side, p.point) for p in given.points]


# --- reading


def test_points_are_put_beside_their_places_on_the_drawing():
    given = measured(PLAIN)
    assert slots(given) == [
        ("left", "upper_front_pivot"), ("right", "upper_front_pivot"), ("left", "lower_ball_joint"),
    ]  # fmt: skip
    assert given.left_out == ("jack_point",) and given.text == PLAIN
    left, right, _ = given.points
    assert left.offset == (0.4, 0.1, -0.2) and right.offset == (0.1, -0.6, 0.3)
    assert right.nominal == (120, -330, 275)
    assert left.position_mm == pytest.approx(2 * (0.4**2 + 0.1**2 + 0.2**2) ** 0.5)


def test_a_header_may_give_the_side_and_any_order():
    text = "side;z;x;y;name\nright;275;120;-330,5;upper_front_pivot\n;275;120;330;upper_front_pivot\n"
    given = measured(text)
    assert slots(given) == [("right", "upper_front_pivot"), ("left", "upper_front_pivot")]
    assert given.points[0].offset == (0.0, -0.5, 0.0)


def test_axes_and_units_are_those_of_the_geometry_file():
    text = ALL["double-wishbone"].replace('"x-forward y-left z-up"', '"x-rear y-right z-up"')
    turned = "\n".join(_turned(line) for line in text.splitlines())
    given = measured("upper_front_pivot, -120.5, -330, 275", of=geometry(turned))
    assert given.points[0].offset == (0.5, 0.0, 0.0)


def _turned(line):
    """A line of points or centres turned half about z."""
    name, sign, values = line.partition(" = [")
    if not sign:
        return line
    x, y, z = (float(v) for v in values.rstrip("]").split(","))
    return f"{name} = [{-x}, {-y}, {z}]"


def test_a_header_in_other_units_than_the_geometry_is_refused():
    assert "gives in, but the geometry file says units = 'mm'" in refused("name,x[in],y[in],z[in]\nlower_ball_joint,1,2,3\n")


def test_the_shop_s_own_names_are_taken_back(tmp_path):
    head = 'points_file = "p.csv"\n[points_map]\nP1 = "upper_front_pivot"\nP9 = "right.upper_front_pivot"\n'
    lines = [line for line in ALL["double-wishbone"].splitlines() if not line.startswith("upper_front_pivot")]
    split = lines.index("[points]")
    (tmp_path / "g.toml").write_text("\n".join([*lines[:split], head, *lines[split:]]), encoding="utf-8")
    (tmp_path / "p.csv").write_text("P1,120,330,275\nP9,121,-331,276\n", encoding="utf-8")
    own = read_geometry(tmp_path / "g.toml")
    given = measured("P1,120,330,276\nP9,121,-331,276\nP2,0,0,0\n", of=own)
    assert slots(given) == [("left", "upper_front_pivot"), ("right", "upper_front_pivot")]
    assert [p.offset for p in given.points] == [(0, 0, 1), (0, 0, 0)] and given.left_out == ("P2",)


def test_links_of_a_solid_axle_have_no_side():
    given = measured("panhard_inner,-90,470,271\nwheel_centre,0,640,266\nright.wheel_centre,0,-640,266\n", of=geometry(SOLID_AXLE))
    assert slots(given) == [("left", "panhard_inner"), ("left", "wheel_centre"), ("right", "wheel_centre")]


@pytest.mark.parametrize("name", ALL)
def test_every_point_of_every_linkage_can_be_measured(name):
    own = geometry(ALL[name])
    names = [*own.left.points, "wheel_centre"]
    lines = [",".join([point, *map(str, as_built.nominal_of(own, "left", point))]) for point in names]
    given = measured("\n".join(lines), of=own)
    assert slots(given) == [("left", point) for point in names]
    assert all(p.position_mm == 0 for p in given.points)


# --- refusals


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("nothing,1,2,3\n", ("no row names a point of example-front", "upper_front_pivot")),
        ("", ("holds no line with name, x, y, z",)),
        (PLAIN + "left.upper_front_pivot,120,330,275\n", ("line 6", "again, after line 2")),
        ("upper_front_pivot,0.1204,0.3301,0.2748\n", ("line 1", "mm from the left upper_front_pivot", "units (mm)")),
        ("upper_front_pivot,120,-330,275\n", ("660 mm from the left", "side")),
        ("name,side,x,y,z\nupper_front_pivot,both,1,2,3\n", ("line 2", 'side \'both\' must be "left" or "right"')),
        ("name,side,x,y,z\nright.upper_front_pivot,left,1,2,3\n", ("says left in its column and right in its name",)),
        ("upper_front_pivot,120,abc,275\n", ("line 1", "'abc' is not a number")),
        ("upper_front_pivot,120,330,\n", ("is empty",)),
        ("upper_front_pivot,120,1e999,275\n", ("not a finite number",)),
        ("upper_front_pivot;120,5;330.5;275\n", ("decimal comma",)),
    ],
)
def test_a_file_that_cannot_be_taken_says_why(text, words):
    said = refused(text)
    assert "car.csv" in said
    for word in words:
        assert word in said


def test_a_file_that_cannot_be_read_says_why(tmp_path):
    for path, word in ((tmp_path / "no.csv", "does not exist"), (tmp_path, "is no ordinary file")):
        with pytest.raises(AsBuiltError, match=word):
            read_measured(path, geometry())
    (tmp_path / "a.csv").write_bytes(b"\xff\xfe\x00a")
    with pytest.raises(AsBuiltError, match="UTF-8"):
        read_measured(tmp_path / "a.csv", geometry())


def test_a_name_cannot_steer_the_terminal():
    said = refused("name,side,x,y,z\n\x1b[2Jupper,\x1b[31m,1,2,3\n")
    assert "\x1b" not in said
    with pytest.raises(GeometryFileError) as found:
        measured("lower_ball_joint,\x1b[2J,1,2\n")
    assert "\x1b" not in str(found.value)


# --- keeping


@pytest.fixture
def kept(tmp_path):
    """A catalog with one revision, and that revision."""
    catalog = Catalog(tmp_path / "a.duckdb")
    with catalog.write() as con:
        revision = register(con, geometry(), measures=MEASURES, by="ann", why="first")
    return catalog, revision


def test_a_measurement_stays_as_it_was(kept):
    catalog, revision = kept
    with catalog.write() as con:
        made = as_built.add(con, revision, measured(PLAIN), car=" No. 3 ", by="bob", note="wet")
        assert made.is_new and (made.id, made.car, made.geometry, made.note) == (1, "No. 3", "example-front@1", "wet")
        again = as_built.add(con, revision, measured(PLAIN.replace("120.4,", "120.40,")), car="No. 3", by="eve")
        assert not again.is_new and (again.id, again.by) == (1, "bob")
        other = as_built.add(con, revision, measured(PLAIN), car="No. 4", by="bob")
        later = as_built.add(con, revision, measured(PLAIN.replace("120.4", "120.3")), car="No. 3", by="bob")
        assert (other.id, later.id) == (2, 3)
        text = PLAIN.replace("upper_front_pivot, 120.4", "upper_front_pivot, 120")
        changed = geometry(ALL["double-wishbone"].replace("[120, 330, 275]", "[121, 330, 275]"))
        second = register(con, changed, measures=MEASURES, by="ann", why="moved")
        as_built.add(con, second, measured(text, of=changed), car="No. 5", by="bob")
    with catalog.read() as con:
        found = as_built.list_as_built(con)
        assert [(e.id, e.geometry, e.car) for e in found] == [
            (1, "example-front@1", "No. 3"), (2, "example-front@1", "No. 4"), (3, "example-front@1", "No. 3"),
            (4, "example-front@2", "No. 5"),
        ]  # fmt: skip
        assert found[0].points == measured(PLAIN).points
        assert as_built.list_as_built(con, geometry="nothing") == []
        assert con.execute("SELECT text FROM kept.as_built WHERE id = 1").fetchone() == (PLAIN,)


def test_the_view_gives_deviations_and_positions(kept):
    catalog, revision = kept
    with catalog.write() as con:
        as_built.add(con, revision, measured(PLAIN), car="No. 3", by="bob")
        query = "SELECT side, point, dx_mm, dy_mm, dz_mm, position_mm FROM as_built_points WHERE car = 'No. 3'"
        rows = {row[:2]: row[2:] for row in con.execute(query).fetchall()}
    assert len(rows) == 3
    for point in measured(PLAIN).points:
        assert rows[point.side, point.point] == pytest.approx((*point.offset, point.position_mm), abs=1e-9)


@pytest.mark.parametrize(
    ("change", "word"), [({"car": " "}, "give the car a name"), ({"car": "x" * 101}, "1 to 100"), ({"note": "x" * 2001}, "2000")]
)
def test_names_and_notes_have_bounds(kept, change, word):
    catalog, revision = kept
    with catalog.write() as con, pytest.raises(AsBuiltError, match=word):
        as_built.add(con, revision, measured(PLAIN), **{"car": "a", "by": "b"} | change)
    with catalog.read() as con, pytest.raises(AsBuiltError, match="measurement 1 is not in the catalog"):
        as_built.get(con, 1)


def test_a_saved_catalog_still_gives_its_measurement(tmp_path):
    path = tmp_path / "v0005.duckdb"
    path.write_bytes((Path(__file__).parents[1] / "old_catalogs" / path.name).read_bytes())
    with Catalog(path).read() as con:
        [found] = as_built.list_as_built(con)
    assert (found.geometry, found.car, [p.offset for p in found.points]) == (
        "example-front@1", "No. 1", [(0.5, 0.0, 0.0), (0.0, -0.5, 0.0)],
    )  # fmt: skip
