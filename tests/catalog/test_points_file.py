"""Points that a geometry file takes from a CSV beside it: formats, the shop's names, what is left out, refusals."""

import json
import os

import pytest
from catalog_samples import ALL, FIVE_LINK, SOLID_AXLE, WISHBONES, geometry
from hypothesis import given
from hypothesis import strategies as st

from catalog.geometry import from_record, to_record
from catalog.geometry_file import GeometryFileError, json_schema, parse_geometry, read_geometry
from catalog.revisions import find, load, register
from catalog.store import Catalog


def split_sample(text):
    """(a sample without its points and wheel centre, its points by trade name) of a file that lists them."""
    read = geometry(text)
    kept, table = [], ""
    for line in text.splitlines():
        table = line.strip("[]") if line.startswith("[") else table
        listed = "= [" in line and (table == "points" or table.startswith("links.") or line.startswith("centre"))
        if not listed and not line.startswith("[links."):
            kept.append(line)
    points = {**read.left.points, "wheel_centre": read.left.wheel.centre}
    return 'points_file = "points.csv"\n' + "\n".join(kept) + "\n", points


def written(points, *, mark=";", decimal=",", header=True, ends="\n", names=None):
    lines = ["name;x;y;z".replace(";", mark)] if header else []
    for name, point in points.items():
        lines.append(mark.join([(names or {}).get(name, name), *(f"{v:.3f}".replace(".", decimal) for v in point)]))
    return ends.join(lines) + ends


def read(tmp_path, text, csv, *, name="points.csv"):
    (tmp_path / "car.toml").write_text(text, encoding="utf-8")
    if csv is not None:
        (tmp_path / name).write_bytes(csv if isinstance(csv, bytes) else csv.encode())
    return read_geometry(tmp_path / "car.toml")


def refusal(tmp_path, text, csv, **named):
    with pytest.raises(GeometryFileError) as found:
        read(tmp_path, text, csv, **named)
    message = str(found.value)
    assert message.startswith("car.toml: ") and len(message.splitlines()) == 1
    return message


@pytest.mark.parametrize("linkage", ALL)
def test_every_linkage_can_take_all_its_points_from_a_csv(tmp_path, linkage):
    text, points = split_sample(ALL[linkage])
    made, listed = read(tmp_path, text, written(points)), geometry(ALL[linkage])
    assert (made.left, made.right) == (listed.left, listed.right)
    assert set(made.links) == set(listed.links) and made.shop_names == {} and made.ignored_points == ()
    if linkage in ("double-wishbone", "strut", "semi-trailing-arm"):
        assert made.content_hash == listed.content_hash


@given(
    mark=st.sampled_from([",", ";", "\t"]),
    comma=st.booleans(),
    header=st.sampled_from(["", "name;x;y;z", "POINT; X [mm]; Y [mm]; Z [mm]", "z;comment;x;y;name"]),
    ends=st.sampled_from(["\n", "\r\n", "\r"]),
    bom=st.booleans(),
    more=st.lists(st.sampled_from(["# a comment; with, marks", "", "  ", "trailing", "quoted"]), max_size=3),
    order=st.randoms(use_true_random=False),
)
def test_the_way_a_table_is_written_does_not_change_the_geometry(
    tmp_path_factory, mark, comma, header, ends, bom, more, order
):
    text, points = split_sample(FIVE_LINK)
    names = list(points)
    order.shuffle(names)
    decimal = "," if comma and mark != "," else "."
    lines = [header.replace(";", mark)] if header else []
    for name in names:
        x, y, z = (f"{v:.2f}".replace(".", decimal) for v in points[name])
        shown = f'"{name}"' if "quoted" in more else name
        cells = [z, "free text", x, y, shown] if header.startswith("z") else [shown, x, y, z]
        lines.append(f" {mark} ".join(cells) + (mark * 2 if "trailing" in more else ""))
    for line in more:
        lines.insert(order.randint(0, len(lines)), line if line[:1] in "# " else "")
    csv = (b"\xef\xbb\xbf" if bom else b"") + ends.join(lines).encode()
    made = read(tmp_path_factory.mktemp("csv"), text, csv)
    listed = geometry(FIVE_LINK)
    assert dict(made.left.points) == dict(listed.left.points)
    plain = read(tmp_path_factory.mktemp("csv"), text, written(points, mark=",", decimal="."))
    assert made.content_hash == plain.content_hash and made.points_text == csv.decode("utf-8-sig")


SHOP = {"upper_front_pivot": "P-101", "lower_ball_joint": "Kugel außen", "wheel_centre": "R1"}
MAP = "[points_map]\n" + "".join(f'"{shop}" = "{name}"\n' for name, shop in SHOP.items())


