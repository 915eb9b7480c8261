"""One Altair chart per kind, filled many times.

Altair takes some 50 ms to put a layered chart together; a sheet has thirty of them. So each kind is made
once with named data and slots, and is then filled with the rows, orders and domains of each measure.
"""

import altair as alt

from study.charts import theme
from study.charts.tables import plain

_MARK = "@"


def slot(name: str) -> list[str]:
    """Stands in a template for a list (an order, a domain, a range) that `fill` puts in."""
    return [_MARK + name]


def rows(name: str) -> alt.NamedData:
    """The data called `name`, given to `fill`."""
    return alt.NamedData(name=name)


def amount(channel: type, field: str, **options):
    """A quantitative channel, spelled out: Altair is slow at taking its shorthand strings apart."""
    return channel(field=field, type="quantitative", **options)


def label(channel: type, field: str, **options):
    """A nominal channel."""
    return channel(field=field, type="nominal", **options)


def end(channel: type, field: str):
    """A second end (x2, y2): it takes its type from the first."""
    return channel(field=field)


def template(*layers) -> dict:
    """The layered chart as a dict, with the common look, still without data."""
    return alt.layer(*layers).configure(**theme.CONFIG).to_dict(validate=False)


def fill(
    made: dict,
    *,
    data: dict[str, list[dict]],
    slots: dict[str, list],
    title: str,
    subtitle: str = "",
    description: str,
    width: float,
    height: float,
    params: dict | None = None,
) -> dict:
    """A finished Vega-Lite specification. `description` becomes the label that is read aloud."""
    spec = _put(made, slots)
    spec["title"] = {"text": title, "subtitle": subtitle} if subtitle else {"text": title}
    spec |= {"description": description, "width": width, "height": height, "datasets": plain(data)}
    if params:
        spec["params"] = [{"name": name, "value": value} for name, value in params.items()]
    return spec


def _put(node, slots: dict[str, list]):
    if isinstance(node, dict):
        return {key: _put(item, slots) for key, item in node.items()}
    if isinstance(node, list):
        if len(node) == 1 and isinstance(node[0], str) and node[0].startswith(_MARK):
            return list(slots[node[0][1:]])
        return [_put(item, slots) for item in node]
    return node


def as_chart(spec: dict | None) -> alt.LayerChart | None:
    return None if spec is None else alt.LayerChart.from_dict(spec)
