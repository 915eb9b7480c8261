"""`compare`: geometries side by side, and how the same shop would build each."""

from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, clean, geometry_named, number, print_json, print_table


class CompareError(InputError):
    """A comparison that cannot be made."""


def run(
    geometries: Annotated[list[str], typer.Argument(help="Two or more geometry files, or NAME or NAME@REV of the catalog.")],
    study: Annotated[int | None, typer.Option(help="Build each with the errors, alignment and measures of this study, on the same draws.", show_default=False)] = None,
    chart: Annotated[Path | None, typer.Option(help="Draw their bump, roll and rack curves over each other into this file.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Put geometries side by side: measures at design, curves, and with a study which one forgives more."""
    if len(geometries) < 2:
        raise CompareError("compare: name two geometries or more")
    if chart is not None:
        from study.chart_file import ending_of

        ending_of(chart)
    records = {}
    for name in geometries:
        record, label = geometry_named(name, catalog)
        if label in records:
            raise CompareError(f"compare: {clean(label)} is named twice")
        records[label] = record
    out = {"geometries": list(records), "measures": _measures(records)}
    if study is not None:
        out |= _built(records, study, catalog)
    if chart is not None:
        out["chart"] = [str(path) for path in _draw(records, chart)]
    if as_json:
        print_json(out)
        return
    _print(out, list(records))


def _measures(records):
    from study.nominal import evaluate

    found = {label: evaluate(record) for label, record in records.items()}
    rows = []
    for side in ("left", "right", "axle"):
        keys = dict.fromkeys(key for values in found.values() for key in values[side])
        for key in keys:
            values = {label: f[side].get(key) for label, f in found.items()}
            if any(v is not None for v in values.values()):
                rows.append({"side": side, "measure": key, "values": values})
    return rows


def _built(records, number_of_study, catalog):
    from catalog.store import Catalog
    from study.compare import against_first, build_alike
    from study.dossier import load_dossier

    asked = load_dossier(Catalog(catalog), number_of_study).asked
    built = build_alike(records, asked)
    limited = any(measure.limits for measure in asked.measures)
    rows = [
        {"measure": m.name, "limits": m.limits, "sd": {b.label: _sd(b.values[i]) for b in built}} for i, m in enumerate(asked.measures)
    ]
    gaps = [
        {"geometry": a.label, "good_share_difference": list(a.good) if limited else None,
         "sd_ratio": {m.name: [_finite(v) for v in a.sd_ratio[i]] for i, m in enumerate(asked.measures)}}
        for a in against_first(built, seed=asked.seed)
    ]  # fmt: skip
    shares = {b.label: float(b.good.mean()) if limited else None for b in built}
    return {"study": number_of_study, "builds": len(built[0].good), "good_share": shares, "spread": rows, "against_first": gaps}


def _sd(values):
    import numpy as np

    return _finite(np.nanstd(values)) if np.isfinite(values).any() else None


def _finite(value):
    value = float(value)
    return value if value == value and abs(value) != float("inf") else None


def _print(out, labels):
    from study.measures import KEYS

    rows = out["measures"]
    same = {(r["measure"], tuple(r["values"].values())) for r in rows if r["side"] == "left"}
    columns = [("measure", "left"), ("side", "left"), *((label, "right") for label in labels), ("unit", "left")]
    lines = [
        [r["measure"], "" if r["side"] != "axle" else "axle", *(number(r["values"][label]) for label in labels), KEYS[r["measure"]].unit]
        for r in rows if not (r["side"] == "right" and (r["measure"], tuple(r["values"].values())) in same)
    ]  # fmt: skip
    print_table("at design", columns, lines)
    if "study" in out:
        _print_built(out, labels)
    for path in out.get("chart", ()):
        print(f"chart: {path}")


def _print_built(out, labels):
    columns = [("measure", "left"), *((f"sd {label}", "right") for label in labels), *((f"{label}\nover {labels[0]}", "right") for label in labels[1:])]
    rows = []
    for row in out["spread"]:
        ratios = [_interval(gap["sd_ratio"][row["measure"]]) for gap in out["against_first"]]
        rows.append([row["measure"], *(number(row["sd"][label], 3) for label in labels), *ratios])
    print_table(f"\nthe same shop builds each: {out['builds']} builds on the same draws, study {out['study']}", columns, rows)
    for label, share in out["good_share"].items():
        if share is not None:
            print(f"{clean(label)}: {100 * share:.1f} % of builds inside all limits")
    for gap in out["against_first"]:
        if gap["good_share_difference"]:
            d, low, high = (100 * v for v in gap["good_share_difference"])
            words = "forgives more" if low > 0 else "forgives less" if high < 0 else "the draws cannot tell them apart"
            print(f"{clean(gap['geometry'])} against {clean(labels[0])}: {d:+.1f} points of good share (95 %: {low:+.1f} to {high:+.1f}): {words}")


def _interval(ratio):
    value, low, high = ratio
    return "–" if value is None else f"{value:.2f} ({low:.2f}–{high:.2f})"


def _draw(records, path):
    """Bump, roll and rack curves of all of them in one file."""
    from study.chart_file import write_chart
    from study.charts import panels
    from study.charts.overlay import overlay_spec
    from study.compare import curves_of

    rows = curves_of(records)
    kinds = dict.fromkeys((row["axis"], row["key"]) for row in rows)
    specs = [overlay_spec(rows, axis, key) for axis, key in kinds]
    return [write_chart(panels(specs, title=f"Compared: {', '.join(records)}"), path)]
