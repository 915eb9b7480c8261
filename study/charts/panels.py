"""Several charts as one: side by side, each with its own scales and legend."""

from collections.abc import Sequence

from study.charts.tables import plain

_OWN = ("color", "fill", "strokeDash", "shape", "size")


def panels(specs: Sequence[dict], *, title: str, subtitle: str = "", columns: int = 2) -> dict:
    """One Vega-Lite specification of several that `fill` made; their descriptions are read one after the other.

    A single one is given back as it is, so that no frame stands around it.
    """
    if len(specs) == 1:
        return specs[0]
    parts, data = [], {}
    for number, spec in enumerate(specs):
        kept = {key: value for key, value in spec.items() if key not in ("$schema", "config", "datasets", "description")}
        parts.append(_renamed(kept, f"p{number}_"))
        data |= {f"p{number}_{name}": rows for name, rows in spec["datasets"].items()}
    own = dict.fromkeys(_OWN, "independent")
    return {
        "$schema": specs[0]["$schema"],
        "config": specs[0]["config"],
        "title": {"text": title, "subtitle": subtitle} if subtitle else {"text": title},
        "description": " ".join([f"{title}.", *(spec["description"] for spec in specs)]),
        "datasets": plain(data),
        "concat": parts,
        "columns": columns,
        "spacing": 34,
        "resolve": {"scale": own, "legend": own},
    }


def _renamed(node, prefix: str):
    """The specification with every named data set under its new name."""
    if isinstance(node, list):
        return [_renamed(item, prefix) for item in node]
    if not isinstance(node, dict):
        return node
    return {
        key: {"name": prefix + item["name"]} if key == "data" and "name" in item else _renamed(item, prefix)
        for key, item in node.items()
    }