def test_the_shops_names_and_the_table_itself_stay_with_the_record(tmp_path):
    text, points = split_sample(WISHBONES)
    csv = written(points, names=SHOP) + "seat rail;1,0;2,0;3,0\n"
    made = read(tmp_path, text + MAP, csv)
    assert made.shop_names == SHOP and made.ignored_points == ("seat rail",) and made.points_text == csv
    back = from_record(json.loads(json.dumps(to_record(made))), text=made.text)
    assert back == made and back.content_hash == made.content_hash
    with Catalog(tmp_path / "c.duckdb").write() as con:
        register(con, made, measures={}, by="tester", why="")
        (tmp_path / "points.csv").unlink()
        assert load(con, find(con, made.name)) == made


def test_what_is_content_of_a_table_and_what_is_not(tmp_path):
    text, points = split_sample(WISHBONES)
    plain = read(tmp_path, text + MAP, written(points, names=SHOP)).content_hash
    longer = read(tmp_path, text + MAP, "# checked\n" + written(points, names=SHOP, mark="\t") + "bolt\t1\t2\t3\n")
    assert longer.content_hash == plain
    moved = read(tmp_path, text + MAP, written({**points, "tie_rod_outer": (70, 580, 150.001)}, names=SHOP))
    assert moved.content_hash != plain
    renamed = read(tmp_path, (text + MAP).replace("P-101", "P-99"), written(points, names=SHOP).replace("P-101", "P-99"))
    assert renamed.content_hash != plain


def test_records_from_before_points_files_keep_their_hash_and_come_back():
    made = geometry()
    record = {k: v for k, v in to_record(made).items() if k not in ("shop_names", "ignored_points", "points_text")}
    assert from_record(record, text=made.text) == made
    assert from_record(record, text=made.text).content_hash == made.content_hash


def test_points_may_stand_partly_in_the_table_and_partly_in_the_file(tmp_path):
    csv = "L1,-60,280,160\ntoe_outer,-90,580,165\nlower_rear_inner,-170,265,135\nR,0,640,265\nx,1,2,3\n"
    text = FIVE_LINK.replace("[links.toe]\ninner = [-60, 280, 160]\nouter = [-90, 580, 165]\n", "")
    text = text.replace("inner = [-170, 265, 135]\n", "").replace("centre = [0, 640, 265]\n", "")
    text = 'points_file = "points.csv"\n' + text + '[points_map]\nL1 = "toe_inner"\nR = "wheel_centre"\n'
    made, listed = read(tmp_path, text, csv), geometry(FIVE_LINK)
    assert made.left == listed.left and made.ignored_points == ("x",)
    assert made.shop_names == {"toe_inner": "L1", "wheel_centre": "R"} and made.links == listed.links


def test_rows_of_the_other_side_carry_a_prefix(tmp_path):
    text, points = split_sample(WISHBONES)
    both = {f"left.{name}": point for name, point in points.items()}
    both |= {"right.tie_rod_inner": (61, -270, 150), "W2": (0, -640, 265), "right.seat": (1, 2, 3)}
    made = read(tmp_path, text + '[points_map]\nW2 = "right.wheel_centre"\n', written(both))
    assert made.right.points["tie_rod_inner"] == (61.0, -270.0, 150.0) and not made.right_is_mirror
    assert made.shop_names == {"right.wheel_centre": "W2"} and made.ignored_points == ("right.seat",)


def test_a_table_of_the_whole_car_gives_the_links_that_the_file_names(tmp_path):
    text, points = split_sample(SOLID_AXLE)
    more = {**points, "damper_inner": (1, 2, 3), "damper_outer": (4, 5, 6)}
    assert "has 5 links" in refusal(tmp_path, text, written(more))
    ignoring = 'points_ignore = ["damper_inner", "damper_outer"]\n' + text
    assert read(tmp_path, ignoring, written(more)).ignored_points == ("damper_inner", "damper_outer")
    named = text + "".join(f"[links.{name}]\n" for name in ("left_lower", "right_lower", "upper", "panhard"))
    made = read(tmp_path, named, written(more))
    assert made.links == ("left_lower", "right_lower", "upper", "panhard")
    assert made.ignored_points == ("damper_inner", "damper_outer")


