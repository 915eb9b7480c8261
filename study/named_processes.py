"""The processes that a study names, each asked for once: what they stand for, and the looser ones above them."""

from collections.abc import Callable, Mapping
from typing import Any

from study.zone_entries import ZoneError, parse_zone
from study.zones import Zone

Processes = Callable[[str], Mapping[str, Any]]
Looser = Callable[[str], str | None]
_MOST_STEPS = 100


class NamedProcesses:
    """Asks for processes and remembers the answers.

    keys_of: name (NAME or NAME@NOMINAL) → keys of zone and law, None without a catalog; looser_of: name → the next looser
    one, written alike. resolved: {name: {"zone": keys, "looser": name or None}}, so that a study can be read again alike.
    """

    def __init__(self, keys_of: Processes | None, looser_of: Looser | None) -> None:
        self._keys_of, self._looser_of = keys_of, looser_of
        self.resolved: dict[str, dict[str, Any]] = {}

    def zone(self, name: str, **more: Any) -> Zone:
        """The zone of a process, with keys of the study's own (a shift) added. Raises ZoneError, or what keys_of raises."""
        if self._keys_of is None:
            raise ZoneError(f'process = "{name}" needs a catalog; name one, or write the zone out')
        return parse_zone({**self._entry(name)["zone"], **more}, process=name)

    def ladder(self) -> dict[str, Zone]:
        """Zone of the next looser process by the name of every process that was asked for, and of those above it."""
        found = {}
        for name in list(self.resolved):
            for _ in range(_MOST_STEPS):
                above = self.resolved[name]["looser"]
                if above is None or name in found:
                    break
                found[name] = parse_zone(self._entry(above)["zone"], process=above)
                name = above
        return found

    def _entry(self, name: str) -> dict[str, Any]:
        if name not in self.resolved:
            keys = {key: value for key, value in self._keys_of(name).items() if value is not None}
            above = self._looser_of(name) if self._looser_of is not None else None
            self.resolved[name] = {"zone": keys, "looser": above}
        return self.resolved[name]
