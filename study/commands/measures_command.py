"""`measures`: the list of measures with unit, sign and meaning."""

from study.commands.common import JsonOption, print_json, print_table


def run(as_json: JsonOption = False) -> None:
    """List every measure with its unit, sign and meaning."""
    from study.measures import KEYS

    if as_json:
        fields = ("key", "unit", "scope", "sign", "meaning")
        print_json([{name: getattr(info, name) for name in fields} for info in KEYS.values()])
        return
    columns = [("measure", "left"), ("unit", "left"), ("of", "left"), ("sign", "left"), ("meaning", "left")]
    rows = [[i.key, i.unit, "wheel" if i.scope == "side" else "axle", i.sign, i.meaning] for i in KEYS.values()]
    print_table("measures", columns, rows)