def test_axes_units_and_side_of_the_file_hold_for_its_table(tmp_path):
    _, points = split_sample(WISHBONES)
    text, _ = split_sample(WISHBONES)
    text = text.replace("x-forward y-left z-up", "x-rear y-right z-up")
    text = text.replace('units = "mm"', 'units = "m"').replace("loaded_radius = 265", "loaded_radius = 0.265")
    turned = {name: (-x / 1000, -y / 1000, z / 1000) for name, (x, y, z) in points.items()}
    csv = written(turned, header=False)
    assert read(tmp_path, text, csv).left == geometry().left
    assert "gives mm, but" in refusal(tmp_path, text, "name;x [mm];y;z\n" + csv)


TEXT, POINTS = split_sample(WISHBONES)
GOOD = written(POINTS, header=False, mark=",", decimal=".")
SEMI = written(POINTS, header=False)
REFUSED = {
    "no number": (TEXT, SEMI.replace("330,000", "33O,0", 1), ["points.csv", "line 1, column 3 (y)", "'33O,0'", "number"]),
    "empty": (TEXT, SEMI.replace(";330,000", ";", 1), ["line 1, column 3 (y)", "is empty"]),
    "thousands": (TEXT, SEMI.replace("330,000", "1.330,0", 1), ["line 1", "'1.330,0'", "thousands"]),
    "two marks": (TEXT, SEMI.replace("560,000", "560.000", 1), ["decimal comma", "decimal point", "line 3, column 3"]),
    "comma in commas": (TEXT, SEMI.replace(";", ","), ["line 1, 'upper_front_pivot'", "7 columns", "semicolons"]),
    "quoted comma": (TEXT, GOOD.replace("330.000", '"330,0"', 1), ["line 1, column 3", "decimal comma", "semicolons"]),
    "not finite": (TEXT, GOOD.replace("330.000", "1e999", 1), ["line 1, column 3 (y), '1e999'", "finite"]),
    "infinite": (TEXT, GOOD.replace("330.000", "inf", 1), ["'inf'", "not a number"]),
    "short row": (TEXT, GOOD.replace(",275.000", "", 1), ["line 1", "3 columns", "complete it"]),
    "spaces": (TEXT, GOOD.replace(",", " "), ["no line with name, x, y, z", "semicolons"]),
    "nothing": (TEXT, "# only a comment\n\n", ["no line with"]),
    "header": (TEXT, "Punkt,quer,längs,hoch\n" + GOOD, ["line 1", "'Punkt, quer, längs, hoch'", "header"]),
    "header twice": (TEXT, "name,x,y,x,z\n" + GOOD, ["line 1", "'x' twice"]),
    "open quotes": (TEXT, GOOD + '"seat,1,2,3\n', ["line 10", "quotes"]),
    "twice": (TEXT, GOOD + "tie_rod_inner,1,2,3\n", ["line 10, 'tie_rod_inner'", "again", "line 7"]),
    "twice by map": (TEXT + '[points_map]\nB = "tie_rod_inner"\n', GOOD + "B,1,2,3\n", ["line 10, 'B'", "tie_rod_inner"]),
    "twice in both": (TEXT.replace("[points]", "[points]\ntie_rod_inner = [1, 2, 3]"), GOOD,
                      ["line 7, 'tie_rod_inner'", "points.tie_rod_inner = [1.0, 2.0, 3.0]"]),
    "centre in both": (TEXT.replace("[wheel]", "[wheel]\ncentre = [0, 640, 265]"), GOOD, ["wheel.centre = [0.0"]),
    "unknown shop name": (TEXT + '[points_map]\n"P-11" = "tie_rod_inner"\n', GOOD + "P-111,1,2,3\nP-112,1,2,3\n",
                          ["points_map: 'P-11'", "no row of points.csv", "did you mean 'P-11"]),
    "unknown trade name": (TEXT + '[points_map]\nA = "tie_rod_iner"\n', GOOD + "A,1,2,3\n",
                           ["points_map 'A' = 'tie_rod_iner'", "'tie_rod_inner'"]),
    "unknown row left out": ('points_ignore = ["seet"]\n' + TEXT, GOOD + "seat,1,2,3\n", ["points_ignore: 'seet'", "'seat'"]),
    "mapped and left out": ('points_ignore = ["A"]\n' + TEXT + '[points_map]\nA = "tie_rod_inner"\n', GOOD + "A,1,2,3\n",
                            ["points_ignore: 'A'", "points_map"]),
    "missing point": (TEXT, GOOD.replace("tie_rod_outer", "TIE_ROD_OUTER"),
                      ["points.tie_rod_outer is missing", "left out: 'TIE_ROD_OUTER'"]),
    "missing centre": (TEXT, GOOD.replace("wheel_centre", "hub"), ["wheel.centre is missing", "'hub'"]),
    "wrong place": (TEXT, GOOD.replace("570.", "5").replace("580.000", "-580"),
                    ["points.tie_rod_outer = [70.0, -580.0", "points.csv line 8, 'tie_rod_outer'", "across"]),
    "wheel wrong": (TEXT, GOOD.replace("640.000", "-640"), ["wheel.centre (points.csv line 9", "wrong side"]),
    "map alone": (WISHBONES + '[points_map]\nA = "b"\n', None, ["points_map", "points_file"]),
    "absolute": (TEXT.replace("points.csv", "/etc/hostname"), None, ["'/etc/hostname'", "folder of the geometry"]),
    "not there": (TEXT.replace("points.csv", "p.csv"), None, ["points_file = 'p.csv'", "does not exist"]),
    "no name": (TEXT.replace("points.csv", " "), None, ["points_file = ' '"]),
    "zero in name": (TEXT.replace("points.csv", "a\\u0000b"), None, ["points_file", "cannot be read"]),
    "long name": (TEXT.replace("points.csv", "a" * 5000), None, ["points_file", "cannot be read"]),
    "folder": (TEXT.replace("points.csv", "."), None, ["no ordinary file"]),
    "binary": (TEXT, b"\x7fELF\0\0\0,,,", ["binary or UTF-16"]),
    "utf-16": (TEXT, GOOD.encode("utf-16"), ["binary or UTF-16", "UTF-8"]),
    "latin-1": (TEXT, GOOD.encode() + "Träger,1,2,3".encode("latin-1"), ["line 10 is not UTF-8"]),
    "long": (TEXT, "#" * 1_000_001, ["longer than 1 MB"]),
    "long row name": (TEXT, GOOD + "a" * 300 + ",1,2,3\n", ["line 10", "200 letters"]),
}  # fmt: skip


@pytest.mark.parametrize("case", REFUSED)
def test_refusals_name_file_line_column_and_value(tmp_path, case):
    text, csv, wanted = REFUSED[case]
    message = refusal(tmp_path, text, csv)
    assert [part for part in wanted if part not in message] == [], message


def test_links_that_run_in_a_circle_pipes_and_devices_are_refused(tmp_path):
    (tmp_path / "points.csv").symlink_to("other.csv")
    (tmp_path / "other.csv").symlink_to("points.csv")
    assert "cannot be read" in refusal(tmp_path, TEXT, None)
    (tmp_path / "points.csv").unlink()
    os.mkfifo(tmp_path / "points.csv")
    assert "no ordinary file" in refusal(tmp_path, TEXT, None)
    (tmp_path / "points.csv").unlink()
    (tmp_path / "points.csv").symlink_to("/dev/zero")
    assert "no ordinary file" in refusal(tmp_path, TEXT, None)


def test_a_table_in_another_folder_is_found_from_the_geometry_file(tmp_path):
    (tmp_path / "cad").mkdir()
    text = TEXT.replace("points.csv", "cad/points.csv")
    assert read(tmp_path, text, GOOD, name="cad/points.csv").left == geometry().left


def test_a_text_without_a_folder_takes_no_points_file():
    with pytest.raises(GeometryFileError, match="no folder"):
        parse_geometry(TEXT, source="car.toml")
    assert {"points_file", "points_map", "points_ignore"} <= set(json_schema()["properties"])


def test_unused_rows_may_hold_anything(tmp_path):
    csv = "Export of 3 points\n" + GOOD + "seat,n/a,,\nnote\n,1,2,3\nseat,4,5,6\n"
    assert read(tmp_path, TEXT, csv).ignored_points == ("Export of 3 points", "seat", "note", "(line 13)")


def test_names_out_of_a_file_cannot_steer_a_terminal_or_fill_it():
    with pytest.raises(GeometryFileError) as found:
        geometry(WISHBONES + '"a\\nb\\u001b[2J" = 1\n' + '"' + "x" * 50_000 + '" = 1\n')
    lines = str(found.value).splitlines()
    assert len(lines) == 2 and all(line.isprintable() and len(line) <= 1000 for line in lines)


def test_a_hostile_table_is_refused_in_little_time(tmp_path):
    pairs = "".join(f"x{i}_inner;1;2;3\nx{i}_outer;4;5;{i}\n" for i in range(15_000))
    assert "has 15000 links" in refusal(tmp_path, split_sample(FIVE_LINK)[0], pairs)
    assert "line 1, " in refusal(tmp_path, TEXT, "," * 500_000)
    assert "10000 letters" in refusal(tmp_path, TEXT, GOOD + "9" * 200_000)
